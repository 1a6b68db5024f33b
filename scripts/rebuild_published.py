#!/usr/bin/env python3
"""Rebuild the collection `published` from the public inputs named in each record.

    python3 scripts/rebuild_published.py                    write spectra_library/published
    python3 scripts/rebuild_published.py --check            compare with what is there, change nothing, exit 1 on a difference
    python3 scripts/rebuild_published.py --reference DIR    where the inputs lie (default ../shared/reference)

Inputs, in DIR:
    methylene-blue-series/dilution_series_absorbance.csv    M. Weber-Shirk, Cornell University, course CEE 4530, standards file (MIT)
    haemoglobin/hb-oxy-prahl.csv, hb-deoxy-prahl.csv        S. Prahl's compilation as carried by the package mne (BSD-3)
    pah/*.csv                                               Province of British Columbia, bcgov/pahwq (Apache-2.0)

It makes the environment it needs, as scripts/demo.py does.
"""

from __future__ import annotations

import argparse
import csv
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
TARGET = ROOT / "spectra_library" / "published"

METHYLENE_BLUE_G_PER_MOL = 319.85  # anhydrous chloride; the trihydrate weighs 373.90
#: Below 240 nm absorbance over concentration changes by a quarter to severalfold from 1 to 5 mg/L; above 750 nm only an offset is left.
METHYLENE_BLUE_NM = (240, 750)
HAEMOGLOBIN_G_PER_MOL = 64500.0

AROMATICS = {
    "naphthalene": ("91-20-3", "C10H8", 128.17),
    "acenaphthene": ("83-32-9", "C12H10", 154.21),
    "acenaphthylene": ("208-96-8", "C12H8", 152.19),
    "fluorene": ("86-73-7", "C13H10", 166.22),
    "phenanthrene": ("85-01-8", "C14H10", 178.23),
    "anthracene": ("120-12-7", "C14H10", 178.23),
    "9-methylanthracene": ("779-02-2", "C15H12", 192.26),
    "fluoranthene": ("206-44-0", "C16H10", 202.25),
    "pyrene": ("129-00-0", "C16H10", 202.25),
    "1-methylpyrene": ("2381-21-7", "C17H12", 216.28),
    "benzo-a-anthracene": ("56-55-3", "C18H12", 228.29),
    "chrysene": ("218-01-9", "C18H12", 228.29),
    "benzo-b-fluoranthene": ("205-99-2", "C20H12", 252.31),
    "benzo-k-fluoranthene": ("207-08-9", "C20H12", 252.31),
    "benzo-a-pyrene": ("50-32-8", "C20H12", 252.31),
    "benzo-e-pyrene": ("192-97-2", "C20H12", 252.31),
    "perylene": ("198-55-0", "C20H12", 252.31),
    "benzo-ghi-perylene": ("191-24-2", "C22H12", 276.33),
    "indeno-123-cd-pyrene": ("193-39-5", "C22H12", 276.33),
    "dibenzo-ah-anthracene": ("53-70-3", "C22H14", 278.35),
    "carbazole": ("86-74-8", "C12H9N", 167.21),
    "acridine": ("260-94-6", "C13H9N", 179.22),
}

TITLES = {
    "9-methylanthracene": "9-Methylanthracene",
    "1-methylpyrene": "1-Methylpyrene",
    "benzo-a-anthracene": "Benz[a]anthracene",
    "benzo-b-fluoranthene": "Benzo[b]fluoranthene",
    "benzo-k-fluoranthene": "Benzo[k]fluoranthene",
    "benzo-a-pyrene": "Benzo[a]pyrene",
    "benzo-e-pyrene": "Benzo[e]pyrene",
    "benzo-ghi-perylene": "Benzo[ghi]perylene",
    "indeno-123-cd-pyrene": "Indeno[1,2,3-cd]pyrene",
    "dibenzo-ah-anthracene": "Dibenz[a,h]anthracene",
}

