"""Column minus plate: run by run, and the shift that all runs share."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from muntin.confirmation.comparison import Comparison, compare, shared_shift
from muntin.record.column_plan import ColumnPlan, PlannedRun, Prediction
from muntin.record.column_runs import ColumnRun
from muntin.record.readings import Reading
from muntin.record.responses import Response

REAL = Response(name="shift", kind="real", at_least=-1.0, at_most=9.0)
HCP = Response(name="hcp", kind="positive", at_most=100.0)
MEAN = np.array([1.0, 3.0, 8.0])
COVARIANCE = np.array([[0.04, 0.01, 0.0], [0.01, 0.05, 0.02], [0.0, 0.02, 0.09]])
OWN, PLATE = np.array([0.2, 0.25, 0.3]), np.array([0.15, 0.15, 0.15])
_Z = 1.959963984540054


def plan(response: Response, first: int = 1) -> ColumnPlan:
    """Three runs whose readings are Gaussian, or their logarithms for a positive response."""
    log = response.kind == "positive"
    wide = _Z * np.sqrt(np.diag(COVARIANCE) + OWN**2 + PLATE**2)
    low, high = MEAN - wide, MEAN + wide
    shown = np.exp if log else np.asarray
    prediction = Prediction(
        response=response.name,
        mean=tuple(shown(MEAN)),
        mean_low=tuple(shown(MEAN - _Z * np.sqrt(np.diag(COVARIANCE)))),
        mean_high=tuple(shown(MEAN + _Z * np.sqrt(np.diag(COVARIANCE)))),
        reading_low=tuple(shown(low)),
        reading_high=tuple(shown(high)),
        logarithm=log,
        centre=tuple(MEAN),
        covariance=tuple(map(tuple, COVARIANCE)),
        own_sd=tuple(OWN),
        plate_sd=tuple(PLATE),
    )
    runs = [
        PlannedRun(run=first + i, place=place, condition={"ph": 5.0 + i}, probability=0.95)
        for i, place in enumerate(("set point", "edge", "edge"))
    ]
    return ColumnPlan(
        written_at="2026-01-02T03:04:05+00:00",
        seed=1,
        surrogate="gp",
        engine="fast",
        window_share=0.3,
        table_sha256="",
        runs=tuple(runs),
        predictions=(prediction,),
    )


def made(response: Response, values: dict[int, float], sd: float = math.nan) -> list[ColumnRun]:
    return [
        ColumnRun(
            number, "", {response.name: Reading("read", value, sd, "", f"{value}")}, "f", "row"
        )
        for number, value in values.items()
    ]


def compared(response: Response, values, **given) -> Comparison:
    numbers = {i + 1: float(value) for i, value in enumerate(values)}
    return compare([response], [plan(response)], made(response, numbers, **given))


@given(st.lists(st.floats(-5, 15), min_size=3, max_size=3), st.floats(0, 1))
def test_a_run_agrees_where_nothing_lies_in_the_interval_of_its_difference(values, sd) -> None:
    for one in compared(REAL, values, sd=sd).compared:
        assert one.low < one.difference < one.high
        assert (one.verdict == "agrees") == (one.low <= 0.0 <= one.high)
        assert one.meets == (-1.0 <= one.reading <= 9.0)


def test_the_uncertainty_that_a_reading_states_widens_its_interval() -> None:
    plain, stated = (compared(REAL, MEAN, sd=sd).compared[0] for sd in (math.nan, 0.3))
    half = _Z * math.sqrt(0.04 + 0.2**2 + 0.15**2)
    assert plain.high - plain.difference == pytest.approx(half)
    assert stated.high - stated.difference == pytest.approx(math.hypot(half, _Z * 0.3))


def test_a_shift_of_uncorrelated_runs_is_their_weighted_mean() -> None:
    d, sd = np.array([0.5, -0.1, 0.3, 0.2]), np.array([0.1, 0.2, 0.3, 0.15])
    weights = 1.0 / sd**2
    shift, variance = shared_shift(d, np.diag(sd**2))
    assert shift == pytest.approx(np.average(d, weights=weights))
    assert variance == pytest.approx(1.0 / weights.sum())


def test_the_interval_of_a_shift_holds_it_as_often_as_it_says() -> None:
    # 4,000 draws: standard error of the share 0.0034.
    rng = np.random.default_rng(5)
    V = COVARIANCE + np.diag(OWN**2)
    root = np.linalg.cholesky(V)
    held, away = 0, []
    for _ in range(4000):
        shift, variance = shared_shift(0.4 + root @ rng.standard_normal(3), V)
        held += abs(shift - 0.4) <= _Z * math.sqrt(variance)
        away.append(shift - 0.4)
    assert held / 4000 == pytest.approx(0.95, abs=0.012)
    assert np.var(away) == pytest.approx(variance, rel=0.1)


@given(st.lists(st.floats(-1, 1), min_size=3, max_size=3), st.floats(-3, 3))
def test_what_all_runs_share_moves_the_shift_and_nothing_else(noise, more) -> None:
    before, after = (compared(REAL, MEAN + np.array(noise) + by) for by in (0.0, more))
    assert after.shifts[0].mean - before.shifts[0].mean == pytest.approx(more, abs=1e-9)
    for one, other in zip(before.compared, after.compared, strict=True):
        assert one.beside_shift == pytest.approx(other.beside_shift, abs=1e-9)
        assert other.difference - one.difference == pytest.approx(more, abs=1e-9)


@given(st.floats(0.2, 5.0))
def test_a_positive_response_shifts_by_a_factor(factor) -> None:
    (shift,) = compared(HCP, factor * np.exp(MEAN)).shifts
    assert shift.ratio
    assert shift.mean == pytest.approx(factor)
    assert shift.low < factor < shift.high
    assert all(
        one.beside_shift == pytest.approx(1.0)
        for one in compared(HCP, factor * np.exp(MEAN)).compared
    )


@pytest.mark.parametrize(
    ("by", "verdict"),
    [
        (0.0, "none to be told"),
        (0.5, "no more than a new plate"),
        (-0.5, "no more than a new plate"),
        (0.8, "more than plates differ"),
    ],
)
def test_verdicts_on_a_shift(by, verdict) -> None:
    (shift,) = compared(REAL, MEAN + by).shifts
    assert shift.verdict == verdict
    assert (shift.low <= 0.0 <= shift.high) == (verdict == "none to be told")
    assert shift.plate == pytest.approx(_Z * 0.15)


def test_a_run_off_by_itself_is_told_beside_the_shift() -> None:
    comparison = compared(REAL, MEAN + np.array([0.0, 0.0, 1.6]))
    assert [one.beside_off for one in comparison.compared] == [False, False, True]


def test_one_run_tells_of_no_shift_and_others_are_awaited() -> None:
    comparison = compared(REAL, MEAN[:1])
    assert comparison.shifts == ()
    assert comparison.compared[0].beside_shift is None
    assert [run.run for run in comparison.awaited] == [2, 3]


def test_left_out_runs_and_limits_have_no_difference() -> None:
    whole = made(REAL, {1: 1.2, 2: 3.0, 3: 8.0})
    limit = Reading("censored", 9.5, math.nan, "", ">9.5")
    runs = [whole[0]._replace(excluded="the pump stopped"), whole[1]]
    runs.append(whole[2]._replace(readings={"shift": limit}))
    comparison = compare([REAL], [plan(REAL)], runs)
    assert [one.run.run for one in comparison.compared] == [2, 3]
    last = comparison.compared[1]
    assert (last.verdict, last.difference, last.side) == ("only a limit is known", None, 1)
    assert last.meets is False
    assert [run.run for run in comparison.left_out] == [1]
    assert comparison.shifts == ()


@pytest.mark.parametrize(
    ("value", "text", "meets"),
    [(50.0, "<50", True), (150.0, "<150", None), (50.0, ">50", None), (150.0, ">150", False)],
)
def test_a_limit_may_tell_whether_the_target_is_met(value, text, meets) -> None:
    reading = Reading("censored", value, math.nan, "", text)
    run = ColumnRun(1, "", {"hcp": reading}, "f", "row")
    (one,) = compare([HCP], [plan(HCP)], [run]).compared
    assert one.meets is meets


@given(st.lists(st.floats(-1, 1), min_size=6, max_size=6))
def test_two_plans_may_err_alike(noise) -> None:
    """The shift over the same three runs twice is the mean of theirs, and hardly surer: only what
    readings err by themselves averages out.
    """
    d = np.array(noise).reshape(2, 3)
    values = {i + 1: float(v) for i, v in enumerate((MEAN + d).ravel())}
    both = compare([REAL], [plan(REAL), plan(REAL, first=4)], made(REAL, values))
    V = COVARIANCE + np.diag(OWN**2)
    apart = [shared_shift(part, V) for part in d]
    assert both.shifts[0].mean == pytest.approx(np.mean([one[0] for one in apart]), abs=1e-9)
    half = (both.shifts[0].high - both.shifts[0].low) / (2 * _Z)
    w = np.linalg.solve(V, np.ones(3))
    alike = w / w.sum() @ np.sqrt(np.diag(COVARIANCE))
    assert half**2 == pytest.approx(apart[0][1] / 2 + alike**2 / 2, rel=1e-6)
    assert half**2 > apart[0][1] / 2
