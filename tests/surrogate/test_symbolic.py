"""The PyMC model against a log density written out here in plain loops.

What is compared are differences between random points: constants may differ.
"""

from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import gamma, norm, t

from muntin.surrogate.evidence import Model
from muntin.surrogate.symbolic import Hyperparameters, pymc_model, whitened
from tests.surrogate.problems import model_of, readings


def problem(name, kind, seed=3):
    """A model with every feature at once: choices, repeats, shared errors, sds, censoring."""
    scale = (3, 2) if kind == "fraction" else ()
    data = readings(seed, kind, n=17, inside=(2, 4), scale=scale)
    censored = np.zeros(17, dtype=np.intp)
    censored[[2, 9, 11]] = [-1, 1, -1]
    model = model_of(name, replace(data, censored=censored), kind)
    wander = np.random.default_rng(seed).gamma(1.0, 0.05, len(model.cells))
    return Model(model.family, model.cells, model.link, wander)


def point(symbolic, rng):
    """A random point of the free variables, on the real line."""
    start = symbolic.initial_point()
    return {k: rng.normal(0.0, 0.7, np.shape(v)) for k, v in start.items()}


def log_density(model, at):
    """Log density of the point, reading by reading."""
    layout, cells, family = model.layout, model.cells, model.family
    eta, width = at["eta"], whitened(model)
    w, z = at["v"][:width], at["v"][width:]
    theta = layout.theta(eta[None])
    noise = layout.noise(theta)[0]
    u = family.priors.mean + family.root(layout, theta, cells)[0] @ w
    total = -0.5 * (eta @ eta + w @ w + z @ z)
    degrees = np.exp(at["nu_log__"]) if "nu_log__" in at else None
    if degrees is not None:
        total += gamma.logpdf(degrees, 2.0, scale=10.0) + np.log(degrees)
    mixing = list(np.exp(at["mixing_log__"])) if "mixing_log__" in at else []
    for one in mixing:
        total += gamma.logpdf(one, degrees / 2.0, scale=2.0 / degrees) + np.log(one)
    for i, c in enumerate(cells.cell):
        f = u[cells.latent[c]]
        error, start = 0.0, 0
        for j, groups in enumerate(cells.scale_groups):
            error += layout.scale_sd(theta)[0, j] * z[start + cells.scale[j][c]]
            start += groups
        g, slope = f, 1.0
        if model.link == "logit":
            ceiling = layout.ceiling_of(theta)[0]
            g = ceiling / (1.0 + np.exp(-f))
            slope = g * (1.0 - g / ceiling)
        sd = np.sqrt(noise**2 + cells.variance[c] + slope**2 * model.wander[c])
        away = (cells.y[i] - (1.0 + error) * g) / sd
        side = cells.censored[c]
        if side == 0:
            law = norm if degrees is None else t(degrees)
            total += law.logpdf(away) - np.log(sd)
        else:
            width = 1.0 if degrees is None else np.sqrt(mixing.pop(0))
            total += norm.logcdf(-side * away * width)
    return total


@pytest.mark.parametrize("name", ["gp", "quadratic"])
@pytest.mark.parametrize(
    ("kind", "noise"),
    [
        ("fraction", "normal"),
        ("real", "student"),
        pytest.param("fraction", "student", marks=pytest.mark.slow),
        pytest.param("real", "normal", marks=pytest.mark.slow),
    ],
)
def test_log_density_is_that_of_the_statement(name, kind, noise):
    model = problem(name, kind)
    symbolic = pymc_model(model, noise)
    compiled = symbolic.compile_logp(mode="FAST_COMPILE")
    rng = np.random.default_rng(5)
    points = [point(symbolic, rng) for _ in range(6)]
    found = np.array([float(compiled(at)) for at in points])
    expected = np.array([log_density(model, at) for at in points])
    assert np.ptp(expected) > 10.0
    assert found - found[0] == pytest.approx(expected - expected[0], rel=1e-9, abs=1e-6)


