"""Sessions of a user on small invented studies, whose output the reference is held against."""

from __future__ import annotations

import csv
import json
from collections import defaultdict
from pathlib import Path
from typing import Any

import pytest

from muntin.surrogate import nuts
from tests.assay.studies import ROWS
from tests.assay.studies import write as write_reads
from tests.report.studies import STUDY, plate, write
from tests.stand_in import stand_in
from tests.test_cli import rows_of, run
from tests.test_cli_uptake import WHOLE

QUICK = ("--surrogate", "quadratic")
_MORE = """
[[responses]]
name = "hcp"
kind = "positive"
at_most = 5000

[[shared_errors]]
by = ["plate", "operator"]

[plan]
days_per_plate = 2
assays_per_well = 1

[stop]
wrong_share = 0.02

[bench]
well_ul = 400
ph_factor = "ph"
pipette_floor_ul = 5
pipette_step_ul = 1
dead_volume_ul = 1000
protein_mg_per_ml = 1
salt_factor = "salt"
salt_stock_mm = 2000

[[bench.buffers]]
name = "acetate"
mm = 10
stock_mm = 200
below_ph = 5.5

[[bench.buffers]]
name = "phosphate"
mm = 10
stock_mm = 200
from_ph = 5.5

[[bench.stocks]]
name = "low salt"
per = "ph"
holds = { salt = 20 }

[[bench.stocks]]
name = "high salt"
per = "ph"
holds = { salt = 500 }

[fixed]
stages = 2

[uptake]
planned_min = 45
phase_ratio = 15
"""


class Session:
    """Documents and tables by the name that the reference has for them."""

    def __init__(self) -> None:
        self.documents: dict[str, list[Any]] = defaultdict(list)
        self.tables: dict[str, list[list[str]]] = defaultdict(list)

    def run(self, command: str, *arguments: object) -> Any:
        """Run a command and keep its JSON document."""
        result = run(command, *arguments, "--json")
        assert result.exit_code in (0, 2), result.output
        facts = json.loads(result.stdout)
        name = command if result.exit_code == 0 else "any command, exit code 2"
        self.documents[name].append(facts)
        return facts

    def table(self, name: str, path: Path) -> None:
        """Keep the headings of a table."""
        with path.open(encoding="utf-8", newline="") as stream:
            self.tables[name].append(next(csv.reader(stream)))


def session(folder: Path) -> Session:
    """Run every command, with the options that add fields."""
    done = Session()
    done.run("new", folder / "fresh")
    done.run("help", "kept_within")
    done.run("assess", folder / "nowhere")
    # The reading that A1 holds already is not replaced.
    _reads(done, write_reads(folder / "reads", rows=[*ROWS[:1], "A1,test,5,100,0.9", *ROWS[2:]]))
    _screen(done, folder / "screen")
    return done


def _reads(done: Session, study: Path) -> None:
    done.run("reduce", study, "reads", "--monte-carlo", 20)
    record = study / "reductions" / "plate-01.json"
    done.documents["reductions/<plate>.json"].append(json.loads(record.read_text("utf-8")))
    done.table("reductions/<plate>-masses.csv", study / "reductions" / "plate-01-masses.csv")
    done.table("READS", study / "reductions" / "plate-01-reads.csv")


