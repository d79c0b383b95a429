"""Plate lines (rows or columns) shared out among the stocks that feed them."""

from bisect import bisect_left
from collections.abc import Hashable, Iterator, Mapping, Sequence

import numpy as np

_MAX_DEAD_ENDS = 20_000


def share_lines(
    free: Sequence[int], demand: Mapping[Hashable, int], rng: np.random.Generator
) -> dict[Hashable, tuple[int, ...]]:
    """Give every stock the lines it feeds, no line to two stocks.

    Each stock gets no more lines than it needs: without any one of them its wells would not
    fit. Lines with equally many free wells are dealt at random.

    Parameters
    ----------
    free
        Number of free wells on each line.
    demand
        Number of wells that each stock needs, at least 1.
    rng
        Decides which of several like lines a stock gets.

    Returns
    -------
    dict
        The positions in `free` of each stock's lines. Lines left over belong to no stock.

    Raises
    ------
    ValueError
        If no such sharing is found.
    """
    by_size: dict[int, list[int]] = {}
    for line in rng.permutation(len(free)):
        if free[line] > 0:
            by_size.setdefault(free[line], []).append(int(line))
    sizes = sorted(by_size)
    stocks = sorted(demand, key=lambda stock: -demand[stock])
    needs = [demand[stock] for stock in stocks]
    covers = _share(tuple(len(by_size[size]) for size in sizes), sizes, needs, set())
    if covers is None:
        raise ValueError(
            f"{len(stocks)} stocks need {', '.join(map(str, needs))} wells and no two may share "
            f"a line; the lines have {', '.join(str(n) for n in free if n)} free wells"
        )
    return {
        stock: tuple(by_size[sizes[k]].pop() for k in cover)
        for stock, cover in zip(stocks, covers, strict=True)
    }


def _share(
    counts: tuple[int, ...],
    sizes: Sequence[int],
    needs: Sequence[int],
    dead: set[tuple[int, tuple[int, ...]]],
) -> list[tuple[int, ...]] | None:
    """Search depth first; `counts[k]` lines of `sizes[k]` free wells are still to be had."""
    if not needs:
        return []
    if (len(needs), counts) in dead or len(dead) >= _MAX_DEAD_ENDS:
        return None
    for cover in _covers(counts, sizes, needs[0]):
        left = tuple(n - cover.count(k) for k, n in enumerate(counts))
        rest = _share(left, sizes, needs[1:], dead)
        if rest is not None:
            return [cover, *rest]
    dead.add((len(needs), counts))
    return None


def _covers(
    counts: tuple[int, ...], sizes: Sequence[int], need: int, largest: int | None = None
) -> Iterator[tuple[int, ...]]:
    """Yield the sets of lines that just hold `need` wells, as indices into the rising `sizes`.

    Lines join in falling size and the set ends once it suffices, so no line in it is spare.
    The smallest line that completes a set comes first, then larger ones, then longer sets.
    """
    top = len(sizes) if largest is None else largest + 1
    enough = bisect_left(sizes, need, hi=top)
    for k in range(enough, top):
        if counts[k]:
            yield (k,)
    for k in reversed(range(enough)):
        if counts[k]:
            left = (*counts[:k], counts[k] - 1, *counts[k + 1 :])
            for rest in _covers(left, sizes, need - sizes[k], k):
                yield (k, *rest)
