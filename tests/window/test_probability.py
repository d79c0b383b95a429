"""Probabilities of meeting a target, against Monte Carlo, closed forms, limits and theorems."""

from dataclasses import dataclass, replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.stats import norm

from muntin.surrogate.links import latent_of, mean_of
from muntin.surrogate.nodes import Errors, Surface
from muntin.window import probability
from muntin.window.probability import (
    Target,
    mean_meets,
    node_mean_meets,
    process_mean,
    process_quantile,
    well_meets,
)

DRAWS = 400_000
NODES, ROWS = 3, 4
CEILING = np.array([1.0, 0.97, 0.92])
LINKS = pytest.mark.parametrize("link", ["identity", "log", "logit"])
TARGETS = pytest.mark.parametrize("sides", ["at least", "at most", "between"])


@dataclass(frozen=True)
class Known:
    """A part of a surface of which only the errors are asked."""

    errors: Errors


def surface(link, noise=0.04, inside=(0.1, 0.05), scale=(0.03, 0.02)):
    """Three nodes of unequal weight and ceiling, two inside and two scale errors each."""
    growth = np.array([[1.0], [1.4], [0.7]])
    errors = Errors(
        noise * growth[:, 0], np.array([inside]) * growth, np.array([scale]) * growth, CEILING
    )
    return Surface((Known(errors),), np.array([0.2, 0.5, 0.3]), link)


def moments(link):
    """Latent means and variances (nodes, conditions) around the target."""
    mean = np.array([[0.2, 1.0, 1.7, 3.0], [0.0, 1.2, 1.4, 2.5], [0.5, 0.9, 2.0, 3.5]])
    sd = np.array([[0.3, 0.5, 0.7, 1.2], [0.4, 0.2, 0.6, 0.9], [0.2, 0.6, 0.5, 1.5]])
    return (mean, sd**2) if link == "logit" else (mean, (0.5 * sd) ** 2)


def target(link, sides):
    """Limits at latent values 0.6 and 1.8."""
    low, high = mean_of(link, np.array([0.6, 1.8]))
    if sides == "at least":
        return Target(low=float(low))
    return Target(high=float(high)) if sides == "at most" else Target(float(low), float(high))


def drawn(post, known, seed):
    """Draws of latent values (DRAWS, conditions) and the node of each."""
    rng = np.random.default_rng(seed)
    node = rng.choice(NODES, DRAWS, p=post.weights)
    mean, variance = known
    f = mean[node] + np.sqrt(variance[node]) * rng.normal(size=(DRAWS, ROWS))
    return f, node, rng


def process(link, f, node):
    """Process mean (draws, conditions) at latent values; `node` (draws,) tells the ceilings."""
    if link == "logit":
        return CEILING[node][:, None] / (1.0 + np.exp(-f))
    return np.exp(f) if link == "log" else f


def met(value, limits):
    return ((value >= limits.low) & (value <= limits.high)).mean(0)


def monte_carlo_error(p):
    """Four standard errors of a share of DRAWS; at most 0.0032."""
    return 4.0 * np.sqrt(np.maximum(p * (1.0 - p), 1e-4) / DRAWS)


@LINKS
@TARGETS
def test_p_mean_agrees_with_draws_of_the_process_mean(link, sides):
    post, known, limits = surface(link), moments(link), target(link, sides)
    f, node, _ = drawn(post, known, 1)
    p = met(process(link, f, node), limits)
    assert np.abs(mean_meets(post, known, limits) - p) == pytest.approx(
        np.zeros(ROWS), abs=monte_carlo_error(p).max()
    )


@LINKS
@TARGETS
def test_p_well_agrees_with_draws_of_a_future_well(link, sides):
    """A well of a new plate, drawn as the model says: inside errors, scale errors, then noise."""
    post, known, limits = surface(link), moments(link), target(link, sides)
    f, node, rng = drawn(post, known, 2)
    errors = post.errors
    for j in range(errors.inside.shape[1]):
        f = f + (errors.inside[node, j] * rng.normal(size=DRAWS))[:, None]
    noise = errors.noise[node][:, None] * rng.normal(size=(DRAWS, ROWS))
    if link == "logit":
        shared = 1.0 + sum(errors.scale[node, j] * rng.normal(size=DRAWS) for j in range(2))
        y = shared[:, None] * process(link, f, node) + noise
    else:
        # Readings of a positive response are modelled on their logarithm.
        y = process(link, f + noise, node)
    p = met(y, limits)
    assert np.abs(well_meets(post, known, limits) - p) == pytest.approx(
        np.zeros(ROWS), abs=monte_carlo_error(p).max()
    )


