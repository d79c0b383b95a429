"""The virtual lab behind a study: which factors it knows, and what it reads."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
import pytest

from muntin.record.definition import Definition
from muntin.record.faults import StudyFaults
from muntin.rehearsal.lab_truth import KINDS, LabRecipe, LabTruth, lab_factors
from tests.studies import HCP, PH, RECOVERY, RESIN, SALT, TIME, tables


def definition(**given: Any) -> Definition:
    return Definition.model_validate(tables(**given))


def test_ph_and_salt_are_told_by_name_and_unit() -> None:
    found = lab_factors(definition())
    assert found is not None
    assert (found.ph.name, found.salt.name, found.millimolar) == ("ph", "salt", 1.0)


def test_a_salt_in_mol_is_taken_in_mmol() -> None:
    salt = {"name": "nacl", "unit": "M", "low": 0.05, "high": 0.5, "step": 0.05}
    ph = {"name": "elution", "label": "Elution pH", "low": 4.5, "high": 7.5, "step": 0.5}
    found = lab_factors(definition(factors=[salt, ph]))
    assert found is not None
    frame = pd.DataFrame({"nacl": [0.1, 0.25], "elution": [5.0, 6.0]})
    assert found.conditions(frame).tolist() == [[5.0, 100.0], [6.0, 250.0]]


@pytest.mark.parametrize(
    "given",
    [
        {"factors": [PH, TIME]},
        {"factors": [PH, SALT, TIME]},
        {"factors": [SALT, RESIN]},
        {"factors": [{**PH, "name": "phase", "label": "Phase"}, SALT]},
        {"factors": [{**PH, "unit": "mM"}, SALT]},
        {"factors": [PH, {**SALT, "unit": "g/L"}]},
        {"factors": [PH, {**SALT, "high": 5000}]},
        {"responses": [HCP]},
        {"responses": [{**RECOVERY, "at_most": 0.9}]},
        {"responses": [{**RECOVERY, "at_least": 0.97}]},
        {"responses": [RECOVERY, HCP]},
    ],
)
def test_other_studies_have_no_lab(given: dict[str, Any]) -> None:
    assert lab_factors(definition(**given)) is None


def test_errors_of_setting_are_the_studys_own() -> None:
    found = lab_factors(definition(factors=[{**PH, "set_sd": 0.2}, {**SALT, "set_sd": "7 %"}]))
    assert found is not None
    assert (found.sizes.ph_sd, found.sizes.salt_cv) == (0.2, pytest.approx(0.07))
    usual = lab_factors(definition(factors=[PH, {**SALT, "set_sd": 5.0}]))
    assert usual is not None
    assert (usual.sizes.ph_sd, usual.sizes.salt_cv) == (0.03, 0.02)


@pytest.fixture(scope="module")
def truth() -> LabTruth:
    own = definition(responses=[{**RECOVERY, "unit": "%", "at_least": 80}])
    factors = lab_factors(own)
    assert factors is not None
    return LabRecipe(0, 1, own, factors).draw()


def test_passes_are_the_labs_true_recoveries(truth: LabTruth) -> None:
    frame = pd.DataFrame({"salt": [50.0, 250.0, 450.0], "ph": [4.5, 6.0, 7.5]})
    recovery = truth.lab.recovery(frame[["ph", "salt"]].to_numpy())
    assert truth.passes(frame).tolist() == (recovery >= 0.8).tolist()
    assert truth.passes(frame).any()
    assert not truth.passes(frame).all()


def test_readings_scatter_about_the_true_recovery_in_the_users_unit(truth: LabTruth) -> None:
    frame = pd.DataFrame({"salt": 450.0, "ph": [7.5] * 40})
    plates = [truth.read(frame, "p", np.random.default_rng(seed))["recovery"] for seed in range(40)]
    true = 100.0 * truth.lab.recovery([[7.5, 450.0]])[0]
    assert np.mean(plates) == pytest.approx(true, abs=2.5)
    # The load error of a plate, 3 %, is larger than what is left of it in the mean of 40 wells.
    assert np.std(np.mean(plates, axis=1)) == pytest.approx(0.03 * true, rel=0.5)


def test_kinds_take_turns_and_recipes_are_their_own() -> None:
    own = definition()
    factors = lab_factors(own)
    assert factors is not None
    recipes = [LabRecipe(i, 1, own, factors) for i in range(4)]
    assert [r.kind for r in recipes] == [*KINDS, KINDS[0]]
    at = np.array([[6.0, 200.0], [5.0, 350.0]])
    first, again, fourth = (
        LabRecipe(i, 1, own, factors).draw().lab.recovery(at) for i in (0, 0, 3)
    )
    np.testing.assert_array_equal(first, again)
    assert np.abs(first - fourth).max() > 1e-6


def test_a_range_without_an_edge_is_said() -> None:
    own = definition(
        factors=[{**PH, "low": 11.0, "high": 12.0}, {**SALT, "low": 1900, "high": 2000}]
    )
    factors = lab_factors(own)
    assert factors is not None
    with pytest.raises(StudyFaults, match="no drawn elution lab has the edge of its window"):
        LabRecipe(0, 1, own, factors).draw()
