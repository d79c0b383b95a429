"""Plates with the aim `best`: what is found on a noisy function, and where the search begins."""

import numpy as np
import pytest

from muntin.design.selection import select
from muntin.window.assessment import assess
from tests.benchmarks.best import CASES, NOISE_SD, empty, play

SEEDS = range(8)


@pytest.mark.slow
def test_best_finds_more_of_branin_than_as_many_wells_at_random():
    # After 12 + 6 + 6 wells half of the searches come within half the noise of one well; with a
    # criterion upside down or idle they do not, though they begin with the same opening plate.
    found, chance = (
        np.array([play("Branin", search, seed, "gp", (12, 6, 6))[-1] for seed in SEEDS])
        for search in ("best", "random")
    )
    assert np.median(found) < 0.25 * np.median(chance)
    assert np.median(found) < 0.5 * NOISE_SD


@pytest.mark.parametrize("name", ["Branin", pytest.param("Hartmann-3", marks=pytest.mark.slow)])
def test_opening_plate_is_that_of_the_edge_and_not_the_corners(name):
    fresh = assess(empty(CASES[name].definition), "gp")
    best, edge = (select(fresh, 8, aim, 1) for aim in ("best", "edge"))
    rows = [pick.candidate for pick in best.picks]
    assert rows == [pick.candidate for pick in edge.picks]
    wells = best.candidates.iloc[rows].to_numpy(dtype=float)
    low, high = best.candidates.min().to_numpy(), best.candidates.max().to_numpy()
    at_corners = ((wells == low) | (wells == high)).all(axis=1)
    assert at_corners.sum() <= 1
