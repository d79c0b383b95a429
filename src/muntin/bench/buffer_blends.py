"""Blends of bottles: what pH a well has that is mixed from bottles of one pH and unlike salt.

Each bottle is titrated at its own ionic strength. Activities bend with it, so that what lies
between two bottles is a little off the pH of both.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from muntin.bench.buffer.wanted import shown_ph
from muntin.bench.buffers import buffer_made
from muntin.bench.recipe import Recipe
from muntin.record.definition import Definition
from muntin.record.faults import listed

_WORTH_IT = 0.02


@dataclass(frozen=True, eq=False)
class Blend:
    """A well from bottles: the pH that stands on them, and its parts by stock of the buffers."""

    ph: float
    parts: Mapping[str, float]


def blend_of(ph: float, shares: Mapping[str, float], makings: Mapping[str, Recipe]) -> Blend | None:
    """Return a well of its shares by bottle, None where a bottle has no recipe of its own."""
    parts: dict[str, float] = {}
    for bottle, share in shares.items():
        if bottle not in makings:
            return None
        for stock, part in makings[bottle].parts.items():
            parts[stock] = parts.get(stock, 0.0) + share * part
    return Blend(ph, parts)


def thinned_caution(definition: Definition, mixes: Iterable[Mapping[str, float]]) -> str:
    """Return a sentence where wells are thinned with a bottle that holds no buffer, else "".

    mixes: shares of the volume by stock of study.toml. Where every_mix tells what every mix is to
    hold, what the buffer comes to is the user's own.
    """
    bench = definition.bench
    if not bench.buffers or bench.every_mix or bench.ph_factor is None:
        return ""
    without = {
        stock.name
        for stock in bench.stocks
        if bench.ph_factor != stock.per and bench.ph_factor not in stock.holds
    }
    shares = [1.0 - sum(s for name, s in mix.items() if name in without) for mix in mixes]
    thin = [share for share in shares if share < 1.0 - _WORTH_IT]
    if not thin:
        return ""
    return (
        f"wells thinned with {listed(sorted(without))} hold down to {100.0 * min(thin):.0f} % of "
        "the buffer in the bottles, too little of it to hold the pH: thin with a bottle of the "
        "same buffer"
    )


def blend_cautions(definition: Definition, blends: Iterable[Blend]) -> tuple[str, ...]:
    """Return a sentence where blends come out 0.02 of a pH or more off their bottles, else none.

    Blends above an ionic strength of 0.5 are passed over.
    """
    off = []
    for blend in blends:
        made = buffer_made(definition, blend.parts)
        if made.ph is not None:
            off.append((made.ph - blend.ph, blend.ph, made.salt))
    worst = max(off, key=lambda found: abs(found[0]), default=(0.0, 0.0, 0.0))
    if abs(worst[0]) < _WORTH_IT:
        return ()
    away, ph, salt = worst
    side = "above" if away > 0 else "below"
    factor = next(f for f in definition.factors if f.name == definition.bench.salt_factor)
    amount = f"{factor.label} {factor.shown(round(salt, 6))} {factor.unit}"
    return (
        f"wells between bottles of unlike salt come out up to {abs(away):.2f} {side} the pH of the "
        f"bottles (pH {shown_ph(definition, ph)}, {amount}): measure one of them",
    )
