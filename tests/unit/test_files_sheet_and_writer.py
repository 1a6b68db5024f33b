"""The bench sheet, and spectra written as text."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from tinctor.errors import InputError, UnreadableFileError
from tinctor.files import apply_sample_sheet, read_delimited, read_sample_sheet, write_delimited
from tinctor.spectrum import Spectrum

SPECTRA = [Spectrum(i, [400, 402], [0.1, 0.2]) for i in ("a", "007")]


@pytest.mark.parametrize(
    "text",
    [
        "id;dilution_factor;path_length_cm\na;50;0,5\n007;1;1\n",
        "\ufeffid;dilution_factor;path_length_cm\r\na;50;0.5\r\n007;1;1\r\n\r\n",
        'id,path_length_cm,dilution_factor\n007,1,1\n"a","0.5",50\n',
        'id,path_length_cm,dilution_factor\n007,1,1\na,"0,5",50\n',
        "id\tpath_length_cm\tdilution_factor\na\t.5\t5e1\n007\t1\t1\n",
    ],
)
def test_the_sheet_gives_each_sample_its_cell_and_dilution(tmp_path: Path, text: str) -> None:
    (tmp_path / "sheet.csv").write_bytes(text.encode())
    found = apply_sample_sheet(SPECTRA, read_sample_sheet(tmp_path / "sheet.csv"))
    assert [(s.id, s.dilution_factor, s.path_length_cm) for s in found] == [("a", 50.0, 0.5), ("007", 1.0, 1.0)]
    assert np.array_equal(found[0].absorbance, SPECTRA[0].absorbance)


@pytest.mark.parametrize(
    ("text", "code", "words"),
    [
        ("id,colour\na,red\n", "sheet-columns", "'id', 'colour'"),
        ("sample,dilution_factor\na,1\n", "sheet-columns", "expected the columns id and any of path_length_cm"),
        ("id,dilution_factor,dilution_factor\na,1,1\n", "sheet-columns", "each once"),
        ("id,dilution_factor\na,x\nb,1\nc,\n", "not-a-number", "'x' [at sheet.csv, line 2, column 2]"),
        ("id;dilution_factor;path_length_cm\na;1,5;1.0\n", "not-a-number", "same decimal mark"),
        ("id,dilution_factor\na,1\na,2\n", "duplicate-id", "'a' stands in line 2 and again in line 3"),
        ("id,dilution_factor\n,1\n", "empty-id", "line 2"),
        ("id,dilution_factor\na\n", "ragged", "expected 2 columns"),
        ("id,dilution_factor\n", "no-samples", "one line for each sample"),
        ("", "empty-file", "empty"),
    ],
)
def test_sheets_that_cannot_be_used(tmp_path: Path, text: str, code: str, words: str) -> None:
    (tmp_path / "sheet.csv").write_text(text, encoding="utf-8")
    with pytest.raises(UnreadableFileError) as caught:
        read_sample_sheet(tmp_path / "sheet.csv")
    assert caught.value.faults[0].code == code
    assert words in str(caught.value)


def test_every_fault_of_a_sheet_is_told(tmp_path: Path) -> None:
    (tmp_path / "sheet.csv").write_text("id,dilution_factor\na,x\nb,1\nc,\n", encoding="utf-8")
    with pytest.raises(UnreadableFileError) as caught:
        read_sample_sheet(tmp_path / "sheet.csv")
    assert [fault.path for fault in caught.value.faults] == ["sheet.csv, line 2, column 2", "sheet.csv, line 4, column 2"]


def test_a_sheet_that_is_not_there_is_refused(tmp_path: Path) -> None:
    with pytest.raises(UnreadableFileError, match="cannot be opened"):
        read_sample_sheet(tmp_path / "none.csv")


def test_sheet_and_spectra_must_name_the_same_samples() -> None:
    with pytest.raises(InputError) as caught:
        apply_sample_sheet(SPECTRA, {"a": {}, "b": {}})
    assert "no line for '007'" in str(caught.value)
    assert "no spectrum for 'b'" in str(caught.value)


def test_values_that_cannot_be_are_refused_sample_by_sample() -> None:
    with pytest.raises(InputError) as caught:
        apply_sample_sheet(SPECTRA, {"a": {"dilution_factor": 0.5}, "007": {"path_length_cm": 0.0}})
    assert [fault.path for fault in caught.value.faults] == ["sample sheet, 'a'", "sample sheet, '007'"]
    assert "at least 1, found 0.5" in caught.value.faults[0].message


@pytest.mark.parametrize(
    ("spectra", "options", "words"),
    [
        ([], {}, "at least one spectrum"),
        ([SPECTRA[0], Spectrum("b", [400, 403], [0.1, 0.2])], {}, "share their wavelengths"),
        ([SPECTRA[0], Spectrum("b", [400, 402.0000001], [0.1, 0.2])], {}, "share their wavelengths"),
        (SPECTRA, {"decimal": "comma"}, "semicolon or tab"),
        (SPECTRA, {"layout": "two-columns"}, "holds one spectrum, found 2"),
        (SPECTRA, {"layout": "plates"}, "must be one of two-columns, columns, rows"),
        (SPECTRA, {"delimiter": "pipe"}, "must be one of comma"),
        ([SPECTRA[0], SPECTRA[0]], {}, "different ids"),
        ([Spectrum("a", [400, 402], [0.1, 0.2], dilution_factor=2)], {}, "no place for the path length and dilution"),
        ([Spectrum("a", [400, 402], [0.1, 0.2], absorbance_u=[1, 1])], {"layout": "rows"}, "no place for absorbance_u"),
        ([Spectrum("a ", [400, 402], [0.1, 0.2])], {}, "begins or ends with a blank"),
        ([Spectrum("Abs", [400, 402], [0.1, 0.2])], {}, "name of the quantity"),
        ([Spectrum("a", [400], [0.1])], {}, "2 to 20000 wavelengths"),
    ],
)
def test_what_would_not_read_back_is_not_written(spectra: list[Spectrum], options: dict[str, str], words: str) -> None:
    with pytest.raises(InputError, match=words):
        write_delimited(spectra, **options)


def test_what_is_written() -> None:
    spectra = [Spectrum("a;b", [400, 402.5], [0.1, -1e-7])]
    assert write_delimited(spectra, "two-columns", "semicolon", "comma") == 'wavelength_nm;"a;b"\n400,0;0,1\n402,5;-1e-07\n'
    rows = write_delimited([Spectrum("a", [400, 402], [0.1, 0.2], path_length_cm=0.5, dilution_factor=50)], "rows", "tab")
    assert rows.splitlines()[1] == "a\t0.5\t0.0\t50.0\t0.0\t0.1\t0.2"
    assert np.array_equal(read_delimited(rows.encode(), "x").spectra[0].absorbance, [0.1, 0.2])
