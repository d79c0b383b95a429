"""Recipes of buffers: acid form, base form, salt and water for one liquid."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from muntin.bench.recipe import Recipe, Refusal
from muntin.record.definition import Definition


def buffer_recipe(definition: Definition, condition: Mapping[str, Any]) -> Recipe | Refusal | None:
    """Return the recipe of one liquid (factors it holds, raw units), why there is none, or None
    where the study declares no buffers.
    """
    if not definition.bench.buffers:
        return None
    return Refusal(reason="has no recipe yet")
