"""What is written reads back to the bit, and nothing makes a reader fail otherwise than by refusing."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from hypothesis import assume, example, given, settings
from hypothesis import strategies as st

from tinctor.errors import InputError, UnreadableFileError
from tinctor.files import ReadOptions, read_delimited, read_sample_sheet, read_spectra_json, spectra_from_json, write_delimited
from tinctor.files.layouts import ROW_KEYS
from tinctor.spectrum import Spectrum

DIALECTS = st.sampled_from([("comma", "point"), ("semicolon", "point"), ("semicolon", "comma"), ("tab", "point"), ("tab", "comma")])
# Words, whatever Unicode offers, and ids that look like numbers and wavelengths: the last make files ambiguous.
IDS = st.one_of(
    st.text(st.characters(exclude_categories=("Cs",), exclude_characters="\x00\r"), min_size=1, max_size=12),
    st.text("0123456789.,;\t\"'−\n", min_size=1, max_size=6),
    st.integers(190, 1100).map(str),
).filter(lambda text: text == text.strip() and text.casefold() not in {"abs", "absorbance"})


@st.composite
def batches(draw: st.DrawFn, *, with_cells: bool) -> list[Spectrum]:
    axis = sorted(draw(st.lists(st.floats(190, 1100), min_size=2, max_size=8, unique=True)))
    ids = draw(st.lists(IDS, min_size=1, max_size=5, unique=True))
    reading = st.floats(-10, 10)
    cell = {}
    if with_cells:
        cell = {
            "path_length_cm": draw(st.floats(0.001, 10)),
            "path_length_u_cm": draw(st.floats(0, 1)),
            "dilution_factor": draw(st.floats(1, 500)),
            "dilution_factor_u": draw(st.floats(0, 1)),
        }
    return [Spectrum(i, axis, draw(st.lists(reading, min_size=len(axis), max_size=len(axis))), **cell) for i in ids]


def refusal(read: Callable[[], object]) -> InputError | None:
    """The refusal of what cannot be read; any other exception is a fault and passes through."""
    try:
        read()
    except InputError as error:
        return error
    return None


def assert_same(before: list[Spectrum], after: tuple[Spectrum, ...]) -> None:
    """Equal to the bit, the sign of zero with it."""
    assert [s.id for s in after] == [s.id for s in before]
    for one, other in zip(before, after, strict=True):
        assert one.wavelength_nm.tobytes() == other.wavelength_nm.tobytes()
        assert one.absorbance.tobytes() == other.absorbance.tobytes()
        assert [getattr(one, key) for key in ROW_KEYS] == [getattr(other, key) for key in ROW_KEYS]


@pytest.mark.parametrize("layout", ["columns", "rows", "two-columns"])
@given(data=st.data(), dialect=DIALECTS, bom=st.sampled_from([b"", b"\xef\xbb\xbf"]))
@settings(max_examples=150, deadline=None)
def test_what_is_written_reads_back_to_the_bit(layout: str, data: st.DataObject, dialect: tuple[str, str], bom: bytes) -> None:
    spectra = data.draw(batches(with_cells=layout == "rows"))
    spectra = spectra[:1] if layout == "two-columns" else spectra
    written = bom + write_delimited(spectra, layout, *dialect).encode()
    assert_same(spectra, read_delimited(written, "x.csv", ReadOptions(*dialect, layout)).spectra)


@pytest.mark.parametrize("layout", ["columns", "rows"])
@given(data=st.data(), dialect=DIALECTS)
@settings(max_examples=150, deadline=None)
def test_what_is_found_out_from_the_file_is_right_or_said_to_be_ambiguous(
    layout: str, data: st.DataObject, dialect: tuple[str, str]
) -> None:
    spectra = data.draw(batches(with_cells=layout == "rows"))
    written = write_delimited(spectra, layout, *dialect).encode()
    refused = refusal(lambda: read_delimited(written, "x.csv"))
    if refused:
        assert refused.faults[0].code == "ambiguous"
        assert "layout=" in refused.faults[0].hint
    else:
        assert_same(spectra, read_delimited(written, "x.csv").spectra)


@given(batches(with_cells=False), st.sampled_from(["rows", "columns"]), DIALECTS)
@settings(max_examples=200, deadline=None)
def test_ids_that_are_words_are_never_ambiguous(spectra: list[Spectrum], layout: str, dialect: tuple[str, str]) -> None:
    named = [Spectrum(f"sample {k}", s.wavelength_nm, s.absorbance) for k, s in enumerate(spectra)]
    assert_same(named, read_delimited(write_delimited(named, layout, *dialect).encode(), "x.csv").spectra)


def test_columns_and_rows_of_the_same_numbers_are_ambiguous_and_settled_by_the_option() -> None:
    spectra = [Spectrum(i, [400, 402, 404], [0.1, 0.2, 0.3]) for i in ("500", "502")]
    text = write_delimited(spectra).encode()
    with pytest.raises(UnreadableFileError, match="layout=columns or layout=rows"):
        read_delimited(text, "x.csv")
    assert_same(spectra, read_delimited(text, "x.csv", ReadOptions(layout="columns")).spectra)


@given(batches(with_cells=True))
@settings(max_examples=100, deadline=None)
def test_json_reads_back_to_the_bit(spectra: list[Spectrum]) -> None:
    documents = [
        {"id": s.id, "wavelength_nm": s.wavelength_nm.tolist(), "absorbance": s.absorbance.tolist()}
        | {key: getattr(s, key) for key in ROW_KEYS}
        for s in spectra
    ]
    assert_same(spectra, spectra_from_json(json.dumps({"spectra": documents})))


@given(st.binary(max_size=300))
@example(b"\x00")
@example(b'"')
@example(b"\xef\xbb\xbf\xef\xbb\xbf400,1\n402,1\n")
@settings(max_examples=500, deadline=None)
def test_arbitrary_bytes_are_refused_cleanly(data: bytes) -> None:
    for reader in (read_delimited, read_spectra_json):
        refused = refusal(lambda reader=reader: reader(data, "x"))
        if refused:
            assert isinstance(refused, UnreadableFileError)
            assert all("x" in fault.path and fault.message for fault in refused.faults)


@given(st.text(alphabet="0123456789.,;\t\n\r-−eE+ \"'ab*>", max_size=200), st.booleans())
@settings(max_examples=500, deadline=None)
def test_text_that_looks_like_a_table_is_read_or_refused(text: str, headed: bool) -> None:
    try:
        reading = read_delimited((("nm;a\n" if headed else "") + text).encode(), "x")
    except InputError:
        return
    for spectrum in reading.spectra:
        assert spectrum.wavelength_nm.size >= 2
        assert np.all(np.diff(spectrum.wavelength_nm) > 0)
        assert np.all(np.isfinite(spectrum.absorbance))


LEAVES = st.none() | st.booleans() | st.floats() | st.integers() | st.text(max_size=4)
KEYS = st.sampled_from(["id", "spectra", "wavelength_nm", "absorbance", "dilution_factor", "x"])


@given(st.recursive(LEAVES, lambda inner: st.lists(inner, max_size=3) | st.dictionaries(KEYS, inner, max_size=4), max_leaves=12))
@settings(max_examples=150, deadline=None)
def test_any_json_is_read_or_refused(value: object) -> None:
    refused = refusal(lambda: spectra_from_json(json.dumps(value)))
    assert refused is None or all(fault.path.startswith("$") for fault in refused.faults)


@given(data=st.binary(max_size=120), headed=st.booleans())
@settings(max_examples=200, deadline=None)
def test_any_sheet_is_read_or_refused(data: bytes, headed: bool, tmp_path_factory: pytest.TempPathFactory) -> None:
    path: Path = tmp_path_factory.getbasetemp() / "sheet.csv"
    path.write_bytes((b"id;dilution_factor\n" if headed else b"") + data)
    try:
        sheet = read_sample_sheet(path)
    except UnreadableFileError:
        return
    assume(sheet)
    assert all(i and np.isfinite(list(values.values())).all() for i, values in sheet.items())
