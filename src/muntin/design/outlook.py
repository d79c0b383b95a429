"""What new wells would tell: Gaussian updating of one response, node by node, without readings.

A new well reads, linearised in latent units, z = f(x) + inside errors + a * scale errors + noise;
wells of the new plate share its errors. Noise is sigma^2 / E[g'(f)^2], so that a well on a
plateau tells little of its logit, and what its setting errors make of f.
"""

from __future__ import annotations

from copy import copy
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.links import mean_of, slope_of
from muntin.surrogate.nodes import Surface

Array = NDArray[np.float64]
Index = NDArray[np.intp]
_Z, _W = np.polynomial.hermite_e.hermegauss(15)
_W = _W / _W.sum()
# Covariances of watched points and candidates up to so many are held, 240 MB; up to so many in
# single precision, 600 MB; more are computed anew for the candidates that are asked for.
_HELD, _HELD_SINGLE = 30_000_000, 150_000_000
_CHUNK = 100


@dataclass
class Outlook:
    """Covariances of f at P judged points and of z at Q candidates, updated pick by pick.

    surface: S nodes of the response. judged (P, D) and candidates (Q, D): coded. groups: for each
    inside error and each scale error the group number (Q,) a candidate would fall into on the new
    plate. watched: numbers of the judged points over which a candidate is weighed.
    setting (Q, D): sd with which the bench sets each coded column of a candidate; None says 0.
    """

    surface: Surface
    judged: Array
    candidates: Array
    inside: tuple[Index, ...]
    scale: tuple[Index, ...]
    watched: Index
    setting: Array | None = None
    mean: Array = field(init=False)
    variance: Array = field(init=False)
    explained: Array = field(init=False)

    def __post_init__(self) -> None:
        """Compute today's moments, the noise of a well and the covariances."""
        self.mean, self.variance = self.surface.moments(self.judged)
        self.explained = np.zeros_like(self.variance)
        self.well_mean, self.well_variance = self.surface.moments(self.candidates)
        self._reading()
        self._up: list[Array] = []
        self._uq: list[Array] = []
        self._at_watched = np.zeros((*self.mean[:, self.watched].shape, 0))
        self._cross = self._held()
        errors = self.surface.errors
        spread = self.well_variance + self.noise + (errors.inside**2).sum(1)[:, None]
        self.reading_variance = spread + self.lever**2 * (errors.scale**2).sum(1)[:, None]

    def _reading(self) -> None:
        """Noise (S, Q) of a well in latent units, and the lever (S, Q) of a scale error."""
        link, sd = self.surface.link, np.sqrt(self.well_variance)
        own = self.surface.errors.noise[:, None] ** 2
        self.lever = np.zeros_like(sd)
        self.noise = np.repeat(own, sd.shape[1], axis=1)
        if link == "logit":
            f = self.well_mean[..., None] + sd[..., None] * _Z
            ceiling = self.surface.errors.ceiling[:, None, None]
            slope, g = slope_of(link, f, ceiling), mean_of(link, f, ceiling)
            square = np.maximum((slope**2) @ _W, 1e-12)
            self.noise = own / square
            self.lever = ((slope * g) @ _W) / square
        if self.setting is not None and self.setting.any():
            self.noise = self.noise + self.surface.wander(self.candidates, self.setting)

    def _held(self) -> NDArray[np.floating] | None:
        """Covariances (Q, S, W) of f today, where they are few enough to hold."""
        shape = (len(self.candidates), len(self.mean), len(self.watched))
        size = np.prod(shape)
        if size > _HELD_SINGLE:
            return None
        cross = np.empty(shape, dtype=float if size <= _HELD else np.float32)
        for start in range(0, len(cross), _CHUNK):
            wells = slice(start, start + _CHUNK)
            cross[wells] = np.moveaxis(self._covariance(wells), -1, 0)
        return cross

    def _covariance(self, wells: Index | slice) -> Array:
        """Covariance (S, W, k) of f today at the watched points and at candidates."""
        return self.surface.covariance(self.judged[self.watched], self.candidates[wells])

    def branch(self) -> Outlook:
        """The same state; picks of either leave the other as it is."""
        other = copy(self)
        other._up, other._uq = [*self._up], [*self._uq]
        return other

    def after(self, wells: Index) -> Array:
        """Variance (S, W, k) that would be explained at the watched points by one more well."""
        if self._cross is None:
            c = self._covariance(wells)
        else:
            c = np.moveaxis(self._cross[wells].astype(float, copy=False), 0, -1)
        if self._up:
            c = c - self._at_watched @ np.stack([u[:, wells] for u in self._uq], axis=1)
        gained = c**2 / self.reading_variance[:, None, wells]
        return self.explained[:, self.watched, None] + gained

    def own_gain(self) -> Array:
        """Variance (S, Q) that one more well at a candidate would explain of f there.

        Only where the judged points are the candidates.
        """
        c = self.variance - sum(
            (up * uq for up, uq in zip(self._up, self._uq, strict=True)),
            np.zeros_like(self.variance),
        )
        return np.asarray(c**2 / self.reading_variance)

    def pick(self, well: int) -> None:
        """Take a candidate into the plan: its reading is to come."""
        one = np.array([well])
        root = np.sqrt(self.reading_variance[:, well])[:, None]
        up = self.surface.covariance(self.judged, self.candidates[one])[..., 0]
        for p, q in zip(self._up, self._uq, strict=True):
            up = up - p * q[:, [well]]
        up = up / root
        column = self.surface.covariance(self.candidates, self.candidates[one])[..., 0]
        column = column + self._shared(well)
        for u in self._uq:
            column = column - u * u[:, [well]]
        # The diagonal entry is a repeat's covariance: it shares all but the noise of the well.
        uq = column / root
        self.explained = np.minimum(self.explained + up**2, (1.0 - 1e-9) * self.variance)
        self.reading_variance = np.maximum(self.reading_variance - uq**2, self.noise)
        self._up.append(up)
        self._uq.append(uq)
        self._at_watched = np.stack([u[:, self.watched] for u in self._up], axis=2)

    def _shared(self, well: int) -> Array:
        """Covariance (S, Q) that candidates share with a well through the new plate's errors."""
        errors = self.surface.errors
        total = np.zeros_like(self.noise)
        for j, groups in enumerate(self.inside):
            total += errors.inside[:, j, None] ** 2 * (groups == groups[well])
        for j, groups in enumerate(self.scale):
            same = errors.scale[:, j, None] ** 2 * (groups == groups[well])
            total += same * self.lever * self.lever[:, [well]]
        return total
