"""JSON of the contract, read strictly."""

from __future__ import annotations

import json
from typing import Any

import pytest

from tinctor.errors import InputError, UnreadableFileError
from tinctor.files import read_spectra_json, spectra_from_json
from tinctor.files.strict_json import DEEPEST, child_path, non_finite_faults, parse

SPECTRUM: dict[str, Any] = {"id": "a", "wavelength_nm": [400, 402], "absorbance": [0.1, 0.2]}


def faults(document: Any) -> list[tuple[str, str]]:
    with pytest.raises(InputError) as caught:
        spectra_from_json(document)
    return [(fault.code, fault.path) for fault in caught.value.faults]


def fault_of_parsing(text: str | bytes) -> tuple[str, str]:
    with pytest.raises(InputError) as caught:
        parse(text)
    (fault,) = caught.value.faults
    return fault.code, fault.path


def test_a_list_and_an_object_are_read_from_text_bytes_and_values() -> None:
    full = SPECTRUM | {
        "path_length_cm": 0.5,
        "path_length_u_cm": 0.01,
        "dilution_factor": 50,
        "dilution_factor_u": 0.4,
        "absorbance_u": [0.001, 0.002],
    }
    for document in ([full], {"spectra": [full]}):
        for given in (document, json.dumps(document), json.dumps(document).encode()):
            (spectrum,) = spectra_from_json(given)
            assert (spectrum.id, spectrum.absorbance.tolist()) == ("a", [0.1, 0.2])
            assert (spectrum.path_length_cm, spectrum.path_length_u_cm) == (0.5, 0.01)
            assert (spectrum.dilution_factor, spectrum.dilution_factor_u) == (50.0, 0.4)
            assert spectrum.absorbance_u is not None
            assert spectrum.absorbance_u.tolist() == [0.001, 0.002]


def test_a_file_says_how_it_was_read() -> None:
    falling = SPECTRUM | {"id": "b", "wavelength_nm": [402, 400]}
    reading = read_spectra_json(b"\xef\xbb\xbf" + json.dumps([SPECTRUM, falling]).encode(), "x.json")
    assert (reading.source, reading.layout, [s.id for s in reading.spectra]) == ("x.json", "json", ["a", "b"])
    assert reading.spectra[1].absorbance.tolist() == [0.2, 0.1]
    assert "1 of 2 spectra fall" in reading.notes[0]


def test_faults_of_a_file_carry_its_name() -> None:
    for data, said in (
        (b'[{"id": "a", "id": "b"}]', r"'id' stands more than once \[at x.json, \$\[0\].id\]"),
        (b'[{"id": "a", "wavelength_nm": [400]}]', r"\[at x.json, \$\[0\].absorbance\]"),
        (b"{", r"line 1, column 2.*\[at x.json, \$\]"),
        (b"", r"\[at x.json, \$\]"),
        (b'["\xff"]', r"0xff at 2 \[at x.json, \$\]"),
    ):
        with pytest.raises(UnreadableFileError, match=said):
            read_spectra_json(data, "x.json")


def test_every_fault_is_found_with_its_path() -> None:
    text = """[{"id": 7, "wavelength_nm": [400, "402"], "absorbance": [NaN, 1e400, -Infinity, true, null],
                "dilution_factor": true, "path_length_cm": "1", "colour": 1},
               {"id": "b", "wavelength_nm": [400, 402]}, 5, null,
               {"id": "c", "wavelength_nm": [400, 402], "absorbance": [0.1, 0.2], "path_length_cm": 0},
               {"id": "c", "wavelength_nm": [400, 402], "absorbance": [0.1, 88]},
               {"id": "d", "wavelength_nm": 400, "absorbance": {}, "path_length_u_cm": NaN}]"""
    assert faults(text) == [
        ("not-text", "$[0].id"),
        ("not-a-number", "$[0].wavelength_nm[1]"),
        ("not-finite", "$[0].absorbance[0]"),
        ("not-finite", "$[0].absorbance[1]"),
        ("not-finite", "$[0].absorbance[2]"),
        ("not-a-number", "$[0].absorbance[3]"),
        ("not-a-number", "$[0].absorbance[4]"),
        ("not-a-number", "$[0].dilution_factor"),
        ("not-a-number", "$[0].path_length_cm"),
        ("unknown-key", "$[0].colour"),
        ("missing-key", "$[1].absorbance"),
        ("not-an-object", "$[2]"),
        ("not-an-object", "$[3]"),
        ("path-length", "$[4].path_length_cm"),
        ("duplicate-id", "$[5].id"),
        ("not-absorbance", "$[5].absorbance[1]"),
        ("not-a-list", "$[6].wavelength_nm"),
        ("not-a-list", "$[6].absorbance"),
        ("not-finite", "$[6].path_length_u_cm"),
    ]


