"""The fast engine's integration over hyperparameters against grids, with two of them unknown.

Noise and process sd are unknown; the length scale, and a fraction's ceiling, are held by priors of
next to no width.
"""

from functools import cache

import numpy as np
import pytest
from scipy.special import expit, logsumexp, ndtr

from muntin.surrogate.cells import Readings, collapse
from muntin.surrogate.coding import Columns
from muntin.surrogate.evidence import Model, evaluate
from muntin.surrogate.fit import fit_surrogate
from muntin.surrogate.hyperparameters import integrate
from muntin.surrogate.nodes import Errors, ProcessNodes, Surface
from muntin.surrogate.priors import priors_of
from muntin.surrogate.process import GaussianProcess
from muntin.window.probability import Target, mean_meets, node_mean_meets
from tests.surrogate.problems import log_normal, matern

LENGTH, GAP = 1.5, 0.04
NEW = np.array([-1.0, -0.6, -0.35, -0.1, 0.25, 0.7, 1.0])[:, None]
ONE = Columns.plain(1)
# Grid of standardised ln noise and ln process sd.
AXIS = np.linspace(-5.0, 5.0, 41)


def priors(kind):
    held = {"length_scale": (LENGTH, 1e-7), "ceiling_gap": (GAP, 1e-7)}
    return priors_of(kind, (-1.0, 3.0)).with_overrides(held)


@cache
def readings(kind):
    """Seven wells at five conditions of one factor."""
    X = np.array([-0.9, -0.4, 0.1, 0.1, 0.5, 0.9, 0.9])
    f = 0.8 + 1.2 * X - 0.6 * X**2
    noise = np.random.default_rng(3).normal(size=7)
    y = f + 0.4 * noise if kind == "real" else expit(f) + 0.07 * noise
    return Readings(X=X[:, None], y=y, sd=np.zeros(7))


def target(kind):
    return Target(low=0.7) if kind == "real" else Target(low=0.65)


def model_of(kind):
    link = "identity" if kind == "real" else "logit"
    return Model(GaussianProcess(ONE, priors(kind)), collapse(readings(kind)), link)


def grid(p):
    """Log sds (41 * 41, 2) of the grid and the log prior mass of every cell."""
    a, b = (v.ravel() for v in np.meshgrid(AXIS, AXIS, indexing="ij"))
    noise = np.log(p.noise_sd.median) + p.noise_sd.log_sd * a
    process = np.log(p.process_sd.median) + p.process_sd.log_sd * b
    mass = -0.5 * (a**2 + b**2) - np.log(2.0 * np.pi) + 2.0 * np.log(AXIS[1] - AXIS[0])
    return np.column_stack([noise, process]), mass


def kernel(p, process_sd, A, B):
    return p.mean_sd**2 + process_sd**2 * matern(np.abs(A - B.T) / LENGTH)


@cache
def by_plain_formulas():
    """Identity link: log marginal likelihood and chances by dense normal formulas on the grid."""
    p, data, t = priors("real"), readings("real"), target("real").low
    points, mass = grid(p)
    logs, chances = [], []
    for ln_noise, ln_process in points:
        sd = np.exp(ln_process)
        K = kernel(p, sd, data.X, data.X) + np.exp(2.0 * ln_noise) * np.eye(len(data))
        cross = kernel(p, sd, NEW, data.X)
        pull = np.linalg.solve(K, cross.T).T
        mean = p.mean + pull @ (data.y - p.mean)
        variance = np.diag(kernel(p, sd, NEW, NEW)) - (pull * cross).sum(1)
        logs.append(log_normal(data.y - p.mean, K))
        chances.append(ndtr((mean - t) / np.sqrt(variance)))
    return summary(np.array(logs) + mass, np.array(chances))


@cache
def by_propagation_on_the_grid():
    """Logit link: the engine's own approximation at every point of the grid."""
    model = model_of("fraction")
    points, mass = grid(priors("fraction"))
    noise, process = points.T
    held = np.full(len(points), 1.0)
    theta = np.column_stack([noise, np.log(GAP) * held, process, np.log(LENGTH) * held])
    # From the prior median outwards, so that each part starts near a fixed point.
    middle = evaluate(model, np.log([[0.05, GAP, 2.0, LENGTH]]))
    evidence = evaluate(model, theta, middle)
    surface = surface_of(model, evidence, np.exp(mass))
    chances = node_mean_meets(surface, surface.moments(NEW), target("fraction"))
    return summary(evidence.log + mass, chances)


def summary(log_w, chances):
    """Log marginal likelihood; p_mean (n,) and its sd over the hyperparameters (n,)."""
    marginal = logsumexp(log_w)
    w = np.exp(log_w - marginal)
    p = w @ chances
    return marginal, p, np.sqrt(w @ (chances - p) ** 2)


def surface_of(model, evidence, weights):
    layout, theta, a = model.layout, evidence.theta, evidence.approximation
    alpha, Q = model.family.weights(evidence.root, a.mean, a.V)
    errors = Errors(
        layout.noise(theta),
        layout.inside_sd(theta),
        layout.scale_sd(theta),
        layout.ceiling_of(theta),
    )
    nodes = ProcessNodes(model.family, layout.family(theta), model.cells.X, alpha, Q, errors)
    return Surface((nodes,), weights, model.link)


def reference(kind):
    return by_plain_formulas() if kind == "real" else by_propagation_on_the_grid()


KINDS = pytest.mark.parametrize("kind", ["real", "fraction"])


