"""A small invented study with bottles: plans are written by hand, no well need be fitted."""

from __future__ import annotations

import csv
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from muntin.record import Study, open_study
from tests.report.studies import STUDY, small

Row = tuple[Any, ...]
LOW = {"name": "low salt", "per": "ph", "holds": {"salt": 0}}
HIGH = {"name": "high salt", "per": "ph", "holds": {"salt": 500}}
BENCH: Mapping[str, Any] = {
    "well_ul": 400,
    "ph_factor": "ph",
    "protein_mg_per_ml": 2.0,
    "pipette_floor_ul": 5,
    "pipette_step_ul": 0.5,
    "dead_volume_ul": 1000,
    "stocks": [LOW, HIGH],
}
PROTEIN = "[protein]\navailable_mg = 40\nreserved_mg = 10\nper_well_mg = 0.25\n"
ROWS: Sequence[Row] = [
    ("A1", "test", 5.0, 100),
    ("A2", "test", 5.0, 400),
    ("B3", "bridge", 4.5, 50),
    ("C4", "test", 5.0, 100),
    ("D5", "blank", "", ""),
    ("E6", "load", "", ""),
    ("F7", "no_resin", "", ""),
]


def toml(value: Any) -> str:
    """A value as TOML writes it."""
    if isinstance(value, Mapping):
        return "{" + ", ".join(f"{k} = {toml(v)}" for k, v in value.items()) + "}"
    if isinstance(value, list | tuple):
        return "[" + ", ".join(map(toml, value)) + "]"
    return f'"{value}"' if isinstance(value, str) else str(value)


def bench_text(**changed: Any) -> str:
    """The table [bench] with some keys changed, or left out where they are None."""
    keys = {**BENCH, **changed}
    return "[bench]\n" + "".join(f"{k} = {toml(v)}\n" for k, v in keys.items() if v is not None)


def write_plan(folder: Path, rows: Sequence[Row], name: str = "plate-02.csv") -> Path:
    """Write a plan of the small study: well, role, ph, salt."""
    path = folder / "plans" / name
    path.parent.mkdir(exist_ok=True)
    with path.open("w", newline="", encoding="utf-8") as stream:
        writer = csv.writer(stream)
        writer.writerow(["well", "role", "ph", "salt", "reason"])
        writer.writerows([*row, ""] for row in rows)
    return path


def bottled(
    folder: Path, rows: Sequence[Row] = ROWS, protein: str = PROTEIN, plan: str = "", **changed: Any
) -> Path:
    """Write the small study with [bench], and a plan in plans/; return its folder."""
    study = STUDY.partition("[protein]")[0]
    small(folder, toml=f"{study}\n{protein}\n{plan}\n{bench_text(**changed)}")
    write_plan(folder, rows)
    return folder


def opened(folder: Path, **changed: Any) -> Study:
    """The same, opened."""
    return open_study(bottled(folder, **changed))
