"""Every example in a docstring runs."""

from __future__ import annotations

import doctest
from importlib import import_module
from pathlib import Path

import pytest

SRC = Path(__file__).resolve().parents[2] / "src"
MODULES = sorted(
    ".".join(path.relative_to(SRC).with_suffix("").parts).removesuffix(".__init__")
    for path in (SRC / "tinctor").rglob("*.py")
    if path.name != "__main__.py"
)


@pytest.mark.parametrize("name", MODULES)
def test_examples_run(name: str) -> None:
    results = doctest.testmod(import_module(name), optionflags=doctest.NORMALIZE_WHITESPACE)
    assert results.failed == 0


def test_there_are_examples() -> None:
    assert sum(">>>" in path.read_text(encoding="utf-8") for path in (SRC / "tinctor").rglob("*.py")) > 20