#: Published values of haemoglobin: (wavelength nm, value per tetramer, source).
ASSENDELFT = "van Assendelft, Spectrophotometry of Haemoglobin Derivatives (1970), per haem x 4, as quoted in an open workbook"
ZIJLSTRA = "Zijlstra et al., Clin. Chem. 37 (1991) 1633, per haem x 4, as quoted in an open workbook"
OXY_POINTS = [
    (415.0, 524000.0, ASSENDELFT),
    (542.0, 57480.0, ASSENDELFT),
    (542.0, 57760.0, ZIJLSTRA),
    (560.0, 33880.0, ASSENDELFT),
    (577.0, 61480.0, ASSENDELFT),
    (577.0, 61600.0, ZIJLSTRA),
]
DEOXY_POINTS = [(431.0, 560000.0, ASSENDELFT), (554.0, 51360.0, ZIJLSTRA), (555.0, 52160.0, ASSENDELFT)]
#: How each table compares with them, worked out from these points and the published minimum at 476.5 nm (13124 per tetramer).
OXY_SCALE = (
    "Against van Assendelft (1970) and Zijlstra et al. (1991) the bands at 542 and 577 nm lie 7 to 10 % low, the Soret band agrees"
)
DEOXY_SCALE = (
    "Against van Assendelft (1970) and Zijlstra et al. (1991) the band at 555 nm lies 5 to 6 % high, the minimum at 476 nm 12 % high and "
    "the Soret band 4 % low"
)
OPPOSITE = (
    "; no uncertainty is stated by the source. In the visible the oxy and deoxy tables depart in opposite directions, so that a ratio of the "
    "two forms is further off than either."
)
#: Values of aromatics that are often quoted: (value, source). Solvents shift these bands by 1 to 3 nm, so each is compared at the
#: record's own maximum.
QUOTED = "photochemistry literature, in cyclohexane, from memory; compared at the record's own maximum, as solvents shift the band"
AROMATIC_POINTS = {
    "anthracene": (9700.0, f"9 700 at 356 nm: {QUOTED}"),
    "pyrene": (54000.0, f"54 000 at 335 nm: {QUOTED}"),
    "perylene": (38500.0, f"38 500 at 436 nm: {QUOTED}"),
}
ISOSBESTIC = [(500.1, 20915.0), (529.2, 38448.0), (545.3, 50691.0), (570.2, 44916.0), (584.1, 34264.0), (796.8, 795.0)]


@dataclass
class Entry:
    """Both files of a record, as text."""

    name: str
    toml: list[str]
    rows: list[list[str]] = field(default_factory=list)

    def files(self) -> dict[str, str]:
        csv_text = "".join(",".join(row) + "\n" for row in self.rows)
        return {f"{self.name}.toml": "\n".join(self.toml) + "\n", f"{self.name}.csv": csv_text}


def quoted(text: str) -> str:
    return '"' + text.replace("\\", "\\\\").replace('"', '\\"') + '"'


def section(title: str, values: dict[str, object]) -> list[str]:
    lines = ["", title] if title else []
    for key, value in values.items():
        lines.append(
            f"{key} = {quoted(value) if isinstance(value, str) else str(value).lower() if isinstance(value, bool) else value}"
        )
    return lines


def points(items: list[tuple[float, float, float, str, bool]]) -> list[str]:
    lines: list[str] = []
    for wavelength, value, tolerance, source, from_memory in items:
        lines += section(
            "[[check_points]]",
            {"wavelength_nm": wavelength, "value": value, "tolerance": tolerance, "source": source, "from_memory": from_memory},
        )
    return lines


def table(path: Path) -> list[list[str]]:
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.reader(file))


