"""Earlier conditions that every new plate repeats."""

import numpy as np
import pytest

from muntin.design.bridging import bridging_conditions
from muntin.design.candidates import RunCondition


def run(count, bridged=()):
    wells = (("plate-01", "A1"),)
    return [RunCondition((float(i),), wells, i in bridged) for i in range(count)]


def test_surest_pass_and_the_likely_fail_nearest_the_edge():
    p = np.array([0.001, 0.19, 0.5, 0.97, 0.999, 0.21])
    assert bridging_conditions(run(6), p, 4) == [(4, "pass"), (1, "fail"), (4, "pass"), (1, "fail")]


def test_what_bridged_before_is_kept_while_it_holds():
    p = np.array([0.001, 0.19, 0.5, 0.97, 0.999, 0.21])
    assert bridging_conditions(run(6, bridged=(0, 3)), p, 2) == [(3, "pass"), (0, "fail")]


def test_what_bridged_before_gives_way_once_it_does_not_hold():
    p = np.array([0.3, 0.19, 0.001, 0.94, 0.999, 0.06])
    assert bridging_conditions(run(6, bridged=(0, 3)), p, 2) == [(4, "pass"), (1, "fail")]


def test_of_two_that_bridged_before_the_better_is_kept():
    p = np.array([0.01, 0.04, 0.96, 0.99, 0.999, 0.0])
    chosen = bridging_conditions(run(6, bridged=(0, 1, 2, 3)), p, 2)
    assert chosen == [(3, "pass"), (1, "fail")]


def test_with_no_pass_or_fail_the_best_and_the_worst_stand_in():
    p = np.array([0.4, 0.25, 0.7, 0.6])
    assert bridging_conditions(run(4), p, 3) == [(2, "pass"), (1, "fail"), (2, "pass")]


def test_the_fail_is_one_that_the_plate_can_hold_beside_the_pass():
    p = np.array([0.01, 0.19, 0.5, 0.999, 0.15])
    asked = []

    def beside(first):
        asked.append(first)
        return np.array([True, False, True, True, True])

    assert bridging_conditions(run(5), p, 2, beside) == [(3, "pass"), (4, "fail")]
    assert bridging_conditions(run(5, bridged=(1,)), p, 2, beside) == [(3, "pass"), (4, "fail")]
    assert asked == [3, 3]


def test_a_pass_serves_alone_where_the_plate_can_hold_nothing_beside_it():
    p = np.array([0.01, 0.19, 0.999])
    alone = bridging_conditions(run(3), p, 3, lambda first: np.arange(3) == first)
    assert alone == [(2, "pass")] * 3


@pytest.mark.parametrize(("p", "purpose"), [(0.8, "pass"), (0.5, "pass"), (0.2, "fail")])
def test_one_condition_serves_alone(p, purpose):
    assert bridging_conditions(run(1), np.array([p]), 3) == [(0, purpose)] * 3


@pytest.mark.parametrize("wells", [0, 1, 2, 3, 4, 5])
def test_number_of_wells(wells):
    chosen = bridging_conditions(run(3), np.array([0.0, 0.5, 1.0]), wells)
    assert len(chosen) == wells
    assert [purpose for _, purpose in chosen] == (["pass", "fail"] * 3)[:wells]


def test_nothing_run_bridges_nothing():
    assert bridging_conditions([], np.zeros(0), 4) == []
