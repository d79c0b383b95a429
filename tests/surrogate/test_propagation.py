"""The Gaussian approximation against exact formulas, plain loops and dense quadrature."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.special import expit, logsumexp

from muntin.surrogate.cells import Readings
from muntin.surrogate.coding import Columns
from muntin.surrogate.evidence import evaluate
from muntin.surrogate.laplace import laplace_sites
from muntin.surrogate.propagation import approximate
from tests.benchmarks.trials import near_ceiling
from tests.surrogate.problems import (
    log_normal,
    model_of,
    reading_covariance,
    readings,
    settled,
    surface_covariances,
)

NAMES = pytest.mark.parametrize("name", ["gp", "quadratic"])
CEILING = 0.96


def latent_moments(evidence):
    """Mean (S, U) and covariance (S, U, U) of the latent values, level taken off."""
    own = evidence.root.shape[2]
    a = evidence.approximation
    mean = (evidence.root @ a.mean[:, :own, None])[..., 0]
    return mean, evidence.root @ a.V[:, :own, :own] @ np.swapaxes(evidence.root, 1, 2)


# --- identity link: exact ------------------------------------------------------------------------


@NAMES
def test_the_identity_link_agrees_with_the_normal_formulas(name):
    data = readings(11, "real", n=27, inside=(2, 3), scale=())
    model = model_of(name, data, "real")
    theta = model.layout.theta(np.random.default_rng(2).normal(0.0, 0.6, (2, len(model.layout))))
    evidence = settled(model, theta)
    mean, covariance = latent_moments(evidence)
    first = [np.flatnonzero(model.cells.latent[model.cells.cell] == u)[0] for u in range(20)]
    for s in range(2):
        one = theta[s : s + 1]
        K = reading_covariance(model, one, data)
        noise = np.exp(2.0 * theta[s, 0]) + data.sd**2
        prior = K - np.diag(noise)
        residual = data.y - model.family.priors.mean
        cross = prior[first]
        expected = cross @ np.linalg.solve(K, residual)
        spread = prior[np.ix_(first, first)] - cross @ np.linalg.solve(K, cross.T)
        assert evidence.log[s] == pytest.approx(log_normal(residual, K), abs=1e-6)
        assert mean[s, :20] == pytest.approx(expected, abs=1e-7)
        assert covariance[s, :20, :20] == pytest.approx(spread, abs=1e-7)


# --- logit link: the fixed point that it should be -----------------------------------------------


def plain_propagation(K, ceiling, y, variance, latent, h, sweeps=60):
    """Expectation propagation one cell at a time on latent values (U,) and one scale error.

    Minka 2001 in its textbook form: dense matrices, a fine grid for the tilted moments, damping.
    Returns mean (U + 1,) and covariance of latent values and the standardised scale error.
    """
    n = len(K) + 1
    prior = np.zeros((n, n))
    prior[:-1, :-1], prior[-1, -1] = K, 1.0
    sites = [(np.zeros((2, 2)), np.zeros(2)) for _ in y]
    pairs = [[u, n - 1] for u in latent]
    for _ in range(sweeps):
        for c, pair in enumerate(pairs):
            precision, shift = np.linalg.inv(prior), np.zeros(n)
            for (A, b), other in zip(sites, pairs, strict=True):
                precision[np.ix_(other, other)] += A
                shift[other] += b
            V = np.linalg.inv(precision)
            mean = V @ shift
            A, b = sites[c]
            marginal = np.linalg.inv(V[np.ix_(pair, pair)])
            rest, rest_shift = marginal - A, marginal @ mean[pair] - b
            cavity = np.linalg.inv(rest)
            tilted, moments = tilted_moments(
                cavity @ rest_shift, cavity, ceiling, y[c], variance, h
            )
            new = np.linalg.inv(tilted)
            sites[c] = (A + 0.6 * (new - rest - A), b + 0.6 * (new @ moments - rest_shift - b))
    return mean, V


def tilted_moments(mean, cavity, ceiling, y, variance, h):
    u = mean[0] + np.sqrt(cavity[0, 0]) * np.linspace(-8.0, 8.0, 1001)
    g = ceiling * expit(u)
    s = mean[1] + cavity[0, 1] / cavity[0, 0] * (u - mean[0])
    spread = cavity[1, 1] - cavity[0, 1] ** 2 / cavity[0, 0]
    total = variance + (h * g) ** 2 * spread
    residual = y - g - h * g * s
    w = np.exp(-0.5 * ((u - mean[0]) ** 2 / cavity[0, 0] + residual**2 / total + np.log(total)))
    w /= w.sum()
    gain = h * g * spread / total
    s, left = s + gain * residual, spread * (1.0 - gain * h * g)
    mu = np.array([w @ u, w @ s])
    du, ds = u - mu[0], s - mu[1]
    uu, us, ss = w @ du**2, w @ (du * ds), w @ (ds**2 + left)
    return np.array([[uu, us], [us, ss]]), mu


def two_wells(y, noise, h, process_sd=2.0, X=(-0.4, 0.7), length=2.5):
    """A model of wells at conditions X of one factor, one scale error shared by all, its theta.

    The fraction levels off at CEILING.
    """
    n = len(y)
    data = Readings(
        X=np.array(X)[:, None],
        y=np.array(y),
        sd=np.zeros(n),
        scale=(np.zeros(n, dtype=np.intp),) if h else (),
    )
    model = model_of("gp", data, columns=Columns.plain(1))
    values = [noise, *([h] if h else []), 1.0 - CEILING, process_sd, length]
    return model, np.log([values])


@pytest.mark.usefixtures("fine_quadrature")
@pytest.mark.parametrize(
    ("y", "noise", "h"),
    [((0.6, 0.9), 0.05, 0.05), ((0.3, 0.97, 0.75), 0.03, 0.03), ((1.01, 0.93), 0.1, 0.05)],
)
def test_the_fixed_point_is_that_of_the_textbook_algorithm(y, noise, h):
    model, theta = two_wells(y, noise, h, X=(-0.4, 0.7, 0.2)[: len(y)])
    evidence = settled(model, theta)
    K = evidence.root[0] @ evidence.root[0].T
    mean, V = plain_propagation(K, CEILING, y, noise**2, range(len(y)), h)
    ours, spread = latent_moments(evidence)
    sd = np.sqrt(np.diag(V))
    assert (ours[0] - mean[:-1]) / sd[:-1] == pytest.approx(np.zeros(len(y)), abs=1e-4)
    assert np.sqrt(np.diag(spread[0])) / sd[:-1] == pytest.approx(np.ones(len(y)), abs=1e-4)
    approximation = evidence.approximation
    assert approximation.mean[0, -1] == pytest.approx(mean[-1], abs=1e-4)
    assert approximation.V[0, -1, -1] == pytest.approx(V[-1, -1], abs=1e-4)


# --- logit link: how far from the truth ----------------------------------------------------------


def dense_posterior(model, theta, h):
    """Log evidence, mean and covariance of the latent values, mean of the standardised scale error.

    Brute force over one or two latent values and one scale error; every well is read by itself.
    """
    own = model.layout.family(theta)[0]
    cells = model.cells
    K = surface_covariances(model.family, own, cells.X, cells.X)
    P = np.linalg.inv(K)
    axis = np.linspace(-19.0, 19.0, 761)
    F = np.stack(np.meshgrid(*[axis] * len(K), indexing="ij")).reshape(len(K), -1)
    log_prior = -0.5 * np.einsum("uk,uv,vk->k", F, P, F)
    log_prior += -0.5 * np.linalg.slogdet(2.0 * np.pi * K)[1] + len(K) * np.log(axis[1] - axis[0])
    g = CEILING * expit(F + model.family.priors.mean)
    errors = np.linspace(-5.0, 5.0, 41) if h else np.zeros(1)
    log_error = -0.5 * errors**2 - 0.5 * np.log(2.0 * np.pi) + np.log(0.25) if h else np.zeros(1)
    variance = np.exp(2.0 * theta[0, 0])
    total, mass, means, first, second = -np.inf, [], [], 0.0, 0.0
    for e, log_e in zip(errors, log_error, strict=True):
        log_w = log_prior + log_e
        for y, cell in zip(cells.y, cells.cell, strict=True):
            mean = (1.0 + h * e) * g[cells.latent[cell]]
            log_w = log_w - 0.5 * ((y - mean) ** 2 / variance + np.log(2.0 * np.pi * variance))
        mass.append(logsumexp(log_w))
        w = np.exp(log_w - mass[-1])
        means.append(((F * w).sum(1), (F * w) @ F.T))
    total = logsumexp(mass)
    share = np.exp(np.array(mass) - total)
    first = sum(p * m for p, (m, _) in zip(share, means, strict=True))
    second = sum(p * q for p, (_, q) in zip(share, means, strict=True))
    return total, first, second - np.outer(first, first), share @ errors


@pytest.mark.usefixtures("fine_quadrature")
@pytest.mark.parametrize(
    ("y", "noise"), [((0.5,), 0.03), ((0.3, 0.35, 0.26), 0.08), ((0.93,), 0.05), ((0.04,), 0.03)]
)
def test_one_latent_value_is_exact(y, noise):
    """One cell is one site, whose moments are matched whatever the likelihood's shape."""
    model, theta = two_wells(y, noise, 0.0, X=(0.3,) * len(y))
    evidence = settled(model, theta)
    assert evidence.root.shape[1] == 1
    log_z, mean, covariance, _ = dense_posterior(model, theta, 0.0)
    ours, spread = latent_moments(evidence)
    sd = np.sqrt(covariance[0, 0])
    assert evidence.log[0] == pytest.approx(log_z, abs=1e-4)
    assert ours[0, 0] == pytest.approx(mean[0], abs=1e-4 * sd)
    assert np.sqrt(spread[0, 0, 0]) == pytest.approx(sd, rel=1e-4)


