"""Bridging wells: an earlier pass and an earlier fail, repeated on every new plate."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import NDArray

from muntin.design.candidates import RunCondition

Array = NDArray[np.float64]
_SURE = 0.95
_LIKELY_FAIL = 0.2


def bridging_conditions(
    run: Sequence[RunCondition],
    p_mean: Array,
    wells: int,
    beside: Callable[[int], NDArray[np.bool_]] | None = None,
) -> list[tuple[int, str]]:
    """Numbers of the run conditions to repeat, one a well, each with "pass" or "fail".

    The pass is the surest one, the fail the one nearest the edge among likely fails, since a
    reading near 0 tells nothing of the load; one that bridged before is kept while it holds.
    With no pass or fail the best and the worst condition stand in. beside: which conditions
    (n,) one plate can hold beside a given one; all where None.
    """
    if not run or wells == 0:
        return []
    old = np.array([r.bridged for r in run])
    sure_pass, likely_fail = p_mean >= _SURE, p_mean <= _LIKELY_FAIL
    passes = _first(old & sure_pass, p_mean, fallback=p_mean)
    fits = np.ones(len(run), dtype=bool) if beside is None else beside(passes)
    rank = np.where(likely_fail, p_mean, -1.0 - p_mean)
    fails = _first(old & likely_fail & fits, p_mean, fallback=np.where(fits, rank, -np.inf))
    if passes == fails:
        return [(passes, "pass" if p_mean[passes] >= 0.5 else "fail")] * wells
    return [(passes, "pass") if i % 2 == 0 else (fails, "fail") for i in range(wells)]


def _first(preferred: NDArray[np.bool_], rank: Array, fallback: Array) -> int:
    if preferred.any():
        return int(np.argmax(np.where(preferred, rank, -np.inf)))
    return int(np.argmax(fallback))
