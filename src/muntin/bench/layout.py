"""Layout: a final well for every row of a plan.

Wells are drawn at random under restrictions, so that a trend over the plate cannot pose as an
effect of a condition: rows fed by one stock share plate lines, controls spread over the plate
and keep apart, repeats of a condition do not lie side by side.
"""

from collections import Counter
from collections.abc import Hashable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from muntin.bench.lines import share_lines
from muntin.bench.wells import normalise, perimeter, well_indices, well_names, well_range

PreparedBy = Literal["well", "row", "column"]

_ATTEMPTS = 20  # layouts drawn before the one with the fewest neighbours is kept
_APART_WEIGHT = 4  # on squared distances: wells of one control lie twice as far apart as others
_LOOSE = -1  # the feed of wells and rows that no stock ties to a line

# Common practice, no source: two blanks, four loads and two wells without resin on a 96-well
# plate, twice as many on a 384-well plate, in the order in which few wells are best spent.
_CONTROLS_BY_WORTH = (
    *("load", "blank", "load", "no_resin"),
    *("blank", "load", "load", "no_resin"),
)
_LARGEST_CONTROL_SHARE = 0.25


def default_controls(plate: int, free: int | None = None) -> dict[str, int]:
    """Return how many wells of each control go onto a plate.

    Common practice, no source: 2 blanks, 4 loads and 2 wells without resin on 96 wells, twice
    as many on 384. On part-used plates controls take at most a quarter of the free wells.

    Parameters
    ----------
    plate
        Size of the plate, 96 or 384 wells.
    free
        Number of free wells; the whole plate if not given.

    Returns
    -------
    dict
        Number of wells for each of the roles `blank`, `load` and `no_resin`.
    """
    room = int(_LARGEST_CONTROL_SHARE * (plate if free is None else free))
    wanted = _CONTROLS_BY_WORTH * (2 if plate == 384 else 1)
    kept = Counter(wanted[:room])
    return {role: kept[role] for role in ("blank", "load", "no_resin")}


def lay_out(
    roles: Sequence[str],
    *,
    plate: int,
    rng: np.random.Generator,
    free_wells: str | Iterable[str] | None = None,
    prepared_by: PreparedBy = "well",
    stocks: Sequence[Hashable] | None = None,
    conditions: Sequence[Hashable] | None = None,
    fixed: Sequence[str | None] | None = None,
) -> tuple[str, ...]:
    """Give every row of a plan its final well.

    Rows that are not `test` keep apart: each goes to the well farthest from those already
    placed (rows of its own kind count as twice as near), and no larger share of them than of
    the free wells lies on the perimeter. Repeats of a condition (or of a role such as `blank`,
    whose rows repeat each other) do not touch, not even at a corner, where that can be avoided.
    All else is left to chance.

    Parameters
    ----------
    roles
        Role of each of n rows: `test`, `bridge`, `reference`, `blank`, `load`, `no_resin` or
        `water`.
    plate
        Size of the plate, 96 or 384 wells.
    rng
        Source of chance; the same state gives the same layout.
    free_wells
        Wells that may be used, as names or as a text such as `"A1:D12"`; all if not given.
    prepared_by
        `row` or `column` where a prepared stock is fed along plate rows or columns: then no
        two stocks share one. Rows without a stock may lie on any line.
    stocks
        Key of the prepared stock of each row, such as its pH level; None for a row without.
        Read only where `prepared_by` is `row` or `column`.
    conditions
        Key of the condition of each row; equal keys are repeats. None for a row without.
    fixed
        Well that a row has already, None for one that is to be found; the others keep to what
        these leave.

    Returns
    -------
    tuple of str
        Well names in the order of `roles`.

    Raises
    ------
    ValueError
        If there are more rows than free wells, if the stocks do not fit on separate lines, if
        fixed wells are not free or given twice, or if `stocks`, `conditions` or `fixed` do not
        match `roles` in length.
    """
    free = _free_names(free_wells, plate)
    if len(roles) > len(free):
        raise ValueError(f"{len(roles)} rows need a well each, but only {len(free)} wells are free")
    needed_by = _per_row(stocks if prepared_by != "well" else None, len(roles), "stocks")
    places = well_indices(free, plate)
    pinned = _pinned(_per_row(fixed, len(roles), "fixed wells"), free, plate)
    feeds, well_feeds = _feeds(needed_by, places, prepared_by, pinned, rng)
    at_perimeter = np.isin(free, list(perimeter(plate)))
    keys = _repeat_keys(roles, _per_row(conditions, len(roles), "conditions"))

    best: list[int] = []
    fewest = len(roles) ** 2
    for _ in range(_ATTEMPTS):
        filling = _Filling(places, at_perimeter, well_feeds, feeds, pinned, rng)
        wells = filling.fill(roles, keys)
        crowding = _crowding(places[wells], roles, keys)
        if crowding < fewest or not best:
            best, fewest = wells.tolist(), crowding
        if fewest == 0:
            break
    return tuple(free[well] for well in best)


