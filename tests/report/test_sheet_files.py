"""The sheets on disk: tables that add up, a checklist with its cautions, whole or not at all."""

from __future__ import annotations

import csv
import hashlib
import re
from collections import defaultdict
from decimal import Decimal
from pathlib import Path
from typing import Any

import pytest

from muntin.bench.sheets import Sheets, prepare
from muntin.record import StudyFaults, open_study
from muntin.record.faults import Findings
from muntin.record.ledger import LEDGER, Entry
from muntin.record.stocks import planned_stocks
from muntin.record.writing import writing
from muntin.report.cautions import bench_cautions
from muntin.report.checklist import checklist_lines
from muntin.report.sheet_files import sheet_files, sheets_folder, sheets_replaced
from muntin.report.sheet_tables import sheet_tables
from muntin.report.text_pages import text_pages
from tests.bench.bottled import BENCH, bottled, opened
from tests.report.studies import tree

CONTROL = {"ph": 6.0, "salt": 250}
NAMES = ["map.png", "map.pdf", "checklist.txt", "checklist.pdf"]
TABLES = ["conditions.csv", "recipes.csv", "stocks.csv", "transfers.csv", "totals.csv"]


def made(folder: Path, **changed: Any) -> Sheets:
    return prepare(opened(folder, **{"control_condition": CONTROL, **changed}))


def rows_of(text: str) -> list[dict[str, str]]:
    return list(csv.DictReader(text.splitlines()))


CONDITIONS = """\
condition,ph,salt,count,wells
1,5.0,100,2,A1 C4
2,5.0,400,1,A2
3,4.5,50,1,B3
"""
RECIPES = """\
ph,salt,stock,ml_per_l,ul_per_well,count,wells
5.0,100,low salt (pH 5.0),800.00,320,2,A1 C4
5.0,100,high salt (pH 5.0),200.00,80,2,A1 C4
5.0,400,low salt (pH 5.0),200.00,80,1,A2
5.0,400,high salt (pH 5.0),800.00,320,1,A2
4.5,50,low salt (pH 4.5),900.00,360,1,B3
4.5,50,high salt (pH 4.5),100.00,40,1,B3
6.0,250,low salt (pH 6.0),500.00,200,2,D5 F7
6.0,250,high salt (pH 6.0),500.00,200,2,D5 F7
"""
TOTALS = """\
stock,wells,drawn_ul,dead_ul,needed_ul
load,6,750,1000,1750
low salt (pH 4.5),1,360,1000,1360
high salt (pH 4.5),1,40,1000,1040
low salt (pH 5.0),3,720,1000,1720
high salt (pH 5.0),3,480,1000,1480
low salt (pH 6.0),2,400,1000,1400
high salt (pH 6.0),2,400,1000,1400
"""


FORM = """\
bottle,factor,target,measured
low salt (pH 4.5),ph,4.5,
low salt (pH 4.5),salt,0,
high salt (pH 4.5),ph,4.5,
high salt (pH 4.5),salt,500,
"""


def test_the_form_of_the_stocks_fills_in_and_comes_back(tmp_path: Path) -> None:
    sheets = made(tmp_path)
    form = sheet_tables(sheets)["stocks.csv"]
    assert form.startswith(FORM)
    assert len(form.splitlines()) == 1 + 2 * len(sheets.bottles)
    (tmp_path / "stocks").mkdir()
    (tmp_path / "stocks" / "plate-02.csv").write_text(form.replace("4.5,\n", "4.5,4.52\n"))
    found = Findings()
    told = planned_stocks(tmp_path, sheets.study.definition, "plate-02", found)
    assert found.faults == []
    assert [(s.bottle, s.factor, s.measured) for s in told] == [
        ("low salt (pH 4.5)", "ph", 4.52),
        ("high salt (pH 4.5)", "ph", 4.52),
    ]


