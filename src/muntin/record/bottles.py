"""Bottles: the stocks of [bench], those that are made for each level of a factor one by one."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from muntin.record.bench import BenchStock
from muntin.record.definition import Definition
from muntin.record.factors import Factor
from muntin.record.tables import NUMBER

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


def bottles_for(definition: Definition, condition: Mapping[str, Any]) -> list[Bottle]:
    """Return the bottles that may go into a condition (held factors, raw units), in the order of
    study.toml: those of its own levels, and no bottle of another pH or choice.
    """
    by_name = {factor.name: factor for factor in definition.factors}
    matched = definition.bench.matched(definition.factors)
    bottles = []
    for stock in definition.bench.stocks:
        bottle = _plain(stock)
        if stock.per is not None:
            bottle = _of_level(stock, by_name[stock.per], condition[stock.per])
        own = [n for n in matched if n in bottle.holds and n in condition]
        if all(alike(by_name[n], bottle.holds[n], condition[n]) for n in own):
            bottles.append(bottle)
    return bottles


def named_bottle(definition: Definition, name: str, told: Mapping[str, Value]) -> Bottle | None:
    """Return the bottle on which a name stands, None where there is none; capitals and blanks do
    not matter. Of a bottle of a level that is `told` (factor and value), the stock's name will do.
    """
    by_name = {factor.name: factor for factor in definition.factors}
    asked = _folded(name)
    for stock in definition.bench.stocks:
        plain = _folded(stock.name)
        if stock.per is None:
            if asked == plain:
                return _plain(stock)
        elif asked == plain and stock.per in told:
            return _of_level(stock, by_name[stock.per], told[stock.per])
        elif asked.startswith(plain):
            factor = by_name[stock.per]
            inside = asked.removeprefix(plain).strip("()").removesuffix(_folded(factor.unit))
            for level in factor.choices or _numbers_in(inside):
                bottle = _of_level(stock, factor, level)
                if _folded(bottle.name) == asked:
                    return bottle
    return None


def tells_bottles(definition: Definition) -> bool:
    """Whether the factors by which bottles are made are there; of a study at fault some are not."""
    return {s.per for s in definition.bench.stocks if s.per is not None} <= {
        *definition.factor_names
    }


def bottle_examples(definition: Definition) -> list[str]:
    """Return what stands on the bottles, of those that are made by level on the lowest one's."""
    by_name = {factor.name: factor for factor in definition.factors}
    return [
        stock.name
        if stock.per is None
        else _of_level(stock, by_name[stock.per], by_name[stock.per].levels()[0]).name
        for stock in definition.bench.stocks
    ]


def _numbers_in(text: str) -> Iterator[float]:
    """The numbers with which a text may end, the longest first."""
    for start in range(len(text)):
        if NUMBER.fullmatch(text[start:]):
            yield float(text[start:].replace(",", "."))


def _folded(text: str) -> str:
    return "".join(text.split()).casefold()


def _plain(stock: BenchStock) -> Bottle:
    return Bottle(stock.name, stock.name, dict(stock.holds))


def _of_level(stock: BenchStock, factor: Factor, value: Value) -> Bottle:
    level = factor.named(factor.shown(value))
    name = f"{stock.name} ({f'{level} {factor.unit}'.rstrip()})"
    return Bottle(name, stock.name, {**stock.holds, factor.name: value}, by_level=True)


def alike(factor: Factor, one: Value, other: Value) -> bool:
    """Whether two values of a factor are the same but for rounding."""
    if isinstance(one, str) or isinstance(other, str):
        return one == other
    return abs(one - other) <= 1e-6 * factor.span[2]


def held_part(definition: Definition, condition: Mapping[str, Any]) -> dict[str, Value]:
    """The part of a condition that the liquid of a well sets."""
    held = definition.bench.held
    return {name: condition[name] for name in definition.factor_names if name in held}
