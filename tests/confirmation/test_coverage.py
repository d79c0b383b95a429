"""Columns that read as a new plate does agree as often as the intervals say."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy.special import expit

import muntin
from muntin.confirmation.comparison import Comparison, compare
from muntin.confirmation.planning import Basis, plan_columns
from muntin.record.column_plan import ColumnPlan
from muntin.record.column_runs import ColumnRun
from muntin.record.faults import StudyFaults
from muntin.record.readings import Reading
from tests.studies import PH, SALT, logit_of, read, spread, written

STUDIES, PLATE, NOISE = 60, 0.03, 0.02


def came(study, plan: ColumnPlan, error: float, rng: np.random.Generator) -> Comparison:
    """Runs that read the truth of the studies with a shared relative error, and noise."""
    truth = expit(logit_of(pd.DataFrame([run.condition for run in plan.runs])))
    values = (1.0 + error) * truth + NOISE * rng.standard_normal(len(truth))
    made = [
        ColumnRun(run.run, "", {"recovery": Reading("read", float(y), np.nan, "", "y")}, "f", "r")
        for run, y in zip(plan.runs, values, strict=True)
    ]
    return compare(study.definition.responses, [plan], made)


@pytest.mark.slow
def test_runs_and_shifts_over_many_studies(tmp_path: Path) -> None:
    rng = np.random.default_rng(3)
    agree, beside, covered, far = [], [], [], []
    for number in range(STUDIES):
        plates = [
            read(spread([PH, SALT], 16, 3 * number + i), 3 * number + i, error)
            for i, error in enumerate(rng.normal(0.0, PLATE, 3))
        ]
        study = written(tmp_path / str(number), plates)
        view = muntin.assess(study, surrogate="gp", seed=number + 1)
        try:
            plan = plan_columns(view, [], [], Basis(inputs={}, versions={}))
        except StudyFaults:
            continue  # the checks on the model refuse a window now and then
        as_plate = came(study, plan, rng.normal(0.0, PLATE), rng)
        as_predicted = came(study, plan, 0.0, rng)
        agree += [one.verdict == "agrees" for one in as_plate.compared]
        far += [shift.verdict == "more than plates differ" for shift in as_plate.shifts]
        covered += [shift.low <= 0.0 <= shift.high for shift in as_predicted.shifts]
        beside += [not one.beside_off for one in as_predicted.compared]
    assert len(covered) > STUDIES - 6
    # Three standard errors: runs of one study share an error, so they count as one and a half.
    runs, studies = 1.5 * len(covered), len(covered)
    assert np.mean(agree) == pytest.approx(0.95, abs=3 * np.sqrt(0.0475 / runs))
    assert np.mean(beside) == pytest.approx(0.95, abs=3 * np.sqrt(0.0475 / runs))
    assert np.mean(covered) == pytest.approx(0.95, abs=3 * np.sqrt(0.0475 / studies))
    assert np.mean(far) < 0.05 + 3 * np.sqrt(0.0475 / studies)
