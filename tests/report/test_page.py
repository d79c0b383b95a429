"""The page: it stands alone, reads well without eyes, and says what the screens say."""

from __future__ import annotations

import itertools
import json
import re
from dataclasses import replace
from importlib.resources import files
from pathlib import Path
from typing import Any

import pandas as pd
import pytest

from muntin.record import open_study
from muntin.report.advice_files import json_text, read_inputs
from muntin.report.page.answer import answer, standing_word
from muntin.report.page.build import Page
from muntin.report.page.phrases import fixed_name, measure
from muntin.report.text import window_lines
from muntin.report.words import share_text
from muntin.window.assessment import assess
from tests.report.browser import needs_browser, printed, probed
from tests.report.pages import HOSTILE, hostile_page
from tests.report.parsed import Element, parsed, table_of


@pytest.fixture(scope="module")
def page(tmp_path_factory: pytest.TempPathFactory) -> Page:
    return hostile_page(tmp_path_factory.mktemp("page") / "study")


@pytest.fixture(scope="module")
def read(page: Page) -> Element:
    return parsed(page.html)


def test_headings_come_in_order(read: Element) -> None:
    levels = [int(h.tag[1]) for h in read.every("h1", "h2", "h3", "h4", "h5", "h6")]
    assert levels[0] == 1
    assert levels.count(1) == 1
    assert len(levels) > 8
    assert all(below <= above + 1 for above, below in itertools.pairwise(levels))


def test_language_and_title_are_given(read: Element) -> None:
    assert read.one("html").attributes["lang"] == "en"
    assert read.one("title").text == read.one("h1").text == HOSTILE


def test_everything_from_the_study_is_escaped(page: Page, read: Element) -> None:
    assert "<script>alert" not in page.html
    assert "lab <2>" not in page.html
    assert {"application/json", ""} >= {s.attributes.get("type", "") for s in read.every("script")}
    left_out = table_of(read, "Left out of the calculation")
    assert [row["because"] for row in left_out] == [HOSTILE]
    assert [row["value"] for row in table_of(read, "Kept fixed")] == ["200", HOSTILE]
    assert table_of(read, "Plates that were run")[0]["by"] == "lab <2>"


def test_the_page_needs_no_other_file(page: Page, read: Element) -> None:
    for element in read.every():
        for name in ("src", "href", "xlink:href", "action", "data", "srcset", "poster"):
            address = element.attributes.get(name, "#")
            assert address.startswith("#"), f"{element.tag} {name}={address}"
    assert not read.every("link", "iframe", "object", "embed", "img", "base")
    style = read.one("head").one("style").text
    assert "@import" not in style
    assert "url(" not in style
    used = re.findall(r"url\(([^)]*)\)", page.html)
    assert all(address.startswith("#") for address in used)


def test_ids_are_unique_and_what_points_at_them_finds_them(read: Element) -> None:
    ids = [e.attributes["id"] for e in read.every() if "id" in e.attributes]
    assert len(ids) == len(set(ids))
    for element in read.every():
        for name in ("aria-labelledby", "href", "xlink:href"):
            target = element.attributes.get(name, "").removeprefix("#")
            assert not target or target in ids, f"{name}={target}"


def test_every_figure_has_a_text_in_its_place(page: Page, read: Element) -> None:
    assert "map" in [figure.name for figure in page.figures]
    drawings = [e for e in read.every("div") if e.attributes.get("role") == "img"]
    assert len(drawings) == len(page.figures) == len(read.every("figure"))
    for drawing, shown in zip(drawings, read.every("figure"), strict=True):
        (caption,) = shown.every("figcaption")
        assert drawing.attributes["aria-labelledby"] == caption.attributes["id"]
        assert len(caption.text.split()) > 5


