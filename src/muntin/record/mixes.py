"""Mixes: every way to blend a liquid from the bottles of [bench]."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from muntin.record.blending import blends
from muntin.record.bottles import Bottle, Value, bottles_for
from muntin.record.definition import Definition
from muntin.record.keys import Floats
from muntin.record.volumes import apportioned, pipette_of

# Half a bench step, and a little for rounding.
HALF_STEP = 0.5 + 1e-9


@dataclass(frozen=True, eq=False)
class Mixes:
    """What a liquid may be blended from.

    bottles: those that may go into it. tied: the factors that its bottles have in common, such as
    the pH. asked: what the blend is to hold of all else (raw units). contents (asked, bottles): how
    much of it each bottle holds. shares: the mixes of as few bottles as may be, best first,
    (bottles,) each, sum 1.
    """

    bottles: tuple[Bottle, ...]
    tied: tuple[str, ...]
    asked: Mapping[str, float]
    contents: Floats
    shares: tuple[Floats, ...]


def mixes_of(definition: Definition, held: Mapping[str, Value]) -> Mixes:
    """Return the mixes of the factors that a liquid sets (raw units)."""
    bottles = bottles_for(definition, held)
    matched = definition.bench.matched(definition.factors)
    tied = tuple(name for name in held if name in matched)
    asked = {n: float(v) for n, v in held.items() if n not in matched}
    asked |= definition.bench.every_mix
    rows = [[float(bottle.holds.get(name, 0.0)) for bottle in bottles] for name in asked]
    contents = np.array(rows, dtype=float).reshape(len(asked), len(bottles))
    found = blends(contents, np.array([*asked.values()]))
    shares = tuple(s for s in found if _cover(bottles, s, tied))
    return Mixes(tuple(bottles), tied, asked, contents, shares)


def poured(definition: Definition, mixes: Mixes) -> Floats | None:
    """Return the shares of the mix that is made: the best that the pipette can draw and that comes
    out, in its whole steps, within half a bench step of what is asked; None where none is.
    """
    bench, spans = definition.bench, {f.name: f.span[2] for f in definition.factors if f.continuous}
    if bench.well_ul is None:
        return mixes.shares[0] if mixes.shares else None
    pipette = pipette_of(bench)
    total = pipette.nearest(bench.well_ul)
    for shares in mixes.shares:
        steps = np.array(apportioned(shares.tolist(), total))
        off = np.abs(mixes.contents @ steps / total - np.array([*mixes.asked.values()]))
        most = [HALF_STEP * spans.get(name, np.inf) for name in mixes.asked]
        if (steps[shares > 0] >= pipette.floor).all() and (off <= most).all():
            return shares
    return None


def _cover(bottles: Sequence[Bottle], shares: Floats, names: Sequence[str]) -> bool:
    """Whether each of these factors is set by one of the bottles in a mix."""
    used = [bottle for bottle, share in zip(bottles, shares, strict=True) if share > 0]
    return all(any(name in bottle.holds for bottle in used) for name in names)
