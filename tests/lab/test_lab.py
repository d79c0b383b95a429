from dataclasses import replace

import numpy as np
import pytest

from muntin.lab import ErrorSizes, Hydrophobic, Isotherm, Procedure, VirtualLab
from tests.lab.bindings import Linear, Switch

NONE = ErrorSizes.none()
CONDITIONS = np.array([[5.0, 150.0], [5.0, 300.0], [6.0, 150.0], [6.5, 220.0], [7.0, 480.0]])
LAB = VirtualLab(
    binding=Isotherm(hydrophobic=Hydrophobic(log_b=-2.0, per_mm=0.005)),
    procedure=Procedure(washes=1, elutions=2),
)


def rng(seed=1):
    return np.random.default_rng(seed)


def test_truth_of_linear_binding_has_a_closed_form():
    procedure = Procedure(
        load_volume=250.0, washes=1, wash_volume=150.0, elutions=2, volume=200.0, hold_up=30.0
    )
    lab = VirtualLab(binding=Linear(0.5), procedure=replace(procedure, resin=20.0))
    kept = (1 - 250 / 290) * (1 - 150 / 190)
    expected = kept * (1 - (1 - 200 / 240) ** 2)
    assert lab.recovery([[6.0, 100.0], [7.0, 200.0]]) == pytest.approx([expected] * 2, rel=1e-12)


def test_wells_are_given_the_protein_of_the_procedure():
    # 1 mg/mL of 150 kDa is 1/150 mM: 300 µL hold 2 nmol.
    assert LAB.fractions(CONDITIONS).loaded == pytest.approx([2.0] * 5)


def test_truth_lies_between_0_and_1_and_is_each_wells_own():
    truth = LAB.recovery(CONDITIONS)
    assert truth.shape == (5,)
    assert np.all((truth > 0) & (truth < 1))
    alone = [float(LAB.recovery(condition)[0]) for condition in CONDITIONS]
    assert truth == pytest.approx(alone, rel=1e-12)


def test_window_share_counts_the_conditions_that_reach_the_target():
    truth = np.sort(LAB.recovery(CONDITIONS))
    assert LAB.window_share(truth[2], CONDITIONS) == pytest.approx(3 / 5)
    assert LAB.window_share(1.0, CONDITIONS) == 0


def test_without_errors_a_bench_finds_the_truth():
    reads = LAB.read(CONDITIONS, rng(), NONE)
    assert reads.recovery == pytest.approx(LAB.recovery(CONDITIONS), rel=1e-12)
    assert reads.a280.shape == reads.a977.shape == reads.collected.shape == (5, 4)
    assert reads.concentration == pytest.approx(LAB.fractions(CONDITIONS).liquid * 150, rel=1e-9)
    assert np.array_equal(reads.collected, np.broadcast_to([300, 200, 200, 200], (5, 4)))


def test_the_same_seed_gives_the_same_reads_and_another_seed_others():
    first, again, other = (LAB.read(CONDITIONS, rng(seed)) for seed in (4, 4, 5))
    assert np.array_equal(first.a280, again.a280)
    assert not np.any(first.a280 == other.a280)


def test_wells_of_one_ph_on_one_plate_share_a_stock():
    conditions = np.tile([[5.5, 200.0], [5.5, 260.0], [6.0, 200.0]], (2, 1))
    sizes = replace(NONE, stock_ph_sd=0.2, stock_salt_cv=0.1)
    recovery = LAB.read(conditions, rng(), sizes, plates=[1, 1, 1, 2, 2, 2]).recovery
    twice = np.vstack([conditions, conditions])
    again = LAB.read(twice, rng(), sizes, plates=[1, 1, 1, 2, 2, 2] * 2).recovery
    assert again.reshape(2, 6) == pytest.approx(np.vstack([recovery, recovery]), rel=1e-12)
    assert np.all(np.abs(recovery[:3] - recovery[3:]) > 1e-4)
    stocks = ["a", "b", "c", "a", "b", "c"]
    fed = LAB.read(conditions, rng(), sizes, plates=[1, 1, 1, 2, 2, 2], stocks=stocks).recovery
    assert fed[:3] == pytest.approx(fed[3:], rel=1e-12)
    assert np.all(np.abs(fed / LAB.recovery(conditions) - 1) > 1e-4)


def test_setting_errors_move_wells_along_the_truth():
    sizes = replace(NONE, ph_sd=0.1, salt_cv=0.1, stock_ph_sd=0.2, stock_salt_cv=0.05)
    conditions = np.array([[5.5, 200.0], [5.5, 260.0], [6.0, 200.0], [6.0, 240.0]])
    errors = sizes.draw(4, 4, rng(), [0] * 4, [5.5, 5.5, 6.0, 6.0])
    set_to = np.column_stack([conditions[:, 0] + errors.ph, conditions[:, 1] * errors.salt])
    read = LAB.read(conditions, rng(), sizes).recovery
    assert read == pytest.approx(LAB.recovery(set_to), rel=1e-12)


def test_default_errors_scatter_a_good_recovery_as_published_wells_do():
    # 2 to 5 % where recovery is above 0.5; from memory.
    lab = VirtualLab(binding=Switch(0.3), procedure=Procedure(hold_up=40.0, resin=50.0))
    sizes = ErrorSizes(load_cv=0.0, blank_sd=0.0)
    assert lab.recovery([6.0, 400.0]) == pytest.approx([0.9535], abs=1e-4)
    recovery = lab.read(np.tile([6.0, 400.0], (4000, 1)), rng(), sizes).recovery
    assert 0.02 < recovery.std() / recovery.mean() < 0.03


@pytest.mark.parametrize("keys", ["plates", "stocks"])
def test_every_well_has_a_plate_and_a_stock(keys):
    with pytest.raises(ValueError, match="5 wells but 2 keys of plates or stocks"):
        LAB.read(CONDITIONS, rng(), **{keys: [1, 2]})