def test_tables_have_captions_and_headings_with_scope(read: Element) -> None:
    tables = read.every("table")
    assert len(tables) > 8
    for table in tables:
        assert table.one("caption").text
        assert all(c.attributes["scope"] == "col" for c in table.one("thead").every("th"))
        for row in table.one("tbody").every("tr"):
            first, *others = row.every("th", "td")
            assert (first.tag, first.attributes["scope"]) == ("th", "row")
            assert all(cell.tag == "td" for cell in others)
            assert len(others) + 1 == len(table.one("thead").every("th"))


def _luminance(colour: str) -> float:
    """Relative luminance of #rrggbb (WCAG 2.1, definition)."""
    shares = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
    linear = [s / 12.92 if s <= 0.04045 else ((s + 0.055) / 1.055) ** 2.4 for s in shares]
    return sum(w * s for w, s in zip((0.2126, 0.7152, 0.0722), linear, strict=True))


def contrast(one: str, other: str) -> float:
    """Contrast ratio of two colours (WCAG 2.1, definition)."""
    high, low = sorted((_luminance(one), _luminance(other)), reverse=True)
    return (high + 0.05) / (low + 0.05)


def test_contrast_of_known_pairs() -> None:
    # WCAG 2.1: black on white is 21:1; #767676 is the palest grey that passes on white, as 4.54.
    assert contrast("#000000", "#ffffff") == pytest.approx(21.0)
    assert contrast("#767676", "#ffffff") == pytest.approx(4.54, abs=0.005)


def test_letters_stand_out_from_the_paper() -> None:
    style = files("muntin.report.page").joinpath("page.css").read_text(encoding="utf-8")
    colours = dict(re.findall(r"--(\w+): (#[0-9a-f]{6});", style))
    letters = set(re.findall(r"[^-]color: var\(--(\w+)\)", style))
    assert letters >= {"ink", "quiet", "blue", "good", "note", "bad"}
    for name in letters:
        for paper in ("paper", "tint"):
            assert contrast(colours[name], colours[paper]) >= 4.5, (name, paper)
    outside = re.sub(r":root \{[^}]*\}", "", style)
    assert not re.findall(r"#[0-9a-f]{3,6}\b", outside), "colours are named in :root"


def test_the_answer_is_three_sentences_with_the_numbers_of_the_facts(
    page: Page, read: Element
) -> None:
    told = [item.text for item in read.one("section", id="answer").one("ol").every("li")]
    assert told == page.facts["answer"] == list(answer(page.basis))
    assert len(told) == 3
    window = page.facts["window"]
    passes = share_text(window["set_point"]["probability"])
    assert f"{passes} of new wells pass" in told[0]
    assert f"{share_text(window['share'])} of the range reaches" in told[1]
    assert f"{share_text(window['wrong_share'])} of the range may still" in told[1]
    assert told[2] == page.facts["plan"]["verdict"]["sentence"]


def test_a_set_point_at_the_end_of_a_range_is_told_in_the_answer(page: Page) -> None:
    window = page.basis.window
    assert window is not None
    moved = {"ph": 7.5, "salt": 250.0, "probability": 0.934}
    basis = replace(page.basis, window=replace(window, share=0.2, setpoint=pd.Series(moved)))
    assert answer(basis)[0].endswith("); the range ends at pH 7.5: no data lie beyond.")
    none = replace(basis, window=replace(basis.window, share=0.0))
    assert answer(none)[0].endswith("new wells pass; the range ends at pH 7.5: no data lie beyond.")
    basis = replace(
        page.basis, window=replace(basis.window, setpoint=pd.Series({**moved, "ph": 6.0}))
    )
    assert answer(basis)[0].endswith("(Recovery at least 0.8).")


def test_no_line_ends_between_a_number_and_its_per_cent(page: Page) -> None:
    text = re.sub(r"<(style|script|svg)\b.*?</\1>", "", page.html, flags=re.DOTALL)
    assert len(re.findall("\\d\u00a0%", text)) > 20
    assert not re.findall(r"\d\s+%", text.replace("\u00a0", ""))


