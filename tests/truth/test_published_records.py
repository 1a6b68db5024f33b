"""Shipped records against values published elsewhere (handbook_absorptivities.csv of the reference data names each source)."""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
import pytest

from tinctor.axis import resample
from tinctor.component import Component
from tinctor.library import load_collection
from tinctor.resolve.engine import resolve
from tinctor.resolve.settings import ResolveSettings
from tinctor.spectrum import SpectrumBatch


def handbook(reference: Path, substance: str) -> list[dict[str, str]]:
    with (reference / "handbook_absorptivities.csv").open(encoding="utf-8", newline="") as file:
        return [row for row in csv.DictReader(file) if row["substance"].startswith(substance)]


def at(component: Component, wavelength_nm: float) -> float:
    return float(resample(component.wavelength_nm, component.absorptivity, np.array([wavelength_nm]))[0])


@pytest.fixture(scope="module")
def published() -> dict[str, Component]:
    collection = load_collection("published")
    return {name: collection.component(name) for name in collection.records}


def scaled(component: Component, factor: float) -> Component:
    """The same spectrum on another basis by mistake: every value times a factor."""
    return Component(component.name, component.wavelength_nm, factor * component.absorptivity)


def reaches_published_range(dye: Component, scale: float, low: float, high: float) -> bool:
    value = at(dye, 664.0)
    return value * (1 - scale) <= high and value * (1 + scale) >= low


def test_methylene_blue_lies_in_the_published_range(reference: Path, published: dict[str, Component]) -> None:
    """74 028 at 664 nm (S. Prahl's table, 10 umol/L, apparent) to 95 000 (monomer, from memory), for anhydrous or trihydrate."""
    values = [float(row["value"]) for row in handbook(reference, "Methylene blue") if row["quantity"] == "molar_absorptivity"]
    low, high = min(values), max(values)
    assert (low, high) == (74028.0, 95000.0)
    dye = published["methylene-blue"]
    scale = dye.scale_relative_u
    assert scale is not None
    assert reaches_published_range(dye, scale, low, high)  # as anhydrous the record's own uncertainty reaches it
    assert low < at(dye, 664.0) * 373.90 / 319.85 < high  # as trihydrate it lies within
    assert dye.wavelength_nm[dye.absorptivity.argmax()] == pytest.approx(664, abs=4)
    # negative controls: another substance, values by mass, the hydrate's factor taken the wrong way round
    assert not reaches_published_range(published["deoxyhaemoglobin"], scale, low, high)
    assert not reaches_published_range(scaled(dye, 1 / 319.85), scale, low, high)
    assert not reaches_published_range(scaled(dye, 319.85 / 373.90), scale, low, high)


def test_what_the_methylene_blue_record_says_of_its_linear_range(reference: Path, published: dict[str, Component]) -> None:
    """Weber-Shirk's five standards fitted with the record: the amounts and residuals that its [linear_range] reason states."""
    path = reference / "methylene-blue-series" / "dilution_series_absorbance.csv"
    with path.open(encoding="utf-8", newline="") as file:
        table = np.array([[float(cell) for cell in row] for row in list(csv.reader(file))[1:]])
    table = table[(table[:, 0] >= 500) & (table[:, 0] <= 720)]
    dye = published["methylene-blue"]
    A = table[:, 2:] - table[:, 1:2]
    e = resample(dye.wavelength_nm, dye.absorptivity, table[:, 0])
    mg_per_l = e @ A / (e @ e) * 319.85e3
    assert mg_per_l == pytest.approx([0.96, 1.96, 3.05, 3.99, 5.00], abs=0.005)
    residual = A - np.outer(e, np.arange(1, 6)) / 319.85e3
    assert np.abs(residual).max() == pytest.approx(0.020, abs=0.001)
    shoulder = A[table[:, 0] == 610][0] / A[table[:, 0] == 664][0]
    assert shoulder[-1] / shoulder[0] == pytest.approx(1.17, abs=0.01)
    assert dye.linear_to == pytest.approx(5e-3 / 319.85, rel=0.003)
    assert dye.linear_to < 5e-3 / 319.85  # not beyond the highest standard


def crossings(one: Component, other: Component) -> np.ndarray:
    w = one.wavelength_nm
    difference = one.absorptivity - resample(other.wavelength_nm, other.absorptivity, w)
    k = np.flatnonzero(np.sign(difference[:-1]) != np.sign(difference[1:]))
    return np.asarray(w[k] + (w[k + 1] - w[k]) * difference[k] / (difference[k] - difference[k + 1]))


ISOSBESTIC_NM = (500.0, 529.0, 545.0, 570.0, 584.0, 797.0)


def missed(one: Component, other: Component) -> list[float]:
    """Return the published isosbestic points further than 1 nm from any crossing."""
    found = crossings(one, other)
    return [w for w in ISOSBESTIC_NM if not np.any(np.abs(found - w) < 1.0)]


def test_haemoglobins_cross_at_the_published_isosbestic_points(reference: Path, published: dict[str, Component]) -> None:
    """500, 529, 545, 570, 584 and 797 nm (Gratzer, oximetry literature, from memory), within 1 nm."""
    rows = [row for row in handbook(reference, "Haemoglobin") if row["quantity"] == "isosbestic_wavelength"]
    assert tuple(float(row["value"]) for row in rows) == ISOSBESTIC_NM
    oxy, deoxy = published["oxyhaemoglobin"], published["deoxyhaemoglobin"]
    assert missed(oxy, deoxy) == []
    # negative controls: one record twice; one form per haem, the other per tetramer; one form 8 % (its uncertainty) too high
    assert crossings(oxy, oxy).size == 0
    assert missed(scaled(oxy, 0.25), deoxy) == list(ISOSBESTIC_NM)
    assert len(missed(scaled(oxy, 1.08), deoxy)) >= 3


