#!/usr/bin/env python3
"""Make the demonstration data: dyes and bath samples of a dye house that does not exist. Everything here is invented.

    python3 scripts/make_demo_data.py            write spectra_library/palewater-dyehouse and scripts/demo_data
    python3 scripts/make_demo_data.py --check    compare with what is there, change nothing, exit 1 on a difference

A dye is a sum of bands that are Gaussian in wavenumber. The laboratory's records differ from the true spectra by the
error of their stock solution and by noise; the samples are then measured as a bench instrument would, with shifts of the
wavelength axis, offsets, cells and dilutions that are a little off, photometric noise and stray light.
It makes the environment it needs, as scripts/demo.py does.
"""

from __future__ import annotations

import argparse
import csv
import io
import json
import sys
from dataclasses import dataclass, field
from importlib.util import find_spec
from pathlib import Path

if __name__ == "__main__" and find_spec("numpy") is None:
    sys.path.insert(0, str(Path(__file__).resolve().parent))
    from environment import inside

    inside()

import numpy as np

ROOT = Path(__file__).resolve().parents[1]
LIBRARY = ROOT / "spectra_library" / "palewater-dyehouse"
SAMPLES = ROOT / "scripts" / "demo_data"
SEED = 20260317

RECORD_NM = np.arange(380.0, 721.0, 1.0)
INSTRUMENT_NM = np.arange(400.0, 701.0, 2.0)
STRAY_LIGHT = 0.0003
NOISE_FLOOR, NOISE_TRANSMITTANCE, SHIFT_NM, OFFSET = 0.0004, 0.0001, 0.05, 0.002


@dataclass
class Dye:
    """An invented dye: bands as (centre nm, full width at half maximum in cm-1, height in L g-1 cm-1)."""

    name: str
    title: str
    bands: list[tuple[float, float, float]]
    scale_relative_u: float
    linear_to: float
    molar_mass: float
    analyte: str = ""
    ph: float = 6.5

    @property
    def lot(self) -> str:
        """The lot of the title, or "1" where it names none."""
        return self.title.partition("lot ")[2] or "1"

    def absorptivity(self, wavelength_nm: np.ndarray) -> np.ndarray:
        wavenumber = 1e7 / wavelength_nm
        return sum(
            height * np.exp(-4 * np.log(2) * ((wavenumber - 1e7 / centre) / width) ** 2) for centre, width, height in self.bands
        )  # type: ignore[return-value]


DYES = [
    Dye("hollin-yellow", "Hollin Yellow, lot P-114", [(428, 4200, 31.0), (388, 4600, 14.0), (345, 5200, 12.0)], 0.010, 0.060, 612.5),
    Dye("marrow-orange", "Marrow Orange, lot P-091", [(492, 3600, 30.0), (452, 3900, 17.0), (375, 5000, 8.0)], 0.010, 0.060, 548.2),
    Dye("bramble-red", "Bramble Red, lot P-120", [(532, 2700, 27.0), (503, 3300, 20.0), (385, 5500, 6.0)], 0.012, 0.032, 731.9),
    Dye("sorrel-red", "Sorrel Red, lot P-121", [(512, 3000, 25.0), (483, 3500, 18.0), (380, 5200, 7.0)], 0.012, 0.045, 690.4),
    Dye("tarn-blue", "Tarn Blue, lot P-107", [(612, 2400, 33.0), (571, 2600, 17.0), (400, 5000, 5.0), (345, 5200, 9.0)], 0.008, 0.050, 823.7),
    Dye("fathom-navy", "Fathom Navy, lot P-099", [(584, 3900, 26.0), (640, 2600, 12.0), (410, 5600, 8.0)], 0.015, 0.060, 902.3),
    Dye("quill-violet-acid", "Quill Violet, acid form", [(438, 3700, 38.0), (365, 5000, 10.0)], 0.010, 0.040, 402.1, "quill-violet", 4.0),
    Dye("quill-violet-alkaline", "Quill Violet, alkaline form", [(590, 2500, 42.0), (550, 2900, 18.0)], 0.010, 0.030, 402.1, "quill-violet", 10.0),
]  # fmt: skip
BY_NAME = {dye.name: dye for dye in DYES}
TRIO = ("hollin-yellow", "bramble-red", "tarn-blue")


@dataclass
class Bath:
    """A sample: true concentrations in g/L, how it was measured, and what is special about it."""

    id: str
    grams_per_litre: tuple[float, float, float]
    dilution: float
    path_cm: float = 1.0
    special: str = "sound"
    offset: float = 0.0
    scatter: float = 0.0
    stranger: float = 0.0
    curvature: float = 0.0


