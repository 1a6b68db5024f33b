#!/usr/bin/env python3
"""Speed and memory, as ratios taken in one run: one JSON line each.

    python3 scripts/bench.py                 everything (about a minute)
    python3 scripts/bench.py --spectra 20000 a smaller batch

    batch    resolve a batch, complete results (both estimates, covariance, budget, interval, limits, flags), against a loop of
             scipy.optimize.nnls that yields concentrations alone, and against the two bare matrix products A @ K and
             A - C @ K.T over the same data in cache-sized chunks
    cold     `tinctor resolve` of one sample from a cold start, against `python -c "import numpy, pydantic, typer"`
    memory   peak memory that resolving adds, against the input array
    standards a series of 50 standards by 1000 wavelengths to a record (fits, tests, superposition, uncertainties), against
             numpy.polyfit called once for all columns, which yields the lines alone
    overlap  overlap of 6 components by 1000 wavelengths, complete answer, against one numpy.linalg.pinv of the same columns
    choice   the best 8 of 301 wavelengths for 4 components, by each criterion, against plain greedy forward selection: time,
             how much larger greedy's criterion is, and whether the choice was proved to be the best

Needs what the tests need (scripts/test.py --setup-only makes the environment). Machines differ and are noisy: read the ratios.
"""

from __future__ import annotations

import argparse
import json
import os
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parent))
from environment import ROOT, python_with_tinctor

INSIDE = "TINCTOR_BENCH_INSIDE"
WAVELENGTHS, COMPONENTS, REPEATS = 301, 3, 5
NAMES = ("batch", "cold", "memory", "standards", "overlap", "choice")


def best(work: Callable[[], object], repeats: int = REPEATS) -> float:
    """Return the shortest of several wall times, in seconds."""
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        work()
        times.append(time.perf_counter() - start)
    return min(times)


def data(spectra: int):
    """Return (batch, components, K): dye-like spectra of known mixtures, a tenth of them without the first dye."""
    import numpy as np

    from tinctor import Component, SpectrumBatch

    rng = np.random.default_rng(11)
    w = np.linspace(400.0, 700.0, WAVELENGTHS)
    K = np.column_stack([30.0 * np.exp(-0.5 * ((w - centre) / 32.0) ** 2) + 1.0 for centre in (450.0, 530.0, 615.0)])
    dyes = [
        Component(f"dye-{k}", w, K[:, k], basis="mass", absorptivity_u=0.01 + 0 * w, scale_relative_u=0.01)
        for k in range(COMPONENTS)
    ]
    c = rng.uniform(0.0, 0.03, (spectra, COMPONENTS))
    c[rng.uniform(size=spectra) < 0.1, 0] = 0.0
    A = np.empty((spectra, WAVELENGTHS))
    for start in range(0, spectra, 4096):
        part = slice(start, start + 4096)
        A[part] = c[part] @ K.T + 0.0005 * rng.standard_normal((len(c[part]), WAVELENGTHS))
    A.setflags(write=False)
    return SpectrumBatch([str(k) for k in range(spectra)], w, A, path_length_u_cm=0.001), dyes, K


def batch(spectra: int) -> dict[str, object]:
    """Time the batch against the loop and the bare products."""
    from scipy.optimize import nnls

    from tinctor import resolve_batch

    measured, dyes, K = data(spectra)
    A = measured.absorbance

    def loop() -> None:
        for row in A:
            nnls(K, row)

    def bare() -> None:
        for start in range(0, spectra, 256):
            part = A[start : start + 256]
            C = part @ K
            part - C @ K.T

    ours, loop_s, bare_s = best(lambda: resolve_batch(measured, dyes)), best(loop, 2), best(bare)
    return {
        "bench": "batch",
        "spectra": spectra,
        "wavelengths": WAVELENGTHS,
        "components": COMPONENTS,
        "resolve_s": round(ours, 3),
        "nnls_loop_over_resolve": round(loop_s / ours, 2),
        "resolve_over_bare_products": round(ours / bare_s, 1),
        "spectra_per_s": round(spectra / ours),
    }


def cold() -> dict[str, object]:
    """Time one sample from a cold start against the imports alone."""
    python = sys.executable
    # an installed package has its byte code beside it, as numpy has: let the first, untimed run write ours
    environment = {key: value for key, value in os.environ.items() if key != "PYTHONDONTWRITEBYTECODE"}
    sample = ["scripts/demo_data/single.csv", "--library", "palewater-dyehouse", "-c", "hollin-yellow,bramble-red,tarn-blue"]

    def run(*arguments: str) -> Callable[[], object]:
        return lambda: subprocess.run([python, *arguments], cwd=ROOT, env=environment, stdout=subprocess.DEVNULL, check=True)

    run("-m", "tinctor", "resolve", *sample)()
    run("-m", "tinctor", "resolve", *sample, "--format", "json")()
    imports = best(run("-c", "import numpy, pydantic, typer"), 9)
    table = best(run("-m", "tinctor", "resolve", *sample), 9)
    as_json = best(run("-m", "tinctor", "resolve", *sample, "--format", "json"), 9)
    return {
        "bench": "cold",
        "imports_s": round(imports, 3),
        "resolve_json_over_imports": round(as_json / imports, 2),
        "resolve_table_over_imports": round(table / imports, 2),
    }


def memory(spectra: int) -> dict[str, object]:
    """Measure how much the peak resident memory of this fresh process grows over the input array."""
    import resource

    from tinctor import resolve_batch

    measured, dyes, _ = data(spectra)
    resolve_batch(type(measured)(measured.ids[:10], measured.wavelength_nm, measured.absorbance[:10]), dyes)
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024
    result = resolve_batch(measured, dyes)
    after = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024
    assert len(result) == spectra
    size = measured.absorbance.nbytes
    return {
        "bench": "memory",
        "input_mb": round(size / 1e6, 1),
        "input_and_results_over_input": round((size + after - before) / size, 2),
        "whole_process_over_input": round(after / size, 2),
    }


