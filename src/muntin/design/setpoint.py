"""Forecast of the set point.

At a fixed condition the expected posterior probability after any plate is today's, so no forecast
can promise that today's set point will look better; what a plate brings is that one knows, and may
choose again. The set point is put where the probability is then highest. Two numbers follow for k
wells to come (preposterior analysis: Raiffa & Schlaifer 1961): the expectation of the highest of
correlated posterior probabilities, E[max_x p_k(x)], which never falls with k (Frazier, Powell &
Dayanik 2009, INFORMS Journal on Computing 21:599), and the chance P(max_x p_k(x) >= q) that there
is then a set point as probable as the stop rule asks. Where one condition is best whatever is read
the first stays where it is and only the second tells what wells are good for.

The law of p_k over x follows in closed form from the moves of the posterior mean: with rho the
share of the predictive variance that k wells explain, z(x) the standardised move and c the normal
score of today's chance, p_k = Phi((c + sqrt(rho) z) / sqrt(1 - rho)), whose mean is today's chance.
Only the maximum is taken over draws of z. For the expectation they measure the advantage over
today's set point, whose own expectation is known.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.design.forecast import score
from muntin.design.moves import moves
from muntin.design.outlook import Outlook
from muntin.surrogate.links import mean_of, slope_of
from muntin.surrogate.nodes import Surface
from muntin.window.assessment import Assessment
from muntin.window.coded import code, setting_sd
from muntin.window.predicted import Predicted
from muntin.window.probability import Target
from muntin.window.window import Window

Array = NDArray[np.float64]
Index = NDArray[np.intp]
_PAIRS = 256
_POINTS = 750
_TODAY = 40
_MOST = 1.0 - 1e-9
_NEAR = 1e-4


@dataclass(frozen=True)
class SetPoint:
    """The expected probability of the set point, and the chance that it reaches a limit."""

    expected: float
    reached: float


@dataclass(frozen=True)
class Around:
    """One response at n points around the conditions that may become the set point.

    scores (n,): normal scores today of the chances that the lower and the upper limit are met,
    infinite where there is none. spread (S, n): for each limit the predictive variance in latent
    units, infinite where a limit is out of reach. U (S, n, k): moves of the posterior mean, and the
    nodes' weights (S,).
    """

    scores: tuple[Array, Array]
    spread: tuple[Array, Array]
    U: Array
    weights: Array

    def now(self) -> Array:
        """Chance today (n,) that the target is met."""
        from scipy.special import ndtr

        low, high = self.scores
        return np.maximum(ndtr(low) + ndtr(high) - 1.0, 0.0)

    def then(self, read: int, drawn: Drawn) -> Array:
        """The chances (n, d) that draws of what the first `read` wells show lead to."""
        from scipy.special import ndtr

        U = self.U[:, :, :read]
        gained = (U**2).sum(axis=2)
        z = drawn.standardised(U, gained)
        met = np.full(z.shape, -1.0)
        for c, spread, sign in zip(self.scores, self.spread, (1.0, -1.0), strict=True):
            rho = np.clip(self.weights @ (gained / spread), 0.0, _MOST)[:, None]
            met += ndtr((c[:, None] + sign * np.sqrt(rho) * z) / np.sqrt(1.0 - rho))
        return np.maximum(met, 0.0)


@dataclass(frozen=True)
class Drawn:
    """Draws in pairs of opposite sign: the node (d,) and the readings' news xi (d, k) of each."""

    nodes: Index
    xi: Array

    @classmethod
    def of(cls, weights: Array, wells: int, rng: np.random.Generator) -> Drawn:
        """Draws with each node as often as its weight (S,) says."""
        ticks = (rng.permutation(_PAIRS) + 0.5) / _PAIRS * weights.sum()
        nodes = np.minimum(np.searchsorted(np.cumsum(weights), ticks), len(weights) - 1)
        xi = rng.standard_normal((_PAIRS, wells))
        return cls(np.tile(nodes, 2), np.concatenate([xi, -xi]))

    def standardised(self, U: Array, gained: Array) -> Array:
        """Moves (n, d) at n points in units of their sd, from U (S, n, k) and its squares' sum."""
        z = np.zeros((U.shape[1], len(self.nodes)))
        for node in np.unique(self.nodes):
            mine = self.nodes == node
            sd = np.sqrt(np.maximum(gained[node], 1e-300))
            z[:, mine] = U[node] @ self.xi[mine, : U.shape[2]].T / sd[:, None]
        return z


