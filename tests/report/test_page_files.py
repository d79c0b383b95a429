"""The page on disk: whole or not at all, and nobody else's file is ever replaced."""

from __future__ import annotations

import json
import os
from pathlib import Path
from typing import cast

import pytest

from muntin.record import StudyFaults
from muntin.report.drawn import Drawn
from muntin.report.page.basis import Basis
from muntin.report.page.build import Page
from muntin.report.page_files import PagePlace, page_place, write_page
from tests.report.studies import small, tree


def page(html: str = "<p>one</p>", *names: str) -> Page:
    figures = tuple(
        Drawn(name=name, title="", says="", svg="<svg/>", png=f"{name} {html}".encode())
        for name in names or ("map", "forecast")
    )
    facts = {"command": "report", "answer": [html]}
    return Page(html=html, figures=figures, facts=facts, basis=cast("Basis", None))


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    return small(tmp_path / "study")


@pytest.fixture
def place(folder: Path) -> PagePlace:
    return page_place(folder)


def faults_of(place: PagePlace, folder: Path, new: Page) -> list[str]:
    before = tree(folder.parent)
    with pytest.raises(StudyFaults) as caught:
        write_page(place, new)
    assert tree(folder.parent) == before
    return [fault.file for fault in caught.value.faults]


def test_it_goes_to_report_in_the_study(place: PagePlace, folder: Path) -> None:
    written = write_page(place, page())
    names = ["report.html", "report.json", "report-figures/map.png", "report-figures/forecast.png"]
    assert [path.relative_to(folder / "report").as_posix() for path in written] == names
    assert set(tree(folder / "report")) == set(names)
    assert json.loads(place.record.read_text())["answer"] == ["<p>one</p>"]


def test_out_names_page_record_and_figures(folder: Path, tmp_path: Path) -> None:
    place = page_place(folder, tmp_path / "to" / "hand-over.html")
    write_page(place, page("<p>x</p>", "map"))
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
    write_page(place, page("<p>one</p>", "map", "joint"))
    write_page(place, page("<p>two</p>", "map", "forecast"))
    assert place.page.read_text() == "<p>two</p>"
    assert sorted(p.name for p in place.figures.iterdir()) == ["forecast.png", "map.png"]
    write_page(place, page("<p>three</p>", "map"))
    assert [p.name for p in place.figures.iterdir()] == ["map.png"]


@pytest.mark.parametrize("name", ["report.html", "report.json", "report-figures/map.png"])
def test_files_that_muntin_did_not_write_stay(place: PagePlace, folder: Path, name: str) -> None:
    file = folder / "report" / name
    file.parent.mkdir(parents=True)
    file.write_text('{"mine": 1}')
    assert faults_of(place, folder, page()) == [str(file)]


@pytest.mark.parametrize("name", ["report.html", "report-figures/map.png"])
def test_files_that_were_changed_since_stay(place: PagePlace, folder: Path, name: str) -> None:
    write_page(place, page())
    file = folder / "report" / name
    file.write_bytes(file.read_bytes() + b" note of mine")
    assert faults_of(place, folder, page("<p>two</p>")) == [str(file)]


def test_other_files_in_the_folder_are_left_alone(place: PagePlace, folder: Path) -> None:
    write_page(place, page("<p>one</p>", "map", "joint"))
    others = [folder / "report" / "notes.txt", place.figures / "slides.txt"]
    for other in others:
        other.write_text("mine")
    write_page(place, page("<p>two</p>", "map"))
    assert [other.read_text() for other in others] == ["mine", "mine"]


def test_the_same_page_again_leaves_the_same_files(place: PagePlace, folder: Path) -> None:
    write_page(place, page())
    before = tree(folder / "report")
    write_page(place, page())
    after = tree(folder / "report")
    assert before.pop("report.json") != after.pop("report.json")
    assert after == before


def test_a_place_that_cannot_be_written_leaves_what_was_there(
    place: PagePlace, folder: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    write_page(place, page())
    true_replace = Path.replace

    def full(self: Path, target: Path) -> Path:
        if Path(target).name == "forecast.png" and b"two" in self.read_bytes():
            raise OSError(28, "No space left on device")
        return true_replace(self, target)

    monkeypatch.setattr(Path, "replace", full)
    assert faults_of(place, folder, page("<p>two</p>")) == [str(place.figures / "forecast.png")]


@pytest.mark.parametrize("steps", range(4))
def test_cut_off_at_any_file_the_next_page_is_written_all_the_same(
    place: PagePlace, folder: Path, steps: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    write_page(place, page("<p>one</p>"))
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
            write_page(place, page("<p>two</p>"))
    write_page(place, page("<p>three</p>"))
    assert place.page.read_text() == "<p>three</p>"
