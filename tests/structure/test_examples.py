"""Every example in README.md and DEVELOPERS.md runs and prints what it says."""

from __future__ import annotations

import doctest
import os
import re
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]
DOCUMENTS = ("README.md", "DEVELOPERS.md")


def blocks(name: str, language: str) -> list[str]:
    text = (ROOT / name).read_text(encoding="utf-8")
    return re.findall(rf"^```{language}\n(.*?)^```", text, flags=re.DOTALL | re.MULTILINE)


def commands(name: str) -> list[tuple[str, str]]:
    """Return (command line, expected output) of each console block."""
    found = []
    for block in blocks(name, "console"):
        for part in re.split(r"^\$ ", block, flags=re.MULTILINE)[1:]:
            command, _, output = part.partition("\n")
            found.append((command, output))
    return found


COMMANDS = [(name, command, output) for name in DOCUMENTS for command, output in commands(name)]


@pytest.mark.parametrize(("name", "command", "output"), COMMANDS, ids=[f"{n}: {c[:60]}" for n, c, _ in COMMANDS])
def test_console_examples_print_what_they_say(name: str, command: str, output: str, tmp_path: Path) -> None:
    line = command.replace("tinctor ", f"{sys.executable} -m tinctor ", 1).replace("response.json", str(tmp_path / "response.json"))
    environment = {key: value for key, value in os.environ.items() if key not in ("COLUMNS", "TINCTOR_LIBRARY")}
    done = subprocess.run(line, shell=True, cwd=ROOT, capture_output=True, text=True, env=environment, check=False)
    assert done.returncode == 0, done.stderr
    assert done.stdout == output


@pytest.mark.parametrize("name", DOCUMENTS)
def test_python_examples_run(name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(ROOT)
    parser, runner = doctest.DocTestParser(), doctest.DocTestRunner(optionflags=doctest.NORMALIZE_WHITESPACE)
    for k, block in enumerate(blocks(name, "python")):
        runner.run(parser.get_doctest(block, {}, f"{name} block {k}", name, 0))
    assert runner.failures == 0


def test_there_are_examples() -> None:
    assert len(COMMANDS) >= 3
    assert blocks("README.md", "python")