@LINKS
def test_the_process_mean_agrees_with_draws(link):
    post, known = surface(link), moments(link)
    g = process(link, *drawn(post, known, 3)[:2])
    error = 4.0 * g.std(0) / np.sqrt(DRAWS)
    assert np.abs(process_mean(post, known) - g.mean(0)) / error == pytest.approx(
        np.zeros(ROWS), abs=1.0
    )


@LINKS
@pytest.mark.parametrize("level", [0.025, 0.5, 0.975])
def test_quantiles_agree_with_draws(link, level):
    post, known = surface(link), moments(link)
    g = process(link, *drawn(post, known, 4)[:2])
    quantile = process_quantile(post, known, level)
    below = (g <= quantile).mean(0)
    assert below == pytest.approx(np.full(ROWS, level), abs=monte_carlo_error(level))


@LINKS
@given(level=st.floats(0.001, 0.999))
def test_a_quantile_is_exceeded_as_often_as_it_says(link, level):
    post, known = surface(link), moments(link)
    quantiles = process_quantile(post, known, level)
    for i, quantile in enumerate(quantiles):
        p = mean_meets(post, known, Target(low=float(quantile)))[i]
        assert p == pytest.approx(1.0 - level, abs=1e-6)


@pytest.mark.parametrize("level", [0.025, 0.5, 0.975])
def test_quantiles_where_the_latent_value_is_well_known(level):
    """One node, so that g(f) has the quantile of f; sds of 0.1 logits high on the curve."""
    post, mean = surface("logit"), np.full((NODES, 1), 3.0)
    f = norm.ppf(level, 3.0, 0.1)
    for node in range(NODES):
        one = replace(post, weights=np.eye(NODES)[node])
        quantile = process_quantile(one, (mean, np.full_like(mean, 0.01)), level)
        expected = process("logit", np.array([[f]]), np.array([node]))[0]
        assert quantile == pytest.approx(expected, abs=1e-9)


@LINKS
def test_between_is_what_neither_limit_takes_away(link):
    post, known = surface(link), moments(link)
    both = target(link, "between")
    one_sided = Target(low=both.low), Target(high=both.high)
    for meets in (mean_meets, well_meets):
        least, most = (meets(post, known, side) for side in one_sided)
        assert meets(post, known, both) == pytest.approx(least + most - 1.0, abs=1e-9)


@LINKS
def test_without_a_target_everything_meets_it(link):
    post, known = surface(link), moments(link)
    assert mean_meets(post, known, Target()) == pytest.approx(np.ones(ROWS))
    assert well_meets(post, known, Target()) == pytest.approx(np.ones(ROWS))


@LINKS
@given(a=st.floats(-1.0, 4.0), b=st.floats(-1.0, 4.0), width=st.floats(0.0, 2.0))
def test_a_stricter_target_is_met_less_often(link, a, b, width):
    post, known = surface(link), moments(link)
    low, high = mean_of(link, np.sort([a, b]))
    wider = mean_of(link, max(a, b) + width)
    for meets in (mean_meets, well_meets):
        loose = meets(post, known, Target(low=float(low)))
        strict = meets(post, known, Target(low=float(high)))
        assert (loose >= strict - 1e-12).all()
        inner = meets(post, known, Target(float(low), float(high)))
        outer = meets(post, known, Target(float(low), float(wider)))
        assert (outer >= inner - 1e-12).all()
        assert ((inner >= -1e-12) & (outer <= 1.0 + 1e-12)).all()


@LINKS
@given(step=st.floats(0.0, 2.0))
def test_a_higher_surface_meets_at_least_more_often(link, step):
    post, (mean, variance) = surface(link), moments(link)
    limits = target(link, "at least")
    for meets in (mean_meets, well_meets):
        low = meets(post, (mean, variance), limits)
        # The quadrature of a fraction's well leaves 1e-3 where a step is as small as that.
        assert (meets(post, (mean + step, variance), limits) >= low - 1e-3).all()


@LINKS
def test_a_surface_that_is_known_meets_its_target_or_not(link):
    post, (mean, _) = surface(link), moments(link)
    limits = target(link, "at least")
    certain = node_mean_meets(post, (mean, np.full_like(mean, 1e-12)), limits)
    above = process(link, mean, np.arange(NODES)) > limits.low
    assert np.array_equal(certain, above.astype(float))
    assert 0.0 < certain.mean() < 1.0


