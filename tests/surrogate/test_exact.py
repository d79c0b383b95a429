"""The fast engine against the exact posterior of the same model, by importance sampling.

At every hyperparameter node the whitened latents are drawn from a heavy-tailed law about the
engine's Gaussian and weighted by prior times likelihood, which is written out here anew; this gives
the node's evidence and probabilities without the engine's approximation.
"""

import numpy as np
import pytest
from scipy.special import expit, gammaln, logit, ndtr

from muntin.surrogate.cells import Readings, collapse
from muntin.surrogate.coding import Columns
from muntin.surrogate.evidence import Model
from muntin.surrogate.fit import family_of, fit_surrogate
from muntin.surrogate.hyperparameters import integrate
from muntin.surrogate.priors import priors_of
from tests.benchmarks.processes import PH_LEVELS, SALT_LEVELS, draw, plate_errors

DRAWS, DEGREES, TARGET = 4000, 8.0, 0.8
COLUMNS, PRIORS = Columns.plain(2), priors_of("fraction", (0.0, 1.0))


def wells(kind, seed, count):
    """Readings of random wells of a drawn process, twelve to a plate."""
    rng = np.random.default_rng(seed)
    process = draw(kind, rng)
    ph, salt = rng.choice(PH_LEVELS, count), rng.choice(SALT_LEVELS, count)
    plate = np.arange(count) // 12
    y = process.read(np.column_stack([ph, salt]), plate_errors(plate.max() + 1, rng)[plate], rng)
    X = np.column_stack([(ph - 6.0) / 1.5, (salt - 275.0) / 225.0])
    return Readings(X=X, y=y, sd=np.zeros(count), scale=(plate,))


def exact_node(model, posterior, node, X, rng):
    """Log evidence of one node, and p_mean (n,) at coded X (n, 2)."""
    approx, theta = posterior.evidence.approximation, posterior.evidence.theta[[node]]
    mean, root = approx.mean[node], np.linalg.cholesky(approx.V[node])
    size = len(mean)
    chi = rng.chisquare(DEGREES, DRAWS) / DEGREES
    z = rng.standard_normal((DRAWS, size)) / np.sqrt(chi)[:, None]
    w = mean + z @ root.T
    log_q = gammaln((DEGREES + size) / 2) - gammaln(DEGREES / 2)
    log_q -= size / 2 * np.log(DEGREES * np.pi) + np.log(np.diag(root)).sum()
    log_q = log_q - (DEGREES + size) / 2 * np.log1p((z**2).sum(1) / DEGREES)

    layout, cells, family = model.layout, model.cells, model.family
    own = layout.family(theta)
    if family.name == "gp":
        K = family.covariance(own, cells.X, cells.X)[0]
        L = np.linalg.cholesky(K + 1e-10 * own[0, 0] ** 2 * np.eye(len(K)))
        latents, basis = L, np.linalg.solve(L, family.covariance(own, cells.X, X)[0]).T
        left = np.maximum(family.variance(own, X)[0] - (basis**2).sum(1), 1e-12)
    else:
        sd = family.coefficient_sd(own)[0]
        latents, basis = family.basis(cells.X) * sd, family.basis(X) * sd
        left = np.full(len(X), 1e-12)
    f = w[:, : latents.shape[1]] @ latents.T
    scale = layout.scale_sd(theta)[0, 0] * w[:, latents.shape[1] :]
    y_mean = (1.0 + scale[:, cells.scale[0]]) * expit(f[:, cells.latent])
    noise = layout.noise(theta)[0]
    residuals = cells.y - y_mean[:, cells.cell]
    log_like = (-0.5 * (residuals / noise) ** 2 - np.log(noise) - 0.5 * np.log(2 * np.pi)).sum(1)
    log_prior = -0.5 * (w**2).sum(1) - size / 2 * np.log(2 * np.pi)
    log_w = log_like + log_prior - log_q
    total = np.logaddexp.reduce(log_w)
    score = (w[:, : latents.shape[1]] @ basis.T - logit(TARGET)) / np.sqrt(left)
    return total - np.log(DRAWS), np.exp(log_w - total) @ ndtr(score)


@pytest.mark.parametrize("name", ["gp", "quadratic"])
@pytest.mark.parametrize(
    ("kind", "seed", "count"), [("elution", 0, 12), ("elution", 1, 12), ("mixed mode", 1, 24)]
)
def test_probabilities_agree_with_the_exact_posterior(name, kind, seed, count):
    readings = wells(kind, seed, count)
    model = Model(family_of(name, COLUMNS, PRIORS), collapse(readings), "logit")
    posterior = integrate(model, 1)
    rng = np.random.default_rng(11)
    a, b = np.meshgrid(np.linspace(-1, 1, 13), np.linspace(-1, 1, 11))
    X = np.column_stack([a.ravel(), b.ravel()])
    nodes = range(len(posterior.log_weights))
    exact = [exact_node(model, posterior, node, X, rng) for node in nodes]
    log_z = np.array([z for z, _ in exact])
    log_w = posterior.log_weights + log_z - posterior.evidence.log
    weights = np.exp(log_w - np.logaddexp.reduce(log_w))
    p_exact = weights @ np.array([p for _, p in exact])

    fit = fit_surrogate(name, readings, "fraction", COLUMNS, PRIORS, seed=1)
    mean, variance = fit.surface.moments(X)
    p_fast = fit.surface.weights @ ndtr((mean - logit(TARGET)) / np.sqrt(variance))
    difference = np.abs(p_fast - p_exact)
    # The engine's budget: mean 0.005, largest 0.03; the draws' own error is below 0.002.
    assert difference.mean() < 0.005
    assert difference.max() < 0.03
