"""The table of influence on the screen and as plain values."""

from __future__ import annotations

from pathlib import Path

import pandas as pd
import pytest

from muntin.record import Study, open_study
from muntin.report.influence_text import influence_facts, influence_lines
from muntin.report.text import sheet
from tests.report.shown import shown
from tests.report.studies import ONE_FACTOR, STUDY, one_factor_plate, small, write

ROWS = {
    "first": [0.324, 0.5],
    "first_low": [0.281, 0.4],
    "first_high": [0.359, 0.6],
    "total": [0.5, 0.676],
    "total_low": [0.45, 0.6],
    "total_high": [0.55, 0.7],
}
FACTORS = pd.Index(["ph", "salt"], name="factor")


@pytest.fixture
def study(tmp_path: Path) -> Study:
    return open_study(small(tmp_path / "study"))


def lines(study: Study, tables: dict[str, pd.DataFrame], size: float | None) -> list[str]:
    return shown(sheet("Title", [("Factors", influence_lines(study, tables, size))]))[1:]


def test_a_table_says_shares_with_their_intervals(study: Study) -> None:
    table = pd.DataFrame(ROWS, index=FACTORS)
    assert lines(study, {"recovery": table}, None) == [
        "Factors   Recovery: share of its variation over the range, 95 % intervals",
        "          Factor  by itself        with interactions",
        "          pH      32 % (28 to 36)  50 % (45 to 55)",
        "          Salt    50 % (40 to 60)  68 % (60 to 70)",
        "          Factors vary independently and evenly over their whole range.",
    ]


@pytest.mark.parametrize(
    ("p", "said"),
    [(0.0, "under 0.01"), (0.0075, "under 0.01"), (0.37, "0.37"), (1.0, "over 0.99")],
)
def test_a_chance_counted_from_draws_is_never_a_certainty(
    study: Study, p: float, said: str
) -> None:
    table = pd.DataFrame({**ROWS, "p_negligible": [p, 0.5]}, index=FACTORS)
    shown_lines = lines(study, {"recovery": table}, 0.05)
    assert "moves it by less than 0.05: probability" in shown_lines[1]
    assert shown_lines[2].endswith(f"(45 to 55)    {said}")


def test_limits_that_are_left_aside_are_named(tmp_path: Path) -> None:
    toml = STUDY + '\n[[limits]]\nallow = "salt <= 400"\n'
    plate = "well,ph,salt,recovery\nA1,5.5,200,0.5\n"
    study = open_study(small(tmp_path, toml=toml, plate=plate))
    said = lines(study, {"recovery": pd.DataFrame(ROWS, index=FACTORS)}, None)[-1]
    assert said.strip() == (
        "Factors vary independently and evenly over their whole range; [[limits]] are left aside."
    )


def test_every_response_has_its_table_with_its_unit(tmp_path: Path) -> None:
    files = {"study.toml": ONE_FACTOR, "plates/plate-01.csv": one_factor_plate()}
    study = open_study(write(tmp_path, files))  # type: ignore[arg-type]
    one = {name: values[:1] for name, values in ROWS.items()}
    table = pd.DataFrame({**one, "p_negligible": [0.5]}, index=pd.Index(["salt"], name="factor"))
    said = lines(study, {"hcp": table, "recovery": table}, 20.0)
    assert [line.split(":")[0].split()[-1] for line in said if "share of" in line] == [
        "Recovery",
        "HCP",
    ]
    assert "less than 20: probability" in said[1]
    assert "less than 20 ng/mL: probability" in said[4]


def test_before_any_reading_nothing_can_be_told(study: Study) -> None:
    assert influence_lines(study, {}, None) == [
        "Nothing has been read yet, so no influence can be told."
    ]


def test_facts_have_a_row_a_factor() -> None:
    table = pd.DataFrame({**ROWS, "p_negligible": [0.1, 0.5]}, index=FACTORS)
    facts = influence_facts({"recovery": table}, 0.05)
    assert facts["negligible"] == 0.05
    rows = facts["responses"]["recovery"]
    assert [row["factor"] for row in rows] == ["ph", "salt"]
    assert rows[1]["total_high"] == 0.7
    assert rows[0]["p_negligible"] == 0.1