def methylene_blue(reference: Path) -> Entry:
    rows = table(reference / "methylene-blue-series" / "dilution_series_absorbance.csv")
    values = np.array([[float(cell) for cell in row] for row in rows[1:]])
    keep = (values[:, 0] >= METHYLENE_BLUE_NM[0]) & (values[:, 0] <= METHYLENE_BLUE_NM[1])
    wavelength, blank, standards = values[keep, 0], values[keep, 1], values[keep, 2:]
    c = np.arange(1, 6) * 1e-3 / METHYLENE_BLUE_G_PER_MOL  # mol/L
    A = standards - blank[:, None]
    slope = A @ c / (c @ c)
    residual = A - slope[:, None] * c
    slope_u = np.sqrt((residual**2).sum(axis=1) / (len(c) - 1) / (c @ c))
    body = [[f"{w:.0f}", f"{e:.1f}", f"{u:.1f}"] for w, e, u in zip(wavelength, slope, slope_u, strict=True)]
    toml = section(
        "",
        {
            "schema": "record/1",
            "name": "methylene-blue",
            "title": "Methylene blue (methylthioninium chloride) in water, 1 to 5 mg/L",
            "formula": "C16H18ClN3S",
            "cas": "61-73-4",
            "molar_mass_g_per_mol": METHYLENE_BLUE_G_PER_MOL,
            "basis": "molar",
            "scale_relative_u": 0.17,
            "scale_relative_u_reason": "The weighed dye is taken as the anhydrous chloride; were it the trihydrate, every value would be 1.169 "
            "times higher. Purity and stock uncertainty are not stated, and the value at 664 nm lies 10 % below one published table and "
            "30 % below the monomer value usually quoted. One standard uncertainty is set to the size of the hydrate question.",
            "caution": "Aggregates in water: shape and absorptivity depend on concentration. For quantitative work measure your own lot.",
        },
    )
    toml += section("[conditions]", {"solvent": "water", "note": "pH, temperature and bandwidth are not stated"})
    toml += section(
        "[linear_range]",
        {
            "linear_to": 1.56e-05,
            "reason": "Highest standard of the series (5 mg/L, 1 cm). Fitted from 500 to 720 nm with this record, the five standards come "
            "back as 0.96, 1.96, 3.05, 3.99 and 5.00 mg/L; at 664 nm absorbance over concentration is constant within 4 %. The shape is not "
            "constant: from 1 to 5 mg/L the shoulder at 610 nm rises by 17 % against the maximum (dimerisation) and residuals reach 20 mAU, "
            "far above the noise of about 0.5 mAU, so that the record is a mean over that range and a fit at its ends shows a structured residual.",
        },
    )
    toml += section(
        "[source]",
        {
            "citation": "M. Weber-Shirk, Cornell University, course CEE 4530 (environmental engineering laboratory), methylene blue standards file",
            "link": "not known: the course repository of the citation",
            "licence": "MIT",
            "obtained": "blank and standards of 1, 2, 3, 4 and 5 mg/L, 1 cm, 190 to 820 nm in 2 nm steps",
            "changed": "blank subtracted; slope through zero by least squares over five standards at each wavelength, with its standard "
            "uncertainty from the residuals (4 degrees of freedom; they hold the change of shape and are alike at neighbouring wavelengths); "
            "mg/L to mol/L with 319.85 g/mol; cut to 240 to 750 nm: below, absorbance over concentration changes by a quarter to severalfold "
            "from 1 to 5 mg/L; above, only an offset of up to 6 mAU is left, which does not follow concentration and was not taken off",
        },
    )
    at_664 = float(slope[wavelength == 664][0])
    toml += points(
        [
            (
                664.0,
                74028.0,
                11000.0,
                "S. Prahl, table of methylene blue in water at 10 umol/L (apparent value, partly dimerised)",
                False,
            ),
            (664.0, round(at_664, 1), 1.0, "this series, slope at 664 nm: guards against copying errors", False),
        ]
    )
    return Entry("methylene-blue", toml, [["wavelength_nm", "molar_absorptivity", "absorptivity_u"], *body])


def haemoglobin(reference: Path, name: str, file: str, scale: str, published: list[tuple[float, float, str]]) -> Entry:
    rows = table(reference / "haemoglobin" / file)
    toml = section(
        "",
        {
            "schema": "record/1",
            "name": name,
            "title": f"{name.capitalize()}, per tetramer",
            "molar_mass_g_per_mol": HAEMOGLOBIN_G_PER_MOL,
            "basis": "molar",
            "scale_relative_u": 0.08,
            "scale_relative_u_reason": scale + OPPOSITE,
            "analyte": "haemoglobin",
            "caution": "Not for diagnosis. Absorptivity per tetramer (four haem groups): divide by 4 for values per haem.",
        },
    )
    toml += section(
        "[conditions]",
        {"solvent": "water", "note": "haemoglobin in water as compiled; pH, temperature and bandwidth are not stated"},
    )
    toml += section(
        "[source]",
        {
            "citation": "S. Prahl, Optical Absorption of Hemoglobin (compilation from W. B. Gratzer and N. Kollias), as carried by the "
            "package mne (mne/data/extinction_coef.mat)",
            "link": "https://omlc.org/spectra/hemoglobin/",
            "licence": "BSD-3-Clause (of the package mne)",
            "obtained": "table of 250 to 1000 nm in 2 nm steps, molar absorptivity per tetramer in L mol-1 cm-1",
            "changed": "nothing",
        },
    )
    checks = [(w, v, round(0.12 * v, 1), source, False) for w, v, source in published]
    own = "isosbestic point computed from the same table: guards against copying errors, not an independent value"
    checks += [(w, v, round(0.01 * v, 1), own, False) for w, v in ISOSBESTIC]
    return Entry(name, toml + points(checks), [["wavelength_nm", "molar_absorptivity"], *rows[1:]])


