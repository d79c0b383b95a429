"""`muntin verify`: clean where nothing was touched, and every planted change named."""

from __future__ import annotations

import json
import re
import shutil
from collections.abc import Callable
from pathlib import Path

import pytest

from muntin import verify as job
from muntin.record.ledger import LEDGER, Entry, ledger_of, line_after
from muntin.verify import Verified, agree, verify
from tests.report.studies import plate, second_plate, small, tree, write
from tests.test_cli import run

QUICK = ("--wells", 4, "--surrogate", "quadratic", "--quiet")
R1, R2 = "advice/plate-03/r1", "advice/plate-03/r2"
EXAMPLES = Path(__file__).parents[1] / "examples"


@pytest.fixture(scope="module")
def whole(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Two plates; advice, a plan, advice again."""
    folder = small(tmp_path_factory.mktemp("whole") / "study")
    write(folder, {"plates/plate-02.csv": second_plate()})
    for command, seed in (("advise", 1), ("propose", 2), ("advise", 3)):
        assert run(command, folder, "--by", "lab 2", "--seed", seed, *QUICK).exit_code == 0
    return folder


@pytest.fixture
def study(whole: Path, tmp_path: Path) -> Path:
    return Path(shutil.copytree(whole, tmp_path / "study"))


def test_clean(whole: Path) -> None:
    before = tree(whole)
    found = verify(whole)
    assert (found.differs, found.notes, found.lines) == ((), (), 3)
    assert [one.folder for one in found.advice] == [R1, R2]
    assert all((one.values or 0) > 150 for one in found.advice)
    assert tree(whole) == before


def edit(name: str, pattern: str, new: str) -> Callable[[Path], None]:
    def work(folder: Path) -> None:
        text, count = re.subn(pattern, new, (folder / name).read_text(), count=1, flags=re.M)
        assert count == 1
        (folder / name).write_text(text)

    return work


def lines_kept(*kept: int) -> Callable[[Path], None]:
    def work(folder: Path) -> None:
        lines = (folder / LEDGER).read_text().splitlines()
        (folder / LEDGER).write_text("".join(f"{lines[i]}\n" for i in kept))

    return work


def deleted(name: str) -> Callable[[Path], None]:
    def work(folder: Path) -> None:
        path = folder / name
        shutil.rmtree(path) if path.is_dir() else path.unlink()

    return work


def torn(folder: Path) -> None:
    (folder / LEDGER).write_bytes((folder / LEDGER).read_bytes()[:-200])


def rewritten(folder: Path) -> None:
    """Another first line, and the chain made to fit it."""
    raw = b""
    for line in ledger_of((folder / LEDGER).read_bytes()).sound:
        told = {name: getattr(line.entry, name) for name in Entry.__dataclass_fields__}
        entry = Entry(**{**told, "by": "somebody else"})
        raw += line_after(ledger_of(raw), entry, line.time).text.encode() + b"\n"
    (folder / LEDGER).write_bytes(raw)


def left_out_by_response(folder: Path) -> None:
    edit("plates/plate-01.csv", ",exclude$", ",recovery_exclude")(folder)
    PLANTED["a reading left out"][0](folder)


def stop_rule_changed(folder: Path) -> None:
    was = {"date": "2026-05-04", "wrong_share": 0.02, "best_probability": None}
    write(folder, {"stop-rule.jsonl": json.dumps({**was, "wells_read": 0, "reason": ""}) + "\n"})
    edit("study.toml", r"\Z", "\n[stop]\nwrong_share = 0.05\n")(folder)


PLANTED: dict[str, tuple[Callable[[Path], None], str]] = {
    "a reading": (
        edit("plates/plate-01.csv", "^A1,test,4.5,50,0.021,", "A1,test,4.5,50,0.031,"),
        rf"since {R2}: plate-01, recovery: A1 0.021, now 0.031",
    ),
    "a factor's value": (
        edit("plates/plate-01.csv", "^A1,test,4.5,", "A1,test,5.0,"),
        rf"since {R2}: plate-01, ph: A1 4.5, now 5",
    ),
    "a factor": (
        edit("study.toml", "high = 450", "high = 500"),
        r"study.toml, factors, salt, high: 450, now 500",
    ),
    "a target": (
        edit("study.toml", "at_least = 0.8", "at_least = 0.7"),
        r"study.toml, responses, recovery, at_least: 0.8, now 0.7",
    ),
    "a prior": (
        edit("study.toml", "at_least = 0.8", "at_least = 0.8\npriors = {mean_sd = 2}"),
        r"study.toml, responses, recovery, priors: none, now \(mean_sd 2\)",
    ),
    "a reading left out": (
        edit("plates/plate-01.csv", "^A1,test,4.5,50,0.021,$", "A1,test,4.5,50,0.021,it dripped"),
        rf"since {R2}: plate-01, recovery: left out A1 0.021: it dripped",
    ),
    "a reading left out in its own column": (
        left_out_by_response,
        rf"since {R2}: plate-01, recovery: left out A1 0.021: it dripped",
    ),
    "the required probability": (
        edit("study.toml", "^title = .*", 'title = "T"\nrequired_probability = 0.8'),
        r"study.toml, required_probability: 0.9, now 0.8",
    ),
    "the stop rule": (
        stop_rule_changed,
        r"study.toml, stop: wrong_share 0.05 in place of wrong_share 0.02, recorded on 2026-05-04, "
        "without a reason",
    ),
    "a deleted plate": (deleted("plates/plate-02.csv"), r"plate-02 was deleted \(12 wells\)"),
    "an edited line": (
        edit(LEDGER, '"by":"lab 2"', '"by":"lab 3"'),
        r"ledger.jsonl, line 1: it was edited after it was written",
    ),
    "the advice of an edited line": (
        edit(LEDGER, '"by":"lab 2"', '"by":"lab 3"'),
        rf"{R1} is on no line of ledger.jsonl: its line was deleted or edited",
    ),
    "a deleted line": (lines_kept(0, 2), r"ledger.jsonl, line 2: number 2 was deleted before it"),
    "the last line deleted": (lines_kept(0, 1), rf"{R2} is on no line of ledger.jsonl"),
    "a torn line": (torn, r"ledger.jsonl: its last line is torn \([0-9]+ bytes without an end\)"),
    "a ledger written anew": (rewritten, rf"ledger.jsonl was written anew: {R2} was line 3"),
    "deleted advice": (deleted(R1), rf"{R1} was deleted \(written with line 1, "),
    "a deleted file": (deleted(f"{R1}/map.png"), rf"{R1}/map.png was deleted"),
    "an altered figure": (edit(f"{R2}/map.svg", "<svg", "<svg "), rf"{R2}/map.svg was altered"),
    "an altered offer": (
        edit("plans/offered/plate-03.csv", "well", "well "),
        r"plans/offered/plate-03.csv was altered after it was written \(line 2",
    ),
    "a copied reading": (
        edit(f"{R1}/inputs/plates/plate-01.csv", "^A1,test,4.5,50,0.021,", "A1,test,4.5,50,0.031,"),
        rf"{R1}/inputs: plate-01, recovery: A1 0.021, now 0.031",
    ),
    "a copied factor": (
        edit(f"{R1}/inputs/plates/plate-01.csv", "^A1,test,4.5,", "A1,test,5.0,"),
        rf"{R1}/inputs: plate-01, ph: A1 4.5, now 5",
    ),
    "a copied prior": (
        edit(f"{R1}/inputs/study.toml", "at_least = 0.8", "at_least = 0.8\npriors = {mean_sd = 2}"),
        rf"{R1}/inputs: study.toml, responses, recovery, priors: none, now \(mean_sd 2\)",
    ),
    "a copied plate deleted": (
        deleted(f"{R1}/inputs/plates/plate-02.csv"),
        rf"{R1}/inputs/plates/plate-02.csv was deleted",
    ),
    "recorded versions": (
        edit(f"{R1}/advice.json", '"numpy": "', '"numpy": "0'),
        rf"{R1}/advice.json was altered after it was written",
    ),
    "a copy added": (
        lambda folder: write(folder, {f"{R1}/inputs/plates/plate-07.csv": plate(3)}) and None,
        rf"{R1}/inputs/plates/plate-07.csv was added",
    ),
}


@pytest.mark.parametrize("planted", PLANTED)
def test_a_planted_change_is_named(study: Path, planted: str) -> None:
    work, said = PLANTED[planted]
    work(study)
    found = verify(study, recompute=False)
    assert any(re.search(said, sentence) for sentence in found.differs), found.differs
    assert not found.clean


def test_plans_are_worked_on_and_plates_are_added(study: Path) -> None:
    edit("plans/plate-03.csv", "well", "well ")(study)
    (study / "plans" / "plate-03.r2.csv").rename(study / "plans" / "mine.csv")
    write(study, {"plates/plate-03.csv": second_plate(1.01), "notes.txt": "mine"})
    assert verify(study, recompute=False).clean


def one_of(found: Verified, folder: str) -> job.Rechecked:
    return next(one for one in found.advice if one.folder == folder)


def test_a_stop_rule_that_will_go_on_record_is_noted(study: Path) -> None:
    edit("study.toml", r"\Z", "\n[stop]\nwrong_share = 0.05\n")(study)
    found = verify(study, recompute=False)
    assert found.clean
    assert "study.toml, stop: seen first after 24 wells had been read" in found.notes[-1]


def test_numbers_that_do_not_come_out_again_are_named(study: Path) -> None:
    shutil.rmtree(study / R2)
    path = study / R1 / "advice.json"
    facts = json.loads(path.read_text())
    share = facts["window"]["share"]
    facts["window"]["share"] = share + 3e-6
    well = facts["plan"]["wells"][0]["well"]
    facts["plan"]["wells"][0]["p_now"] = 0.123
    path.write_text(json.dumps(facts))
    told = one_of(verify(study), R1).differs
    assert len(told) == 2
    assert told[0].startswith(f"{R1}: window, share: {share + 3e-6:.10g} on record, ")
    assert told[1].startswith(f"{R1}: plan, wells, {well}, p_now: 0.123 on record, ")


def test_numbers_of_altered_inputs_differ(study: Path) -> None:
    shutil.rmtree(study / R2)
    PLANTED["a copied reading"][0](study)
    told = one_of(verify(study), R1).differs
    assert any("recomputed" in said and "checks" not in said for said in told)
    assert any(re.fullmatch(r".*and [0-9]+ more values", said) for said in told)


def test_other_versions_are_named_and_are_no_fault(
    study: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    shutil.rmtree(study / R2)
    lines_kept(0, 1)(study)
    monkeypatch.setattr(job, "versions", lambda: {**job_versions(), "numpy": "9.9"})
    found = verify(study, recompute=False)
    assert found.clean
    was = json.loads((study / R1 / "advice.json").read_text())["versions"]["numpy"]
    assert found.notes == (f"{R1}: numpy was {was}, is now 9.9",)


job_versions = job.versions


def test_a_reason_makes_it_clean_and_stays_on_record(study: Path) -> None:
    PLANTED["a reading"][0](study)
    result = run("advise", study, "--because", "typing error", *QUICK)
    assert (result.exit_code, result.stderr) == (
        2,
        "muntin advise: --because needs --by NAME: who gives the reason\n",
    )
    text = " ".join(run("check", study).stdout.split())
    assert "CHANGED since advice/plate-03/r2, and no reason was given: plate-01, recovery" in text
    (note,) = verify(study, recompute=False).notes
    assert note == "muntin advise --by NAME --because TEXT puts on record why it was changed"
    said = ("--by", "A. Tester", "--because", "typing error")
    told = run("advise", study, *said, "--wells", "4", "--surrogate", "quadratic")
    assert told.exit_code == 0
    text = " ".join(told.stdout.split())
    assert "no reason was given" not in text
    assert (
        "Changed since advice/plate-03/r2: plate-01, recovery: A1 0.021, now 0.031. Why: "
        '"typing error" (A. Tester)'
    ) in text
    found = verify(study, recompute=False)
    assert found.clean
    assert re.fullmatch(
        r"line 4 explains plate-01, recovery: A1 0.021, now 0.031 "
        r'\(A. Tester, [-0-9]{10}: "typing error"\)',
        found.notes[0],
    )
    facts = json.loads((study / "advice/plate-03/r3/advice.json").read_text())
    assert facts["changes"]["because"] == "typing error"
    assert "CHANGED" not in run("check", study).stdout


def test_screen_json_and_exit_codes(study: Path, tmp_path: Path) -> None:
    result = run("verify", study, "--no-recompute")
    assert result.exit_code == 0
    assert result.stdout.splitlines()[-1] == "Verdict   Clean: nothing differs."
    deleted("plates/plate-02.csv")(study)
    result = run("verify", study, "--no-recompute", "--json")
    assert result.exit_code == 1
    facts = json.loads(result.stdout)
    assert (facts["clean"], facts["lines"], facts["tolerance"]) == (False, 3, 1e-6)
    assert facts["differs"] == [f"since {R2}: plate-02 was deleted (12 wells)"]
    text = run("verify", study, "--no-recompute").stdout
    assert "NOT CLEAN: 1 difference." in text
    assert run("verify", tmp_path / "none").exit_code == 2


def test_an_older_study_has_advice_without_lines(study: Path) -> None:
    (study / LEDGER).unlink()
    found = verify(study, recompute=False)
    assert found.clean
    assert f"{R1} is on no line of ledger.jsonl; it is older than that" in found.notes


@pytest.mark.parametrize("name", ["fab-elution", "reactor-yield"])
def test_the_examples_are_clean_before_any_advice(name: str) -> None:
    result = run("verify", EXAMPLES / name)
    assert result.exit_code == 0
    assert "No advice is on record; there is nothing to recompute." in result.stdout


@pytest.mark.parametrize(
    "name", ["reactor-yield", pytest.param("fab-elution", marks=pytest.mark.slow)]
)
def test_the_examples_are_clean_with_advice(name: str, tmp_path: Path) -> None:
    here = shutil.ignore_patterns("advice", "plans", LEDGER, "results", "sheets", "rehearsals")
    folder = Path(shutil.copytree(EXAMPLES / name, tmp_path / name, ignore=here))
    assert run("advise", folder, "--wells", 6, "--quiet").exit_code == 0
    found = verify(folder)
    assert (found.differs, found.notes) == ((), ())
    assert (found.advice[0].values or 0) > 100


def test_what_agrees() -> None:
    assert agree(1.0, 1.0 + 5e-7)
    assert agree(1e9, 1e9 + 500.0)
    assert not agree(1.0, 1.0 + 2e-6)
    assert not agree(1.0, None)
    assert not agree("a", "b")
    assert not agree(True, 0.0)
