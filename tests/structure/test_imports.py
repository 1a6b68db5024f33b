"""The import rule: imports go down only, and heavy third-party packages have one home each."""

from __future__ import annotations

import ast
import sys
from pathlib import Path

import pytest

SRC = Path(__file__).resolve().parents[2] / "src" / "tinctor"

#: Level of each package: a module may import from lower levels and from its own package, never from a sibling of its level.
ORDER = (
    ("version", "errors"),
    ("units", "arrays"),
    ("axis",),
    ("noise", "spectrum", "component"),
    ("files", "resolve", "pls"),
    ("library", "plan", "standards"),
    ("operations",),
    ("report",),
    ("service",),
    ("cli",),
    ("__main__",),
)
LEVELS = {package: level for level, packages in enumerate(ORDER) for package in packages}

#: Pairs that lie below one another by level, and still must not meet.
FORBIDDEN = {("library", "resolve"), ("library", "pls"), ("plan", "files"), ("standards", "files"), ("resolve", "files")}
DOMAIN = {"spectrum", "component", "noise", "arrays", "axis", "errors", "units", "version"}

#: Third-party packages each package may import.
THIRD_PARTY = {
    "version": set(), "errors": set(), "units": set(), "arrays": {"numpy"}, "axis": {"numpy"}, "noise": {"numpy"},
    "spectrum": {"numpy"}, "component": {"numpy"}, "files": {"numpy"}, "library": {"numpy", "pydantic"},
    "resolve": {"numpy", "threadpoolctl"}, "standards": {"numpy", "scipy"}, "plan": {"numpy"}, "pls": {"numpy", "scipy", "sklearn"},
    "operations": {"numpy", "pydantic", "scipy"},
    "report": {"matplotlib"},
    "cli": {"typer", "click"}, "__main__": set(), "__init__": set(),
}  # fmt: skip

#: Modules that alone may import a package.
ONE_HOME = {
    "threadpoolctl": {"resolve/threads.py"},
    "matplotlib": {"report/charts.py"},
    "scipy": {"standards/distributions.py", "operations/provenance.py", "pls/limits.py"},
    "sklearn": {"pls/train.py"},
}


def modules() -> list[Path]:
    return sorted(SRC.rglob("*.py"))


def package_of(path: Path) -> str:
    parts = path.relative_to(SRC).parts
    return parts[0].removesuffix(".py")


def imported(path: Path) -> list[str]:
    """Return absolute names imported anywhere in a file, function bodies included."""
    names = []
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            names += [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path}: relative import"
            names += [f"{node.module}.{alias.name}" for alias in node.names]
    return names


def edge_fault(package: str, target: str) -> str | None:
    if package in ("__init__", target):
        return None
    if (package, target) in FORBIDDEN:
        return f"{package} must not import {target}"
    if LEVELS[target] < LEVELS[package] or (LEVELS[target] == LEVELS[package] and package in DOMAIN):
        return None
    return f"{package} (level {LEVELS[package]}) imports {target} (level {LEVELS[target]}): imports go down only"


@pytest.mark.parametrize("path", modules(), ids=lambda p: str(p.relative_to(SRC)))
def test_imports_go_down_only_and_third_party_packages_have_their_homes(path: Path) -> None:
    package = package_of(path)
    faults = []
    for name in imported(path):
        top, *rest = name.split(".")
        if top == "tinctor":
            if rest and rest[0] not in ("__version__",):
                faults.append(edge_fault(package, rest[0]))
        elif top not in sys.stdlib_module_names:
            if top not in THIRD_PARTY[package]:
                faults.append(f"{package} must not import {top}")
            home = ONE_HOME.get(top)
            if home and str(path.relative_to(SRC)) not in home:
                faults.append(f"{top} may be imported in {sorted(home)} only")
    assert not [fault for fault in faults if fault]


def test_the_rule_can_fail() -> None:
    assert edge_fault("resolve", "files") is not None
    assert edge_fault("errors", "operations") is not None
    assert edge_fault("cli", "operations") is None


def test_no_file_is_longer_than_400_lines() -> None:
    long = {str(p.relative_to(SRC)): n for p in modules() if (n := len(p.read_text(encoding="utf-8").splitlines())) > 400}
    assert not long


def test_no_function_is_longer_than_60_lines() -> None:
    long = []
    for path in modules():
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
                body = node.body[1:] if ast.get_docstring(node) and len(node.body) > 1 else node.body
                assert node.end_lineno is not None
                length = node.end_lineno - body[0].lineno + 1
                if length > 60:
                    long.append(f"{path.relative_to(SRC)}:{node.lineno} {node.name} {length} lines")
    assert not long
