"""Help: every command lists every option and says what it takes."""

from __future__ import annotations

import os
import subprocess
import sys
from collections.abc import Iterator
from typing import Any, get_type_hints

import pytest
import typer.main

from tinctor.cli.main import app
from tinctor.cli.resolve import resolve


def walk(command: Any, path: tuple[str, ...] = ()) -> Iterator[tuple[tuple[str, ...], Any]]:
    yield path, command
    for name, below in getattr(command, "commands", {}).items():
        yield from walk(below, (*path, name))


COMMANDS = dict(walk(typer.main.get_command(app)))


def help_of(*path: str) -> str:
    done = subprocess.run(
        [sys.executable, "-m", "tinctor", *path, "--help"], capture_output=True, env={**os.environ, "COLUMNS": "240"}, check=False
    )
    assert done.returncode == 0
    assert done.stderr == b""
    return done.stdout.decode()


def test_the_commands_are_those_of_the_contract_so_far() -> None:
    assert set(COMMANDS) == {
        (),
        ("resolve",),
        ("overlap",),
        ("wavelengths",),
        ("dilution",),
        ("standards",),
        ("determine",),
        ("mixtures",),
        ("transfer",),
        ("library", "add"),
        ("json",),
        ("schema",),
        ("library",),
        ("library", "list"),
        ("library", "show"),
        ("library", "check"),
    }


@pytest.mark.parametrize("path", COMMANDS, ids=" ".join)
def test_help_lists_every_option_with_its_help(path: tuple[str, ...]) -> None:
    text = help_of(*path)
    for parameter in COMMANDS[path].params:
        words = getattr(parameter, "help", None)
        assert words, f"{parameter.name} says nothing"
        for name in parameter.opts if parameter.opts[0].startswith("-") else [parameter.name or ""]:
            assert name in text
        assert " ".join(words.split()[:4]) in text


def test_quantities_are_named_with_their_unit_or_are_pure_numbers() -> None:
    pure = {"absorbance_limit", "noise_floor", "noise_transmittance", "coverage", "target_relative_u", "ph"}
    pure |= {"dilution_factor", "dilution_factor_u"}
    numbers = {name for name, kind in get_type_hints(resolve).items() if "float" in str(kind)}
    assert pure < numbers
    for name in sorted(numbers - pure):
        assert name.endswith(("_nm", "_cm", "_c")), name


def test_help_of_resolve_ends_with_examples_that_are_whole_lines() -> None:
    text = help_of("resolve")
    examples = [line.strip() for line in text.partition("Examples:")[2].splitlines() if line.strip()]
    assert len(examples) >= 3
    assert all(line.startswith("tinctor resolve ") for line in examples)
    for code in (
        "0 done",
        "1 fault of the tool",
        "2 usage",
        "3 input refused",
        "4 nothing could be determined",
        "5 done with flags",
    ):
        assert code in text
