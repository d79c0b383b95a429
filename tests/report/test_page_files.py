"""The page on disk: whole or not at all, and nobody else's file is ever replaced."""

from __future__ import annotations

import hashlib
import json
import os
from pathlib import Path
from typing import cast

import pytest

from muntin.record import StudyFaults
from muntin.record.kept import kept_files
from muntin.record.ledger import LEDGER, Entry, read_ledger
from muntin.record.writing import writing
from muntin.report.drawn import Drawn
from muntin.report.page.basis import Basis
from muntin.report.page.build import Page
from muntin.report.page_files import PagePlace, WrittenPage, page_place, write_page
from tests.record.dying import dies_at
from tests.report.studies import small, tree


def page(html: str = "<p>one</p>", *names: str) -> Page:
    figures = tuple(
        Drawn(name=name, title="", says="", svg="<svg/>", png=f"{name} {html}".encode())
        for name in names or ("map", "forecast")
    )
    facts = {"command": "report", "answer": [html]}
    return Page(html=html, figures=figures, facts=facts, basis=cast("Basis", None))


def put(folder: Path, place: PagePlace, new: Page) -> WrittenPage:
    return write_page(folder, place, new, Entry(command="report"))


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    return small(tmp_path / "study")


@pytest.fixture
def place(folder: Path) -> PagePlace:
    return page_place(folder)


def faults_of(place: PagePlace, folder: Path, new: Page) -> list[str]:
    before = tree(folder.parent)
    with pytest.raises(StudyFaults) as caught:
        put(folder, place, new)
    assert tree(folder.parent) == before
    return [fault.file for fault in caught.value.faults]


def test_it_goes_to_report_in_the_study(place: PagePlace, folder: Path) -> None:
    written = put(folder, place, page()).paths
    names = ["report.html", "report.json", "report-figures/map.png", "report-figures/forecast.png"]
    assert [path.relative_to(folder / "report").as_posix() for path in written] == names
    assert set(tree(folder / "report")) == set(names)
    record = json.loads(place.record.read_text())
    assert (record["answer"], record["ledger"]) == (["<p>one</p>"], {"line": 1, "before": ""})


def test_out_names_page_record_and_figures(folder: Path, tmp_path: Path) -> None:
    place = page_place(folder, tmp_path / "to" / "hand-over.html")
    put(folder, place, page("<p>x</p>", "map"))
    assert set(tree(tmp_path / "to")) == {
        "hand-over.html",
        "hand-over.json",
        "hand-over-figures/map.png",
    }


@pytest.mark.parametrize("name", ["page.pdf", "page"])
def test_out_must_be_an_html_file(folder: Path, name: str) -> None:
    with pytest.raises(StudyFaults, match=r"the page is an \.html \(name it page\.html\)"):
        page_place(folder, folder / name)


def test_a_page_as_it_was_written_makes_way(place: PagePlace, folder: Path) -> None:
    put(folder, place, page("<p>one</p>", "map", "joint"))
    put(folder, place, page("<p>two</p>", "map", "forecast"))
    assert place.page.read_text() == "<p>two</p>"
    assert sorted(p.name for p in place.figures.iterdir()) == ["forecast.png", "map.png"]
    put(folder, place, page("<p>three</p>", "map"))
    assert [p.name for p in place.figures.iterdir()] == ["map.png"]


@pytest.mark.parametrize("name", ["report.html", "report.json", "report-figures/map.png"])
def test_files_that_muntin_did_not_write_stay(place: PagePlace, folder: Path, name: str) -> None:
    file = folder / "report" / name
    file.parent.mkdir(parents=True)
    file.write_text('{"mine": 1}')
    assert faults_of(place, folder, page()) == [str(file)]


@pytest.mark.parametrize("name", ["report.html", "report-figures/map.png"])
def test_files_that_were_changed_since_stay(place: PagePlace, folder: Path, name: str) -> None:
    put(folder, place, page())
    file = folder / "report" / name
    file.write_bytes(file.read_bytes() + b" note of mine")
    assert faults_of(place, folder, page("<p>two</p>")) == [str(file)]


def test_other_files_in_the_folder_are_left_alone(place: PagePlace, folder: Path) -> None:
    put(folder, place, page("<p>one</p>", "map", "joint"))
    others = [folder / "report" / "notes.txt", place.figures / "slides.txt"]
    for other in others:
        other.write_text("mine")
    put(folder, place, page("<p>two</p>", "map"))
    assert [other.read_text() for other in others] == ["mine", "mine"]


def test_the_same_page_again_leaves_the_same_files(place: PagePlace, folder: Path) -> None:
    put(folder, place, page())
    before = tree(folder / "report")
    put(folder, place, page())
    after = tree(folder / "report")
    assert before.pop("report.json") != after.pop("report.json")
    assert after == before


