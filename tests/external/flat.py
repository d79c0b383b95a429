"""The quadratic surrogate under flat priors and given errors, as least-squares checks need it."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy.special import chdtri

from muntin.surrogate.cells import Readings, collapse
from muntin.surrogate.coding import Columns
from muntin.surrogate.evidence import Evidence, Model, evaluate
from muntin.surrogate.nodes import Errors, PolynomialNodes, Surface
from muntin.surrogate.polynomial import Quadratic
from muntin.surrogate.priors import LogNormal, Priors


@dataclass(frozen=True)
class Chosen(Quadratic):
    """A polynomial of chosen terms, for published models that leave some out."""

    chosen: tuple[tuple[int, ...], ...] = ()

    @cached_property
    def terms(self):
        return list(self.chosen)


def flat_priors(level, size):
    """Priors of an identity link about a level; every coefficient has the sd `size`."""
    any_sd = LogNormal(1.0, 1.0)
    return Priors(
        mean=level,
        mean_sd=size,
        process_sd=any_sd,
        curvature_sd=any_sd,
        length_scale=any_sd,
        noise_sd=any_sd,
        scale_error=any_sd,
        inside_error=any_sd,
    )


def flat_model(X, y, size, terms=None, block=None, sd=None):
    """A model of readings y (n,) at X (n, D); block: group number of an inside error."""
    X, y = np.asarray(X, dtype=float), np.asarray(y, dtype=float)
    columns, priors = Columns.plain(X.shape[1]), flat_priors(y.mean(), size)
    family = Quadratic(columns, priors) if terms is None else Chosen(columns, priors, chosen=terms)
    inside = () if block is None else (np.asarray(block, dtype=np.intp),)
    known = np.zeros(len(y)) if sd is None else sd
    return Model(family, collapse(Readings(X=X, y=y, sd=known, inside=inside)), "identity")


@dataclass(frozen=True)
class Flat:
    """The posterior at given noise sds (S,) and, with blocks, sds of the block error (S,)."""

    model: Model
    evidence: Evidence

    @classmethod
    def of(cls, model, noise, block_sd=None):
        noise = np.atleast_1d(np.asarray(noise, dtype=float))
        size = np.full_like(noise, model.family.priors.mean_sd)
        blocks = [] if block_sd is None else [np.broadcast_to(block_sd, noise.shape)]
        theta = np.log(np.stack([noise, *blocks, size, size], axis=1))
        return cls(model, evaluate(model, theta))

    @property
    def nodes(self):
        a, theta, layout = self.evidence.approximation, self.evidence.theta, self.model.layout
        own = self.evidence.root.shape[2]
        mean, V = a.mean[:, :own], a.V[:, :own, :own]
        errors = Errors(
            layout.noise(theta),
            layout.inside_sd(theta),
            layout.scale_sd(theta),
            layout.ceiling_of(theta),
        )
        coefficients = self.model.family.coefficients(layout.family(theta), mean, V)
        return PolynomialNodes(self.model.family, *coefficients, errors)

    def surface(self, weights):
        return Surface((self.nodes,), np.asarray(weights), "identity")

    def coefficients(self):
        """Estimates {term: value} and standard errors {term: value} at the first node."""
        nodes, terms = self.nodes, self.model.family.terms
        value = dict(zip(terms, nodes.mean[0], strict=True))
        value[()] += self.model.family.priors.mean
        return value, dict(zip(terms, np.sqrt(np.diag(nodes.V[0])), strict=True))

    def at(self, X):
        """Mean (n,) and covariance (n, n) of the surface at X (n, D), first node."""
        X = np.asarray(X, dtype=float)
        return self.nodes.moments(X)[0][0], self.nodes.covariance(X, X)[0]

    def in_block(self, X, block):
        """Mean (n,) and sd (n,) of surface plus block error at X (n, D), first node."""
        a, layout, theta = self.evidence.approximation, self.model.layout, self.evidence.theta
        family = self.model.family
        p = len(family.terms)
        scaled = family.basis(np.asarray(X, dtype=float)) * family.coefficient_sd(
            layout.family(theta)
        )
        errors = np.zeros((len(X), a.mean.shape[1] - p))
        errors[:, block] = layout.inside_sd(theta)[0, 0]
        rows = np.concatenate([scaled, errors], axis=1)
        mean = family.priors.mean + rows @ a.mean[0]
        return mean, np.sqrt(np.einsum("nr,rs,ns->n", rows, a.V[0], rows))


def over_noise(model, sd, freedom):
    """The surface over nodes of ln sigma, flat before the data, weighted by their evidence.

    The nodes reach where chi-square on the degrees of freedom leaves 1e-9 on either side.
    """
    low, high = chdtri(freedom, [1e-9, 1.0 - 1e-9])
    ends = 0.5 * np.log(freedom / np.array([low, high]))
    fit = Flat.of(model, sd * np.exp(np.linspace(*ends, 2000)))
    weights = np.exp(fit.evidence.log - fit.evidence.log.max())
    return fit.surface(weights / weights.sum())
