"""Mixing: what one well is mixed from, in whole pipette steps, or why it cannot be."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from muntin.bench.buffers import buffer_recipe
from muntin.bench.making import forms_made, making_of
from muntin.bench.recipe import Condition, Recipe, Refusal
from muntin.record.bottles import Bottle, Value, held_part
from muntin.record.definition import Definition
from muntin.record.faults import listed, number
from muntin.record.mixes import HALF_STEP, Mixes, mixes_of
from muntin.record.volumes import Pipette, apportioned, pipette_of, volume_text


@dataclass(frozen=True, eq=False)
class Mix:
    """What a well is mixed from.

    condition: the factors that the liquid sets (targets, raw units). recipe: shares by bottle.
    steps: pipette steps by bottle, their sum the well's volume; None where [bench] has no well_ul.
    made: what those volumes make of each factor that is blended (raw unit).
    """

    condition: Mapping[str, Value]
    bottles: tuple[Bottle, ...]
    recipe: Recipe
    steps: Mapping[str, int] | None
    made: Mapping[str, float]


class Mixer:
    """Finds the mix of each condition from the stocks of a study; remembers what it found."""

    def __init__(self, definition: Definition) -> None:
        self.definition = definition
        self.pipette: Pipette = pipette_of(definition.bench)
        volume = definition.bench.well_ul
        self.total = None if volume is None else self.pipette.nearest(volume)
        self._by_name = {factor.name: factor for factor in definition.factors}
        self._makings: dict[str, Recipe | Refusal | None] = {}
        self._known: dict[tuple[tuple[str, Value], ...], Mix | Refusal] = {}

    def mix(self, condition: Condition) -> Mix | Refusal:
        """Return the mix of a condition (raw units, factors that the liquid does not set are passed
        over), or why there is none.
        """
        held = held_part(self.definition, condition)
        key = tuple(held.items())
        if key not in self._known:
            self._known[key] = self._mixed(held)
        return self._known[key]

    def works(self, condition: Condition) -> bool:
        """Whether a condition can be mixed."""
        return isinstance(self.mix(condition), Mix)

    def making(self, bottle: Bottle) -> Recipe | Refusal | None:
        """Return the recipe of what is in a bottle, where [[bench.buffers]] tells it."""
        if bottle.name not in self._makings:
            self._makings[bottle.name] = making_of(self.definition, bottle)
        return self._makings[bottle.name]

    def _mixed(self, held: Mapping[str, Value]) -> Mix | Refusal:
        return self._blended(held) if self.definition.bench.stocks else self._from_forms(held)

    def _blended(self, held: Mapping[str, Value]) -> Mix | Refusal:
        """The mix of bottles whose contents add up by volume."""
        mixes = mixes_of(self.definition, held)
        if not all(any(name in bottle.holds for bottle in mixes.bottles) for name in mixes.tied):
            wanted = " and ".join(self._shown(name, held[name]) for name in mixes.tied)
            return Refusal(reason=f"finds no bottle of {wanted}", cause="there is no bottle of it")
        if not mixes.shares:
            return self._out_of_reach(mixes)

        def made(parts: Sequence[float]) -> dict[str, float]:
            mixed = mixes.contents @ np.array(parts, dtype=float) / sum(parts)
            return dict(zip(mixes.asked, mixed.tolist(), strict=True))

        tried = [
            self._measured_out(held, mixes.asked, mixes.bottles, shares.tolist(), made)
            for shares in mixes.shares
        ]
        return next((mix for mix in tried if isinstance(mix, Mix)), tried[0])

    def _from_forms(self, held: Mapping[str, Value]) -> Mix | Refusal:
        """The mix of the acid and base forms of the buffers, their salt and water."""
        recipe = buffer_recipe(self.definition, held)
        if not isinstance(recipe, Recipe):
            return recipe or Refusal(reason="has no recipe")
        bottles = [Bottle(name, name, {}) for name in recipe.parts]
        names = [bottle.name for bottle in bottles]
        asked = {name: float(value) for name, value in held.items()}

        def made(parts: Sequence[float]) -> dict[str, float]:
            return forms_made(self.definition, dict(zip(names, parts, strict=True)))

        shares = [*recipe.parts.values()]
        return self._measured_out(held, asked, bottles, shares, made, recipe.remarks)

    def _measured_out(
        self,
        held: Mapping[str, Value],
        asked: Mapping[str, float],
        bottles: Sequence[Bottle],
        shares: Sequence[float],
        made_of: Callable[[Sequence[float]], dict[str, float]],
        remarks: tuple[str, ...] = (),
    ) -> Mix | Refusal:
        """The mix in whole steps, where its bottles can be made, the pipette can draw it and it
        makes what is asked.
        """
        used = {b: s for b, s in zip(bottles, shares, strict=True) if s > 0}
        for bottle in used:
            if isinstance(making := self.making(bottle), Refusal):
                reason = f"needs {bottle.name}, which {making.reason}"
                return replace(making, reason=reason)
        recipe = Recipe(parts={b.name: s for b, s in used.items()}, remarks=remarks)
        if self.total is None:
            return Mix(held, tuple(used), recipe, None, made_of(shares))
        parts = apportioned(shares, self.total)
        for bottle, share, steps in zip(bottles, shares, parts, strict=True):
            if share > 0 and steps < self.pipette.floor:
                return self._too_little(bottle, share)
        made = made_of(parts)
        for name, value in made.items():
            if name in self._by_name and self._off(name, value, asked[name]):
                return Refusal(
                    reason=f"comes out as {name} {number(float(f'{value:.4g}'))}, more than half a "
                    f"step off, in pipette steps of {volume_text(self.pipette.step)} µL"
                )
        drawn = {b.name: n for b, n in zip(bottles, parts, strict=True) if n}
        return Mix(held, tuple(used), recipe, drawn, made)

    def _off(self, name: str, made: float, asked: float) -> bool:
        """Whether what is made is more than half a bench step off."""
        return abs(made - asked) > HALF_STEP * self._by_name[name].span[2]

    def _too_little(self, bottle: Bottle, share: float) -> Refusal:
        takes = number(round(share * float(self.pipette.ul(self.total or 0)), 2))
        floor = f"the pipette draws no less than {self.pipette.shown(self.pipette.floor)} µL"
        return Refusal(
            reason=f"takes {takes} µL of {bottle.name}; {floor}",
            cause=f"they take less of a bottle than can be drawn: {floor}",
        )

    def _out_of_reach(self, mixes: Mixes) -> Refusal:
        for row, (name, value) in zip(mixes.contents, mixes.asked.items(), strict=True):
            slack = 1e-9 * max(1.0, abs(value))
            if not row.min() - slack <= value <= row.max() + slack:
                span = f"{number(row.min())} to {number(row.max())}"
                holds = f"the bottles for it hold {name} {span}"
                return Refusal(
                    reason=f"is out of reach: {holds}",
                    cause=f"they are out of reach: {holds.replace('for it', 'for them')}",
                )
        names = listed(bottle.name for bottle in mixes.bottles)
        return Refusal(reason=f"is out of reach: no mix of {names} makes all of it at once")

    def _shown(self, name: str, value: Value) -> str:
        return f"{name} {self._by_name[name].shown(value)}"
