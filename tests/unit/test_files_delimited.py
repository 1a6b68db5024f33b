"""Delimited text: read for certain, or refused with the place and the way out."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from tinctor.errors import InputError, UnreadableFileError
from tinctor.files import (
    FileReading,
    ReadOptions,
    apply_sample_sheet,
    read_delimited,
    read_sample_sheet,
    read_spectra,
    write_delimited,
)
from tinctor.spectrum import Spectrum

POINT = "wavelength_nm;a;b\n400;0.213;1.5e-2\n402.5;0.220;-0.001\n405;0.25;0\n"


def read(text: str | bytes, source: str = "run.csv", **options: str) -> FileReading:
    return read_delimited(text.encode() if isinstance(text, str) else text, source, ReadOptions(**options))


def refusal(text: str | bytes, **options: str) -> str:
    with pytest.raises(UnreadableFileError) as caught:
        read(text, **options)
    return f"{caught.value.faults[0].code}: {caught.value}"


@pytest.mark.parametrize("bom", [b"", b"\xef\xbb\xbf"], ids=["plain", "byte order mark"])
@pytest.mark.parametrize("ending", ["\n", "\r\n"], ids=["LF", "CRLF"])
@pytest.mark.parametrize(
    ("delimiter", "decimal"),
    [("comma", "point"), ("semicolon", "point"), ("semicolon", "comma"), ("tab", "point"), ("tab", "comma")],
)
def test_every_dialect_of_columns(delimiter: str, decimal: str, ending: str, bom: bytes) -> None:
    mark = {"comma": ",", "semicolon": ";", "tab": "\t"}[delimiter]
    text = POINT.replace(";", mark)
    if decimal == "comma":
        text = text.replace(".", ",")
    reading = read(bom + text.replace("\n", ending).encode())
    assert (reading.layout, reading.delimiter, reading.decimal) == ("columns", delimiter, decimal)
    assert [s.id for s in reading.spectra] == ["a", "b"]
    assert reading.spectra[0].wavelength_nm.tolist() == [400.0, 402.5, 405.0]
    assert reading.spectra[1].absorbance.tolist() == [0.015, -0.001, 0.0]


def test_one_spectrum_in_two_columns_with_and_without_header() -> None:
    assert read("400,0.1\n402,0.2\n", "vat-3.txt").spectra[0].id == "vat-3"
    assert read("nm,Abs\n400,0.1\n402,0.2\n", "vat-3.txt").spectra[0].id == "vat-3"
    assert read("nm,sample 7\n400,0.1\n402,0.2\n\n\n").spectra[0].id == "sample 7"
    assert read('nm,"a, b"\n400,0.1\n402,0.2\n').spectra[0].id == "a, b"


def test_rows_with_cell_and_dilution() -> None:
    header = "id;path_length_cm;dilution_factor;dilution_factor_u;400;402,5\n"
    text = header + "007;0,5;50;0,2;0,1;0,2\nNA;1;1;0;0,3;0,4\n1E5;1;1;0;0,3;0,4\n"
    reading = read(text)
    assert reading.layout == "rows"
    assert [s.id for s in reading.spectra] == ["007", "NA", "1E5"]  # ids stay text
    first = reading.spectra[0]
    assert (first.path_length_cm, first.dilution_factor, first.dilution_factor_u) == (0.5, 50.0, 0.2)
    assert first.wavelength_nm.tolist() == [400.0, 402.5]


def test_a_descending_axis_is_turned_round_with_its_readings() -> None:
    spectrum = read("nm,a\n405,0.3\n402,0.2\n400,0.1\n").spectra[0]
    assert spectrum.wavelength_nm.tolist() == [400.0, 402.0, 405.0]
    assert spectrum.absorbance.tolist() == [0.1, 0.2, 0.3]


def test_the_unicode_minus_is_a_minus_and_is_mentioned() -> None:
    reading = read("nm,a\n400,−0.001\n402,0.2\n")
    assert reading.spectra[0].absorbance[0] == -0.001
    assert "U+2212" in reading.notes[0]


@pytest.mark.parametrize("cell", ["****", ">3.5", "OVER", "NaN", "", "1_000", "1 000", "0x1A", "٣", "inf", "1.2.3", "0,2"])
def test_what_is_not_a_number_is_refused_with_line_and_column(cell: str) -> None:
    said = refusal(f"nm;a;b\n400;0.1;0.2\n402;{cell};0.3\n", delimiter="semicolon", decimal="point")
    assert said.startswith("not-a-number")
    assert "line 3, column 2" in said
    assert repr(cell) in said or (cell == "" and "empty cell" in said)
    assert "not guessed" in said


def test_a_table_that_reads_both_ways_is_refused_with_the_option_that_settles_it() -> None:
    text = "id,400,402\n500,0.1,0.2\n502,0.1,0.3\n"
    said = refusal(text)
    assert said.startswith("ambiguous")
    assert "--layout" in said
    assert read(text, layout="rows").spectra[0].wavelength_nm.tolist() == [400.0, 402.0]
    assert read(text, layout="columns").spectra[0].wavelength_nm.tolist() == [500.0, 502.0]


def test_a_decimal_comma_between_commas_is_not_read_at_all() -> None:
    """The silent misreading of general readers: 400,5,0,213 taken as four numbers."""
    assert "ragged" in refusal("nm,a\n400,5,0,213\n401,0,0,220\n")


def test_points_never_separate_thousands() -> None:
    assert read("nm;a\n400.5;0.123\n401.5;0.2\n").spectra[0].wavelength_nm.tolist() == [400.5, 401.5]
    with pytest.raises(InputError):
        read("nm;a\n400.5;0,123\n401.5;0,2\n")  # two decimal marks in one file


@pytest.mark.parametrize(
    ("text", "code", "words"),
    [
        (b"", "empty-file", "empty"),
        (b" \n \n", "empty-file", "empty"),
        ("nm,a\n400,0.1\n", "too-few-points", "found 1"),
        ("nm,a\n400,0.1\n402,0.1\n402,0.2\n", "duplicate-wavelength", "line 4"),
        ("nm,a\n400,0.1\n404,0.1\n402,0.2\n", "axis-not-monotonic", "line 4"),
        ("nm,a\n400,88\n402,95.5\n404,100\n", "not-absorbance", "per cent transmittance"),
        ("nm,a,a\n400,0.1,0.2\n402,0.1,0.2\n", "duplicate-id", "'a'"),
        ("nm,a,\n400,0.1,0.2\n402,0.1,0.2\n", "empty-id", "no id"),
        ("nm,a\n400,0.1\n402,0.1,0.3\n", "ragged", "line 3"),
        ("nm,a\n400,0.1\n\n402,0.1\n", "blank-line", "line 3"),
        ("um,a\n0.4,0.1\n0.402,0.1\n", "axis-not-nm", "0.4"),
        ("400,0.1,0.2\n402,0.1,0.2\n", "no-header", "ids"),
        ("nm,a\n400,1e999\n402,0.1\n", "not-finite", "1e999"),
        ("Instrument export\nnm,a\n400,0.1\n402,0.1\n", "layout", "line 1"),
        ("id,colour,400,402\nx,red,0.1,0.2\n", "unknown-column", "colour"),
        ("nm,a\n400,0.1\n402,0.2".encode("utf-16"), "encoding", "UTF-16"),
        ("nm,müll\n400,0.1\n402,0.2".encode("latin-1"), "encoding", "0xfc"),
        ('nm,"a\n400,0.1\n402,0.2\n', "bad-quotes", "quot"),
    ],
)
def test_refusals_say_what_and_where(text: str | bytes, code: str, words: str) -> None:
    said = refusal(text)
    assert said.startswith(code)
    assert words in said


def test_a_header_of_a_million_columns_is_refused_at_once() -> None:
    wide = "nm," + ",".join(f"s{k}" for k in range(1_000_000)) + "\n400," + ",".join(["0.1"] * 1_000_000) + "\n"
    assert "too-many-columns" in refusal(wide)


def test_values_keep_their_message_and_gain_their_place() -> None:
    with pytest.raises(UnreadableFileError) as caught:
        read("id,path_length_cm,400,402\nx,0,0.1,0.2\n")
    assert "must be above 0 cm" in str(caught.value)
    assert "run.csv, line 2" in str(caught.value)


def test_a_missing_file_is_said_to_be_missing(tmp_path: Path) -> None:
    with pytest.raises(UnreadableFileError, match="cannot be opened"):
        read_spectra(tmp_path / "none.csv")


def test_options_that_do_not_exist_are_refused() -> None:
    with pytest.raises(InputError, match="must be one of comma, semicolon, tab"):
        ReadOptions(delimiter="pipe")


def test_the_bench_sheet_gives_each_sample_its_cell_and_dilution(tmp_path: Path) -> None:
    sheet = tmp_path / "sheet.csv"
    sheet.write_text("id;dilution_factor;path_length_cm\na;50;0,5\nb;1;1\n", encoding="utf-8")
    spectra = [Spectrum(i, [400, 402], [0.1, 0.2]) for i in ("a", "b")]
    found = apply_sample_sheet(spectra, read_sample_sheet(sheet))
    assert [(s.dilution_factor, s.path_length_cm) for s in found] == [(50.0, 0.5), (1.0, 1.0)]
    with pytest.raises(InputError, match="no line for 'c'"):
        apply_sample_sheet([*spectra, Spectrum("c", [400, 402], [0, 0])], read_sample_sheet(sheet))
    with pytest.raises(InputError, match="no spectrum for 'b'"):
        apply_sample_sheet(spectra[:1], read_sample_sheet(sheet))
    for text, words in (
        ("id,colour\na,red\n", "expected the columns"),
        ("id,dilution_factor\na,x\n", "found 'x'"),
        ("id,dilution_factor\na,1\na,2\n", "more than once"),
        ("id,dilution_factor\na\n", "expected 2 columns"),
    ):
        sheet.write_text(text, encoding="utf-8")
        with pytest.raises(UnreadableFileError, match=words):
            read_sample_sheet(sheet)
    sheet.write_text("id,dilution_factor\na,0.5\nb,1\n", encoding="utf-8")
    with pytest.raises(InputError, match="sample sheet, 'a'"):
        apply_sample_sheet(spectra, read_sample_sheet(sheet))


def test_what_cannot_be_written_is_refused() -> None:
    spectra = [Spectrum("a", [400, 402], [0.1, 0.2]), Spectrum("b", [400, 403], [0.1, 0.2])]
    with pytest.raises(InputError, match="share their wavelengths"):
        write_delimited(spectra)
    with pytest.raises(InputError, match="semicolon or tab"):
        write_delimited(spectra[:1], decimal="comma")
    assert np.array_equal(read(write_delimited(spectra[:1])).spectra[0].absorbance, spectra[0].absorbance)
