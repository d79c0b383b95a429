"""Evidence of hyperparameters: the approximation at given nodes and its gradient."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.approximation import Approximation, join
from muntin.surrogate.cells import Cells
from muntin.surrogate.coding import Columns
from muntin.surrogate.layout import Layout
from muntin.surrogate.links import Link
from muntin.surrogate.priors import LogNormal, Priors
from muntin.surrogate.propagation import approximate
from muntin.surrogate.sites import Rows
from muntin.surrogate.tilted import CellLikelihood

Array = NDArray[np.float64]
_UNSAID = np.zeros(0)
# A hundredth of an sd moves no probability by a thousandth.
_TOLERANCE = 1e-2


class Family(Protocol):
    """A prior of the latent surface: what the engine needs to know of it."""

    @property
    def columns(self) -> Columns:
        """The coded columns."""

    @property
    def priors(self) -> Priors:
        """The priors of the response."""

    @property
    def name(self) -> str:
        """The surrogate's name."""

    def own(self) -> tuple[tuple[str, LogNormal], ...]:
        """Names and priors of the family's hyperparameters."""

    def root(self, layout: Layout, theta: Array, cells: Cells) -> Array:
        """L (S, U, R) with L L' the prior covariance of the latent values."""

    def gradient(self, layout: Layout, theta: Array, cells: Cells, root: Array, E: Array) -> Array:
        """d log Z / d theta (S, .) for the inside errors and the family's hyperparameters."""


@dataclass(frozen=True)
class Model:
    """One response's cells under one family, with the link on which the readings lie.

    wander (C,): latent variance of one reading of a cell that its setting errors make; 0 unless
    given.
    """

    family: Family
    cells: Cells
    link: Link
    wander: Array = field(default_factory=lambda: _UNSAID)

    def __post_init__(self) -> None:
        """Fill in what was not given."""
        if self.wander is _UNSAID:
            object.__setattr__(self, "wander", np.zeros(len(self.cells)))

    @property
    def layout(self) -> Layout:
        """Order and priors of the hyperparameters."""
        p, inside, scale = self.family.priors, self.cells.inside.shape[1], len(self.cells.scale)
        named = [
            ("noise_sd", p.noise_sd),
            *((f"inside_error[{j}]", p.inside_error) for j in range(inside)),
            *((f"scale_error[{j}]", p.scale_error) for j in range(scale)),
            *((("ceiling_gap", p.ceiling_gap),) if self.link == "logit" else ()),
            *self.family.own(),
        ]
        names, priors = zip(*named, strict=True)
        ceiling = int(self.link == "logit")
        return Layout(inside=inside, scale=scale, ceiling=ceiling, names=names, priors=priors)

    def likelihood(self, theta: Array) -> CellLikelihood:
        """The likelihood of the cells at log hyperparameters theta (S, H)."""
        cells, layout = self.cells, self.layout
        scale = np.sqrt((layout.scale_sd(theta) ** 2).sum(1, keepdims=True))
        return CellLikelihood(
            link=self.link,
            offset=self.family.priors.mean,
            mean=cells.mean,
            count=cells.count,
            within=cells.within,
            variance=cells.variance,
            censored=cells.censored,
            wander=self.wander,
            noise=layout.noise(theta)[:, None] ** 2,
            scale=scale,
            ceiling=layout.ceiling_of(theta)[:, None],
        )

    def rows(self, theta: Array, root: Array | None = None) -> Rows:
        """Maps from the whitened variables to the cells' pairs; root where it is at hand."""
        cells, layout = self.cells, self.layout
        root = self.family.root(layout, theta, cells) if root is None else root
        sds = layout.scale_sd(theta)
        share = sds / np.sqrt((sds**2).sum(1, keepdims=True)) if cells.scale else sds
        blocks = [np.zeros((len(theta), len(cells), 0))]
        for j, groups in enumerate(cells.scale_groups):
            blocks.append(share[:, j, None, None] * np.eye(groups)[cells.scale[j]])
        return Rows(root, cells.latent, np.concatenate(blocks, axis=2))


@dataclass(frozen=True)
class Evidence:
    """The approximation at S nodes theta (S, H), the family's root, and the log evidence (S,)."""

    theta: Array
    root: Array
    approximation: Approximation

    @property
    def log(self) -> Array:
        """Log evidence (S,)."""
        return self.approximation.log_evidence

    def nodes(self, index: NDArray[np.intp]) -> Evidence:
        """The evidence at some of the nodes."""
        return Evidence(self.theta[index], self.root[index], self.approximation.nodes(index))

    def prior_variance(self, cells: Cells) -> Array:
        """Prior variance (S, C) of the latent value of each cell."""
        return (self.root**2).sum(axis=2)[:, cells.latent]


def joined(rounds: Sequence[Evidence]) -> Evidence:
    """The evidence of several rounds of nodes as one."""
    return Evidence(
        np.concatenate([r.theta for r in rounds]),
        np.concatenate([r.root for r in rounds]),
        join([r.approximation for r in rounds]),
    )


def evaluate(
    model: Model, theta: Array, near: Evidence | None = None, tolerance: float = _TOLERANCE
) -> Evidence:
    """Evidence of the model at log hyperparameters theta (S, H); sites start from the closest node
    of `near`, sharpened or blunted as the noise asks, and move until they settle to `tolerance`.
    """
    rows = model.rows(theta)
    start = None
    if near is not None:
        unit = model.layout.log_sd
        away = ((theta[:, None] - near.theta[None]) / unit) ** 2
        closest = away.sum(-1).argmin(axis=1)
        sites = near.approximation.sites.nodes(closest)
        start = sites.times(np.exp(2.0 * (near.theta[closest, :1] - theta[:, :1])))
    return Evidence(theta, rows.root, approximate(rows, model.likelihood(theta), start, tolerance))


def slope(model: Model, evidence: Evidence) -> Array:
    """Gradient (S, H) of the log evidence in theta, at the fixed point of the sites."""
    layout, approx = model.layout, evidence.approximation
    second = approx.mean[:, :, None] * approx.mean[:, None, :] + approx.V
    E = second - np.eye(second.shape[-1])
    own = evidence.root.shape[2]
    family = model.family.gradient(
        layout, evidence.theta, model.cells, evidence.root, E[:, :own, :own]
    )
    noise = approx.tilted.noise_slope.sum(1, keepdims=True)
    diagonal = np.diagonal(E, axis1=1, axis2=2)
    scale, begin = [], own
    for groups in model.cells.scale_groups:
        scale.append(diagonal[:, begin : begin + groups].sum(1, keepdims=True))
        begin += groups
    inside, gap = layout.inside, []
    if layout.ceiling:
        ceiling = layout.ceiling_of(evidence.theta)
        moving = np.where(ceiling > 0.5, (1.0 - ceiling) / ceiling, 0.0)
        slope_gap = -moving * approx.tilted.ceiling_slope.sum(1)
        gap.append(slope_gap[:, None])
    return np.concatenate([noise, family[:, :inside], *scale, *gap, family[:, inside:]], axis=1)
