"""The page tells what was changed since earlier advice, and the reasons that were given."""

from __future__ import annotations

from pathlib import Path

import pytest

from muntin.report.page.build import Page
from tests.record.test_changes import PLATE, advised, changed
from tests.report.pages import HOSTILE, PLAIN, page_of
from tests.report.parsed import Element, parsed, table_of
from tests.report.studies import second_plate, small, write

OPEN = (
    "CHANGED since advice/plate-03/r1, and no reason was given: study.toml, responses, recovery, "
    "at_least: 0.8, now 0.7; plate-01, recovery: A1 0.021, now 0.5."
)
STOP = "\n[stop]\nwrong_share = 0.05\nchanged_because = "
RECORDED = (
    '{"date":"2026-05-04","wrong_share":0.02,"best_probability":null,"wells_read":0,"reason":""}\n'
    '{"date":"2026-06-01","wrong_share":0.05,"best_probability":null,"wells_read":12,'
    '"reason":"the feed runs out"}\n'
)


@pytest.fixture
def study(tmp_path: Path) -> Path:
    """A study of two plates on which an advice rests."""
    toml = PLAIN + STOP + '"the feed runs out"\n'
    folder = write(small(tmp_path / "study", toml=toml), {"plates/plate-02.csv": second_plate()})
    (folder / "stop-rule.jsonl").write_text(RECORDED)
    advised(folder, 1)
    return folder


def section(page: Page) -> Element | None:
    found = [e for e in parsed(page.html).every("section") if e.attributes["id"] == "changes"]
    return found[0] if found else None


def test_open_changes_and_reasons_are_told(study: Path) -> None:
    changed(study, PLATE, "^A1,test,4.5,50,0.021,$", "A1,test,4.5,50,0.5,")
    changed(study, "study.toml", "at_least = 0.8", "at_least = 0.7")
    page = page_of(study, wells=0)
    told = section(page)
    assert told is not None
    assert [p.text for p in told.every("p")] == [OPEN]
    assert [e.text for e in told.every("caption")] == ["Stop rules on record"]
    assert (page.facts["changes"]["said"], page.facts["changes"]["explained"]) == (
        OPEN.partition(": ")[2].removesuffix(".").split("; "),
        [],
    )
    advised(study, 2, because=HOSTILE)
    changed(study, PLATE, "^A2,test,5.0,250,0.389,$", "A2,test,5.0,250,0.389,it dripped")
    page = page_of(study, wells=0)
    told = section(page)
    assert told is not None
    assert [p.text for p in told.every("p")] == [
        "Left out since advice/plate-03/r2, with a reason: plate-01, recovery: left out A2 0.389: "
        "it dripped."
    ]
    (row,) = table_of(told, "Changes that were explained")
    (explained,) = page.facts["changes"]["explained"]
    assert explained["line"] == 2
    assert (row["date"], row["who"]) == (explained["time"][:10], "lab 2")
    assert (row["why"], row["what was changed"]) == (HOSTILE, OPEN.partition(": ")[2][:-1])


@pytest.mark.slow
def test_changes_of_the_stop_rule_are_told(study: Path) -> None:
    told = section(page_of(study, wells=0))
    assert told is not None
    assert [[*row.values()] for row in table_of(told, "Stop rules on record")] == [
        ["2026-05-04", "wrong_share 0.02", "0", ""],
        ["2026-06-01", "wrong_share 0.05", "12", "the feed runs out"],
    ]
    changed(study, "study.toml", "wrong_share = 0.05", "wrong_share = 0.1")
    told = section(page_of(study, wells=0))
    assert told is not None
    assert "wrong_share 0.1 in place of wrong_share 0.05" in told.text
    assert "THE RECORDED RULE HOLDS" in told.text


def test_where_nothing_was_changed_nothing_is_told(tmp_path: Path) -> None:
    folder = small(tmp_path / "study", toml=PLAIN)
    advised(folder, 1)
    assert section(page_of(folder, wells=0)) is None
