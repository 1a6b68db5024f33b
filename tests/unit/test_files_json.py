"""JSON of the contract, read strictly."""

from __future__ import annotations

import json
import time

import pytest

from tinctor.errors import InputError
from tinctor.files import read_spectra_json
from tinctor.files.strict_json import DEEPEST, non_finite_faults, parse

SPECTRUM = {"id": "a", "wavelength_nm": [400, 402], "absorbance": [0.1, 0.2]}


def faults(text: str) -> list[tuple[str, str]]:
    with pytest.raises(InputError) as caught:
        read_spectra_json(text.encode(), "x.json")
    return [(fault.code, fault.path) for fault in caught.value.faults]


def test_a_list_an_object_and_a_request_are_read() -> None:
    for document in ([SPECTRUM], {"spectra": [SPECTRUM]}, {"schema": "resolve/1", "components": ["x"], "spectra": [SPECTRUM]}):
        reading = read_spectra_json(json.dumps(document).encode(), "x.json")
        assert [s.id for s in reading.spectra] == ["a"]
        assert reading.layout == "json"


def test_every_fault_is_found_with_its_path() -> None:
    text = """[{"id": 7, "wavelength_nm": [400, "402"], "absorbance": [NaN, 1e400], "dilution_factor": true, "colour": 1},
               {"id": "b", "wavelength_nm": [400, 402]}, 5,
               {"id": "c", "wavelength_nm": [400, 402], "absorbance": [0.1, 0.2], "path_length_cm": 0}]"""
    assert faults(text) == [
        ("not-text", "$[0].id"),
        ("not-a-number", "$[0].wavelength_nm[1]"),
        ("not-finite", "$[0].absorbance[0]"),
        ("not-finite", "$[0].absorbance[1]"),
        ("not-a-number", "$[0].dilution_factor"),
        ("unknown-key", "$[0].colour"),
        ("missing-key", "$[1].absorbance"),
        ("not-an-object", "$[2]"),
        ("path-length", "$[3].path_length_cm"),
    ]


@pytest.mark.parametrize(
    ("text", "code", "path"),
    [
        ('{"a": 1, "b": {"c": [1, {"d": 1, "d": 2}]}}', "duplicate-key", "$.b.c[1].d"),
        ('{"a": 1', "not-json", "$"),
        ("[" * 200_000, "too-deep", "$"),
        ("[" * (DEEPEST + 1) + "]" * (DEEPEST + 1), "too-deep", "$"),
        ("[1" + "0" * 6000 + "]", "not-finite", "$"),
    ],
)
def test_the_parser_refuses_and_says_where(text: str, code: str, path: str) -> None:
    with pytest.raises(InputError) as caught:
        parse(text)
    assert (caught.value.faults[0].code, caught.value.faults[0].path) == (code, path)


def test_text_that_is_not_utf_8_is_refused() -> None:
    with pytest.raises(InputError, match="0xff"):
        parse(b'{"a": "\xff"}')


def test_non_finite_numbers_are_found_wherever_they_stand() -> None:
    assert [fault.path for fault in non_finite_faults(parse('{"a": [0, {"b": -Infinity}], "c": 1e999}'))] == ["$.a[1].b", "$.c"]


def test_no_spectra_are_refused() -> None:
    assert faults("[]") == [("no-spectra", "x.json")]
    assert faults('{"spectra": {}}') == [("no-spectra", "x.json")]


def test_two_million_numbers_are_parsed_in_reasonable_time() -> None:
    text = json.dumps({"a": [0.12345] * 2_000_000})
    start = time.process_time()
    parse(text)
    assert time.process_time() - start < 20  # not a benchmark: it would take minutes if paths were built for every number