@LINKS
def test_a_well_without_errors_is_the_process_mean(link):
    known, limits = moments(link), target(link, "between")
    # A noise of 0.02 on a slope of 0.2 blurs a fraction by 0.1 logits: 0.01 of probability.
    quiet = surface(link, noise=0.02 if link == "logit" else 1e-9, inside=(0, 0), scale=(0, 0))
    difference = well_meets(quiet, known, limits) - mean_meets(quiet, known, limits)
    assert np.abs(difference).max() < (0.02 if link == "logit" else 1e-9)


@pytest.mark.parametrize("link", ["identity", "log"])
def test_p_well_has_a_closed_form_without_a_plateau(link):
    post, (mean, variance) = surface(link), moments(link)
    limits = target(link, "between")
    low, high = latent_of(link, np.array([limits.low, limits.high]))
    expected = np.zeros(ROWS)
    for s in range(NODES):
        errors = post.errors
        sd = np.sqrt(variance[s] + errors.noise[s] ** 2 + (errors.inside[s] ** 2).sum())
        between = norm.cdf(high, mean[s], sd) - norm.cdf(low, mean[s], sd)
        expected += post.weights[s] * between
    assert well_meets(post, (mean, variance), limits) == pytest.approx(expected, abs=1e-12)


def test_on_the_plateau_each_node_is_at_its_ceiling():
    """Noise and scale errors decide about a well; the process mean is known node by node."""
    post, e = surface("logit"), surface("logit").errors
    known = np.full((NODES, 1), 12.0), np.full((NODES, 1), 0.01)
    for low in (0.9, 0.93, 0.95, 0.98, 0.999, 1.0):
        reached = post.weights @ (low < CEILING * (1.0 - 1e-5))
        assert mean_meets(post, known, Target(low=low))[0] == pytest.approx(reached)
        sd = np.sqrt(e.noise**2 + (e.scale**2).sum(1) * CEILING**2)
        expected = post.weights @ norm.cdf((CEILING - low) / sd)
        assert well_meets(post, known, Target(low=low))[0] == pytest.approx(expected, abs=1e-3)
    assert process_mean(post, known)[0] == pytest.approx(post.weights @ CEILING, abs=1e-4)


def test_half_of_the_wells_on_the_plateau_read_above_the_ceiling():
    post = surface("logit")
    known = np.full((NODES, 1), 12.0), np.full((NODES, 1), 0.01)
    for node in range(NODES):
        one = replace(post, weights=np.eye(NODES)[node])
        well = well_meets(one, known, Target(low=float(CEILING[node])))
        assert well[0] == pytest.approx(0.5, abs=1e-3)


@LINKS
def test_nodes_count_by_their_weight(link):
    post, (mean, variance) = surface(link), moments(link)
    limits = target(link, "between")
    for answer in (
        lambda p, m: mean_meets(p, m, limits),
        lambda p, m: well_meets(p, m, limits),
        process_mean,
    ):
        alone = []
        for s in range(NODES):
            e = post.errors
            part = Surface((Known(e.nodes(slice(s, s + 1))),), np.ones(1), link)
            alone.append(answer(part, (mean[s : s + 1], variance[s : s + 1])))
        # Each node alone picks its own number of quadrature points.
        assert answer(post, (mean, variance)) == pytest.approx(post.weights @ alone, abs=5e-4)


def test_many_conditions_are_worked_off_in_pieces(monkeypatch):
    post, known, limits = surface("logit"), moments("logit"), target("logit", "between")
    many = tuple(np.tile(m, 9) for m in known)
    whole = well_meets(post, many, limits)
    monkeypatch.setattr(probability, "_CHUNK", NODES * 39 * 5)
    assert well_meets(post, many, limits) == pytest.approx(whole, abs=1e-14)
    assert whole == pytest.approx(np.tile(well_meets(post, known, limits), 9), abs=1e-14)


def test_parts_of_a_surface_are_one_list_of_nodes():
    post, known, limits = surface("logit"), moments("logit"), target("logit", "between")
    e = post.errors
    parts = tuple(
        Known(Errors(e.noise[rows], e.inside[rows], e.scale[rows], e.ceiling[rows]))
        for rows in (slice(0, 1), slice(1, 3))
    )
    split = replace(post, parts=parts)
    assert np.array_equal(well_meets(split, known, limits), well_meets(post, known, limits))
