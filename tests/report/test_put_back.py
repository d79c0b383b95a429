"""What a study would say with everything that was left out of it."""

from __future__ import annotations

from pathlib import Path

import pytest

from muntin.record import open_study
from muntin.report.page.put_back import PutBack, put_back
from muntin.window.assessment import assess
from tests.report.studies import ONE_FACTOR, one_factor_plate, write

HEAD = "well,salt,recovery,hcp,hcp_exclude,exclude"


def found(folder: Path, *, changed: dict[int, str]) -> PutBack | None:
    """The study of one factor, rows of its plate changed (counted from 1)."""
    rows = [HEAD, *(f"{row},," for row in one_factor_plate().splitlines()[1:])]
    for number, row in changed.items():
        rows[number] = row
    write(folder, {"study.toml": ONE_FACTOR, "plates/plate-01.csv": "\n".join(rows) + "\n"})
    return put_back(assess(open_study(folder), surrogate="quadratic"))


def test_nothing_where_nothing_was_left_out(tmp_path: Path) -> None:
    assert found(tmp_path, changed={}) is None


def test_one_reading_of_a_well_and_a_whole_well(tmp_path: Path) -> None:
    changed = {3: "A3,120,0.334,900,froze,", 4: "A4,120,0.2,28,,leaked"}
    back = found(tmp_path, changed=changed)
    assert back is not None
    assert back.values == {
        ("plate-01", "A3", "hcp"): 900.0,
        ("plate-01", "A4", "recovery"): 0.2,
        ("plate-01", "A4", "hcp"): 28.0,
    }
    assert back.window is not None
    assert back.facts()["readings"] == 3


@pytest.mark.parametrize("row", ["A4,,0.2,28,,leaked", "A4,120,,,,leaked"])
def test_a_well_without_its_condition_or_reading_has_nothing_to_put_back(
    tmp_path: Path, row: str
) -> None:
    back = found(tmp_path, changed={4: row})
    assert back is not None
    assert (back.values, back.window) == ({}, None)
    assert back.unknown == "None of them has a reading on record."


def test_a_reading_that_cannot_be_is_told_instead(tmp_path: Path) -> None:
    back = found(tmp_path, changed={4: "A4,120,0.2,-5,,leaked"})
    assert back is not None
    assert back.window is None
    assert back.unknown.startswith("plates/plate-01.csv, row 5, well A4, column hcp: -5 must lie")
