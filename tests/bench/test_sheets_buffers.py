"""Sheets with buffers: bottles that are made from acid and base forms, and wells that are."""

from __future__ import annotations

import csv
from collections import defaultdict
from decimal import Decimal
from math import ceil
from pathlib import Path
from typing import Any

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from muntin.bench.gaps import gaps
from muntin.bench.sheets import prepare
from muntin.record import StudyFaults
from muntin.report.checklist import checklist_lines
from muntin.report.sheet_tables import sheet_tables
from tests.bench.bottled import HIGH, LOW, opened

QUICK = settings(
    deadline=None,
    derandomize=True,
    max_examples=25,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)
ACETATE = {"name": "acetate", "mm": 20, "stock_mm": 200, "below_ph": 5.8}
MES = {"name": "MES", "mm": 20, "stock_mm": 200, "from_ph": 5.8, "below_ph": 6.8}
PHOSPHATE = {"name": "phosphate", "mm": 20, "stock_mm": 200, "from_ph": 6.8}
FORMS: dict[str, Any] = {
    "buffers": [ACETATE, MES, PHOSPHATE],
    "salt_factor": "salt",
    "salt_stock_mm": 2000,
}
DIRECT = {**FORMS, "stocks": None, "pipette_floor_ul": None, "pipette_step_ul": 0.1}
ROWS = [("A1", "test", 5.0, 100), ("B2", "test", 7.0, 400), ("C3", "test", 5.0, 100)]

conditions = st.tuples(
    st.integers(0, 6).map(lambda n: 4.5 + 0.5 * n), st.integers(0, 8).map(lambda n: 50 + 50 * n)
)


def rows_of(text: str) -> list[dict[str, str]]:
    return list(csv.DictReader(text.splitlines()))


@given(st.lists(conditions, min_size=1, max_size=12))
@QUICK
def test_wells_from_forms_add_up(
    tmp_path_factory: pytest.TempPathFactory, chosen: list[tuple[float, int]]
) -> None:
    rows = [(f"A{n}", "test", *c) for n, c in enumerate(chosen, start=1)]
    sheets = prepare(opened(tmp_path_factory.mktemp("study"), rows=rows, **DIRECT))
    drawn: dict[str, dict[str, Decimal]] = defaultdict(dict)
    for t in sheets.transfers:
        drawn[t.well][t.stock] = sheets.pipette.ul(t.steps)
    for well, _, ph, salt in rows:
        liquid = {stock: v for stock, v in drawn[well].items() if stock != "load"}
        assert sum(liquid.values()) == 400
        # 20 of 200 mM buffer in both forms, and the salt in its stock of 2 M, to a pipette step.
        assert abs(float(liquid["NaCl 2000 mM"]) - 400 * salt / 2000) < 0.1
        forms = [float(v) for s, v in liquid.items() if s not in ("NaCl 2000 mM", "water")]
        assert abs(sum(forms) - 40) < 0.2
        made = next(of.mix.made for of in sheets.mixes if well in of.wells)
        assert abs(made.get("ph", ph) - ph) < 0.05
        assert abs(made["salt"] - salt) < 1
    used: dict[str, int] = defaultdict(int)
    for t in sheets.transfers:
        used[t.stock] += t.steps
    assert {t.stock: t.listed_ul for t in sheets.totals} == {
        stock: sheets.pipette.ul(n) for stock, n in used.items()
    }


def test_the_stocks_are_drawn_buffer_by_buffer_with_water_last(tmp_path: Path) -> None:
    sheets = prepare(opened(tmp_path, rows=ROWS, **DIRECT))
    assert [total.stock for total in sheets.totals] == [
        "load",
        "acetic acid 200 mM",
        "sodium acetate 200 mM",
        "NaH2PO4 200 mM",
        "Na2HPO4 200 mM",
        "NaCl 2000 mM",
        "water",
    ]
    assert sheets.makings == {}
    assert len(gaps(sheets)) == 2


def test_what_the_forms_do_not_reach_is_refused_with_the_nearest(tmp_path: Path) -> None:
    keys = {**DIRECT, "salt_stock_mm": 440}
    with pytest.raises(StudyFaults) as raised:
        prepare(opened(tmp_path, rows=ROWS, **keys))
    (line,) = raised.value.lines()
    assert line.startswith("plans/plate-02.csv, well B2: ph 7.0, salt 400 ")
    # A tenth of the volume is buffer, which leaves room for 396 mM of salt.
    assert line.endswith("(nearest that works: ph 7.0, salt 350)")


