"""Remarks on uptake curves: each where it belongs, and none where nothing is amiss."""

from __future__ import annotations

from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from muntin.assay.uptake import Uptake, judge_uptake
from muntin.assay.uptake_laws import FirstOrder
from muntin.assay.uptake_remarks import Remark, phase_ratio_remark, uptake_remarks
from muntin.assay.uptake_table import Curve
from tests.assay.curves import PRIORS, curve, drawn

STEADY = settings(deadline=None, derandomize=True)

LONG = (3.0, 6.0, 12.0, 20.0, 35.0, 60.0, 120.0, 240.0)


def told(
    read: Curve, phase_ratio: float | None = None, planned: float | None = None
) -> dict[str, Remark]:
    found = uptake_remarks(judge_uptake(read, PRIORS), phase_ratio, planned)
    return {remark.kind: remark for remark in found}


@cache
def told_of_a_whole_curve(planned: float) -> dict[str, Remark]:
    return told(first_order(), phase_ratio=30.0, planned=planned)


def first_order(noise: float = 0.01, times: tuple[float, ...] = LONG, seed: int = 1) -> Curve:
    return drawn(FirstOrder(), 45.0, 15.0, noise, np.random.default_rng(seed), times)


def test_nothing_is_amiss_with_a_whole_curve() -> None:
    assert told_of_a_whole_curve(60.0) == {}


@pytest.mark.parametrize(
    ("ratio", "loud"),
    [(3.9, True), (4.0, False), (19.9, False), (20.0, None), (40.0, None), (40.1, True)],
)
def test_phase_ratios_at_their_bounds(ratio: float, loud: bool | None) -> None:
    found = phase_ratio_remark(ratio)
    assert (None if found is None else found.loud) == loud
    if found is not None:
        assert "(common practice, no source)" in found.sentence
        assert f"{ratio:g}" in found.sentence


@STEADY
@given(ratio=st.floats(1e-6, 1e6))
def test_no_phase_ratio_is_refused(ratio: float) -> None:
    found = phase_ratio_remark(ratio)
    assert (found is None) == (20.0 <= ratio <= 40.0)
    if found is not None:
        assert found.loud == (not 4.0 <= ratio <= 40.0)


def test_two_times_cannot_tell_the_law() -> None:
    found = told(curve((60, 120), (20, 32)))
    assert found["two times"].loud
    assert found["two times"].sentence == (
        "Two times cannot tell the law of uptake: through 20 and 32 mg/mL a first-order law goes "
        "to 50 mg/mL, 95 % of it after 352 min, a second-order law to 80 mg/mL. Read at other "
        "times too."
    )
    repeats = told(curve((60, 60, 120, 120), (19, 21, 31, 33)))
    assert repeats["two times"].sentence == found["two times"].sentence
    flat = told(curve((60, 120), (20, 20)))
    assert flat["two times"].sentence.endswith("the law of uptake. Read at other times too.")
    assert "two times" not in told(curve((0, 30, 60, 120), (0, 11, 20, 32)))


def test_the_last_point_still_climbs() -> None:
    short = tuple(t for t in LONG if t <= 20.0)
    found = told(first_order(times=short))
    assert found["still climbing"].loud
    assert "at 20 min the resin holds" in found["still climbing"].sentence
    assert "still climbing" not in told_of_a_whole_curve(60.0)


def test_laws_that_fit_alike_are_named_with_their_times() -> None:
    found = told(curve((20, 60, 120), (11.0, 23.0, 32.0)))
    assert "min under first order" in found["laws"].sentence
    assert "min under pore diffusion" in found["laws"].sentence


def test_a_prior_that_weighs_in_is_said() -> None:
    assert "priors" in told(curve((5, 10), (4.0, 7.9)))
    assert "priors" not in told_of_a_whole_curve(60.0)


def test_a_plan_beyond_the_readings_is_said() -> None:
    assert "beyond the readings" not in told_of_a_whole_curve(240.0)
    found = told_of_a_whole_curve(241.0)["beyond the readings"]
    assert found.sentence == "The planned 241 min lie beyond the last reading, at 240 min."


def test_protein_that_runs_out_is_said() -> None:
    found = told(replace(first_order(), offered=45.0))
    assert (
        "all that is offered binds in the end, 45 mg/mL resin" in found["scarce protein"].sentence
    )
    assert "scarce protein" not in told(replace(first_order(), offered=90.0))


def test_loads_above_what_is_offered_are_counted() -> None:
    found = told(replace(first_order(), offered=40.0))["above the offer"]
    assert found.loud
    assert found.sentence.startswith("3 readings above what is offered, 40 mg/mL resin")


def test_a_load_that_falls_is_said() -> None:
    read = curve((5, 10, 20, 40, 80, 160), (12.0, 20.0, 32.0, 42.0, 41.0, 30.0))
    assert told(read)["falling"].sentence.startswith("The load falls from 42 mg/mL at 40 min to 30")
    assert "falling" not in told(first_order(noise=0.05))


def test_readings_that_scatter_are_said() -> None:
    assert not told(first_order(noise=0.2, seed=4))["scatter"].loud
    nothing_binds = told(curve((5, 20, 60, 120), (0.3, -0.2, 0.1, -0.1)))["scatter"]
    assert nothing_binds.loud
    assert "which then tells hardly anything" in nothing_binds.sentence
    assert "scatter" not in told(first_order(noise=0.03))


def test_loud_remarks_come_first() -> None:
    found = uptake_remarks(judge_uptake(curve((60, 120), (20, 32)), PRIORS), 15.0, 200.0)
    loud = [remark.loud for remark in found]
    assert loud == sorted(loud, reverse=True)
    assert True in loud
    assert False in loud


def test_more_readings_narrow_what_is_known() -> None:
    def width(known: Uptake) -> float:
        return known.time_to(0.95).high - known.time_to(0.95).low

    once = first_order(noise=0.03)
    times, loads = np.tile(once.times, 4), np.tile(once.loads, 4)
    order = np.argsort(times, kind="stable")
    four = curve(tuple(times[order]), tuple(loads[order]))
    assert width(judge_uptake(four, PRIORS)) < 0.7 * width(judge_uptake(once, PRIORS))


def test_law_weights_add_up_and_follow_the_law() -> None:
    read = drawn(FirstOrder(), 45.0, 15.0, 0.005, np.random.default_rng(3), LONG, offered=60.0)
    known = judge_uptake(read, PRIORS)
    assert sum(known.law_weights) == pytest.approx(1.0)
    assert known.best.law.name == "first order"