def test_the_quadrature_in_use_costs_little_on_a_plateau():
    """A law that leans on a plateau costs 32 points about 0.01 of log Z and of an sd."""
    for y in (0.93, 0.04, 1.01):
        model, theta = two_wells((y,), 0.04, 0.0, X=(0.3,))
        evidence = settled(model, theta)
        log_z, mean, covariance, _ = dense_posterior(model, theta, 0.0)
        ours, spread = latent_moments(evidence)
        sd = np.sqrt(covariance[0, 0])
        assert evidence.log[0] == pytest.approx(log_z, abs=0.02)
        assert ours[0, 0] == pytest.approx(mean[0], abs=0.02 * sd)
        assert np.sqrt(spread[0, 0, 0]) == pytest.approx(sd, rel=0.02)


@pytest.mark.parametrize(
    ("y", "noise", "h"),
    [
        ((0.6, 0.9), 0.05, 0.0),
        ((0.97, 0.6), 0.03, 0.0),
        ((0.97, 0.6), 0.03, 0.05),
        ((0.03, 0.9), 0.08, 0.05),
        ((0.3, 0.8), 0.1, 0.1),
    ],
)
def test_two_latent_values_and_a_scale_error_agree_with_brute_force(y, noise, h):
    model, theta = two_wells(y, noise, h)
    evidence = settled(model, theta)
    log_z, mean, covariance, error = dense_posterior(model, theta, h)
    ours, spread = latent_moments(evidence)
    sd = np.sqrt(np.diag(covariance))
    # Matching two moments a cell costs this much where each well is told by itself.
    assert evidence.log[0] == pytest.approx(log_z, abs=0.01)
    assert (ours[0] - mean) / sd == pytest.approx(np.zeros(2), abs=0.02)
    assert np.sqrt(np.diag(spread[0])) / sd == pytest.approx(np.ones(2), abs=0.03)
    if h:
        assert evidence.approximation.mean[0, -1] == pytest.approx(error, abs=0.01)


