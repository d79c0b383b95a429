"""The PyMC model of a response: the same cells, priors and link as the fast engine's `Model`.

Everything is sampled in standardised variables: hyperparameters eta ~ N(0, I), and v, which makes
the whitened latents w and scale errors z, N(0, I) under the prior, given eta. With no latents to
start from, v is w and z themselves (non-centred). With such, v is standardised by the posterior
that the likelihood linearised there would give at each eta (Murray & Adams 2010, section 3, do so
with surrogate data): a change of variables, undone exactly by its Jacobian, after which v hardly
depends on eta.
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
from muntin.surrogate.quiet import pymc, tensors

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
        pt = tensors()
        value = pt.exp(layout.log_median + layout.log_sd * eta)
        inside = 1 + layout.inside
        scale = inside + layout.scale
        own = scale + layout.ceiling
        gap = pt.minimum(value[scale], MOST_GAP) if layout.ceiling else 0.0
        return cls(value[0], value[1:inside], value[inside:scale], 1.0 - gap, value[own:])


def pymc_model(
    model: Model, noise: Noise = "normal", near: Array | None = None, exchangeable: bool = False
) -> Any:
    """The `pymc.Model` of a response with C cells, n readings and R whitened latents.

    near (U,): latent values about which the variables are standardised. Free variables: eta (H,)
    and v (R + groups of all scale errors,); with Student-t noise also nu, and for censored readings
    the mixing variable of each. Kept: w (R,) and z (groups,). Data `y` (n,); exchangeable: also
    `near` and `cell_mean` (C,), so that all may give way to those of other readings of the wells.
    """
    pm, cells, layout = pymc(), model.cells, model.layout
    with pm.Model() as symbolic:
        h = Hyperparameters.of(layout, pm.Normal("eta", shape=len(layout)))
        root, width = symbolic_root(model.family, h, cells), whitened(model)
        v = pm.Normal("v", shape=width + sum(cells.scale_groups))
        white = v
        if near is not None:
            about = near, cells.mean
            if exchangeable:
                about = pm.Data("near", near), pm.Data("cell_mean", cells.mean)
            white = _standardised(model, h, root, v, *about)
        w, z = pm.Deterministic("w", white[:width]), pm.Deterministic("z", white[width:])
        u = model.family.priors.mean + root @ w
        centre, variance = _law(model, h, u, z)
        _observe(cells, centre, variance, noise)
    return symbolic


def whitened(model: Model) -> int:
    """Number R of whitened variables of the family: columns of its root."""
    theta = model.layout.theta(np.zeros((1, len(model.layout))))
    return int(model.family.root(model.layout, theta, model.cells).shape[2])


def symbolic_root(family: Family, h: Hyperparameters, cells: Cells) -> Any:
    """The root L (U, R) of the prior covariance of the latents, as in the family's `root`."""
    pt = tensors()
    if isinstance(family, GaussianProcess):
        return _process_root(family, h, cells)
    assert isinstance(family, Quadratic)
    parts = [family.basis(cells.X) * family.coefficient_sd(h.own[None])[0]]
    for j in range(cells.inside.shape[1]):
        groups = int(cells.inside[:, j].max(initial=-1)) + 1
        parts.append(np.eye(groups)[cells.inside[:, j]] * h.inside[j])
    return pt.concatenate(parts, axis=1)


def _process_root(family: GaussianProcess, h: Hyperparameters, cells: Cells) -> Any:
    """Cholesky factor (U, U) of the prior covariance of the latent values."""
    pt = tensors()
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


def _standardised(
    model: Model, h: Hyperparameters, root: Any, v: Any, near: Any, cell_mean: Any
) -> Any:
    """w and z (R + groups,) from v: the mean and a root of the linearised posterior at eta.

    A reading is g + g' (u - near) + g sum(scale_sd z) + noise there; a censored one says nothing.
    """
    pm, pt, cells = pymc(), tensors(), model.cells
    mean, slope = _link(model, h, near[cells.latent])
    blocks = [(slope * np.ones(len(cells)))[:, None] * root[cells.latent]]
    for j, groups in enumerate(cells.scale_groups):
        blocks.append(h.scale[j] * mean[:, None] * np.eye(groups)[cells.scale[j]])
    J = pt.concatenate(blocks, axis=1)
    variance = h.noise**2 + cells.variance + slope**2 * model.wander
    precision = (cells.censored == 0) * cells.count / variance
    level = model.family.priors.mean
    away = cell_mean - mean + slope * (near[cells.latent] - level)
    M = pt.eye(v.shape[0]) + J.T @ (precision[:, None] * J)
    C = pt.linalg.cholesky(M, lower=True, on_error="nan")
    shift = pt.linalg.solve_triangular(C, J.T @ (precision * away), lower=True)
    white = pt.linalg.solve_triangular(C.T, shift + v, lower=False)
    # The prior of w and z and the Jacobian, in place of the normal law of v.
    change = 0.5 * (v @ v - white @ white) - pt.log(pt.diagonal(C)).sum()
    pm.Potential("change of variables", change)
    return white


def _link(model: Model, h: Hyperparameters, at: Any) -> tuple[Any, Any]:
    """Process mean and its slope (C,) at latent values (C,)."""
    pt = tensors()
    if model.link != "logit":
        return at, 1.0
    share = pt.sigmoid(at)
    return h.ceiling * share, h.ceiling * share * (1.0 - share)


def _law(model: Model, h: Hyperparameters, u: Any, z: Any) -> tuple[Any, Any]:
    """Mean and variance (n,) of every reading given latents u (U,) and scale errors z (groups,)."""
    cells = model.cells
    mean, slope = _link(model, h, u[cells.latent])
    variance = h.noise**2 + cells.variance + slope**2 * model.wander
    factor, start = np.ones(len(cells)), 0
    for j, groups in enumerate(cells.scale_groups):
        factor = factor + h.scale[j] * z[start + cells.scale[j]]
        start += groups
    return (factor * mean)[cells.cell], variance[cells.cell]


def _observe(cells: Cells, centre: Any, variance: Any, noise: Noise) -> None:
    """The likelihood of every reading; a censored one lies beyond its limit.

    Student's t law spreads over the whole variance of a reading. A censored reading has its mixing
    variable as an unknown, given which it is normal.
    """
    from pymc.distributions.dist_math import normal_lccdf, normal_lcdf

    pm, pt, beyond = pymc(), tensors(), cells.censored[cells.cell]
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