def _free_names(free_wells: str | Iterable[str] | None, plate: int) -> tuple[str, ...]:
    if free_wells is None:
        return well_names(plate)
    if isinstance(free_wells, str):
        return well_range(free_wells, plate)
    chosen = {normalise(name, plate) for name in free_wells}
    return tuple(name for name in well_names(plate) if name in chosen)


def _per_row(values: Sequence[Hashable] | None, n: int, name: str) -> Sequence[Hashable]:
    if values is None:
        return [None] * n
    if len(values) != n:
        raise ValueError(f"{n} roles but {len(values)} {name}")
    return values


def _pinned(fixed: Sequence[Hashable], free: Sequence[str], plate: int) -> dict[int, int]:
    """Return the well of each row that has one, as an index into the free wells."""
    names = {row: normalise(str(name), plate) for row, name in enumerate(fixed) if name is not None}
    if len(set(names.values())) < len(names) or not set(names.values()) <= set(free):
        raise ValueError("fixed wells must be free, and each given once")
    return {row: free.index(name) for row, name in names.items()}


def _feeds(
    stocks: Sequence[Hashable],
    places: NDArray[np.int_],
    prepared_by: PreparedBy,
    pinned: Mapping[int, int],
    rng: np.random.Generator,
) -> tuple[NDArray[np.int_], NDArray[np.int_]]:
    """Number the stocks and return the stock of each row and of each free well."""
    demand = Counter(stock for stock in stocks if stock is not None)
    number = {stock: k for k, stock in enumerate(demand)}
    of_rows = np.array([number.get(stock, _LOOSE) for stock in stocks], dtype=int)
    of_wells = np.full(len(places), _LOOSE)
    if not demand:
        return of_rows, of_wells
    lines = places[:, 0 if prepared_by == "row" else 1]
    still_free = np.bincount(lines)
    for row, well in pinned.items():
        still_free[lines[well]] -= 1
        if (stock := stocks[row]) is not None:
            of_wells[lines == lines[well]] = number[stock]
            demand[stock] -= 1
    for line in np.unique(lines[of_wells != _LOOSE]).tolist():
        owner = list(number)[int(of_wells[lines == line][0])]
        demand[owner] -= int(still_free[line])
        still_free[line] = 0
    needs = {stock: count for stock, count in demand.items() if count > 0}
    for stock, own in (share_lines(still_free.tolist(), needs, rng) if needs else {}).items():
        of_wells[np.isin(lines, own)] = number[stock]
    return of_rows, of_wells


def _repeat_keys(roles: Sequence[str], conditions: Sequence[Hashable]) -> list[Hashable]:
    """Return the key by which rows repeat each other: the condition, else the control's role."""
    return [
        (condition,) if condition is not None else (None if role == "test" else role)
        for role, condition in zip(roles, conditions, strict=True)
    ]


