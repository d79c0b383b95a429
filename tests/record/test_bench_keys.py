"""The table [bench]: every fault of its keys is named with its place and the mend."""

from __future__ import annotations

from typing import Any

import pytest

from muntin.record.bench import Bench, whole_steps
from muntin.record.definition import Definition, definition_faults
from tests.studies import PH, RESIN, SALT, tables

LOW = {"name": "low", "per": "ph", "holds": {"salt": 0}}
HIGH = {"name": "high", "per": "ph", "holds": {"salt": 500, "resin": "Alpha"}}
SOUND: dict[str, Any] = {
    "well_ul": 400,
    "ph_factor": "ph",
    "pipette_step_ul": 0.5,
    "pipette_floor_ul": 5,
    "control_condition": {"ph": 6, "salt": 100, "resin": "Beta"},
    "stocks": [LOW, HIGH],
}


def faults(**changed: Any) -> list[str]:
    given = tables(factors=[PH, SALT, RESIN], bench={**SOUND, **changed})
    return [fault.text for fault in definition_faults(Definition.model_validate(given))]


def test_a_sound_bench_has_no_faults() -> None:
    assert faults() == []
    bench = Definition.model_validate(tables(factors=[PH, SALT, RESIN], bench=SOUND)).bench
    assert bench.held == {"ph", "salt", "resin"}


def test_no_bench_is_one_that_knows_nothing() -> None:
    definition = Definition.model_validate(tables())
    assert definition.bench == Bench()
    assert definition.bench.held == frozenset()


@pytest.mark.parametrize(
    ("changed", "said"),
    [
        (
            {"well_ul": 400.2},
            "study.toml, bench, well_ul: 400.2 is not a whole number of steps of 0.5 µL; nearest "
            "is 400 (pipette_step_ul)",
        ),
        (
            {"pipette_floor_ul": 0.3},
            "study.toml, bench, pipette_floor_ul: 0.3 is not a whole number of steps of 0.5 µL; "
            "nearest is 0.5 (pipette_step_ul)",
        ),
        (
            {"pipette_floor_ul": 500},
            "study.toml, bench, pipette_floor_ul: 500 lies above well_ul, which is 400",
        ),
        (
            {"ph_factor": "pH_"},
            'study.toml, bench, ph_factor: "pH_" is not a factor with a range (did you mean "ph"?)',
        ),
        (
            {"ph_factor": "resin"},
            'study.toml, bench, ph_factor: "resin" is not a factor with a range (known: ph, salt)',
        ),
        (
            {"stocks": [LOW, {**HIGH, "name": "Low "}]},
            'study.toml, bench, stocks, Low , name: "Low " is there twice',
        ),
        (
            {"stocks": [LOW, {**HIGH, "name": "Load"}]},
            'study.toml, bench, stocks, Load, name: "Load" is the name of the protein\'s solution',
        ),
        (
            {"stocks": [LOW, {**HIGH, "name": " "}]},
            'study.toml, bench, stocks,  , name: " " is empty',
        ),
        (
            {"stocks": [LOW, {**HIGH, "per": "phh"}]},
            'study.toml, bench, stocks, high, per: "phh" is not a factor (did you mean "ph"?)',
        ),
        (
            {"stocks": [LOW, {**HIGH, "holds": {"ph": 5, "salt": 1, "resin": "Beta"}}]},
            'study.toml, bench, stocks, high, holds: "ph" is set by per already, a bottle for each '
            "level",
        ),
        (
            {
                "stocks": [LOW, HIGH, {"name": "b", "holds": {"bufer": 5}}],
                "every_mix": {"buffer": 2},
            },
            'study.toml, bench, stocks, b, holds: "bufer" is not a factor (did you mean "buffer"?)',
        ),
        (
            {"stocks": [LOW, {**HIGH, "holds": {"salt": "much", "resin": "Beta"}}]},
            'study.toml, bench, stocks, high, holds, salt: "much" is not a number of 0 or above',
        ),
        (
            {"stocks": [LOW, {**HIGH, "holds": {"salt": -1, "resin": "Beta"}}]},
            "study.toml, bench, stocks, high, holds, salt: -1 is not a number of 0 or above",
        ),
        (
            {"stocks": [LOW, {**HIGH, "holds": {"salt": 1, "resin": "Alpa"}}]},
            'study.toml, bench, stocks, high, holds, resin: "Alpa" is not a choice (did you mean '
            '"Alpha"?)',
        ),
        (
            {"every_mix": {"salt": 5}},
            'study.toml, bench, every_mix, salt: "salt" is a factor; each mix holds its own',
        ),
        (
            {"every_mix": {"buffer": -5}},
            "study.toml, bench, every_mix, buffer: -5 must be 0 or above",
        ),
        (
            {"control_condition": {"ph": 6}},
            "study.toml, bench, control_condition: lacks what the stocks set: resin, salt",
        ),
        (
            {"control_condition": {"ph": 6, "salt": 1, "resin": "Beta", "sal": 2}},
            'study.toml, bench, control_condition: "sal" is not a factor (did you mean "salt"?)',
        ),
    ],
)
def test_each_fault_in_its_own_words(changed: dict[str, Any], said: str) -> None:
    assert faults(**changed) == [said]


@pytest.mark.parametrize(
    ("volume", "step", "steps"),
    [(400, 0.5, 800), (0.3, 0.1, 3), (450, 0.2, 2250), (0.25, 0.1, None), (5.0, 10.0, None)],
)
def test_whole_steps_are_counted_in_decimals(volume: float, step: float, steps: int | None) -> None:
    assert whole_steps(volume, step) == steps