@pytest.mark.parametrize("name", ["gp", "quadratic"])
@pytest.mark.parametrize("kind", ["fraction", "real"])
def test_standardising_about_latent_values_leaves_the_law_as_it_is(name, kind):
    """The density of v is that of w and z there, times the Jacobian, found by unit steps of v."""
    model = problem(name, kind)
    near = np.random.default_rng(7).normal(0.5, 0.5, len(model.cells.X))
    symbolic = pymc_model(model, near=near)
    compiled = symbolic.compile_logp(mode="FAST_COMPILE")
    both = symbolic.replace_rvs_by_values([symbolic["w"], symbolic["z"]])
    white = symbolic.compile_fn(both, inputs=symbolic.value_vars, mode="FAST_COMPILE")
    rng = np.random.default_rng(8)
    found, expected = [], []
    for _ in range(5):
        at = point(symbolic, rng)
        here, steps = np.concatenate(white(at)), []
        for e in np.eye(len(at["v"])):
            steps.append(np.concatenate(white({**at, "v": at["v"] + e})) - here)
        found.append(float(compiled(at)))
        log_det = np.linalg.slogdet(np.array(steps))[1]
        expected.append(log_density(model, {**at, "v": here}) + log_det)
    assert np.ptp(expected) > 5.0
    assert np.subtract(found, found[0]) == pytest.approx(
        np.subtract(expected, expected[0]), rel=1e-8, abs=1e-5
    )


@pytest.mark.parametrize("name", ["gp", "quadratic"])
def test_of_an_identity_link_the_standardised_variables_are_standard_normal(name):
    """Given eta: the linearised posterior is the posterior itself, wherever it is linearised."""
    data = readings(4, "real", n=15, inside=(2,), scale=())
    model = model_of(name, data, "real")
    near = np.random.default_rng(9).normal(0.5, 0.5, len(model.cells.X))
    symbolic = pymc_model(model, near=near)
    compiled = symbolic.compile_logp(mode="FAST_COMPILE")
    rng = np.random.default_rng(10)
    first = point(symbolic, rng)
    for _ in range(3):
        other = {**first, "v": rng.normal(size=len(first["v"]))}
        normal = -0.5 * (other["v"] @ other["v"] - first["v"] @ first["v"])
        assert compiled(other) - compiled(first) == pytest.approx(normal, abs=1e-6)


@pytest.mark.parametrize("name", ["gp", pytest.param("quadratic", marks=pytest.mark.slow)])
def test_gradient_is_that_of_the_log_density(name):
    """By central differences, also where conditions agree and the Matern distance is zero."""
    model = problem(name, "fraction")
    near = np.random.default_rng(7).normal(0.5, 0.5, len(model.cells.X))
    symbolic = pymc_model(model, near=near)
    value = symbolic.compile_logp(mode="FAST_COMPILE")
    gradient = symbolic.compile_dlogp(mode="FAST_COMPILE")
    at = point(symbolic, np.random.default_rng(6))
    assert list(at) == ["eta", "v"]
    found, differences, step = gradient(at), [], 1e-5
    for k, v in at.items():
        for i in range(len(v)):
            moved = [{**at, k: v + sign * step * np.eye(len(v))[i]} for sign in (1.0, -1.0)]
            differences.append((value(moved[0]) - value(moved[1])) / (2.0 * step))
    assert found == pytest.approx(np.array(differences), rel=1e-5, abs=1e-4)


def test_a_ceiling_stays_above_a_half():
    model = problem("gp", "fraction")
    eta = np.zeros(len(model.layout))
    eta[model.layout.names.index("ceiling_gap")] = 10.0
    assert Hyperparameters.of(model.layout, eta).ceiling.eval() == 0.5


def test_a_polynomial_has_a_variable_a_term_and_a_group():
    model = problem("quadratic", "fraction")
    groups = model.cells.inside.max(axis=0) + 1
    assert whitened(model) == len(model.family.terms) + groups.sum()
