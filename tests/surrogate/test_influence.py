"""Influence: rules, indices and joint draws against references written with plain loops."""

from functools import cache
from itertools import product

import numpy as np
import pytest

from muntin.surrogate import influence
from muntin.surrogate.coding import Choice, Coding, Columns, Continuous
from muntin.surrogate.fit import fit_surrogate
from muntin.surrogate.influence import (
    effects,
    joint_draws,
    lobatto,
    product_grid,
    surface_effects,
)
from muntin.surrogate.nodes import Errors, PolynomialNodes, Surface, mixture
from muntin.surrogate.polynomial import Quadratic
from tests.surrogate.problems import CODING, COLUMNS, priors, readings

NAMES = pytest.mark.parametrize("name", ["gp", "quadratic"])


def some_weights(*sizes):
    rng = np.random.default_rng(3)
    every = [rng.uniform(0.5, 1.5, k) for k in sizes]
    return [w / w.sum() for w in every]


@cache
def fitted(name, kind="real"):
    data = readings(51, kind, n=16, inside=(2,), scale=(3,) if kind == "fraction" else ())
    return fit_surrogate(name, data, kind, COLUMNS, priors(kind), 1).surface


def constants(means, link="identity", sd=0.0, ceiling=1.0):
    """A surface of one factor that is constant at each node, equal weights."""
    S = len(means)
    mean = np.zeros((S, 3))
    mean[:, 0] = means
    V = np.zeros((S, 3, 3))
    V[:, 0, 0] = sd**2
    errors = Errors(np.ones(S), np.zeros((S, 0)), np.zeros((S, 0)), np.full(S, ceiling))
    own = priors().with_overrides({"mean": 0.0})
    part = PolynomialNodes(Quadratic(Columns.plain(1), own), mean, V, errors)
    return Surface((part,), np.full(S, 1.0 / S), link)


# --- the rule and the grid -----------------------------------------------------------------------


@pytest.mark.parametrize("points", [3, 4, 7, 21])
def test_a_rule_is_exact_for_the_polynomials_it_promises(points):
    x, w = lobatto(points)
    for power in range(2 * points - 2):
        expected = 0.0 if power % 2 else 1.0 / (power + 1.0)
        assert w @ x**power == pytest.approx(expected, abs=1e-13)
    beyond = 2 * points - 2
    assert abs(w @ x**beyond - 1.0 / (beyond + 1.0)) > 1e-13
    assert x[0] == -1.0
    assert x[-1] == 1.0
    assert (w > 0.0).all()


def test_the_points_are_the_product_of_the_levels_in_coded_columns():
    coding = Coding((Continuous(low=1.0, high=100.0, log=True), Choice(levels=3)))
    grid = product_grid(coding)
    ranged = np.exp(np.log(100.0) * (lobatto(21)[0] + 1.0) / 2.0)
    raw = list(product(ranged, range(3)))
    assert grid.shape == (21, 3)
    assert grid.points() == pytest.approx(coding.code([[a for a, _ in raw], [b for _, b in raw]]))
    assert grid.weights[1] == pytest.approx([1 / 3] * 3)


@pytest.mark.parametrize(
    ("ranged", "choices", "points"),
    [(1, (), 21), (3, (), 11), (6, (), 5), (2, (9, 9), 14), (4, (90,), 3), (0, (2, 7), 21)],
)
def test_points_a_factor_fall_as_factors_and_choices_multiply(ranged, choices, points):
    every = [Continuous(low=0.0, high=1.0)] * ranged + [Choice(levels=k) for k in choices]
    grid = product_grid(Coding(tuple(every)))
    assert grid.shape == (points,) * ranged + choices
    assert grid.size == len(grid.points()) == np.prod(grid.shape)


@pytest.mark.parametrize(
    ("factors", "fine", "within"), [(3, 21, 0.001), (4, 15, 0.004), (5, 11, 0.02), (6, 8, 0.02)]
)
def test_indices_of_a_steep_logistic_surface(factors, fine, within):
    """From 0.1 to 0.9 over a quarter of the first factor's range, against a finer rule."""

    def shares(rule):
        x = np.meshgrid(*[rule[0]] * factors, indexing="ij", sparse=True)
        f = 1.0 + 8.0 * x[0] + 6.0 * x[1] - 4.0 * x[0] ** 2 + 2.4 * x[0] * x[1] + 1.6 * x[2]
        f = f + 0.8 * sum(x[3:])
        found = effects((1.0 / (1.0 + np.exp(-f)))[None], [rule[1]] * factors)
        return np.concatenate([found.first[0], found.total[0]])

    points, weights = np.polynomial.legendre.leggauss(fine)
    own = lobatto(product_grid(Coding((Continuous(low=0.0, high=1.0),) * factors)).shape[0])
    assert shares(own) == pytest.approx(shares((points, weights / 2.0)), abs=within)


