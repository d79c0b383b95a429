from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tests.benchmarks.processes import (
    PH_LEVELS,
    SALT_LEVELS,
    DrawnProcess,
    draw,
    plate_errors,
    truth_grid,
)

KINDS = st.sampled_from(["elution", "mixed mode", "island"])
SEEDS = st.integers(0, 2**32 - 1)


def process(**changes):
    plain = DrawnProcess(
        stages=2, hold_up=30, resin=40, a=20, nu=4, b=0.6, noise_cv=0.025, noise_floor=0.01
    )
    return replace(plain, **changes)


def collected_stage_by_stage(drawn, kp):
    """Follow the protein of one well through its stages by mass balance, bound protein 1."""
    on_resin, in_hold_up, collected = 1.0, 0.0, 0.0
    for _ in range(drawn.stages):
        protein = on_resin + in_hold_up
        liquid = drawn.volume + drawn.hold_up
        concentration = protein / (liquid + kp * drawn.resin)
        on_resin = kp * drawn.resin * concentration
        collected += concentration * drawn.volume
        in_hold_up = concentration * drawn.hold_up
    assert on_resin + in_hold_up + collected == pytest.approx(1)
    return collected


@given(KINDS, SEEDS)
def test_recovery_is_the_mass_balance_of_the_stages(kind, seed):
    rng = np.random.default_rng(seed)
    drawn = draw(kind, rng)
    ph, salt = rng.uniform(4.5, 7.5), rng.uniform(50, 500)
    expected = collected_stage_by_stage(drawn, float(drawn.partition(ph, salt)))
    if kind == "island":
        expected /= 1 + 10 ** (drawn.d * (ph - drawn.p))
    assert float(drawn.recovery(ph, salt)) == pytest.approx(expected, rel=1e-12)


@pytest.mark.parametrize(
    ("resin", "hold_up", "kp", "left"),
    [(50, 40, 0.0, 1 / 6), (20, 20, 0.0, 1 / 11), (50, 40, 1.0, 9 / 29), (20, 20, 3.0, 2 / 7)],
)
def test_each_stage_leaves_the_same_share(resin, hold_up, kp, left):
    for stages in (1, 2, 3):
        drawn = process(stages=stages, resin=resin, hold_up=hold_up, a=kp, nu=0, b=0)
        assert float(drawn.recovery(6, 100)) == pytest.approx(1 - left**stages)


def test_partition_at_the_reference_and_its_slopes():
    drawn = process(hydrophobic=0.5, k=0.003)
    assert float(drawn.partition(6, 100)) == pytest.approx(20 + 0.5 * 10**0.3)
    plain = process()
    assert float(plain.partition(6, 200) / plain.partition(6, 100)) == pytest.approx(2**-4)
    assert float(plain.partition(7, 150) / plain.partition(6, 150)) == pytest.approx(10**-0.6)


def test_an_additive_takes_decades_of_either_binding():
    plain = process(hydrophobic=0.0, c=0.005)
    assert float(plain.partition(6, 100, 200) / plain.partition(6, 100)) == pytest.approx(0.1)
    hydrophobic = process(a=0.0, hydrophobic=0.5, k=0.003, e=0.002)
    taken = hydrophobic.partition(6, 300, 100) / hydrophobic.partition(6, 300)
    assert float(taken) == pytest.approx(10**-0.2)


def test_half_the_protein_is_lost_at_the_stated_ph():
    lossy = process(d=2.0, p=6.5)
    assert float(lossy.recovery(6.5, 300) / process().recovery(6.5, 300)) == pytest.approx(0.5)
    assert float(lossy.recovery(7.0, 300) / process().recovery(7.0, 300)) == pytest.approx(1 / 11)


@given(SEEDS, st.sampled_from([2, 3]))
def test_an_island_is_bounded_on_all_sides_of_ph_and_salt(seed, factors):
    grid = truth_grid(factors)
    reached = draw("island", np.random.default_rng(seed), factors=factors).recovery(*grid.T) >= 0.8
    assert reached.mean() >= 0.1
    inside = grid[reached][:, :2]
    assert (inside.min(axis=0) > grid[:, :2].min(axis=0)).all()
    assert (inside.max(axis=0) < grid[:, :2].max(axis=0)).all()


def test_conditions_broadcast():
    surface = process().recovery(PH_LEVELS[:, None], SALT_LEVELS)
    assert surface.shape == (31, 46)
    assert surface.ravel().tolist() == process().recovery(*truth_grid().T).tolist()


@given(KINDS, SEEDS, st.sampled_from([0.7, 0.8]))
def test_the_edge_runs_through_the_range(kind, seed, target):
    drawn = draw(kind, np.random.default_rng(seed), target)
    assert drawn.kind == kind
    reached = drawn.recovery(*truth_grid().T) >= target
    assert 0.1 <= reached.mean() <= 0.6
    assert drawn.window_share(target) == reached.mean()


@given(SEEDS)
def test_plain_elution_rises_with_salt_and_ph(seed):
    drawn = draw("elution", np.random.default_rng(seed))
    surface = drawn.recovery(PH_LEVELS[:, None], SALT_LEVELS)
    assert (np.diff(surface, axis=0) > 0).all()
    assert (np.diff(surface, axis=1) > 0).all()


