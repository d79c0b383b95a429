import numpy as np
import pytest

from tests.benchmarks.benches import FACTORS, KINDS, Truth, drawn, factorial, read_plate, study_of
from tests.benchmarks.series import least_squares


def test_a_factorial_has_every_combination_once_from_end_to_end():
    plate = factorial(4, 4, 3)
    assert len({tuple(row) for row in plate.tolist()}) == len(plate) == 48
    assert plate.min(axis=0).tolist() == [4.5, 50, 0]
    assert plate.max(axis=0).tolist() == [7.5, 500, 200]
    assert [len(set(column)) for column in plate.T.tolist()] == [4, 4, 3]


@pytest.mark.parametrize("factors", [2, 3])
def test_a_study_holds_what_its_plates_read(factors):
    rng = np.random.default_rng(1)
    process = drawn("island", rng, factors)
    counts = (3, 2, 2)[:factors]
    plates = [read_plate(process, factorial(*counts), error, rng) for error in (0.02, -0.03)]
    study = study_of(plates, factors)
    names = list(FACTORS[:factors])
    assert study.definition.factor_names == tuple(names)
    readings = study.readings("recovery")
    assert readings[names].to_numpy().tolist() == [*factorial(*counts).tolist()] * 2
    assert readings["y"].tolist() == [*plates[0]["recovery"], *plates[1]["recovery"]]
    assert len(set(readings["plate"])) == 2


@pytest.mark.parametrize("kind", KINDS)
def test_truths_hold_the_process(kind):
    rng = np.random.default_rng(2)
    process = drawn(kind, rng, 3)
    truth = Truth.of(process, rng, 3)
    assert truth.mean.tolist() == (process.recovery(*truth.frame.to_numpy().T) >= 0.8).tolist()
    assert 0.1 <= truth.mean.mean() <= 0.6
    assert np.corrcoef(truth.mean, truth.well)[0, 1] > 0.8


def test_least_squares_calls_a_quadratic_truth_rightly():
    """Readings without noise of a surface that is a quadratic leave nothing called wrongly."""
    rng = np.random.default_rng(3)
    process = drawn("elution", rng)
    truth = Truth.of(process, rng)
    ph, salt = truth.frame.to_numpy().T
    surface = 0.9001 - 0.1 * (ph - 6.0) ** 2 - 1e-5 * (salt - 250.0) ** 2 + 1e-4 * (ph - 6.0) * salt
    exact = Truth(truth.frame, surface >= 0.8, truth.well)
    plate = truth.frame.assign(recovery=surface)[::37]
    assert 0.1 < exact.mean.mean() < 0.9
    assert least_squares(plate, exact) == 0.0
    mirrored = plate.assign(recovery=1.6 - plate["recovery"])
    assert least_squares(mirrored, exact) == 100.0
