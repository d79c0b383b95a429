"""The protein ledger: what there was, what each plate took, what is kept back, what is left."""

from __future__ import annotations

from collections.abc import Hashable, Mapping
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from muntin.bench.protein import wells_mg
from muntin.record.study import Study
from muntin.report.canvas import finish, one_panel
from muntin.report.style import ACCENT, BARRED, INK, LINE, QUIET, dress
from muntin.report.words import amount_text, joined

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from muntin.bench.plan import Plan

_NAMES = {"plate": "used", "planned": "next plate, planned", "reserved": "reserved"}
_LOOKS = {"available": "#c9d3d8", "plate": LINE, "planned": ACCENT, "reserved": BARRED}


def protein_ledger(study: Study, plan: Plan | None = None) -> pd.DataFrame:
    """Return the protein of a study in mg, a row an entry, in the order in which it goes.

    Columns: entry ("available", a plate's name, "reserved for columns", "left"), kind ("available",
    "plate", "planned", "reserved", "left"), mg (what comes in or goes out) and after (what is then
    there). Raises ValueError where the study has no [protein].
    """
    protein = study.definition.protein
    if protein is None:
        raise ValueError("study.toml has no [protein]")
    taken = [
        (plate.name, "plate", _mg(study, study.wells[study.wells["plate"] == plate.name]))
        for plate in study.plates
    ]
    if plan is not None:
        taken.append((plan.plate, "planned", _mg(study, plan.wells)))
    if protein.reserved_mg:
        taken.append(("reserved for columns", "reserved", protein.reserved_mg))
    rows = [("available", "available", protein.available_mg, protein.available_mg)]
    left = protein.available_mg
    for entry, kind, mg in taken:
        left -= mg
        rows.append((entry, kind, mg, left))
    rows.append(("left", "left", left, left))
    return pd.DataFrame(rows, columns=["entry", "kind", "mg", "after"])


def protein(study: Study, plan: Plan | None = None, axes: Axes | None = None) -> Axes:
    """Draw the `protein_ledger` as steps from what was available to what is left, in mg.

    Raises ValueError where the study has no [protein].
    """
    table = protein_ledger(study, plan)
    left = float(table["mg"].iloc[-1])
    told = f"{amount_text(left)} left" if left >= 0 else f"{amount_text(-left)} too little"
    taken = {"planned": "the next plate", "reserved": "what is reserved"}
    after = [word for kind, word in taken.items() if kind in set(table["kind"])]
    told += f" after {joined(after)}" if after else ""
    axes, new = one_panel(axes, "Protein", told)
    first = table.groupby("kind")["mg"].head(1).index
    for row, one in enumerate(table.to_dict("records")):
        _bar(axes, one, row, named=row in first)
    axes.axvline(0.0, color=QUIET, linewidth=1)
    axes.set_yticks(-np.arange(len(table)), [*table["entry"]])
    axes.set(xlabel="Protein (mg)", ylim=(-len(table) + 0.4, 0.6))
    axes.margins(x=0.14)
    axes.set_xlim(left=min(0.0, 1.1 * float(table["after"].min())))
    dress(axes)
    axes.tick_params(axis="y", length=0)
    return finish(axes, new)


def _bar(axes: Axes, entry: Mapping[Hashable, Any], row: int, named: bool) -> None:
    """Draw one entry: from nothing where it is an amount there is, else down to what is left."""
    kind, mg = str(entry["kind"]), float(entry["mg"])
    whole = kind in ("available", "left")
    start = min(0.0, entry["after"]) if whole else entry["after"]
    axes.barh(
        -row,
        abs(mg),
        left=start,
        height=0.62,
        color=_LOOKS.get(kind, _LOOKS["available"]),
        hatch="////" if kind == "planned" else None,
        edgecolor="white",
        linewidth=0,
        label=_NAMES.get(kind) if named else None,
        zorder=2,
    )
    sign = "" if whole and mg >= 0 else "\N{MINUS SIGN}"
    text = f"  {sign}{amount_text(abs(mg))}"
    axes.text(start + abs(mg), -row, text, va="center", fontsize=9, color=INK)


def _mg(study: Study, rows: pd.DataFrame) -> float:
    return float(wells_mg(study.definition, rows).sum())
