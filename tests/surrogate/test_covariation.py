"""The correlation of two responses' noise: whole likelihoods, Fisher's density, calibration."""

import numpy as np
import pytest
from scipy.stats import binom, kstest, multivariate_normal

from muntin.surrogate import covariation
from muntin.surrogate.covariation import (
    Pairs,
    canonical_pairs,
    log_likelihood,
    noise_correlation,
    posterior_of,
)
from muntin.surrogate.reading_law import ReadingLaw

BOTH = np.array([[1, 0], [2, 6], [4, 3], [5, 2], [8, 5]])


def law(rng, n, rank, noise=0.3, extra=0.0, moved=0.0):
    """n readings of a smooth part of some rank, noise, and errors of their own."""
    J = 0.5 * rng.normal(size=(n, rank))
    own = np.sqrt(noise**2 + extra * rng.random(n))
    return ReadingLaw(
        misfit=rng.normal(size=n),
        covariance=J @ J.T + np.diag(own**2),
        noise=np.full(n, noise),
        own=own,
        moved=np.full((n, 1), moved),
    )


def whole(first, second, rho):
    """Log density of all readings of both responses, from the definition."""
    cross = np.zeros((len(first), len(second)))
    for i, j in BOTH:
        cross[i, j] = rho * first.noise[i] * second.noise[j]
        cross[i, j] += (first.moved[i] * second.moved[j]).sum()
    C = np.block([[first.covariance, cross], [cross.T, second.covariance]])
    return multivariate_normal(cov=C).logpdf(np.concatenate([first.misfit, second.misfit]))


def by_pairs(pairs, rho):
    c = rho * pairs.share + pairs.known
    square = pairs.a**2 - 2.0 * c * pairs.a * pairs.b + pairs.b**2
    return (-0.5 * square / (1.0 - c**2) - 0.5 * np.log(1.0 - c**2)).sum()


@pytest.mark.parametrize(("extra", "moved"), [(0.0, 0.0), (0.0, 0.1)])
def test_pairs_hold_the_whole_likelihood(monkeypatch, extra, moved):
    monkeypatch.setattr(covariation, "_LEAST_SHARE", 0.0)
    rng = np.random.default_rng(3)
    first, second = law(rng, 9, 3, 0.3, extra, moved), law(rng, 7, 2, 0.5, extra, -moved)
    pairs = canonical_pairs(first, second, BOTH)
    base = by_pairs(pairs, 0.0) - whole(first, second, 0.0)
    for rho in (-0.8, -0.2, 0.4, 0.9):
        assert by_pairs(pairs, rho) - whole(first, second, rho) == pytest.approx(base, abs=1e-9)


def test_effective_number_is_the_trace_of_what_is_left():
    rng = np.random.default_rng(4)
    first, second = law(rng, 9, 3), law(rng, 7, 2)
    # Noise weights of the residuals, I - H = noise * inverse covariance.
    left = [np.linalg.inv(v.covariance) * v.noise[0] ** 2 for v in (first, second)]
    i, j = BOTH.T
    trace = (left[0][np.ix_(i, i)] * left[1][np.ix_(j, j)]).sum()
    pairs = canonical_pairs(first, second, BOTH)
    dropped = len(BOTH) - len(pairs.a)
    assert 0.0 <= trace - (pairs.share**2).sum() <= 0.25 * dropped
    assert noise_correlation(first, second, BOTH).effective == (pairs.share**2).sum()


def test_free_noise_levels_agree_with_an_integral_over_both():
    rng = np.random.default_rng(5)
    share = np.array([1.0, 0.9, 0.8, 0.95, 0.6, 0.7])
    a, b = rng.normal(size=(2, 6))
    pairs = Pairs(a, b, share, np.zeros(6))
    rho = np.array([-0.7, 0.0, 0.5, 0.85])
    levels = np.linspace(-5.0, 5.0, 801)

    def brute(r):
        c = r * share
        s, t = np.exp(levels)[:, None, None], np.exp(levels)[None, :, None]
        q = ((a / s) ** 2 - 2.0 * c * a * b / (s * t) + (b / t) ** 2) / (1.0 - c**2)
        log_p = (-0.5 * q - 0.5 * np.log(1.0 - c**2) - np.log(s * t)).sum(-1)
        return np.log(np.exp(log_p).sum())

    ours, exact = log_likelihood(pairs, rho), np.array([brute(r) for r in rho])
    np.testing.assert_allclose(ours - ours[1], exact - exact[1], atol=1e-6)


