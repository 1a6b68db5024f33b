"""Delimited text that can be read for certain: every layout, delimiter, decimal mark, byte order mark and line ending."""

from __future__ import annotations

import io
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest

from tinctor.errors import InputError
from tinctor.files import FileReading, ReadOptions, read_delimited, read_spectra

DIALECTS = [("comma", "point"), ("semicolon", "point"), ("semicolon", "comma"), ("tab", "point"), ("tab", "comma")]

#: layout -> the same readings written with semicolon and decimal point
TEXTS = {
    "two-columns": "nm;a\n400;0.213\n402.5;-1.5e-2\n405;0\n",
    "columns": "wavelength_nm;a;007\n400;0.213;.5\n402.5;-1.5e-2;0.75\n405;0;1.\n",
    "rows": "id;dilution_factor;400;402.5;405\na;1;0.213;-1.5e-2;0\n007;1.5;.5;0.75;1.\n",
}


def read(text: str | bytes, source: str = "run.csv", **options: str) -> FileReading:
    return read_delimited(text.encode() if isinstance(text, str) else text, source, ReadOptions(**options))


@pytest.mark.parametrize("bom", [b"", b"\xef\xbb\xbf"], ids=["plain", "byte order mark"])
@pytest.mark.parametrize("ending", ["\n", "\r\n"], ids=["LF", "CRLF"])
@pytest.mark.parametrize(("delimiter", "decimal"), DIALECTS)
@pytest.mark.parametrize("layout", TEXTS)
def test_every_dialect_of_every_layout(layout: str, delimiter: str, decimal: str, ending: str, bom: bytes) -> None:
    text = TEXTS[layout].replace(";", {"comma": ",", "semicolon": ";", "tab": "\t"}[delimiter])
    if decimal == "comma":
        text = text.replace(".", ",")
    reading = read(bom + text.replace("\n", ending).encode())
    assert (reading.layout, reading.delimiter, reading.decimal, reading.encoding) == (layout, delimiter, decimal, "UTF-8")
    assert reading.notes == ()
    first = reading.spectra[0]
    assert (first.id, first.wavelength_nm.tolist(), first.absorbance.tolist()) == ("a", [400, 402.5, 405], [0.213, -0.015, 0])
    if layout != "two-columns":
        assert (reading.spectra[1].id, reading.spectra[1].absorbance.tolist()) == ("007", [0.5, 0.75, 1.0])
    assert reading.spectra[-1].dilution_factor == (1.5 if layout == "rows" else 1.0)


def test_fields_may_be_quoted() -> None:
    assert read('nm,"a, ""b"""\n"400",0.1\n402,"0.2"\n').spectra[0].id == 'a, "b"'
    reading = read('nm,a\n"400,5","0,1"\n"402,5","0,2"\n')  # a decimal comma between commas, as RFC 4180 wants it
    assert (reading.delimiter, reading.decimal) == ("comma", "comma")
    assert reading.spectra[0].wavelength_nm.tolist() == [400.5, 402.5]


def test_one_spectrum_is_named_by_its_header_or_by_the_file() -> None:
    assert read("400,0.1\n402,0.2\n", "vat-3.txt").spectra[0].id == "vat-3"
    assert read("nm,sample 7\n400,0.1\n402,0.2\n").spectra[0].id == "sample 7"
    assert read("nm,A\n400,0.1\n402,0.2\n").spectra[0].id == "A"
    headed = read("nm,Abs\n400,0.1\n402,0.2\n", "vat-3.txt")
    assert headed.spectra[0].id == "vat-3"
    assert "'Abs'" in headed.notes[0]
    assert "vat-3" in headed.notes[0]


def test_ids_are_text_whatever_they_look_like() -> None:
    ids = ["007", "NA", "1E5", "null", "0.10", "−1", "2026-12-01"]
    by_column = read(f"nm;{';'.join(ids)}\n400{';0.1' * 7}\n402{';0.2' * 7}\n")
    by_row = read("id;400;402\n" + "".join(f"{i};0,1;0,2\n" for i in ids))
    assert [s.id for s in by_column.spectra] == [s.id for s in by_row.spectra] == ids
    assert by_column.notes == by_row.notes == ()  # the minus of an id is no minus sign that was read


def test_rows_may_carry_cell_and_dilution_of_each_sample() -> None:
    header = "id;path_length_cm;path_length_u_cm;dilution_factor;dilution_factor_u;400;402,5\n"
    first, second = read(header + "a;0,5;0,01;50;0,2;0,1;0,2\nb;1;0;1;0;0,3;0,4\n").spectra
    assert (first.path_length_cm, first.path_length_u_cm, first.dilution_factor, first.dilution_factor_u) == (0.5, 0.01, 50, 0.2)
    assert (second.path_length_cm, second.dilution_factor) == (1.0, 1.0)
    assert first.absorbance.tolist() == [0.1, 0.2]


