"""The sentence that says why each well is in the plan."""

import numpy as np
import pandas as pd
import pytest

from muntin.design.candidates import RunCondition
from muntin.design.reasons import reasons
from muntin.design.selection import Pick, Selection
from muntin.design.terms import Terms, weighed
from muntin.record.definition import Definition
from tests.studies import PH, RESIN, SALT, tables

CANDIDATES = pd.DataFrame({"ph": [5.6, 6.0, 7.0], "salt": [100.0, 250.0, 1234.0]})
RUN = (
    RunCondition((6.0, 250.0), (("plate-01", "C4"), ("plate-02", "A1")), bridged=True),
    RunCondition((9.0, 250.0), (("plate-01", "D4"),), bridged=False),
)
DEFINITION = Definition.model_validate(tables())


def said(picks, p_mean, p_now=None, opening=False, definition=DEFINITION, candidates=CANDIDATES):
    offered = weighed(definition, candidates, Terms())
    selection = Selection(offered, tuple(picks), RUN, (0.1,))
    now = p_mean if p_now is None else p_now
    return reasons(definition, selection, np.array(p_mean), np.array(now), opening)


@pytest.mark.parametrize(
    ("purpose", "p", "now", "sentence"),
    [
        ("edge", 0.5, 0.468, "probability 0.47, on the edge at pH 5.6"),
        ("edge", 0.2, 0.11, "probability 0.11, just outside the edge at pH 5.6"),
        ("edge", 0.95, 0.89, "probability 0.89, just inside the edge at pH 5.6"),
        ("edge", 0.2, 0.29, "probability 0.29, just outside the edge at pH 5.6"),
        ("edge", 0.2, 0.31, "probability 0.31, on the edge at pH 5.6"),
        ("edge", 0.8, 0.69, "probability 0.69, on the edge at pH 5.6"),
        ("edge", 0.8, 0.71, "probability 0.71, just inside the edge at pH 5.6"),
        ("edge", 0.2, 0.09, "probability 0.09, outside the edge at pH 5.6"),
        ("edge", 0.2, 0.02, "probability 0.02, outside the edge at pH 5.6"),
        (
            "edge",
            0.2,
            0.01,
            "probability 0.01, far outside the edge at pH 5.6: bears on it from afar",
        ),
        ("edge", 0.97, 0.9, "probability 0.90, inside the edge at pH 5.6"),
        (
            "edge",
            0.99,
            0.93,
            "probability 0.93, reads the new plate's own error where the target is met",
        ),
        ("edge", 0.99, 0.6, "probability 0.60, on the edge at pH 5.6"),
        ("best", 0.99, 0.97, "probability 0.97, the best condition or one that may beat it"),
    ],
)
def test_a_condition_that_was_not_run(purpose, p, now, sentence):
    # The number is the judged probability, as in p_now.
    assert said([Pick(0, "test", purpose)], [p], [now]) == [sentence]


def test_a_condition_that_was_run_names_its_last_well():
    picks = [Pick(1, "test", "edge")]
    assert said(picks, [0.6]) == ["repeats plate-02 A1: probability 0.60, on the edge at pH 6.0"]
    picks = [Pick(1, "test", "best")]
    sentence = "repeats plate-02 A1: probability 0.60, the best condition or one that may beat it"
    assert said(picks, [0.6]) == [sentence]


@pytest.mark.parametrize(
    ("purpose", "p", "what"),
    [
        ("pass", 0.99, "a known pass"),
        ("pass", 0.8, "a likely pass"),
        ("fail", 0.01, "a known fail"),
        ("fail", 0.2, "a likely fail"),
    ],
)
def test_a_bridging_well_says_what_it_repeats(purpose, p, what):
    picks = [Pick(1, "bridge", purpose)] * 2
    assert said(picks, [p, p]) == [f"repeats plate-02 A1, {what}: ties plates"] * 2


def test_further_wells_of_a_condition_are_counted_over_the_whole_plan():
    picks = [
        Pick(1, "bridge", "pass"),
        Pick(0, "test", "edge"),
        Pick(0, "test", "repeat"),
        Pick(1, "test", "edge"),
        Pick(0, "test", "edge"),
    ]
    assert said(picks, [0.97, 0.5, 0.5, 0.97, 0.5]) == [
        "repeats plate-02 A1, a known pass: ties plates",
        "probability 0.50, on the edge at pH 5.6",
        "well 2 of this condition: averages the noise",
        "well 2 of this condition: averages the noise",
        "well 3 of this condition: averages the noise",
    ]


def test_an_opening_plate_spreads():
    picks = [Pick(0, "test", "edge"), Pick(2, "test", "edge"), Pick(0, "test", "edge")]
    assert said(picks, [0.5, 0.4, 0.5], opening=True) == [
        "opening plate, spread to find where the target is met",
        "opening plate, spread to find where the target is met",
        "well 2 of this condition: averages the noise",
    ]


def test_a_choice_is_named():
    definition = Definition.model_validate(tables(factors=[{**RESIN, "label": "Resin"}, PH, SALT]))
    candidates = pd.DataFrame({"resin": ["Beta"], "ph": [5.6], "salt": [100.0]})
    sentence = said([Pick(0, "test", "edge")], [0.5], definition=definition, candidates=candidates)
    assert sentence == ["probability 0.50, on the edge at Resin Beta"]
