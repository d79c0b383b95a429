"""The protein ledger: what there was, what each plate took, what is kept back, what is left."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pandas as pd

from muntin.bench.protein import wells_mg
from muntin.record.study import Study
from muntin.report.canvas import finish, one_panel
from muntin.report.style import ACCENT, BARRED, INK, LINE, QUIET, dress
from muntin.report.words import amount_text

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from muntin.bench.plan import Plan

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
    axes, new = one_panel(axes, "Protein", told)
    seen: set[str] = set()
    names = {"plate": "used", "planned": "next plate, planned", "reserved": "reserved"}
    for row, one in enumerate(table.to_dict("records")):
        kind, at = str(one["kind"]), -float(row)
        whole = kind in ("available", "left")
        start = min(0.0, one["after"]) if whole else one["after"]
        axes.barh(
            at,
            abs(one["mg"]),
            left=start,
            height=0.62,
            color=_LOOKS.get(kind, _LOOKS["available"]),
            hatch="////" if kind == "planned" else None,
            edgecolor="white",
            linewidth=0,
            label=names.get(kind) if kind not in seen else None,
            zorder=2,
        )
        seen.add(kind)
        sign = "" if whole else "\N{MINUS SIGN}"
        text = f"  {sign}{amount_text(abs(one['mg']))}"
        axes.text(start + abs(one["mg"]), at, text, va="center", fontsize=9, color=INK)
    axes.axvline(0.0, color=QUIET, linewidth=1)
    axes.set_yticks([-float(i) for i in range(len(table))], [*table["entry"]])
    axes.set(xlabel="Protein (mg)", ylim=(-len(table) + 0.4, 0.6))
    axes.margins(x=0.14)
    axes.set_xlim(left=min(0.0, 1.1 * float(table["after"].min())))
    dress(axes)
    axes.tick_params(axis="y", length=0)
    return finish(axes, new)


def _mg(study: Study, rows: pd.DataFrame) -> float:
    return float(wells_mg(study.definition, rows).sum())
