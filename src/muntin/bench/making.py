"""What bottles are made from: acid and base forms, salt and water, as far as the study tells."""

from __future__ import annotations

from collections.abc import Mapping

from muntin.bench.buffers import buffer_made, buffer_recipe
from muntin.bench.recipe import Recipe, Refusal
from muntin.record.bottles import Bottle
from muntin.record.definition import Definition


def making_of(definition: Definition, bottle: Bottle) -> Recipe | Refusal | None:
    """Return the recipe of what is in a bottle, or why there is none; None where the study does not
    tell: no [[bench.buffers]], no pH in the bottle, or something of every_mix, whose strength in
    the bottle is the user's own.
    """
    if any(name in bottle.holds for name in definition.bench.every_mix):
        return None
    return buffer_recipe(definition, bottle.holds)


def forms_made(definition: Definition, parts: Mapping[str, float]) -> dict[str, float]:
    """Return what parts of the forms, the salt and water (any amounts in one unit) come out as: pH
    and salt, in the factors' units; without the pH where none can be predicted.
    """
    bench, made = definition.bench, buffer_made(definition, parts)
    out = {}
    if bench.ph_factor is not None and made.ph is not None:
        out[bench.ph_factor] = made.ph
    if bench.salt_factor is not None:
        out[bench.salt_factor] = made.salt
    return out
