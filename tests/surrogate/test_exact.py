"""The fast engine against the exact posterior of the same model, by importance sampling.

At every hyperparameter node the whitened latents are drawn from a heavy-tailed law about the
engine's Gaussian and weighted by prior times likelihood, which is written out here anew; this gives
the node's evidence and probabilities without the engine's approximation. Draws lie on Sobol'
points, and a weight counts for sqrt(n) times the mean weight at most (Ionides 2008, J. Comput.
Graph. Stat. 17:295), lest one draw in a far tail speak for a node.
"""

import numpy as np
import pytest
from scipy.special import expit, gammaincinv, gammaln, logit, ndtr, ndtri
from scipy.stats.qmc import Sobol

from muntin.surrogate.cells import Readings, collapse
from muntin.surrogate.coding import Columns
from muntin.surrogate.evidence import Model
from muntin.surrogate.fit import _surface, family_of
from muntin.surrogate.hyperparameters import integrate
from muntin.surrogate.priors import priors_of
from muntin.window.probability import Target, mean_meets
from tests.benchmarks.processes import PH_LEVELS, SALT_LEVELS, draw, plate_errors

DRAWS, DEGREES, TARGET = 1024, 8.0, 0.8
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


def heavy_tailed(mean, V, rng):
    """Draws (DRAWS, R) of a multivariate t about a Gaussian, and their log density."""
    size, root = len(mean), np.linalg.cholesky(V)
    points = np.clip(Sobol(size + 1, rng=rng).random(DRAWS), 1e-9, 1.0 - 1e-9)
    chi = 2.0 * gammaincinv(DEGREES / 2, points[:, :1]) / DEGREES
    z = ndtri(points[:, 1:]) / np.sqrt(chi)
    log_q = gammaln((DEGREES + size) / 2) - gammaln(DEGREES / 2)
    log_q -= size / 2 * np.log(DEGREES * np.pi) + np.log(np.diag(root)).sum()
    return mean + z @ root.T, log_q - (DEGREES + size) / 2 * np.log1p((z**2).sum(1) / DEGREES)


def exact_node(model, posterior, node, X, rng):
    """Log evidence of one node, and p_mean (n,) at coded X (n, 2)."""
    approx, theta = posterior.evidence.approximation, posterior.evidence.theta[[node]]
    w, log_q = heavy_tailed(approx.mean[node], approx.V[node], rng)
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
    ceiling = 1.0 - min(np.exp(theta[0, layout.names.index("ceiling_gap")]), 0.5)
    f = w[:, : latents.shape[1]] @ latents.T
    scale = layout.scale_sd(theta)[0, 0] * w[:, latents.shape[1] :]
    y_mean = (1.0 + scale[:, cells.scale[0]]) * ceiling * expit(f[:, cells.latent])
    noise = layout.noise(theta)[0]
    residuals = cells.y - y_mean[:, cells.cell]
    log_like = (-0.5 * (residuals / noise) ** 2 - np.log(noise) - 0.5 * np.log(2 * np.pi)).sum(1)
    log_prior = -0.5 * (w**2).sum(1) - w.shape[1] / 2 * np.log(2 * np.pi)
    log_w = log_like + log_prior - log_q
    log_w = np.minimum(log_w, np.logaddexp.reduce(log_w) - 0.5 * np.log(DRAWS))
    total = np.logaddexp.reduce(log_w)
    # Where the target lies above the ceiling no latent value reaches it.
    least = logit(TARGET / ceiling) if ceiling > TARGET else np.inf
    score = (w[:, : latents.shape[1]] @ basis.T - least) / np.sqrt(left)
    return total - np.log(DRAWS), np.exp(log_w - total) @ ndtr(score)


@pytest.mark.parametrize("name", ["gp", "quadratic"])
@pytest.mark.parametrize(
    ("kind", "seed", "count"), [("elution", 0, 12), ("elution", 1, 12), ("mixed mode", 1, 24)]
)
def test_probabilities_agree_with_the_exact_posterior(name, kind, seed, count):
    model = Model(family_of(name, COLUMNS, PRIORS), collapse(wells(kind, seed, count)), "logit")
    posterior = integrate(model, 1)
    rng = np.random.default_rng(11)
    a, b = np.meshgrid(np.linspace(-1, 1, 9), np.linspace(-1, 1, 7))
    X = np.column_stack([a.ravel(), b.ravel()])
    nodes = range(len(posterior.log_weights))
    exact = [exact_node(model, posterior, node, X, rng) for node in nodes]
    log_z = np.array([z for z, _ in exact])
    log_w = posterior.log_weights + log_z - posterior.evidence.log
    weights = np.exp(log_w - np.logaddexp.reduce(log_w))
    p_exact = weights @ np.array([p for _, p in exact])

    surface = _surface(model, posterior.evidence, np.exp(posterior.log_weights), "logit")
    p_fast = mean_meets(surface, surface.moments(X), Target(low=TARGET))
    difference = np.abs(p_fast - p_exact)
    # The engine's budget. The draws' own error, from eight seeds: at most 0.0004 on average over
    # the conditions and 0.003 at the worst of them. With 8192 draws the differences are 0.0003 to
    # 0.0015 on average and 0.004 to 0.02 at the worst.
    assert difference.mean() < 0.005
    assert difference.max() < 0.03