def run_of_baths() -> list[Bath]:
    """Return twenty samples: an exhaustion curve over three hours, and what goes wrong in between."""
    start = np.array([0.80, 0.55, 0.60])
    rate = np.array([0.022, 0.030, 0.018])
    left = np.array([0.06, 0.04, 0.09])

    def bath(minutes: float) -> tuple[float, float, float]:
        c = start * (left + (1 - left) * np.exp(-rate * minutes))
        return tuple(float(v) for v in np.round(c, 5))  # type: ignore[return-value]

    return [
        Bath("vat3-0800", bath(0), 50),
        Bath("vat3-0805", bath(5), 50),
        Bath("vat3-0810", bath(10), 50),
        Bath("vat3-0815", bath(15), 10, special="saturated: too little dilution", curvature=0.0),
        Bath("vat3-0820", bath(20), 25),
        Bath("vat3-0830", bath(30), 25),
        Bath("vat3-0840", bath(40), 20),
        Bath("vat3-0850", bath(50), 20, special="turbid: fibre dust", scatter=0.16),
        Bath("vat3-0900", bath(60), 10),
        Bath("vat3-0915", bath(75), 10, special="an absorber that is not in the library: spin finish", stranger=0.06),
        Bath("vat3-0930", bath(90), 5),
        Bath("vat3-0945", bath(105), 5, special="dirty cell: fingerprint", offset=0.035),
        Bath("vat3-1000", bath(120), 5),
        Bath("vat3-1030", bath(150), 4),
        Bath("vat3-1100", bath(180), 2),
        Bath("rinse-1", (0.0210, 0.00001, 0.0260), 1, special="one component below its decision limit"),
        Bath("rinse-2", (0.0042, 0.0021, 0.0055), 1),
        Bath("rinse-3", (0.0, 0.0, 0.0), 1, special="clear: nothing in it"),
        Bath("vat5-0800", (0.40, 1.10, 0.20), 25, special="one component beyond its linear range", curvature=0.05),
        Bath("vat5-0810", (0.36, 0.90, 0.18), 10, 0.2, special="sound"),
    ]


def records(rng: np.random.Generator) -> tuple[dict[str, str], dict[str, float]]:
    """Return the collection's files and the factor true spectrum over record of each dye."""
    files = {"collection.toml": collection_toml()}
    scale: dict[str, float] = {}
    for dye in DYES:
        error = float(np.clip(rng.normal(0, dye.scale_relative_u), -1.5 * dye.scale_relative_u, 1.5 * dye.scale_relative_u))
        scale[dye.name] = 1 + error
        true = dye.absorptivity(RECORD_NM)
        u = 0.010 + 0.0015 * true
        measured = true + rng.normal(0, 1, true.size) * u
        rows = [f"{w:.0f},{v:.3f},{s:.3f}" for w, v, s in zip(RECORD_NM, measured, u, strict=True)]
        files[f"{dye.name}.csv"] = "\n".join(["wavelength_nm,mass_absorptivity,absorptivity_u", *rows]) + "\n"
        files[f"{dye.name}.toml"] = record_toml(dye)
    return files, scale


def collection_toml() -> str:
    return (
        'schema = "collection/1"\nname = "palewater-dyehouse"\ntitle = "Palewater dye house (invented)"\n'
        'description = "Dyes of a dye house that does not exist, for the demonstration; all numbers are invented."\ninvented = true\n'
    )


def record_toml(dye: Dye) -> str:
    peak = max(dye.bands, key=lambda band: band[2])[0]
    value = float(dye.absorptivity(np.array([peak]))[0])
    analyte = f'analyte = "{dye.analyte}"\n' if dye.analyte else ""
    return f'''schema = "record/1"
name = "{dye.name}"
title = "{dye.title} (invented)"
molar_mass_g_per_mol = {dye.molar_mass}
basis = "mass"
scale_relative_u = {dye.scale_relative_u}
scale_relative_u_reason = "Invented: weighing, stock and strength of the lot together."
{analyte}invented = true

[conditions]
solvent = "water"
ph = {dye.ph}
temperature_c = 20.0
bandwidth_nm = 2.0
lot = "{dye.lot}"

[linear_range]
linear_to = {dye.linear_to}
reason = "Invented: highest of seven standards that lay on the line."

[source]
citation = "Invented for the demonstration by scripts/make_demo_data.py"
link = "scripts/make_demo_data.py"
licence = "MIT"
obtained = "made by the script"
changed = "nothing"

[[check_points]]
wavelength_nm = {peak:.1f}
value = {value:.3f}
tolerance = {0.02 * value:.3f}
source = "the band heights in scripts/make_demo_data.py"
'''