def _screen(done: Session, study: Path) -> None:
    write(study, {"study.toml": STUDY + _MORE, "plates/plate-01.csv": _plate()})
    write(study, {"uptake/whole.csv": WHOLE})
    done.run("uptake", study)
    done.run("assess", study, *QUICK, "--at", _conditions(study), "--negligible", 0.05)
    done.run("assess", study, *QUICK, "--out", study / "out.csv")
    done.table("OUT", study / "out.csv")
    done.run("propose", study, "--wells", 4, *QUICK)
    done.run("propose", study, *QUICK, "--keep", _edited(study), "--by", "me", "--because", "why")
    done.run("check", study)
    with (study / "ledger.jsonl").open("a", encoding="utf-8") as ledger:
        ledger.write('{"number":')
    done.run("prepare", study)
    _sheets(done, study)
    _on_record(done, study)
    _columns(done, study)
    done.run("rehearse", study, "--plates", 4, "--series", 1, *QUICK, "--workers", 1)
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(nuts, "sample", stand_in)
        done.run("assess", study, *QUICK, "--engine", "nuts", "--draws", study / "draws")
    _run_otherwise(study)
    done.run("check", study)
    lines = (study / "ledger.jsonl").read_text("utf-8").splitlines()
    done.documents["ledger.jsonl"] += map(json.loads, lines)


def _on_record(done: Session, study: Path) -> None:
    """Advice after a target was changed, the page, and both held against what is there."""
    toml = study / "study.toml"
    toml.write_text(toml.read_text("utf-8").replace("at_most = 5000", "at_most = 5010"), "utf-8")
    why = ("--by", "me", "--because", "the assay was recalibrated")
    done.run("advise", study, "--wells", 4, *QUICK, *why)
    # The second page tells what it replaced.
    done.run("report", study, "--wells", 4, *QUICK)
    facts = done.run("report", study, "--wells", 4, *QUICK)
    record = json.loads((study / "report" / "report.json").read_text("utf-8"))
    assert {name for name in facts if name not in record} == {"files"}
    own = {name: value for name, value in record.items() if name not in facts}
    done.documents["report/report.json"].append(own)
    done.run("verify", study, "--no-recompute")


def _columns(done: Session, study: Path) -> None:
    done.run("confirm", study, *QUICK)
    done.table("columns/<plan>.csv", study / "columns" / "plan.csv")
    rows = "run,recovery,hcp,exclude\n1,0.9,300,\n2,0.9,300,\n3,0.9,,the pump stopped\n"
    (study / "columns" / "column-01.csv").write_text(rows, encoding="utf-8")
    done.run("confirm", study)


def _plate() -> str:
    lines = plate(14, "operator", "Z1|Z2").splitlines()
    told = [f"{line},{hcp}" for line, hcp in zip(lines[1:], range(100, 1500, 100), strict=True)]
    told.append("B3,test,5.5,100,Z1,0.6,pipetted twice,700")
    return "\n".join([f"{lines[0]},hcp", *told]) + "\n"


def _conditions(study: Path) -> Path:
    path = study / "conditions.csv"
    path.write_text("ph,salt,operator\n6,200,Z1\n", encoding="utf-8")
    return path


def _edited(study: Path) -> Path:
    """The plan with one test well moved to another salt, and an own column."""
    rows = rows_of(study / "plans" / "plate-02.csv")
    first = next(row for row in rows if row["role"] == "test")
    first["salt"] = "100" if first["salt"] != "100" else "150"
    _saved(study / "edited.csv", [row | {"operator": "Z1"} for row in rows])
    return study / "edited.csv"


def _saved(path: Path, rows: list[dict[str, str]]) -> None:
    with path.open("w", newline="", encoding="utf-8") as stream:
        writer = csv.DictWriter(stream, list(rows[0]))
        writer.writeheader()
        writer.writerows(rows)


def _sheets(done: Session, study: Path) -> None:
    (sheets,) = (study / "sheets").iterdir()
    for path in sheets.glob("*.csv"):
        done.table(f"sheets/<plan>/{path.name}", path)
    done.table("plans/<plate>.csv", study / "plans" / "plate-02.csv")


def _run_otherwise(study: Path) -> None:
    """The plan is run, but for one well."""
    rows = rows_of(study / "plans" / "plate-02.csv")
    first = next(row for row in rows if row["role"] == "test")
    kept = [row | {"operator": "Z1", "recovery": "0.5"} for row in rows if row is not first]
    _saved(study / "plates" / "plate-02.csv", kept)
