"""Plans leave out what the stocks of [bench] cannot make."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from hypothesis import Phase, given, settings
from hypothesis import strategies as st

import muntin
from muntin.bench.sheets import prepare
from muntin.record import StudyFaults, open_study
from muntin.record.faults import listed
from muntin.report.plan_files import plan_table_text, write_plan
from muntin.window.assessment import Assessment
from tests.bench.bottled import HIGH, LOW, bottled

WEAK = [LOW, {**HIGH, "holds": {"salt": 260}}]
ROWS: list[Any] = []
# The small study, from its own statement: levels of salt (mM), number of levels of pH, a well (µL).
SALTS, PH_LEVELS, WELL_UL = range(50, 451, 50), 7, 400


@pytest.fixture(scope="module")
def light(tmp_path_factory: pytest.TempPathFactory) -> Assessment:
    view = muntin.assess(open_study(bottled(tmp_path_factory.mktemp("a"), ROWS)), "quadratic")
    surfaces = {name: surface.lightened(2) for name, surface in view.surfaces.items()}
    return replace(view, surfaces=surfaces)


@pytest.fixture(scope="module")
def hidden(light: Assessment) -> Callable[[], Assessment]:
    """The same behind a function: too long to be shown where an example fails."""
    return lambda: light


def under(light: Assessment, folder: Path, **changed: Any) -> Assessment:
    """The same posterior with another bench."""
    return replace(light, study=open_study(bottled(folder, ROWS, **changed)))


def told(plan: muntin.Plan) -> list[str]:
    return [notice for notice in plan.notices if "mixed" in notice]


def test_no_well_is_planned_that_cannot_be_mixed(light: Assessment, tmp_path: Path) -> None:
    free = muntin.propose(light, wells=12)
    assert (free.wells["salt"] > 250).any()
    assert told(free) == []
    view = under(light, tmp_path, stocks=WEAK)
    plan = muntin.propose(view, wells=12)
    assert plan.wells["salt"].max() <= 250
    # 4 of 9 levels of salt, at each of 7 pH.
    assert told(plan) == [
        "28 of 63 candidates cannot be mixed from the stocks (study.toml, [bench]) and were not "
        "chosen"
    ]
    write_plan(tmp_path, plan.plate, plan_table_text(view.study.definition, plan))
    assert len(prepare(view.study).rows) == len(plan.wells)


def test_bottles_that_make_all_change_nothing(light: Assessment, tmp_path: Path) -> None:
    bare = under(light, tmp_path / "bare", stocks=None)
    full = muntin.propose(light, wells=6)
    plain = muntin.propose(bare, wells=6)
    assert full.wells.equals(plain.wells)
    assert full.notices == plain.notices


def test_small_draws_are_avoided_too(light: Assessment, tmp_path: Path) -> None:
    view = under(light, tmp_path, pipette_floor_ul=100)
    salts = muntin.propose(view, wells=12).wells["salt"].dropna()
    # 100 of 400 µL: from a quarter to three quarters of 500 mM.
    assert salts.between(125, 375).all()


def test_what_bottles_measured_is_told_with_the_plan(light: Assessment, tmp_path: Path) -> None:
    view = under(light, tmp_path)
    (tmp_path / "stocks").mkdir()
    levels = [f"{4.5 + 0.5 * n:.1f}" for n in range(7)]
    rows = [f"high salt (pH {level}),salt,500,475" for level in levels]
    path = tmp_path / "stocks" / "plate-02.csv"
    path.write_text("\n".join(["bottle,factor,target,measured", *rows]) + "\n")
    plan = muntin.propose(view, wells=12)
    of = [notice for notice in plan.notices if "stocks/plate-02.csv" in notice]
    counts = plan.wells["ph"].value_counts()
    used = [level for level in levels if float(level) in counts.index]
    shown = listed((f"high salt (pH {level})" for level in used), most=4)
    assert of[0] == (
        f"{shown} measured something else than the target (stocks/plate-02.csv): "
        f"probabilities and forecast of {counts.sum()} wells are those of what the wells then hold"
    )
    rest = listed((f"high salt (pH {n})" for n in levels if n not in used), most=4)
    assert [n.partition("from ")[2].partition(";")[0] for n in of[1:]] == [rest] * bool(rest)
    # Every well holds salt, and 475 of 500 mM of it.
    assert plan.wells["reason"].dropna().str.contains("Salt measured").sum() == counts.sum()


@settings(deadline=None, derandomize=True, max_examples=40, phases=[Phase.generate])
@given(
    st.integers(0, 200),
    st.integers(210, 700),
    st.sampled_from([2, 20, 60]),
    st.integers(1, 16),
    st.sampled_from(["edge", "best", "both"]),
)
def test_no_bottles_and_no_pipette_are_asked_for_more_than_they_can(
    hidden: Callable[[], Assessment],
    tmp_path_factory: pytest.TempPathFactory,
    weak: int,
    strong: int,
    floor_ul: int,
    wells: int,
    aim: Any,
) -> None:
    stocks = [{**LOW, "holds": {"salt": weak}}, {**HIGH, "holds": {"salt": strong}}]
    folder = tmp_path_factory.mktemp("drawn")
    view = under(hidden(), folder, stocks=stocks, pipette_floor_ul=floor_ul)

    def works(salt: float) -> bool:
        draw = WELL_UL * (salt - weak) / (strong - weak)
        draws = (draw, WELL_UL - draw)
        # A draw is rounded to steps of 0.5 µL before it is held against the floor.
        return all(abs(ul) < 1e-6 or ul >= floor_ul - 0.2501 for ul in draws)

    try:
        plan = muntin.propose(view, wells=wells, aim=aim)
    except StudyFaults:
        assert sum(works(salt) for salt in SALTS) * PH_LEVELS < wells
        return
    salts = plan.wells.loc[plan.wells["role"].isin(["test", "bridge"]), "salt"]
    assert (plan.wells["role"] == "test").sum() == wells
    assert all(works(salt) for salt in salts)


def test_kept_rows_stay_and_are_pointed_out(light: Assessment, tmp_path: Path) -> None:
    view = under(light, tmp_path, stocks=WEAK)
    rows = [("A1", "test", 5.0, 400), ("A2", "test", 5.0, 200)]
    bottled(tmp_path, rows, stocks=WEAK)
    plan = muntin.propose(view, keep=tmp_path / "plans" / "plate-02.csv")
    assert plan.wells["salt"].tolist() == [400, 200]
    assert told(plan)[-1] == (
        "1 kept condition cannot be mixed from the stocks: muntin prepare says why, and names the "
        "nearest that can"
    )


def test_stocks_that_make_nothing(light: Assessment, tmp_path: Path) -> None:
    view = under(light, tmp_path, stocks=[LOW])
    with pytest.raises(StudyFaults) as raised:
        muntin.propose(view, wells=4)
    assert "are the stocks of study.toml, [bench] strong enough?" in str(raised.value)
