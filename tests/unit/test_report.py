"""Rounding, the table for people, and its manners."""

from __future__ import annotations

import copy
import json
from pathlib import Path
from typing import Any

import pytest

from tinctor.operations.registry import run_checked
from tinctor.operations.resolve import ResolveResponse
from tinctor.report.resolve_csv import COLUMNS, resolve_csv
from tinctor.report.resolve_table import resolve_table
from tinctor.report.rounding import rounded, significant

REQUEST: dict[str, Any] = json.loads(
    (Path(__file__).resolve().parents[2] / "scripts" / "demo_data" / "request.json").read_text(encoding="utf-8")
)


def response(**changes: Any) -> ResolveResponse:
    result = run_checked("resolve", {**copy.deepcopy(REQUEST), **changes})
    assert isinstance(result, ResolveResponse)
    return result


@pytest.mark.parametrize(
    ("value", "u", "shown"),
    [
        (0.0201, 0.0003, ("0.02010", "0.00030")),
        (12.3456, 0.0996, ("12.35", "0.10")),
        (12.3456, 0.0994, ("12.346", "0.099")),
        (-0.0004, 0.0012, ("-0.0004", "0.0012")),
        (-0.00001, 0.012, ("0.000", "0.012")),
        (98765.0, 4321.0, ("98800", "4300")),
        (1.5e-9, 2.345e-10, ("1.50e-09", "0.23e-09")),
        (0.0, 0.0, ("0", "0")),
    ],
)
def test_two_significant_figures_of_the_uncertainty_and_a_value_to_match(value: float, u: float, shown: tuple[str, str]) -> None:
    """GUM 7.2.6 (JCGM 100:2008): at most two significant digits."""
    assert rounded(value, u) == shown


def test_significant_figures() -> None:
    assert [significant(v, 2) for v in (0.0000662, 1234.0, 0.995, -0.0125, 3e-12)] == [
        "0.000066",
        "1200",
        "0.99",
        "-0.013",
        "3.0e-12",
    ]


def test_a_table_says_refused_not_detected_and_flagged_in_words() -> None:
    twin = {"name": "twin", "wavelength_nm": [380, 720], "mass_absorptivity": [5.0, 10.0]}
    other = {**twin, "name": "other", "mass_absorptivity": [10.0, 20.0]}
    text = resolve_table(response(components=["hollin-yellow", twin, other]))
    assert text.count("refused") >= 2
    assert "refusal: collinear." in text
    assert "twin" in text
    absent = response(components=["hollin-yellow", "bramble-red", "tarn-blue", "quill-violet-acid"])
    assert "< 0." in resolve_table(absent)
    assert "library-scale" not in resolve_table(absent)
    assert "nobody has stated it: library-scale of twin, other" in text


def test_words_are_wrapped_to_the_terminal_and_codes_stand_only_where_wanted() -> None:
    result = response(components=["hollin-yellow", "tarn-blue"])
    narrow = resolve_table(result, width=60)
    words = narrow.split("\n\n", 1)[1].rsplit("\n\n", 1)[0]
    assert max(len(line) for line in words.splitlines()) <= 60
    assert "\x1b" not in narrow
    coloured = resolve_table(result, width=60, colour=True)
    assert "\x1b[1m" in coloured
    plain = coloured.replace("\x1b[1m", "").replace("\x1b[7m", "").replace("\x1b[0m", "")
    assert plain == narrow


def test_ids_of_any_kind_stay_as_they_are() -> None:
    spectrum = copy.deepcopy(REQUEST["spectra"][0])
    ids = ['=1+2, "x"', "染料 7", "[red]a[/red]", "<script>"]
    result = response(spectra=[{**spectrum, "id": i} for i in ids])
    table = resolve_table(result)
    for i in ids:
        assert i in table
    rows = resolve_csv(result)
    assert rows.splitlines()[0] == ",".join(COLUMNS)
    assert '"=1+2, ""x""",hollin-yellow' in rows


def test_totals_of_an_analyte_have_a_column() -> None:
    text = resolve_table(response(components=["quill-violet-acid", "quill-violet-alkaline", "bramble-red"]))
    assert "total quill-violet" in text