def test_a_place_that_cannot_be_written_leaves_what_was_there(
    place: PagePlace, folder: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    put(folder, place, page())
    true_replace = Path.replace

    def full(self: Path, target: Path) -> Path:
        if Path(target).name == "forecast.png" and b"two" in self.read_bytes():
            raise OSError(28, "No space left on device", str(self))
        return true_replace(self, target)

    monkeypatch.setattr(Path, "replace", full)
    assert faults_of(place, folder, page("<p>two</p>")) == [str(place.figures / "forecast.png")]


@pytest.mark.parametrize("steps", range(4))
def test_cut_off_at_any_file_the_next_page_is_written_all_the_same(
    place: PagePlace, folder: Path, steps: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    put(folder, place, page("<p>one</p>"))
    done: list[Path] = []
    true_replace = os.replace

    class Killed(BaseException):
        pass

    def killed(self: Path, target: Path) -> None:
        if len(done) == steps:
            raise Killed
        done.append(target)
        true_replace(self, target)

    with monkeypatch.context() as patch:
        patch.setattr(Path, "replace", killed)
        with pytest.raises(Killed):
            put(folder, place, page("<p>two</p>"))
    put(folder, place, page("<p>three</p>"))
    assert place.page.read_text() == "<p>three</p>"


def told(folder: Path) -> tuple[list[str], list[str]]:
    """What is said of the files on the lines of the ledger: what differs, and notes."""
    found = kept_files(folder, read_ledger(folder))
    return [*found.differs], [*found.notes]


def test_the_ledger_tells_of_the_page(place: PagePlace, folder: Path) -> None:
    put(folder, place, page("<p>one</p>", "map", "joint"))
    put(folder, place, page("<p>two</p>", "map"))
    first, second = (line.entry for line in read_ledger(folder).sound)
    files = {"report/report.html", "report/report.json", "report/report-figures/map.png"}
    assert set(second.results) == files
    assert set(first.results) == files | set(second.removed)
    assert second.removed == ("report/report-figures/joint.png",)
    assert told(folder) == ([], [])
    place.page.write_text("mine")
    ((said,), _) = told(folder)
    assert said.startswith("report/report.html was altered after it was written (line 2, ")


def test_a_page_may_be_moved_away(place: PagePlace, folder: Path) -> None:
    put(folder, place, page())
    place.page.rename(folder.parent / "handed-over.html")
    differs, (said,) = told(folder)
    assert differs == []
    assert said.startswith("report/report.html is no longer there (written with line 1, ")


def test_a_page_without_its_line_is_named(place: PagePlace, folder: Path) -> None:
    with writing(folder) as pen:
        pen.commit({}, Entry(command="advise"))
    began = (folder / LEDGER).read_bytes()
    put(folder, place, page())
    (folder / LEDGER).write_bytes(began)
    record = json.loads(place.record.read_text())
    place.record.write_text(json.dumps({**record, "written_at": "2999-01-01"}))
    said = "report/report.json is on no line of ledger.jsonl: its line was deleted or edited"
    assert told(folder) == ([said], [])
    (folder / LEDGER).unlink()
    assert told(folder)[0] == []


def test_a_page_elsewhere_has_its_line_in_the_study(folder: Path, tmp_path: Path) -> None:
    before, place = tree(folder), page_place(folder, tmp_path / "to" / "advice.html")
    put(folder, place, page())
    after = tree(folder)
    (line,) = read_ledger(folder).sound
    assert line.entry.results == {
        path.as_posix(): hashlib.sha256(path.read_bytes()).hexdigest()
        for path in (tmp_path / "to").rglob("*.*")
    }
    assert line.advice is None
    after.pop(LEDGER)
    assert after == before
    place.page.unlink()
    assert told(folder) == ([], [])


def test_a_page_elsewhere_is_put_back_where_its_line_cannot_be_written(
    folder: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    place = page_place(folder, tmp_path / "to" / "page.html")
    put(folder, place, page())
    monkeypatch.setattr("muntin.record.writing._put", full)
    assert faults_of(place, folder, page("<p>two</p>")) == [str(folder)]


def full(*_: object) -> None:
    raise OSError(28, "No space left on device")


def test_the_folder_may_be_named_in_another_way(
    folder: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(folder / "plates")
    put(Path(".."), page_place(Path(".."), folder / "to" / "page.html"), page("one", "map"))
    (line,) = read_ledger(folder).sound
    assert set(line.entry.results) == {"to/page.html", "to/page.json", "to/page-figures/map.png"}


def test_a_study_that_cannot_be_written(
    place: PagePlace, folder: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(os, "access", lambda path, _: folder not in (path, *path.parents))
    assert faults_of(place, folder, page()) == [str(folder)]
    place = page_place(folder, tmp_path / "to" / "page.html")
    written = put(folder, place, page())
    assert place.page.read_text() == "<p>one</p>"
    remark = f"{folder} cannot be written: ledger.jsonl has no line about this page."
    assert (written.ledger, written.remarks) == (None, (remark,))
    assert LEDGER not in tree(folder)


@pytest.mark.skipif(not hasattr(os, "fork"), reason="needs processes that fork")
def test_a_page_killed_while_it_is_written_is_whole_or_not_there(
    place: PagePlace, folder: Path
) -> None:
    put(folder, place, page("<p>one</p>", "map", "joint"))
    lines, step, dead = 1, 0, True
    while dead:
        step += 1
        new = page(f"<p>{step}</p>", "map", "joint" if step % 2 else "forecast")
        dead = dies_at(step, lambda new=new: put(folder, place, new))
        with writing(folder):
            pass
        ledger = read_ledger(folder)
        assert (ledger.problems, told(folder)) == ((), ([], []))
        assert (place.page.read_text() == f"<p>{step}</p>") == (len(ledger.texts) == lines + 1)
        lines = len(ledger.texts)
        assert len(tree(folder / "report")) == 4
    assert step > 20
    assert 2 < lines < step
