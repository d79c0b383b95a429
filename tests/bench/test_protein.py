"""Protein: what was used, what a plan needs, what is left."""

import numpy as np
import pandas as pd
import pytest

from muntin.bench.protein import protein_left_mg, protein_needed_mg, wells_mg
from muntin.record.definition import Definition
from tests.studies import LOAD, PH, SALT, read, spread, tables, written

PROTEIN = {"available_mg": 40.0, "reserved_mg": 10.0, "per_well_mg": 0.25}
ROLES = ["test", "bridge", "reference", "load", "no_resin", "blank", "water"]


@pytest.mark.parametrize(("role", "given"), [*zip(ROLES, [1, 1, 1, 1, 1, 0, 0], strict=True)])
def test_which_wells_are_given_protein(role, given):
    definition = Definition.model_validate(tables(protein=PROTEIN))
    rows = pd.DataFrame({"role": [role, role]})
    assert wells_mg(definition, rows).tolist() == [0.25 * given] * 2


def plate(seed=1, controls=("blank", "load", "no_resin", "water")):
    tests = read(spread([PH, SALT], 6, seed), seed).assign(role="test", exclude="")
    tests.loc[2, "exclude"] = "the filter leaked"
    rows = pd.DataFrame({"role": controls})
    return pd.concat([tests, rows], ignore_index=True)


def test_all_wells_that_were_run_count(tmp_path):
    # 6 tests, one of them excluded, a load and a well without resin, on two plates, one void.
    folder = tmp_path / "study"
    (folder / "plates").mkdir(parents=True)
    (folder / "plates" / "plate-02.toml").write_text('void = "the feed was warm"\n')
    study = written(folder, [plate(1), plate(2)], protein=PROTEIN)
    assert protein_left_mg(study) == pytest.approx(40.0 - 10.0 - 16 * 0.25)
    assert protein_needed_mg(study, ROLES) == pytest.approx(5 * 0.25)
    assert protein_needed_mg(study, []) == 0.0


def test_more_may_be_used_than_there_was(tmp_path):
    scarce = {"available_mg": 3.0, "per_well_mg": 0.25}
    study = written(tmp_path / "study", [plate(1), plate(2)], protein=scarce)
    assert protein_left_mg(study) == pytest.approx(-1.0)


def test_without_protein_nothing_is_said(tmp_path):
    study = written(tmp_path / "study", [plate()])
    assert protein_left_mg(study) is None
    assert protein_needed_mg(study, ["test"]) is None


BY_LOAD = {"available_mg": 40.0, "load_factor": "load", "resin_ul": 20.0}


def by_load(**more):
    factors = [PH, {**LOAD, "plan_high": 30}]
    return Definition.model_validate(tables(factors=factors, protein={**BY_LOAD, **more}))


def test_a_well_takes_its_load_times_its_resin():
    # 20 µL of resin at 5, 12.5 and 40 mg/mL resin; controls take the highest load of a new plan.
    rows = pd.DataFrame(
        {
            "role": ["test", "bridge", "reference", "load", "no_resin", "blank"],
            "load": [5.0, 12.5, 40.0, None, None, None],
        }
    )
    mg = wells_mg(by_load(), rows)
    np.testing.assert_allclose(mg, [0.1, 0.25, 0.8, 0.6, 0.6, 0.0], rtol=1e-12)
    own = wells_mg(by_load(per_well_mg=0.3), rows)
    np.testing.assert_allclose(own, [0.1, 0.25, 0.8, 0.3, 0.3, 0.0], rtol=1e-12)


def test_wells_that_were_run_count_with_their_loads(tmp_path):
    plate = read(spread([PH, LOAD], 6, 1), 1)
    study = written(tmp_path / "study", [plate], factors=[PH, LOAD], protein=BY_LOAD)
    used = 0.02 * plate["load"].sum()
    assert protein_left_mg(study) == pytest.approx(40.0 - used)
