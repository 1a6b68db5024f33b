"""Components of a request, by name or inline, and their units."""

from __future__ import annotations

from collections.abc import Sequence

from tinctor.component import Component
from tinctor.errors import InputError
from tinctor.library import load_collection
from tinctor.operations.shared import ComponentIn, RecordUsed, gather
from tinctor.units import BASE_UNIT, check_unit, conversion_factor

__all__ = ["components_of", "units_of"]


def components_of(choices: Sequence[str | ComponentIn], library: str | None) -> tuple[list[Component], list[RecordUsed]]:
    """Return the components of a request, and the records they rest on.

    Raises
    ------
    InputError
        With the path of each fault in the request.
    """
    by_name = [choice for choice in choices if isinstance(choice, str)]
    if by_name and library is None:
        raise InputError.single(
            "no-library",
            ".library",
            f"components are named ({by_name[0]!r}) and no library is given",
            "name a collection, or give them inline",
        )
    collection = load_collection(library) if by_name and library else None
    records: list[RecordUsed] = []

    def make(choice: str | ComponentIn) -> Component:
        if isinstance(choice, ComponentIn):
            return choice.to_component()
        assert collection is not None
        component = collection.component(choice)
        record = collection.records[choice]
        records.append(RecordUsed(name=choice, record=record.reference, sha256=record.sha256, caution=record.file.caution))
        return component

    parts = [(f".components[{k}]", lambda choice=choice: make(choice)) for k, choice in enumerate(choices)]
    return gather(list(parts)), records


def units_of(unit: str | None, components: list[Component]) -> tuple[tuple[str, ...], tuple[float, ...]]:
    """Return the unit of each component and how many of it make one base unit."""
    if unit is not None:
        check_unit(unit)
    units = tuple(unit or BASE_UNIT[c.basis] for c in components)
    factors = gather(
        [
            ("$", lambda c=c, unit=unit: conversion_factor(c.basis, unit, c.molar_mass_g_per_mol, c.name))
            for c, unit in zip(components, units, strict=True)
        ]
    )
    return units, tuple(factors)
