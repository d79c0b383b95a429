"""The verdict in words, and as a figure."""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

from muntin.bench.plan import Plan
from muntin.design.stopping import Ruling, rule_on
from muntin.record.definition import StopRule
from muntin.report.forecast_figure import draw_forecast
from muntin.report.plan_text import forecast_table, no_set_point_line
from muntin.report.ruling_text import ruling_facts, ruling_line, wrong_share_texts
from muntin.report.words import likely_text
from tests.report.shown import shown
from tests.studies import written

FORECAST = pd.DataFrame(
    {
        "wells": [0, 6, 12, 24],
        "mg": [0.0, 4.0, 5.5, 8.5],
        "wrong_share": [0.05, 0.04, 0.03, 0.02],
        "set_point": [0.80, 0.81, 0.82, 0.83],
        "reached": [0.0, 0.35, 0.62, 0.4],
    }
)


def plan_of(ruling: Ruling, asked: int = 12, forecast: pd.DataFrame = FORECAST) -> Plan:
    wells = pd.DataFrame({"role": ["bridge"] + ["test"] * asked})
    return Plan(
        plate="plate-03",
        wells=wells,
        forecast=forecast,
        aim="edge",
        seed=1,
        protein_mg=None,
        notices=(),
        ruling=ruling,
    )


@pytest.mark.parametrize(
    ("stop", "said"),
    [
        (
            {"wrong_share": 0.05},
            "Stop: the stop rule is met today (5.0 % called wrongly, rule 5 %).",
        ),
        (
            {"wrong_share": 0.04},
            "Go on with fewer: 6 test wells are expected to meet the stop rule (4.0 % called "
            "wrongly, rule 4 %).",
        ),
        (
            {"best_probability": 0.815},
            "Go on: 12 test wells are expected to meet the stop rule (chance of a set point at "
            "81.5 %: 62 %).",
        ),
        (
            {"wrong_share": 0.02},
            "Go on: 24 test wells are expected to meet the stop rule (2.0 % called wrongly, rule "
            "2 %), 12 are not.",
        ),
    ],
)
def test_verdict_in_a_sentence(tmp_path, stop, said):
    study = written(tmp_path, stop=stop)
    plan = plan_of(rule_on(FORECAST, StopRule(**stop), 12))
    assert ruling_line(study, plan) == said


@pytest.mark.parametrize(
    ("stop", "said"),
    [
        (
            {"best_probability": 0.8},
            "Stop: the stop rule is met today (set point 80.0 %, rule 80 %).",
        ),
        (
            {"wrong_share": 0.01, "best_probability": 0.95},
            "Go on, but do not count on stopping soon: up to 24 test wells are not expected to "
            "meet the stop rule (after 24: 2.0 % called wrongly, rule 1 %; chance of a set point "
            "at 95 %: under 1 %).",
        ),
    ],
)
def test_verdict_with_other_chances(tmp_path, stop, said):
    reached = [1.0] * 4 if len(stop) == 1 else [0.0, 0.0, 0.001, 0.001]
    forecast = FORECAST.assign(reached=reached)
    plan = plan_of(rule_on(forecast, StopRule(**stop), 12), forecast=forecast)
    assert ruling_line(written(tmp_path, stop=stop), plan) == said


def test_next_to_nothing(tmp_path):
    flat = FORECAST.assign(wrong_share=[0.05, 0.0499, 0.0498, 0.0497])
    study = written(tmp_path, stop={"wrong_share": 0.01})
    plan = plan_of(rule_on(flat, StopRule(wrong_share=0.01), 12), forecast=flat)
    assert ruling_line(study, plan) == (
        "Stop: 24 test wells would bring next to nothing (after 24: 5.0 % called wrongly, rule "
        "1 %)."
    )


@pytest.mark.parametrize(
    ("because", "said"),
    [
        ("no rule", "study.toml has no [stop]; fix a stop rule before the next data"),
        ("no reading", "nothing has been read yet"),
        ("awaited", "the advice is provisional"),
        ("unsupported", "the data do not support the window"),
    ],
)
def test_no_verdict_says_why(tmp_path, because, said):
    plan = plan_of(Ruling(word="none", because=because))
    assert ruling_line(written(tmp_path), plan) == f"No verdict: {said}."


def test_facts(tmp_path):
    study = written(tmp_path, stop={"wrong_share": 0.04})
    facts = ruling_facts(study, plan_of(rule_on(FORECAST, StopRule(wrong_share=0.04), 12)))
    assert facts.pop("sentence").startswith("Go on with fewer: 6 test wells")
    assert facts == {
        "word": "go on with fewer",
        "because": "enough",
        "wells": 6,
        "stop_rule": {
            "wrong_share": 0.04,
            "best_probability": None,
            "notice": "",
            "recorded": [],
        },
    }


