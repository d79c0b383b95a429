"""Problems that the tests of the surrogates share, and references written with plain loops."""

import numpy as np

from muntin.surrogate.cells import Readings, collapse
from muntin.surrogate.coding import Choice, Coding, Continuous
from muntin.surrogate.evidence import Evidence, Model
from muntin.surrogate.fit import family_of
from muntin.surrogate.priors import priors_of
from muntin.surrogate.propagation import approximate

# Two factors, one a number and one a choice: three coded columns.
CODING = Coding((Continuous(low=4.0, high=7.0), Choice(levels=3)))
COLUMNS = CODING.columns


def readings(seed, kind="fraction", n=23, inside=(2, 4), scale=(2,), with_sd=True):
    """Readings (n,) of a smooth surface with repeats, shared errors and some known sds.

    inside, scale: number of groups of each shared error. Scale errors suit a fraction only.
    """
    rng = np.random.default_rng(seed)
    level, choice = rng.choice([4.0, 5.0, 5.7, 7.0], n), rng.integers(0, 3, n)
    X = CODING.code([level, choice])
    inside_groups = tuple(rng.integers(0, k, n) for k in inside)
    scale_groups = tuple(rng.integers(0, k, n) for k in scale)
    f = 1.0 + 1.5 * X[:, 0] - 0.4 * X[:, 0] ** 2 + 0.5 * X[:, 1]
    for groups, k in zip(inside_groups, inside, strict=True):
        f = f + rng.normal(0.0, 0.15, k)[groups]
    sd = np.where(rng.random(n) < 0.3, 0.05, 0.0) if with_sd else np.zeros(n)
    if kind == "real":
        y = f + rng.normal(0.0, np.sqrt(0.1**2 + sd**2))
    else:
        y = 1.0 / (1.0 + np.exp(-f))
        for groups, k in zip(scale_groups, scale, strict=True):
            y = y * (1.0 + rng.normal(0.0, 0.03, k)[groups])
        y = y + rng.normal(0.0, np.sqrt(0.04**2 + sd**2))
    return Readings(X=X, y=y, sd=sd, inside=inside_groups, scale=scale_groups)


def priors(kind="fraction"):
    return priors_of(kind, (-1.0, 3.0))


def model_of(name, data, kind="fraction", columns=COLUMNS, own_priors=None):
    """The model of readings under a family; `real` has the identity link."""
    family = family_of(name, columns, own_priors or priors(kind))
    return Model(family, collapse(data), "identity" if kind == "real" else "logit")


def settled(model, theta, tolerance=1e-9):
    """The evidence with the fixed point of the sites reached far closer than in use."""
    rows = model.rows(theta)
    return Evidence(theta, rows.root, approximate(rows, model.likelihood(theta), None, tolerance))


def matern(r):
    """Rasmussen & Williams 2006, eq. 4.17, nu = 5/2."""
    q = np.sqrt(5.0) * r
    return (1.0 + q + q * q / 3.0) * np.exp(-q)


def surface_covariance(family, own, x, z):
    """Prior covariance of f between two coded conditions, term by term."""
    p, columns = family.priors, family.columns
    if family.name == "gp":
        lengths = [own[1 + factor] for factor in columns.factor]
        r = np.sqrt(sum(((a - b) / s) ** 2 for a, b, s in zip(x, z, lengths, strict=True)))
        return p.mean_sd**2 + own[0] ** 2 * matern(r)
    linear, curved = own
    value = p.mean_sd**2
    for i in range(len(x)):
        value += linear**2 * x[i] * z[i]
        if columns.curved[i]:
            value += curved**2 * x[i] ** 2 * z[i] ** 2
        for j in range(i):
            if columns.factor[i] != columns.factor[j]:
                value += linear**2 * x[i] * x[j] * z[i] * z[j]
    return value


def surface_covariances(family, own, X, Z):
    return np.array([[surface_covariance(family, own, x, z) for z in Z] for x in X])


def reading_covariance(model, theta, data):
    """Prior covariance (n, n) of the readings of the identity link: surface, shared, noise."""
    layout = model.layout
    own = layout.family(theta)[0]
    K = surface_covariances(model.family, own, data.X, data.X)
    for sd, groups in zip(layout.inside_sd(theta)[0], data.inside, strict=True):
        for i, a in enumerate(groups):
            for j, b in enumerate(groups):
                K[i, j] += sd**2 * (a == b)
    return K + np.diag(layout.noise(theta)[0] ** 2 + data.sd**2)


def log_normal(residual, covariance):
    """Log density of N(0, covariance) at a residual."""
    _, log_det = np.linalg.slogdet(2.0 * np.pi * covariance)
    return -0.5 * (residual @ np.linalg.solve(covariance, residual) + log_det)