@pytest.mark.parametrize("text", ["nm,a,b\n405,0.3,3\n402,0.2,2\n400,0.1,1\n", "id,405,402,400\na,0.3,0.2,0.1\nb,3,2,1\n"])
def test_a_descending_axis_is_turned_round_with_its_readings_and_it_is_said(text: str) -> None:
    reading = read(text)
    assert reading.spectra[0].wavelength_nm.tolist() == [400.0, 402.0, 405.0]
    assert [s.absorbance.tolist() for s in reading.spectra] == [[0.1, 0.2, 0.3], [1, 2, 3]]
    assert "fall from 405 to 400 nm" in reading.notes[0]


def test_the_unicode_minus_is_a_minus_and_is_mentioned() -> None:
    reading = read("nm,a\n400,−0.001\n402,2e−3\n")
    assert reading.spectra[0].absorbance.tolist() == [-0.001, 0.002]
    assert "U+2212" in reading.notes[0]


def test_blank_lines_at_the_end_are_nothing_and_rows_of_delimiters_are_mentioned() -> None:
    assert read("nm,a\n400,0.1\n402,0.2\n\n  \n\r\n").notes == ()
    assert "2 row(s)" in read("nm,a\n400,0.1\n402,0.2\n,\n,\n").notes[0]


def test_a_point_never_separates_thousands() -> None:
    """Practice, 3.4: a general reader told decimal=',' and thousands='.' makes 4005 of 400.5, in silence."""
    assert read("nm;a\n400.5;0.123\n401.5;0.2\n").spectra[0].wavelength_nm.tolist() == [400.5, 401.5]


def test_a_reading_that_holds_in_two_ways_with_the_same_numbers_is_no_ambiguity() -> None:
    reading = read("nm;a\n400;0\n402;1\n403;2\n")  # whole numbers: either decimal mark
    assert reading.spectra[0].absorbance.tolist() == [0, 1, 2]


def test_options_settle_what_a_file_leaves_open_and_restrict_what_is_tried() -> None:
    text = "id,400,402\n500,0.1,0.2\n502,0.1,0.3\n"
    assert read(text, layout="rows").spectra[0].wavelength_nm.tolist() == [400.0, 402.0]
    assert read(text, layout="columns").spectra[0].wavelength_nm.tolist() == [500.0, 502.0]
    for options in ({"delimiter": "tab"}, {"decimal": "comma"}, {"layout": "two-columns"}):
        with pytest.raises(InputError):
            read("nm,a,b\n400,0.1,0.2\n402,0.1,0.2\n", **options)
    with pytest.raises(InputError, match="must be one of comma, semicolon, tab"):
        ReadOptions(delimiter="pipe")


def test_numbers_are_read_to_the_bit() -> None:
    found = read("nm,a\n400,0.1\n401,2.2250738585072014e-308\n402,0.30000000000000004\n403,9.999999999999998\n")
    assert found.spectra[0].absorbance.tolist() == [0.1, 2.2250738585072014e-308, 0.30000000000000004, 9.999999999999998]


def test_files_and_standard_input(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    plain, document = tmp_path / "vat.csv", tmp_path / "vat.JSON"
    plain.write_bytes(b"400,0.1\n402,0.2\n")
    document.write_text('[{"id": "j", "wavelength_nm": [400, 402], "absorbance": [0.1, 0.2]}]', encoding="utf-8")
    assert (read_spectra(plain).source, read_spectra(str(plain)).spectra[0].id) == ("vat.csv", "vat")
    assert read_spectra(document).spectra[0].id == "j"
    for data, layout in ((plain.read_bytes(), "two-columns"), (b"\xef\xbb\xbf \n" + document.read_bytes(), "json")):
        monkeypatch.setattr("sys.stdin", SimpleNamespace(buffer=io.BytesIO(data)))
        reading = read_spectra("-")
        assert (reading.source, reading.layout) == ("standard input", layout)


def test_spectra_of_one_file_share_one_read_only_axis() -> None:
    one, other = read("nm,a,b\n400,0.1,0.2\n402,0.1,0.2\n").spectra
    assert one.wavelength_nm is other.wavelength_nm
    assert not one.absorbance.flags.writeable


def test_measured_spectra_from_outside_are_read_in_full(reference: Path) -> None:
    """The standards of methylene blue (M. Weber-Shirk, Cornell University CEE 4530): blank and five standards, 190 to 820 nm."""
    reading = read_spectra(reference / "methylene-blue-series" / "dilution_series_absorbance.csv")
    assert reading.layout == "columns"
    assert len(reading.spectra) == 6
    lines = (reference / "methylene-blue-series" / "dilution_series_absorbance.csv").read_text("utf-8").split()
    assert reading.spectra[0].wavelength_nm.size == len(lines) - 1
    assert reading.spectra[5].absorbance[-1] == float(lines[-1].split(",")[-1])
    assert np.all(np.diff(reading.spectra[0].wavelength_nm) > 0)
