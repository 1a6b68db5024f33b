#!/usr/bin/env python3
"""Set everything up and run the main job on the demonstration samples: a morning in a dye house that does not exist.

    python3 scripts/demo.py

Needs Python 3.11 or later and, the first time, a package index to install from. Everything it reads is invented; see
scripts/demo_data/README.md.
"""

from __future__ import annotations

import argparse
import csv
import io
import subprocess
import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parent))
from environment import ROOT, python_with_tinctor

DATA = "scripts/demo_data"
RESOLVE = [
    "resolve", f"{DATA}/vat-run.csv", "--samples", f"{DATA}/vat-run-samples.csv", "--library", "palewater-dyehouse",
    "-c", "hollin-yellow", "-c", "bramble-red", "-c", "tarn-blue", "--unit", "g/L", "-b", "offset", "-b", "scatter",
]  # fmt: skip

PLANNED = [
    "-l", "palewater-dyehouse", "-c", "hollin-yellow,bramble-red,tarn-blue",
    "--planned", "hollin-yellow=0.8,bramble-red=0.55,tarn-blue=0.6", "--unit", "g/L",
]  # fmt: skip

SERIES = [
    f"{DATA}/standards.csv", "--sheet", f"{DATA}/standards-sheet.csv", "--unit", "mg/L", "--stock-relative-u", "0.004",
]  # fmt: skip


def tinctor(python: Path, *arguments: str, show: bool = True) -> str:
    """Run a command, show it as one would type it, and return what it prints."""
    if show:
        print(f"\n$ tinctor {' '.join(arguments)}", flush=True)
    done = subprocess.run([str(python), "-m", "tinctor", *arguments], cwd=ROOT, text=True, stdout=subprocess.PIPE, check=False)
    if done.returncode:
        raise SystemExit(done.returncode)
    if show:
        print(done.stdout, end="", flush=True)
    return done.stdout


def compare(results: str) -> None:
    """Print how many intervals hold the truth, which for once is known."""
    rows = list(csv.DictReader(io.StringIO(results)))
    with (ROOT / DATA / "truth.csv").open(encoding="utf-8", newline="") as file:
        truth = {row["id"]: row for row in csv.DictReader(file)}
    sound = [row for row in rows if row["status"] == "accepted"]
    inside = sum(
        float(row["interval_low"]) <= float(truth[row["id"]][f"{row['component']}_g_per_L"]) <= float(row["interval_high"])
        for row in sound
    )
    print(f"\nThe baths are invented, so the truth is known: {inside} of {len(sound)} accepted figures hold it in their interval.")
    special = {row["id"]: row["special"] for row in truth.values() if row["special"] != "sound"}
    print("What was wrong with the samples, and what was said:")
    for sample, what in special.items():
        said = dict.fromkeys(flag for row in rows if row["id"] == sample for flag in row["flags"].split())
        print(f"  {sample:<10} {what:<52} {' '.join(said) or '-'}")


def main() -> int:
    """Run the demonstration."""
    argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter).parse_args()
    python = python_with_tinctor()
    tinctor(python, "library", "show", "palewater-dyehouse/tarn-blue")
    print("\nBefore measuring: can the dyes of bath 3 be told apart, and at which dilution?")
    tinctor(python, "overlap", *PLANNED, "--dilution-factor", "50")
    tinctor(python, "dilution", *PLANNED, "--cells-cm", "0.5,1")
    tinctor(python, *RESOLVE)
    compare(tinctor(python, *RESOLVE, "--format", "csv", show=False))
    print("\nA new lot of Tarn Blue, weighed: its record, and three baths of it alone.")
    tinctor(python, "standards", *SERIES, "--name", "tarn-blue-p208")
    tinctor(python, "determine", f"{DATA}/unknowns.csv", "--standards", *SERIES)
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