def test_absorptivities_at_the_isosbestic_points(reference: Path, published: dict[str, Component]) -> None:
    """Values worked out in the handbook from the same table, linearly between its rows: not independent, they guard the copying."""
    rows = [
        row for row in handbook(reference, "Haemoglobin") if "Prahl" in row["source"] and row["quantity"] == "molar_absorptivity"
    ]
    assert len(rows) == 11
    for name in ("oxyhaemoglobin", "deoxyhaemoglobin"):
        form = published[name]
        for row in rows:
            value = float(np.interp(float(row["wavelength_nm"]), form.wavelength_nm, form.absorptivity))
            assert value == pytest.approx(float(row["value"]), rel=0.01), row
    at_577 = [float(np.interp(577.0, published[name].wavelength_nm, published[name].absorptivity)) for name in SWAPPED]
    assert at_577[0] != pytest.approx(at_577[1], rel=0.01)  # negative control: off these points the forms differ


#: Bands of van Assendelft (1970) and Zijlstra et al. (1991): nm, per haem, relative tolerance. The tolerance is what the record's
#: `scale_relative_u_reason` owns to: oxy 7 to 10.5 % low in the visible, deoxy 4 to 6.5 % high, the Soret bands within 4 %.
BANDS = {
    "oxyhaemoglobin": [(415, 0.04), (542, 0.08), (577, 0.11)],
    "deoxyhaemoglobin": [(431, 0.04), (554, 0.07), (555, 0.07)],
}
SWAPPED = {"oxyhaemoglobin": "deoxyhaemoglobin", "deoxyhaemoglobin": "oxyhaemoglobin"}


def has_band(component: Component, wavelength_nm: float, expected: float, tolerance: float) -> bool:
    """Whether a maximum lies within 3 nm (the table has a point every 2 nm) and is as high as expected."""
    near = np.abs(component.wavelength_nm - wavelength_nm) <= 8
    if not near.any():
        return False
    top = int(component.absorptivity[near].argmax())
    position, height = component.wavelength_nm[near][top], component.absorptivity[near][top]
    return bool(abs(position - wavelength_nm) <= 3 and abs(height / expected - 1) <= tolerance)


@pytest.mark.parametrize("name", list(BANDS))
def test_haemoglobin_maxima(reference: Path, published: dict[str, Component], name: str) -> None:
    """van Assendelft 1970 and Zijlstra et al. 1991, as read in an open workbook, per haem, x 4."""
    rows = [
        (float(row["wavelength_nm"]), 4 * float(row["value"]), tolerance)
        for row in handbook(reference, name.capitalize())
        for band, tolerance in BANDS[name]
        if float(row["wavelength_nm"]) == band and row["verified_in_text"] == "yes"
    ]
    assert len(rows) == (5 if name == "oxyhaemoglobin" else 3)
    for wavelength, expected, tolerance in rows:
        assert has_band(published[name], wavelength, expected, tolerance), (wavelength, expected)
        # negative controls: the records swapped, values per haem, values by mass
        assert not has_band(published[SWAPPED[name]], wavelength, expected, tolerance)
        assert not has_band(scaled(published[name], 1 / 4), wavelength, expected, tolerance)
        assert not has_band(scaled(published[name], 1 / 64500), wavelength, expected, tolerance)


def test_the_visible_bands_depart_in_opposite_directions(published: dict[str, Component]) -> None:
    """Against Zijlstra et al. 1991, x 4: oxy at 577 nm 61 600, deoxy at 554 nm 51 360. Both records say so in their uncertainty."""
    assert at(published["oxyhaemoglobin"], 577.0) / 61600 == pytest.approx(0.895, abs=0.005)
    assert at(published["deoxyhaemoglobin"], 554.0) / 51360 == pytest.approx(1.06, abs=0.005)


@pytest.mark.parametrize(("name", "quoted"), [("anthracene", 9700.0), ("pyrene", 54000.0), ("perylene", 38500.0)])
def test_aromatics_against_values_often_quoted(published: dict[str, Component], name: str, quoted: float) -> None:
    """In cyclohexane at 356, 335 and 436 nm (photochemistry literature, from memory): heights within 15 %, bands within 3 nm."""
    band = {"anthracene": 356.0, "pyrene": 335.0, "perylene": 436.0}
    assert has_band(published[name], band[name], quoted, 0.15)
    for other in band.keys() - {name}:
        assert not has_band(published[other], band[name], quoted, 0.15)  # negative control


def test_saturation_from_a_mixture_of_both_forms(published: dict[str, Component]) -> None:
    """The job itself on published spectra: 75 % oxygenated haemoglobin is found again, total and parts (simulated noise)."""
    rng = np.random.default_rng(6)
    w = np.arange(500.0, 601.0, 2.0)
    forms = [published["oxyhaemoglobin"], published["deoxyhaemoglobin"]]
    c = np.array([7.5e-6, 2.5e-6])
    A = sum(share * resample(f.wavelength_nm, f.absorptivity, w) for share, f in zip(c, forms, strict=True))
    batch = SpectrumBatch(["blood"], w, (A + 0.0005 * rng.standard_normal(w.size))[None])
    result = resolve(batch, forms, ResolveSettings())
    assert result.unconstrained[0] == pytest.approx(c, rel=0.01)
    with_wrong = resolve(batch, [forms[0], published["methylene-blue"]], ResolveSettings())
    assert (with_wrong.spectrum_status() != 0).all()  # negative control: a wrong library is not accepted
