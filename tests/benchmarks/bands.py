"""Simultaneous bands for the empirical distribution of uniform values.

Sailynoja, Burkner & Vehtari 2022, Stat. Comput. 32:32: at z_k = k / K the number of N values below
z_k is binomial, and its pointwise limits are quantiles at gamma / 2 and 1 - gamma / 2, with gamma
chosen so that all K counts together lie within their limits with probability 1 - alpha. The counts
are a Markov chain in k (their section 2.2), so that probability is computed, not simulated.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import gammaln, xlog1py, xlogy
from scipy.stats import binom

Array = NDArray[np.float64]
Counts = NDArray[np.intp]
_HALVINGS = 30


@dataclass(frozen=True)
class Bands:
    """Limits of the counts of N values below z (K,), K points to 1.

    least and most (K,): limits, both included; coverage: exact probability to keep all of them.
    """

    size: int
    gamma: float
    coverage: float
    z: Array
    least: Counts
    most: Counts

    def hold(self, u: ArrayLike) -> bool:
        """Whether the counts of values u (N,) stay within the limits at every point."""
        counts = counts_below(u, self.z)
        return bool((counts >= self.least).all() and (counts <= self.most).all())


def counts_below(u: ArrayLike, z: Array) -> Counts:
    """Number (K,) of values u (N,) in [0, 1] below each of z (K,)."""
    return np.asarray(np.searchsorted(np.sort(np.ravel(u)), z), dtype=np.intp)


def limits(size: int, points: int, gamma: float) -> tuple[Counts, Counts]:
    """Least and most count (points,) allowed at k / points, k = 1 to points: binomial quantiles at
    gamma / 2 and 1 - gamma / 2, the upper ones by symmetry so that rounding cannot part them.
    """
    quantile = binom.ppf(gamma / 2.0, size, np.arange(points + 1) / points)
    least = np.maximum(quantile, 0.0).astype(np.intp)
    return least[1:], size - least[::-1][1:]


def coverage(size: int, least: Counts, most: Counts) -> float:
    """Probability that the counts of uniform values keep limits (K,) at k / K, k = 1 to K.

    From count i at z_(k-1) the count at z_k gains a binomial number of the other size - i values,
    each with probability (z_k - z_(k-1)) / (1 - z_(k-1)).
    """
    log_factorial = gammaln(np.arange(size + 1) + 1.0)
    before, p = np.zeros(1, dtype=np.intp), np.ones(1)
    for k in range(len(least)):
        after = np.arange(least[k], most[k] + 1)
        left, gain = size - before[:, None], after - before[:, None]
        possible = gain >= 0
        rest, won = np.where(possible, left - gain, 0), np.where(possible, gain, 0)
        log_ways = log_factorial[left] - log_factorial[won] - log_factorial[rest]
        share = 1.0 / (len(least) - k)
        log_pmf = log_ways + xlogy(won, share) + xlog1py(rest, -share)
        p = p @ np.exp(np.where(possible, log_pmf, -np.inf))
        before = after
    return float(p.sum())


def bands(size: int, points: int, alpha: float) -> Bands:
    """Bands of `size` values at `points` points that uniform ones keep with probability 1 - alpha.

    Coverage falls in steps as gamma grows; gamma is the largest that still covers 1 - alpha.
    """
    low, high = 0.0, alpha
    for _ in range(_HALVINGS):
        middle = 0.5 * (low + high)
        if coverage(size, *limits(size, points, middle)) >= 1.0 - alpha:
            low = middle
        else:
            high = middle
    least, most = limits(size, points, low)
    z = np.arange(1, points + 1) / points
    return Bands(size, low, coverage(size, least, most), z, least, most)
