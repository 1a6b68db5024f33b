"""What is written reads back to the bit, and nothing makes a reader fail otherwise than by refusing."""

from __future__ import annotations

import numpy as np
from hypothesis import example, given, settings
from hypothesis import strategies as st

from tinctor.errors import InputError
from tinctor.files import ReadOptions, read_delimited, read_spectra_json, write_delimited
from tinctor.spectrum import Spectrum

DIALECTS = [("comma", "point"), ("semicolon", "point"), ("semicolon", "comma"), ("tab", "point"), ("tab", "comma")]
IDS = st.text(st.characters(codec="utf-8", exclude_categories=("Cc", "Cs", "Zl", "Zp")), min_size=1, max_size=12).filter(
    lambda text: text == text.strip() and text != ""
)


@st.composite
def batches(draw: st.DrawFn) -> list[Spectrum]:
    axis = sorted(draw(st.lists(st.floats(190, 1100, allow_nan=False), min_size=2, max_size=8, unique=True)))
    ids = draw(st.lists(IDS, min_size=1, max_size=5, unique=True))
    reading = st.floats(-1, 4, allow_nan=False).map(lambda value: value + 0.0)
    rows = [draw(st.lists(reading, min_size=len(axis), max_size=len(axis))) for _ in ids]
    return [
        Spectrum(i, axis, row, path_length_cm=draw(st.sampled_from([0.1, 1.0, 5.0])), dilution_factor=draw(st.floats(1, 500)))
        for i, row in zip(ids, rows, strict=True)
    ]


@given(batches(), st.sampled_from(DIALECTS), st.sampled_from(["rows", "columns"]))
@settings(max_examples=300, deadline=None)
def test_round_trip(spectra: list[Spectrum], dialect: tuple[str, str], layout: str) -> None:
    delimiter, decimal = dialect
    text = write_delimited(spectra, layout=layout, delimiter=delimiter, decimal=decimal)
    found = read_delimited(text.encode(), "x.csv", ReadOptions(delimiter, decimal, layout)).spectra
    assert [s.id for s in found] == [s.id for s in spectra] or (len(spectra) == 1 and layout == "columns")
    for before, after in zip(spectra, found, strict=True):
        assert np.array_equal(before.wavelength_nm, after.wavelength_nm)
        assert np.array_equal(before.absorbance, after.absorbance)
        if layout == "rows":
            assert (before.path_length_cm, before.dilution_factor) == (after.path_length_cm, after.dilution_factor)


@given(batches(), st.sampled_from(DIALECTS), st.sampled_from(["rows", "columns"]))
@settings(max_examples=200, deadline=None)
def test_what_is_found_out_from_the_file_is_right_or_refused(
    spectra: list[Spectrum], dialect: tuple[str, str], layout: str
) -> None:
    delimiter, decimal = dialect
    text = write_delimited(spectra, layout=layout, delimiter=delimiter, decimal=decimal)
    try:
        found = read_delimited(text.encode(), "x.csv").spectra
    except InputError:
        return
    assert len(found) == len(spectra)
    for before, after in zip(spectra, found, strict=True):
        assert np.array_equal(before.absorbance, after.absorbance)
        assert np.array_equal(before.wavelength_nm, after.wavelength_nm)


@given(st.binary(max_size=300))
@example(b"\x00")
@example(b'"')
@settings(max_examples=500, deadline=None)
def test_arbitrary_bytes_are_refused_cleanly(data: bytes) -> None:
    for reader in (read_delimited, read_spectra_json):
        try:
            reader(data, "x")
        except InputError:
            continue


@given(st.text(alphabet="0123456789.,;\t\n-eE+ \"'ab*>", max_size=200))
@settings(max_examples=500, deadline=None)
def test_text_that_looks_like_a_table_is_read_or_refused(text: str) -> None:
    try:
        read_delimited(text.encode(), "x")
    except InputError:
        return