def measured(bath: Bath, scale: dict[str, float], rng: np.random.Generator) -> np.ndarray:
    """Return the absorbance that the instrument reads."""
    w = INSTRUMENT_NM + rng.normal(0, SHIFT_NM)
    path = bath.path_cm + rng.normal(0, PATH_U.get(bath.path_cm, 0.001))
    dilution = bath.dilution * (1 + rng.normal(0, DILUTION_RELATIVE_U)) if bath.dilution > 1 else 1.0
    true = sum(c * scale[name] * BY_NAME[name].absorptivity(w) for name, c in zip(TRIO, bath.grams_per_litre, strict=True))
    A = np.asarray(true) * path / dilution
    A = A * (1 - bath.curvature * A / max(A.max(), 1e-9))
    A = A + bath.stranger * np.exp(-4 * np.log(2) * ((w - 566) / 42) ** 2)
    A = A + bath.scatter * (w / 400.0) ** -4 + bath.offset + rng.normal(0, OFFSET)
    transmittance = (10.0**-A + STRAY_LIGHT) / (1 + STRAY_LIGHT)
    transmittance = np.maximum(transmittance + rng.normal(0, NOISE_TRANSMITTANCE, A.size), 1e-4)
    return np.round(-np.log10(transmittance) + rng.normal(0, NOISE_FLOOR, A.size), 4)


PATH_U = {1.0: 0.001, 0.5: 0.001, 0.2: 0.001}
DILUTION_RELATIVE_U = 0.004


@dataclass
class Table:
    """Rows to delimited text."""

    rows: list[list[str]] = field(default_factory=list)

    def text(self, delimiter: str = ",") -> str:
        out = io.StringIO()
        csv.writer(out, delimiter=delimiter, lineterminator="\n").writerows(self.rows)
        return out.getvalue()


def sample_files(scale: dict[str, float], rng: np.random.Generator) -> dict[str, str]:
    """Return the sample files by name."""
    baths = run_of_baths()
    spectra = [measured(bath, scale, rng) for bath in baths]
    axis = [f"{w:.0f}" for w in INSTRUMENT_NM]
    run = Table([["wavelength_nm", *(b.id for b in baths)]])
    run.rows += [[w, *(f"{A[k]:.4f}" for A in spectra)] for k, w in enumerate(axis)]
    sheet = Table([["id", "path_length_cm", "path_length_u_cm", "dilution_factor", "dilution_factor_u"]])
    sheet.rows += [[b.id, *cell_of(b)] for b in baths]
    truth = Table([["id", *(f"{name}_g_per_L" for name in TRIO), "special"]])
    truth.rows += [[b.id, *(f"{c:.5f}" for c in b.grams_per_litre), b.special] for b in baths]
    rows = Table([["id", *sheet.rows[0][1:], *axis]])
    rows.rows += [
        [b.id, *(v.replace(".", ",") for v in cell_of(b)), *(f"{a:.4f}".replace(".", ",") for a in A)]
        for b, A in zip(baths[:4], spectra[:4], strict=True)
    ]
    single = Table([["wavelength_nm", baths[4].id], *([w, f"{a:.4f}"] for w, a in zip(axis, spectra[4], strict=True))])
    return {
        "vat-run.csv": run.text(),
        "vat-run-samples.csv": sheet.text(),
        "truth.csv": truth.text(),
        "vat-run-rows.csv": rows.text(";"),
        "single.csv": single.text(),
        "request.json": request(baths[4], spectra[4]),
    }


def cell_of(bath: Bath) -> list[str]:
    """Return path, its uncertainty, dilution and its uncertainty as they stand on the bench sheet."""
    u = f"{bath.dilution * DILUTION_RELATIVE_U:.4g}" if bath.dilution > 1 else "0"
    return [f"{bath.path_cm:g}", f"{PATH_U[bath.path_cm]:g}", f"{bath.dilution:g}", u]


def request(bath: Bath, A: np.ndarray) -> str:
    path, path_u, dilution, dilution_u = (float(v) for v in cell_of(bath))
    spectrum = {
        "id": bath.id,
        "wavelength_nm": INSTRUMENT_NM.tolist(),
        "absorbance": A.tolist(),
        "path_length_cm": path,
        "path_length_u_cm": path_u,
        "dilution_factor": dilution,
        "dilution_factor_u": dilution_u,
    }
    document = {
        "schema": "resolve/1",
        "library": "palewater-dyehouse",
        "components": list(TRIO),
        "concentration_unit": "g/L",
        "background": ["offset", "scatter"],
        "spectra": [spectrum],
    }
    return json.dumps(document, indent=1) + "\n"


#: A new lot of Tarn Blue, weighed: mg/L in the cell; the last one aggregates.
SERIES_MG_PER_L = (4.0, 8.0, 12.0, 18.0, 24.0, 32.0, 44.0)
UNKNOWNS_MG_PER_L = {"vat7-start": 21.37, "vat7-end": 2.94, "vat7-strong": 41.0}
LOT_STRENGTH, STOCK_RELATIVE_U = 0.947, 0.004