def test_what_was_asked_beforehand_is_told(read: Element) -> None:
    said = [p.text for p in read.one("section", id="holds-for").every("p")]
    assert said[0] == (
        "Asked: Recovery at least 0.8. A condition lies in the window where the probability that a "
        "new well on a new plate passes reaches 0.90."
    )
    assert said[1] == (
        "The series stops once 2 % of the range or less may be called wrongly (on record since "
        "2026-05-04, before any reading)."
    )


def test_the_window_is_told_as_on_the_screen(page: Page, read: Element) -> None:
    said = [p.text for p in read.one("section", id="window").every("p")]
    for line in window_lines(page.basis.view, page.basis.window, 99, page.basis.handed):
        assert line in said


def test_the_plan_is_that_of_the_facts(page: Page, read: Element) -> None:
    rows = table_of(read, "Conditions of plate-03")
    run = [w for w in page.facts["plan"]["wells"] if w["role"] in ("test", "bridge", "reference")]
    told = {
        (well, row["role"], float(row["pH"]), float(row["Salt (mM)"]))
        for row in rows
        for well in row["wells"].split(", ")
    }
    assert told == {(w["well"], w["role"], w["ph"], w["salt"]) for w in run}
    forecast = table_of(read, "What more test wells")
    assert [int(row["test wells"].split()[0]) for row in forecast] == [
        row["wells"] for row in page.facts["plan"]["forecast"]
    ]


def test_every_check_has_its_verdict_in_words(page: Page, read: Element) -> None:
    rows = table_of(read, "What was checked")

    def verdict(check: dict[str, Any]) -> str:
        if check["passed"]:
            return "passed" if check["told"] else "too few"
        return "FAILED" if check["serious"] else "note"

    expected = {(c["name"], verdict(c), c["sentence"]) for c in page.facts["checks"]}
    assert {tuple(row.values()) for row in rows} == expected


def test_what_was_left_out_is_told_with_its_reading_and_what_it_would_change(
    page: Page, read: Element
) -> None:
    (row,) = table_of(read, "Left out of the calculation")
    assert (row["plate"], row["well"], row["reading"]) == ("plate-01", "A5", "0.500")
    said = [p.text for p in read.one("section", id="left-out").every("p")]
    put_back = page.facts["put_back"]
    assert put_back["readings"] == 1
    for told, facts in ((said[0], page.facts["window"]), (said[1], put_back)):
        assert f"{share_text(facts['wrong_share'])} may be called wrongly" in told
        assert share_text(facts["set_point"]["probability"]) in told
    assert put_back["share"] < page.facts["window"]["share"]


def test_putting_back_equals_a_study_in_which_nothing_was_left_out(
    page: Page, tmp_path: Path
) -> None:
    folder = tmp_path / "whole"
    for name, content in read_inputs(page.basis.study.folder).items():
        path = folder / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(content)
    table = folder / "plates/plate-01.csv"
    lines = [
        line.split(",0.5,")[0] + ",0.5," if ",0.5," in line else line
        for line in table.read_text().splitlines()
    ]
    table.write_text("\n".join(lines) + "\n")
    window = assess(open_study(folder), surrogate="quadratic").window()
    assert page.facts["put_back"]["share"] == window.share
    assert page.facts["put_back"]["set_point"] == window.setpoint.to_dict()


def test_the_protein_adds_up(page: Page, read: Element) -> None:
    rows = table_of(read, "Protein, mg")
    left = 0.0
    for row in rows:
        left += float(row["mg"])
        assert float(row["left, mg"]) == pytest.approx(left)
    # 40 mg at hand; 12 and 6 wells of 0.25 mg; 10 mg kept back; then the plan.
    assert [row["left, mg"] for row in rows[:-1]] == ["40", "37", "35.5", "25.5"]
    assert float(rows[-1]["mg"]) == -page.facts["plan"]["protein_mg"]


