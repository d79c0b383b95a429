"""Keys of [protein] and of [[forbidden]]: what is wrong between them is told."""

import pytest

from muntin.record.definition import Definition, definition_faults
from tests.studies import LOAD, PH, RESIN, SALT, tables

BY_LOAD = {"available_mg": 40.0, "load_factor": "load", "resin_ul": 20.0}


def told(**given):
    return [fault.text for fault in definition_faults(Definition.model_validate(tables(**given)))]


@pytest.mark.parametrize(
    ("protein", "said"),
    [
        ({"available_mg": 4.0}, 'protein: "per_well_mg" is missing; or give load_factor and'),
        (
            {"available_mg": 4.0, "per_well_mg": 1.0, "resin_ul": 9.0},
            "protein, resin_ul: 9 is read",
        ),
        ({**BY_LOAD, "resin_ul": None}, 'protein, load_factor: "load" needs resin_ul'),
        ({**BY_LOAD, "load_factor": "lod"}, '"lod" is not a factor (did you mean "load"?)'),
        ({**BY_LOAD, "load_factor": "resin"}, '"resin" has choices; a load has a range'),
        ({**BY_LOAD, "load_factor": "cold"}, '"cold" has a low below 0, and no load is'),
        ({**BY_LOAD, "reserved_mg": 40.0}, "protein, reserved_mg: 40 must lie below available_mg"),
    ],
)
def test_faults_of_protein(protein, said):
    cold = {"name": "cold", "low": -5, "high": 25, "step": 5}
    given = {name: value for name, value in protein.items() if value is not None}
    (line,) = told(factors=[PH, LOAD, RESIN, cold], protein=given)
    assert line.startswith("study.toml, protein")
    assert said in line


def test_a_load_is_enough():
    assert told(factors=[PH, LOAD], protein=BY_LOAD) == []


def rule(text):
    return {"conditions": text, "because": "it precipitates"}


def test_faults_of_forbidden_conditions():
    assert told(forbidden=[rule("salt > 300 and ph < 5")]) == []
    lines = told(forbidden=[rule("slat > 300"), rule("salt")])
    assert lines[0].startswith('study.toml, forbidden 1, conditions: "slat > 300" ')
    assert 'did you mean "salt"?' in lines[0]
    assert lines[1].startswith('study.toml, forbidden 2, conditions: "salt" is not a comparison')


@pytest.mark.parametrize(
    ("given", "left"),
    [
        ({"forbidden": [rule("salt >= 0")]}, False),
        ({"forbidden": [rule("salt >= 200"), rule("salt <= 200")]}, False),
        ({"forbidden": [rule("salt >= 200")], "limits": [{"allow": "salt >= 200"}]}, False),
        ({"forbidden": [rule("ph < 6")], "factors": [{**PH, "plan_high": 5.5}, SALT]}, False),
        ({"forbidden": [rule("salt > 50")]}, True),
    ],
)
def test_some_condition_must_be_left(given, left):
    said = ["study.toml, forbidden: leave no condition that a new plan may use"]
    assert told(**given) == ([] if left else said)
