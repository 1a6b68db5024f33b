"""Delimited text that cannot be read for certain: refused, with what was found, where, and what to do."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tinctor.errors import InputError, UnreadableFileError
from tinctor.files import ReadOptions, read_delimited, read_spectra, source, table
from tinctor.files.numbers import all_numbers, is_number


def refused(text: str | bytes, **options: str) -> UnreadableFileError:
    with pytest.raises(UnreadableFileError) as caught:
        read_delimited(text.encode() if isinstance(text, str) else text, "run.csv", ReadOptions(**options))
    return caught.value


def refusal(text: str | bytes, **options: str) -> str:
    error = refused(text, **options)
    return f"{error.faults[0].code}: {error}"


# Practice, 3.4, and what instruments write for readings that are missing or over range.
NOT_NUMBERS = ["****", ">3.5", "OVER", "NaN", "", "1_000", "0x1A", "٣", "inf", "-", "e5", "1e", "0.1 AU", "TRUE"]


@pytest.mark.parametrize("cell", NOT_NUMBERS)
@pytest.mark.parametrize("decimal", ["point", None], ids=["told", "found out"])
def test_what_is_not_a_number_is_refused_with_line_and_column(cell: str, decimal: str | None) -> None:
    options = {"decimal": decimal} if decimal else {}
    for text, place in (
        (f"nm;a;b\n400;0.1;0.2\n402;{cell};0.3\n", "run.csv, line 3, column 2"),
        (f"id;400;402\na;0.1;0.2\nb;{cell};0.3\n", "run.csv, line 3, column 2"),
        (f"nm;a\n400;0.1\n402;{cell}\n", "run.csv, line 3, column 2"),
        (f"nm;a\n400;0.1\n{cell};0.1\n", "run.csv, line 3, column 1"),
        (f"id;400;402\na;{cell};0.2\nb;0.1;0.3\n", "run.csv, line 2, column 2"),
    ):
        (fault,) = refused(text, **options).faults
        assert (fault.code, fault.path) == ("not-a-number", place)
        assert ("an empty cell" if not cell else repr(cell)) in fault.message
        assert "not guessed" in fault.hint


@pytest.mark.parametrize("cell", ["0,2", "1.234,5", "1 000", "1'000", "1.2.3", "1,234.5"])
def test_other_marks_and_thousands_separators_are_named_as_such(cell: str) -> None:
    (fault,) = refused(f'nm;a\n400.5;0.1\n402.5;0.1\n404.5;"{cell}"\n').faults
    assert (fault.code, fault.path) == ("not-a-number", "run.csv, line 4, column 2")
    assert repr(cell) in fault.message
    assert "decimal mark" in fault.hint
    assert "thousands" in fault.hint


def test_every_reading_that_is_missing_is_reported() -> None:
    error = refused("nm;a;b\n400,5;****;0,2\n401,5;0,1;\n402,5;0,1;>3\n")
    assert [fault.path for fault in error.faults] == [f"run.csv, line {k}" for k in ("2, column 2", "3, column 3", "4, column 3")]
    assert all("decimal comma" in fault.message for fault in error.faults)
    many = refused("nm,a\n" + "".join(f"{200 + k / 10:g},****\n" for k in range(3000)))
    assert len(many.faults) == 1001
    assert "2000 more places" in many.faults[-1].message


@pytest.mark.parametrize("first", ["4OO", "4OO.0", "****", "NaN", "", ">400", "400 nm", "400..5"])
def test_a_damaged_first_reading_does_not_pass_for_a_header(first: str) -> None:
    (fault,) = refused(f"{first},0.1\n402,0.2\n404,0.3\n").faults
    assert (fault.code, fault.path) == ("not-a-number", "run.csv, line 1, column 1")
    assert repr(first) in fault.message or not first
    assert "head the first column" in fault.hint


def test_a_first_reading_without_a_number_for_absorbance_is_refused() -> None:
    assert "line 1, column 2" in refusal("400,****\n402,0.2\n404,0.3\n")


@pytest.mark.parametrize(
    ("text", "code", "words"),
    [
        (b"", "empty-file", "the file is empty"),
        (b"\xef\xbb\xbf", "empty-file", "the file is empty"),
        (b" \n \n", "empty-file", "empty"),
        (b",,\n", "empty-file", "no cells"),
        ("nm,a\n", "too-few-points", "at least 2 wavelengths, found 0"),
        ("nm,a\n400,0.1\n", "too-few-points", "at least 2 wavelengths, found 1"),
        ("400,0.1\n", "too-few-points", "found 1"),
        ("id,400\nx,0.1\ny,0.2\n", "too-few-points", "found 1"),
        ("id,path_length_cm,400,402\n", "too-few-points", "found 0"),
        ("nm,a\n400,0.1\n402,0.1\n402,0.2\n", "duplicate-wavelength", "402 nm stands twice: in line 3 and in line 4"),
        ("nm,a\n400,0.1\n402,0.1\n400,0.2\n", "duplicate-wavelength", "400 nm stands twice: in line 2 and in line 4"),
        ("id,400,402,402.0\nx,0.1,0.2,0.3\n", "duplicate-wavelength", "402 nm stands twice: in column 3 and in column 4"),
        ("nm,a\n400,0.1\n404,0.1\n402,0.2\n", "axis-not-monotonic", "found 402 nm after 404 nm [at run.csv, line 4]"),
        ("id,400,404,402\nx,0.1,0.2,0.3\n", "axis-not-monotonic", "column 4"),
        ("um,a\n0.4,0.1\n0.402,0.1\n", "axis-not-nm", "found 0.4"),
        ("cm-1,a\n25000,0.1\n24000,0.1\n", "axis-not-nm", "wavenumbers"),
        ("nm,a\n400,88\n402,95.5\n404,100\n", "not-absorbance", "per cent transmittance"),
        ("nm,a,a\n400,0.1,0.2\n402,0.1,0.2\n", "duplicate-id", "'a' stands in line 1, column 2 and again in line 1, column 3"),
        ("id,400,402\nx,0.1,0.2\ny,0.1,0.2\nx,0.1,0.2\n", "duplicate-id", "'x' stands in line 2 and again in line 4"),
        ("nm,a,\n400,0.1,0.2\n402,0.1,0.2\n", "empty-id", "line 1, column 3"),
        ("id,400,402\n,0.1,0.2\n", "empty-id", "line 2"),
        ("nm,a\n400,0.1\n402,0.1,0.3\n", "ragged", "expected 2 columns as in line 1, found 3 [at run.csv, line 3]"),
        ("nm,a,b\n400,0.1,0.2\n402,0.1\n", "ragged", "found 2 [at run.csv, line 3]"),
        ("nm,a\n400,5,0,213\n401,0,0,220\n", "ragged", "a decimal comma needs semicolon or tab"),
        ("nm,a\n400,0.1\n\n402,0.1\n", "blank-line", "line 3"),
        ("nm,a\n400,0.1\n,\n402,0.1\n", "blank-line", "line 3"),
        ("400,0.1,0.2\n402,0.1,0.2\n", "no-header", "ids of 2 spectra"),
        ("0.1\n0.2\n0.3\n", "layout", "A file holds two columns"),
        ("nm,a\n400,1e999\n402,0.1\n", "not-finite", "'1e999'"),
        ("Instrument export\nnm,a\n400,0.1\n402,0.1\n", "layout", "line 1"),
        ("id,colour,400,402\nx,red,0.1,0.2\ny,blue,0.1,0.2\n", "unknown-column", "'colour' [at run.csv, line 1, column 2]"),
        ("id,colour,400,402\nx,red,0.1,0.2\n", "unknown-column", "'colour'"),
        ("id,path_length_cm,path_length_cm,400,402\nx,1,1,0.1,0.2\n", "duplicate-column", "path_length_cm stands twice"),
        ("id,400,402,total\nx,0.1,0.2,0.3\ny,0.1,0.2,0.3\n", "not-a-number", "'total' [at run.csv, line 1, column 4]"),
        ("nm,a\n400,0.1\n402,0.2".encode("utf-16"), "encoding", "with or without byte order mark"),
        ("nm,a\n400,0.1\n402,0.2".encode("utf-16-le"), "encoding", "UTF-16"),
        ("nm,müll\n400,0.1\n402,0.2".encode("latin-1"), "encoding", "found byte 0xfc [at run.csv, line 1] (save it as UTF-8"),
        ('nm,"a\n400,0.1\n402,0.2\n', "bad-quotes", "close the quote"),
        ('nm,"a"b\n400,0.1\n402,0.2\n', "bad-quotes", "line 1"),
    ],
)
def test_refusals_say_what_and_where(text: str | bytes, code: str, words: str) -> None:
    said = refusal(text)
    assert said.startswith(code + ":")
    assert words in said


def test_ambiguity_lists_the_readings_and_names_the_option_that_settles_it() -> None:
    said = refusal("id,400,402\n500,0.1,0.2\n502,0.1,0.3\n503,0.1,0.3\n")
    assert said.startswith("ambiguous: the file can be read in 2 ways")
    assert "layout columns (2 spectra of 3 points)" in said
    assert "layout rows (3 spectra of 2 points)" in said
    assert "say which with layout=columns or layout=rows (--layout on the command line)" in said


def test_where_delimiters_compete_the_one_that_holds_is_taken() -> None:
    text = 'nm,x;400;402\n"500,5";0,1;0,2\n'
    with_semicolon = read_delimited(text.encode(), "x")
    assert (with_semicolon.delimiter, with_semicolon.decimal, with_semicolon.layout) == ("semicolon", "comma", "rows")
    assert with_semicolon.spectra[0].absorbance.tolist() == [0.1, 0.2]


def test_a_refused_spectrum_keeps_its_message_and_gains_file_line_and_column() -> None:
    (fault,) = refused("nm,a,b\n404,0.1,88\n402,0.1,0.2\n400,0.1,0.2\n").faults  # descending: the line is the file's
    assert fault.path == "run.csv, line 2, column 3, spectrum 'b'"
    assert "expected absorbance between -10 and 10, found 88" in fault.message
    assert "A = 2 - log10(%T)" in fault.hint
    (fault,) = refused("id,404,402,400\nx,0.1,0.2,-88\n").faults
    assert fault.path == "run.csv, line 2, column 4, spectrum 'x'"
    error = refused("id,path_length_cm,dilution_factor,400,402\nx,0,1,0.1,0.2\ny,1,0.5,0.1,0.2\n")
    assert [fault.path for fault in error.faults] == [
        "run.csv, line 2, column 2, spectrum 'x'",
        "run.csv, line 3, column 3, spectrum 'y'",
    ]
    assert "must be above 0 cm, found 0" in error.faults[0].message


WIDE = 1_000_000


@pytest.mark.parametrize(
    ("text", "code"),
    [
        ("nm," + ",".join(f"s{k}" for k in range(WIDE)) + "\n400" + ",0.1" * WIDE + "\n", "too-many-columns"),
        ("id," + ",".join(str(100 + k / 1000) for k in range(WIDE)) + "\na" + ",0.1" * WIDE + "\n", "too-many-columns"),
        ("nm,a\n400" + ",0.1" * WIDE + "\n", "too-many-columns"),
        ("nm;a\n" + "400;0,1\n" * WIDE, "too-many-rows"),
        ("nm,a\n" + "400,x\n" * 19_999, "not-a-number"),
        ("".join(f"{100 + k / 10:.1f},0\n" for k in range(20_001)), "too-many-points"),
        ("nm" + "".join(f",s{k}" for k in range(20_001)) + "\n" + ("400" + ",0" * 20_001 + "\n") * 2, "too-many-points"),
        ("nm," + "x" * 200_000 + "\n400,0.1\n", "bad-quotes"),
    ],
    ids=["header", "axis", "second line", "rows", "junk", "wavelengths", "spectra", "one long field"],
)
def test_absurd_sizes_are_refused(text: str, code: str) -> None:
    data = text.encode()
    assert refused(data).faults[0].code == code


def test_the_limits_themselves_are_read() -> None:
    text = "nm,a\n" + "".join(f"{100 + k / 10:.1f},0\n" for k in range(table.MOST_PER_AXIS))
    assert read_delimited(text.encode(), "x").spectra[0].wavelength_nm.size == table.MOST_PER_AXIS


def test_oversized_files_are_refused_before_they_are_read_in_full(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(source, "LARGEST_FILE_BYTES", 2**20)
    for name in ("big.csv", "big.json"):
        (tmp_path / name).write_bytes(b" " * (2**20 + 1))
        with pytest.raises(UnreadableFileError, match=rf"at most 1 MiB \(1048576 bytes\).*{name}.*split the file"):
            read_spectra(tmp_path / name)
    assert refused(b" " * (2**20 + 1)).faults[0].code == "file-too-large"


@pytest.mark.parametrize("name", ["none.csv", ".", "a\x00b"])
def test_a_file_that_cannot_be_opened_is_said_to_be_so(tmp_path: Path, name: str) -> None:
    with pytest.raises(UnreadableFileError, match="cannot be opened"):
        read_spectra(f"{tmp_path}/{name}")


@given(st.lists(st.one_of(st.text("0123456789.,+-−eE", max_size=8), st.floats().map(repr)), min_size=1, max_size=6))
@settings(max_examples=1000, deadline=None)
def test_numbers_in_bulk_are_those_of_the_strict_pattern(cells: list[str]) -> None:
    for decimal in ("point", "comma"):
        values = all_numbers(cells, decimal)
        assert (values is not None) == all(is_number(cell, decimal) for cell in cells)
        if values is not None:
            assert values.tolist() == [float(cell.replace("−", "-").replace(",", ".")) for cell in cells]


def test_a_line_feed_inside_a_quoted_cell_is_not_two_numbers() -> None:
    assert all_numbers(["1\n2"], "point") is None
    assert "line 2, column 2" in refusal('nm,a\n400,"0.1\n0.2"\n402,0.3\n')
    with pytest.raises(InputError):
        read_delimited(b'nm,a,b\n400,"0.1\n0.2"\n402,0.3,0.4\n', "x")
