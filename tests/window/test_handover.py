"""The hand-over of a window: what holds between its parts, and each part against another way."""

import numpy as np
import pandas as pd
import pytest
from scipy.special import ndtr, ndtri

import muntin
from muntin.record.definition import Definition
from muntin.window.handover import hand_over
from muntin.window.margins import _first_below, crossing, line_through, margins_of
from muntin.window.predicted import Predicted
from muntin.window.probability import Target
from muntin.window.ranges import scouted
from muntin.window.repeats import reading_quantile
from muntin.window.steps import Judged, Steps
from tests.studies import (
    HCP,
    LOAD,
    PH,
    RECOVERY,
    RESIN,
    SALT,
    SHIFT,
    TIME,
    changed,
    read,
    read_hcp,
    read_shift,
    spread,
    tables,
    written,
)

FINE = [{**PH, "step": 0.25}, {**SALT, "step": 25}]
KEPT = [{**FINE[0], "kept_within": 0.2}, {**FINE[1], "kept_within": "6 %"}]


def fitted(folder, factors, surrogate="quadratic", wells=14):
    plates = [read(spread(factors, wells, seed), seed) for seed in (1, 2)]
    return muntin.assess(written(folder, plates, factors=factors), surrogate)


@pytest.fixture(scope="module")
def view(tmp_path_factory):
    return fitted(tmp_path_factory.mktemp("handover"), KEPT)


@pytest.fixture(scope="module")
def handed(view):
    return view.handover()


def rows_in(view, ranges):
    grid = view.window().grid
    keep = np.ones(len(grid), dtype=bool)
    for name, (low, high) in ranges.items():
        keep &= grid[name].between(low, high).to_numpy()
    return grid[keep]


def test_box_is_that_of_the_window_and_all_of_it_is_inside(view, handed):
    assert handed.box.ranges == view.window().ranges
    rows = rows_in(view, handed.box.ranges)
    assert handed.box.every
    assert handed.box.conditions == len(rows)
    assert handed.box.least == rows["probability"].min() >= 0.9
    worst = rows.loc[rows["probability"].idxmin()]
    assert handed.box.least_at == {"ph": worst["ph"], "salt": worst["salt"]}
    at = view.at(pd.DataFrame([handed.box.least_at]))
    assert at["p_kept"].iloc[0] == pytest.approx(handed.box.least, abs=1e-9)


def test_the_assured_part_lies_within_the_box_and_holds_the_set_point(handed):
    assert handed.asked_assurance == 0.9
    assert handed.box.assurance < 0.9 <= handed.assured.assurance
    assert handed.assured.mean_everywhere >= handed.box.mean_everywhere
    assert handed.assured.share < handed.box.share
    for name, (low, high) in handed.assured.ranges.items():
        assert handed.box.ranges[name][0] <= low <= handed.setpoint[name] <= high
        assert high <= handed.box.ranges[name][1]


@pytest.mark.parametrize("by", ["mean", "well"])
def test_more_is_asked_less_is_left(view, by):
    shares, assured = [], []
    for required in (0.6, 0.9, 0.97):
        study = {"judged_by": by, "required_probability": required}
        found = hand_over(changed(view, factors=KEPT, study=study), assurance=0.9, draws=300)
        shares.append(found.box.share)
        assured.append(0.0 if found.assured is None else found.assured.share)
        assert assured[-1] <= shares[-1]
    assert shares == sorted(shares, reverse=True)
    assert shares[0] > shares[-1]
    if by == "well":
        assert assured == sorted(assured, reverse=True)


def test_by_the_mean_what_holds_at_once_is_what_the_mean_does(view):
    judged = changed(view, factors=KEPT, study={"judged_by": "mean"})
    found = hand_over(judged, draws=500)
    assert found.box.assurance == found.box.mean_everywhere
    # At once is less likely than at the worst condition, but for the draws.
    assert found.box.assurance <= found.box.least + 3.0 * np.sqrt(0.25 / 500)
    assert found.optimism.low is None


def test_margins_lie_where_the_probability_is_the_required_one(view, handed):
    found = {(m.factor, m.end): m for m in handed.margins}
    assert list(found) == [(f, e) for f in ("ph", "salt") for e in ("low", "high")]
    crossed = [m for m in handed.margins if m.edge is not None]
    assert {(m.factor, m.end) for m in crossed} >= {("ph", "low"), ("salt", "low")}
    for margin in crossed:
        there = pd.DataFrame([{**handed.setpoint, margin.factor: margin.edge}])
        p = view.at(there)["p_kept"].iloc[0]
        # Straight in the probit between two bench steps.
        assert ndtri(p) == pytest.approx(ndtri(0.9), abs=0.1)
        away = abs(margin.edge - handed.setpoint[margin.factor])
        assert margin.distance == pytest.approx(away)
    assert found["ph", "high"].edge is None
    assert found["ph", "high"].end_of_range == 7.5


