"""Conditions to judge, read from a table, and what is known there written to another."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd

from muntin.record.definition import Definition
from muntin.record.faults import Fault, Findings, StudyFaults
from muntin.record.files import write_atomic
from muntin.record.inputs import input_paths
from muntin.record.levels import read_choices, read_targets
from muntin.record.tables import Table, missing_column, read_table
from muntin.window.assessment import Assessment


def read_conditions(path: Path, definition: Definition) -> pd.DataFrame:
    """Return the conditions in a table: its columns, the factors as numbers or choices.

    Raises StudyFaults with every fault: no such file, a missing column, a value that is empty, no
    number, or outside the factor's range.
    """
    file, found = str(path), Findings()
    if not path.is_file():
        raise StudyFaults([Fault(file=file, problem="there is no such file")])
    table = read_table(path, file, definition.factor_names, found)
    frame = pd.DataFrame() if table is None else _frame(table, definition, found)
    if table is not None and not len(table) and not found.faults:
        found.faults.append(Fault(file=file, problem="holds no condition below its headings"))
    if found.faults:
        raise StudyFaults(found.faults)
    return frame


def _frame(table: Table, definition: Definition, found: Findings) -> pd.DataFrame:
    columns: dict[str, object] = {**table.columns}
    every = np.ones(len(table), dtype=bool)
    for factor in definition.factors:
        if factor.name not in table.columns:
            found.faults.append(missing_column(table, factor.name))
        elif factor.continuous:
            columns[factor.name] = read_targets(table, factor, every, found)
        else:
            columns[factor.name] = read_choices(table, factor, every, found)
    return pd.DataFrame(columns)


def check_out(out: Path, at: Path | None, folder: Path) -> None:
    """Raise StudyFaults where a table to write is no .csv, or would replace one that was read."""
    if out.suffix.lower() != ".csv":
        problem = "cannot be written; tables are written as .csv"
        hint = f"name it {out.stem.removesuffix('.csv')}.csv"
        raise StudyFaults([Fault(file=str(out), problem=problem, hint=hint)])
    read = [*input_paths(folder), *([at] if at is not None else [])]
    if out.exists() and out.resolve() in [path.resolve() for path in read]:
        fault = Fault(file=str(out), problem="is read by this command and is not overwritten")
        raise StudyFaults([fault])


def check_draws(folder: Path, engine: str) -> None:
    """Raise StudyFaults where draws are asked of an engine that makes none, or into a file."""
    if engine != "nuts":
        problem = "gets no draws: only --engine nuts makes them"
        raise StudyFaults([Fault(file=str(folder), problem=problem)])
    if folder.exists() and not folder.is_dir():
        raise StudyFaults([Fault(file=str(folder), problem="is a file, not a folder for draws")])


def check_noise(noise: str, engine: str) -> None:
    """Raise StudyFaults where a law of the noise is asked of an engine that has one only."""
    if noise != "normal" and engine != "nuts":
        problem = f"--noise {noise}: only --engine nuts knows it"
        raise StudyFaults([Fault(file="muntin assess", problem=problem)])


def known_at(view: Assessment, conditions: pd.DataFrame) -> pd.DataFrame:
    """Return the conditions with what is known there beside them."""
    known = view.at(conditions)
    own = [name for name in conditions if name not in known]
    return pd.concat([conditions[own], known], axis=1)


def write_table(table: pd.DataFrame, out: Path) -> None:
    """Write a table (.csv), probabilities and responses to six significant digits."""
    write_atomic(out, table.to_csv(index=False, float_format="%.6g", lineterminator="\n"))
