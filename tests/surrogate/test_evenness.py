"""The smooth test of even transforms."""

import numpy as np
import pytest
from scipy.stats import norm

from muntin.surrogate.evenness import evenness, worth_of


def test_scores_of_even_transforms_are_standard_normal():
    """4,000 sets of 30: 4 errors of 1 / sqrt(4,000), and of sqrt(2 / 4,000) of a variance."""
    pits = np.random.default_rng(1).random((4000, 30))
    scores = np.array([(found.side, found.width) for found in map(evenness, pits)])
    assert np.abs(scores.mean(0)).max() < 4.0 / np.sqrt(4000)
    assert np.abs(scores.var(0) - 1.0).max() < 4.0 * np.sqrt(2.0 / 4000)
    assert abs(np.corrcoef(scores.T)[0, 1]) < 4.0 / np.sqrt(4000)


def test_scores_tell_what_is_wrong():
    z = norm.ppf((np.arange(60) + 0.5) / 60)
    assert evenness(norm.cdf(z)).side == pytest.approx(0.0, abs=1e-9)
    assert evenness(norm.cdf(z + 0.7)).side > 4.0
    assert evenness(norm.cdf(z - 0.7)).side < -4.0
    assert evenness(norm.cdf(2.0 * z)).width > 4.0
    assert evenness(norm.cdf(0.4 * z)).width < -4.0


def test_fewer_independent_readings_tell_less():
    pit = np.random.default_rng(2).random(40) ** 2
    assert evenness(pit, 10.0).side == pytest.approx(evenness(pit).side / 2.0)


@pytest.mark.parametrize(("likeness", "worth"), [(0.0, 12), (1.0, 1), (-0.1, 12), (0.25, 3.2)])
def test_worth(likeness, worth):
    assert worth_of(12, likeness) == pytest.approx(worth)


def test_nothing_is_even():
    assert evenness(np.zeros(0)).width == 0.0
    assert worth_of(0, 0.5) == 0.0
