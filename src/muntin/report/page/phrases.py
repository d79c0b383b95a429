"""Targets, levels and names of sections in plain words."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from muntin.record.definition import Definition
from muntin.record.factors import Factor
from muntin.record.faults import number
from muntin.record.responses import Response
from muntin.report.words import axis_label, joined


def target_text(response: Response) -> str:
    """Return "Recovery at least 0.8", "HCP at most 100 ng/mL" or "Shift -2 to 2"."""
    low, high, unit = response.at_least, response.at_most, f" {response.unit}".rstrip()
    if low is not None and high is not None:
        return f"{response.label} {number(low)} to {number(high)}{unit}"
    if low is not None:
        return f"{response.label} at least {number(low)}{unit}"
    return f"{response.label} at most {number(high)}{unit}" if high is not None else response.label


def targets_text(definition: Definition, without: tuple[str, ...] = ()) -> str:
    """Return the targets of the judged responses, joined; those named in `without` are left out."""
    return joined([target_text(r) for r in definition.judged if r.name not in without])


def heading(thing: Factor | Response) -> str:
    """Return the heading of a column: "Salt (mM)"."""
    return axis_label(thing.label, thing.unit)


def settings(definition: Definition, row: Mapping[Any, Any]) -> tuple[str, ...]:
    """Return the settings of a condition as text, one a factor."""
    return tuple(f.shown(row[f.name]) for f in definition.factors)


def measure(value: float) -> str:
    """Return a reading or a mean with three significant digits, "0.950" and "0.917" alike."""
    return f"{value:#.3g}".removesuffix(".") if abs(value) < 1000 else f"{value:.0f}"


def fixed_name(name: str) -> str:
    """Return a key of [fixed] in words: "elution volume, µL" for elution_volume_ul."""
    words = name.split("_")
    unit = _UNITS.get(words[-1]) if len(words) > 1 else None
    return f"{' '.join(words[:-1])}, {unit}" if unit else " ".join(words)


_UNITS = {"ul": "µL", "ml": "mL", "mg": "mg", "minutes": "min", "mm": "mM"}