def standards() -> dict[str, object]:
    """Time a series against numpy.polyfit of all its columns at once."""
    import numpy as np

    from tinctor import Spectrum
    from tinctor.standards.characterise import characterise
    from tinctor.standards.series import Standard, series_of

    rng = np.random.default_rng(1)
    w = np.linspace(300.0, 800.0, 1000)
    e = 40.0 * np.exp(-0.5 * ((w - 550.0) / 40.0) ** 2)
    amounts = np.linspace(0.0005, 0.03, 50)
    A = amounts[:, None] * e + 0.0005 * rng.normal(size=(50, 1000))
    scans = [Standard(Spectrum(f"s{k}", w, A[k]), c, 0.002 * c) for k, c in enumerate(amounts.tolist())]
    whole = best(lambda: characterise(series_of(scans)), 20)
    lines = best(lambda: np.polyfit(amounts, A, 1), 20)
    return {
        "bench": "standards",
        "standards": 50,
        "wavelengths": 1000,
        "series_ms": round(1e3 * whole, 1),
        "series_over_polyfit": round(whole / lines, 1),
    }


def _planned(components: int, readings: int):
    """Return a planned sample of dye-like bands."""
    import numpy as np

    from tinctor import Component, planned_sample

    w = np.linspace(400.0, 700.0, readings)
    places = np.linspace(430.0, 670.0, components)
    bands = [30.0 * np.exp(-0.5 * ((w - at) / 28.0) ** 2) + 4.0 * np.exp(-0.5 * ((w - 380.0) / 40.0) ** 2) for at in places]
    dyes = [Component(f"dye-{k}", w, e, basis="mass", scale_relative_u=0.01) for k, e in enumerate(bands)]
    return planned_sample(dyes)


def overlap() -> dict[str, object]:
    """Time the complete answer on overlap."""
    import numpy as np

    from tinctor import overlap as answer

    whole = best(lambda: answer(_planned(6, 1000)), 20)
    columns = np.array(_planned(6, 1000).design.X)
    return {
        "bench": "overlap",
        "components": 6,
        "wavelengths": 1000,
        "overlap_ms": round(1e3 * whole, 1),
        "overlap_over_pinv": round(whole / best(lambda: np.linalg.pinv(columns), 20), 1),
    }


def _greedy(problem, k: int):
    """Add the candidate that improves most, k times; by the determinant of the information until that determines every unknown."""
    import numpy as np

    from tinctor.plan.selection import objectives

    chosen: list[int] = []
    for _ in range(k):
        rest = np.array([i for i in range(problem.n) if i not in chosen])
        sets = np.column_stack([np.tile(np.array(chosen, dtype=int), (rest.size, 1)), rest])
        rows = problem.Z[sets]
        if sets.shape[1] < problem.unknowns:
            information = np.swapaxes(rows, 1, 2) @ rows + 1e-9 * np.eye(problem.unknowns)
            values = -np.linalg.slogdet(information)[1]
        else:
            values = objectives(problem, sets)
        chosen.append(int(rest[np.argmin(values)]))
    return objectives(problem, np.array([chosen]))[0]


def choice(components: int = 4) -> dict[str, object]:
    """Time the search for wavelengths and compare it with greedy selection."""
    from tinctor import WavelengthsAsked
    from tinctor.plan.search import best_set
    from tinctor.plan.selection import CRITERIA, criterion_value
    from tinctor.plan.wavelengths import _problem

    sample, count = _planned(components, 301), max(8, components + 2)
    repeats = 3 if components <= 4 else 1
    result: dict[str, object] = {"bench": "choice", "components": components, "wavelengths": 301, "count": count}
    for criterion in CRITERIA:
        problem = _problem(sample, WavelengthsAsked(criterion=criterion))
        found = best_set(problem, count)
        ours, greedy = (
            best(lambda problem=problem: best_set(problem, count), repeats),
            best(lambda problem=problem: _greedy(problem, count), repeats),
        )
        value = criterion_value(problem, float(_greedy(problem, count))) / criterion_value(problem, found.objective)
        key = criterion.replace("-", "_")
        result |= {f"{key}_s": round(ours, 2), f"{key}_over_greedy": round(ours / greedy, 1)}
        result |= {f"{key}_greedy_value_over_ours": round(value, 3), f"{key}_proved": found.exact}
    return result


def main() -> int:
    """Run each bench in a process of its own and print its line."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--spectra", type=int, default=100_000, help="spectra of the batch (default 100000)")
    parser.add_argument("--components", type=int, default=4, help="components of the bench choice (default 4)")
    parser.add_argument("--only", choices=NAMES, help="one bench")
    options = parser.parse_args()
    if os.environ.get(INSIDE):
        benches = {"batch": lambda: batch(options.spectra), "cold": cold, "memory": lambda: memory(options.spectra)}
        result = {**benches, "standards": standards, "overlap": overlap, "choice": lambda: choice(options.components)}[
            options.only
        ]()
        print(json.dumps(result), flush=True)
        return 0
    python = python_with_tinctor(extra="dev")
    for name in [options.only] if options.only else NAMES:
        command = [str(python), str(Path(__file__).resolve()), "--only", name, "--spectra", str(options.spectra)]
        command += ["--components", str(options.components)]
        subprocess.run(command, cwd=ROOT, env={**os.environ, INSIDE: "1"}, check=True)
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
