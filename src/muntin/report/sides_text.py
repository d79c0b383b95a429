"""What gives way first beyond each side of a window's ranges, in one line."""

from __future__ import annotations

from collections.abc import Sequence

from muntin.record.definition import Definition
from muntin.report.words import joined, setting_text
from muntin.window.limiting import Side

_BEYOND = {"low": "below", "high": "above"}
_FAILS = {"low": "too low", "high": "too high"}


def sides_line(definition: Definition, sides: Sequence[Side]) -> list[str]:
    """Return "Gives way first: Recovery, too low, below pH 5.0 (0.84); the range ends at pH 7.5.",
    or nothing where one response alone is judged or there are no ranges.
    """
    if len(definition.judged) < 2 or not sides:
        return []
    labels = {r.name: r.label for r in definition.judged}
    places: dict[str, list[str]] = {}
    for side in sides:
        if side.response is not None and side.probability is not None:
            what = f"{labels[side.response]}, {_FAILS[str(side.fails)]},"
            where = f"{_BEYOND[side.end]} {_setting(definition, side)} ({side.probability:.2f})"
            places.setdefault(what, []).append(where)
    ends = [_setting(definition, side) for side in sides if side.response is None]
    parts = [f"{what} {joined(where)}" for what, where in places.items()]
    told = ["Gives way first: " + "; ".join(parts)] if parts else []
    told += [f"{'the' if parts else 'The'} range ends at {joined(ends)}"] if ends else []
    return ["; ".join(told) + "."]


def _setting(definition: Definition, side: Side) -> str:
    (factor,) = (f for f in definition.factors if f.name == side.factor)
    return setting_text(factor, side.at)