def test_corners_are_those_of_the_tolerance(view, handed):
    ph, salt = handed.setpoint["ph"], handed.setpoint["salt"]
    expected = {(ph + a * 0.2, round(salt * (1 + b * 0.06), 9)) for a in (-1, 1) for b in (-1, 1)}
    found = {(c.condition["ph"], round(c.condition["salt"], 9)) for c in handed.corners}
    assert found == {(round(a, 9), b) for a, b in expected}
    assert [c.p_well for c in handed.corners] == sorted(c.p_well for c in handed.corners)
    table = view.at(pd.DataFrame([c.condition for c in handed.corners]))
    np.testing.assert_allclose([c.p_well for c in handed.corners], table["p_well"], atol=1e-9)
    np.testing.assert_allclose([c.p_mean for c in handed.corners], table["p_mean"], atol=1e-9)


def test_edge_is_where_the_probability_crosses_with_intervals_around(view, handed):
    edge = handed.edge
    assert list(edge.columns) == ["ph", "salt", "factor", "end", "low", "high", "found"]
    assert set(edge["factor"]) == {"salt"}
    assert len(edge) > 3
    p = view.at(edge[["ph", "salt"]])["p_kept"]
    np.testing.assert_allclose(ndtri(p), ndtri(0.9), atol=0.1)
    known = edge.dropna(subset=["low", "high"])
    assert len(known) > 2
    assert (known["low"] < known["salt"]).all()
    assert (known["salt"] < known["high"]).all()
    assert edge["found"].between(0.0, 1.0).all()


def test_the_same_seed_gives_the_same_numbers(view, handed):
    again = hand_over(view)
    pd.testing.assert_frame_equal(again.edge, handed.edge)
    assert (again.box, again.assured) == (handed.box, handed.assured)
    other = hand_over(view, seed=8)
    assert other.edge["low"].ne(handed.edge["low"]).any()
    assert other.box.ranges == handed.box.ranges


def test_before_any_reading_there_is_nothing_to_hand_over(tmp_path):
    assert muntin.assess(written(tmp_path, []), "quadratic").handover() is None


def test_without_a_window_a_repeat_of_the_best_is_all(view):
    high = changed(view, factors=KEPT, responses=[{**RECOVERY, "at_least": 0.999}])
    found = hand_over(high, draws=100)
    assert found.box is found.assured is found.larger is None
    assert found.margins == ()
    assert found.edge.empty
    assert found.optimism.best_run[0].drop > 0.0


# Repeats.


def test_a_repeat_of_the_best_well_is_expected_at_its_posterior_mean(view, handed):
    (best,) = handed.optimism.best_run
    readings = view.study.readings("recovery")
    top = readings.loc[readings["y"].idxmax()]
    assert (best.plate, best.well, best.read) == (top["plate"], top["well"], top["y"])
    at = view.at(pd.DataFrame([best.condition]))
    assert best.expected == pytest.approx(at["recovery_mean"].iloc[0], abs=1e-9)
    assert best.drop == pytest.approx(best.read - best.expected)
    assert best.low < best.expected < best.high


@pytest.mark.parametrize(
    "response", [RECOVERY, {**HCP, "at_most": 60}, {**SHIFT, "at_most": None}, {"unit": "%"}]
)
def test_quantiles_of_a_reading_are_those_of_its_law(tmp_path, response):
    asked = {k: v for k, v in {**RECOVERY, **response}.items() if v is not None}
    if "kind" in response:
        asked = {k: v for k, v in response.items() if v is not None}
    unit = 100.0 if asked.get("unit") == "%" else 1.0
    if unit > 1.0:
        asked["at_least"] = 80
    factors = [PH, SALT]
    plates = [read_shift(read_hcp(read(spread(factors, 10, s), s), s), s) for s in (1, 2)]
    plates = [p[["ph", "salt", asked["name"]]] for p in plates]
    for plate in plates:
        plate[asked["name"]] *= unit
    made = muntin.assess(written(tmp_path, plates, responses=[asked]), "quadratic")
    there = pd.DataFrame({"ph": [6.5], "salt": [300.0]})
    predicted = made.predicted(there)[asked["name"]]
    declared = made.study.definition.responses[0]
    for level in (0.025, 0.5, 0.975):
        y = reading_quantile(predicted, declared, level)
        assert predicted.met(Target(high=y))[0] == pytest.approx(level, abs=2e-3)
    assert isinstance(predicted, Predicted)
    (best,) = hand_over(made, draws=60).optimism.best_run
    sign = 1.0 if "at_least" in asked else -1.0
    values = pd.concat(plates)[asked["name"]]
    assert best.read == pytest.approx(values.max() if sign > 0 else values.min())
    assert best.drop == pytest.approx(sign * (best.read - best.expected))


