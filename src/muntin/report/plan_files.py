"""The plan as a plate table, ready to be filled in and moved to plates/."""

from __future__ import annotations

import csv
import io
import re
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pandas as pd

from muntin.record.definition import Definition
from muntin.record.edits import record_path
from muntin.record.files import write_together
from muntin.record.offers import OFFERED, PLANS

if TYPE_CHECKING:
    from muntin.bench.plan import Plan

ADVICE = "advice"
PLAN_COPY = "plan.csv"


def plan_columns(definition: Definition) -> list[str]:
    """Return the columns of the plan's table; readings and other cells to fill in are empty."""
    shared = [name for error in definition.shared_errors for name in error.by]
    own = [name for name in shared if name != "plate" and name not in definition.factor_names]
    responses = [response.name for response in definition.responses]
    factors = definition.factor_names
    return list(
        dict.fromkeys(["well", "role", *factors, *own, *responses, "exclude", "p_now", "reason"])
    )


def plan_table_text(definition: Definition, plan: Plan) -> str:
    """Return the plan as a plate table (.csv), well by well along the rows of the plate."""
    stream = io.StringIO()
    columns = plan_columns(definition)
    columns += [str(name) for name in plan.wells if name not in columns]
    writer = csv.DictWriter(stream, columns, restval="", lineterminator="\n")
    writer.writeheader()
    rows = plan.wells.to_dict("records")
    for row in sorted(rows, key=lambda row: _position(row["well"])):
        writer.writerow(_cells(definition, row))
    return stream.getvalue()


def _position(well: str) -> tuple[int, str, int]:
    found = re.fullmatch(r"([A-Z]+)([0-9]+)", well)
    assert found is not None
    return len(found[1]), found[1], int(found[2])


def _cells(definition: Definition, row: dict[Any, Any]) -> dict[str, str]:
    cells = {str(name): "" if pd.isna(value) else str(value) for name, value in row.items()}
    cells |= {"well": row["well"], "role": row["role"], "reason": row["reason"] or ""}
    for factor in definition.factors:
        value = row[factor.name]
        empty = value is None or value == "" or pd.isna(value)
        cells[factor.name] = "" if empty else factor.shown(value)
    cells["p_now"] = "" if pd.isna(row["p_now"]) else f"{row['p_now']:.3f}"
    return cells


def plan_path(folder: Path, plate: str, text: str) -> tuple[Path, str]:
    """Return where to write a plan so that no edited one is lost, and a remark on it.

    A plan of that name that reads the same, or that equals a copy kept with earlier advice, is
    taken as untouched and makes way; any other stays, and the new one gets a number.
    """
    path = folder / PLANS / f"{plate}.csv"
    remarks, number = [], 1
    while path.exists() and (kept := _untouched(folder, plate, path, text)) is None:
        number += 1
        path = path.with_name(f"{plate}.r{number}.csv")
    if number > 1:
        remarks.append(
            f"{PLANS}/{plate}.csv was edited or differs, and was left as it is; rename the new "
            f"plan to {plate}.csv when you move it to plates/."
        )
    if path.exists() and kept:
        remarks.append(f"It replaces a plan that nobody had edited, kept as {kept}.")
    return path, " ".join(remarks)


def _untouched(folder: Path, plate: str, path: Path, text: str) -> str | None:
    """Where the advice keeps a copy of a plan, "" if it reads like the new one; None if neither."""
    copies = sorted(
        (folder / ADVICE / plate).glob(f"r*/{PLAN_COPY}"), key=lambda p: (len(str(p)), p)
    )
    try:
        there = path.read_bytes()
        if there == text.encode("utf-8"):
            return ""
        same = [copy for copy in copies if copy.read_bytes() == there]
    except OSError:
        return None
    return same[-1].relative_to(folder).as_posix() if same else None


def plan_files(path: Path, text: str) -> dict[Path, str]:
    """Return the files of a plan: itself, and a copy in plans/offered/ that is to stay as it is."""
    return {offered_path(path): text, path: text}


def write_plan(folder: Path, plate: str, text: str) -> tuple[Path, str]:
    """Write a plan and its copy, without a line in the ledger; return its path and a remark.

    Raises StudyFaults.
    """
    path, remark = plan_path(folder, plate, text)
    write_together(plan_files(path, text))
    return path, remark


def offered_path(plan: Path) -> Path:
    """Where the copy of a plan lies that tells what was offered."""
    return plan.parent / OFFERED / plan.name


def edited_path(folder: Path, plate: str) -> Path:
    """Return a name for an edited plan under which nothing lies yet: no plan, copy or record."""
    path, number = folder / PLANS / f"{plate}.csv", 1
    while any(p.exists() for p in (path, offered_path(path), record_path(path))):
        number += 1
        path = path.with_name(f"{plate}.r{number}.csv")
    return path
