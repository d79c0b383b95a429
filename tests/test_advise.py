"""The main job, from completed wells to the next plate."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path
from typing import Any

import pytest
from typer.testing import CliRunner

from muntin import advise as main_job
from muntin.advise import Advice, advise
from muntin.cli import app
from muntin.record import StudyFaults
from tests.report.studies import ONE_FACTOR, STUDY, one_factor_plate, plate, small, tree, write

STOP = "stop-rule.jsonl"
PLAN = "plans/plate-02.csv"


@pytest.fixture
def study(tmp_path: Path) -> Path:
    return small(tmp_path / "study")


def quick(folder: Path, **settings: Any) -> Advice:
    return advise(folder, **{"wells": 5, "surrogate": "quadratic", **settings})


def test_two_runs_give_two_revisions_with_the_same_numbers(study: Path) -> None:
    first, second = quick(study), quick(study)
    assert [a.place.folder.name for a in (first, second)] == ["r1", "r2"]
    texts = [(a.place.folder / "advice.json").read_text(encoding="utf-8") for a in (first, second)]
    one, two = (json.loads(text, parse_constant=pytest.fail) for text in texts)
    for facts in (one, two):
        del facts["written_at"], facts["files"], facts["ledger"]
    assert one == two
    assert second.place.plan == study / PLAN
    assert second.place.remark == ""


def test_files_of_an_advice(study: Path) -> None:
    write(study, {"results/late.csv": "plate,well,recovery\nplate-01,A1,0.021\n"})
    write(study, {"plates/notes.txt": "not a table", "plates/plate-01.toml": 'by = "lab 2"\n'})
    folder = quick(study).place.folder
    inputs = {
        name: (study / name).read_bytes()
        for name in (
            *("study.toml", "plates/plate-01.csv", "plates/plate-01.toml"),
            "results/late.csv",
        )
    }
    files = tree(folder)
    copies = {name.removeprefix("inputs/"): c for name, c in files.items() if "inputs/" in name}
    assert copies == inputs
    own = {"advice.json", "map.png", "map.svg", "plan.csv", "forecast.png", "forecast.svg"}
    assert {name for name in files if not name.startswith("inputs/")} == own
    assert files["plan.csv"] == (study / PLAN).read_bytes()
    facts = json.loads(files["advice.json"])
    assert facts["inputs"] == {n: hashlib.sha256(c).hexdigest() for n, c in inputs.items()}
    assert facts["settings"] == {
        "wells": 5,
        "aim": "edge",
        "surrogate": "quadratic",
        "engine": "fast",
        "seed": 1,
    }
    assert facts["engine"] == "fast"
    names = {"muntin", "python", "numpy", "scipy", "pandas", "processor"}
    assert set(facts["versions"]) == names


def test_advice_says_what_the_plan_says(study: Path) -> None:
    advice = quick(study)
    wells = json.loads((advice.place.folder / "advice.json").read_text())["plan"]["wells"]
    assert [well["well"] for well in wells] == list(advice.plan.wells["well"])
    controls = [well for well in wells if well["role"] == "blank"]
    assert controls
    assert all(well["ph"] is None and well["p_now"] is None for well in controls)


def test_an_edited_plan_is_never_lost(study: Path) -> None:
    quick(study)
    edited = (study / PLAN).read_text().replace("\n", "\nH12,water,,,,,,\n", 1)
    (study / PLAN).write_text(edited)
    advice = quick(study, seed=2)
    assert (study / PLAN).read_text() == edited
    assert advice.place.plan.name == "plate-02.r2.csv"
    assert advice.place.plan.read_text() == (advice.place.folder / "plan.csv").read_text()
    assert "plate-02.csv was edited or differs" in advice.place.remark
    third = quick(study, seed=3)
    assert third.place.plan.name == "plate-02.r2.csv"


def test_a_plan_nobody_touched_makes_way(study: Path) -> None:
    old = quick(study).place.plan.read_text()
    advice = quick(study, seed=2)
    assert advice.place.plan == study / PLAN
    assert advice.place.plan.read_text() != old
    kept = advice.place.remark.removeprefix("It replaces a plan that nobody had edited, kept as ")
    assert (study / kept.removesuffix(".")).read_text() == old


def test_a_plan_filled_in_where_it_lies_is_pointed_at(study: Path) -> None:
    quick(study)
    lines = (study / PLAN).read_text().splitlines()
    filled = [line.replace(",,,0.", ",0.5,,0.") for line in lines]
    count = sum(a != b for a, b in zip(lines, filled, strict=True))
    assert count > 4
    (study / PLAN).write_text("\n".join(filled) + "\n")
    text = " ".join(" ".join(screen(study, "--wells", "5", "--seed", "2")).split())
    assert f"Noted {PLAN} holds {count} readings: move it to plates/ to have them counted" in text


def test_nothing_is_left_where_the_job_breaks(study: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def broken(*_: object) -> bytes:
        raise RuntimeError("no figure")

    before = tree(study)
    monkeypatch.setattr(main_job, "saved", broken)
    with pytest.raises(RuntimeError, match="no figure"):
        quick(study)
    assert tree(study) == before


def test_faults_come_before_any_file(study: Path) -> None:
    before = tree(study)
    with pytest.raises(StudyFaults):
        quick(study, wells=90)
    assert tree(study) == before


def test_steps_are_told_in_order(study: Path) -> None:
    steps: list[str] = []
    quick(study, tell=steps.append)
    assert steps == [
        *("reading the study", "fitting the readings"),
        *("planning the next plate", "drawing and writing"),
    ]


def screen(folder: Path, *options: str) -> list[str]:
    result = CliRunner().invoke(app, ["advise", str(folder), "--surrogate", "quadratic", *options])
    assert result.exit_code == 0, result.stderr
    return result.stdout.splitlines()


HEADINGS = ["Read", "Checks", "Window", "Next", "Forecast", "Cautions", "Written"]


def headings(lines: list[str]) -> list[str]:
    return [line.split()[0] for line in lines[1:] if line[:1].strip()]


def test_screen_has_every_section(study: Path) -> None:
    lines = screen(study)
    assert headings(lines) == HEADINGS
    text = " ".join(" ".join(lines).split())
    assert "Predicted operating window (plate scale): " in text
    assert "plate-02 (aim edge, seed 1): 24 test wells, 4 bridging wells, 8 controls; " in text
    assert "Development aid, not for release decisions." in text


def crowded(folder: Path) -> Path:
    """Three factors, three responses, long labels, everything noted that can be."""
    factors = "".join(
        f'[[factors]]\nname = "f{i}"\nlabel = "Conductivity of wash {i}"\nunit = "mS/cm"\n'
        f"low = 0\nhigh = 10\nstep = 1\n"
        for i in range(3)
    )
    responses = "".join(
        f'[[responses]]\nname = "r{i}"\nlabel = "Monomer in pool {i}"\nkind = "real"\n'
        "at_least = 2\ntypical = [0, 10]\n"
        for i in range(3)
    )
    toml = f'[study]\ntitle = "Crowded, invented: {"wash after wash " * 4}"\n{factors}{responses}'
    toml += "[fixed]\n" + "".join(f'stage_{i} = "200 uL, 20 min"\n' for i in range(5))
    lines = ["well,f0,f1,f2,r0,r1,r2,exclude,weather,operator"]
    for i in range(30):
        f = [(3 * i + j * (i // 3)) % 11 for j in range(3)]
        jitter = 0.3 * ((7 * i) % 5 - 2)
        reads = [str(f[0] - f[1] + jitter), "<1" if i % 5 == 0 else str(f[2] + jitter), ""]
        why = "the filter of this well leaked badly" if i % 7 == 0 else ""
        cells = [f"{'ABC'[i % 3]}{i // 3 + 1}", *map(str, f), *reads, why, "wet", "x"]
        lines.append(",".join(cells))
    files = {"study.toml": toml, "plates/plate-01.csv": "\n".join(lines) + "\n"}
    return write(folder, files)


@pytest.mark.slow
def test_screen_fits_40_lines_of_100_columns_even_when_crowded(tmp_path: Path) -> None:
    lines = screen(crowded(tmp_path), "--wells", "12")
    assert len(lines) <= 40
    assert max(map(len, lines)) <= 100
    assert headings(lines) == ["Read", "Noted", *HEADINGS[1:]]


def test_awaited_response_makes_it_provisional(tmp_path: Path) -> None:
    files = {"study.toml": ONE_FACTOR, "plates/plate-01.csv": one_factor_plate(hcp=False)}
    text = " ".join(" ".join(screen(write(tmp_path, files))).split())
    assert "Awaited: HCP; the advice is provisional." in text
    assert "for Recovery alone:" in text
    assert "Provisional: HCP not read yet." in text
    facts = json.loads((tmp_path / "advice/plate-02/r1/advice.json").read_text())
    assert (facts["provisional"], facts["awaited"]) == (True, ["hcp"])
    assert facts["window"]["judged"] == ["recovery"]


def test_nothing_run_gives_an_opening_plate_and_no_window(tmp_path: Path) -> None:
    folder = write(tmp_path, {"study.toml": STUDY})
    lines = screen(folder, "--wells", "6")
    assert "so there is no window; an opening plate comes first." in "\n".join(lines)
    assert "Forecast  No forecast before the first readings." in lines
    facts = json.loads((folder / "advice/plate-01/r1/advice.json").read_text())
    assert (facts["nothing_run"], facts["provisional"], facts["window"]) == (True, False, None)
    assert {well["role"] for well in facts["plan"]["wells"]} >= {"test", "load", "blank"}
    assert "bridge" not in {well["role"] for well in facts["plan"]["wells"]}


def test_stop_rule_is_called_when_it_is_met(tmp_path: Path) -> None:
    met = "The study's stop rule is met (wrong_share 99.0 %): no plate is needed."
    toml = STUDY + "[stop]\nwrong_share = 0.99\nbest_probability = 0.999999\n"
    assert met in "\n".join(screen(small(tmp_path / "met", toml=toml)))
    toml = STUDY + "[stop]\nwrong_share = 0.0001\n"
    unmet = " ".join(" ".join(screen(small(tmp_path / "unmet", toml=toml))).split())
    assert "rule is met" not in unmet
    assert "up to 48 test wells are not expected to meet the stop rule" in unmet


def test_stop_rule_is_kept_and_a_quiet_change_does_not_count(tmp_path: Path) -> None:
    folder = write(tmp_path, {"study.toml": STUDY + "[stop]\nwrong_share = 0.0001\n"})
    screen(folder, "--wells", "6")
    (first,) = [json.loads(line) for line in (folder / STOP).read_text().splitlines()]
    assert (first["wrong_share"], first["wells_read"], first["reason"]) == (0.0001, 0, "")
    moved = STUDY + "[stop]\nwrong_share = 0.99\n"
    small(folder, toml=moved)
    kept = (folder / STOP).read_bytes()
    text = " ".join(" ".join(screen(folder, "--wells", "6")).split())
    assert "THE RECORDED RULE HOLDS" in text
    assert "stop rule is met" not in text
    assert (folder / STOP).read_bytes() == kept
    assert (folder / "advice/plate-02/r1/inputs" / STOP).read_bytes() == kept
    write(folder, {"study.toml": moved + 'changed_because = "Only a rough idea is asked for"\n'})
    text = " ".join(" ".join(screen(folder, "--wells", "6")).split())
    assert "Stop: the stop rule is met today" in text
    (_, second) = [json.loads(line) for line in (folder / STOP).read_text().splitlines()]
    assert (second["wrong_share"], second["wells_read"]) == (0.99, 12)
    assert second["reason"] == "Only a rough idea is asked for"
    facts = json.loads((folder / "advice/plate-02/r2/advice.json").read_text())
    verdict = facts["plan"]["verdict"]
    assert (verdict["word"], verdict["because"], verdict["wells"]) == ("stop", "met", 0)
    assert verdict["stop_rule"]["wrong_share"] == 0.99
    assert [rule["wrong_share"] for rule in verdict["stop_rule"]["recorded"]] == [0.0001]


def test_plate_that_shared_errors_need_a_column_for_gets_it(tmp_path: Path) -> None:
    toml = STUDY + '[[shared_errors]]\nby = ["plate", "bottle"]\nacts = "inside"\n'
    folder = small(tmp_path, toml=toml, plate=plate(column="bottle", value="one|two"))
    heading = quick(folder).place.plan.read_text().splitlines()[0]
    assert heading == "well,role,ph,salt,bottle,recovery,exclude,p_now,reason"
