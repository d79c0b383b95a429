"""Go on, go on with fewer, or stop, on forecasts made by hand."""

import numpy as np
import pandas as pd
import pytest

from muntin.design.stopping import Ruling, rule_on
from muntin.record.definition import StopRule


def forecast(shares, reached=(0.0, 0.2, 0.3, 0.4)):
    return pd.DataFrame({"wells": [0, 6, 12, 24], "wrong_share": shares, "reached": reached})


FALLING = (0.05, 0.04, 0.03, 0.02)


@pytest.mark.parametrize(
    ("limit", "asked", "expected"),
    [
        (0.05, 12, Ruling(word="stop", because="met", wells=0)),
        (0.04, 12, Ruling(word="go on with fewer", because="enough", wells=6)),
        (0.035, 12, Ruling(word="go on", because="enough", wells=12)),
        (0.025, 12, Ruling(word="go on", because="more are needed", wells=24)),
        (0.01, 12, Ruling(word="go on", because="out of reach")),
    ],
)
def test_the_share_against_its_limit(limit, asked, expected):
    assert rule_on(forecast(FALLING), StopRule(wrong_share=limit), asked) == expected


@pytest.mark.parametrize(
    ("reached", "expected"),
    [
        ((1.0, 0.9, 0.9, 0.9), Ruling(word="stop", because="met", wells=0)),
        ((0.0, 0.2, 0.5, 0.6), Ruling(word="go on with fewer", because="enough", wells=12)),
        ((0.0, 0.2, 0.49, 0.6), Ruling(word="go on", because="enough", wells=24)),
        ((0.0, 0.2, 0.3, 0.49), Ruling(word="go on", because="out of reach")),
        ((0.0, 0.01, 0.02, 0.04), Ruling(word="stop", because="nothing gained")),
    ],
)
def test_the_chance_of_the_set_point(reached, expected):
    assert rule_on(forecast(FALLING, reached), StopRule(best_probability=0.9), 24) == expected


def test_either_limit_will_do():
    rule = StopRule(wrong_share=0.001, best_probability=0.9)
    expected = Ruling(word="go on with fewer", because="enough", wells=6)
    assert rule_on(forecast(FALLING, (0.0, 0.5, 0.6, 0.7)), rule, 24) == expected
    rule = StopRule(wrong_share=0.03, best_probability=0.999)
    expected = Ruling(word="go on with fewer", because="enough", wells=12)
    assert rule_on(forecast(FALLING), rule, 24) == expected


def test_wells_that_bring_next_to_nothing_end_it():
    # 0.05 to 0.01 are missing; 0.0039 of it is less than a tenth.
    flat = forecast((0.05, 0.049, 0.048, 0.0461))
    stop = Ruling(word="stop", because="nothing gained")
    assert rule_on(flat, StopRule(wrong_share=0.01), 24) == stop
    a_little_more = forecast((0.05, 0.049, 0.048, 0.0459))
    assert rule_on(a_little_more, StopRule(wrong_share=0.01), 24).word == "go on"
    # The other limit comes nearer.
    both = StopRule(wrong_share=0.01, best_probability=0.95)
    assert rule_on(flat, both, 24).because == "out of reach"


@pytest.mark.parametrize("rule", [None, StopRule(), StopRule(changed_because="why")])
def test_without_a_rule_there_is_no_verdict(rule):
    assert rule_on(forecast(FALLING), rule, 24) == Ruling(word="none", because="no rule")


def test_before_readings_there_is_no_verdict():
    early = forecast((0.05, np.nan, np.nan, np.nan), [np.nan] * 4)
    none = Ruling(word="none", because="no reading")
    assert rule_on(early, StopRule(wrong_share=0.02), 24) == none
