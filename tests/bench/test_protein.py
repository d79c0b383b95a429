"""Protein: what was used, what a plan needs, what is left."""

import pandas as pd
import pytest

from muntin.bench.protein import protein_left_mg, protein_needed_mg, wells_with_protein
from tests.studies import PH, SALT, read, spread, written

PROTEIN = {"available_mg": 40.0, "reserved_mg": 10.0, "per_well_mg": 0.25}
ROLES = ["test", "bridge", "reference", "load", "no_resin", "blank", "water"]


@pytest.mark.parametrize(("role", "given"), [*zip(ROLES, [1, 1, 1, 1, 1, 0, 0], strict=True)])
def test_which_wells_are_given_protein(role, given):
    assert wells_with_protein([role, role]) == 2 * given


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
