"""How the responses of one well move together beyond what the condition explains."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from muntin.record.study import Study
from muntin.surrogate.covariation import noise_correlation
from muntin.surrogate.fit import Fit, Stack
from muntin.surrogate.reading_law import reading_law
from muntin.window.coded import readings_of

Array = NDArray[np.float64]
Index = NDArray[np.intp]
# With fewer effective wells nothing is said.
_LEAST_WELLS = 4.0
# A correlation known to 0.05 needs no more wells; the cost grows with their cube.
_MOST_WELLS = 384


@dataclass(frozen=True, kw_only=True)
class Together:
    """Two responses by name, in how many wells both were read, and what these tell.

    effective: number of wells less what the fits use up. rho, low, high: correlation of the noise
    of two readings of one well, posterior mean and central 95 % interval; 0 and NaN where fewer
    than four effective wells tell nothing.
    """

    first: str
    second: str
    wells: int
    effective: float
    rho: float
    low: float
    high: float

    @property
    def told(self) -> bool:
        """Whether there are wells enough."""
        return self.effective >= _LEAST_WELLS


def residual_correlations(study: Study, stacks: Mapping[str, Stack]) -> tuple[Together, ...]:
    """The correlation of every two responses that have been read, in their order.

    stacks: fitted to the study's readings, all of them.
    """
    names = [r.name for r in study.definition.responses if r.name in stacks]
    return tuple(_together(study, stacks, pair) for pair in combinations(names, 2))


def correlation_matrix(names: Sequence[str], every: Sequence[Together]) -> Array:
    """Correlations (R, R) of the noise of the responses named, 1 on the diagonal; 0 if not told.

    Estimates of several pairs may contradict each other; then the nearest matrix without a
    negative eigenvalue, scaled back to 1, takes their place.
    """
    R = np.eye(len(names))
    for t in every:
        if t.told and t.first in names and t.second in names:
            i, j = names.index(t.first), names.index(t.second)
            R[i, j] = R[j, i] = t.rho
    values, vectors = np.linalg.eigh(R)
    if values.min(initial=1.0) >= 0.0:
        return R
    R = vectors @ (np.maximum(values, 0.0)[:, None] * vectors.T)
    d = np.sqrt(np.diag(R))
    return R / d[:, None] / d


def _together(study: Study, stacks: Mapping[str, Stack], pair: tuple[str, str]) -> Together:
    responses = {r.name: r for r in study.definition.responses}
    read = [readings_of(study, responses[name]) for name in pair]
    rows = [study.readings(name)["row"].to_numpy() for name in pair]
    exact = [np.flatnonzero(r.censored == 0) for r in read]
    wells = np.intersect1d(rows[0][exact[0]], rows[1][exact[1]])
    unknown = Together(
        first=pair[0],
        second=pair[1],
        wells=len(wells),
        effective=0.0,
        rho=0.0,
        low=np.nan,
        high=np.nan,
    )
    if len(wells) < _LEAST_WELLS:
        return unknown
    if len(wells) > _MOST_WELLS:
        wells = wells[np.linspace(0, len(wells) - 1, _MOST_WELLS).astype(int)]
    laws, places = [], []
    for name, data, row, at in zip(pair, read, rows, exact, strict=True):
        # Where wells are left out for time, those that lack the other response go with them.
        at = at[np.isin(row[at], wells)] if len(wells) == _MOST_WELLS else at
        laws.append(reading_law(_leading(stacks[name]), data, at))
        places.append(_places(row[at], wells))
    found = noise_correlation(laws[0], laws[1], np.stack(places, axis=1))
    unknown = replace(unknown, effective=found.effective)
    if not unknown.told:
        return unknown
    return replace(unknown, rho=found.mean, low=found.low, high=found.high)


def _leading(stack: Stack) -> Fit:
    """The fit of the larger stacking share."""
    return stack.fits[int(np.argmax(stack.shares))]


def _places(rows: Index, wells: Index) -> Index:
    """Position of each well among distinct rows."""
    order = np.argsort(rows)
    return order[np.searchsorted(rows[order], wells)]
