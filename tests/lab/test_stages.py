import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from muntin.lab import Addition, Hydrophobic, Ionic, Isotherm, through_stages
from tests.lab.bindings import Linear, Recorder, Switch
from tests.lab.conftest import STEADY

ISOTHERMS = st.builds(
    Isotherm,
    ionic=st.builds(
        Ionic,
        groups=st.floats(2.0, 16.0),
        log_k=st.floats(-6.0, 0.0),
        steric=st.floats(10.0, 2000.0),
    ),
    hydrophobic=st.none() | st.builds(Hydrophobic, log_b=st.floats(-4.0, 1.0)),
)


def bind_and_elute(elution_ph, elution_salt, elutions=2, washes=1):
    load = Addition(role="load", volume=300.0, ph=5.0, salt=30.0, protein=0.007)
    wash = Addition(role="wash", volume=180.0, ph=5.0, salt=30.0)
    elution = Addition(role="elution", volume=210.0, ph=elution_ph, salt=elution_salt)
    return [load, *[wash] * washes, *[elution] * elutions]


@STEADY
@given(
    ISOTHERMS,
    st.lists(st.tuples(st.floats(3.0, 9.0), st.floats(5.0, 1000.0)), min_size=1, max_size=4),
    st.floats(0.0, 80.0),
    st.floats(1.0, 100.0),
    st.integers(1, 3),
    st.integers(0, 3),
)
def test_no_protein_is_lost_or_made(isotherm, buffers, hold_up, resin, elutions, washes):
    ph, salt = np.array(buffers).T
    additions = bind_and_elute(ph, salt, elutions, washes)
    wells = through_stages(isotherm, additions, hold_up, resin)
    assert wells.closure == pytest.approx(np.ones(len(buffers)), rel=1e-12)
    assert np.all(wells.amounts >= 0)
    assert np.all((wells.recovery_of_load >= 0) & (wells.recovery_of_load <= 1 + 1e-12))


@pytest.mark.parametrize("kp", [0.0, 0.4, 7.0])
@pytest.mark.parametrize("hold_up", [0.0, 35.0])
def test_linear_binding_leaves_by_the_closed_form(kp, hold_up):
    resin = np.array([15.0, 40.0, 90.0])
    wells = through_stages(Linear(kp), bind_and_elute(6.0, 300.0, 3, 2), hold_up, resin)
    left = np.full(3, 300.0 * 0.007)
    for j, volume in enumerate([300.0, 180.0, 180.0, 210.0, 210.0, 210.0]):
        taken = left * volume / (volume + hold_up + kp * resin)
        assert wells.amounts[:, j] == pytest.approx(taken, rel=1e-12)
        left = left - taken
    kept = wells.bound[:, -1] + hold_up * wells.liquid[:, -1]
    assert kept == pytest.approx(left, rel=1e-12, abs=1e-15)


def test_few_molecules_leave_steric_mass_action_as_linear_binding():
    ionic = Ionic(groups=8.0, steepness=0.0, log_k=-1.0, log_k_per_ph=0.0, capacity=500.0)
    load = Addition(role="load", volume=200.0, ph=6.0, salt=400.0, protein=1e-9)
    elution = Addition(role="elution", volume=200.0, ph=6.0, salt=400.0)
    wells = through_stages(Isotherm(ionic=ionic), [load, elution, elution], 25.0, 50.0)
    share = 200 / (200 + 25 + 50 * 0.1 * (500 / 400) ** 4)
    expected = [share, (1 - share) * share, (1 - share) ** 2 * share]
    assert wells.amounts[0] / wells.loaded[0] == pytest.approx(np.array(expected), rel=1e-6)


def test_recovery_of_bound_is_what_a_mass_balance_on_the_filtrates_gives():
    isotherm = Isotherm(hydrophobic=Hydrophobic(log_b=-1.5))
    salt = np.array([90.0, 180.0, 260.0, 450.0])
    hold_up, resin = np.array([20.0, 30.0, 25.0, 40.0]), 35.0
    wells = through_stages(isotherm, bind_and_elute(6.2, salt), hold_up, resin)
    through, washed, *eluted = wells.liquid.T
    bound = 0.007 * 300 - through * (300 + hold_up)
    freed, before = 0.0, washed
    for after in eluted:
        freed = freed + after * (210 + hold_up) - before * hold_up
        before = after
    assert wells.recovery_of_bound == pytest.approx(freed / bound, rel=1e-9)
    eluted_amount = 210 * (eluted[0] + eluted[1])
    assert wells.recovery_of_load == pytest.approx(eluted_amount / (0.007 * 300), rel=1e-12)


def test_hold_up_dilutes_the_buffer_of_each_stage():
    recorder = Recorder()
    through_stages(recorder, bind_and_elute(7.0, 430.0), 70.0, 20.0)
    share = 210 / 280
    first_ph, first_salt = 5 + share * 2, 30 + share * 400
    expected = [
        (5.0, 30.0),
        (5.0, 30.0),
        (first_ph, first_salt),
        (first_ph + share * (7 - first_ph), first_salt + share * (430 - first_salt)),
    ]
    assert np.array(recorder.seen) == pytest.approx(np.array(expected))


def test_washes_take_what_was_not_bound():
    unbound = through_stages(Linear(0.0), bind_and_elute(6.0, 300.0, washes=1), 30.0, 20.0)
    washed = through_stages(Linear(0.0), bind_and_elute(6.0, 300.0, washes=3), 30.0, 20.0)
    kept = 30 / 330 * 30 / 210
    assert unbound.liquid[0, 2] * 240 / unbound.loaded[0] == pytest.approx(kept)
    assert washed.recovery_of_load / unbound.recovery_of_load == pytest.approx((30 / 210) ** 2)


def test_wells_of_one_run_do_not_touch_each_other():
    salt = np.array([100.0, 250.0, 400.0])
    hold_up, resin = np.array([20.0, 30.0, 40.0]), np.array([15.0, 25.0, 50.0])
    together = through_stages(Isotherm(), bind_and_elute(6.0, salt), hold_up, resin)
    assert together.liquid.shape == together.bound.shape == together.collected.shape == (3, 4)
    for well in range(3):
        additions = bind_and_elute(6.0, salt[well])
        alone = through_stages(Isotherm(), additions, hold_up[well], resin[well])
        assert alone.liquid[0] == pytest.approx(together.liquid[well], rel=1e-12)
        assert alone.bound[0] == pytest.approx(together.bound[well], rel=1e-12)


@pytest.mark.parametrize(
    "roles",
    [("load", "elution", "wash"), ("wash", "load", "elution"), ("load", "wash"), ("elution",)],
)
def test_stages_in_another_order_are_refused(roles):
    additions = [Addition(role=role, volume=200.0, ph=6.0, salt=100.0) for role in roles]
    with pytest.raises(ValueError, match="not " + ", ".join(roles)):
        through_stages(Switch(0.3), additions, 30.0, 20.0)
