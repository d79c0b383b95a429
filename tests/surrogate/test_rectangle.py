"""Rectangles under normal laws, against closed forms and one-dimensional integrals."""

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import ndtr

from muntin.surrogate.rectangle import pair_excess, rectangle

INF = np.inf


def one_factor(loadings):
    """Correlation where every score is loading * t + rest."""
    R = np.outer(loadings, loadings)
    np.fill_diagonal(R, 1.0)
    return R


def integral(low, high, loadings):
    """The rectangle under a one-factor correlation, by quadrature over the factor."""

    def given(t):
        rest = np.sqrt(1.0 - loadings**2)
        within = ndtr((high - loadings * t) / rest) - ndtr((low - loadings * t) / rest)
        return np.prod(within) * np.exp(-0.5 * t * t) / np.sqrt(2.0 * np.pi)

    return quad(given, -9.0, 9.0, epsabs=1e-12, limit=200)[0]


CASES = {
    "three, one side": ([-0.4, 0.2, -1.0], [INF, INF, INF], [0.7, 0.6, 0.8]),
    "three, both sides": ([-0.4, -INF, -1.0], [0.9, 0.3, 2.0], [0.7, -0.6, 0.8]),
    "four": ([-1.2, -INF, -0.5, -2.0], [INF, 0.8, 1.1, 0.1], [0.5, 0.7, -0.4, 0.6]),
    "six": ([-1.0] * 6, [INF, 1.0, INF, 2.0, INF, 1.5], [0.3, 0.4, 0.5, -0.6, 0.5, 0.4]),
}


@pytest.mark.parametrize("case", CASES)
def test_rectangles_agree_with_an_integral_over_the_common_factor(case):
    low, high, loadings = (np.array(v) for v in CASES[case])
    ours = rectangle(low[None], high[None], one_factor(loadings)[None])[0]
    assert ours == pytest.approx(integral(low, high, loadings), abs=5e-4)


def test_the_orthant_of_three_has_a_closed_form():
    R = np.array([[1.0, 0.5, -0.2], [0.5, 1.0, 0.3], [-0.2, 0.3, 1.0]])
    angles = np.arcsin(R[np.triu_indices(3, 1)]).sum()
    ours = rectangle(np.zeros((1, 3)), np.full((1, 3), INF), R[None])[0]
    assert ours == pytest.approx(0.125 + angles / (4.0 * np.pi), abs=5e-4)


def test_without_correlation_the_product_is_exact():
    rng = np.random.default_rng(1)
    low = rng.normal(-1.0, 1.0, (130, 4))
    high = low + rng.exponential(2.0, low.shape)
    ours = rectangle(low, high, np.broadcast_to(np.eye(4), (130, 4, 4)))
    np.testing.assert_allclose(ours, np.prod(ndtr(high) - ndtr(low), axis=1), rtol=1e-12)


def test_conditions_do_not_mix():
    # More conditions than are worked at a time, each with a correlation of its own.
    rng = np.random.default_rng(2)
    low, high = np.full((150, 3), -0.5), np.full((150, 3), INF)
    loadings = rng.uniform(-0.8, 0.8, (150, 3))
    R = np.stack([one_factor(v) for v in loadings])
    together = rectangle(low, high, R)
    alone = [rectangle(low[[i]], high[[i]], R[[i]])[0] for i in (0, 63, 64, 149)]
    np.testing.assert_allclose(together[[0, 63, 64, 149]], alone, rtol=1e-12)
    exact = [integral(low[i], high[i], loadings[i]) for i in range(20)]
    np.testing.assert_allclose(together[:20], exact, atol=1e-3)


def test_nothing_gives_nothing():
    assert rectangle(np.zeros((0, 3)), np.zeros((0, 3)), np.zeros((0, 3, 3))).shape == (0,)


def test_pairs_gain_nothing_where_a_limit_is_infinite_or_nothing_is_tied():
    h, k = np.array([INF, -INF, 0.3, 0.3, -0.7]), np.array([0.2, 0.2, INF, 0.1, 0.4])
    rho = np.array([0.5, 0.5, -0.5, 0.0, 0.6])
    gain = pair_excess(h, k, rho)
    assert (gain[:4] == 0.0).all()
    exact = integral(np.array([-INF] * 2), np.array([-0.7, 0.4]), np.sqrt([0.6, 0.6]))
    assert gain[4] == pytest.approx(exact - ndtr(-0.7) * ndtr(0.4), rel=1e-8)