def test_noise_levels_do_not_matter():
    rng = np.random.default_rng(6)
    a, b = rng.normal(size=(2, 8))
    known = np.zeros(8)
    one = posterior_of(Pairs(a, b, np.ones(8), known))
    other = posterior_of(Pairs(3.0 * a, 0.2 * b, np.ones(8), known))
    assert one.mean == pytest.approx(other.mean, abs=1e-9)
    turned = posterior_of(Pairs(a, -b, np.ones(8), known))
    assert turned.mean == pytest.approx(-one.mean, abs=1e-9)
    assert turned.low == pytest.approx(-one.high, abs=1e-6)


def test_without_a_pair_the_prior_speaks():
    none = np.zeros(0)
    found = posterior_of(Pairs(none, none, none, none))
    assert found.mean == pytest.approx(0.0, abs=1e-12)
    assert found.high == pytest.approx(np.tanh(1.959964 * 0.5), abs=1e-3)
    assert found.effective == 0.0


def test_many_wells_tell_the_correlation():
    rng = np.random.default_rng(7)
    a, b = rng.multivariate_normal([0.0, 0.0], [[1.0, -0.6], [-0.6, 1.0]], 384).T
    found = posterior_of(Pairs(a, b, np.ones(384), np.zeros(384)))
    # Fisher's z of variance 1 / 384 meets the prior's of variance 1 / 4.
    r = a @ b / np.sqrt((a @ a) * (b @ b))
    assert found.mean == pytest.approx(np.tanh(np.arctanh(r) * 384.0 / 388.0), abs=3e-3)
    assert found.high - found.low == pytest.approx(2 * 1.96 * (1 - 0.36) / np.sqrt(384), rel=0.05)


def test_what_setting_errors_share_is_not_called_noise():
    # Both responses are moved by one and the same setting error and by noise of their own.
    rng = np.random.default_rng(8)
    n = 600
    both = np.stack([np.arange(n)] * 2, axis=1)
    shift = rng.normal(size=n)
    moved, noise = np.full((n, 1), 0.3), np.full(n, 0.3)
    own = np.sqrt(noise**2 + 0.09)
    laws = [
        ReadingLaw(0.3 * shift + 0.3 * rng.normal(size=n), np.diag(own**2), noise, own, moved)
        for _ in range(2)
    ]
    found = noise_correlation(*laws, both)
    assert found.low < 0.0 < found.high
    blind = [ReadingLaw(v.misfit, v.covariance, own, own, 0.0 * moved) for v in laws]
    assert noise_correlation(*blind, both).low > 0.35


def drawn(rng, rho, n=16, rank=5):
    """Two responses of the same n wells, drawn from their own smooth parts with tied noise."""
    noise = rng.multivariate_normal([0.0, 0.0], [[1.0, rho], [rho, 1.0]], n).T
    both = np.stack([np.arange(n)] * 2, axis=1)
    laws = []
    for e in noise:
        empty = law(rng, n, rank)
        root = np.linalg.cholesky(empty.covariance - 0.09 * np.eye(n) + 1e-9 * np.eye(n))
        misfit = root @ rng.normal(size=n) + 0.3 * e
        laws.append(ReadingLaw(misfit, empty.covariance, empty.noise, empty.own, empty.moved))
    return laws, both


def test_posterior_is_calibrated():
    # Cook, Gelman & Rubin 2006: with rho from its prior, its posterior quantile is uniform.
    rng = np.random.default_rng(9)
    quantiles, means, truths = [], [], []
    for _ in range(400):
        rho = np.tanh(0.5 * rng.normal())
        laws, both = drawn(rng, rho)
        pairs = canonical_pairs(*laws, both)
        grid = covariation._GRID
        log_p = -2.0 * grid**2 + log_likelihood(pairs, np.tanh(grid))
        p = np.exp(log_p - log_p.max())
        quantiles.append(np.interp(np.arctanh(rho), grid, np.cumsum(p) / p.sum()))
        found = posterior_of(pairs)
        means.append(found.mean)
        truths.append(rho)
    assert kstest(quantiles, "uniform").pvalue > 0.01
    hits = ((np.array(quantiles) > 0.025) & (np.array(quantiles) < 0.975)).sum()
    assert binom.ppf(0.005, 400, 0.95) <= hits <= binom.ppf(0.995, 400, 0.95)
    # A calibrated mean is the regression of the truth on itself.
    slope, error = np.polyfit(means, truths, 1, cov=True)
    assert slope[0] == pytest.approx(1.0, abs=3.0 * np.sqrt(error[0, 0]))
    assert np.sqrt(error[0, 0]) < 0.1
