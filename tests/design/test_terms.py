"""Held wells and measured stocks among the candidates."""

import numpy as np
import pandas as pd

import muntin
from muntin.design.terms import Terms, weighed
from muntin.design.weighing import Weighing
from muntin.record.definition import Definition
from muntin.record.stocks import Stock
from tests.studies import PH, RESIN, SALT, read, spread, tables, written

DEFINITION = Definition.model_validate(tables())
FRAME = pd.DataFrame({"ph": [5.0, 5.0, 6.0], "salt": [100.0, 200.0, 100.0]})
STOCK = Stock("ph", 5.0, 5.2, "stocks/plate-02.csv", "row 2")


def held(*rows):
    columns = ["ph", "salt", "ph_measured", "salt_measured"]
    return pd.DataFrame(rows, columns=columns, dtype=float).assign(role="test")


def test_without_terms_the_candidates_are_the_frame():
    told = weighed(DEFINITION, FRAME, Terms())
    pd.testing.assert_frame_equal(told.targets, FRAME)
    pd.testing.assert_frame_equal(told.actual, FRAME)
    assert not told.measured.any()
    assert not told.barred.any()
    assert told.held == ()


def test_stocks_move_every_candidate_with_their_target():
    told = weighed(DEFINITION, FRAME, Terms(stocks=(STOCK,)))
    assert told.targets["ph"].tolist() == [5.0, 5.0, 6.0]
    assert told.actual["ph"].tolist() == [5.2, 5.2, 6.0]
    assert told.measured.tolist() == [[True, False], [True, False], [False, False]]


def test_held_rows_are_candidates_once_and_may_be_repeated():
    nan = np.nan
    rows = held((5.0, 200, nan, nan), (7.0, 50, nan, nan), (7.0, 50, nan, nan))
    told = weighed(DEFINITION, FRAME, Terms(held=rows))
    assert told.held == (1, 4, 4)
    # The copies of what is there already are closed; the new condition is open.
    assert told.barred.tolist() == [False, False, False, True, False, True]


def test_a_well_that_measured_something_of_its_own_is_held_and_not_repeated():
    nan = np.nan
    rows = held((5.0, 200, 5.2, nan), (5.0, 200, 5.3, nan))
    told = weighed(DEFINITION, FRAME, Terms(held=rows, stocks=(STOCK,)))
    assert told.held == (1, 4)
    assert told.actual["ph"].tolist() == [5.2, 5.2, 6.0, 5.2, 5.3]
    assert told.barred.tolist() == [False, False, False, True, True]


def test_declined_conditions_are_barred():
    told = weighed(DEFINITION, FRAME, Terms(declined=frozenset({(5.0, 200.0)})))
    assert told.barred.tolist() == [False, True, False]


def test_choices_among_held_rows():
    made = Definition.model_validate(tables(factors=[PH, RESIN]))
    frame = pd.DataFrame({"ph": [5.0], "resin": ["Alpha"]})
    rows = pd.DataFrame(
        {"ph": [6.0], "resin": ["Beta"], "ph_measured": [np.nan], "resin_measured": [np.nan]}
    )
    told = weighed(made, frame, Terms(held=rows.assign(role="test")))
    assert told.targets["resin"].tolist() == ["Alpha", "Beta"]
    assert told.actual["resin"].tolist() == ["Alpha", "Beta"]


def test_a_measured_setting_has_no_error_of_setting(tmp_path):
    factors = [{**PH, "set_sd": 0.1}, SALT]
    study = written(tmp_path / "study", [read(spread(factors, 12))], factors=factors)
    view = muntin.assess(study, "quadratic")
    told = weighed(study.definition, FRAME, Terms(stocks=(STOCK,)))
    table = Weighing(view, told, (), 1)
    assert (table.setting[:2] == 0.0).all()
    assert table.setting[2, 0] > 0.0


def bottled(high=500.0):
    """The small definition with two bottles of each pH."""
    stocks = [
        {"name": "low", "per": "ph", "holds": {"salt": 0}},
        {"name": "high", "per": "ph", "holds": {"salt": high}},
    ]
    return Definition.model_validate(tables(bench={"ph_factor": "ph", "stocks": stocks}))


def of_bottle(target, measured):
    return Stock("salt", target, measured, "stocks/plate-02.csv", "row 2", "high (pH 5.0)")


def test_bottles_move_what_is_blended_from_them_and_leave_the_error_of_the_pipette():
    told = weighed(bottled(), FRAME, Terms(stocks=(of_bottle(500.0, 480.0),)))
    assert told.targets["salt"].tolist() == [100.0, 200.0, 100.0]
    np.testing.assert_allclose(told.actual["salt"], [96.0, 192.0, 100.0])
    assert not told.measured.any()
    assert not told.barred.any()


def test_held_rows_of_a_bottle_may_be_repeated():
    nan = np.nan
    stock = of_bottle(500.0, 480.0)
    told = weighed(bottled(), FRAME, Terms(held=held((5.0, 200, nan, 192.0)), stocks=(stock,)))
    assert told.held == (1,)
    assert told.barred.tolist() == [False, False, False, True]
    assert not told.measured.any()


def test_what_a_bottle_carries_beyond_the_range_is_not_chosen():
    # The range ends at 450 mM, and a step of 50 beyond it is let pass.
    frame = pd.DataFrame({"ph": [5.0, 5.0, 6.0], "salt": [400.0, 450.0, 450.0]})
    told = weighed(bottled(450.0), frame, Terms(stocks=(of_bottle(450.0, 501.0),)))
    assert told.barred.tolist() == [False, True, False]
