"""Volumes, bottles and protein in the words of the bench."""

from __future__ import annotations

from collections.abc import Mapping
from decimal import Decimal
from typing import Any

from muntin.bench.load import Load
from muntin.record.bottles import Bottle
from muntin.record.definition import Definition
from muntin.record.faults import number
from muntin.record.volumes import volume_text


def volume_ml(volume_ul: Decimal) -> str:
    """Return a volume in mL with every digit that it has: "2.31 mL"."""
    return f"{volume_text(volume_ul / 1000)} mL"


def condition_part(definition: Definition, condition: Mapping[str, Any]) -> str:
    """Return the factors of a condition that are there: "Elution pH 5.4, Elution salt 280 mM"."""
    named = [f for f in definition.factors if f.name in condition]
    return ", ".join(f"{f.named(f.shown(condition[f.name]))} {f.unit}".rstrip() for f in named)


def held_text(definition: Definition, bottle: Bottle) -> str:
    """Return what a bottle holds beyond what its name says: "Elution salt 500 mM"."""
    by_name = {factor.name: factor for factor in definition.factors}
    parts = []
    for name, value in bottle.holds.items():
        factor = by_name.get(name)
        if factor is None:
            parts.append(f"{name} {value if isinstance(value, str) else number(value)}")
        else:
            parts.append(f"{factor.named(factor.shown(value))} {factor.unit}".rstrip())
    return ", ".join(part for part in parts if f"({part})" not in bottle.name)


def protein_line(load: Load, definition: Definition) -> str:
    """Return what protein the plan takes of what there is, in one sentence."""
    left = f"before it {number(round(load.left_mg, 6))} mg are left"
    protein = definition.protein
    if protein is not None and protein.reserved_mg:
        left += f" beyond the reserve of {number(protein.reserved_mg)} mg"
    takes = f"Protein: the wells take {number(round(load.needed_mg, 6))} mg"
    if load.dead_mg:
        takes += f", {number(round(load.dead_mg, 6))} mg stay in the trough"
    return f"{takes}; {left}."