# --- invariances ---------------------------------------------------------------------------------


@NAMES
@pytest.mark.parametrize("kind", ["real", "fraction"])
def test_a_reading_that_says_nothing_changes_nothing(name, kind):
    scale = (2,) if kind == "fraction" else ()
    data = readings(12, kind, n=19, inside=(3,), scale=scale)
    silent = replace(data, sd=np.append(data.sd[:-1], 1e6))
    model, fewer = (
        model_of(name, silent, kind),
        model_of(name, data.take(np.arange(len(data) - 1)), kind),
    )
    theta = model.layout.theta(np.full((2, len(model.layout)), 0.2))
    with_it, without = settled(model, theta), settled(fewer, theta)
    flat = -0.5 * np.log(2.0 * np.pi * 1e12)
    assert with_it.log == pytest.approx(without.log + flat, abs=1e-5)
    known = fewer.cells.X.shape[0]
    assert latent_moments(with_it)[0][:, :known] == pytest.approx(
        latent_moments(without)[0], abs=1e-5
    )


@pytest.mark.parametrize("kind", ["real", "fraction"])
def test_nodes_do_not_see_each_other(kind):
    data = readings(13, kind, n=17, inside=(2,), scale=(2,) if kind == "fraction" else ())
    model = model_of("gp", data, kind)
    theta = model.layout.theta(np.random.default_rng(3).normal(0.0, 0.8, (5, len(model.layout))))
    together = settled(model, theta)
    for s in range(5):
        alone = settled(model, theta[s : s + 1])
        assert together.log[s] == pytest.approx(alone.log[0], abs=1e-6)
        assert latent_moments(together)[0][s] == pytest.approx(
            latent_moments(alone)[0][0], abs=1e-6
        )


def test_a_start_near_by_leads_to_the_same_fixed_point():
    model = model_of("gp", readings(14, n=21, inside=(2,), scale=(3,)))
    theta = model.layout.theta(np.random.default_rng(4).normal(0.0, 0.7, (4, len(model.layout))))
    cold = evaluate(model, theta)
    warm = evaluate(model, theta, settled(model, model.layout.theta(np.zeros((1, theta.shape[1])))))
    # Both stop within 1e-3 of a move; the evidence is flat there to second order.
    assert warm.log == pytest.approx(cold.log, abs=1e-4)


