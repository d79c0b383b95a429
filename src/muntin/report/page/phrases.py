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


def chance(value: float) -> str:
    """Return a probability with two decimals, never rounded to a certainty that it is not."""
    if 0.0 < value < 0.005:
        return "< 0.01"
    return "> 0.99" if 0.995 < value < 1.0 else f"{value:.2f}"


def measure(value: float) -> str:
    """Return a reading or a mean with three significant digits."""
    return f"{value:.3g}" if abs(value) < 1000 else f"{value:.0f}"
