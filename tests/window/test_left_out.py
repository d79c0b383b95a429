"""Readings beside predictions, and what a new well may read, against slower ways to the same."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from muntin.record.responses import Response
from muntin.surrogate.nodes import Surface
from muntin.window.assessment import Assessment, assess
from muntin.window.coded import code, setting_sd
from muntin.window.group_errors import group_errors
from muntin.window.left_out import beforehand, left_out, only
from muntin.window.new_wells import new_wells, reading_quantiles
from muntin.window.predicted import Predicted
from muntin.window.probability import Target
from muntin.window.repeats import reading_quantile
from tests.report.plotted import ERRORS, FACTORS, RESPONSES, plates, study
from tests.studies import written

LEVELS = (0.025, 0.5, 0.975)


@pytest.fixture(scope="module")
def view(tmp_path_factory: pytest.TempPathFactory) -> Assessment:
    return assess(study(tmp_path_factory.mktemp("left-out")), surrogate="quadratic")


def responses(view: Assessment) -> dict[str, Response]:
    return {response.name: response for response in view.study.definition.responses}


def law(view: Assessment, response: Response, rows: list[int]) -> Predicted:
    frame = view.study.readings(response.name).iloc[rows]
    surface = view.surfaces[response.name]
    bare = Surface(surface.parts, surface.weights, surface.link)
    definition = view.study.definition
    return Predicted.of(bare, code(definition, frame), Target(), setting_sd(definition, frame))


@pytest.mark.parametrize("name", ["recovery", "hcp", "shift"])
def test_quantiles_of_new_wells_are_those_of_bisection(view: Assessment, name: str) -> None:
    response = responses(view)[name]
    found = reading_quantiles(law(view, response, [0, 3, 7, 11]), LEVELS)
    scale = np.log if name == "hcp" else np.asarray
    for column, row in enumerate([0, 3, 7, 11]):
        one = law(view, response, [row])
        exact = [reading_quantile(one, response, level) for level in LEVELS]
        width = scale(exact[2]) - scale(exact[0])
        off = np.abs(scale(found[:, column] * response.unit_size) - scale(exact))
        assert (off < 0.01 * width).all()


@settings(max_examples=20, deadline=None)
@given(st.lists(st.floats(0.01, 0.99), min_size=2, max_size=5))
def test_quantiles_rise_with_their_level(view: Assessment, levels: list[float]) -> None:
    response = responses(view)["hcp"]
    found = reading_quantiles(law(view, response, [0, 5]), sorted(levels))
    assert (np.diff(found, axis=0) >= 0.0).all()


def test_few_nodes_tell_the_interval_of_a_new_well(view: Assessment) -> None:
    response = responses(view)["recovery"]
    frame = view.study.readings("recovery").iloc[[0, 3, 7]]
    found = new_wells(view, response, frame, LEVELS)
    every = reading_quantiles(law(view, response, [0, 3, 7]), LEVELS)
    np.testing.assert_allclose(found, every, atol=0.01)


def test_left_out_are_the_readings_in_their_order(view: Assessment) -> None:
    for name, response in responses(view).items():
        table, readings = left_out(view, response), view.study.readings(name)
        assert table["well"].tolist() == readings["well"].tolist()
        np.testing.assert_allclose(table["observed"], readings["y"] * response.unit_size)
        assert ((table["low"] < table["predicted"]) & (table["predicted"] < table["high"])).all()


def test_left_out_interval_is_in_the_middle_on_the_scale_of_the_noise(view: Assessment) -> None:
    table = left_out(view, responses(view)["hcp"])
    np.testing.assert_allclose(table["low"] * table["high"], table["predicted"] ** 2)
    fit = view.stacks["hcp"].fits[0]
    np.testing.assert_allclose(np.log(table["predicted"]), fit.loo.mean)
    np.testing.assert_allclose(np.log(table["high"] / table["predicted"]), 1.959964 * fit.loo.sd)


def test_beforehand_is_what_a_study_of_the_first_plate_says(
    view: Assessment, tmp_path: Path
) -> None:
    response = responses(view)["recovery"]
    first = written(tmp_path, plates()[:1], factors=FACTORS, responses=RESPONSES[:1],
                    shared_errors=ERRORS[:1])  # fmt: skip
    then = assess(first, surrogate="quadratic")
    table = beforehand(view, response)
    assert table["plate"].unique().tolist() == ["plate-02"]
    assert len(table) == 12
    for row in (0, 5, 11):
        frame = view.study.readings("recovery").query("plate == 'plate-02'").iloc[[row]]
        surface = then.surfaces["recovery"]
        bare = Surface(surface.parts, surface.weights, surface.link)
        X = code(first.definition, frame)
        one = Predicted.of(bare, X, Target(), np.zeros_like(X))
        exact = [reading_quantile(one, response, level) for level in LEVELS]
        found = table.loc[row, ["low", "predicted", "high"]].to_numpy(dtype=float)
        np.testing.assert_allclose(found, exact, atol=0.001)


def test_one_plate_has_none_before_it(view: Assessment) -> None:
    from dataclasses import replace

    alone = replace(view, study=only(view.study, ["plate-01"]))
    table = beforehand(alone, responses(view)["recovery"])
    assert table.empty
    assert {"plate", "observed", "predicted", "low", "high"} <= set(table)


def test_group_errors_are_in_the_user_s_words(view: Assessment) -> None:
    plate = group_errors(view, responses(view)["recovery"])
    assert plate[["by", "acts"]].drop_duplicates().to_numpy().tolist() == [["plate", "scale"]]
    assert plate["group"].tolist() == ["plate-01", "plate-02"]
    assert plate["readings"].tolist() == [14, 12]
    # Plate 1 was made to read 4 % high, plate 2 as much low.
    assert plate["error"].iloc[0] > 1.0 > -1.0 > plate["error"].iloc[1]
    bottles = group_errors(view, responses(view)["hcp"])
    assert bottles["by"].unique().tolist() == ["plate and ph"]
    assert bottles["unit"].unique().tolist() == ["% of the reading"]
    first = view.study.readings("hcp").drop_duplicates(["plate", "ph"])
    assert bottles["group"].tolist() == [
        f"{p}, {v}" for p, v in zip(first["plate"], first["ph"], strict=True)
    ]
    assert (bottles["size_low"] > -100.0).all()
    assert group_errors(view, responses(view)["shift"]).empty
