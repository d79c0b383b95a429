"""What is to be seen in each figure, in words, for those who cannot see it."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pandas as pd

from muntin.record.factors import Factor
from muntin.record.faults import counted, number
from muntin.record.responses import Response
from muntin.record.study import Study
from muntin.report.figures import figure_titles
from muntin.report.joint_figure import joint_passes
from muntin.report.plates_figure import repeated
from muntin.report.protein_figure import protein_ledger
from muntin.report.ruling_text import ruling_line, wrong_share_texts
from muntin.report.sections import section
from muntin.report.sides_figure import side_text
from muntin.report.together_figure import tightest
from muntin.report.verdicts import verdicts
from muntin.report.words import (
    amount_text,
    axis_label,
    chance_text,
    condition_text,
    joined,
    odds_text,
    ranges_text,
    setting_text,
    success_text,
)
from muntin.window.assessment import Assessment
from muntin.window.group_errors import group_errors

if TYPE_CHECKING:
    from muntin.bench.plan import Plan


def map_words(view: Assessment) -> str:
    """Say what the map shows."""
    run = verdicts(view.study)["verdict"].value_counts()
    wells = ", ".join(f"{count} {verdict}" for verdict, count in run.items())
    told = f"Conditions run: {wells}." if wells else "Nothing was run."
    window = None if view.fresh else view.window()
    said = f"{figure_titles(view, window)[1]}. {told}"
    if window is None or window.unsupported:
        return said
    definition = view.study.definition
    place = condition_text(definition, window.setpoint.to_dict())
    chance = success_text(definition, float(window.setpoint["probability"]))
    best = "The set point is" if window.share else "The best condition so far is"
    ranges = f" {ranges_text(definition, window.ranges)} hold together." if window.ranges else ""
    return f"{said} {best} {place}: {chance}.{ranges}"


def joint_words(view: Assessment) -> str:
    """Say what the joint pass shows."""
    kinds = {
        "p_mean": "process mean",
        "p_well": "new well",
        "p_kept": "new well, factors kept within their tolerance",
    }
    parts = []
    for row in joint_passes(view).to_dict("records"):
        known = {kinds[k]: row[k] for k in kinds if k in row and not pd.isna(row[k])}
        told = ", ".join(f"{kind} {odds_text(p)}" for kind, p in known.items())
        parts.append(f"{row['what']}: {told}")
    required = chance_text(view.study.definition.required_probability)
    place = _best(view)
    return f"Probability to pass at the {place}. {'; '.join(parts)}. Required: {required}."


def _best(view: Assessment) -> str:
    return "set point" if view.window().share else "best condition so far"


def sides_words(view: Assessment) -> str:
    """Say which response fails first on each side."""
    definition = view.study.definition
    factors = {f.name: f for f in definition.factors}
    parts = []
    for side in view.window().sides:
        word = "below" if side.end == "low" else "above"
        where = f"{word} {setting_text(factors[side.factor], side.at)}"
        split = ", " if side.response is not None else " "
        parts.append(f"{where}: {split.join(side_text(view, side))}")
    return f"What fails first beyond the ranges that hold together, {'; '.join(parts)}."


def together_words(view: Assessment) -> str:
    """Say where all responses pass together along the factor of the figure."""
    along = tightest(view)
    table = section(view, along, new=False)
    inside = table[table["probability"] >= view.study.definition.required_probability]
    told = "nowhere"
    if len(inside) and along.continuous:
        low, high = along.shown(inside[along.name].min()), along.shown(inside[along.name].max())
        told = f"from {low} to {high} {along.unit}".rstrip()
    elif len(inside):
        told = f"with {joined([str(v) for v in inside[along.name]])}"
    return (
        f"Along {along.label}, other factors at the {_best(view)}, the required probability is "
        f"reached {told}."
    )


def factor_words(view: Assessment, along: Factor) -> str:
    """Say where each response goes along a factor."""
    table = section(view, along, new=False).dropna()
    parts = []
    for response in view.study.definition.responses:
        mean = f"{response.name}_mean"
        if mean in table and len(table):
            first, last = table[mean].iloc[0], table[mean].iloc[-1]
            unit = f" {response.unit}".rstrip()
            parts.append(f"{response.label} goes from {first:.3g} to {last:.3g}{unit}")
    ends = [along.shown(table[along.name].iloc[i]) for i in (0, -1)] if len(table) else ["", ""]
    name = axis_label(along.label, along.unit)
    return f"Process means along {name} from {ends[0]} to {ends[1]}: {'; '.join(parts)}."


def plates_words(view: Assessment, response: Response) -> str:
    """Say how the plates read beside each other."""
    table, again = group_errors(view, response), repeated(view, response)
    parts = [
        f"{row['group']} {row['error']:+.2g} {row['unit']}".rstrip()
        + f" ({row['low']:+.2g} to {row['high']:+.2g})"
        for row in table.to_dict("records")[:12]
    ]
    told = f"Errors that wells share, with 95 % intervals: {'; '.join(parts)}." if parts else ""
    count = int(again["number"].nunique())
    more = f" Read on several plates: {counted(count, 'condition')}." if count else ""
    return f"{response.label}. {told}{more}".strip()


def forecast_words(view: Assessment, plan: Plan) -> str:
    """Say what more test wells are expected to bring."""
    shares = wrong_share_texts(view.study, plan)
    rows = [
        f"{wells} wells {share}"
        for wells, share in zip(plan.forecast["wells"], shares, strict=True)
    ]
    return (
        f"Expected share of the range that may still be called wrongly: {', '.join(rows)}. "
        f"{ruling_line(view.study, plan)}"
    )


def protein_words(study: Study, plan: Plan | None) -> str:
    """Say where the protein went."""
    table = protein_ledger(study, plan)
    parts = [f"{row['entry']} {amount_text(row['mg'])}" for row in table.to_dict("records")]
    return f"Protein in {number(len(table))} entries: {', '.join(parts)}."