# --- indices -------------------------------------------------------------------------------------


def test_indices_are_those_of_plain_sums():
    weights = some_weights(3, 4, 2)
    values = np.random.default_rng(4).normal(size=(2, 3, 4, 2))
    found = effects(values, weights)
    for n, v in enumerate(values):
        cells = list(np.ndindex(v.shape))
        w = {c: np.prod([weights[i][k] for i, k in enumerate(c)]) for c in cells}
        mean = sum(w[c] * v[c] for c in cells)
        variance = sum(w[c] * (v[c] - mean) ** 2 for c in cells)
        for i in range(3):
            alone = 0.0
            for k, share in enumerate(weights[i]):
                at = [c for c in cells if c[i] == k]
                alone += share * (sum(w[c] * v[c] for c in at) / share - mean) ** 2
            together, moved = 0.0, 0.0
            for rest in {c[:i] + c[i + 1 :] for c in cells}:
                line = [(*rest[:i], k, *rest[i:]) for k in range(v.shape[i])]
                share = sum(w[c] for c in line)
                middle = sum(w[c] * v[c] for c in line) / share
                together += sum(w[c] * (v[c] - middle) ** 2 for c in line)
                moved += share * (max(v[c] for c in line) - min(v[c] for c in line))
            assert found.first[n, i] == pytest.approx(alone / variance, rel=1e-12)
            assert found.total[n, i] == pytest.approx(together / variance, rel=1e-12)
            assert found.change[n, i] == pytest.approx(moved, rel=1e-12)


def test_shares_obey_the_decomposition_of_variance():
    """Sobol' 1993: 0 <= S_i <= ST_i, and sums of S at most 1 and of ST at least 1."""
    values = np.random.default_rng(5).normal(size=(30, 4, 3, 5))
    found = effects(values, some_weights(4, 3, 5))
    assert (found.first >= 0.0).all()
    assert (found.total >= found.first).all()
    assert (found.first.sum(axis=1) <= 1.0).all()
    assert (found.total.sum(axis=1) >= 1.0).all()


def test_without_interactions_shares_sum_to_one_and_agree():
    a, b = np.array([0.0, 1.0, 5.0]), np.array([2.0, -1.0])
    found = effects((a[:, None] + b[None])[None], some_weights(3, 2))
    assert found.first.sum() == pytest.approx(1.0)
    assert found.total == pytest.approx(found.first)
    assert found.change[0] == pytest.approx([5.0, 3.0])


def test_a_pure_interaction_moves_though_it_averages_out():
    x = np.array([-1.0, 0.0, 1.0])
    found = effects((x[:, None] * x[None])[None], [np.full(3, 1 / 3)] * 2)
    assert found.first[0] == pytest.approx([0.0, 0.0])
    assert found.total[0] == pytest.approx([1.0, 1.0])
    assert found.change[0] == pytest.approx([4 / 3, 4 / 3])


def test_shares_do_not_depend_on_unit_and_level():
    weights = some_weights(4, 3)
    values = np.random.default_rng(6).normal(size=(2, 4, 3))
    one, other = effects(values, weights), effects(1e-5 * values + 7.0, weights)
    assert other.first == pytest.approx(one.first, rel=1e-8)
    assert other.total == pytest.approx(one.total, rel=1e-8)
    assert other.change == pytest.approx(1e-5 * one.change, rel=1e-8)


@pytest.mark.parametrize("wobble", [0.0, 1e-15])
def test_a_constant_up_to_rounding_has_no_influence(wobble):
    values = 0.97 + wobble * np.random.default_rng(7).normal(size=(2, 4, 3))
    found = effects(values, some_weights(4, 3))
    assert (found.first == 0.0).all()
    assert (found.total == 0.0).all()
    assert (found.change <= 1e-13).all()


# --- draws of a surface --------------------------------------------------------------------------


def spread_of(surface, X):
    """Mean (n,) and covariance (n, n) of the mixture of nodes."""
    mean, _ = surface.moments(X)
    overall = surface.weights @ mean
    apart = mean - overall
    within = np.einsum("s,sij->ij", surface.weights, surface.covariance(X, X))
    return overall, within + np.einsum("s,si,sj->ij", surface.weights, apart, apart)


