"""Files of column runs: the table to fill in, and the record of what was predicted beforehand."""

from __future__ import annotations

import csv
import io
from pathlib import Path

from muntin.record.column_plan import COLUMNS, PLAN, ColumnPlan, plan_paths, plan_text
from muntin.record.definition import Definition
from muntin.record.edits import sha256
from muntin.record.faults import StudyFaults, listed
from muntin.record.files import write_new
from muntin.record.stop_rule import STOP_FILE
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
    folder: Path, definition: Definition, plan: ColumnPlan
) -> tuple[ColumnPlan, list[Path]]:
    """Write a plan under a name that is free; return it as on record, and the paths.

    Both files are written or, with StudyFaults, none; what is there is never overwritten, also
    where another process plans at the same time.
    """
    count = len(plan_paths(folder))
    stem = PLAN if not count else f"{PLAN}.r{count + 1}"
    table, record = (folder / COLUMNS / f"{stem}{ending}" for ending in (".csv", ".toml"))
    text = table_text(definition, plan)
    plan = plan.model_copy(update={"table_sha256": sha256(text.encode("utf-8"))})
    write_new(record, plan_text(plan))
    try:
        write_new(table, text)
    except StudyFaults:
        record.unlink(missing_ok=True)
        raise
    return plan, [table, record]