def test_a_form_that_was_filled_in_is_not_replaced(tmp_path: Path) -> None:
    folder = tmp_path / "sheets" / "plate-02"
    put(folder, {"stocks.csv": FORM})
    assert put(folder, {"stocks.csv": FORM}) == "Replaces the sheets that were there."
    (folder / "stocks.csv").write_text(FORM.replace("0,\n", "0,1\n"))
    before = tree(folder)
    with pytest.raises(
        StudyFaults, match=r"row 3, column measured: 1 was filled in .* stocks/plate-02\.csv"
    ):
        put(folder, {"stocks.csv": FORM})
    assert tree(folder) == before


def test_the_tables_by_hand(tmp_path: Path) -> None:
    tables = sheet_tables(made(tmp_path))
    assert tables["conditions.csv"] == CONDITIONS
    assert tables["recipes.csv"] == RECIPES
    assert tables["totals.csv"] == TOTALS
    assert [*rows_of(tables["transfers.csv"])[0]] == ["stock", "well", "draw_ul"]


def test_the_written_draws_add_up_to_the_written_totals(tmp_path: Path) -> None:
    tables = sheet_tables(made(tmp_path, well_ul=333.3, pipette_step_ul=0.1))
    sums: dict[str, Decimal] = defaultdict(Decimal)
    wells: dict[str, Decimal] = defaultdict(Decimal)
    for row in rows_of(tables["transfers.csv"]):
        sums[row["stock"]] += Decimal(row["draw_ul"])
        if row["stock"] != "load":
            wells[row["well"]] += Decimal(row["draw_ul"])
    listed = {row["stock"]: Decimal(row["drawn_ul"]) for row in rows_of(tables["totals.csv"])}
    assert listed == sums
    assert wells == dict.fromkeys(["A1", "A2", "B3", "C4", "D5", "F7"], Decimal("333.3"))


@pytest.mark.parametrize(
    ("changed", "left"),
    [
        ({}, TABLES),
        ({"protein_mg_per_ml": None, "well_ul": None}, TABLES[:3]),
        ({"stocks": None}, ["conditions.csv", "transfers.csv", "totals.csv"]),
        ({"stocks": None, "protein_mg_per_ml": None}, ["conditions.csv"]),
    ],
)
def test_tables_of_which_nothing_is_known_are_left_out(
    tmp_path: Path, changed: dict[str, Any], left: list[str]
) -> None:
    assert [*sheet_tables(made(tmp_path, **changed))] == left


def test_shares_without_volumes(tmp_path: Path) -> None:
    row = rows_of(sheet_tables(made(tmp_path, well_ul=None))["recipes.csv"])[0]
    assert (row["ml_per_l"], row["ul_per_well"]) == ("800.00", "")


def test_all_files_are_there_and_the_same_each_time(tmp_path: Path) -> None:
    sheets = made(tmp_path)
    files = sheet_files(sheets)
    assert [*files] == [*NAMES, *TABLES]
    assert sheet_files(sheets) == files
    assert sheets_folder(sheets) == tmp_path / "sheets" / "plate-02"
    assert bytes(files["map.png"]).startswith(b"\x89PNG")
    boxes = re.findall(rb"/MediaBox \[ ([0-9. ]+) \]", bytes(files["map.pdf"]))
    # A4 in points, the long side across, and one page: nothing is told by number.
    assert [[round(float(side)) for side in box.split()] for box in boxes] == [[0, 0, 842, 595]]
    lists = re.findall(rb"/MediaBox \[ ([0-9. ]+) \]", bytes(files["checklist.pdf"]))
    assert {tuple(round(float(side)) for side in box.split()) for box in lists} == {
        (0, 0, 595, 842)
    }


def test_the_fingerprint_is_that_of_the_plan(tmp_path: Path) -> None:
    sheets = made(tmp_path)
    plan = tmp_path / "plans" / "plate-02.csv"
    digest = hashlib.sha256(plan.read_bytes()).hexdigest()
    assert sheets.digest == digest
    assert any(digest[:8] in line for line in checklist_lines(sheets, []))


