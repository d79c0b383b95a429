"""Summaries of series made by hand."""

from __future__ import annotations

import math

import numpy as np
import pytest

from muntin.record.definition import StopRule
from muntin.rehearsal.played import Series
from muntin.rehearsal.summary import after_plates, against, holds, table_of, to_stop, within
from tests.rehearsal.played import series, standing

OWN = "plate by plate"
RULE = StopRule(wrong_share=0.05)
# (tests, expected, wrong): the rule holds after 12, after 24, after 12 and then no more, never.
EVERY = [
    series(
        0,
        {
            OWN: [(0, 0.2, 0.2), (12, 0.05, 0.04), (24, 0.01, 0.02)],
            "x": [(0, 0.2, 0.2), (24, 0.04, 0.06)],
        },
    ),
    series(
        1,
        {
            OWN: [(0, 0.2, 0.1), (12, 0.06, 0.06), (24, 0.03, 0.04)],
            "x": [(0, 0.2, 0.1), (24, 0.06, 0.05)],
        },
    ),
    series(
        2,
        {
            OWN: [(0, 0.2, 0.3), (12, 0.02, 0.08), (24, 0.07, 0.09)],
            "x": [(0, 0.2, 0.3), (24, 0.07, 0.10)],
        },
    ),
    series(
        3,
        {
            OWN: [(0, 0.2, 0.2), (12, 0.09, 0.02), (24, 0.08, 0.01)],
            "x": [(0, 0.2, 0.2), (24, 0.08, 0.02)],
        },
    ),
]


def test_within_counts_those_that_never_got_there() -> None:
    values = np.array([24.0, 12.0, 12.0])
    assert within(values, 3, 0.5) == 12.0
    assert within(values, 3, 0.9) == 24.0
    assert within(values, 4, 0.5) == 12.0
    assert within(values, 4, 0.75) == 24.0
    assert within(values, 4, 0.9) == math.inf
    assert within(np.zeros(0), 4, 0.5) == math.inf
    assert within(np.arange(1.0, 11.0), 10, 0.9) == 9.0


def test_what_it_takes_to_reach_the_rule() -> None:
    own, rival = to_stop(table_of(EVERY), RULE).to_dict("records")
    assert (own["design"], own["planned_plates"], own["planned_tests"]) == (OWN, 2, 24)
    assert (own["series"], own["reached"]) == (4, 3)
    assert (own["tests_half"], own["plates_half"], own["wells_half"]) == (12.0, 1.0, 120.0)
    assert own["tests_most"] == own["plates_most"] == own["wells_most"] == math.inf
    assert own["wrong"] == pytest.approx((0.04 + 0.04 + 0.08) / 3)
    assert math.isnan(own["mg_half"])
    assert math.isnan(own["mg_most"])
    assert (rival["reached"], rival["tests_half"]) == (1, math.inf)


def test_milligrams_are_those_of_the_plate_that_met_the_rule() -> None:
    one = Series(0, {OWN: (standing(0, 0.2, 0.2, mg=0.0), standing(12, 0.01, 0.1, mg=4.5))})
    (row,) = to_stop(table_of([one]), RULE).to_dict("records")
    assert (row["mg_half"], row["mg_most"]) == (4.5, 4.5)


def test_a_rule_met_before_any_plate_takes_nothing() -> None:
    (row,) = to_stop(table_of([series(0, {OWN: [(0, 0.04, 0.2), (12, 0.01, 0.1)]})]), RULE).to_dict(
        "records"
    )
    assert (row["reached"], row["tests_most"], row["plates_most"]) == (1, 0.0, 0.0)


def test_either_part_of_the_rule_is_enough() -> None:
    one = Series(0, {OWN: (standing(0, 0.2, 0.2, best=0.5), standing(12, 0.1, 0.1, best=0.96))})
    table = table_of([one])
    assert holds(table, StopRule(wrong_share=0.05)).tolist() == [False, False]
    assert holds(table, StopRule(best_probability=0.95)).tolist() == [False, True]
    both = StopRule(wrong_share=0.05, best_probability=0.95)
    assert holds(table, both).tolist() == [False, True]


def test_what_is_called_wrongly_after_each_plate() -> None:
    after = after_plates(table_of(EVERY)).set_index(["design", "plate"])
    wrong = np.array([0.04, 0.06, 0.08, 0.02])
    row = after.loc[(OWN, 1)]
    assert (row["tests"], row["wells"]) == (12, 120)
    assert row["wrong"] == pytest.approx(0.05)
    assert row["wrong_half"] == 0.04
    assert row["wrong_most"] == 0.08
    assert row["wrong_se"] == pytest.approx(np.sqrt(((wrong - 0.05) ** 2).sum() / 3) / 2)
    assert row["expected"] == pytest.approx((0.05 + 0.06 + 0.02 + 0.09) / 4)
    assert len(after) == 5


def test_rivals_are_held_against_the_plan_truth_by_truth() -> None:
    (row,) = against(table_of(EVERY), OWN).to_dict("records")
    # After the last plates: 0.04, 0.01, 0.01 and 0.01 more.
    assert row["design"] == "x"
    assert row["difference"] == pytest.approx(0.0175)
    assert row["se"] == pytest.approx(0.0075)


def test_the_order_of_completion_is_not_seen() -> None:
    shuffled = [EVERY[i] for i in (2, 0, 3, 1)]
    assert to_stop(table_of(EVERY), RULE).equals(to_stop(table_of(shuffled), RULE))
