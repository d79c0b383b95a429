"""The chance that several responses meet their targets in one future well.

Process means are independent given the condition (Peterson 2004, 2008); what ties the readings of
one well together is their noise, and where factors are set with errors, the setting. A Gaussian
copula joins the exact predictive laws of the responses: the chances that a reading lies below its
lower and below its upper target become normal scores, so that every target is a rectangle.

How much of a score is noise: where y = f + noise, the copula's correlation changes the joint
probability at rate E[phi(z_1)] E[phi(z_2)] with z the target less f in units of the reading's sd,
and the correlation of the scores at rate phi(score_1) phi(score_2) (Plackett 1954). Their ratio is
the product of the responses' loadings, sd of the noise x predictive density at the target /
phi(score), one for each end of a target: noise sd / predictive sd where the law is normal, and
right to first order where it is not, as near a plateau or for a mixture of nodes. A loading never
exceeds 1, as phi(Phi^-1) is concave.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import combinations
from itertools import product as product_of

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.links import slope_of
from muntin.surrogate.nodes import Surface
from muntin.surrogate.rectangle import pair_excess, rectangle
from muntin.window.predicted import Predicted
from muntin.window.probability import Target

Array = NDArray[np.float64]
Index = NDArray[np.intp]
# Beyond, a response passes or fails as good as surely, and joins as a factor.
_SURE = 1e-5
_LEAST_HEIGHT = 1e-6
# Scores that move as one to the last digit have no density.
_MOST = 1.0 - 1e-9


@dataclass(frozen=True)
class Law:
    """The predictive law of one response at n conditions, as normal scores.

    met (n,): chance that the target is met. score (n, 2): of its lower and upper end. noise (n, 2)
    and setting (n, 2, D): loadings of each score on the noise of a reading and on setting errors.
    """

    met: Array
    score: Array
    noise: Array
    setting: Array

    def blended(self) -> Law:
        """The law with one loading for both ends, each weighed by its density."""
        share = _phi(self.score)
        share = share / np.maximum(share.sum(axis=1, keepdims=True), 1e-300)
        noise = (share * self.noise).sum(1, keepdims=True) + np.zeros((1, 2))
        setting = (share[..., None] * self.setting).sum(1, keepdims=True) + np.zeros((1, 2, 1))
        return replace(self, noise=noise, setting=setting)


def joint_meets(responses: Sequence[Predicted], met: Array, correlation: Array) -> Array:
    """Chance (n,) that all responses meet their targets in one future well on a new plate.

    met (R, n): the responses' own chances. correlation (R, R): of the noise of their readings;
    without any, and without setting errors, the product.
    """
    product = met.prod(axis=0)
    unsure = (met > _SURE) & (met < 1.0 - _SURE)
    together = any(r.shift is not None for r in responses)
    tied = together or np.any(correlation != np.eye(len(responses)))
    rows = np.flatnonzero(unsure.sum(axis=0) > 1) if tied else np.zeros(0, dtype=np.intp)
    if not len(rows):
        return product
    laws = [_law(r.at(rows), p[rows]) for r, p in zip(responses, met, strict=True)]
    excess = _excess_of_pairs(laws, correlation)
    if len(laws) > 2:
        alike = [law.blended() for law in laws]
        excess += _excess_of_all(alike, correlation) - _excess_of_pairs(alike, correlation)
    least, most = met[:, rows].sum(axis=0) - len(responses) + 1.0, met[:, rows].min(axis=0)
    product[rows] = np.clip(product[rows] + excess, np.maximum(least, 0.0), most)
    return product


def _excess_of_pairs(laws: Sequence[Law], correlation: Array) -> Array:
    """What ties of two responses each add to the product (n,); all of it where there are two."""
    out = np.zeros(len(laws[0].met))
    for i, j in combinations(range(len(laws)), 2):
        others = [law.met for k, law in enumerate(laws) if k not in (i, j)]
        out += np.prod([*others, _excess_of_two(laws[i], laws[j], correlation[i, j])], axis=0)
    return out


def _excess_of_two(one: Law, other: Law, correlation: float) -> Array:
    """Joint chance (n,) of two responses less the product, corner by corner of the rectangle."""
    out = np.zeros(len(one.met))
    for i, j in product_of(range(2), range(2)):
        rho = correlation * one.noise[:, i] * other.noise[:, j]
        rho = np.clip(rho + (one.setting[:, i] * other.setting[:, j]).sum(1), -_MOST, _MOST)
        gain = pair_excess(one.score[:, i], other.score[:, j], rho)
        out += gain if i == j else -gain
    return out


def _excess_of_all(laws: Sequence[Law], correlation: Array) -> Array:
    """Joint chance (n,) of responses less the product, one loading for both ends of each."""
    noise = np.stack([law.noise[:, 0] for law in laws], axis=1)
    setting = np.stack([law.setting[:, 0] for law in laws], axis=1)
    R = correlation * noise[:, :, None] * noise[:, None, :]
    R = _MOST * (R + setting @ np.swapaxes(setting, 1, 2))
    index = np.arange(len(laws))
    R[:, index, index] = 1.0
    low, high = (np.stack([law.score[:, end] for law in laws], axis=1) for end in range(2))
    alone = np.prod([_between(law.score) for law in laws], axis=0)
    return rectangle(low, high, R) - alone


def _between(score: Array) -> Array:
    """Chance (n,) that a normal score lies between the ends (n, 2)."""
    from scipy.special import ndtr

    return np.asarray(ndtr(score[:, 1]) - ndtr(score[:, 0]))


def _law(response: Predicted, met: Array) -> Law:
    """The law, p_well `met` given; where it is as good as sure, the response loads on nothing."""
    score = _scores(response, met)
    unsure = ((met > _SURE) & (met < 1.0 - _SURE))[:, None]
    noise, setting = _loadings(response, score)
    return Law(met, score, noise * unsure, setting * unsure[..., None])


def _scores(response: Predicted, met: Array) -> Array:
    """Normal scores (n, 2) of the lower and the upper target."""
    from scipy.special import ndtri

    target, none = response.target, np.full(len(met), np.inf)
    if np.isinf(target.high):
        return np.stack([-ndtri(met), none], axis=1)
    if np.isinf(target.low):
        return np.stack([-none, ndtri(met)], axis=1)
    under = response.met(Target(high=target.low))
    return np.stack([ndtri(under), ndtri(np.minimum(under + met, 1.0))], axis=1)


def _loadings(response: Predicted, score: Array) -> tuple[Array, Array]:
    """Loadings of the scores (n, 2) on the noise (n, 2) and on setting errors (n, 2, D)."""
    surface, target = response.surface, response.target
    shift = np.zeros((len(score), 0)) if response.shift is None else response.shift
    noise, setting = np.zeros(score.shape), np.zeros((*score.shape, shift.shape[1]))
    for end, limit in enumerate((target.low, target.high)):
        if np.isfinite(limit):
            density = surface.weights[:, None] * response.density(limit)
            height = np.maximum(_phi(score[:, end]), _LEAST_HEIGHT)
            noise[:, end] = surface.errors.noise @ density / height
            setting[:, end] = (_slopes_at(surface, limit) @ density / height)[:, None] * shift
    # Together they make up no more than the whole score.
    whole = np.sqrt(noise**2 + (setting**2).sum(-1))
    most = np.maximum(whole, 1.0)
    return noise / most, setting / most[..., None]


def _phi(z: Array) -> Array:
    return np.asarray(np.exp(-0.5 * z**2) / np.sqrt(2.0 * np.pi))


def _slopes_at(surface: Surface, limit: float) -> Array:
    """Slope (S,) of the link where the process mean is the limit, on the scale of the readings."""
    if surface.link != "logit":
        return np.ones(len(surface.weights))
    place = surface.thresholds(limit)[:, 0]
    reached = np.isfinite(place)
    slope = slope_of("logit", np.where(reached, place, 0.0), surface.errors.ceiling)
    return np.where(reached, slope, 0.0)
