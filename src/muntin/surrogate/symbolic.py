"""The PyMC model of a response: the same cells, priors and link as the fast engine's `Model`.

Everything is sampled in standardised variables, N(0, I) under the prior (non-centred, as in
Papaspiliopoulos, Roberts & Skold 2007): hyperparameters eta, latents w, scale errors z.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.cells import Cells
from muntin.surrogate.evidence import Family, Model
from muntin.surrogate.kernels import same_group
from muntin.surrogate.layout import MOST_GAP, Layout
from muntin.surrogate.polynomial import Quadratic
from muntin.surrogate.process import JITTER, GaussianProcess
from muntin.surrogate.quiet import pymc

Array = NDArray[np.float64]
Noise = Literal["normal", "student"]
# Juarez & Steel 2010: shape and rate of the gamma prior of Student's degrees of freedom.
DEGREES_PRIOR = (2.0, 0.1)


@dataclass(frozen=True)
class Hyperparameters:
    """Symbolic hyperparameters of one response on their natural scale."""

    noise: Any
    inside: Any
    scale: Any
    ceiling: Any
    own: Any

    @classmethod
    def of(cls, layout: Layout, eta: Any) -> Hyperparameters:
        """Those of standardised coordinates eta (H,)."""
        import pytensor.tensor as pt

        value = pt.exp(layout.log_median + layout.log_sd * eta)
        inside = 1 + layout.inside
        scale = inside + layout.scale
        own = scale + layout.ceiling
        gap = pt.minimum(value[scale], MOST_GAP) if layout.ceiling else 0.0
        return cls(value[0], value[1:inside], value[inside:scale], 1.0 - gap, value[own:])


def pymc_model(model: Model, noise: Noise = "normal") -> Any:
    """The `pymc.Model` of a response with C cells, n readings and R whitened latents.

    Its variables: eta (H,), w (R,), z (groups of all scale errors,); with Student-t noise also nu,
    and for censored readings the mixing variable of each. Data `y` (n,).
    """
    pm, cells, layout = pymc(), model.cells, model.layout
    with pm.Model() as symbolic:
        h = Hyperparameters.of(layout, pm.Normal("eta", shape=len(layout)))
        w = pm.Normal("w", shape=whitened(model))
        u = model.family.priors.mean + _latents(model.family, h, cells, w)
        errors = pm.Normal("z", shape=sum(cells.scale_groups)) if cells.scale else None
        centre, variance = _law(model, h, u, errors)
        _observe(cells, centre, variance, noise)
    return symbolic


def whitened(model: Model) -> int:
    """Number R of whitened variables of the family: columns of its root."""
    theta = model.layout.theta(np.zeros((1, len(model.layout))))
    return int(model.family.root(model.layout, theta, model.cells).shape[2])


def _latents(family: Family, h: Hyperparameters, cells: Cells, w: Any) -> Any:
    """L w (U,): the latent values about their prior mean, L as in the family's `root`."""
    if isinstance(family, GaussianProcess):
        return _process_root(family, h, cells) @ w
    assert isinstance(family, Quadratic)
    p = len(family.terms)
    value = family.basis(cells.X) @ (family.coefficient_sd(h.own[None])[0] * w[:p])
    start = p
    for j in range(cells.inside.shape[1]):
        groups = cells.inside[:, j]
        value += h.inside[j] * w[start + groups]
        start += int(groups.max(initial=-1)) + 1
    return value


def _process_root(family: GaussianProcess, h: Hyperparameters, cells: Cells) -> Any:
    """Cholesky factor (U, U) of the prior covariance of the latent values."""
    import pytensor.tensor as pt

    gaps = (cells.X[:, None, :] - cells.X[None, :, :]) ** 2
    owner = np.array(family.columns.factor)
    r2 = sum(
        gaps[:, :, owner == i].sum(axis=2) / h.own[1 + i] ** 2
        for i in range(family.columns.factors)
    )
    # The slope of the square root has no value at 0; conditions that agree are taken out of it.
    apart = gaps.sum(axis=2) > 0.0
    r = np.sqrt(5.0) * pt.sqrt(pt.switch(apart, r2, 1.0))
    matern = pt.switch(apart, (1.0 + r + r**2 / 3.0) * pt.exp(-r), 1.0)
    K = family.priors.mean_sd**2 + h.own[0] ** 2 * (matern + JITTER * np.eye(len(cells.X)))
    for j in range(cells.inside.shape[1]):
        K += h.inside[j] ** 2 * same_group(cells.inside[:, j], cells.inside[:, j])
    return pt.linalg.cholesky(K, lower=True, on_error="nan")


def _law(model: Model, h: Hyperparameters, u: Any, errors: Any) -> tuple[Any, Any]:
    """Mean and variance (n,) of every reading given latents u (U,) and scale errors (groups,)."""
    import pytensor.tensor as pt

    cells = model.cells
    at = u[cells.latent]
    if model.link == "logit":
        share = pt.sigmoid(at)
        mean, slope = h.ceiling * share, h.ceiling * share * (1.0 - share)
    else:
        mean, slope = at, 1.0
    variance = h.noise**2 + cells.variance + slope**2 * model.wander
    factor, start = np.ones(len(cells)), 0
    for j, groups in enumerate(cells.scale_groups):
        factor = factor + h.scale[j] * errors[start + cells.scale[j]]
        start += groups
    return (factor * mean)[cells.cell], variance[cells.cell]


def _observe(cells: Cells, centre: Any, variance: Any, noise: Noise) -> None:
    """The likelihood of every reading; a censored one lies beyond its limit.

    Student's t law spreads over the whole variance of a reading. A censored reading has its mixing
    variable as an unknown, given which it is normal.
    """
    import pytensor.tensor as pt
    from pymc.distributions.dist_math import normal_lccdf, normal_lcdf

    pm, beyond = pymc(), cells.censored[cells.cell]
    read, hidden = np.flatnonzero(beyond == 0), np.flatnonzero(beyond != 0)
    y, sd = pm.Data("y", cells.y), pt.sqrt(variance)
    nu = pm.Gamma("nu", *DEGREES_PRIOR) if noise == "student" else None
    if len(read):
        law = pm.Normal.dist(centre[read], sd[read])
        if nu is not None:
            law = pm.StudentT.dist(nu, mu=centre[read], sigma=sd[read])
        pm.Potential("readings", pm.logp(law, y[read]))
    if len(hidden):
        at, width = centre[hidden], sd[hidden]
        if nu is not None:
            width = width / pt.sqrt(pm.Gamma("mixing", nu / 2.0, nu / 2.0, shape=len(hidden)))
        below = beyond[hidden] < 0
        under, over = (f(at, width, y[hidden]) for f in (normal_lcdf, normal_lccdf))
        pm.Potential("censored", pt.switch(below, under, over))
