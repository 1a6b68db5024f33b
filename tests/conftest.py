"""Shared fixtures: where the outside reference data are."""

from __future__ import annotations

import os
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]


def reference_folder() -> Path | None:
    """Return the folder of outside reference data, or None where it is absent."""
    place = Path(os.environ.get("TINCTOR_REFERENCE") or ROOT.parent / "shared" / "reference")
    return place if place.is_dir() else None


@pytest.fixture(scope="session")
def reference() -> Path:
    """Return the folder of outside reference data; skip where it is absent."""
    place = reference_folder()
    if place is None:
        pytest.skip("the outside reference data are not here: put them at ../shared/reference or set TINCTOR_REFERENCE")
    return place