def test_the_laplace_sites_are_at_the_mode():
    """At the mode the pull of every reading, through its linearised site, balances the prior."""
    model, theta = two_wells((0.75, 0.4), 0.04, 0.06)
    rows = model.rows(theta)
    lik = model.likelihood(theta)
    sites = laplace_sites(rows, lik)
    groups = rows.scale.shape[2]
    u = np.pad(rows.root[0][rows.latent], ((0, 0), (0, groups)))
    s = np.pad(rows.scale[0], ((0, 0), (rows.root.shape[2], 0)))
    precision = np.eye(u.shape[1]) + u.T @ np.diag(sites.uu[0]) @ u + s.T @ np.diag(sites.ss[0]) @ s
    crossed = u.T @ np.diag(sites.us[0]) @ s
    precision += crossed + crossed.T
    w = np.linalg.solve(precision, u.T @ sites.u[0] + s.T @ sites.s[0])

    def log_density(w):
        mean = (1.0 + lik.scale[0, 0] * (s @ w)) * CEILING * expit(u @ w)
        return -0.5 * w @ w - 0.5 * (((model.cells.mean - mean) ** 2) / lik.noise[0, 0]).sum()

    h = 1e-4
    steps = h * np.eye(len(w))
    gradient = [(log_density(w + d) - log_density(w - d)) / (2.0 * h) for d in steps]
    # Newton stops within 0.02 of a move; a pull of one prior sd would be 1.
    assert gradient == pytest.approx(np.zeros(len(w)), abs=0.02)


def test_rows_map_whitened_variables_to_latent_values_and_scale_errors():
    """Root times root is the prior covariance of the latent values, written out term by term; the
    scale errors of a cell have unit variance together, and agree where their groups do.
    """
    data = readings(15, n=22, inside=(3,), scale=(2, 4))
    for name in ("gp", "quadratic"):
        model = model_of(name, data)
        theta = model.layout.theta(np.full((1, len(model.layout)), 0.3))
        rows, cells = model.rows(theta), model.cells
        own = model.layout.family(theta)[0]
        expected = surface_covariances(model.family, own, cells.X, cells.X)
        same = cells.inside[:, 0][:, None] == cells.inside[:, 0][None]
        expected += model.layout.inside_sd(theta)[0, 0] ** 2 * same
        assert rows.root[0] @ rows.root[0].T == pytest.approx(expected, rel=1e-7, abs=1e-7)
        share = model.layout.scale_sd(theta)[0] ** 2
        share /= share.sum()
        agree = [g[:, None] == g[None] for g in cells.scale]
        correlation = share[0] * agree[0] + share[1] * agree[1]
        assert rows.scale[0] @ rows.scale[0].T == pytest.approx(correlation)


def test_wild_nodes_are_finite_and_leave_their_neighbour_alone():
    """Noise, scale error and process sd far from what the wells ask for: some nodes have no proper
    fixed point and are kept from negative precisions or taken as Laplace's, told of by number.
    """
    model, sane = two_wells((0.85, 0.34), 0.03, 0.05)
    medians = np.log([0.02, 0.05, 0.03, 3.0, 1.0])
    theta = medians + np.random.default_rng(9).normal(0.0, 1.5, (40, 5))
    theta[20] = sane
    together = approximate(model.rows(theta), model.likelihood(theta))
    alone = approximate(model.rows(sane), model.likelihood(sane))
    assert np.isfinite(together.log_evidence).all()
    assert np.isfinite(together.V).all()
    assert 20 not in together.laplace
    assert together.log_evidence[20] == pytest.approx(alone.log_evidence[0], abs=1e-6)


def test_a_node_with_improper_cavities_does_not_belittle_the_others():
    """Sites may come to rest where a cavity is improper and what stands for the evidence is far too
    large; nodes that need more sweeps must not be given up because they fall short of that.
    """
    trial = near_ceiling()
    model = model_of("gp", trial.readings, columns=trial.columns, own_priors=trial.priors)
    slow = np.array(
        [
            [0.0508, 0.9405, 1.1136, 2.3068, 0.2203, -1.1872],
            [0.4352, 1.5466, -1.2556, 1.0656, 0.6762, -1.0542],
        ]
    )
    # Where these come to rest hangs on rounding; of forty some always seem too likely.
    improper = np.array([-0.7011, 1.7568, -0.0499, 1.6595, 0.8203, -1.0174])
    improper = improper + np.random.default_rng(5).normal(0.0, 0.01, (40, 6))
    near = evaluate(model, model.layout.theta(np.array([[-0.1, 0.48, 0.91, 1.59, 0.56, -0.73]])))
    alone = evaluate(model, model.layout.theta(slow), near)
    together = evaluate(model, model.layout.theta(np.concatenate([slow, improper])), near)
    assert together.log[:2] == pytest.approx(alone.log, abs=1e-6)