def test_figure_shows_the_forecast_and_the_stop_rule(tmp_path):
    study = written(tmp_path, stop={"wrong_share": 0.035})
    plan = plan_of(rule_on(FORECAST, StopRule(wrong_share=0.035), 12))
    left, right = draw_forecast(study, plan).axes
    curves = [(left.lines[0], "wrong_share"), (right.lines[0], "set_point")]
    for line, name in (*curves, (right.lines[2], "reached")):
        np.testing.assert_allclose(line.get_ydata(), 100.0 * FORECAST[name])
    assert [list(line.get_xdata()) for line in (left.lines[1], right.lines[1])] == [[2], [2]]
    for axes in (left, right):
        ticks = [t.get_text() for t in axes.get_xticklabels()]
        assert ticks == ["0\n(0)", "6\n(4)", "12\n(5.5)", "24\n(8.5)"]
    assert list(left.lines[2].get_ydata()) == pytest.approx([3.5, 3.5])
    assert len(right.lines) == 4
    assert right.lines[2].get_label() == "chance that it reaches 90 %"


def test_figure_without_protein_counts_wells_only(tmp_path):
    plan = plan_of(Ruling(word="none", because="no rule"))
    left, _ = draw_forecast(
        written(tmp_path), replace(plan, forecast=FORECAST.drop(columns="mg"))
    ).axes
    assert [t.get_text() for t in left.get_xticklabels()] == ["0", "6", "12", "24"]
    assert left.get_xlabel() == "Test wells"


UNSAID = FORECAST.assign(set_point=np.nan, reached=np.nan)


def test_without_a_supported_window_no_set_point_is_forecast(tmp_path):
    study = written(tmp_path, stop={"best_probability": 0.95})
    plan = plan_of(Ruling(word="none", because="unsupported"), forecast=UNSAID)
    table = [" ".join(line.split()) for line in shown(forecast_table(study, plan))]
    assert table == [WELLS, OUTLAY[0], SHARES]
    assert no_set_point_line(plan, " (why)") == [
        "No set point is forecast: the predicted operating window (plate scale) is not supported "
        "by the data (why). What may be called wrongly holds only as far as the model does."
    ]
    assert no_set_point_line(plan_of(plan.ruling)) == []
    left, right = draw_forecast(study, plan).axes
    assert [text.get_text() for text in right.texts] == [
        "no set point: the window\nis not supported by the data",
        "stop rule\n95 %",
    ]
    assert len(right.lines) == 1
    np.testing.assert_allclose(left.lines[0].get_ydata(), [5.0, 4.0, 3.0, 2.0])


WELLS = "test wells 0 6 12 24"
OUTLAY = ["protein, mg 0 4 5.5 8.5", "days 0.0 2.0 2.1 4.2"]
SHARES = "may be called wrongly 5.0 % 4.0 % 3.0 % 2.0 %"
PASSES = "set point passes 80.0 % 81.0 % 82.0 % 83.0 %"
REACHES = "chance set point reaches {} % no 35 % 62 % 40 %"


@pytest.mark.parametrize(
    ("stop", "full", "rows"),
    [
        ({}, True, ["plates 0 1 1 2", *OUTLAY, SHARES, PASSES, REACHES.format(90)]),
        ({}, False, [*OUTLAY, SHARES, PASSES]),
        ({"best_probability": 0.975}, False, [*OUTLAY, SHARES, REACHES.format(97.5)]),
    ],
)
def test_table_of_the_forecast(tmp_path, stop, full, rows):
    forecast = FORECAST.assign(plates=[0, 1, 1, 2], days=[0.0, 2.0, 2.125, 4.25])
    forecast = forecast[["wells", "plates", "mg", "days", "wrong_share", "set_point", "reached"]]
    plan = plan_of(Ruling(word="none", because="no rule"), forecast=forecast)
    table = forecast_table(written(tmp_path, stop=stop), plan, full)
    assert [" ".join(line.split()) for line in shown(table)] == [WELLS, *rows]


def test_a_share_just_above_the_stop_rule_is_told_from_it(tmp_path):
    forecast = FORECAST.assign(wrong_share=[0.0293, 0.02504, 0.0238, 0.02])
    plan = plan_of(Ruling(word="none", because="no rule"), forecast=forecast)
    ruled = written(tmp_path / "ruled", stop={"wrong_share": 0.025})
    assert wrong_share_texts(ruled, plan) == ["2.9 %", "2.504 %", "2.4 %", "2.0 %"]
    (row,) = [
        " ".join(line.split()) for line in shown(forecast_table(ruled, plan)) if "may" in line
    ]
    assert row == "may be called wrongly 2.9 % 2.504 % 2.4 % 2.0 %"
    other = written(tmp_path / "other", stop={"best_probability": 0.9})
    assert wrong_share_texts(other, plan) == ["2.9 %", "2.5 %", "2.4 %", "2.0 %"]


@pytest.mark.parametrize(
    ("chance", "said"),
    [(0.0, "0 %"), (0.001, "under 1 %"), (0.5, "50 %"), (0.999, "over 99 %"), (1.0, "100 %")],
)
def test_chances_are_not_rounded_to_certainties(chance, said):
    assert likely_text(chance) == said