@NAMES
def test_draws_have_the_mean_and_covariance_of_the_surface(name):
    light = fitted(name).lightened(4)
    X = np.random.default_rng(8).uniform(-1.0, 1.0, (6, len(COLUMNS.factor)))
    mean, covariance = spread_of(light, X)
    draws = joint_draws(light, X, 40_000, np.random.default_rng(9))
    assert draws.shape == (40_000, 6)
    sd = np.sqrt(np.diag(covariance))
    # 5 standard errors of a mean, and of a normal covariance: sd_i sd_j sqrt(1 + r^2) / sqrt(n).
    assert (np.abs(draws.mean(axis=0) - mean) < 5.0 * sd / 200.0).all()
    error = np.abs(np.cov(draws.T) - covariance)
    assert (error < 5.0 * np.sqrt(2.0) * np.outer(sd, sd) / 200.0).all()


@NAMES
def test_draws_beyond_the_anchors_follow_them(name, monkeypatch):
    """Where f is drawn at some points only, the others are its mean given those."""
    monkeypatch.setattr(influence, "_ANCHORS", 30)
    monkeypatch.setattr(influence, "_CHUNK", 7)
    node = fitted(name).lightened(1)
    X = np.random.default_rng(10).uniform(-1.0, 1.0, (41, len(COLUMNS.factor)))
    chosen = np.sort(np.random.default_rng(11).permutation(41)[:30])
    mean, C = node.moments(X)[0][0], node.covariance(X, X)[0]
    others = np.setdiff1d(np.arange(41), chosen)
    draws = joint_draws(node, X, 5, np.random.default_rng(11)) - mean
    inner = C[np.ix_(chosen, chosen)]
    nudge = 1e-10 * np.abs(inner).max() * np.eye(30)
    given = C[np.ix_(others, chosen)] @ np.linalg.solve(inner + nudge, draws[:, chosen].T)
    found = draws[:, others].T
    assert found == pytest.approx(given, abs=1e-4 * np.sqrt(C.max()))
    assert np.ptp(found, axis=1).min() > 0.0


def test_nodes_are_drawn_by_their_weight():
    surface = constants([0.0, 10.0, 20.0])
    surface = surface.take(np.arange(3), np.array([0.25, 0.125, 0.625]))
    draws = joint_draws(surface, np.zeros((2, 1)), 16, np.random.default_rng(1))
    assert draws.tolist() == [[0.0] * 2] * 4 + [[10.0] * 2] * 2 + [[20.0] * 2] * 10


def test_surrogates_of_a_mixture_are_drawn_by_their_share():
    both = mixture([constants([1.0]), constants([2.0, 2.0])], np.array([0.75, 0.25]))
    draws = joint_draws(both, np.zeros((1, 1)), 40, np.random.default_rng(1))
    assert (draws == 1.0).sum() == 30


def test_draws_are_of_the_process_mean_below_its_ceiling():
    draws = joint_draws(
        constants([2.0], "logit", ceiling=0.9), np.zeros((2, 1)), 3, np.random.default_rng(1)
    )
    assert draws == pytest.approx(np.full((3, 2), 0.9 / (1.0 + np.exp(-2.0))))


def test_a_level_that_alone_is_uncertain_moves_no_factor():
    grid = product_grid(Coding((Continuous(low=0.0, high=1.0),)))
    found = surface_effects(constants([3.0], sd=0.5), grid, 9, np.random.default_rng(1))
    assert found.change == pytest.approx(np.zeros((9, 1)), abs=1e-4)
    assert np.isfinite(found.first).all()
    still = surface_effects(constants([3.0]), grid, 9, np.random.default_rng(1))
    assert (still.first == 0.0).all()
    assert (still.total == 0.0).all()


@NAMES
@pytest.mark.parametrize("kind", ["real", "fraction"])
def test_effects_of_a_surface_are_those_of_its_draws(name, kind):
    surface, grid = fitted(name, kind), product_grid(CODING)
    found = surface_effects(surface, grid, 50, np.random.default_rng(2))
    draws = joint_draws(surface, grid.points(), 50, np.random.default_rng(2))
    expected = effects(draws.reshape(50, *grid.shape), grid.weights)
    assert found.first == pytest.approx(expected.first)
    assert found.total == pytest.approx(expected.total)
    assert found.change == pytest.approx(expected.change)
    assert not np.array_equal(found.first[0], found.first[1])
    again = surface_effects(surface, grid, 50, np.random.default_rng(3))
    assert not np.array_equal(again.first, found.first)