@given(SEEDS)
def test_mixed_mode_has_a_most_favourable_salt(seed):
    drawn = draw("mixed mode", np.random.default_rng(seed))
    surface = drawn.recovery(PH_LEVELS[:, None], SALT_LEVELS)
    assert (surface.argmax(axis=1) < len(SALT_LEVELS) - 1).any()
    assert (np.diff(surface[-1]) < 0).any()


def test_the_grid_holds_every_bench_step_once():
    grid = truth_grid()
    assert grid.shape == (31 * 46, 2)
    assert len({tuple(row) for row in grid}) == len(grid)
    assert grid.min(axis=0).tolist() == [4.5, 50]
    assert grid.max(axis=0).tolist() == [7.5, 500]
    thinned = truth_grid(3)
    assert len({tuple(row) for row in thinned}) == len(thinned) == 16 * 23 * 11


def test_readings_on_a_plateau_scatter_with_the_stated_noise():
    drawn = process(a=0, stages=3)
    readings = drawn.read(np.tile([6.0, 300.0], (4000, 1)), 0.0, np.random.default_rng(1))
    cap = float(drawn.recovery(6, 300))
    sd = np.hypot(0.01, 0.025 * cap)
    # 4 standard errors of a mean and of a standard deviation over 4000 readings
    assert readings.mean() == pytest.approx(cap, abs=4 * sd / np.sqrt(4000))
    assert readings.std() == pytest.approx(sd, abs=4 * sd / np.sqrt(8000))


def test_setting_errors_widen_the_scatter_on_the_slope():
    drawn = process(a=200, nu=7, noise_cv=0.0, noise_floor=0.0)
    rng = np.random.default_rng(2)
    ph, salt = 6.0, 175.0
    readings = drawn.read(np.tile([ph, salt], (4000, 1)), 0.0, rng)
    step = 1e-4
    by_ph = (drawn.recovery(ph + step, salt) - drawn.recovery(ph - step, salt)) / (2 * step)
    by_salt = (drawn.recovery(ph, salt + step) - drawn.recovery(ph, salt - step)) / (2 * step)
    expected = np.hypot(by_ph * 0.03, by_salt * 0.02 * salt)  # first-order propagation
    assert expected > 0.02
    assert readings.std() == pytest.approx(expected, rel=0.08)


def test_a_plate_error_multiplies_the_readings_of_its_wells():
    drawn = process(noise_cv=0.0, noise_floor=0.0)
    wells = np.array([[5.0, 200.0], [6.0, 300.0], [7.0, 400.0]])
    plain = drawn.read(wells, 0.0, np.random.default_rng(3))
    moved = drawn.read(wells, [0.1, 0.0, -0.05], np.random.default_rng(3))
    assert moved / plain == pytest.approx([1.1, 1.0, 0.95])


def test_plate_errors_have_their_spread():
    errors = plate_errors(5000, np.random.default_rng(5))
    assert errors.std() == pytest.approx(0.03, abs=4 * 0.03 / np.sqrt(10000))
    assert errors.mean() == pytest.approx(0, abs=4 * 0.03 / np.sqrt(5000))


@given(KINDS, SEEDS)
def test_the_same_seed_draws_the_same_process_and_readings(kind, seed):
    first, second = np.random.default_rng(seed), np.random.default_rng(seed)
    one, other = draw(kind, first), draw(kind, second)
    assert one == other
    wells = truth_grid()[::97]
    assert one.read(wells, 0.02, first).tolist() == other.read(wells, 0.02, second).tolist()


@pytest.mark.parametrize(("kind", "factors"), [("elution", 2), ("mixed mode", 2), ("island", 3)])
def test_chances_are_the_share_of_wells_read_on_new_plates(kind, factors):
    """Against 40,000 wells read one by one, each on its own plate; four sds of that count."""
    drawn = draw(kind, np.random.default_rng(3), factors=factors)
    grid = truth_grid(factors)
    chances = drawn.chances(grid, 0.8, np.random.default_rng(4))
    rng = np.random.default_rng(5)
    for level in (0.03, 0.3, 0.5, 0.8, 0.97):
        place = np.abs(chances - level).argmin()
        chance = chances[place]
        wells = np.repeat(grid[[place]], 40_000, axis=0)
        share = np.mean(drawn.read(wells, plate_errors(40_000, rng), rng) >= 0.8)
        assert share == pytest.approx(chance, abs=4 * np.sqrt(chance * (1 - chance) / 40_000))


def test_chances_are_exact_to_a_thousandth():
    """Against 32 times as many points with other scrambling, over the whole range."""
    drawn, grid = draw("mixed mode", np.random.default_rng(6)), truth_grid()[::7]
    some = drawn.chances(grid, 0.8, np.random.default_rng(1))
    many = drawn.chances(grid, 0.8, np.random.default_rng(2), wells=2**14)
    assert np.abs(some - many).max() < 0.001
    assert 0.05 < many.mean() < 0.95
