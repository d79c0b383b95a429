"""Levels that one plate may hold."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from muntin.design.candidates import RunCondition, candidate_frame
from muntin.design.levels import Levels
from muntin.record.definition import Definition, definition_faults
from tests.studies import PH, RESIN, SALT, tables


def definition(**given):
    made = Definition.model_validate(tables(**given))
    assert definition_faults(made) == []
    return made


def run(*values):
    return RunCondition(values, (("plate-01", "A1"),), False)


def both(**given):
    made = definition(**given)
    frame = candidate_frame(made, (run(5.0, 100.0),))
    return frame, Levels(made, frame)


def test_levels_open_until_the_plate_has_its_most():
    made = definition(factors=[{**PH, "per_plate": 2}, SALT])
    frame = candidate_frame(made, (run(5.0, 100.0),))
    levels = Levels(made, frame)
    assert levels.open().all()
    first, second = (int(np.flatnonzero(frame["ph"] == ph)[3]) for ph in (5.0, 7.0))
    levels.use(first)
    levels.use(first)
    assert levels.open().all()
    levels.use(second)
    assert set(frame["ph"][levels.open()]) == {5.0, 7.0}
    assert levels.open().sum() == 2 * 9


def test_a_new_level_keeps_its_distance():
    # Of 3 levels over 3 pH a new one lies a third of a pH from the others, or is one of them.
    made = definition(factors=[{**PH, "step": 0.1, "per_plate": 3}, SALT])
    frame = candidate_frame(made, (run(5.0, 100.0),))
    levels = Levels(made, frame)
    levels.use(int(np.flatnonzero(frame["ph"] == 5.5)[0]))
    levels.use(int(np.flatnonzero(frame["ph"] == 6.0)[0]))
    closed = set(frame["ph"]) - set(frame["ph"][levels.open()])
    assert closed == {5.2, 5.3, 5.4, 5.6, 5.7, 5.8, 5.9, 6.1, 6.2, 6.3}


def test_choices_keep_no_distance():
    made = definition(factors=[PH, {**RESIN, "per_plate": 2}])
    frame = candidate_frame(made, (run(5.0, "Alpha"),))
    levels = Levels(made, frame)
    levels.use(0)
    assert levels.open().all()


@settings(deadline=None, derandomize=True, max_examples=60)
@given(
    st.integers(1, 4),
    st.integers(1, 4),
    st.lists(st.integers(0, 10_000), min_size=1, max_size=25),
)
def test_whatever_is_taken_from_the_open_ones_keeps_the_levels(ph, resin, choices):
    made = definition(factors=[{**PH, "per_plate": ph}, SALT, {**RESIN, "per_plate": resin}])
    frame = candidate_frame(made, (run(5.0, 100.0, "Alpha"),))
    levels, taken = Levels(made, frame), []
    for choice in choices:
        still = np.flatnonzero(levels.open())
        candidate = int(still[choice % len(still)])
        levels.use(candidate)
        taken.append(candidate)
    plan = frame.iloc[taken]
    assert plan["ph"].nunique() <= ph
    assert plan["resin"].nunique() <= resin


def test_factors_without_a_most_are_never_closed():
    made = definition()
    frame = candidate_frame(made, ())
    levels = Levels(made, frame)
    for candidate in range(0, len(frame), 5):
        levels.use(candidate)
    assert levels.open().all()


def test_a_set_of_levels_is_kept_to():
    frame, levels = both(factors=[{**PH, "per_plate": 3}, SALT])
    levels.use(int(np.flatnonzero(frame["ph"] == 5.0)[0]))
    levels.keep_to("ph", {5.5, 6.0})
    assert set(frame["ph"][levels.open()]) == {5.0, 5.5, 6.0}
    levels.keep_to("ph", None)
    assert set(frame["ph"][levels.open()]) == {4.5, 5.0, 5.5, 6.0, 6.5, 7.0, 7.5}


def test_a_set_larger_than_the_plate_is_refused():
    frame, levels = both(factors=[{**PH, "per_plate": 2}, SALT])
    levels.use(int(np.flatnonzero(frame["ph"] == 5.0)[0]))
    with pytest.raises(ValueError, match=r"^3 levels of ph, 2 are allowed$"):
        levels.keep_to("ph", {5.5, 6.0})


def test_levels_over_other_candidates_are_a_copy():
    frame, levels = both(factors=[{**PH, "per_plate": 2}, SALT])
    levels.use(int(np.flatnonzero(frame["ph"] == 5.0)[0]))
    few = frame[frame["ph"] > 5.2].reset_index(drop=True)
    other = levels.over(few)
    other.use(int(np.flatnonzero(few["ph"] == 7.0)[0]))
    assert set(few["ph"][other.open()]) == {7.0}
    assert levels.used == {"ph": {5.0}}
    assert len(set(frame["ph"][levels.open()])) == 7


def test_a_factor_set_free_is_counted_no_longer():
    frame, levels = both(factors=[{**PH, "per_plate": 1}, {**SALT, "per_plate": 2}])
    levels.use(0)
    levels.set_free("ph")
    assert set(frame["ph"][levels.open()]) == {4.5, 5.0, 5.5, 6.0, 6.5, 7.0, 7.5}
    assert levels.most == {"salt": 2}


def test_stocks_number_the_combinations_of_limited_levels():
    frame, levels = both(factors=[{**PH, "per_plate": 2}, SALT])
    numbers = levels.stocks()
    assert len(set(numbers)) == 7
    assert all(len(set(frame["ph"][numbers == n])) == 1 for n in set(numbers))
    _, free = both()
    assert set(free.stocks()) == {0}
