"""Standard uncertainties of all results, and what of them a well has alone or the plate shares.

First order (JCGM 100:2008, 5.1.2): u(y)^2 = sum over inputs of (dy/dx u(x))^2. The products
dy/dx u(x) come from complex steps (Squire & Trapp 1998, SIAM Review 40:110), which are as exact as
the arithmetic itself. By Monte Carlo (JCGM 101:2008) the same inputs are drawn, normal ones.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from muntin.assay.absorbance import Shifts
from muntin.assay.inputs import Inputs, results, sources
from muntin.record.assay import Assay

Array = NDArray[Any]
Floats = NDArray[np.float64]

_STEP = 1e-30
_TOGETHER = 500


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Uncertain:
    """One quantity of n wells.

    Parameters
    ----------
    value, own
        Value and the standard uncertainty that each well has alone, shape (n,).
    own_by
        Its parts by source, shape (n,) each; their squares add up to that of `own`.
    reads
        dy/dA u(A) of each fraction's read of the protein, signed, shape (n, J).
    by
        dy/dx u(x) of each input that the plate shares, signed, shape (k, n); `names` their sources.
    """

    value: Floats
    own: Floats
    own_by: dict[str, Floats]
    reads: Floats
    by: Floats
    names: tuple[str, ...]

    @property
    def shared(self) -> Floats:
        """Standard uncertainty by what the plate shares, shape (n,)."""
        return np.sqrt((self.by**2).sum(axis=0))

    @property
    def total(self) -> Floats:
        """Standard uncertainty by all of it, shape (n,)."""
        return np.hypot(self.own, self.shared)

    def shared_by(self) -> dict[str, Floats]:
        """Return the shared part by source, shape (n,) each."""
        every = np.array(self.names)
        return {
            name: np.sqrt((self.by[every == name] ** 2).sum(axis=0))
            for name in dict.fromkeys(self.names)
        }


@dataclass(frozen=True, slots=True)
class Shared:
    """What the wells of a plate share: `scale`, a relative standard uncertainty that multiplies all
    their readings, and `rest`, what is shared beyond it (root mean square, absolute).
    """

    scale: float
    rest: float


def first_order(inputs: Inputs, assay: Assay) -> dict[str, Uncertain]:
    """Return all quantities with their first-order uncertainties."""

    def work(shifts: Shifts) -> dict[str, Array]:
        return results(inputs, assay, shifts)

    value = {name: each.real for name, each in work({}).items()}
    own = [(source, at, effects(work, source, z)) for source, at, z in _own(inputs, assay)]
    shared = [(source, effects(work, source, z)) for source, z in _shared(inputs, assay)]
    return {
        name: _uncertain(
            inputs,
            value[name],
            [(source, at, effect[name]) for source, at, effect in own],
            [(source, effect[name]) for source, effect in shared],
        )
        for name in value
    }


def effects(
    work: Callable[[Shifts], Mapping[str, Array]], source: str, which: Array
) -> dict[str, Floats]:
    """Return dy/dx u(x) of each result of `work` for one input.

    Parameters
    ----------
    work
        Takes shifts of its inputs in standard uncertainties, and lets complex ones pass.
    source
        Name of the input.
    which
        1 where it is moved, 0 elsewhere, in the shape of the input.
    """
    moved = work({source: 1j * _STEP * np.asarray(which)})
    return {name: np.asarray(y).imag / _STEP for name, y in moved.items()}


def _own(inputs: Inputs, assay: Assay) -> Iterator[tuple[str, tuple[int, ...], Floats]]:
    """All wells moved at once: their own errors touch no other well."""
    wells = inputs.shape[0]
    for source, shape in sources(inputs, assay)["own"].items():
        for at in np.ndindex(shape):
            if source == "read" and not inputs.samples.read_sd[:, at[1]].any():
                continue
            which = np.zeros((wells, *shape))
            which[(slice(None), *at)] = 1.0
            yield source, at, which


def _shared(inputs: Inputs, assay: Assay) -> Iterator[tuple[str, Floats]]:
    for source, shape in sources(inputs, assay)["shared"].items():
        for at in np.ndindex(shape):
            sure = {"blank": inputs.blanks.kind_sd, "blank_other": inputs.blanks.other_sd}
            if source in sure and not sure[source][at]:
                continue
            which = np.zeros(shape)
            which[at] = 1.0
            yield source, which


def _uncertain(
    inputs: Inputs,
    value: Floats,
    own: list[tuple[str, tuple[int, ...], Floats]],
    shared: list[tuple[str, Floats]],
) -> Uncertain:
    # A read that is missing moves only what is not known either.
    known = np.isfinite(value)
    parts: dict[str, Floats] = {}
    reads = np.zeros(inputs.shape)
    for source, at, effect in own:
        each = np.where(known, np.nan_to_num(np.broadcast_to(effect, value.shape)), np.nan)
        parts[source] = parts.get(source, np.zeros(len(value))) + each**2
        if source == "read" and at[1] == 0:
            reads[:, at[0]] = each
    names = tuple(source for source, _ in shared)
    effect_of = [np.broadcast_to(effect, value.shape) for _, effect in shared]
    by = np.array([np.where(known, np.nan_to_num(effect), np.nan) for effect in effect_of])
    by = by.reshape(len(shared), len(value))
    return Uncertain(
        value=value,
        own=np.sqrt(sum(parts.values(), np.zeros(len(value)))),
        own_by={name: np.sqrt(part) for name, part in parts.items()},
        reads=reads,
        by=by,
        names=names,
    )


def shared_scale(quantity: Uncertain, wells: NDArray[np.bool_]) -> Shared:
    """Return what the plate shares, parted into a scale error and the rest.

    Each shared input moves the wells by a vector g; its part along the values y is the scale error
    (y.g / y.y), the root sum of squares over inputs that of the plate. NaN where no well is known.

    Parameters
    ----------
    quantity
        A recovery.
    wells
        Wells that count, shape (n,).
    """
    use = wells & np.isfinite(quantity.value)
    y, g = quantity.value[use], quantity.by[:, use]
    if not use.any() or float(y @ y) == 0.0:
        return Shared(float("nan"), float("nan"))
    slopes = g @ y / (y @ y)
    rest = g - slopes[:, None] * y
    return Shared(float(np.sqrt((slopes**2).sum())), float(np.sqrt((rest**2).sum(axis=0).mean())))


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Drawn:
    """One quantity by Monte Carlo, n wells each: mean, standard deviation, 95 % interval (n, 2)."""

    mean: Floats
    sd: Floats
    interval: Floats


def monte_carlo(
    inputs: Inputs,
    assay: Assay,
    draws: int,
    rng: np.random.Generator,
    parts: tuple[str, ...] = ("own", "shared"),
) -> dict[str, Drawn]:
    """Return all quantities from draws of their inputs (JCGM 101:2008, clause 7).

    `parts` says whether own errors, shared ones, or both are drawn.
    """
    rounds: list[dict[str, Array]] = []
    for start in range(0, draws, _TOGETHER):
        count = min(_TOGETHER, draws - start)
        rounds.append(results(inputs, assay, _draw(inputs, assay, count, rng, parts)))
    every = {name: np.concatenate([each[name] for each in rounds]) for name in rounds[0]}
    return {name: _summed_up(values) for name, values in every.items()}


def _draw(
    inputs: Inputs, assay: Assay, count: int, rng: np.random.Generator, parts: tuple[str, ...]
) -> dict[str, Floats]:
    wells, known = inputs.shape[0], sources(inputs, assay)
    drawn = {}
    for part in parts:
        axes = (count, wells) if part == "own" else (count,)
        for source, shape in known[part].items():
            drawn[source] = rng.standard_normal((*axes, *shape))
    return drawn


def _summed_up(values: Array) -> Drawn:
    lost = np.asarray(np.isnan(values).any(axis=0))
    filled = np.where(lost, 0.0, values)
    quantiles = np.quantile(filled, [0.025, 0.975], axis=0).T
    return Drawn(
        mean=np.where(lost, np.nan, filled.mean(axis=0)),
        sd=np.where(lost, np.nan, filled.std(axis=0, ddof=1)),
        interval=np.where(lost[:, None], np.nan, quantiles),
    )
