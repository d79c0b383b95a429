"""What gives way first beyond each side of a window's ranges, or where nothing passes."""

from __future__ import annotations

from collections.abc import Sequence

import pandas as pd

from muntin.record.definition import Definition
from muntin.report.words import joined, setting_text
from muntin.window.assessment import Assessment
from muntin.window.limiting import Side

_BEYOND = {"low": "below", "high": "above"}
_FAILS = {"low": "too low", "high": "too high"}


def sides_line(definition: Definition, sides: Sequence[Side]) -> list[str]:
    """Return "Gives way first: Recovery, too low, below pH 5.0 (0.84 alone); the range ends at
    pH 7.5.", or nothing where one response alone is judged or there are no ranges.
    """
    if len(definition.judged) < 2 or not sides:
        return []
    labels = {r.name: r.label for r in definition.judged}
    places: dict[str, list[str]] = {}
    for side in sides:
        if side.response is not None and side.probability is not None:
            what = f"{labels[side.response]}, {_FAILS[str(side.fails)]},"
            where = f"{_BEYOND[side.end]} {_setting(definition, side)}"
            places.setdefault(what, []).append(f"{where} ({side.probability:.2f} alone)")
    ends = [_setting(definition, side) for side in sides if side.response is None]
    parts = [f"{what} {joined(where)}" for what, where in places.items()]
    told = ["Gives way first: " + "; ".join(parts)] if parts else []
    told += [f"{'the' if parts else 'The'} range ends at {joined(ends)}"] if ends else []
    return ["; ".join(told) + "."]


def least_line(view: Assessment, condition: pd.Series) -> list[str]:
    """Return "There Purity is met least (0.61 alone): it fails by being too low.", or nothing where
    one response alone is judged.
    """
    definition = view.study.definition
    if len([r for r in definition.judged if r.name in view.surfaces]) < 2:
        return []
    there = pd.DataFrame([condition[list(definition.factor_names)]])
    least = view.limiting(there).iloc[0]
    (label,) = (r.label for r in definition.judged if r.name == least["response"])
    fails, alone = _FAILS[str(least["fails"])], f"{least['probability']:.2f}"
    return [f"There {label} is met least ({alone} alone): it fails by being {fails}."]


def _setting(definition: Definition, side: Side) -> str:
    (factor,) = (f for f in definition.factors if f.name == side.factor)
    return setting_text(factor, side.at)
