"""Screens of the terminal."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pandas as pd
import pytest
from rich.table import Table

from muntin.bench.plan import propose
from muntin.record import open_study
from muntin.record.definition import Definition
from muntin.report.plan_text import first_conditions, plan_tables
from muntin.report.text import check_lines, few, propose_screen, sheet, window_lines
from muntin.window.assessment import Assessment, assess
from muntin.window.checks import Check
from muntin.window.window import Window
from tests.report.shown import shown
from tests.report.studies import LOAD, RESIN, STUDY, small, write

GOOD = Check("coverage", True, True, "Nine of ten readings lie inside.")
BAD = Check("integration", False, True, "Averages are unreliable.")
NOTE = Check("shared errors", False, False, "One plate cannot tell.")
LABELS = {"recovery": "Recovery", "hcp": "HCP", "purity": "Purity", "yield": "Yield"}


@pytest.fixture(scope="module")
def view(tmp_path_factory: pytest.TempPathFactory) -> Assessment:
    toml = STUDY.replace("kept_within = 0.1\n", "")
    study = open_study(small(tmp_path_factory.mktemp("study"), toml=toml))
    return assess(study, surrogate="quadratic")


@pytest.fixture(scope="module")
def window(view: Assessment) -> Window:
    return view.window()


def test_failures_come_first_and_what_passed_is_counted() -> None:
    assert check_lines((GOOD, NOTE, BAD)) == [
        "FAILED (integration): Averages are unreliable.",
        "Note (shared errors): One plate cannot tell.",
        "Passed, 1 of 3: coverage.",
        "Nine of ten readings lie inside.",
    ]


def test_a_check_with_too_few_readings_is_not_called_passed() -> None:
    few = Check("lack of fit", True, True, "Too few repeats.", told=False)
    assert check_lines((GOOD, few)) == [
        "Passed, 1 of 2: coverage; too few readings to tell: lack of fit.",
        "Nine of ten readings lie inside.",
    ]
    assert check_lines((few,)) == ["Too few readings to tell: lack of fit."]


def checks_of(*failed: tuple[str, str]) -> tuple[Check, ...]:
    return tuple(
        Check(name, (label, name) not in failed, False, f"{label}: {name} said.", response)
        for response, label in LABELS.items()
        for name in ("coverage", "wild wells")
    )


def test_a_check_that_not_every_response_passed_names_those_that_did() -> None:
    checks = checks_of(("HCP", "wild wells"), ("Yield", "wild wells"))
    lines = check_lines(checks, (), LABELS)
    assert lines == [
        "Note (wild wells): HCP: wild wells said.",
        "Note (wild wells): Yield: wild wells said.",
        "Passed, 6 of 8: coverage, wild wells (Recovery, Purity).",
    ]
    told = check_lines(checks, ("HCP: wild wells said.",), LABELS)
    assert told[0] == "FAILED: wild wells (HCP); why is said with the window."


def test_coverage_is_said_of_each_response_where_they_are_few() -> None:
    three = dict(list(LABELS.items())[:3])
    lines = check_lines(checks_of(("HCP", "coverage"))[:6], (), three)
    assert lines[1:] == [
        "Passed, 5 of 6: coverage (Recovery, Purity), wild wells.",
        "Recovery: coverage said.",
        "Purity: coverage said.",
    ]


def test_reasons_that_stand_with_the_window_are_only_named() -> None:
    lines = check_lines((GOOD, BAD), told=(BAD.sentence,))
    assert lines[0] == "FAILED: integration; why is said with the window."


def test_few_counts_what_it_leaves_out() -> None:
    assert few(["a", "b"], 2) == ["a", "b"]
    assert few(["a", "b", "c"], 1, "see --json") == ["a", "and 2 more: see --json"]


def test_window_in_words(view: Assessment, window: Window) -> None:
    setpoint = pd.Series({"ph": 6.5, "salt": 300.0, "probability": 0.934})
    ranges = {"ph": (6.0, 7.0), "salt": (250.0, 350.0)}
    made = replace(window, share=0.25, wrong_share=0.031, setpoint=setpoint, ranges=ranges)
    assert window_lines(view, made) == [
        "Predicted operating window (plate scale): 25.0 % of the range reaches a probability of "
        "0.90 that a new well on a new plate passes.",
        "Set point: pH 6.5 and Salt 300 mM: 93.4 % of new wells pass.",
        "Ranges that hold together: pH 6.0 to 7.0 and Salt 250 to 350 mM.",
        "Share of the range we may still call wrongly: 3.1 %.",
    ]


def test_a_set_point_at_the_end_of_a_range_is_told_to_be_there(
    view: Assessment, window: Window
) -> None:
    setpoint = pd.Series({"ph": 7.5, "salt": 300.0, "probability": 0.934})
    lines = window_lines(view, replace(window, share=0.25, setpoint=setpoint, ranges=None))
    assert lines[1] == (
        "Set point: pH 7.5 and Salt 300 mM: 93.4 % of new wells pass. "
        "The range ends at pH 7.5: no data lie beyond."
    )


def test_no_condition_inside(view: Assessment, window: Window) -> None:
    setpoint = pd.Series({"ph": 6.5, "salt": 300.0, "probability": 0.756})
    lines = window_lines(view, replace(window, share=0.0, setpoint=setpoint, ranges=None))
    assert "nothing of the range reaches a probability of 0.90" in lines[0]
    assert lines[1] == "The best so far: pH 6.5 and Salt 300 mM: 75.6 % of new wells pass."
    assert not any("met least" in line for line in lines)


def test_window_that_the_data_do_not_support_is_withheld(view: Assessment, window: Window) -> None:
    assert window_lines(view, replace(window, unsupported=(BAD.sentence,))) == [
        "Predicted operating window (plate scale): not supported by the data.",
        BAD.sentence,
    ]


def test_sheet_keeps_headings_apart_and_leaves_out_empty_sections() -> None:
    screen = sheet(
        "Title", [("One", ["first", "second"]), ("Two", []), ("Three", ["[b]third[/b]"])]
    )
    assert shown(screen) == [
        "Title",
        "One       first",
        "          second",
        "Three     [b]third[/b]",
    ]


def rows(*wells: tuple[str, float, float, float]) -> pd.DataFrame:
    names = ["well", "ph", "salt", "p_now"]
    table = pd.DataFrame(wells, columns=names).assign(role="test")
    return table.assign(reason=[f"reason of {well}" for well in table["well"]])


WELLS = rows(
    *(("A1", 6.0, 300, 0.9), ("A2", 5.0, 100, 0.2), ("A3", 5.0, 200, 0.45)),
    *(("A4", 5.0, 200, 0.45), ("A5", 6.0, 150, 0.3)),
)


def plain(table: Table) -> list[str]:
    return [" ".join(line.split()) for line in shown(table)]


def tables(view: Assessment, wells: pd.DataFrame, why: bool = True) -> list[list[str]]:
    return [plain(table) for table in plan_tables(view.study.definition, wells, why)]


def test_every_condition_has_a_row_where_all_fit(view: Assessment) -> None:
    assert tables(view, WELLS)[0] == [
        "wells pH Salt (mM) p now why",
        "1 5.0 100 0.20 reason of A2",
        "2 5.0 200 0.45 reason of A3 (1); reason of A4 (1)",
        "1 6.0 150 0.30 reason of A5",
        "1 6.0 300 0.90 reason of A1",
    ]


def test_else_conditions_are_gathered_by_level(view: Assessment) -> None:
    assert tables(view, WELLS)[1] == [
        "wells pH Salt (mM) p now why",
        "3 5.0 100, 200(×2) 0.20 to 0.45 reason of A3 (1); reason of A4 (1); others",
        "2 6.0 150, 300 0.30 to 0.90 reason of A5 (1); reason of A1 (1)",
    ]


def test_reasons_of_a_level_are_counted_and_what_one_well_repeats_is_left_out(
    view: Assessment,
) -> None:
    said = {
        "A1": "probability 0.90, inside the edge at pH 6.0",
        "A2": "repeats plate-01 B3: probability 0.20, on the edge at pH 5.0",
        "A3": "probability 0.45, on the edge at pH 5.0",
        "A4": "well 2 of this condition: averages the noise",
        "A5": "probability 0.30, on the edge at pH 6.0",
    }
    found = tables(view, WELLS.assign(reason=[said[w] for w in WELLS["well"]]))[1]
    assert found[1:] == [
        "3 5.0 100, 200(×2) 0.20 to 0.45 on the edge",
        "2 6.0 150, 300 0.30 to 0.90 on the edge (1); inside the edge (1)",
    ]


def test_else_the_conditions_follow_one_another(view: Assessment) -> None:
    assert tables(view, WELLS)[-1] == [
        "wells pH / Salt (mM)",
        "5 5.0/100, 5.0/200(×2), 6.0/150, 6.0/300",
    ]


def test_else_the_first_conditions_are_shown(view: Assessment) -> None:
    assert plain(first_conditions(view.study.definition, WELLS, 1)) == [
        "wells pH Salt (mM) p now why",
        "1 5.0 100 0.20 reason of A2",
        "4 3 more conditions",
    ]


def test_prepared_stocks_come_first_in_gathering(view: Assessment) -> None:
    ph, salt = view.study.definition.factors
    definition = view.study.definition.model_copy(
        update={"factors": (ph, salt.model_copy(update={"per_plate": 4}))}
    )
    assert plain(plan_tables(definition, WELLS)[1])[:2] == [
        "wells Salt (mM) pH p now why",
        "1 100 5.0 0.20 reason of A2",
    ]


def test_a_table_says_once_what_probability_and_setting_are(view: Assessment) -> None:
    said = "repeats plate-01 A1: probability 0.45, on the edge at pH 5"
    first = tables(view, WELLS.assign(reason=said))[0]
    assert first[1] == "1 5.0 100 0.20 repeats plate-01 A1: on the edge"


def test_opening_plate_has_no_probabilities(view: Assessment) -> None:
    assert tables(view, WELLS, False)[1][:2] == ["wells pH Salt (mM)", "3 5.0 100, 200(×2)"]


def many(definition: Definition, count: int) -> pd.DataFrame:
    """A plan with so many conditions of long settings and reasons."""
    made = {
        f.name: [f.levels()[(3 * i + i // 7 + j) % len(f.levels())] for i in range(count)]
        for j, f in enumerate(definition.factors)
    }
    reason = "probability 0.55, on the edge between what was seen to pass and what was not"
    return pd.DataFrame(made).assign(role="test", p_now=0.55, reason=reason)


@pytest.mark.parametrize("more", ["", LOAD, LOAD + RESIN])
def test_all_conditions_of_24_wells_show_in_14_lines(tmp_path: Path, more: str) -> None:
    toml = STUDY.replace("\n[[responses]]", f"{more}\n[[responses]]")
    files = {"study.toml": toml}
    definition = open_study(write(tmp_path, files)).definition
    wells = many(definition, 24)
    names = list(definition.factor_names)
    conditions = wells[names].drop_duplicates()
    assert len(conditions) > 14
    shapes = plan_tables(definition, wells)
    assert shapes
    by = definition.factors[0]
    for table in shapes:
        lines = shown(table)
        assert len(lines) <= 14 + max(str(c.header).count("\n") + 1 for c in table.columns)
        assert max(map(len, lines)) <= 90
    rows = shapes[0].rows
    cells = [list(column.cells) for column in shapes[0].columns]
    seen = set()
    for i in range(len(rows)):
        for setting in str(cells[2][i]).split(", "):
            others = setting.split("(")[0].split("/")
            seen.add((str(cells[1][i]), *others))
    rest = definition.factors[1:]
    assert seen == {
        (by.shown(row[by.name]), *(f.shown(row[f.name]) for f in rest))
        for _, row in conditions.iterrows()
    }


def test_before_any_reading_there_is_no_forecast(tmp_path: Path) -> None:
    fresh = assess(open_study(write(tmp_path, {"study.toml": STUDY})), surrogate="quadratic")
    plan = propose(fresh, wells=3)
    lines = shown(propose_screen(fresh, plan, tmp_path / "plan.csv", ""))
    (forecast,) = [line for line in lines if line.startswith("Forecast")]
    assert forecast.split(maxsplit=1)[1] == "No forecast before the first readings."
    assert not any("nan" in line for line in lines)