def test_bottles_are_made_from_forms(tmp_path: Path) -> None:
    sheets = prepare(opened(tmp_path, rows=ROWS, **FORMS))
    names = [bottle.name for bottle in sheets.bottles]
    assert (
        [*sheets.makings]
        == names
        == [
            "low salt (pH 5.0)",
            "high salt (pH 5.0)",
            "low salt (pH 7.0)",
            "high salt (pH 7.0)",
        ]
    )
    for name, recipe in sheets.makings.items():
        assert sum(recipe.parts.values()) == pytest.approx(1.0)
        salt = 500 / 2000 if "high" in name else 0.0
        assert recipe.parts.get("NaCl 2000 mM", 0.0) == pytest.approx(salt)
    needed = {total.stock: ceil(total.needed_ul) for total in sheets.totals}
    table = rows_of(sheet_tables(sheets)["bottles.csv"])
    for name in names:
        own = [row for row in table if row["bottle"] == name]
        assert sum(int(row["ul"]) for row in own) == needed[name]
        assert sum(float(row["ml_per_l"]) for row in own) == pytest.approx(1000, abs=0.03)
    water = sum(int(row["ul"]) for row in table if row["stock"] == "water")
    flat = " ".join(" ".join(checklist_lines(sheets, [])).split())
    assert f", {water / 1000:g} mL of water" in flat


def test_the_checklist_shows_recipes_remarks_and_says_measure(tmp_path: Path) -> None:
    sheets = prepare(opened(tmp_path, rows=ROWS, **FORMS))
    flat = " ".join(" ".join(checklist_lines(sheets, [])).split())
    assert "Recipes are starting points: measure the pH" in flat
    assert sheets.buffers[0].startswith("The buffer changes along the pH (acetate at pH 5.0; phos")
    for sentence in sheets.buffers:
        assert sentence.endswith(".")
        assert sentence in flat
    for name, recipe in sheets.makings.items():
        assert f"[ ] {name} " in flat
        for remark in recipe.remarks:
            assert remark in flat
    direct = prepare(opened(tmp_path / "direct", rows=ROWS, **DIRECT))
    flat = " ".join(" ".join(checklist_lines(direct, [])).split())
    assert "- pH 5.0, Salt 100 mM (A1, C3): " in flat
    assert direct.buffers[0] == sheets.buffers[0]


def test_without_a_volume_bottles_have_shares(tmp_path: Path) -> None:
    keys = {**FORMS, "well_ul": None, "protein_mg_per_ml": None}
    table = rows_of(sheet_tables(prepare(opened(tmp_path, rows=ROWS, **keys)))["bottles.csv"])
    assert {row["ul"] for row in table} == {""}


def test_a_bottle_that_cannot_be_made_refuses_its_conditions(tmp_path: Path) -> None:
    keys = {**FORMS, "buffers": [ACETATE]}
    with pytest.raises(StudyFaults) as raised:
        prepare(opened(tmp_path, rows=ROWS, **keys))
    (line,) = raised.value.lines()
    assert line.startswith(
        "plans/plate-02.csv, well B2: ph 7.0, salt 400 needs low salt (pH 7.0), which "
    )
    assert line.endswith("(nearest that works: ph 5.5, salt 400)")


def test_the_strength_of_a_bottle_of_what_every_mix_holds_is_the_users_own(tmp_path: Path) -> None:
    stocks = [
        {**LOW, "holds": {"salt": 0, "buffer": 20}},
        {**HIGH, "holds": {"salt": 500, "buffer": 20}},
    ]
    sheets = prepare(
        opened(tmp_path, rows=ROWS, **{**FORMS, "stocks": stocks}, every_mix={"buffer": 20})
    )
    assert sheets.makings == {}


def test_recipes_that_every_mix_leaves_to_the_user_are_said_to_be_missing(tmp_path: Path) -> None:
    stocks = [{**s, "holds": {**s["holds"], "buffer": 20}} for s in (LOW, HIGH)]
    keys = {**FORMS, "stocks": stocks, "every_mix": {"buffer": 20}}
    told = gaps(prepare(opened(tmp_path, rows=ROWS, **keys)))
    (said,) = [s for s in told if "of buffer" in s]
    assert said.startswith("How much of buffer a bottle holds is your own (study.toml, [bench], ")
    assert "how to make low salt (pH 5.0), high salt (pH 5.0), low salt (pH 7.0)" in said


def test_wells_thinned_with_water_are_told(tmp_path: Path) -> None:
    water = {"name": "water"}
    whole = prepare(opened(tmp_path / "a", rows=ROWS, **FORMS)).buffers
    assert not any("thinned" in said for said in whole)
    keys = {**FORMS, "stocks": [HIGH, water]}
    told = prepare(opened(tmp_path / "b", rows=ROWS, **keys)).buffers
    (said,) = [s for s in told if "thinned" in s]
    # The wells of 100 mM take a fifth of 500 mM.
    assert said.startswith(
        "Wells thinned with water hold down to 20 % of the buffer in the bottles"
    )
