"""Transfers: what is drawn from which stock into which well, and what each stock comes to."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from decimal import Decimal

from muntin.record.volumes import Pipette


@dataclass(frozen=True, slots=True)
class Transfer:
    """One draw: so many pipette steps of a stock into a well."""

    stock: str
    well: str
    steps: int


@dataclass(frozen=True, kw_only=True, slots=True)
class Total:
    """What one stock comes to, in µL.

    wells: how many it goes into. listed_ul: the sum of its draws. dead_ul: what stays behind, None
    where [bench] does not say. needed_ul: both together.
    """

    stock: str
    wells: int
    listed_ul: Decimal
    dead_ul: Decimal | None

    @property
    def needed_ul(self) -> Decimal:
        """What has to be there."""
        return self.listed_ul + (self.dead_ul or Decimal(0))


def transfers_of(
    mixes: Mapping[str, Mapping[str, int]], order: Sequence[str]
) -> tuple[Transfer, ...]:
    """Return the draws of wells (well -> stock -> steps), stock by stock in `order`, the wells as
    they are given.
    """
    return tuple(
        Transfer(stock, well, steps[stock])
        for stock in order
        for well, steps in mixes.items()
        if steps.get(stock, 0)
    )


def totals_of(
    transfers: Iterable[Transfer], pipette: Pipette, dead_ul: float | None
) -> tuple[Total, ...]:
    """Return what each stock comes to, in the order in which the stocks are drawn."""
    by_stock: dict[str, list[int]] = {}
    for transfer in transfers:
        by_stock.setdefault(transfer.stock, []).append(transfer.steps)
    dead = None if dead_ul is None else Decimal(repr(float(dead_ul)))
    return tuple(
        Total(stock=stock, wells=len(steps), listed_ul=pipette.ul(sum(steps)), dead_ul=dead)
        for stock, steps in by_stock.items()
    )