@dataclass
class _Filling:
    """One attempt at a layout over the free wells; wells are indices into `places`."""

    places: NDArray[np.int_]  # (wells, 2) plate row and column
    at_perimeter: NDArray[np.bool_]  # (wells,)
    well_feeds: NDArray[np.int_]  # (wells,)
    row_feeds: NDArray[np.int_]  # (rows,)
    pinned: Mapping[int, int]  # well of each row that has one
    rng: np.random.Generator
    empty: NDArray[np.bool_] = field(init=False)
    waiting: NDArray[np.bool_] = field(init=False)
    well_of: NDArray[np.int_] = field(init=False)

    def __post_init__(self) -> None:
        self.empty = np.ones(len(self.places), dtype=bool)
        self.waiting = np.ones(len(self.row_feeds), dtype=bool)
        self.well_of = np.full(len(self.row_feeds), -1)

    def fill(self, roles: Sequence[str], keys: Sequence[Hashable]) -> NDArray[np.int_]:
        """Place all rows: first those that keep apart, then repeats, then the rest.

        Returns the well of each row, shape (rows,).
        """
        for row, well in self.pinned.items():
            self._take(row, well)
        order = [int(row) for row in self.rng.permutation(len(roles)) if self.waiting[row]]
        apart = [row for row in order if roles[row] != "test"]
        apart.sort(key=lambda row: self.row_feeds[row] == _LOOSE)  # stock-bound rows first
        placed = [row for row in self.pinned if roles[row] != "test"]
        quota = int(self.at_perimeter.mean() * len(apart + placed)) if apart else 0
        for row in apart:
            inside = quota <= int(self.at_perimeter[self.well_of[placed]].sum())
            weights = [1 if keys[other] == keys[row] else _APART_WEIGHT for other in placed]
            self._take(row, self._farthest(self._open_to(row), placed, weights, inside=inside))
            placed.append(row)
        count = Counter(key for key in keys if key is not None)
        tests = [row for row in order if roles[row] == "test"]
        tests.sort(key=lambda row: -count[keys[row]])
        for row in tests:
            twins = [r for r in range(len(keys)) if keys[r] == keys[row] and not self.waiting[r]]
            self._take(row, self._clear_of(self._open_to(row), twins if count[keys[row]] else []))
        return self.well_of

    def _open_to(self, row: int) -> NDArray[np.int_]:
        """Return the empty wells this row may have, leaving every stock the wells it needs."""
        feed = self.row_feeds[row]
        allowed = self.empty & (self.well_feeds == feed)
        if feed == _LOOSE:
            for stock in range(int(self.row_feeds.max()) + 1):
                of_stock = self.empty & (self.well_feeds == stock)
                if of_stock.sum() > (self.waiting & (self.row_feeds == stock)).sum():
                    allowed |= of_stock
        return np.flatnonzero(allowed)

    def _farthest(
        self,
        wells: NDArray[np.int_],
        placed: Sequence[int],
        weights: Sequence[int],
        *,
        inside: bool,
    ) -> int:
        """Return the well with the largest weighted distance, off the perimeter if `inside`."""
        off_perimeter = wells[~self.at_perimeter[wells]]
        if inside and len(off_perimeter):
            wells = off_perimeter
        if placed:
            gap = _squared_distances(self.places[wells], self.places[self.well_of[placed]])
            nearest = (gap * np.array(weights)).min(axis=1)
            wells = wells[nearest == nearest.max()]
        return int(self.rng.choice(wells))

    def _clear_of(self, wells: NDArray[np.int_], placed: Sequence[int]) -> int:
        """Return a well that touches none of the placed rows, else the farthest from them."""
        if not placed:
            return int(self.rng.choice(wells))
        gap = _squared_distances(self.places[wells], self.places[self.well_of[placed]])
        nearest = gap.min(axis=1)
        clear = nearest > 2
        return int(self.rng.choice(wells[clear if clear.any() else nearest == nearest.max()]))

    def _take(self, row: int, well: int) -> None:
        self.well_of[row] = well
        self.empty[well] = False
        self.waiting[row] = False


def _squared_distances(a: NDArray[np.int_], b: NDArray[np.int_]) -> NDArray[np.int_]:
    """Return squared distances in pitches, shape (len(a), len(b)); 1 and 2 mean neighbours."""
    squared: NDArray[np.int_] = ((a[:, None, :] - b[None, :, :]) ** 2).sum(axis=2)
    return squared


def _crowding(places: NDArray[np.int_], roles: Sequence[str], keys: Sequence[Hashable]) -> int:
    """Count the neighbouring pairs of rows that should keep apart."""
    touching = np.argwhere(np.triu(_squared_distances(places, places) <= 2, k=1))
    return sum(
        (roles[i] != "test" and roles[j] != "test") or (keys[i] is not None and keys[i] == keys[j])
        for i, j in touching
    )
