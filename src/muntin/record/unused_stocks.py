"""Stocks that no well rests on, or not every well that might."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from muntin.record.bottles import alike
from muntin.record.definition import Definition
from muntin.record.factors import Factor
from muntin.record.faults import counted, listed, number
from muntin.record.stock_levels import StockLevels
from muntin.record.stocks import Stock

_NAME_IT = "; if it is a bottle that wells are blended from, name it in the column bottle"


def unused_stocks(
    definition: Definition, stocks: Sequence[Stock], levels: StockLevels, plate: str
) -> Iterator[str]:
    """Yield a sentence on stocks that no row, and on bottles that not every row, rests on as it
    might.
    """
    by_name = {factor.name: factor for factor in definition.factors}
    unused = [stock for j, stock in enumerate(stocks) if not levels.used[:, j].any()]
    for stock in unused:
        if not stock.bottle:
            factor, value = by_name[stock.factor], number(stock.target)
            said = f"no well of {plate} has {factor.name} {value}; the stock is not used"
            more = _NAME_IT if _is_bottle(definition, factor, stock.target) else ""
            yield f"{stock.file}, {stock.where}: {said}{more}"
    for name, lacking in levels.amiss.items():
        file = next(stock.file for stock in stocks if stock.bottle)
        if rows := lacking.get("", set()):
            yield (
                f"{file}: {counted(len(rows), 'well')} of {plate} can be no blend of the bottles "
                f"of study.toml, [bench]: {name} is taken for the target there; what such wells "
                f"measured goes to {name}_measured of the plate table"
            )
        if bottles := sorted(bottle for bottle in lacking if bottle):
            short = set[int]().union(*(lacking[bottle] for bottle in bottles))
            yield (
                f"{file}: {name} is taken for the target in {counted(len(short), 'well')} of "
                f"{plate}, as it is not known what it measured in {listed(bottles, most=4)}"
            )
    idle = [s for j, s in enumerate(stocks) if s in unused and s.bottle and j not in levels.idle]
    if names := [*dict.fromkeys(stock.bottle for stock in idle)]:
        yield (
            f"{idle[0].file}: no well of {plate} is blended from {listed(names, most=4)}; what "
            "was measured there is not used"
        )


def _is_bottle(definition: Definition, factor: Factor, target: float) -> bool:
    """Whether a bottle holds just that of a factor."""
    held = [s.holds.get(factor.name) for s in definition.bench.stocks]
    return any(value is not None and alike(factor, value, target) for value in held)
