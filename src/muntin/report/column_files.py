"""Files of column runs: the table to fill in, and the record of what was predicted beforehand."""

from __future__ import annotations

import csv
import io
from pathlib import Path

from muntin.record.column_plan import COLUMNS, PLAN, ColumnPlan, plan_text
from muntin.record.definition import Definition
from muntin.record.edits import sha256
from muntin.record.faults import Fault, StudyFaults, listed
from muntin.record.ledger import Entry
from muntin.record.stop_rule import STOP_FILE
from muntin.record.writing import writing
from muntin.report.advice_files import hashes, read_inputs


def table_text(definition: Definition, plan: ColumnPlan) -> str:
    """Return the runs as a table: run, place, factors, protein_mg; readings and exclude empty."""
    stream = io.StringIO()
    responses = [response.name for response in definition.responses]
    heading = ["run", "place", *definition.factor_names, "protein_mg", *responses, "exclude"]
    writer = csv.DictWriter(stream, heading, restval="", lineterminator="\n")
    writer.writeheader()
    for run in plan.runs:
        condition = {f.name: f.shown(run.condition[f.name]) for f in definition.factors}
        mg = "" if run.protein_mg is None else f"{run.protein_mg:.6g}"
        writer.writerow({"run": run.run, "place": run.place, "protein_mg": mg} | condition)
    return stream.getvalue()


def since_plan(folder: Path, plan: ColumnPlan) -> list[str]:
    """Return a notice where input files of a study are no longer those that a plan rests on; the
    stop rule is none of them.
    """
    now = hashes(read_inputs(folder))
    names = [name for name in {**plan.inputs, **now} if name != STOP_FILE]
    changed = [name for name in names if plan.inputs.get(name) != now.get(name)]
    if not changed:
        return []
    return [
        f"Changed since the runs were planned: {listed(changed)}; what was predicted then stands."
    ]


def write_columns(
    folder: Path, definition: Definition, plan: ColumnPlan, earlier: int, entry: Entry
) -> tuple[ColumnPlan, list[Path], list[str]]:
    """Write a plan beside the `earlier` ones with its line in the ledger, all or none; return it as
    on record, the paths of table and record, and remarks for the user.

    Raises StudyFaults where something of its name is there, as another process that planned
    meanwhile leaves it, and where the folder cannot be written.
    """
    stem = PLAN if not earlier else f"{PLAN}.r{earlier + 1}"
    table, record = paths = [folder / COLUMNS / f"{stem}{ending}" for ending in (".csv", ".toml")]
    text = table_text(definition, plan)
    plan = plan.model_copy(update={"table_sha256": sha256(text.encode("utf-8"))})
    with writing(folder) as pen:
        problem = "is already there and is not overwritten"
        there = [Fault(file=str(path), problem=problem) for path in paths if path.exists()]
        if there:
            raise StudyFaults(there)
        pen.commit({record: plan_text(plan), table: text}, entry)
        return plan, paths, pen.remarks