def aromatic(reference: Path, name: str) -> Entry:
    cas, formula, mass = AROMATICS[name]
    rows = table(reference / "pah" / f"{name}.csv")[1:]
    top = max(rows, key=lambda row: float(row[1]))
    value = float(top[1])
    toml = section(
        "",
        {
            "schema": "record/1",
            "name": name,
            "title": TITLES.get(name, name.capitalize()),
            "formula": formula,
            "cas": cas,
            "molar_mass_g_per_mol": mass,
            "basis": "molar",
            "scale_relative_u": 0.10,
            "scale_relative_u_reason": "The table comes without an uncertainty. Taken as 10 %, the judgement of this project: compiled from "
            "two atlases, solvent not stated, and solvents and bandwidth change the height of such sharp bands by that much.",
            "caution": "Hazardous: polycyclic aromatic compounds include proven carcinogens. Follow the safety data sheet and local rules.",
        },
    )
    toml += section(
        "[conditions]", {"note": "solvent, temperature and bandwidth are not stated; fine structure depends on all three"}
    )
    toml += section(
        "[source]",
        {
            "citation": "Karcher et al., Spectral Atlas of Polycyclic Aromatic Compounds (1985) and Friedel & Orchin, Ultraviolet Spectra of "
            "Aromatic Compounds (1952), as digitised by the Province of British Columbia in bcgov/pahwq",
            "link": "https://github.com/bcgov/pahwq",
            "licence": "Apache-2.0",
            "obtained": "table of molar absorptivity in L mol-1 cm-1, 280 to 500 nm at most",
            "changed": "nothing",
        },
    )
    guard = "highest value of the source table: guards against copying errors, not an independent value"
    checks = [(float(top[0]), value, round(0.001 * value, 2), guard, False)]
    if name in AROMATIC_POINTS:
        quoted_value, source = AROMATIC_POINTS[name]
        checks.append((float(top[0]), quoted_value, round(0.15 * quoted_value, 1), source, True))
    return Entry(name, toml + points(checks), [["wavelength_nm", "molar_absorptivity"], *rows])


def collection_toml() -> str:
    return (
        "\n".join(
            section(
                "",
                {
                    "schema": "collection/1",
                    "name": "published",
                    "title": "Published spectra",
                    "description": "Methylene blue, oxy- and deoxyhaemoglobin and 22 aromatic compounds from open sources; see each record.",
                    "invented": False,
                },
            )
        )
        + "\n"
    )


def build(reference: Path) -> dict[str, bytes]:
    """Return the bytes of every file of the collection by name."""
    entries = [
        methylene_blue(reference),
        haemoglobin(reference, "oxyhaemoglobin", "hb-oxy-prahl.csv", OXY_SCALE, OXY_POINTS),
        haemoglobin(reference, "deoxyhaemoglobin", "hb-deoxy-prahl.csv", DEOXY_SCALE, DEOXY_POINTS),
        *(aromatic(reference, name) for name in AROMATICS),
    ]
    files = {"collection.toml": collection_toml()}
    for entry in entries:
        files.update(entry.files())
    return {name: text.encode("utf-8") for name, text in files.items()}


def main() -> int:
    """Write or compare; return the exit code."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--reference", type=Path, default=ROOT.parent / "shared" / "reference", help="folder of the inputs")
    parser.add_argument("--check", action="store_true", help="compare and change nothing")
    options = parser.parse_args()
    if not options.reference.is_dir():
        parser.error(f"the inputs are not at {options.reference}: give their folder with --reference")
    files = build(options.reference)
    if options.check:
        here = {path.name: path.read_bytes() for path in TARGET.iterdir()}
        different = sorted(name for name in files.keys() | here.keys() if files.get(name) != here.get(name))
        print("\n".join(f"differs: {name}" for name in different) or f"{len(files)} files agree")
        return 1 if different else 0
    TARGET.mkdir(parents=True, exist_ok=True)
    for name, content in files.items():
        (TARGET / name).write_bytes(content)
    print(f"wrote {len(files)} files to {TARGET.relative_to(ROOT)}", file=sys.stderr)
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
