"""A planted fault raises the check made for it and no other; sound studies raise none."""

from functools import cache
from pathlib import Path
from tempfile import TemporaryDirectory

import pytest

import muntin
from muntin.window.checks import Check
from tests.window.planted import Plant, study

SEEDS = (1, *(pytest.param(seed, marks=pytest.mark.slow) for seed in range(2, 9)))
RIGHT = {
    "outlier": "wild wells",
    "plate": "other plates",
    "stocks": "lack of fit",
    "confounded": "confounding",
    "prior": "priors",
}


def failed(seed: int, plant: Plant | None = None, plates: int = 3) -> dict[str, Check]:
    with TemporaryDirectory() as folder:
        view = muntin.assess(study(Path(folder) / "study", seed, plant, plates))
        return {check.name: check for check in view.checks() if not check.passed}


@cache
def failed_when_sound(seed: int) -> frozenset[str]:
    return frozenset(failed(seed))


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("plant", RIGHT)
def test_a_planted_fault_raises_its_check_and_no_other(plant, seed):
    found = failed(seed, plant)
    assert set(found) - failed_when_sound(seed) == {RIGHT[plant]}
    assert found[RIGHT[plant]].serious == (plant != "outlier")


@pytest.mark.parametrize("seed", SEEDS)
def test_sound_studies_raise_nothing(seed):
    assert failed_when_sound(seed) == set()


@pytest.mark.slow
def test_false_alarms_are_rare():
    alarms = [
        (seed, name)
        for seed in range(100, 140)
        for name, check in failed(seed, plates=2 + seed % 3).items()
        if check.serious
    ]
    assert len(alarms) <= 2, alarms
