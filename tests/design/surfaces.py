"""Fitted surfaces of invented responses over two coded factors, for the tests of designs."""

from __future__ import annotations

import numpy as np
from scipy.special import expit
from scipy.stats.qmc import Sobol

from muntin.surrogate.cells import Readings
from muntin.surrogate.coding import Columns
from muntin.surrogate.fit import fit_surrogate
from muntin.surrogate.nodes import Surface, mixture
from muntin.surrogate.priors import Kind, priors_of

SLOPES = {"fraction": (2.0, 1.4), "positive": (-0.7, 0.5), "real": (1.5, -0.8)}


def points(count: int, seed: int) -> np.ndarray:
    """Coded conditions (count, 2) that fill the range."""
    drawn = Sobol(2, rng=np.random.default_rng(seed)).random_base2(8)
    return 2.0 * drawn[:count] - 1.0


def surface(kind: Kind, seed: int = 3, nodes: int = 5, shared: bool = True) -> Surface:
    """The posterior after 15 wells on two plates, both surrogates, on so many nodes each.

    The wells share an inside error by plate and half of the range; those of a fraction also a
    scale error by plate.
    """
    rng = np.random.default_rng(seed)
    X = points(15, seed)
    latent = X @ np.array(SLOPES[kind]) + 0.3 * X[:, 0] * X[:, 1]
    if kind == "fraction":
        y = expit(latent) + 0.02 * rng.standard_normal(15)
    else:
        y = latent + 0.1 * rng.standard_normal(15)
    plate = np.arange(15) % 2
    inside = (2 * plate + (X[:, 0] > 0.0),) if shared else ()
    scale = (plate,) if shared and kind == "fraction" else ()
    readings = Readings(X=X, y=y, sd=np.zeros(15), inside=inside, scale=scale)
    typical = (0.2, 5.0) if kind == "positive" else (-2.0, 2.0)
    priors = priors_of(kind, typical)
    fits = [
        fit_surrogate(name, readings, kind, Columns.plain(2), priors, seed).surface
        for name in ("gp", "quadratic")
    ]
    return mixture([fit.lightened(nodes) for fit in fits], np.array([0.6, 0.4]))
