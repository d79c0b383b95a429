"""Simulated reads of known masses come back within their stated uncertainties."""

import numpy as np
import pytest

from muntin.assay.uncertainty import first_order, shared_scale
from tests.assay.wells import assay, run

# 2,000 wells on 500 plates. Wells of a plate err together, so that the share within 95 % has a
# standard error of up to 1 % (that of 500 independent plates).
WELLS, SIZE, SEED = 2000, 4, 7
COVERED = (
    "loaded_ug",
    "bound_ug",
    "capacity_mg_ml",
    "collected_of_load",
    "freed_of_bound",
    "collected_of_bound",
    "closure",
)


def scores(settings, count=WELLS, **wells):
    """Errors over stated standard uncertainties, by quantity, shape (count,)."""
    simulated = run(count, SIZE, SEED, **wells)
    truth = simulated.truth()
    found = [(rows, first_order(inputs, settings)) for rows, inputs in simulated.plates()]
    return {
        name: np.concatenate(
            [(q[name].value - truth[name][rows]) / q[name].total for rows, q in found]
        )
        for name in COVERED
    }


@pytest.mark.parametrize(
    ("settings", "wells"),
    [
        ({"hold_up_mean_cv": 0.0}, {}),
        pytest.param({"hold_up_mean_cv": 0.1}, {"mean_off": 0.1}, marks=pytest.mark.slow),
        pytest.param({"hold_up_mean_cv": 0.1}, {"mean_off": -0.1}, marks=pytest.mark.slow),
        ({"hold_up_mean_cv": 0.1}, {"mean_sd": 0.1}),
    ],
    ids=["mean known", "mean 10 % high", "mean 10 % low", "mean drawn"],
)
def test_nineteen_in_twenty_lie_within_their_intervals(settings, wells):
    for name, score in scores(assay(**settings), **wells).items():
        assert np.mean(np.abs(score) < 1.96) == pytest.approx(0.95, abs=0.02), name


def test_what_is_left_out_is_missed():
    """The same wells with a load that is claimed to be sure: intervals cover too little."""
    score = scores(assay(load_cv=0.0), count=800)["collected_of_load"]
    assert np.mean(np.abs(score) < 1.96) < 0.90


def test_wells_of_a_plate_scatter_by_their_own_part_and_move_by_the_shared_one():
    """Wells above half recovery, where a blank hardly counts: each plate is off by one factor."""
    simulated = run(2400, 12, 3)
    truth, within, freedom, between = simulated.truth()["collected_of_load"], 0.0, 0, []
    for rows, inputs in simulated.plates():
        recovery = first_order(inputs, assay())["collected_of_load"]
        high = truth[rows] > 0.5
        off = (recovery.value / truth[rows] - 1.0)[high]
        own = (recovery.own / recovery.value)[high]
        mean = np.average(off, weights=own**-2)
        within += (((off - mean) / own) ** 2).sum()
        freedom += high.sum() - 1
        scale = shared_scale(recovery, high).scale
        between.append(mean**2 / (scale**2 + 1.0 / (own**-2).sum()))
    assert freedom > 1000
    # Means of chi-squares over their degrees of freedom; 3 standard errors.
    assert within / freedom == pytest.approx(1.0, abs=3 * np.sqrt(2 / freedom))
    assert np.mean(between) == pytest.approx(1.0, abs=3 * np.sqrt(2 / len(between)))