def set_points(
    view: Assessment,
    window: Window,
    outlooks: Sequence[Outlook],
    taken: Sequence[int],
    read: Sequence[int],
    limit: float,
) -> list[SetPoint]:
    """The set point once the first k of the wells taken are read, for each k of `read`
    (ascending); for k = 0 that of the window.

    outlooks: one a judged response in the order of `view.predicted`; taken: numbers of their
    candidates. A new set point must lead by as much as the window's central one gives away today.
    """
    today = window.grid["probability"].to_numpy(dtype=float)
    at = int(str(window.setpoint.name))
    weights, rows, points = _points(view, window, today, at)
    every = [*_around(view, points, outlooks, taken)]
    rng = np.random.default_rng(0)
    drawn = [Drawn.of(a.weights, len(taken), rng) for a in every]
    now = _averaged(weights, np.prod([a.now() for a in every], axis=0)[:, None])
    # What the ties of readings and the finer law of today add to these chances stays as it is.
    offset = score(today[rows])[:, None] - score(now)
    lead = float(today.max()) - today[at]
    found = []
    for k in read:
        if k == 0:
            found.append(SetPoint(float(today[at]), float(today[at] >= limit)))
            continue
        met = np.prod([a.then(k, d) for a, d in zip(every, drawn, strict=True)], axis=0)
        p = _chance(score(_averaged(weights, met)) + offset)
        top = np.maximum(p.max(axis=0) - lead, p[0])
        expected = min(1.0, float(today[at] + (top - p[0]).mean()))
        expected = max([expected, *(f.expected for f in found)])
        # Draws that all agree leave half of one in doubt.
        reached = ((top >= limit).sum() + 0.5) / (len(top) + 1.0)
        found.append(SetPoint(expected, float(reached)))
    return found


def _points(
    view: Assessment, window: Window, today: Array, at: int
) -> tuple[Array, Index, pd.DataFrame]:
    """Rows of the window's grid that may become the set point, row `at` first; the settings around
    them at which they are judged (raw units, one after the other), with the weight of each.
    """
    definition = view.study.definition
    kept = definition.judged_by == "kept"
    size = sum(1 for _ in view.settings(window.grid.iloc[[at]])) if kept else 1
    rows = _contenders(today, at, max(2, _POINTS // size))
    frame = window.grid.iloc[rows][list(definition.factor_names)].reset_index(drop=True)
    around = [*view.settings(frame)] if kept else [(1.0, frame)]
    points = pd.concat([part for _, part in around], ignore_index=True)
    return np.array([weight for weight, _ in around]), rows, points


def _contenders(today: Array, at: int, most: int) -> Index:
    """Rows that may become the set point, today's first: the likeliest half, and an even spread."""
    if len(today) <= most:
        rows = np.arange(len(today))
    else:
        spread = np.linspace(0, len(today) - 1, most // 2).round().astype(int)
        rows = np.union1d(np.argsort(-today, kind="stable")[: most // 2], spread)
    return np.asarray([at, *rows[rows != at]], dtype=np.intp)


def _averaged(weights: Array, p: Array) -> Array:
    """Chances (n, d) averaged over the settings around each condition, from (settings * n, d)."""
    return np.tensordot(weights, p.reshape(len(weights), -1, p.shape[1]), axes=1)


def _chance(z: Array) -> Array:
    from scipy.special import ndtr

    return np.asarray(ndtr(z))


def _around(
    view: Assessment, points: pd.DataFrame, outlooks: Sequence[Outlook], taken: Sequence[int]
) -> Iterator[Around]:
    """Each judged response at points (raw units)."""
    definition = view.study.definition
    X, setting = code(definition, points), setting_sd(definition, points)
    predicted = view.predicted(points, _TODAY)
    for response, outlook in zip(predicted.values(), outlooks, strict=True):
        surface, target = outlook.surface, response.target
        by_mean = definition.judged_by == "mean"
        mean, variance = surface.moments(X)
        total = variance + surface.weights @ (mean - surface.weights @ mean) ** 2
        more = [
            np.zeros_like(mean) if by_mean else _unknown(surface, limit, mean)
            for limit in (target.low, target.high)
        ]
        wander = surface.wander(X, setting) if setting.any() and not by_mean else 0.0
        yield Around(
            _scores(response, by_mean),
            (total + wander + more[0], total + wander + more[1]),
            moves(outlook, X, taken),
            surface.weights,
        )


def _scores(response: Predicted, by_mean: bool) -> tuple[Array, Array]:
    """Normal scores (n,) today of the chances that each limit is met."""
    chance = response.process_met if by_mean else response.met
    none = np.full(response.moments[0].shape[1], np.inf)
    low, high = response.target.low, response.target.high
    return (
        none if np.isinf(low) else score(chance(Target(low=low))),
        none if np.isinf(high) else score(chance(Target(high=high))),
    )


def _unknown(surface: Surface, limit: float, mean: Array) -> Array:
    """Latent variance (S, n) that a well on a new plate adds, at latent means (S, n).

    It is such that were f known to be its mean, the reading would meet the limit with the chance
    that its noise and scale errors leave: on a plateau they take more than beside the limit.
    """
    errors = surface.errors
    inside = (errors.inside**2).sum(axis=1)[:, None] + np.zeros_like(mean)
    if np.isinf(limit) or surface.link != "logit":
        return np.asarray(errors.noise[:, None] ** 2 + inside)
    place, ceiling = surface.thresholds(limit), errors.ceiling[:, None]
    reach = np.isfinite(place)
    place = np.where(reach, place, 0.0)
    g, away = mean_of("logit", mean, ceiling), mean - place
    near = np.abs(away) < _NEAR
    slope = np.where(
        near, slope_of("logit", place, ceiling), (g - limit) / np.where(near, 1.0, away)
    )
    own = errors.noise[:, None] ** 2 + (errors.scale**2).sum(axis=1)[:, None] * g**2
    return np.where(reach, own / np.maximum(slope, 1e-12) ** 2 + inside, np.inf)