def test_inputs_versions_and_seed_are_told(page: Page, read: Element) -> None:
    hashed = table_of(read, "Files that were read")
    assert {row["file"]: row["SHA-256"] for row in hashed} == page.facts["inputs"]
    made = {row["what"]: row["value"] for row in table_of(read, "How it was made")}
    assert made["seed"] == "1"
    assert made["version of numpy"] == page.facts["versions"]["numpy"]
    assert {row["whose"] for row in table_of(read, "Priors of Recovery")} == {"built in"}


def test_pointing_at_the_map_tells_the_probabilities_of_the_window(
    page: Page, read: Element
) -> None:
    told = json.loads(read.one("script", id="pointing-data").text)
    window = page.basis.window
    assert window is not None
    grid = window.grid.set_index(["ph", "salt"])["probability"]
    (panel,) = told["panels"]
    assert len(panel["p"]) == len(panel["y"]["levels"]) == 9
    for j, salt in enumerate(panel["y"]["levels"]):
        for i, ph in enumerate(panel["x"]["levels"]):
            assert panel["p"][j][i] == round(1000 * grid[ph, salt])
    assert panel["x"]["texts"][0] == "pH 4.5"
    assert panel["y"]["texts"][-1] == "Salt 450 mM"


def test_the_facts_are_plain_json(page: Page) -> None:
    again = json.loads(json_text(page.facts))
    assert again["command"] == "report"
    assert again["standing"] == standing_word(page.basis)


def test_numbers_in_words() -> None:
    assert [measure(v) for v in (0.95, 0.9168, 12.0, 123.4, 1234.5)] == [
        "0.950",
        "0.917",
        "12.0",
        "123",
        "1234",
    ]
    assert [fixed_name(n) for n in ("elution_volume_ul", "resin", "stages", "ul")] == [
        "elution volume, µL",
        "resin",
        "stages",
        "ul",
    ]


@needs_browser
@pytest.mark.parametrize("width", [500, 1280])
def test_in_a_browser_it_runs_without_an_error_and_text_fits(
    page: Page, tmp_path: Path, width: int
) -> None:
    found, console = probed(page.html, tmp_path, width)
    assert found["errors"] == []
    assert console == []
    assert found["sideways"] <= 0, "the page can be scrolled sideways"
    assert found["cut"] == []
    assert found["covered"] == []


@needs_browser
def test_in_a_browser_the_map_tells_what_is_pointed_at(page: Page, tmp_path: Path) -> None:
    found, _ = probed(page.html, tmp_path, 1280)
    window = page.basis.window
    assert window is not None
    grid = window.grid.set_index(["ph", "salt"])["probability"]
    # The middle of the range, then a step up along pH.
    for told, ph in ((found["pointed"], 6.0), (found["stepped"], 6.5)):
        p = grid[ph, 250.0]
        assert told == f"pH {ph}, Salt 250 mM: {share_text(round(p, 3))} of new wells pass"
    ((frame,),) = [figure.frames for figure in page.figures if figure.name == "map"]
    (left, right), (low, high) = frame.x_ends, frame.y_ends
    assert found["marked"] == pytest.approx(
        [
            frame.left + frame.width * (6.0 - left) / (right - left),
            frame.top + frame.height * (high - 250.0) / (high - low),
        ],
        abs=0.002,
    )
    assert found["unpointed"] == "Point at the map, or move over it with the arrow keys."


@needs_browser
def test_in_a_browser_it_prints(page: Page, tmp_path: Path) -> None:
    pdf = printed(page.html, tmp_path)
    assert pdf.startswith(b"%PDF")
    # A4 in points.
    boxes = {tuple(map(float, b.split())) for b in re.findall(rb"/MediaBox \[([^\]]+)\]", pdf)}
    assert boxes
    for _, _, width, height in boxes:
        assert (width, height) == pytest.approx((595.3, 841.9), abs=1.0)
