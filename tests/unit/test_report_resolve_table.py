"""The table for a terminal and the CSV: hostile names, refused figures, many samples."""

from __future__ import annotations

import copy
import csv
import io
import json
from pathlib import Path
from typing import Any

import pytest

from tinctor.operations.registry import run_checked
from tinctor.operations.resolve import ResolveResponse
from tinctor.report.resolve_csv import COLUMNS, resolve_csv
from tinctor.report.resolve_table import resolve_table
from tinctor.report.text_table import printable

REQUEST: dict[str, Any] = json.loads(
    (Path(__file__).resolve().parents[2] / "scripts" / "demo_data" / "request.json").read_text(encoding="utf-8")
)


def response(**changes: Any) -> ResolveResponse:
    result = run_checked("resolve", {**copy.deepcopy(REQUEST), **changes})
    assert isinstance(result, ResolveResponse)
    return result


def named(*ids: str) -> ResolveResponse:
    return response(spectra=[{**copy.deepcopy(REQUEST["spectra"][0]), "id": i} for i in ids])


HOSTILE = ["\x1b[2J", "two\nlines", "carriage\rreturn", "tab\there", "\u202eturned", 'quo"te', "com,ma", "=1+2", "染料", "\x9b31m"]


def test_a_table_has_one_line_for_each_sample_whatever_its_id_holds() -> None:
    lines = resolve_table(named(*HOSTILE)).splitlines()
    assert all(line.isprintable() for line in lines)
    assert len([line for line in lines if line.endswith("accepted") and "±" in line]) == len(HOSTILE)
    for plain in ('quo"te', "com,ma", "=1+2", "染料"):
        assert any(line.startswith(plain) for line in lines)


@pytest.mark.parametrize("text", ["vat-3", "染料 7", "é", "no\u00a0break", "[red]", "a\u0301"])
def test_what_steers_nothing_is_left_as_it_is(text: str) -> None:
    assert printable(text) == text


def test_csv_gives_every_id_back_to_a_reader_that_ends_lines_at_carriage_returns_too() -> None:
    text = resolve_csv(named(*HOSTILE))
    rows = list(csv.reader(io.StringIO(text, newline="")))
    assert tuple(rows[0]) == COLUMNS
    assert list(dict.fromkeys(row[0] for row in rows[1:])) == HOSTILE
    assert '"carriage\rreturn"' in text


def test_refused_is_explained_where_it_stands_and_only_there() -> None:
    twin = {"name": "twin", "wavelength_nm": [380, 720], "mass_absorptivity": [5.0, 10.0]}
    other = {**twin, "name": "other", "mass_absorptivity": [10.0, 20.0]}
    explained = "refused: no figure can be stood behind"
    assert explained in resolve_table(response(components=["hollin-yellow", twin, other]))
    assert explained not in resolve_table(response())
    rows = list(csv.DictReader(io.StringIO(resolve_csv(response(components=["hollin-yellow", twin, other])))))
    refused = [row for row in rows if row["status"] == "refused"]
    assert {row["component"] for row in refused} == {"twin", "other"}
    assert {row[key] for row in refused for key in COLUMNS[4:12]} == {""}
    assert all("collinear" in row["flags"].split() for row in refused)


def test_emphasis_only_repeats_what_words_say() -> None:
    result = response(components=["hollin-yellow", "tarn-blue"])
    coloured = resolve_table(result, colour=True)
    for code in ("\x1b[1m", "\x1b[7m", "\x1b[0m"):
        coloured = coloured.replace(code, "")
    assert coloured == resolve_table(result)
    assert "flagged" in coloured
    assert "warning: " in coloured


def test_columns_stand_under_one_another_for_wide_characters() -> None:
    lines = [line for line in resolve_table(named("染料染料", "abcdefgh")).splitlines() if line.endswith("accepted")]
    wide, narrow = lines
    assert narrow.index("±") - wide.index("±") == 4  # four characters of double width


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


def test_words_are_wrapped_to_the_terminal() -> None:
    result = response(components=["hollin-yellow", "tarn-blue"])
    narrow = resolve_table(result, width=60)
    words = narrow.split("\n\n", 1)[1].rsplit("\n\n", 1)[0]
    assert max(len(line) for line in words.splitlines()) <= 60
    assert "\x1b" not in narrow


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
