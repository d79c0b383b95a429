"""Standard uncertainties: complex steps, own and shared parts, Monte Carlo."""

import numpy as np
import pytest

from muntin.assay.balance import QUANTITIES
from muntin.assay.inputs import results, sources
from muntin.assay.uncertainty import effects, first_order, monte_carlo, shared_scale
from tests.assay.wells import assay, run

SETTINGS = assay(hold_up_mean_cv=0.1, resin_mean_cv=0.05, extinction_cv=0.03, path_shared_cv=0.02)
((_, INPUTS),) = run(5, 5, 11).plates()
FOUND = first_order(INPUTS, SETTINGS)


def work(shifts):
    return results(INPUTS, SETTINGS, shifts)


@pytest.mark.parametrize("part", ["own", "shared"])
def test_complex_steps_are_differences_of_the_results(part):
    step = 1e-4
    for source, shape in sources(INPUTS, SETTINGS)[part].items():
        which = np.zeros(((5,) if part == "own" else ()) + shape)
        which[(..., *(0,) * len(shape))] = 1.0
        found = effects(work, source, which)
        up, down = work({source: step * which}), work({source: -step * which})
        for name in QUANTITIES:
            known = np.isfinite(FOUND[name].value)
            slope = (up[name] - down[name])[known] / (2 * step)
            given = np.broadcast_to(found[name], known.shape)[known]
            np.testing.assert_allclose(given, slope, rtol=2e-5, atol=1e-8, err_msg=source)


def test_own_and_shared_parts_add_up():
    for quantity in FOUND.values():
        parts = np.sqrt(sum(each**2 for each in quantity.own_by.values()))
        np.testing.assert_allclose(parts, quantity.own, rtol=1e-12)
        shared = np.sqrt(sum(each**2 for each in quantity.shared_by().values()))
        np.testing.assert_allclose(shared, quantity.shared, rtol=1e-12)


def test_the_load_is_all_scale_and_a_blank_is_not():
    recovery = FOUND["collected_of_load"]
    load = recovery.by[recovery.names.index("load")]
    np.testing.assert_allclose(load, -SETTINGS.load_cv * recovery.value, rtol=1e-9)
    only = assay(load_cv=0.03, read_floor=0.0)
    no_blank = first_order(INPUTS, only)["collected_of_load"]
    every = np.ones(5, bool)
    assert shared_scale(no_blank, every).scale >= 0.03
    assert shared_scale(no_blank, every).rest < 0.005
    half = np.array([True, True, False, False, False])
    assert shared_scale(no_blank, half).scale == pytest.approx(
        shared_scale(no_blank, every).scale, rel=0.05
    )


def test_extinction_counts_where_the_load_is_entered():
    recovery = FOUND["collected_of_load"]
    by = recovery.shared_by()
    np.testing.assert_allclose(by["extinction"], 0.03 * recovery.value, rtol=1e-6)


def test_monte_carlo_agrees_with_the_first_order():
    drawn = monte_carlo(INPUTS, SETTINGS, 20_000, np.random.default_rng(5))
    alone = monte_carlo(INPUTS, SETTINGS, 20_000, np.random.default_rng(6), ("own",))
    for name in ("bound_ug", "collected_of_load", "freed_of_bound", "closure"):
        # The sd of 20,000 draws has a relative standard error of 0.5 %; second-order terms of a
        # hold-up that is only known to 25 % add to that.
        np.testing.assert_allclose(drawn[name].sd, FOUND[name].total, rtol=0.03, err_msg=name)
        np.testing.assert_allclose(alone[name].sd, FOUND[name].own, rtol=0.03, err_msg=name)
        low, high = drawn[name].interval.T
        inside = (low < FOUND[name].value) & (FOUND[name].value < high)
        assert inside.all()


def test_the_same_seed_draws_the_same():
    one, two = (monte_carlo(INPUTS, SETTINGS, 700, np.random.default_rng(1)) for _ in range(2))
    np.testing.assert_array_equal(one["closure"].sd, two["closure"].sd)
