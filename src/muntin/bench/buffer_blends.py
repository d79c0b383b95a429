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
