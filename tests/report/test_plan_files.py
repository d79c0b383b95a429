"""The plan as a plate table."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from muntin.bench.plan import Plan
from muntin.design.stopping import Ruling
from muntin.record import open_study
from muntin.report.plan_files import plan_path, plan_table_text
from tests.report.studies import small, write

EXPECTED = """\
well,role,ph,salt,recovery,exclude,p_now,reason
A2,test,6.0,250,,,0.457,"on the edge, at pH 6"
A10,bridge,4.5,100,,,0.001,repeat
B1,blank,,,,,,buffer
"""


@pytest.fixture
def plan() -> Plan:
    wells = pd.DataFrame(
        {
            "well": ["B1", "A10", "A2"],
            "role": ["blank", "bridge", "test"],
            "ph": [np.nan, 4.5, 6.0],
            "salt": [np.nan, 100.0, 250.0],
            "p_now": [np.nan, 0.0012, 0.4567],
            "reason": ["buffer", "repeat", "on the edge, at pH 6"],
        }
    )
    forecast = pd.DataFrame({"wells": [0, 1], "wrong_share": [0.1, 0.05]})
    return Plan(
        plate="plate-02",
        wells=wells,
        forecast=forecast,
        aim="edge",
        seed=1,
        protein_mg=None,
        notices=(),
        ruling=Ruling(word="none", because="no rule"),
    )


def test_table_is_in_plate_order_with_readings_empty(tmp_path: Path, plan: Plan) -> None:
    assert plan_table_text(open_study(small(tmp_path)).definition, plan) == EXPECTED


def test_new_plan_goes_to_its_name(tmp_path: Path) -> None:
    assert plan_path(tmp_path, "plate-02", "a") == (tmp_path / "plans/plate-02.csv", "")


def test_plan_that_was_not_edited_makes_way(tmp_path: Path) -> None:
    copies = {f"advice/plate-02/r{n}/plan.csv": text for n, text in ((1, "a"), (9, "old"))}
    write(tmp_path, {"plans/plate-02.csv": "old", "advice/plate-02/r10/plan.csv": "b", **copies})
    path, remark = plan_path(tmp_path, "plate-02", "new")
    assert path == tmp_path / "plans/plate-02.csv"
    kept = "advice/plate-02/r9/plan.csv"
    assert remark == f"It replaces a plan that nobody had edited, kept as {kept}."


def test_plan_that_reads_the_same_is_not_worth_a_word(tmp_path: Path) -> None:
    write(tmp_path, {"plans/plate-02.csv": "new", "advice/plate-02/r1/plan.csv": "new"})
    assert plan_path(tmp_path, "plate-02", "new") == (tmp_path / "plans/plate-02.csv", "")


def test_edited_plans_stay(tmp_path: Path) -> None:
    write(tmp_path, {f"plans/plate-02{n}.csv": f"mine{n}\n" for n in ("", ".r2")})
    write(tmp_path, {"advice/plate-02/r1/plan.csv": "old\n"})
    path, remark = plan_path(tmp_path, "plate-02", "new\n")
    assert path.name == "plate-02.r3.csv"
    assert remark == (
        "plans/plate-02.csv was edited or differs, and was left as it is; rename the new plan to "
        "plate-02.csv when you move it to plates/."
    )