def test_the_checklist_names_every_hazard_and_stock(tmp_path: Path) -> None:
    sheets = made(tmp_path)
    text = "\n".join(checklist_lines(sheets, [*NAMES, *TABLES]))
    flat = " ".join(text.split())
    for word in (
        "Development aid, not for release decisions",
        "Site procedures",
        "acid into water",
        "caustic",
        "Azide",
        "rotor",
        "bleach away from acid",
    ):
        assert word.lower() in flat.lower()
    for total in sheets.totals:
        assert f"[ ] {total.stock}" in text
    for name in ["map.png", "map.pdf", *TABLES]:
        assert name in flat
    assert "the wells take 1.5 mg, 2 mg stay in the trough; before it 27 mg are left beyond" in flat
    assert all(len(line) <= 84 for line in text.splitlines())


def test_harsh_ph_is_cautioned() -> None:
    mild, sour, caustic = (bench_cautions(ph) for ph in ([4.0, 8.5], [3.9, 6.0], [6.0, 8.6]))
    assert mild == bench_cautions()
    assert sour == caustic
    assert set(sour) - set(mild) == {
        "Below pH 4 and above pH 8.5 a hold can aggregate the product: keep it short, neutralise."
    }


def test_a_bench_that_knows_nothing_has_a_map_and_a_checklist(tmp_path: Path) -> None:
    folder = bottled(tmp_path, protein="", **dict.fromkeys(BENCH))
    files = sheet_files(prepare(open_study(folder)))
    assert [*files] == [*NAMES, "conditions.csv"]
    assert "No stocks are given" in str(files["checklist.txt"])


def test_pages_hold_every_line_once() -> None:
    # One heading would stand third from the foot of the first page.
    lines = [f"HEAD {n}" if n % 55 == 0 else f"line {n} $x^2$" for n in range(150)]
    pages = text_pages(lines)
    shown = [t.get_text() for page in pages for t in page.texts if "page" not in t.get_text()]
    assert shown == lines
    for page in pages:
        page.draw_without_rendering()
        assert not any(t.get_text().startswith("HEAD") for t in page.texts[-4:-1])


def test_a_last_page_of_a_few_lines_is_spared() -> None:
    (page, last) = text_pages([f"line {n}" for n in range(120)])
    assert len(page.texts) == 61
    low = min(t.get_position()[1] for t in page.texts if "page" not in t.get_text())
    # The lowest line, 9 points high, ends above the foot.
    assert low - 9 / 72 / 11.69 > 0.05
    assert len(last.texts) == 61
    assert len(text_pages([f"line {n}" for n in range(140)])) == 3


def put(folder: Path, files: dict[str, str | bytes]) -> str:
    """Write sheets as `prepare` does; return the remark."""
    with writing(folder.parents[1]) as pen:
        removed, remark = sheets_replaced(folder, files)
        own = {folder / name: content for name, content in files.items()}
        pen.commit(own, Entry(command="prepare"), removed)
    (folder.parents[1] / LEDGER).unlink()
    return remark


def test_sheets_make_way_for_new_ones_and_what_is_not_theirs_stays(tmp_path: Path) -> None:
    folder = tmp_path / "sheets" / "plate-02"
    assert put(folder, {"map.png": b"one", "totals.csv": "old"}) == ""
    (folder / "scan.jpg").write_bytes(b"mine")
    (folder / "photos").mkdir()
    (folder / "photos" / "a.jpg").write_bytes(b"too")
    assert put(folder, {"map.png": b"two"}) == "Replaces the sheets that were there."
    assert tree(folder.parent) == {
        "plate-02/map.png": b"two",
        "plate-02/scan.jpg": b"mine",
        "plate-02/photos/a.jpg": b"too",
    }


def test_a_file_in_the_way(tmp_path: Path) -> None:
    (tmp_path / "sheets").write_text("mine")
    with pytest.raises(StudyFaults, match="is a file where a folder belongs"):
        put(tmp_path / "sheets" / "plate-02", {"map.png": b"one"})
    assert tree(tmp_path) == {"sheets": b"mine"}
