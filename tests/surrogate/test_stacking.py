import numpy as np
import pytest

from muntin.surrogate.stacking import stacking_shares


def gain(shares, log_density):
    return np.log(np.exp(log_density).T @ shares).mean()


def test_two_shares_agree_with_a_grid():
    log_density = np.random.default_rng(1).normal(0.0, 1.0, (2, 15))
    grid = np.linspace(0.0, 1.0, 20_001)
    gains = [gain(np.array([a, 1.0 - a]), log_density) for a in grid]
    assert stacking_shares(log_density)[0] == pytest.approx(grid[np.argmax(gains)], abs=1e-3)


def test_three_shares_agree_with_a_grid():
    log_density = np.random.default_rng(2).normal(0.0, 1.0, (3, 20)) + np.array([[0.1], [0], [0]])
    grid = np.linspace(0.0, 1.0, 101)
    best = max(
        gain(np.array([a, b, 1.0 - a - b]), log_density)
        for a in grid
        for b in grid
        if a + b <= 1.0 + 1e-12
    )
    shares = stacking_shares(log_density)
    assert shares.min() >= 0.0
    assert shares.sum() == pytest.approx(1.0)
    assert gain(shares, log_density) >= best - 1e-9


def test_what_is_worse_everywhere_gets_nothing():
    better = np.random.default_rng(3).normal(0.0, 1.0, 12)
    assert list(stacking_shares(np.stack([better - 0.5, better]))) == [0.0, 1.0]


def test_equal_densities_share_equally():
    same = np.random.default_rng(4).normal(0.0, 1.0, 9)
    assert stacking_shares(np.stack([same, same, same, same])) == pytest.approx(np.full(4, 0.25))


def test_mirrored_densities_share_equally():
    one = np.random.default_rng(5).normal(0.0, 1.0, 8)
    log_density = np.array([[*one, *-one], [*-one, *one]])
    assert stacking_shares(log_density) == pytest.approx([0.5, 0.5], abs=1e-4)


def test_densities_far_below_what_a_number_can_hold_are_compared_all_the_same():
    log_density = np.random.default_rng(6).normal(0.0, 1.0, (2, 15))
    sunk = log_density - 5000.0 * np.arange(15)
    assert stacking_shares(sunk) == pytest.approx(stacking_shares(log_density), abs=1e-6)


def test_one_surrogate_or_no_reading_leaves_nothing_to_decide():
    assert list(stacking_shares(np.array([[0.3, -1.0]]))) == [1.0]
    assert list(stacking_shares(np.zeros((3, 0)))) == pytest.approx([1 / 3, 1 / 3, 1 / 3])
