"""Parts of a batch result: named arrays whose first axis is the spectrum, put together and written into one another."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from threading import Lock
from typing import Any

import numpy as np

from tinctor.resolve.resolution import FlagCode

__all__ = ["Collector", "Part", "merged_parts", "put_rows", "reordered", "strongest"]

#: Arrays by the name of the `Resolution` field; "severity" is a dict of grades by flag code, "saturated" may be None.
Part = dict[str, Any]


class Collector:
    """A whole batch's arrays, filled block by block from several threads; each writes rows of its own."""

    def __init__(self, n: int) -> None:
        self.n = n
        self.part: Part = {"severity": {}, "saturated": None}
        self._lock = Lock()

    def put(self, rows: slice, part: Part) -> None:
        """Write one block's rows."""
        with self._lock:
            self._make_room(part)
            for code, grades in part["severity"].items():
                self._put_severity(rows, code, grades)
        for name, value in part.items():
            if name != "severity" and value is not None:
                self.part[name][rows] = value

    def _make_room(self, part: Part) -> None:
        for name, value in part.items():
            if name != "severity" and value is not None and self.part.get(name) is None:
                make = np.zeros if name == "saturated" else np.empty
                self.part[name] = make((self.n, *value.shape[1:]), dtype=value.dtype)

    def _put_severity(self, rows: slice, code: FlagCode, grades: np.ndarray) -> None:
        """Write a flag's grades; one that some block raises per component is kept per component for all."""
        severity = self.part["severity"]
        width = grades.shape[1] if grades.ndim == 2 else 0
        present = severity.get(code)
        if present is None or (width and present.ndim == 1):
            severity[code] = _widened(present, self.n, width).copy()
        whole = severity[code]
        whole[rows] = grades[:, None] if whole.ndim > grades.ndim else grades


def merged_parts(parts: Iterable[Part]) -> Part:
    parts = list(parts)
    if len(parts) == 1:
        return parts[0]
    merged: Part = {}
    sizes = [len(part["points"]) for part in parts]
    for name in parts[0]:
        if name == "severity":
            merged[name] = _merged_severity([part[name] for part in parts], sizes)
        elif name == "saturated":
            merged[name] = _merged_masks([part[name] for part in parts], sizes)
        else:
            merged[name] = np.concatenate([part[name] for part in parts])
            for part in parts:
                part[name] = None
    return merged


def _merged_severity(parts: Sequence[dict[FlagCode, np.ndarray]], sizes: Sequence[int]) -> dict[FlagCode, np.ndarray]:
    merged: dict[FlagCode, np.ndarray] = {}
    for code in dict.fromkeys(code for part in parts for code in part):
        width = max((part[code].shape[1] for part in parts if code in part and part[code].ndim == 2), default=0)
        merged[code] = np.concatenate([_widened(part.get(code), n, width) for part, n in zip(parts, sizes, strict=True)])
    return merged


def _widened(grades: np.ndarray | None, n: int, width: int) -> np.ndarray:
    if grades is None:
        return np.zeros((n, width) if width else n, dtype=np.int8)
    return np.tile(grades[:, None], (1, width)) if width and grades.ndim == 1 else grades


def _merged_masks(parts: Sequence[np.ndarray | None], sizes: Sequence[int]) -> np.ndarray | None:
    width = next((part.shape[1] for part in parts if part is not None), None)
    if width is None:
        return None
    return np.concatenate(
        [np.zeros((n, width), dtype=bool) if part is None else part for part, n in zip(parts, sizes, strict=True)]
    )


def reordered(result: Part, order: np.ndarray) -> Part:
    moved: Part = {name: None if value is None else value[order] for name, value in result.items() if name != "severity"}
    moved["severity"] = {code: grades[order] for code, grades in result["severity"].items()}
    return moved


def put_rows(result: Part, rows: np.ndarray, part: Part) -> None:
    """Write a part's rows over those of a result."""
    for name, value in part.items():
        if name in ("severity", "saturated"):
            continue
        if name in ("background_value", "background_u") and value.shape[1] < result[name].shape[1]:
            value = np.column_stack([value, np.zeros(len(value))])
        result[name][rows] = value
    severity: dict[FlagCode, np.ndarray] = result["severity"]
    for code in set(severity) | set(part["severity"]):
        if code == "saturated":
            continue
        width = 0 if all(s[code].ndim == 1 for s in (severity, part["severity"]) if code in s) else result["u"].shape[1]
        grades = _widened(severity.get(code), len(result["points"]), width).copy()
        grades[rows] = _widened(part["severity"].get(code), rows.size, width)
        severity[code] = grades


def strongest(grades: np.ndarray | None, common: np.ndarray, n: int) -> np.ndarray:
    """A flag that is the same for every spectrum, (p,) or scalar, laid over what each has of its own."""
    spread = np.broadcast_to(common, (n, *np.shape(common))).astype(np.int8)
    if grades is None:
        return spread
    width = max(g.shape[1] if g.ndim == 2 else 0 for g in (grades, spread))
    stronger: np.ndarray = np.maximum(_widened(grades, n, width), _widened(spread, n, width))
    return stronger
