"""What the stocks cannot make: one fault a cause, what controls ask for alone, and the range."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest

from muntin.bench.control_levels import control_levels
from muntin.bench.mixing import Mix, Mixer
from muntin.bench.reach import reach_notice
from muntin.bench.sheets import prepare
from muntin.record.faults import StudyFaults
from tests.bench.bottled import HIGH, LOW, opened
from tests.bench.buffered import buffer, buffered

WELLS = [(f"A{k}", "test", 5.0, 50 * k) for k in range(1, 10)]
WEAK_SALT = {
    "stocks": None,
    "salt_factor": "salt",
    "salt_stock_mm": 200,
    "buffers": [{"name": "acetate", "mm": 20, "stock_mm": 200}],
}


def lines(folder: Path, **changed: Any) -> list[str]:
    with pytest.raises(StudyFaults) as raised:
        prepare(opened(folder, **changed))
    return raised.value.lines()


def test_bottles_too_weak_for_many_conditions_are_one_fault(tmp_path: Path) -> None:
    stocks = [LOW, {**HIGH, "holds": {"salt": 200}}]
    assert lines(tmp_path, rows=WELLS, stocks=stocks) == [
        "plans/plate-02.csv, wells A5, A6, A7, A8, A9: 5 conditions cannot be made: they are out "
        "of reach: the bottles for them hold salt 0 to 200 (such as ph 5.0, salt 250; nearest that "
        "works: ph 5.0, salt 200)"
    ]


def test_three_conditions_are_told_one_by_one(tmp_path: Path) -> None:
    stocks = [LOW, {**HIGH, "holds": {"salt": 300}}]
    told = lines(tmp_path, rows=WELLS, stocks=stocks)
    assert [line.split(" is out")[0].split(", ", 1)[1] for line in told] == [
        f"well A{k}: ph 5.0, salt {50 * k}" for k in (7, 8, 9)
    ]


def test_the_salt_stock_that_would_do_is_named_and_does(tmp_path: Path) -> None:
    # A tenth of the volume is buffer: 450 mM need 500 mM in the rest.
    (line,) = lines(tmp_path / "weak", rows=WELLS, **WEAK_SALT)
    assert line == (
        "plans/plate-02.csv, wells A4, A5, A6, A7, A8, A9: 6 conditions cannot be made: they take "
        "more than 1 L of stocks for 1 L, since NaCl 200 mM is too weak (study.toml, bench, "
        "salt_stock_mm: 500 and more would do for all of them)"
    )
    keys = {**WEAK_SALT, "salt_stock_mm": 500}
    assert len(prepare(opened(tmp_path / "enough", rows=WELLS, **keys)).mixes) == 9
    keys["salt_stock_mm"] = 490
    (line,) = lines(tmp_path / "short", rows=WELLS, **keys)
    assert "well A9: ph 5.0, salt 450 takes more than 1 L" in line
    assert "a salt stock of 500 mM would do" in line


def test_levels_that_only_controls_ask_for(tmp_path: Path) -> None:
    rows = [("A1", "test", 5.0, 100), ("A2", "test", 4.5, 100), ("D5", "blank", "", "")]
    alone = prepare(
        opened(tmp_path / "alone", rows=rows, control_condition={"ph": 5.5, "salt": 100})
    )
    assert [*control_levels(alone)] == [
        "Only controls ask for pH 5.5 (study.toml, [bench], control_condition): 3 levels of pH to "
        "prepare."
    ]
    shared = prepare(
        opened(tmp_path / "shared", rows=rows, control_condition={"ph": 4.5, "salt": 300})
    )
    assert [*control_levels(shared)] == []


def test_the_part_of_the_range_that_stocks_do_not_reach() -> None:
    made = buffered(buffer("acetate"), salt_stock_mm=800.0)
    steps = [(3.0 + 0.1 * i, 10.0 * j) for i in range(61) for j in range(101)]
    mixer = Mixer(made)
    short = sum(not isinstance(mixer.mix({"ph": ph, "salt": s}), Mix) for ph, s in steps)
    said = reach_notice(made)
    share = float(said.split("cannot make ")[1].split(" %")[0])
    # Judged at 20 levels of each: the rim weighs a little more than on all 6,161 steps.
    assert share == pytest.approx(100 * short / len(steps), abs=3.0)
    assert said.endswith("; plans leave them out")
    assert "lies beyond what the forms of acetate reach" in said or "too weak" in said


def test_stocks_that_reach_all_of_it_need_no_word(tmp_path: Path) -> None:
    assert reach_notice(opened(tmp_path / "all", pipette_floor_ul=None).definition) == ""
    assert reach_notice(opened(tmp_path / "none", stocks=None).definition) == ""
