import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from muntin.surrogate.pareto import generalised_pareto_shape, tail_shape


def drawn(k, n, seed):
    """Sorted draws of the generalised Pareto law of shape k, scale 1, by its inverse."""
    u = np.random.default_rng(seed).random(n)
    return np.sort((u**-k - 1.0) / k if k else -np.log(u))


@pytest.mark.parametrize("k", [-0.2, 0.0, 0.3, 0.7, 1.2])
def test_the_shape_of_a_known_law_is_found(k):
    """Its sd at n draws is (1 + k) / sqrt(n) (Zhang & Stephens 2009, section 4); the mean of 25
    answers is held to 4 of its own, after the pull towards 0.5 that ten draws' worth of prior has.
    """
    n, repeats = 300, 25
    shapes = [generalised_pareto_shape(drawn(k, n, seed)) for seed in range(repeats)]
    expected = (n * k + 10.0 * 0.5) / (n + 10.0)
    assert np.mean(shapes) == pytest.approx(expected, abs=4.0 * (1.0 + k) / math.sqrt(n * repeats))


def test_the_shape_agrees_with_the_formulas_written_out():
    """Zhang & Stephens 2009, their steps in plain loops, then the prior of Vehtari et al. 2024."""
    x = [float(v) for v in drawn(0.5, 37, 2)]
    n, m = len(x), 30 + int(math.sqrt(len(x)))
    quartile = x[int(n / 4 + 0.5) - 1]

    def k_of(b):
        return sum(math.log1p(-b * v) for v in x) / n

    candidates = [
        1.0 / x[-1] + (1.0 - math.sqrt(m / (j - 0.5))) / (3.0 * quartile) for j in range(1, m + 1)
    ]
    profile = [n * (math.log(-b / k_of(b)) - k_of(b) - 1.0) for b in candidates]
    top = max(profile)
    weights = [math.exp(v - top) for v in profile]
    best = sum(b * w for b, w in zip(candidates, weights, strict=True)) / sum(weights)
    expected = (n * k_of(best) + 10.0 * 0.5) / (n + 10.0)
    assert generalised_pareto_shape(np.array(x)) == pytest.approx(expected, abs=1e-9)


def test_few_draws_are_held_to_one_half():
    """The prior is worth ten draws: with n of shape 0 the answer is about 5 / (n + 10)."""
    shapes = [generalised_pareto_shape(drawn(0.0, 10, seed)) for seed in range(400)]
    # 400 answers of sd 1 / sqrt(10) / 2 each: error 0.008; the estimator's own bias at ten draws
    # is about 0.03.
    assert np.mean(shapes) == pytest.approx(0.25, abs=0.06)


def test_weights_of_a_known_tail_are_told_apart():
    """Weights u^-k have a tail of shape k."""
    u = np.random.default_rng(3).random(50_000)
    n_tail = math.ceil(3.0 * math.sqrt(50_000))
    for k in (0.3, 0.9):
        assert tail_shape(-k * np.log(u)) == pytest.approx(k, abs=4.0 * (1 + k) / n_tail**0.5)


def test_the_scale_of_the_weights_does_not_matter():
    log_w = np.random.default_rng(4).normal(0.0, 2.0, 300)
    assert tail_shape(log_w + 800.0) == pytest.approx(tail_shape(log_w), abs=1e-9)


def test_equal_weights_have_no_tail_and_few_weights_no_answer():
    assert tail_shape(np.full(50, -3.0)) == -np.inf
    assert tail_shape(np.zeros(20)) == np.inf


@given(
    arrays(np.float64, st.integers(25, 90), elements=st.floats(-2000.0, 2000.0)),
    st.sampled_from([1e-3, 1.0]),
)
def test_no_set_of_weights_breaks_it(log_weights, size):
    shape = tail_shape(size * log_weights)
    assert shape == -np.inf or np.isfinite(shape)
