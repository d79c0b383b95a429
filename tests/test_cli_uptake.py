"""`muntin uptake` as it is run: what it prints, writes and returns."""

from __future__ import annotations

import json
from pathlib import Path

import pytest
from typer.testing import CliRunner, Result

from muntin.cli import app
from muntin.record.ledger import LEDGER
from tests.report.studies import STUDY, tree, write

PAIR = "time_min,load\n60,20\n120,32\n"
WHOLE = "time_min,load\n5,8.9\n10,16.6\n20,27.3\n40,38.0\n60,43.1\n120,48.6\n240,50.2\n"
ASKED = "\n[uptake]\nplanned_min = 45\nphase_ratio = 15\n"


def run(*arguments: object) -> Result:
    return CliRunner().invoke(app, [str(argument) for argument in arguments])


def study(folder: Path, **tables: str) -> Path:
    files: dict[str, str | bytes] = {"study.toml": STUDY + ASKED}
    return write(folder, files | {f"uptake/{name}.csv": text for name, text in tables.items()})


def test_help_and_the_common_options() -> None:
    result = run("uptake", "--help")
    assert result.exit_code == 0
    for option in ("--at", "--json", "--quiet", "time_min"):
        assert option in result.stdout
    assert "how long must they be in contact?" in run().stdout


def test_the_screen_of_a_whole_curve(tmp_path: Path) -> None:
    folder = study(tmp_path, whole=WHOLE)
    result = run("uptake", folder)
    assert result.exit_code == 0, result.output
    lines = result.stdout.splitlines()
    assert lines[:2] == [
        "Small invented study: contact time, whole",
        "Read      uptake/whole.csv: 7 readings at 7 times, 5 to 240 min.",
    ]
    assert any(line.startswith("Load      At equilibrium 49.1 mg/mL resin (") for line in lines)
    assert any(line.startswith("Planned   At 45 min 40.5 mg/mL resin (") for line in lines)
    assert any("A phase ratio of 15 is unusual" in line for line in lines)
    # A long path goes on in the next line.
    end = "".join(line.strip() for line in lines[-3:])
    assert end.endswith(f"Written   {folder / 'uptake' / 'figures' / 'whole.png'}")
    assert "Caution" not in result.stdout
    assert max(map(len, lines)) <= 100


def test_json_agrees_with_the_closed_form_of_two_readings(tmp_path: Path) -> None:
    result = run("uptake", study(tmp_path, pair=PAIR, whole=WHOLE), "pair", "--json")
    assert result.exit_code == 0, result.output
    facts = json.loads(result.stdout)
    assert (facts["command"], facts["settings"]["planned_min"]) == ("uptake", 45.0)
    (curve,) = facts["curves"]
    assert curve["times_min"] == [60.0, 120.0]
    first, pores = curve["laws"]
    assert (first["name"], pores["name"]) == ("first order", "pore diffusion")
    assert first["weight"] + pores["weight"] == pytest.approx(1.0)
    rate = first["rate_per_min"]
    assert rate["low"] < 0.00851376 < rate["high"]
    assert first["t95_min"]["low"] < 351.87 < first["t95_min"]["high"]
    assert first["equilibrium"]["low"] < 50.0 < first["equilibrium"]["high"]
    kinds = [remark["kind"] for remark in curve["remarks"] if remark["loud"]]
    assert kinds == ["two times", "still climbing"]
    assert "352 min" in curve["remarks"][0]["sentence"]
    assert set(facts["priors"]) == {"capacity", "half_time_min", "noise_share"}
    assert [Path(path).name for path in facts["files"]] == ["pair.png"]


def test_the_same_input_gives_the_same_files_and_numbers(tmp_path: Path) -> None:
    folder = study(tmp_path, whole=WHOLE)
    first = run("uptake", folder, "--json").stdout
    files = tree(folder)
    line = files.pop(LEDGER)
    assert run("uptake", folder, "--json").stdout == first
    again = tree(folder)
    assert again.pop(LEDGER).startswith(line)
    assert again == files
    assert set(files) == {"study.toml", "uptake/whole.csv", "uptake/figures/whole.png"}
    assert files["uptake/whole.csv"] == WHOLE.encode()


def test_another_time_may_be_asked_for(tmp_path: Path) -> None:
    folder = study(tmp_path, whole=WHOLE)
    facts = json.loads(run("uptake", folder, "--json", "--at", "120").stdout)
    planned = facts["curves"][0]["planned"]
    assert planned["minutes"] == 120.0
    assert planned["load"]["low"] < 48.6 < planned["load"]["high"]
    assert 0.95 < planned["share_of_equilibrium"]["median"] < 1.0


def test_quiet_prints_nothing_and_writes_the_figure(tmp_path: Path) -> None:
    folder = study(tmp_path, pair=PAIR)
    result = run("uptake", folder, "--quiet")
    assert (result.exit_code, result.stdout) == (0, "")
    assert (folder / "uptake" / "figures" / "pair.png").read_bytes()[:4] == b"\x89PNG"


def test_without_a_plan_the_screen_says_how_to_ask(tmp_path: Path) -> None:
    folder = write(tmp_path, {"study.toml": STUDY, "uptake/pair.csv": PAIR})
    result = run("uptake", folder)
    assert "No contact time is planned: --at MIN, or planned_min in [uptake]" in result.stdout


BAD: dict[str, tuple[dict[str, str | bytes], list[str], list[str]]] = {
    "no_table": (
        {"study.toml": STUDY},
        [],
        ["uptake: holds no table of an uptake curve (write time_min,load or"],
    ),
    "wrong_name": (
        {"study.toml": STUDY, "uptake/pair.csv": PAIR},
        ["piar"],
        ["piar: is no table and none in", "(did you mean pair?)"],
    ),
    "cell": (
        {"study.toml": STUDY, "uptake/pair.csv": PAIR.replace("20", "2O"), "uptake/b.csv": WHOLE},
        [],
        ['uptake/pair.csv, row 2, column load: "2O" is not a number'],
    ),
    "at": (
        {"study.toml": STUDY, "uptake/pair.csv": PAIR},
        ["--at", "0"],
        ["--at: 0 must lie above 0 min"],
    ),
    "key": (
        {"study.toml": STUDY + "\n[uptake]\nphase_ration = 30\n", "uptake/pair.csv": PAIR},
        [],
        ['study.toml, uptake: "phase_ration" is not a key of [uptake] (did you mean'],
    ),
    "prior": (
        {"study.toml": STUDY + "\n[uptake]\ncapacity = [9, 4]\n", "uptake/pair.csv": PAIR},
        [],
        ["study.toml, uptake, capacity: [9, 4] must be a low and a higher value, both above 0"],
    ),
}


@pytest.mark.parametrize("name", list(BAD))
def test_bad_input_ends_with_2_and_writes_nothing(tmp_path: Path, name: str) -> None:
    files, arguments, said = BAD[name]
    folder = write(tmp_path / "study", files)
    before = tree(folder)
    result = run("uptake", folder, *arguments)
    assert result.exit_code == 2
    assert result.stdout == ""
    for part in said:
        assert part in result.stderr
    assert tree(folder) == before
