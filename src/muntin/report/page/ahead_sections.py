"""Sections on the next plate and what it is expected to bring, and on the protein."""

from __future__ import annotations

from collections import Counter
from typing import TYPE_CHECKING

import pandas as pd

from muntin.bench.protein import protein_left_mg, wells_mg
from muntin.design.stopping import asked_of_set_point
from muntin.record.study import Study
from muntin.report.page.basis import Basis
from muntin.report.page.blocks import Section, Table
from muntin.report.page.phrases import heading, settings
from muntin.report.plan_text import (
    bridging_line,
    no_set_point_line,
    not_forecast_line,
    plan_heading,
    usual_reason,
    why_text,
)
from muntin.report.ruling_text import ruling_line, wrong_share_texts
from muntin.report.words import amount_text, likely_text, odds_text, per_cent, share_text

if TYPE_CHECKING:
    from muntin.bench.plan import Plan

_MOST_BRIDGES = 100
_AMOUNTS = {"plates": ("plates", "g"), "mg": ("protein, mg", ".3g"), "assays": ("assay slots", "g")}


def next_section(basis: Basis) -> Section:
    """Return the next plate with its forecast, or why there is none."""
    if basis.plan is None:
        return Section(
            name="next",
            title="The next plate",
            says=("No next plate is planned.", *basis.unplanned),
        )
    study, plan, fresh = basis.study, basis.plan, basis.view.fresh
    says = [plan_heading(plan), *bridging_line(study.definition, plan.wells, _MOST_BRIDGES)]
    if fresh:
        reason = usual_reason(plan.wells)
        says += [f"{reason[:1].upper()}{reason[1:]}.", "No forecast before the first readings."]
    else:
        says += [
            ruling_line(study, plan),
            *no_set_point_line(plan),
            *not_forecast_line(study, plan),
        ]
    tables = [*([] if fresh else [_forecast(study, plan)]), _wells(basis, plan)]
    return Section(
        name="next",
        title="The next plate",
        says=tuple(says),
        figures=basis.figures("forecast"),
        tables=tuple(tables),
        notes=plan.notices,
    )


def _forecast(study: Study, plan: Plan) -> Table:
    forecast = plan.forecast
    taken = [name for name in _AMOUNTS if name in forecast]
    reaches = f"chance that it reaches {per_cent(asked_of_set_point(study))}"
    told = bool(forecast["set_point"].notna().any())
    head = [
        "test wells",
        *(_AMOUNTS[name][0] for name in taken),
        *(["days"] if "days" in forecast else []),
        "range that may be called wrongly",
        *(["set point passes", reaches] if told else []),
    ]
    rows = []
    wrong = wrong_share_texts(study, plan)
    for row, share in zip(forecast.to_dict("records"), wrong, strict=True):
        today = not row["wells"]
        cells = [f"{row[name]:{_AMOUNTS[name][1]}}" for name in taken]
        cells += [f"{row['days']:.1f}"] if "days" in forecast else []
        cells += [share]
        if told:
            reached = row["reached"]
            chance_of = ("yes" if reached else "no") if today else likely_text(reached)
            cells += [share_text(row["set_point"]), chance_of]
        rows.append((f"{int(row['wells'])}{' (today)' if today else ''}", *cells))
    return Table(
        caption="What more test wells are expected to bring",
        head=tuple(head),
        rows=tuple(rows),
        numbers=tuple(range(len(head))),
    )


def _wells(basis: Basis, plan: Plan) -> Table:
    """The conditions of the plan, each with its wells."""
    definition, fresh = basis.definition, basis.view.fresh
    run = plan.wells[plan.wells["role"].isin(["test", "bridge", "reference"])]
    names, rows = list(definition.factor_names), []
    for _, here in run.sort_values(["role", *names], kind="stable").groupby(
        ["role", *names], sort=False
    ):
        first = here.iloc[0]
        reasons = why_text(here, definition.factors)
        wells = ", ".join(here["well"])
        p_now = [] if fresh else [odds_text(float(first["p_now"]), definition.required_probability)]
        rows.append((wells, first["role"], *settings(definition, first.to_dict()), *p_now, reasons))
    head = (
        "wells",
        "role",
        *map(heading, definition.factors),
        *([] if fresh else ["probability today"]),
        "why",
    )
    figures = range(2, len(head) - 1)
    return Table(
        caption=f"Conditions of {plan.plate}",
        head=head,
        rows=tuple(rows),
        numbers=tuple(figures),
    )


def protein_section(basis: Basis) -> Section:
    """Return what protein there was, where it went, and what is left."""
    study, protein = basis.study, basis.definition.protein
    if protein is None:
        return Section(name="protein", title="Protein")
    rows = [("at hand", "", f"{protein.available_mg:.4g}", f"{protein.available_mg:.4g}")]
    left = protein.available_mg
    taken = wells_mg(basis.definition, study.wells)
    for plate in study.plates:
        here = (study.wells["plate"] == plate.name).to_numpy()
        used = float(taken[here].sum())
        left -= used
        wells = int((taken[here] > 0).sum())
        name = f"{plate.name} (void)" if plate.void else plate.name
        rows.append((name, str(wells), f"-{used:.4g}", f"{left:.4g}"))
    left -= protein.reserved_mg
    rows.append(("reserved for columns", "", f"-{protein.reserved_mg:.4g}", f"{left:.4g}"))
    if basis.plan is not None and basis.plan.protein_mg is not None:
        used = basis.plan.protein_mg
        loaded = int((wells_mg(basis.definition, basis.plan.wells) > 0).sum())
        name = f"{basis.plan.plate}, as planned"
        rows.append((name, str(loaded), f"-{used:.4g}", f"{left - used:.4g}"))
    table = Table(
        caption="Protein, mg",
        head=("what", "wells that take it", "mg", "left, mg"),
        rows=tuple(rows),
        numbers=(1, 2, 3),
    )
    free = protein_left_mg(study)
    says = () if free is None else (f"{amount_text(free)} are left to plan with today.",)
    return Section(
        name="protein",
        title="Protein",
        says=says,
        figures=basis.figures("protein"),
        tables=(table,),
    )


def roles_text(wells: pd.DataFrame) -> str:
    """Return how many wells of each role a plate has: "24 test, 4 blank"."""
    return ", ".join(f"{count} {role}" for role, count in Counter(wells["role"]).items())