# Lines.


def test_a_crossing_is_found_between_steps():
    factor = {"name": "a", "low": 0.0, "high": 10.0, "step": 1.0}
    made = Definition.model_validate(tables(factors=[factor]))
    judged = Judged(Steps.at(made, {}), lambda f: ndtr(4.0 - 0.7 * np.abs(f["a"] - 4.2)))
    at = np.array([4])
    edge = (4.0 - ndtri(0.9)) / 0.7
    low, high = margins_of(judged, 0.9, at)
    assert high.edge == pytest.approx(4.2 + edge, abs=1e-9)
    assert high.distance == pytest.approx(0.2 + edge, abs=1e-9)
    assert low.edge == pytest.approx(4.2 - edge, abs=1e-9)
    assert margins_of(judged, 0.9999999, at) == ()


def test_a_limit_ends_a_margin_where_it_stands():
    factor = {"name": "a", "low": 0.0, "high": 10.0, "step": 1.0}
    made = Definition.model_validate(tables(factors=[factor], limits=[{"allow": "a <= 6.5"}]))
    judged = Judged(Steps.at(made, {}), lambda f: np.full(len(f), 0.95))
    low, high = margins_of(judged, 0.9, np.array([4]))
    assert (high.edge, high.distance, high.limited) == (6.0, 2.0, True)
    assert (low.edge, low.limited, low.end_of_range) == (None, False, 0.0)
    line = line_through(judged.steps, np.array([4]), 0)
    assert crossing(judged, 0.9, line, 4, "low") is None


def test_a_drawn_edge_is_the_first_crossing_from_the_middle():
    levels = np.array([5.0, 4.0, 3.0, 2.0])
    heights = np.array(
        [
            [1.0, 0.5, -0.5, 3.0],  # crosses between 4 and 3, and comes back
            [1.0, 0.5, 0.5, 0.2],  # never
            [-0.1, 0.5, 0.5, -3.0],  # outside in the middle already
            [1.0, 0.0, 0.1, -0.3],
        ]
    )
    place = _first_below(heights, levels, -np.inf)
    np.testing.assert_allclose(place, [3.5, -np.inf, np.inf, 2.75])


# More factors, choices.


def test_four_factors_hold_between_the_nodes(tmp_path):
    factors = [PH, {**SALT, "step": 25}, LOAD, {**TIME, "step": 5}]
    made = fitted(tmp_path, factors, "gp", 24)
    found = hand_over(made, draws=200)
    assert made.window().ranges is None
    steps = Steps.at(made.study.definition, {})
    ends = pd.DataFrame([{n: r[i] for n, r in found.box.ranges.items()} for i in (0, 1)])
    low, high = steps.index(ends)
    rng = np.random.default_rng(3)
    some = steps.frame(rng.integers(low, high + 1, (400, 4)))
    p = made.judged(some, "well")
    assert (p >= 0.9).all()
    assert 0.9 <= found.box.least <= p.min() + 0.02
    assert found.assured.share < found.box.share
    assert set(found.edge["factor"]) <= {"ph", "salt", "load", "minutes"}


def test_a_choice_is_held_at_the_set_point(tmp_path):
    made = fitted(tmp_path, [PH, RESIN], wells=14)
    found = hand_over(made, draws=200)
    resin = found.setpoint["resin"]
    assert found.box.ranges["resin"] == (resin, resin)
    assert set(found.edge["resin"]) == {resin}
    assert {m.factor for m in found.margins} == {"ph"}


def test_scouts_are_near_what_is_judged(view):
    grid = view.window().grid[["ph", "salt"]].iloc[::7]
    for by in ("mean", "well", "kept"):
        judged = changed(view, factors=KEPT, study={"judged_by": by})
        near = scouted(judged, grid)
        assert np.abs(near - judged.judged(grid, by)).max() < 0.12
        assert np.abs(near - judged.judged(grid, by)).mean() < 0.02


def test_awaited_responses_are_left_out(tmp_path):
    plates = [read(spread([PH, SALT], 14, seed), seed).assign(hcp=np.nan) for seed in (1, 2)]
    study = written(tmp_path, plates, responses=[RECOVERY, {**HCP, "at_most": 60}])
    found = hand_over(muntin.assess(study, "quadratic"), draws=100)
    assert [r.response for r in found.optimism.best_run] == ["recovery"]
    assert found.optimism.readings["response"].tolist() == ["recovery"]
    assert found.box.least >= 0.9
