"""The mass balance against the lab's own wells, and what must hold of it."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from muntin.assay.balance import Volumes, balance, most_collected
from muntin.assay.inputs import results
from tests.assay.wells import LAB, assay, exact

KINDS = ("load", "wash", "elution", "elution", "strip")
part = st.floats(0.001, 3.0)
microlitres = st.floats(20.0, 400.0)


@st.composite
def wells(draw, weighed=False):
    n = draw(st.integers(1, 4))

    def grid(kind, *shape):
        return np.array(draw(st.lists(kind, min_size=1, max_size=1)) * int(np.prod(shape))).reshape(
            shape
        ) * np.linspace(0.9, 1.1, int(np.prod(shape))).reshape(shape)

    added = grid(microlitres, n, len(KINDS))
    return {
        "liquid": grid(part, n, len(KINDS)),
        "load": draw(st.floats(0.5, 5.0)),
        "volumes": Volumes(
            added=added,
            collected=added * 0.98 if weighed else np.full(added.shape, np.nan),
            hold_up=grid(st.floats(0.0, 60.0), n),
            resin=grid(st.floats(5.0, 60.0), n),
        ),
    }


def test_wells_of_the_lab_come_back_exactly():
    simulated = exact([[5.2, 150.0], [5.6, 220.0], [6.0, 300.0], [6.4, 380.0], [5.0, 120.0]])
    ((rows, inputs),) = simulated.plates()
    found, truth = results(inputs, assay()), simulated.truth()
    for name, value in truth.items():
        np.testing.assert_allclose(found[name], value[rows], rtol=1e-7, err_msg=name)


@settings(max_examples=60, deadline=None)
@given(well=wells(), weighed=wells(weighed=True))
def test_nothing_comes_or_goes(well, weighed):
    """Loaded = collected + held up + what is still bound, whether volumes were weighed or not."""
    for each in (well, weighed):
        found = balance(**each, kinds=KINDS)
        taken, left = each["volumes"].kept
        liquid = each["liquid"]
        bound = found["bound_ug"]
        freed = liquid * (taken + left[:, 1:])
        freed[:, 1:] -= liquid[:, :-1] * left[:, 1:-1]
        still = bound - freed[:, 1:].sum(axis=1)
        seen = (liquid * taken).sum(axis=1) + liquid[:, -1] * left[:, -1]
        np.testing.assert_allclose(seen + still, found["loaded_ug"], rtol=1e-9)
        np.testing.assert_allclose(found["closure"] * found["loaded_ug"], seen, rtol=1e-12)


@settings(max_examples=30, deadline=None)
@given(well=wells(), factor=st.floats(0.1, 10.0))
def test_recoveries_do_not_know_the_unit_of_concentration(well, factor):
    one = balance(**well, kinds=KINDS)
    other = balance(well["liquid"] * factor, well["load"] * factor, well["volumes"], KINDS)
    for name in ("collected_of_load", "freed_of_bound", "collected_of_bound", "closure"):
        np.testing.assert_allclose(one[name], other[name], rtol=1e-9)
    np.testing.assert_allclose(one["bound_ug"] * factor, other["bound_ug"], rtol=1e-9)


def test_two_loads_bind_what_both_gave():
    liquid = np.array([[0.2, 0.5, 1.0, 0.3]])
    volumes = Volumes(
        added=np.array([[200.0, 150.0, 200.0, 200.0]]),
        collected=np.full((1, 4), np.nan),
        hold_up=np.array([20.0]),
        resin=np.array([50.0]),
    )
    found = balance(liquid, 2.0, volumes, ("load", "load", "elution", "elution"))
    assert found["loaded_ug"] == pytest.approx([2.0 * 350.0])
    assert found["bound_ug"] == pytest.approx([700.0 - 0.2 * 200.0 - 0.5 * 150.0 - 0.5 * 20.0])
    assert found["capacity_mg_ml"] == pytest.approx((700.0 - 125.0) / 50.0)


@pytest.mark.parametrize(
    ("missing", "lost", "kept"),
    [
        (4, (), ("collected_of_load", "freed_of_bound", "collected_of_bound", "closure")),
        (3, ("collected_of_load", "freed_of_bound", "collected_of_bound"), ("bound_ug", "closure")),
        (1, ("freed_of_bound",), ("collected_of_load", "collected_of_bound", "bound_ug")),
        (0, ("bound_ug", "freed_of_bound", "collected_of_bound"), ("collected_of_load",)),
    ],
)
def test_a_fraction_that_was_not_read_takes_only_what_needs_it(missing, lost, kept):
    liquid = np.array([[0.1, 0.02, 1.1, 0.4, 0.2]])
    liquid[0, missing] = np.nan
    volumes = Volumes(
        added=np.full((1, 5), 200.0),
        collected=np.full((1, 5), np.nan),
        hold_up=np.array([25.0]),
        resin=np.array([40.0]),
    )
    found = balance(liquid, 2.0, volumes, KINDS)
    assert all(np.isnan(found[name]).all() for name in lost)
    assert all(np.isfinite(found[name]).all() for name in kept)


def test_the_cap_of_elutions_is_what_the_lab_collects_where_nothing_binds():
    procedure = LAB.procedure
    cap = most_collected([procedure.volume] * 2, procedure.hold_up)
    assert cap == pytest.approx(1 - (30.0 / 230.0) ** 2)
    free = exact([[8.0, 5000.0]])
    loaded, washed = free.fractions.bound[0, 0], free.fractions.bound[0, 2]
    held = free.fractions.liquid[0, 2] * 30.0
    collected = free.fractions.amounts[0, 3:].sum()
    assert collected / (washed + held) == pytest.approx(cap, abs=2e-3)
    assert loaded > 0