def filling(milligrams_per_litre: float, rng: np.random.Generator) -> np.ndarray:
    """Return one filling of the cell with the new lot: aggregation above 35 mg/L, cell, noise, stray light."""
    w = INSTRUMENT_NM + rng.normal(0, 0.02)
    A = LOT_STRENGTH * BY_NAME["tarn-blue"].absorptivity(w) * milligrams_per_litre / 1000.0
    aggregated = 0.06 if milligrams_per_litre > 35 else 0.0
    A = A * (1 - aggregated) + aggregated * A.max() * np.exp(-4 * np.log(2) * ((w - 560) / 40) ** 2) + rng.normal(0, 0.001)
    transmittance = (10.0**-A + STRAY_LIGHT) / (1 + STRAY_LIGHT) + rng.normal(0, NOISE_TRANSMITTANCE, A.size)
    return np.round(-np.log10(transmittance) + rng.normal(0, NOISE_FLOOR, A.size), 4)


def series_files(rng: np.random.Generator) -> dict[str, str]:
    """Return the files of the weighed series and its unknowns."""
    stock = 1 + rng.normal(0, STOCK_RELATIVE_U)
    true = {f"s{k + 1}": c * stock * (1 + rng.normal(0, 0.002)) for k, c in enumerate(SERIES_MG_PER_L)}
    scans = {"blank": filling(0.0, rng), **{i: filling(c, rng) for i, c in true.items()}, "s3-again": filling(true["s3"], rng)}
    sheet = Table([["id", "concentration", "concentration_u", "replicate_of"], ["blank", "0", "", ""]])
    for k, c in enumerate(SERIES_MG_PER_L):
        sheet.rows.append([f"s{k + 1}", f"{c:g}", f"{0.002 * c:.4f}", ""])
    sheet.rows.append(["s3-again", f"{SERIES_MG_PER_L[2]:g}", "", "s3"])
    unknowns = {i: filling(c, rng) for i, c in UNKNOWNS_MG_PER_L.items()}
    return {"standards.csv": spectra_text(scans), "standards-sheet.csv": sheet.text(), "unknowns.csv": spectra_text(unknowns)}


def spectra_text(spectra: dict[str, np.ndarray]) -> str:
    table = Table([["wavelength_nm", *spectra]])
    table.rows += [[f"{w:.0f}", *(f"{A[k]:.4f}" for A in spectra.values())] for k, w in enumerate(INSTRUMENT_NM)]
    return table.text()


def build() -> dict[Path, str]:
    """Return every file by path."""
    rng = np.random.default_rng(SEED)
    library, scale = records(rng)
    samples = {**sample_files(scale, rng), **series_files(np.random.default_rng(SEED + 1))}
    return {**{LIBRARY / name: text for name, text in library.items()}, **{SAMPLES / name: text for name, text in samples.items()}}


def same_text(one: str, other: str) -> bool:
    """Return whether two texts agree, numbers to one unit of their last digit (processors round differently)."""
    left, right = one.splitlines(), other.splitlines()
    return len(left) == len(right) and all(a == b or same_line(a, b) for a, b in zip(left, right, strict=True))


def same_line(one: str, other: str) -> bool:
    delimiter = ";" if ";" in one else ","
    left, right = ([cell.strip().replace(",", ".") for cell in line.split(delimiter)] for line in (one, other))
    return len(left) == len(right) and all(a == b or close(a, b) for a, b in zip(left, right, strict=True))


def close(one: str, other: str) -> bool:
    """Return whether two numbers written alike differ by at most one unit of their last decimal."""
    try:
        decimals = len(one.partition(".")[2])
        return decimals > 0 and len(one) - len(other) in (-1, 0, 1) and abs(float(one) - float(other)) <= 1.01 * 10.0**-decimals
    except ValueError:
        return False


def main() -> int:
    """Write or compare; return the exit code."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--check", action="store_true", help="compare and change nothing")
    options = parser.parse_args()
    files = build()
    if options.check:
        different = [p.name for p, text in files.items() if not p.exists() or not same_text(text, p.read_text(encoding="utf-8"))]
        here = {path for folder in (LIBRARY, SAMPLES) for path in folder.iterdir() if path.name != "README.md"}
        different += [f"{path.name} (not made here)" for path in sorted(here - files.keys())]
        print("\n".join(f"differs: {name}" for name in different) or f"{len(files)} files agree")
        return 1 if different else 0
    for path, text in files.items():
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text, encoding="utf-8")
    print(f"wrote {len(files)} files", file=sys.stderr)
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
