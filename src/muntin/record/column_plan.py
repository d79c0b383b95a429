"""Column runs that were planned, with what was predicted of each beforehand.

columns/plan.csv lists the runs, to be filled in; columns/plan.toml is the record of the
predictions. A later plan is plan.r2 and so on; runs are numbered through all plans.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from pathlib import Path
from typing import Literal

from muntin.record.definition import Definition
from muntin.record.edits import sha256
from muntin.record.faults import Fault, Findings, listed
from muntin.record.keys import Keys, Number, NumberOrText, Text, Whole, key
from muntin.record.tables import natural_order
from muntin.record.template import toml_value
from muntin.record.toml_files import parse, read_toml

COLUMNS = "columns"
PLAN = "plan"
Place = Literal["set point", "edge", "far side"]
_HEAD = """\
# What was predicted of column runs before they were made; written by muntin confirm. Do not edit:
# the runs are compared with these figures.
"""
_LONG = ("inputs", "versions", "runs", "predictions")


class PlannedRun(Keys):
    """One column run."""

    run: Whole = key(says="its number, over all plans of the study", ge=1)
    place: Place = key(says="what for: the set point, an edge of the window, or its far side")
    condition: dict[str, NumberOrText] = key(says="value of each factor, in its unit")
    probability: Number = key(says="judged probability of the condition")
    protein_mg: Number | None = key(None, says="protein that it takes", unit="mg")


class Prediction(Keys):
    """What was predicted of one response: a list of figures, one a run, or a row of them."""

    response: Text = key(says="the response")
    mean: tuple[Number, ...] = key(says="process mean", unit="the response's")
    mean_low: tuple[Number, ...] = key(says="lower end of its central 95 %", unit="the response's")
    mean_high: tuple[Number, ...] = key(says="upper end", unit="the response's")
    reading_low: tuple[Number, ...] = key(
        says="lower end of the central 95 % of one reading of a new well on a new plate",
        unit="the response's",
    )
    reading_high: tuple[Number, ...] = key(says="upper end", unit="the response's")
    logarithm: bool = key(
        says="whether the figures below are of natural logarithms, as noise is relative"
    )
    centre: tuple[Number, ...] = key(says="process mean", unit="the response's, or its logarithm")
    covariance: tuple[tuple[Number, ...], ...] = key(
        says="covariance of the process means of the runs"
    )
    own_sd: tuple[Number, ...] = key(says="what one reading errs by alone, standard deviation")
    plate_sd: tuple[Number, ...] = key(says="what wells of a plate share, standard deviation")


class ColumnPlan(Keys):
    """Planned column runs with their predictions."""

    written_at: Text = key(says="time of writing, UTC")
    seed: Whole = key(says="seed of the fit and the draws")
    surrogate: Text = key(says="gp, quadratic or stacked")
    engine: Text = key(says="fast or nuts")
    because: Text | None = key(None, says="why it was planned again")
    window_share: Number = key(says="share of the range inside the window")
    table_sha256: Text = key(says="of the table beside it, as written")
    notices: tuple[Text, ...] = key((), says="what there was to say of the plan")
    versions: dict[str, Text] = key({}, says="versions that the figures depend on")
    inputs: dict[str, Text] = key({}, says="SHA-256 of the study's files they rest on")
    runs: tuple[PlannedRun, ...] = key(says="the runs")
    predictions: tuple[Prediction, ...] = key(says="what was predicted of them, by response")


def plan_text(plan: ColumnPlan) -> str:
    """Return the record of a plan as TOML."""
    lines = [_HEAD + _keys(plan, _LONG)]
    for name in ("versions", "inputs"):
        given = getattr(plan, name)
        rows = [f"{toml_value(own)} = {toml_value(value)}\n" for own, value in given.items()]
        lines.append(f"[{name}]\n" + "".join(rows))
    lines += ["[[runs]]\n" + _keys(run) for run in plan.runs]
    lines += ["[[predictions]]\n" + _keys(one) for one in plan.predictions]
    return "\n".join(lines)


def _keys(model: Keys, without: tuple[str, ...] = ()) -> str:
    given = {n: v for n, v in model.model_dump().items() if n not in without and v is not None}
    return "".join(f"{name} = {toml_value(value)}\n" for name, value in given.items())


def plan_paths(folder: Path) -> list[Path]:
    """Return the records of all column plans of a study, oldest first."""
    return sorted((folder / COLUMNS).glob(f"{PLAN}*.toml"), key=lambda p: natural_order(p.name))


def read_plans(folder: Path, definition: Definition, found: Findings) -> list[ColumnPlan]:
    """Return the column plans of a study, oldest first; faults of their records join `found`."""
    plans = []
    for path in plan_paths(folder):
        file = f"{COLUMNS}/{path.name}"
        data = read_toml(path, file, ColumnPlan, found.faults)
        plan = None if data is None else parse(ColumnPlan, data, file, found.faults)
        if plan is not None:
            found.faults.extend(_record_faults(plan, definition, file))
            plans.append(plan)
            if _altered(path.with_suffix(".csv"), plan.table_sha256):
                found.notices.append(
                    f"{COLUMNS}/{path.stem}.csv was altered after it was written; the record holds"
                )
    return plans


def _altered(table: Path, hashed: str) -> bool:
    return table.is_file() and sha256(table.read_bytes()) != hashed


def _record_faults(plan: ColumnPlan, definition: Definition, file: str) -> Iterable[Fault]:
    names, count = set(definition.factor_names), len(plan.runs)
    for run in plan.runs:
        if set(run.condition) != names:
            yield Fault(
                file=file,
                where=f"runs, run {run.run}",
                problem=f"has the factors {listed(run.condition)}; the study now has",
                allowed=listed(definition.factor_names),
                hint="muntin confirm --again plans anew",
            )
    for one in plan.predictions:
        lists = [getattr(one, name) for name in _LISTS] + list(one.covariance)
        if any(len(values) != count for values in (*lists, one.covariance)):
            problem = f"must hold {count} figures in each list, one a run"
            yield Fault(file=file, where=f"predictions, {one.response}", problem=problem)


_MEANS = ("mean", "mean_low", "mean_high", "reading_low", "reading_high", "centre")
_LISTS = (*_MEANS, "own_sd", "plate_sd")


def next_run(plans: Iterable[ColumnPlan]) -> int:
    """Return the number of the first run of a further plan."""
    return 1 + max((run.run for plan in plans for run in plan.runs), default=0)


def finite(values: Iterable[float]) -> tuple[float, ...]:
    """Return figures as they go on record: eight significant digits."""
    return tuple(float(f"{value:.8g}") if math.isfinite(value) else 0.0 for value in values)
