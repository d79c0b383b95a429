"""Bottles: the stocks of [bench], those that are made for each level of a factor one by one."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from muntin.bench.recipe import Condition
from muntin.record.definition import Definition
from muntin.record.factors import Factor

Value = float | str


@dataclass(frozen=True, eq=False)
class Bottle:
    """One bottle.

    name: what stands on it. stock: the name in study.toml. holds: what it holds of which factor
    (raw units). by_level: whether it is one of several that are made for the levels of a factor.
    """

    name: str
    stock: str
    holds: Mapping[str, Value]
    by_level: bool = False


def bottles_for(definition: Definition, condition: Condition) -> list[Bottle]:
    """Return the bottles that may go into a condition (held factors, raw units), in the order of
    study.toml: those of its own levels, and no bottle of another pH or choice.
    """
    by_name = {factor.name: factor for factor in definition.factors}
    matched = definition.bench.matched(definition.factors)
    bottles = []
    for stock in definition.bench.stocks:
        holds: dict[str, Value] = dict(stock.holds)
        name = stock.name
        if stock.per is not None:
            factor = by_name[stock.per]
            holds[stock.per] = condition[stock.per]
            level = factor.named(factor.shown(condition[stock.per]))
            name = f"{stock.name} ({f'{level} {factor.unit}'.rstrip()})"
        own = [n for n in matched if n in holds and n in condition]
        if all(alike(by_name[n], holds[n], condition[n]) for n in own):
            bottles.append(Bottle(name, stock.name, holds, stock.per is not None))
    return bottles


def alike(factor: Factor, one: Value, other: Value) -> bool:
    """Whether two values of a factor are the same but for rounding."""
    if isinstance(one, str) or isinstance(other, str):
        return one == other
    return abs(one - other) <= 1e-6 * factor.span[2]


def held_part(definition: Definition, condition: Condition) -> dict[str, Value]:
    """The part of a condition that the liquid of a well sets."""
    held = definition.bench.held
    return {name: condition[name] for name in definition.factor_names if name in held}
