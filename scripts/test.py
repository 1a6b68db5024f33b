#!/usr/bin/env python3
"""Set up everything the tests need in a virtual environment of their own, and run them.

    python3 scripts/test.py                  all tests
    python3 scripts/test.py -k blank -x      arguments go to pytest

Needs Python 3.11 or later and, the first time, a package index to install from.
"""

from __future__ import annotations

import argparse
import subprocess
import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parent))
from environment import ROOT, python_with_tinctor


def main() -> int:
    """Run pytest; return its exit code."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--setup-only", action="store_true", help="make the environment and stop")
    options, arguments = parser.parse_known_args()
    python = python_with_tinctor(extra="dev")
    if options.setup_only:
        return 0
    return subprocess.run([str(python), "-m", "pytest", *arguments], cwd=ROOT, check=False).returncode


if __name__ == "__main__":
    raise SystemExit(main())
