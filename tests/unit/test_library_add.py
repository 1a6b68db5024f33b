"""Filing a record: whole or not at all, never over another, and sound by the check; published specific absorbances."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest

from tinctor.component import Component
from tinctor.errors import InputError
from tinctor.library import check_collection, load_collection
from tinctor.library.add import add_record, create_collection, record_toml
from tinctor.library.handbook import compare_with_handbook, handbook_values
from tinctor.operations.record_of import Word, record_of
from tinctor.operations.registry import run_document

W = np.linspace(400.0, 500.0, 51)
DYE = Component("lot-7", W, 45.0 * np.exp(-0.5 * ((W - 426.0) / 30.0) ** 2), basis="mass")


def record(name: str = "lot-7", **changes: Any) -> dict[str, Any]:
    source = {
        "citation": "Own series of the test",
        "link": "not known: own",
        "licence": "own",
        "obtained": "here",
        "changed": "nothing",
    }
    kept = {"scale_relative_u": 0.004, "scale_relative_u_reason": "weighing and flask, from the balance log"}
    return {"schema": "record/1", "name": name, "title": "Lot 7", "basis": "mass", **kept, "source": source, **changes}


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    place = tmp_path / "our-dyes"
    create_collection(place, "Our dyes")
    return place


def test_a_record_is_filed_and_sound(folder: Path) -> None:
    filed = add_record(folder, record(), DYE)
    assert check_collection(folder) == []
    back = load_collection(folder).component("lot-7")
    np.testing.assert_array_equal(back.absorptivity, DYE.absorptivity)
    assert filed.file.check_points[0].wavelength_nm == 426.0
    assert sorted(p.name for p in folder.iterdir()) == ["collection.toml", "lot-7.csv", "lot-7.toml"]


def test_nothing_is_written_over(folder: Path) -> None:
    add_record(folder, record(), DYE)
    before = {p.name: p.read_bytes() for p in folder.iterdir()}
    with pytest.raises(InputError) as caught:
        add_record(folder, record(title="Another"), DYE)
    assert caught.value.faults[0].code == "record-exists"
    create_collection(folder, "Another title")
    assert {p.name: p.read_bytes() for p in folder.iterdir()} == before


@pytest.mark.parametrize(
    ("changes", "code"),
    [
        ({"name": "Lot 7"}, "record-name"),
        ({"name": "../lot"}, "record-name"),
        ({"name": ""}, "record-name"),
        ({"cas": "61-73-5"}, "cas"),
        ({"formula": "C16H18ClN3S", "molar_mass_g_per_mol": 400.0}, "molar-mass"),
        ({"scale_relative_u": 0.0}, "scale-u"),
        ({"scale_relative_u_reason": "so"}, "scale-u-reason"),
        ({"unheard_of": 1}, "record-key"),
        ({"basis": "molar", "schema": "record/2"}, "record-key"),
        ({"check_points": [{"wavelength_nm": 426.0, "value": 50.0, "tolerance": 1.0, "source": "handbook"}]}, "check-point"),
    ],
)
def test_what_would_not_pass_leaves_nothing_behind(folder: Path, changes: dict[str, Any], code: str) -> None:
    with pytest.raises(InputError) as caught:
        add_record(folder, record(**changes), DYE)
    assert code in [f.code for f in caught.value.faults]
    assert [p.name for p in folder.iterdir()] == ["collection.toml"]


def test_a_folder_must_be_a_collection(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="new-collection"):
        add_record(tmp_path, record(), DYE)
    with pytest.raises(InputError, match="hyphens"):
        create_collection(tmp_path / "Our Dyes", "Our dyes")


def test_text_of_any_kind_reads_back(folder: Path) -> None:
    title = 'Blau "7" \\ 染料 \t é \x7f'
    assert add_record(folder, record(title=title), DYE).title == title
    assert "\t" not in record_toml({"a": title})


def test_published_values_are_the_sources(reference: Path) -> None:
    """Every shipped value is in the outside table, and what was from memory there says so here."""
    import csv

    with (reference / "handbook_absorptivities.csv").open(encoding="utf-8", newline="") as file:
        outside = [row for row in csv.DictReader(file) if row["quantity"] == "specific_absorbance_1pct_1cm"]
    values = handbook_values()
    assert len(values) == len(outside) == 31
    for value, row in zip(values, outside, strict=True):
        assert value.substance == row["substance"]
        assert value.specific_absorbance == float(row["value"])
        assert value.from_memory == (row["verified_in_text"] == "no")
    assert {v.substance for v in values if v.from_memory} == {"Potassium dichromate"}


def test_a_comparison_gives_the_dye_content() -> None:
    """Tartrazine: E(1 %, 1 cm) 530 at 426 nm, so 53.0 L g-1 cm-1 pure; 45.0 here is 84.9 %."""
    (found,) = compare_with_handbook(DYE, "Tartrazine")
    assert found.maximum_nm == 426.0
    assert found.specific_absorbance == pytest.approx(450.0)
    assert found.dye_content_percent == pytest.approx(100 * 45 / 53)
    assert found.difference_percent == pytest.approx(100 * 45 / 53 - 100)
    molar = Component("lot-7", W, DYE.absorptivity * 534.37, molar_mass_g_per_mol=534.37)
    assert compare_with_handbook(molar, "1934-21-0")[0].dye_content_percent == pytest.approx(100 * 45 / 53)


@pytest.mark.parametrize(
    ("component", "name", "code"),
    [
        (DYE, "tartrazin", "unknown-substance"),
        (DYE, "brilliant-blue-fcf", "range-not-covered"),
        (Component("x", W, DYE.absorptivity * 500), "tartrazine", "molar-mass-needed"),
    ],
)
def test_what_cannot_be_compared_is_refused(component: Component, name: str, code: str) -> None:
    with pytest.raises(InputError) as caught:
        compare_with_handbook(component, name)
    assert caught.value.faults[0].code == code


def standards_request(**changes: Any) -> dict[str, Any]:
    scans = [
        {
            "id": f"s{k}",
            "concentration": 4.0 * k,
            "wavelength_nm": W.tolist(),
            "absorbance": (DYE.absorptivity * 0.004 * k).tolist(),
        }
        for k in (1, 2, 3, 4, 5)
    ]
    base = {"schema": "standards/1", "name": "lot-7", "concentration_unit": "mg/L", "stock_relative_u": 0.004, "standards": scans}
    return {**base, **changes}


def test_a_response_becomes_a_record_and_resolves(folder: Path) -> None:
    response = run_document("standards", standards_request(solvent="water", ph=7.0, handbook="tartrazine", source="bench book 12"))
    assert response["handbook"][0]["dye_content_percent"] == pytest.approx(84.9, abs=0.1)
    document, component = record_of(response, Word(operator="A. Moor", title="Lot 7", lot="P-7"))
    filed = add_record(folder, document, component)
    assert filed.file.operator == "A. Moor"
    assert filed.file.conditions.lot == "P-7"
    assert filed.file.linear_range is not None
    assert filed.file.linear_range.linear_to == pytest.approx(0.02)
    assert filed.file.source.citation == "bench book 12"
    assert response["provenance"]["request_sha256"] in filed.file.source.changed
    sample = {"id": "u", "wavelength_nm": W.tolist(), "absorbance": (DYE.absorptivity * 0.01).tolist()}
    request = {
        "schema": "resolve/1",
        "library": str(folder),
        "components": ["lot-7"],
        "concentration_unit": "mg/L",
        "spectra": [sample],
    }
    assert run_document("resolve", request)["results"][0]["components"][0]["concentration"] == pytest.approx(10.0, rel=1e-6)


def test_a_scale_nobody_stated_needs_the_operators_word() -> None:
    response = run_document("standards", {k: v for k, v in standards_request().items() if k != "stock_relative_u"})
    with pytest.raises(InputError) as caught:
        record_of(response, Word(operator="A. Moor", title="Lot 7"))
    assert caught.value.faults[0].code == "scale-not-known"
    with pytest.raises(InputError, match="reason"):
        record_of(response, Word(operator="A. Moor", title="Lot 7", scale_relative_u=0.01))
    document, _ = record_of(
        response, Word(operator="A. Moor", title="Lot 7", scale_relative_u=0.01, scale_reason="balance and flask")
    )
    assert document["scale_relative_u"] == 0.01


@pytest.mark.parametrize("document", [{}, {"schema": "resolve/1"}, [], {"schema": "standards/1", "component": 3}])
def test_other_documents_are_no_records(document: Any) -> None:
    with pytest.raises(InputError):
        record_of(document, Word(operator="A. Moor", title="Lot 7"))


def test_a_spectrum_without_a_maximum_at_the_published_wavelength_says_so() -> None:
    w = np.arange(400.0, 501.0, 2.0)
    there = Component("lot", w, 45.0 * np.exp(-0.5 * ((w - 426.0) / 30.0) ** 2), basis="mass")
    flank = Component("other", w, 45.0 * np.exp(-0.5 * ((w - 490.0) / 40.0) ** 2), basis="mass")
    assert compare_with_handbook(there, "tartrazine")[0].at_maximum
    assert not compare_with_handbook(flank, "tartrazine")[0].at_maximum
