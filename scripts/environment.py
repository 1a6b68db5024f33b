#!/usr/bin/env python3
"""Make a virtual environment with this checkout installed, once; used by the other scripts.

    python3 scripts/environment.py           make .venv and install tinctor into it
    python3 scripts/environment.py --extra dev    with what tests and checks need

The environment is made anew when pyproject.toml changes.
"""

from __future__ import annotations

import argparse
import hashlib
import os
import subprocess
import sys
import venv
from pathlib import Path

ROOT = Path(__file__).resolve().parents[1]
ENVIRONMENT = ROOT / ".venv"
#: Set in the environment of a script that runs in that environment already.
INSIDE = "TINCTOR_INSIDE_ENVIRONMENT"


def python_with_tinctor(extra: str = "") -> Path:
    """Return the Python of an environment in which this checkout is installed, made if it is not there.

    Parameters
    ----------
    extra
        Optional dependencies to install too, "dev" or none.
    """
    if sys.version_info < (3, 11):  # noqa: UP036  (older Pythons must be told, not fail on syntax later)
        raise SystemExit(f"tinctor needs Python 3.11 or later, found {sys.version.split()[0]}")
    python = ENVIRONMENT / ("Scripts/python.exe" if os.name == "nt" else "bin/python")
    stamp = ENVIRONMENT / f"installed-{extra or 'plain'}"
    digest = hashlib.sha256((ROOT / "pyproject.toml").read_bytes()).hexdigest()
    if python.exists() and stamp.exists() and stamp.read_text() == digest:
        return python
    if not python.exists():
        print(f"making a virtual environment in {ENVIRONMENT.name} ...", file=sys.stderr)
        venv.create(ENVIRONMENT, with_pip=True)
    print("installing tinctor and what it needs (a minute the first time) ...", file=sys.stderr)
    target = f"{ROOT}[{extra}]" if extra else str(ROOT)
    done = subprocess.run(
        [str(python), "-m", "pip", "install", "--quiet", "--disable-pip-version-check", "-e", target], check=False
    )
    if done.returncode:
        raise SystemExit("pip could not install tinctor: see its message above; a package index must be reachable")
    stamp.write_text(digest)
    return python


def inside(extra: str = "") -> None:
    """Go on in the environment's Python: for scripts that need more than the standard library. Returns when already there."""
    if os.environ.get(INSIDE):
        return
    python = str(python_with_tinctor(extra))
    raise SystemExit(subprocess.run([python, *sys.argv], env={**os.environ, INSIDE: "1"}, check=False).returncode)


if __name__ == "__main__":
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--extra", default="", choices=["", "dev"], help="optional dependencies to install")
    print(python_with_tinctor(parser.parse_args().extra))
