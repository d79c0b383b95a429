"""The hand-over in sentences, by what the study is judged by, and as facts."""

import json
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

from muntin.record.definition import Definition
from muntin.report.facts import plain
from muntin.report.handover_text import (
    handover_facts,
    handover_lines,
    margins_line,
    proposal_text,
    ranges_lines,
    setpoint_sentence,
    spread_text,
)
from muntin.window.handover import Box, Corner, HandOver, Margin, Optimism, Repeat
from tests.studies import PH, SALT, tables

KEPT = [
    {**PH, "step": 0.1, "kept_within": 0.1},
    {**SALT, "label": "Salt", "step": 10, "kept_within": 12},
]
DEFINITION = Definition.model_validate(tables(factors=KEPT))


def box(ph=(5.2, 6.0), salt=(200.0, 300.0), assurance=0.61):
    return Box(
        ranges={"ph": ph, "salt": salt},
        least=0.91,
        least_at={"ph": ph[0], "salt": salt[0]},
        assurance=assurance,
        mean_everywhere=0.97,
        share=0.1,
        conditions=99,
        every=True,
    )


def handed(**given):
    repeat = Repeat(
        response="recovery",
        plate="plate-01",
        well="D7",
        condition={"ph": 6.0, "salt": 280.0},
        read=0.969,
        expected=0.914,
        low=0.833,
        high=0.993,
        drop=0.055,
    )
    optimism = Optimism(
        probability=0.93,
        low=0.85,
        high=0.99,
        best_run=(repeat,),
        wells=4,
        expected_passes=3.72,
        readings=pd.DataFrame([{"response": "recovery", "mean": 0.9, "low": 0.8, "high": 1.0}]),
    )
    margins = (
        Margin(factor="ph", end="low", edge=5.125, distance=0.475, end_of_range=4.5),
        Margin(factor="ph", end="high", edge=None, distance=None, end_of_range=7.5),
        Margin(factor="salt", end="low", edge=180.0, distance=70.0, end_of_range=50.0),
        Margin(
            factor="salt", end="high", edge=300.0, distance=50.0, end_of_range=450, limited=True
        ),
    )
    made = {
        "setpoint": {"ph": 5.6, "salt": 250.0},
        "probability": 0.93,
        "required": 0.9,
        "judged_by": "kept",
        "asked_assurance": 0.9,
        "box": box(),
        "larger": None,
        "assured": box((5.3, 5.9), (210.0, 290.0), 0.91),
        "margins": margins,
        "corners": (Corner(condition={"ph": 5.5, "salt": 238.0}, p_well=0.88, p_mean=0.95),),
        "edge": pd.DataFrame(
            {"ph": [5.6], "salt": [180.0], "factor": ["salt"], "end": ["low"], "low": [np.nan]}
        ),
        "optimism": optimism,
        "draws": 1000,
        "seed": 1,
    }
    return HandOver(**{**made, **given})


def test_whole_text():
    assert handover_lines(DEFINITION, handed()) == [
        "Ranges that hold together: pH 5.2 to 6.0 and Salt 200 to 300 mM.",
        "That 90 % or more of new wells pass at all of these conditions at once is 61 % probable; "
        "0.90 is reached by pH 5.3 to 5.9 and Salt 210 to 290 mM.",
        "To the edge, one factor moved at a time: pH 0.47 down, none up (the range ends at 7.5); "
        "Salt 70 mM down, 50 mM up (a limit of the study).",
        "Worst corner of the tolerance: pH 5.5 and Salt 238 mM: 88.0 % of new wells pass.",
        "Best well so far: Recovery 0.969 in plate-01 D7, of which a repeat is expected to read "
        "0.914 (0.833 to 0.993). Repeat the set point before believing it: 4 wells of a new plate, "
        "3 or 4 of them expected to pass.",
    ]