@KINDS
def test_the_grid_is_wide_enough(kind):
    """Its rim carries nothing, and p_mean spreads, so that agreement says something."""
    _, mass = grid(priors(kind))
    rim = np.abs(np.array(np.meshgrid(AXIS, AXIS))).max(0).ravel() > 4.9
    assert np.exp(logsumexp(mass)) == pytest.approx(1.0, abs=1e-5)
    assert np.exp(logsumexp(mass[rim])) < 1e-5
    _, p, spread = reference(kind)
    assert ((p > 0.05) & (p < 0.95)).sum() >= 3
    assert spread.max() > 0.03


@KINDS
def test_many_nodes_agree_with_the_grid(kind):
    marginal, p, _ = reference(kind)
    model = model_of(kind)
    posterior = integrate(model, seed=2, nodes=2048)
    surface = surface_of(model, posterior.evidence, np.exp(posterior.log_weights))
    ours = mean_meets(surface, surface.moments(NEW), target(kind))
    # Nearly 2000 effective nodes on Sobol' points; the grid itself is good to 1e-4.
    assert posterior.log_marginal == pytest.approx(marginal, abs=3e-3)
    assert ours == pytest.approx(p, abs=1e-3)


@KINDS
@pytest.mark.parametrize("seed", [1, 2, 3])
def test_the_engine_as_used_agrees_with_the_grid(kind, seed):
    """p_mean to 3 errors of as many plain draws as there are effective nodes, and nowhere off by
    more than the 0.03 that the engine is allowed; the log marginal likelihood to 0.1.
    """
    marginal, p, spread = reference(kind)
    fit = fit_surrogate("gp", readings(kind), kind, ONE, priors(kind), seed)
    ours = mean_meets(fit.surface, fit.surface.moments(NEW), target(kind))
    assert fit.log_marginal == pytest.approx(marginal, abs=0.1)
    assert np.abs(ours - p).max() < 0.03
    assert (np.abs(ours - p) / spread).max() < 3.0 / np.sqrt(fit.ess)


def two_wells_by_brute_force(X, y, p, new, low):
    """Log marginal likelihood and p_mean of two fraction wells: no approximation anywhere.

    The two latent values live on a fixed grid, fine where the logit bends, so that the likelihood
    of a noise is a vector each and a process sd one matrix: 25 x 25 hyperparameters in all.
    """
    u = np.linspace(-1.0, 1.0, 401) * np.arcsinh(50.0 / 3.0)
    f, step = 3.0 * np.sinh(u), 3.0 * np.cosh(u) * (u[1] - u[0])
    axis = np.linspace(-4.5, 4.5, 25)
    noise = p.noise_sd.median * np.exp(p.noise_sd.log_sd * axis)[:, None]
    first, second = (
        np.exp(-0.5 * ((value - (1.0 - GAP) * expit(f)) / noise) ** 2)
        / noise
        / np.sqrt(2.0 * np.pi)
        * step
        for value in y
    )
    mass, met = np.zeros((25, 25)), np.zeros((25, 25, len(new)))
    for j, z in enumerate(axis):
        sd = p.process_sd.median * np.exp(p.process_sd.log_sd * z)
        K = kernel(p, sd, X, X)
        P = np.linalg.inv(K)
        square = P[0, 0] * f[:, None] ** 2 + 2.0 * P[0, 1] * np.outer(f, f) + P[1, 1] * f**2
        density = np.exp(-0.5 * square) / np.sqrt(np.linalg.det(2.0 * np.pi * K))
        mass[:, j] = ((first @ density) * second).sum(1)
        cross = kernel(p, sd, new, X)
        pull = cross @ P
        spread = np.sqrt(np.diag(kernel(p, sd, new, new)) - (pull * cross).sum(1))
        for i in range(len(new)):
            mean = pull[i, 0] * f[:, None] + pull[i, 1] * f
            chance = ndtr((mean - np.log(low / (1.0 - GAP - low))) / spread[i])
            met[:, j, i] = ((first @ (density * chance)) * second).sum(1)
    prior = np.exp(-0.5 * axis**2) / np.sqrt(2.0 * np.pi) * (axis[1] - axis[0])
    weight = np.outer(prior, prior)
    total = (weight * mass).sum()
    return np.log(total), np.einsum("ab,abi->i", weight, met) / total


@pytest.mark.parametrize("y", [(0.55, 0.85), (0.75, 0.72), (0.4, 0.93)])
def test_two_wells_from_readings_to_probability_by_brute_force(y):
    """The whole engine, approximation and integration, where two wells leave the most open.

    What is left is expectation propagation's own error, largest where a well lies on a plateau:
    a hundredth of p_mean and of the log marginal likelihood.
    """
    X, new = np.array([[-0.5], [0.6]]), np.array([[-1.0], [-0.2], [0.3], [1.0]])
    p = priors("fraction")
    marginal, chance = two_wells_by_brute_force(X, np.array(y), p, new, 0.6)
    data = Readings(X=X, y=np.array(y), sd=np.zeros(2))
    model = Model(GaussianProcess(ONE, p), collapse(data), "logit")
    posterior = integrate(model, seed=1, nodes=512)
    surface = surface_of(model, posterior.evidence, np.exp(posterior.log_weights))
    ours = mean_meets(surface, surface.moments(new), Target(low=0.6))
    assert posterior.log_marginal == pytest.approx(marginal, abs=0.02)
    assert ours == pytest.approx(chance, abs=0.015)
