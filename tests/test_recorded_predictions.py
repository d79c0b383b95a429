"""What advice predicted for a plate, found again once the plate has been read."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from muntin.advise import Advice, advise
from muntin.record import Study, open_study
from muntin.record.predictions import recorded_predictions
from muntin.report.predicted_figure import predicted_figure
from muntin.window.assessment import Assessment, assess
from muntin.window.left_out import beforehand
from tests.report.studies import recovery, small


@pytest.fixture(scope="module")
def advised(tmp_path_factory: pytest.TempPathFactory) -> Advice:
    folder = small(tmp_path_factory.mktemp("recorded"))
    return advise(folder, wells=5, surrogate="quadratic")


def read(folder: Path, advised: Advice, moved: float = 0.0) -> Assessment:
    """The plate of the advice as it was run, its first test well moved in salt."""
    plan = pd.read_csv(advised.place.plan)
    test = plan.index[plan["role"] == "test"][0]
    plan.loc[test, "salt"] += moved
    run = plan["role"].isin(["test", "bridge"])
    plan.loc[run, "recovery"] = [
        recovery(ph, salt, 0.1) for ph, salt in zip(plan["ph"][run], plan["salt"][run], strict=True)
    ]
    plan.to_csv(folder / "plates" / "plate-02.csv", index=False)
    study: Study = open_study(folder)
    return assess(study, surrogate="quadratic")


def test_advice_records_every_well_to_run(advised: Advice) -> None:
    told = recorded_predictions(advised.view.study.folder, ("ph", "salt"))
    run = advised.plan.wells[advised.plan.wells["role"].isin(["test", "bridge"])]
    assert told["well"].tolist() == run["well"].tolist()
    assert told["plate"].unique().tolist() == ["plate-02"]
    assert ((told["low"] < told["predicted"]) & (told["predicted"] < told["high"])).all()


def test_recorded_predictions_are_told_as_they_were(advised: Advice) -> None:
    folder = advised.view.study.folder
    view = read(folder, advised)
    response = view.study.definition.responses[0]
    table = beforehand(view, response)
    told = recorded_predictions(folder, ("ph", "salt")).set_index("well")
    assert table["recorded"].all()
    for name in ("low", "predicted", "high"):
        assert table[name].to_numpy() == pytest.approx(told.loc[table["well"], name].to_numpy())
    _, said = predicted_figure(view, response)
    assert said.endswith("(plate-02 as recorded beforehand.)")


def test_a_well_that_was_run_elsewhere_is_predicted_anew(advised: Advice) -> None:
    folder = advised.view.study.folder
    view = read(folder, advised, moved=5.0)
    response = view.study.definition.responses[0]
    table = beforehand(view, response)
    assert not table["recorded"].any()
    told = recorded_predictions(folder, ("ph", "salt")).set_index("well")
    same = told.loc[table["well"], "predicted"].to_numpy()
    assert np.abs(table["predicted"].to_numpy() - same)[1:].max() < 0.02
    _, said = predicted_figure(view, response)
    assert said.endswith("(plate-02 computed now, as if not yet run.)")


def test_the_latest_revision_is_the_last(tmp_path: Path) -> None:
    for revision, low in (("r2", 0.2), ("r10", 0.1), ("r1", 0.3)):
        row = {"well": "A1", "response": "y", "low": low, "predicted": 0.5, "high": 0.9}
        told = {"plan": {"plate": "plate-02", "wells": [{"well": "A1", "x": 1.0}]}}
        path = tmp_path / "advice" / "plate-02" / revision / "advice.json"
        path.parent.mkdir(parents=True)
        path.write_text(json.dumps({**told, "predicted": [row]}))
    assert recorded_predictions(tmp_path, ("x",))["low"].tolist() == [0.3, 0.2, 0.1]


@pytest.mark.parametrize("text", ["{", "[]", '{"plan": {"plate": "plate-02", "wells": []}}'])
def test_advice_that_cannot_be_read_is_passed_over(tmp_path: Path, text: str) -> None:
    path = tmp_path / "advice" / "plate-02" / "r1" / "advice.json"
    path.parent.mkdir(parents=True)
    path.write_text(text)
    found = recorded_predictions(tmp_path, ("x",))
    assert found.empty
    assert list(found) == ["plate", "well", "response", "x", "low", "predicted", "high"]
