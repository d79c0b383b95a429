"""`muntin confirm` as it is run: what it offers, writes, compares and refuses."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from muntin.record.column_plan import ColumnPlan, plan_text, read_plans
from muntin.record.faults import Findings, StudyFaults
from muntin.record.ledger import LEDGER, Entry, read_ledger
from muntin.record.study import open_study
from muntin.verify import verify
from tests.report.studies import STUDY, plate, small, tree
from tests.test_cli import rows_of, run

QUICK = ("--surrogate", "quadratic")
COLUMNS = "\n[columns]\nbed_ml = 0.5\nload_mg_per_ml = 5\nbeside_mg = 0.5\n"
AGAIN = ("--again", "--because", "a second lot of resin")


@pytest.fixture(scope="module")
def planned(tmp_path_factory: pytest.TempPathFactory) -> dict[str, bytes]:
    """The files of a study with column runs planned."""
    folder = small(tmp_path_factory.mktemp("planned") / "study", toml=STUDY + COLUMNS)
    result = run("confirm", folder, *QUICK)
    assert result.exit_code == 0, result.output
    return tree(folder)


@pytest.fixture
def study(tmp_path: Path, planned: dict[str, bytes]) -> Path:
    for name, content in planned.items():
        path = tmp_path / "study" / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(content)
    return tmp_path / "study"


def plan_of(study: Path) -> ColumnPlan:
    found = Findings()
    plans = read_plans(study, open_study(study).definition, found)
    assert found.faults == []
    return plans[-1]


def column(study: Path, text: str, name: str = "column-01.csv") -> None:
    (study / "columns" / name).write_text(text, encoding="utf-8")


def test_the_plan_lies_in_columns_with_its_predictions(study: Path) -> None:
    assert sorted(p.name for p in (study / "columns").iterdir()) == ["plan.csv", "plan.toml"]
    plan, rows = plan_of(study), rows_of(study / "columns" / "plan.csv")
    assert [row["place"] for row in rows] == ["set point", "edge", "edge"]
    assert [float(row["protein_mg"]) for row in rows] == [3.0, 3.0, 3.0]
    assert {row["recovery"] for row in rows} == {""}
    assert [run.run for run in plan.runs] == [1, 2, 3]
    for row, own in zip(rows, plan.runs, strict=True):
        assert {n: float(row[n]) for n in ("ph", "salt")} == own.condition
    assert plan.runs[0].probability >= max(one.probability for one in plan.runs[1:]) >= 0.9
    assert {"study.toml", "plates/plate-01.csv"} == set(plan.inputs)
    assert (plan.seed, plan.surrogate, plan.because) == (1, "quadratic", None)
    assert plan.versions["muntin"]


def test_the_record_reads_back_as_it_was_written(study: Path) -> None:
    assert plan_text(plan_of(study)) == (study / "columns" / "plan.toml").read_text("utf-8")


def test_the_same_seed_predicts_the_same(study: Path, tmp_path: Path) -> None:
    other = small(tmp_path / "other", toml=STUDY + COLUMNS)
    assert run("confirm", other, *QUICK, "--quiet").stdout == ""
    first, second = plan_of(study), plan_of(other)
    assert first.model_dump(exclude={"written_at"}) == second.model_dump(exclude={"written_at"})


def test_a_second_call_fits_nothing_and_writes_nothing(
    study: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    import muntin.window.assessment as assessment

    monkeypatch.setattr(assessment, "assess", None)
    before = tree(study)
    result = run("confirm", study)
    assert result.exit_code == 0, result.output
    assert tree(study) == before
    assert "3 runs, 9 mg of protein, predicted on " in result.stdout
    assert "A column has a residence time" in result.stdout
    assert max(map(len, result.stdout.splitlines())) <= 100


def test_assess_is_the_same_with_and_without_columns(study: Path, tmp_path: Path) -> None:
    column(study, "run,recovery\n1,0.42\n2,0.1\n3,0.3\n")
    told = []
    for _ in range(2):
        result = run("assess", study, *QUICK, "--json", "--out", tmp_path / "out.csv")
        assert result.exit_code == 0, result.output
        told.append((result.stdout, (tmp_path / "out.csv").read_bytes()))
        for path in (study / "columns").iterdir():
            path.unlink()
        (study / "columns").rmdir()
        study.joinpath("columns").mkdir()
    assert told[0] == told[1]


def test_column_minus_plate(study: Path) -> None:
    plan = plan_of(study)
    (one,) = plan.predictions
    low, mean = one.reading_low[0], one.mean[1]
    column(study, f"run,recovery\n1,{low - 0.01:.4f}\n2,{mean:.4f}\n")
    facts = json.loads(run("confirm", study, "--json").stdout)
    first, second = facts["compared"]
    assert [first["verdict"], second["verdict"]] == ["off by more than predicted", "agrees"]
    assert first["difference"] == pytest.approx(low - 0.01 - one.mean[0], abs=1e-4)
    assert first["high"] == pytest.approx(-0.01, abs=1e-4)
    assert second["difference"] == pytest.approx(0.0, abs=1e-4)
    assert [shift["runs"] for shift in facts["shifts"]] == [2]
    assert facts["awaited"] == [3]
    screen = run("confirm", study).stdout
    assert "1 of 2 readings off by more than predicted: Recovery of run 1." in screen
    assert "Columns are never pooled with wells: no probability rests on them." in screen
    assert "Still awaited: run 3; confirm set point and both edges before quoting." in screen


def test_all_that_agree_are_said_so(study: Path) -> None:
    means = plan_of(study).predictions[0].mean
    rows = [f"{i},{mean:.4f},\n" for i, mean in enumerate(means, start=1)]
    column(study, "run,recovery,exclude\n" + "".join(rows))
    screen = run("confirm", study).stdout
    assert "All 3 readings of columns agree with what plates predicted." in screen
    assert "3 readings of columns meet their targets, none misses." in screen
    assert "the runs tell of no shared shift." in " ".join(screen.split())
    assert "Planned" not in screen


def test_a_shared_shift_is_told_apart(study: Path) -> None:
    means = plan_of(study).predictions[0].mean
    column(study, "run,recovery\n" + "".join(f"{i},{m - 0.3}\n" for i, m in enumerate(means, 1)))
    screen = " ".join(run("confirm", study).stdout.split())
    assert "Recovery: -0.3 against what was predicted over 3 runs" in screen
    assert "a shared shift, more than a new plate explains" in screen
    assert "Less that shift all runs agree." in screen
    assert "3 of 3 readings off by more than predicted" in screen
    assert "Columns shift Recovery: the window holds for plates, not for these columns." in screen
    more = "".join(f"{i},{m - 0.3}\n" for i, m in enumerate(means[:2], 1))
    column(study, f"run,recovery\n{more}")
    column(study, f"run,recovery\n3,{means[2]}\n", "column-02.csv")
    screen = " ".join(run("confirm", study).stdout.split())
    assert "2 of 3 readings off by more than predicted" in screen
    assert "run 3" in screen.split("Less that shift")[1].split(" off by more")[0]


def test_runs_left_out_stay_on_record(study: Path) -> None:
    column(study, "run,recovery,exclude\n1,0.4,the pump stopped\n")
    facts = json.loads(run("confirm", study, "--json").stdout)
    assert facts["left_out"] == [{"run": 1, "reason": "the pump stopped"}]
    assert facts["compared"] == []
    assert "run 1: the pump stopped" in run("confirm", study).stdout


FAULTS = {
    "no run": (
        "rum,recovery\n1,0.9\n",
        ["columns/column-01.csv: has no column run (did you mean its column rum?)"],
    ),
    "no response": (
        "run,recovrey\n1,0.9\n",
        [
            "columns/column-01.csv: has no column of a response (is its column recovrey meant to "
            "be recovery?)"
        ],
    ),
    "unknown run": (
        "run,recovery\n7,0.9\n,0.8\n",
        [
            "columns/column-01.csv, row 2, column run: 7 is not a planned run (planned: 1, 2, 3)",
            "columns/column-01.csv, row 3, column run: is empty; every row needs its run (planned: "
            "1, 2, 3)",
        ],
    ),
    "twice": (
        "run,recovery\n1,0.9\n1,0.8\n",
        ["columns/column-01.csv, row 3, column run: 1 is already in columns/column-01.csv, row 2"],
    ),
    "reading": (
        "run,recovery,recovery_sd\n1,high,-1\n",
        [
            'columns/column-01.csv, row 2, column recovery: "high" is not a number (leave the cell '
            "empty while its reading is awaited)",
            "columns/column-01.csv, row 2, column recovery_sd: -1 must be 0 or above, as it is a "
            "standard uncertainty",
        ],
    ),
    "per cent": (
        "run,recovery\n1,93\n",
        [
            "columns/column-01.csv, row 2, column recovery: 93 looks like per cent; a fraction is "
            'read as 0 to 1 (for per cent set unit = "%" in study.toml, responses, recovery)'
        ],
    ),
    "reason": (
        "run,recovery,exclude\n1,0.9,x\n",
        [
            'columns/column-01.csv, row 2, column exclude: "x" is not a reason (say in words why, '
            'such as "pipetted twice", or leave the cell empty)'
        ],
    ),
}


@pytest.mark.parametrize("name", FAULTS)
def test_faults_of_column_tables(study: Path, name: str) -> None:
    text, lines = FAULTS[name]
    column(study, text)
    before = tree(study)
    result = run("confirm", study, *AGAIN)
    assert result.exit_code == 2
    assert result.stderr.splitlines() == lines
    assert tree(study) == before


def test_a_run_at_another_condition_was_not_predicted(study: Path) -> None:
    ph = plan_of(study).runs[0].condition["ph"]
    column(study, f"run,ph,recovery\n1,{ph - 0.3},0.9\n")
    (line,) = run("confirm", study).stderr.splitlines()
    assert line == (
        f"columns/column-01.csv, row 2, column ph: {ph - 0.3:g} is not what run 1 was predicted "
        f"for, which is {ph} (give a reason under exclude, or plan again with muntin confirm "
        "--again)"
    )
    column(study, f"run,ph,recovery,exclude\n1,{ph - 0.3},0.9,wrong buffer\n")
    assert run("confirm", study).exit_code == 0
    column(study, f"run,ph,recovery\n1,{ph - 0.2},0.9\n")
    assert run("confirm", study).exit_code == 0


def test_a_column_before_its_prediction_is_refused(study: Path) -> None:
    for name in ("plan.csv", "plan.toml"):
        (study / "columns" / name).unlink()
    column(study, "run,recovery\n1,0.9\n")
    before = tree(study)
    result = run("confirm", study, *QUICK)
    assert result.exit_code == 2
    assert result.stderr == (
        "columns/column-01.csv: nothing was predicted before this run (move it out of columns/, "
        "then plan with muntin confirm)\n"
    )
    assert tree(study) == before


def test_planning_again_keeps_what_is_there_and_numbers_on(study: Path) -> None:
    column(study, "run,recovery\n1,0.9\n2,0.9\n")
    before = tree(study)
    result = run("confirm", study, *QUICK, *AGAIN, "--json")
    assert result.exit_code == 0, result.output
    after = tree(study)
    assert after[LEDGER].startswith(before.pop(LEDGER))
    assert {name: after[name] for name in before} == before
    new = set(after) - {*before, LEDGER}
    assert sorted(new) == ["columns/plan.r2.csv", "columns/plan.r2.toml"]
    last = json.loads(result.stdout)["plans"][-1]
    # 10 mg are reserved, 6 mg of them were used.
    assert [one["run"] for one in last["runs"]] == [4]
    assert last["because"] == "a second lot of resin"
    assert last["notices"] == [
        "The reserved 10 mg, less 6 mg of earlier runs, reach for 1 of 3 runs.",
        "Run 3 of an earlier plan is open; no protein is kept back for it.",
    ]


@pytest.mark.parametrize(
    ("options", "line"),
    [
        (("--again",), "--again needs --because TEXT: why it is planned again"),
        (
            ("--again", "--because", "x"),
            '--because "x" is not a reason (say in words why it is planned again)',
        ),
        (("--because", "new resin"), "--because is read only with --again"),
    ],
)
def test_planning_again_needs_a_reason(study: Path, options: tuple[str, ...], line: str) -> None:
    before = tree(study)
    result = run("confirm", study, *options)
    assert (result.exit_code, result.stderr) == (2, f"muntin confirm: {line}\n")
    assert tree(study) == before


def test_what_changed_since_the_plan_is_said(study: Path) -> None:
    with (study / "plates" / "plate-01.csv").open("a") as stream:
        stream.write("\n")
    with (study / "columns" / "plan.csv").open("a") as stream:
        stream.write("9,edge,6,200,3,,\n")
    (study / "stop-rule.jsonl").write_text("")
    screen = " ".join(run("confirm", study).stdout.split())
    assert "Changed since the runs were planned: plates/plate-01.csv; what was" in screen
    assert "columns/plan.csv was altered after it was written; the record holds" in screen


def test_a_spoilt_record_is_a_fault(study: Path) -> None:
    path = study / "columns" / "plan.toml"
    text = path.read_text("utf-8")
    line = next(line for line in text.splitlines() if line.startswith("own_sd"))
    path.write_text(text.replace(line, "own_sd = [0.1]"), encoding="utf-8")
    assert run("confirm", study).stderr == (
        "columns/plan.toml, predictions, recovery: must hold 3 figures in each list, one a run\n"
    )


@pytest.mark.parametrize(
    ("changed", "line"),
    [
        (
            {"plate": "well,role,ph,salt,recovery\n"},
            "muntin confirm: nothing has been read yet, so there is no window",
        ),
        (
            {"toml": (STUDY + COLUMNS).replace("at_least = 0.8", "at_least = 0.99")},
            "muntin confirm: no condition reaches a probability of 0.9, so there is no window "
            "(muntin propose plans further wells)",
        ),
        (
            {"toml": (STUDY + COLUMNS).replace("bed_ml = 0.5", "bed_ml = 5")},
            "study.toml, protein, reserved_mg: 10 does not reach for one run; it takes 25.5 mg "
            "(bed_ml, load and beside_mg in [columns] make it)",
        ),
    ],
)
def test_nothing_is_planned_where_there_is_nothing_to_confirm(
    tmp_path: Path, changed: dict[str, str], line: str
) -> None:
    files: dict[str, str | bytes] = {"toml": STUDY + COLUMNS, "plate": plate(), **changed}
    folder = small(tmp_path / "study", **files)
    before = tree(folder)
    result = run("confirm", folder, *QUICK)
    assert (result.exit_code, result.stderr) == (2, line + "\n")
    assert tree(folder) == before


def test_help_and_the_common_options() -> None:
    shown = run("confirm", "--help").stdout
    for option in ("--json", "--seed", "--quiet", "--again", "--because"):
        assert option in shown
    assert "do columns agree?" in run().stdout


def test_a_plan_is_written_whole_or_not_at_all(study: Path) -> None:
    for name in ("plan.csv", "plan.toml"):
        (study / "columns" / name).unlink()
    (study / "columns" / "plan.csv").mkdir()
    before = tree(study)
    result = run("confirm", study, *QUICK)
    place = study / "columns" / "plan.csv"
    assert result.stderr == f"{place}: is already there and is not overwritten\n"
    assert tree(study) == before
    assert [path.name for path in (study / "columns").iterdir()] == ["plan.csv"]


def test_of_two_that_plan_at_once_one_plan_stands(study: Path) -> None:
    from muntin.report.column_files import write_columns

    definition, plan = open_study(study).definition, plan_of(study)
    (study / "columns" / "plan.csv").unlink()
    (study / "columns" / "plan.toml").unlink()
    entry = Entry(command="confirm")
    paths = write_columns(study, definition, plan, 0, entry)[1]
    before = tree(study)
    # The other process looked before these files were there.
    with pytest.raises(StudyFaults) as caught:
        write_columns(study, definition, plan.model_copy(update={"seed": 2}), 0, entry)
    assert caught.value.lines() == [f"{p}: is already there and is not overwritten" for p in paths]
    assert tree(study) == before


def test_a_plan_has_its_line_in_the_ledger(study: Path) -> None:
    (line,) = read_ledger(study).sound
    entry, plan = line.entry, plan_of(study)
    assert (entry.command, entry.seed, entry.by) == ("confirm", 1, None)
    assert entry.inputs == plan.inputs
    assert set(entry.results) == {"columns/plan.csv", "columns/plan.toml"}
    assert entry.settings["surrogate"] == "quadratic"
    assert run("confirm", study, *QUICK, *AGAIN, "--by", "lab 2").exit_code == 0
    entry = read_ledger(study).sound[-1].entry
    assert (entry.by, entry.settings["because"]) == ("lab 2", AGAIN[2])
    assert set(entry.results) == {"columns/plan.r2.csv", "columns/plan.r2.toml"}


def test_the_table_is_filled_in_and_the_predictions_stay(study: Path) -> None:
    rows = (study / "columns" / "plan.csv").read_text()
    (study / "columns" / "plan.csv").write_text(rows.replace(",\n", ",mine\n"))
    assert (verify(study).differs, verify(study).notes) == ((), ())
    (study / "columns" / "plan.csv").rename(study / "columns" / "column-01.csv")
    assert (verify(study).differs, verify(study).notes) == ((), ())
    record = study / "columns" / "plan.toml"
    record.write_text(record.read_text().replace("probability = 0.9", "probability = 0.8", 1))
    (said,) = verify(study).differs
    assert said.startswith("columns/plan.toml was altered after it was written (line 1, ")
    record.unlink()
    (said,) = verify(study).differs
    assert said.startswith("columns/plan.toml was deleted (written with line 1, ")


def test_a_reason_to_plan_again_explains_no_change(study: Path) -> None:
    path = study / "study.toml"
    path.write_text(path.read_text().replace("at_least = 0.8", "at_least = 0.78"))
    said = open_study(study).changes.sentences
    assert said == ("study.toml, responses, recovery, at_least: 0.8, now 0.78",)
    assert run("confirm", study, *QUICK, *AGAIN, "--by", "lab 2").exit_code == 0
    assert open_study(study).changes.sentences == said
    assert read_ledger(study).sound[-1].open
    assert not verify(study).clean


def test_check_reads_the_columns_too(study: Path) -> None:
    column(study, "run,recovery\n1,0.9\n")
    facts = json.loads(run("check", study, "--json").stdout)
    assert facts["columns"] == {"planned": 3, "made": 1, "notices": []}
    told = "columns/: 3 column runs planned, 1 made; muntin confirm compares them"
    assert told in run("check", study).stdout
    column(study, "run,recovery\n8,0.9\n")
    result = run("check", study)
    line = "columns/column-01.csv, row 2, column run: 8 is not a planned run (planned: 1, 2, 3)\n"
    assert (result.exit_code, result.stderr) == (2, line)


def test_contact_and_residence_time_are_told_side_by_side(study: Path) -> None:
    path = study / "study.toml"
    more = "residence_min = 4\n\n[fixed]\ncontact_minutes = 60\n"
    path.write_text(path.read_text() + more)
    screen = " ".join(run("confirm", study).stdout.split())
    told = "Protein and resin met for 60 min on the plates, for 4 min in the column while loading."
    assert told in screen
