"""How many runs the reserve reaches for."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from muntin.confirmation.places import Spot
from muntin.confirmation.protein import run_mg, within_reserve
from muntin.record.definition import Definition, definition_faults
from muntin.record.faults import StudyFaults
from tests.studies import LOAD, PH, tables

SPOTS = [
    Spot("set point", {"ph": 6.0, "load": 10.0}, 0.99),
    Spot("edge", {"ph": 5.0, "load": 40.0}, 0.91),
    Spot("edge", {"ph": 7.0, "load": 5.0}, 0.93),
]


def study(reserve: float, columns: dict, load: bool = False) -> Definition:
    protein = {"available_mg": 1000.0, "reserved_mg": reserve, "per_well_mg": 0.2}
    if load:
        protein |= {"load_factor": "load", "resin_ul": 20.0}
    return Definition.model_validate(tables(factors=[PH, LOAD], protein=protein, columns=columns))


@given(
    reserve=st.floats(1.0, 90.0),
    load=st.floats(1.0, 20.0),
    bed=st.floats(0.2, 2.0),
    beside=st.floats(0.0, 2.0),
    used=st.floats(0.0, 20.0),
    runs=st.integers(1, 9),
)
def test_runs_stay_within_the_reserve_and_one_more_would_not(
    reserve, load, bed, beside, used, runs
) -> None:
    keys = {"bed_ml": bed, "load_mg_per_ml": load, "beside_mg": beside, "runs": runs}
    definition = study(reserve, keys)
    takes = load * bed + beside
    try:
        offered, notices = within_reserve(definition, SPOTS, used)
    except StudyFaults:
        assert takes > reserve - used
        return
    assert used + takes * len(offered) <= reserve + 1e-6
    assert [spot.place for spot in offered[:3]] == [s.place for s in SPOTS][: len(offered)]
    if len(offered) < runs:
        assert used + takes * (len(offered) + 1) > reserve
        assert len(notices) == 1
    else:
        assert notices == []


def test_the_load_of_a_condition_is_loaded() -> None:
    definition = study(200.0, {"bed_ml": 0.5, "beside_mg": 1.0}, load=True)
    assert [run_mg(definition, spot) for spot in SPOTS] == [6.0, 21.0, 3.5]
    assert definition_faults(definition) == []


def test_what_the_reserve_reaches_for_is_said() -> None:
    definition = study(10.0, {"bed_ml": 1.0, "load_mg_per_ml": 3.0})
    offered, notices = within_reserve(definition, SPOTS, 3.0)
    assert len(offered) == 2
    assert notices == ["The reserved 10 mg, less 3 mg of earlier runs, reach for 2 of 3 runs."]
    with pytest.raises(StudyFaults) as caught:
        within_reserve(definition, SPOTS, 8.0)
    assert caught.value.lines() == [
        "study.toml, protein, reserved_mg: 10 less 8 mg of earlier runs does not reach for one "
        "run; it takes 3 mg (bed_ml, load and beside_mg in [columns] make it)"
    ]


def test_without_the_tables_it_is_not_known() -> None:
    definition = Definition.model_validate(tables(factors=[PH, LOAD]))
    offered, notices = within_reserve(definition, SPOTS, 0.0)
    assert offered == SPOTS
    assert notices == [
        "Whether the protein reaches is not known: study.toml had no [columns] when the runs were "
        "planned; once it has, muntin confirm --again plans them anew."
    ]
    assert run_mg(definition, SPOTS[0]) is None


@pytest.mark.parametrize(
    ("columns", "load", "line"),
    [
        (
            {"bed_ml": 1.0},
            False,
            'study.toml, columns: "load_mg_per_ml" is missing; or name the factor that holds the '
            "load, load_factor in [protein]",
        ),
        (
            {"bed_ml": 1.0, "load_mg_per_ml": 3.0},
            True,
            "study.toml, columns, load_mg_per_ml: 3 is not read where [protein] has load_factor; "
            "runs are loaded by load",
        ),
    ],
)
def test_keys_that_do_not_go_together(columns, load, line) -> None:
    faults = definition_faults(study(10.0, columns, load))
    assert [fault.text for fault in faults] == [line]
