"""Rival plates: factorials and spread wells keep to steps, limits, levels and wells."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from muntin.record.definition import Definition
from muntin.rehearsal.spread import bridging, full_factorial, space_filling
from muntin.window.assessment import assess
from muntin.window.coded import code
from tests.rehearsal.played import conditions, small
from tests.studies import PH, RESIN, SALT, TIME, spread, tables

NONE = pd.DataFrame(columns=["ph", "salt"])
FINE_PH = {**PH, "step": 0.1}
FINE_SALT = {**SALT, "step": 10}


def definition(*factors: object, **given: object) -> Definition:
    return Definition.model_validate(tables(factors=list(factors), **given))


def counts(frame: pd.DataFrame) -> dict[str, int]:
    return {str(name): frame[name].nunique() for name in frame}


@pytest.mark.parametrize(
    ("wells", "expected"),
    [(24, {"ph": 4, "salt": 6}), (48, {"ph": 6, "salt": 8}), (96, {"ph": 8, "salt": 12})],
)
def test_a_factorial_fills_its_wells_evenly(wells: int, expected: dict[str, int]) -> None:
    frame = full_factorial(definition(FINE_PH, FINE_SALT), wells, NONE)
    assert frame is not None
    assert len(frame) == wells
    assert counts(frame) == expected
    assert len(frame.drop_duplicates()) == wells
    assert (frame["ph"].min(), frame["ph"].max()) == (4.5, 7.5)
    assert (frame["salt"].min(), frame["salt"].max()) == (50, 450)


def test_wells_that_no_factorial_fills_repeat_its_middle() -> None:
    frame = full_factorial(definition(FINE_PH, FINE_SALT), 11, NONE)
    assert frame is not None
    assert counts(frame) == {"ph": 3, "salt": 3}
    assert frame.tail(2).to_numpy().tolist() == [[6.0, 250.0]] * 2


def test_a_factorial_leaves_room_for_the_bottles_of_bridging_wells() -> None:
    own = definition({**FINE_PH, "per_plate": 4}, FINE_SALT)
    alone = full_factorial(own, 24, NONE)
    beside = full_factorial(own, 24, conditions((5.0, 100), (6.0, 100)))
    assert alone is not None
    assert beside is not None
    assert counts(alone)["ph"] == 4
    assert counts(beside)["ph"] == 2


def test_a_factorial_takes_every_choice_or_is_none() -> None:
    own = definition(FINE_PH, RESIN)
    frame = full_factorial(own, 12, NONE)
    assert frame is not None
    assert counts(frame) == {"ph": 4, "resin": 3}
    assert full_factorial(own, 5, NONE) is None


def test_a_factorial_keeps_to_the_limits() -> None:
    own = definition(FINE_PH, FINE_SALT, limits=[{"allow": "salt <= 300"}])
    frame = full_factorial(own, 24, NONE)
    assert frame is not None
    assert len(frame) == 24
    assert frame["salt"].max() <= 300
    # A factorial of 24 wells would lose a third of them to the limit.
    assert len(frame.drop_duplicates()) >= 20


def test_a_factorial_of_three_factors() -> None:
    frame = full_factorial(definition(FINE_PH, FINE_SALT, TIME), 24, NONE)
    assert frame is not None
    assert sorted(counts(frame).values()) == [2, 3, 4]
    assert len(frame.drop_duplicates()) == 24


def test_spread_wells_lie_nearer_to_everywhere_than_chance_does(tmp_path: Path) -> None:
    study = small(tmp_path, wells=0)
    chosen = space_filling(assess(study, "quadratic"), 6, NONE)

    def away(wells: pd.DataFrame) -> float:
        everywhere = code(study.definition, spread([PH, SALT], 512))
        X = code(study.definition, wells)
        return float(((everywhere[:, None] - X) ** 2).sum(-1).min(axis=1).mean())

    grid = spread([PH, SALT], 512).drop_duplicates()
    chance = [away(grid.sample(6, random_state=seed)) for seed in range(200)]
    assert away(chosen) < min(chance)


def test_spread_wells_keep_away_from_those_that_were_run(tmp_path: Path) -> None:
    study = small(tmp_path, wells=24)
    view = assess(study, "quadratic")
    chosen = space_filling(view, 5, NONE)
    run = code(study.definition, study.wells)
    near = ((code(study.definition, chosen)[:, None] - run) ** 2).sum(-1).min(axis=1)
    assert near.min() > 0.0


def test_spread_wells_keep_to_levels_and_limits(tmp_path: Path) -> None:
    study = small(
        tmp_path,
        factors=[{**PH, "per_plate": 3}, SALT],
        limits=[{"allow": "salt <= 500 - 50 * (ph - 4.5)"}],
    )
    view = assess(study, "quadratic")
    tie = bridging(view)
    chosen = space_filling(view, 8, tie)
    assert len(chosen) == 8
    assert pd.concat([tie, chosen])["ph"].nunique() <= 3
    assert study.definition.allowed(chosen).all()


def test_bridging_wells_are_a_pass_and_a_fail_twice_each(tmp_path: Path) -> None:
    view = assess(small(tmp_path), "quadratic")
    tie = bridging(view)
    p = view.judged(tie, "mean")
    assert len(tie) == 4
    assert np.sort(p.round(6))[1] < 0.5 < np.sort(p.round(6))[2]
    assert len(tie.drop_duplicates()) == 2


def test_an_opening_plate_bridges_to_nothing(tmp_path: Path) -> None:
    assert len(bridging(assess(small(tmp_path, wells=0), "quadratic"))) == 0
