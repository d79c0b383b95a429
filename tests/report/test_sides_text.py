"""The line on what gives way first."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd

import muntin
from muntin.record.definition import Definition
from muntin.report.sides_text import least_line, sides_line
from muntin.window.limiting import Side
from tests.studies import HCP, PH, RECOVERY, SALT, read, read_hcp, spread, tables, written


def definition(*responses: object) -> Definition:
    factors = [PH, {**SALT, "label": "Salt"}]
    return Definition.model_validate(tables(responses=list(responses), factors=factors))


def side(factor: str, end: str, at: float, response: str | None = None, fails: str = "low") -> Side:
    if response is None:
        return Side(factor=factor, end=end, at=at)
    return Side(
        factor=factor, end=end, at=at, beyond=0.0, response=response, probability=0.847, fails=fails
    )


def test_sides_are_gathered_by_what_gives_way() -> None:
    sides = (
        side("ph", "low", 5.0, "recovery"),
        side("ph", "high", 7.5),
        side("salt", "low", 100, "recovery"),
        side("salt", "high", 300, "hcp", "high"),
    )
    assert sides_line(definition(RECOVERY, HCP), sides) == [
        "Gives way first: Recovery, too low, below pH 5.0 (0.85 alone) and below Salt 100 mM "
        "(0.85 alone); hcp, too high, above Salt 300 mM (0.85 alone); the range ends at pH 7.5."
    ]


def test_ranges_as_wide_as_the_tested_ones() -> None:
    sides = (side("ph", "low", 4.5), side("ph", "high", 7.5))
    assert sides_line(definition(RECOVERY, HCP), sides) == ["The range ends at pH 4.5 and pH 7.5."]


def test_nothing_is_said_of_one_response_or_without_ranges() -> None:
    tracked = {"name": "colour", "kind": "real"}
    sides = (side("ph", "low", 5.0, "recovery"),)
    assert sides_line(definition(RECOVERY, tracked), sides) == []
    assert sides_line(definition(RECOVERY, HCP), ()) == []


def test_where_nothing_passes_the_response_that_is_met_least_is_named(tmp_path: Path) -> None:
    factors = [PH, SALT]
    plate = read_hcp(read(spread(factors, 14, 2)))
    judged = [RECOVERY, {**HCP, "at_most": 60}]
    study = written(tmp_path / "two", [plate], factors=factors, responses=judged)
    view = muntin.assess(study, "quadratic")
    grid = view.window().grid
    each = view.at(grid)
    # By the new well on a new plate, since the study is judged by it.
    recovery, hcp = (each[f"{name}_p_well"].to_numpy() for name in ("recovery", "hcp"))
    low, high = int(np.argmax(hcp - recovery)), int(np.argmax(recovery - hcp))
    assert min(hcp[low] - recovery[low], recovery[high] - hcp[high]) > 0.1
    assert least_line(view, grid.iloc[low]) == [
        f"There Recovery is met least ({recovery[low]:.2f} alone): it fails by being too low."
    ]
    assert least_line(view, grid.iloc[high]) == [
        f"There {HCP.get('label', 'hcp')} is met least ({hcp[high]:.2f} alone): it fails by being "
        "too high."
    ]
    alone = written(tmp_path / "one", [plate], factors=factors, responses=[RECOVERY])
    assert (
        least_line(muntin.assess(alone, "quadratic"), pd.Series({"ph": 6.0, "salt": 250.0})) == []
    )
