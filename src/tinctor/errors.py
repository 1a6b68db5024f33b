"""What can go wrong, as one tree.

    TinctorError                base of everything the package raises on purpose
    ├── InputError              the caller's data or request cannot be used (exit code 3, status 422)
    │   └── UnreadableFileError a file that cannot be read for certain
    └── UndeterminedError       the input is sound, and nothing could be determined from it (exit code 4)

`InputError` carries every fault found in one input, each with a path into it, so that a caller can mend
them all at once. Catch `TinctorError` to catch everything:

    >>> try:
    ...     raise InputError.single("path-length", "$.spectra[0].path_length_cm", "path length must be above 0 cm, found 0.0")
    ... except TinctorError as error:
    ...     print(error)
    path length must be above 0 cm, found 0.0 [at $.spectra[0].path_length_cm]
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Self

__all__ = ["FAULTS_SHOWN", "Fault", "InputError", "TinctorError", "UndeterminedError", "UnreadableFileError"]

#: At most this many faults are listed; the rest are counted.
FAULTS_SHOWN = 50


@dataclass(frozen=True, slots=True)
class Fault:
    """One thing wrong with an input: a stable code, where it is, what was expected and found, what to do."""

    code: str
    path: str
    message: str
    hint: str = ""

    def __str__(self) -> str:
        where = f" [at {self.path}]" if self.path else ""
        hint = f" ({self.hint})" if self.hint else ""
        return f"{self.message}{where}{hint}"


class TinctorError(Exception):
    """Base of every error that the package raises on purpose."""


class InputError(TinctorError, ValueError):
    """The input cannot be used. `faults` lists everything that was found wrong with it.

    Parameters
    ----------
    faults
        At least one fault.
    """

    def __init__(self, faults: Iterable[Fault]) -> None:
        self.faults: tuple[Fault, ...] = tuple(faults)
        if not self.faults:
            raise AssertionError("an InputError needs at least one fault")
        super().__init__(self.faults)

    @classmethod
    def single(cls, code: str, path: str, message: str, hint: str = "") -> Self:
        """Return the error for one fault."""
        return cls([Fault(code, path, message, hint)])

    def at(self, prefix: str) -> Self:
        """Return the same error with `prefix` put before each fault's path (for example `$.spectra[3]`)."""
        moved = [Fault(f.code, _join(prefix, f.path), f.message, f.hint) for f in self.faults]
        return type(self)(moved)

    @property
    def shown(self) -> Sequence[Fault]:
        """The faults to list: the first `FAULTS_SHOWN`."""
        return self.faults[:FAULTS_SHOWN]

    @property
    def more(self) -> int:
        """How many faults are not listed."""
        return len(self.faults) - len(self.shown)

    def __str__(self) -> str:
        lines = [str(fault) for fault in self.shown]
        if self.more:
            lines.append(f"... and {self.more} more")
        return "\n".join(lines)


class UnreadableFileError(InputError):
    """A file that is damaged, empty, or that could be read in more than one way."""


class UndeterminedError(TinctorError):
    """The input is sound, and nothing could be determined from it."""


def _join(prefix: str, path: str) -> str:
    if not path:
        return prefix
    return prefix + path.removeprefix("$") if path.startswith(("$", ".", "[")) else f"{prefix}.{path}"
