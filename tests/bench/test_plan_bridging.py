"""Bridging wells keep to the levels that a plate may have."""

import pytest

import muntin
from tests.bench.test_plan import EARLIER, FACTORS, conditions  # noqa: F401
from tests.studies import PH, SALT, changed, written


@pytest.mark.parametrize("name", ["ph", "salt"])
def test_bridging_wells_keep_to_the_levels_of_a_plate(tmp_path, name):
    view = muntin.assess(written(tmp_path / "study", EARLIER), "quadratic")
    factors = [{**f, "per_plate": 1} if f["name"] == name else f for f in (PH, SALT)]
    plan = muntin.propose(changed(view, factors=factors), wells=6)
    assert conditions(plan)[name].nunique() == 1