@pytest.mark.parametrize(
    ("by", "sentence"),
    [
        ("kept", "pH 5.6 ± 0.1 and Salt 250 ± 12 mM: 93.0 % of new wells pass"),
        ("well", "pH 5.6 and Salt 250 mM: 93.0 % of new wells pass"),
        ("mean", "pH 5.6 and Salt 250 mM: 93.0 % probable that the process mean passes"),
    ],
)
def test_sentence_says_what_is_judged(by, sentence):
    made = Definition.model_validate(tables(factors=KEPT, study={"judged_by": by}))
    assert setpoint_sentence(made, handed(judged_by=by)) == sentence


def test_by_the_mean_nothing_is_said_of_wells():
    made = Definition.model_validate(tables(factors=KEPT, study={"judged_by": "mean"}))
    lines = handover_lines(made, handed(judged_by="mean"))
    assert lines[1].startswith("That the process mean passes at all of these conditions at once is")
    assert lines[3].endswith("95.0 % probable that the process mean passes.")
    assert "of new wells" not in " ".join(lines[:4])


def test_ranges_that_are_sure_enough_are_said_once():
    lines = ranges_lines(DEFINITION, handed(box=box(assurance=0.95)))
    assert lines[1].endswith("at once is 95 % probable.")
    none = ranges_lines(DEFINITION, handed(assured=None))
    assert none[1].endswith("61 % probable; no ranges around the set point reach 0.90.")
    larger = ranges_lines(DEFINITION, handed(larger=box((6.5, 7.5), (50.0, 450.0))))
    assert larger[2] == "Larger, but without the set point: pH 6.5 to 7.5 and Salt 50 to 450 mM."


def test_without_a_window_only_the_repeat_is_said():
    (line,) = handover_lines(DEFINITION, handed(box=None, assured=None, margins=()))
    assert "Repeat the best so far before believing it" in line


def test_spread_of_the_share_says_what_it_rests_on():
    assert spread_text(handed()) == (
        "The share of new wells that pass at the set point lies between 85.0 % and 99.0 % (95 %) "
        "if the model is right; whether it is right where things look best, only a repeat can tell."
    )
    by_mean = replace(handed().optimism, low=None, high=None)
    assert spread_text(handed(optimism=by_mean)) == ""
    sure = replace(handed().optimism, low=0.9997, high=1.0)
    told = spread_text(handed(optimism=sure))
    assert "pass at the set point lies above 99.9 % (95 %) if the model is right" in told
    open_above = replace(handed().optimism, low=0.9971, high=0.9999)
    told = spread_text(handed(optimism=open_above))
    assert "pass at the set point lies above 99.7 % (95 %) if the model is right" in told


def test_a_factor_without_margins_is_left_out():
    made = handed()
    line = margins_line(DEFINITION, handed(margins=made.margins[:2]))
    assert "Salt" not in line


@pytest.mark.parametrize(
    ("passes", "told"),
    [
        (3.98, "all of them"),
        (3.94, "3 or 4 of them"),
        (3.04, "3 of them"),
        (2.97, "3 of them"),
        (1.5, "1 or 2 of them"),
        (0.3, "0 or 1 of them"),
        (0.01, "none of them"),
    ],
)
def test_wells_expected_to_pass_are_whole_ones(passes, told):
    made = handed(optimism=replace(handed().optimism, expected_passes=passes))
    said = proposal_text(made)
    assert said.endswith(f"4 wells of a new plate, {told} expected to pass.")


def test_facts_are_plain_values():
    facts = plain(handover_facts(DEFINITION, handed()))
    again = json.loads(json.dumps(facts, allow_nan=False))
    assert again == facts
    assert facts["sentence"].startswith("pH 5.6 ± 0.1")
    assert facts["box"]["ranges"] == {"ph": [5.2, 6.0], "salt": [200.0, 300.0]}
    assert facts["larger"] is None
    assert facts["edge"] == [
        {"ph": 5.6, "salt": 180.0, "factor": "salt", "end": "low", "low": None}
    ]
    assert facts["optimism"]["best_run"][0]["drop"] == 0.055
    assert facts["optimism"]["readings"][0]["mean"] == 0.9
    assert [m["limited"] for m in facts["margins"]] == [False, False, False, True]
