"""What earlier advice rested on and is now otherwise: noticed until somebody says why."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from muntin.record import Study, StudyFaults, open_study
from muntin.record.asked import asked_changes, asked_of
from muntin.record.changes import well_changes
from muntin.record.entries import check_reason, entry_for
from muntin.record.inputs import read_inputs
from muntin.record.ledger import read_ledger
from muntin.record.writing import writing
from tests.report.studies import STUDY, plate, second_plate, small, tree, write

pytestmark = pytest.mark.usefixtures("quick_disk")
PLATE = "plates/plate-01.csv"


@pytest.fixture
def study(tmp_path: Path) -> Path:
    """A study of two plates on which an advice rests."""
    folder = write(small(tmp_path / "study"), {"plates/plate-02.csv": second_plate()})
    advised(folder, 1)
    return folder


def advised(folder: Path, number: int, because: str | None = None) -> None:
    """Write what an advice keeps of its inputs, and its line."""
    read = open_study(folder)
    place = folder / "advice" / "plate-03" / f"r{number}"
    kept = {place / "inputs" / name: content for name, content in read_inputs(folder).items()}
    with writing(folder) as pen:
        entry = entry_for(read, "advise", {}, by="lab 2" if because else None, because=because)
        pen.commit({place / "advice.json": "{}", **kept}, entry)


def changed(folder: Path, name: str, pattern: str, new: str) -> tuple[str, ...]:
    """Edit a file of the study; return what is noticed."""
    path = folder / name
    edited, count = re.subn(pattern, new, path.read_text(), count=1, flags=re.M)
    assert count == 1
    path.write_text(edited)
    return open_study(folder).changes.sentences


FIRST = r"^A1,test,4.5,50,0.021,$"


def test_nothing_changed_nothing_said(study: Path) -> None:
    assert open_study(study).changes.sentences == ()
    assert open_study(study).notices == ()


@pytest.mark.parametrize(
    ("name", "pattern", "new", "said"),
    [
        (PLATE, FIRST, "A1,test,4.5,50,0.5,", "plate-01, recovery: A1 0.021, now 0.5"),
        (PLATE, FIRST, "A1,test,4.5,50,<0.02,", "plate-01, recovery: A1 0.021, now <0.02"),
        (PLATE, FIRST, "A1,test,4.5,50,,", "plate-01, recovery: A1 0.021, now gone"),
        (PLATE, FIRST, "A1,test,5,50,0.021,", "plate-01, ph: A1 4.5, now 5"),
        (PLATE, FIRST, "A1,bridge,4.5,50,0.021,", "plate-01, role: A1 test, now bridge"),
        (PLATE, FIRST + "\n", "", "plate-01, wells deleted: A1"),
        ("study.toml", "at_least = 0.8", "at_least = 0.7", "at_least: 0.8, now 0.7"),
        ("study.toml", "at_least = 0.8", "at_least = 0.8\nat_most = 0.9", "at_most: none, now 0.9"),
        ("study.toml", "high = 450", "high = 500", "study.toml, factors, salt, high: 450, now 500"),
        ("study.toml", "kept_within = 0.1\n", "", 'judged_by: "kept", now "well"'),
        (
            "study.toml",
            "title = .*",
            'title = "Other"\nrequired_probability = 0.8',
            "study.toml, required_probability: 0.9, now 0.8",
        ),
        (
            "study.toml",
            "at_least = 0.8",
            "at_least = 0.8\npriors = { noise_sd = { median = 0.1, log_sd = 0.5 } }",
            "recovery, priors: none, now (noise_sd (median 0.1, log_sd 0.5))",
        ),
    ],
)
def test_a_change_is_said_and_a_change_back_is_none(
    study: Path, name: str, pattern: str, new: str, said: str
) -> None:
    before = (study / name).read_bytes()
    found = changed(study, name, pattern, new)
    assert said in found[0] or said in found[-1]
    notice = open_study(study).notices[0]
    assert notice.startswith("CHANGED since advice/plate-03/r1, and no reason was given: ")
    assert said in notice
    (study / name).write_bytes(before)
    assert open_study(study).changes.sentences == ()


@pytest.mark.parametrize(
    ("name", "pattern", "new"),
    [
        (PLATE, FIRST, "A1,test,4.5,50,0.021,pipetted twice"),
        (PLATE, FIRST, "A1,test,4.50,50.0,0.0210,"),
        (PLATE, r"\Z", "H1,test,5,100,0.3,\nH2,blank,,,,\n"),
        ("study.toml", "title = .*", 'title = "Another title"'),
        ("study.toml", r"available_mg = 40", "available_mg = 60"),
        ("study.toml", "^step = 0.5", "step = 0.5\nplan_low = 5.0"),
    ],
)
def test_what_may_change_freely(study: Path, name: str, pattern: str, new: str) -> None:
    assert changed(study, name, pattern, new) == ()


def test_new_plates_void_ones_and_readings_that_were_awaited(study: Path) -> None:
    third = second_plate(1.01)
    awaited = third.replace(",50,0.021,", ",50,,", 1)
    assert awaited != third
    write(study, {"plates/plate-03.csv": awaited})
    assert open_study(study).changes.sentences == ()
    advised(study, 2)
    write(study, {"plates/plate-03.csv": third})
    write(study, {"plates/plate-02.toml": 'void = "feed was warm"\n'})
    assert open_study(study).changes.sentences == ()
    advised(study, 3)
    (study / "plates" / "plate-02.toml").unlink()
    said = "plate-02 counts again; it was void: feed was warm"
    assert open_study(study).changes.sentences == (said,)


LATER = r"^A2,test,5.0,250,0.389,$"


@pytest.mark.parametrize("own", [True, False])
def test_what_was_left_out_is_told_apart(study: Path, own: bool) -> None:
    text = (study / PLATE).read_text()
    if own:
        text = text.replace(",exclude\n", ",recovery_exclude\n")
    said = re.sub(FIRST, r"A1,test,4.5,50,0.021,the pipette dripped", text, flags=re.M)
    said, count = re.subn(LATER, r"A2,test,5.0,250,0.389,the pipette dripped", said, flags=re.M)
    assert count == 1
    (study / PLATE).write_text(said)
    changes = open_study(study).changes
    assert changes.sentences == ()
    assert changes.since == "advice/plate-03/r1"
    assert changes.left_out == (
        "plate-01, recovery: left out A1 0.021, A2 0.389: the pipette dripped",
    )
    advised(study, 2)
    assert open_study(study).changes.left_out == ()


def test_a_plate_made_void_is_told_apart(study: Path) -> None:
    write(study, {"plates/plate-02.toml": 'void = "feed was warm"\n'})
    changes = open_study(study).changes
    assert (changes.sentences, changes.notice) == ((), "")
    assert changes.left_out == ("plate-02 was made void: feed was warm",)


def test_a_deleted_plate(study: Path) -> None:
    (study / "plates" / "plate-02.csv").unlink()
    assert open_study(study).changes.sentences == ("plate-02 was deleted (12 wells)",)


def test_without_the_copies_files_are_named(study: Path) -> None:
    import shutil

    shutil.rmtree(study / "advice")
    assert changed(study, PLATE, FIRST, "A1,test,4.5,50,0.5,") == (f"{PLATE} reads otherwise",)


def test_the_notice_stands_until_somebody_says_why(study: Path) -> None:
    said = changed(study, PLATE, FIRST, "A1,test,4.5,50,0.5,")
    advised(study, 2)
    assert open_study(study).changes.sentences == said
    advised(study, 3, because="A1 was read twice, the first was a typing error")
    assert open_study(study).changes.sentences == ()
    lines = read_ledger(study).sound
    assert [(line.entry.changes, line.open) for line in lines] == [
        ((), False),
        (said, True),
        (said, False),
    ]
    assert lines[2].entry.by == "lab 2"


def test_before_data_targets_may_change_freely(tmp_path: Path) -> None:
    folder = write(tmp_path, {"study.toml": STUDY})
    advised(folder, 1)
    assert changed(folder, "study.toml", "at_least = 0.8", "at_least = 0.7") == ()
    write(folder, {PLATE: plate()})
    assert open_study(folder).changes.sentences == (
        "study.toml, responses, recovery, at_least: 0.8, now 0.7",
    )


def faults_of(study: Study, by: str | None, because: str | None) -> str:
    try:
        check_reason(study, "advise", by, because)
    except StudyFaults as faults:
        return str(faults)
    return ""


def test_a_reason_has_somebody_who_gives_it_and_something_to_explain(study: Path) -> None:
    sound = open_study(study)
    assert faults_of(sound, None, None) == faults_of(sound, "lab 2", None) == ""
    assert "nothing has changed since earlier advice" in faults_of(sound, "lab 2", "so")
    changed(study, PLATE, FIRST, "A1,test,4.5,50,0.5,")
    other = open_study(study)
    assert "needs --by NAME: who gives the reason" in faults_of(other, None, "so")
    assert "is empty; say in words why" in faults_of(other, "lab 2", " ")
    assert faults_of(other, "lab 2", "so") == ""


def test_a_study_has_no_change_against_itself(study: Path) -> None:
    before = tree(study)
    one, other = open_study(study), open_study(study)
    assert well_changes(one, other) == []
    assert asked_changes(asked_of(one.definition), asked_of(other.definition)) == []
    assert tree(study) == before