def test_keys_beside_the_spectra_are_refused_so_that_no_setting_is_lost() -> None:
    document = {"schema": "resolve/1", "spectra": [SPECTRUM], "path length": 0.5}
    assert faults(document) == [("unknown-key", "$.schema"), ("unknown-key", '$["path length"]')]


@pytest.mark.parametrize("document", ["[]", "{}", '{"spectra": {}}', '{"spectra": []}', "7", '"a"', "null", "true"])
def test_no_spectra_are_refused(document: str) -> None:
    code, path = faults(document)[-1]
    assert code == "no-spectra"
    assert path == ("$.spectra" if document.startswith("{") else "$")


def test_whole_numbers_beyond_any_float_are_refused() -> None:
    """Found as a crash: `1` and 400 zeros is a whole number to the standard library, and no float64."""
    huge = "1" + "0" * 400
    text = f'[{{"id": "a", "wavelength_nm": [400, 402], "absorbance": [{huge}, 0.1], "dilution_factor": -{huge}}}]'
    assert faults(text) == [("not-finite", "$[0].absorbance[0]"), ("not-finite", "$[0].dilution_factor")]
    assert faults(text.replace(huge, huge * 20)) == [("not-finite", "$[0].absorbance[0]"), ("not-finite", "$[0].dilution_factor")]


@pytest.mark.parametrize(
    ("text", "code", "path"),
    [
        ('{"a": 1, "b": {"c": [1, {"d": 1, "d": 1}]}}', "duplicate-key", "$.b.c[1].d"),
        ('[[0.5, 1], {"a b": 1, "a b": 2}]', "duplicate-key", '$[1]["a b"]'),
        ('{"a": 1', "not-json", "$"),
        ("[1,]", "not-json", "$"),
        ("[1] [2]", "not-json", "$"),
        ("[01]", "not-json", "$"),
        ("{'a': 1}", "not-json", "$"),
        ("", "not-json", "$"),
        ("[" * 200_000, "too-deep", "$"),
        ('{"a":' * 5000 + "1" + "}" * 5000, "too-deep", "$"),
        ("[" * (DEEPEST + 1) + "]" * (DEEPEST + 1), "too-deep", "$"),
        ('{"a": [1, ' + "1" + "0" * 6000 + "]}", "not-finite", "$.a[1]"),
        ('{"a": "\\ud800"}', "not-unicode", "$.a"),
        ('{"\\uDC00": 1}', "not-unicode", "$"),
        ('{"a": "\ud800"}', "not-unicode", "$"),
        (b'{"a": "\xff"}', "not-utf-8", "$"),
        ('[{"a": 1}]'.encode("utf-16"), "not-utf-8", "$"),
    ],
)
def test_the_parser_refuses_and_says_where(text: str | bytes, code: str, path: str) -> None:
    assert fault_of_parsing(text) == (code, path)


def test_every_repeated_key_is_found() -> None:
    with pytest.raises(InputError) as caught:
        parse('{"a": {"b": 1, "b": 2}, "c": [{"d": 1, "d": 2, "e": 1, "e": 2}], "a": {"b": 3, "b": 4}}')
    paths = [fault.path for fault in caught.value.faults]
    assert paths == ["$.a", "$.a.b", "$.c[0].d", "$.c[0].e"]


def test_what_the_parser_lets_pass() -> None:
    assert parse("[" * DEEPEST + "]" * DEEPEST) is not None
    assert parse('["\\ud83d\\ude00", "\\\\ud800"]') == ["\U0001f600", "\\ud800"]
    assert parse('\ufeff{"a": [1, 2.5, true, null]}') == {"a": [1, 2.5, True, None]}
    assert type(parse('{"a": {"b": 1}}')["a"]) is dict


def test_non_finite_numbers_are_found_wherever_they_stand() -> None:
    value = parse('{"a": [0, {"b": -Infinity}], "c": 1e999, "d": ["1e999", true], "e": [[1, NaN]]}')
    assert [fault.path for fault in non_finite_faults(value)] == ["$.a[1].b", "$.c", "$.e[0][1]"]
    assert [fault.path for fault in non_finite_faults([10**400], "$.x")] == ["$.x[0]"]
    assert non_finite_faults({"a": [10**300, 1e308, -0.0]}) == []


def test_paths_of_odd_keys_stay_readable() -> None:
    assert child_path("$", "x.y") == '$["x.y"]'
    assert len(child_path("$", "k" * 10_000)) < 100


def test_twenty_megabytes_of_numbers_and_many_keys() -> None:
    """Paths built for every number, or keys counted one by one, would take minutes."""
    text = json.dumps({"a": [0.12345678] * 1_700_000, "b": [{"c": k} for k in range(20_000)]})
    keys = "{" + ",".join(f'"k{k % 100_000}": 1' for k in range(100_001)) + "}"
    assert non_finite_faults(parse(text)) == []
    assert fault_of_parsing(keys) == ("duplicate-key", "$.k0")
