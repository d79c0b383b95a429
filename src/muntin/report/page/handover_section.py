"""Section on the window in ranges: what holds together, how far the edge is, what repeats bring."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np

from muntin.record.definition import Definition
from muntin.record.factors import Factor
from muntin.report.handover_text import at_once_text, proposal_text, spread_text
from muntin.report.page.basis import Basis
from muntin.report.page.blocks import Section, Table
from muntin.report.page.phrases import heading, measure, settings
from muntin.report.words import (
    chance_text,
    condition_text,
    likely_text,
    odds_text,
    ranges_text,
    share_text,
)
from muntin.window.handover import Box, HandOver

_ENDS = {"low": "down", "high": "up"}


def handover_section(basis: Basis) -> Section:
    """Return ranges, margins, tolerance, edge and repeats of the window, where there is one."""
    handed, window = basis.handed, basis.standing
    if handed is None or window is None or not window.share:
        return Section(name="ranges", title="Ranges to hand over")
    tables = [
        *_boxes(basis, handed),
        *_margins(basis.definition, handed),
        *_corners(basis.definition, handed),
        *_repeats(basis.definition, handed),
        *_edge(basis.definition, handed),
    ]
    says = (
        "Ranges hold together where every condition in them reaches the required probability. "
        f'"All at once" is a stronger claim: {at_once_text(handed)[5:]}.',
        " ".join(filter(None, (proposal_text(handed), spread_text(handed)))),
    )
    notes = (
        f"What holds at once was counted over {handed.draws} draws from the model (seed "
        f"{handed.seed}).",
    )
    return Section(
        name="ranges", title="Ranges to hand over", says=says, tables=tuple(tables), notes=notes
    )


def _boxes(basis: Basis, handed: HandOver) -> list[Table]:
    asked = chance_text(handed.asked_assurance)
    named = (
        ("the largest around the set point", handed.box),
        (f"holding at once with {asked}", handed.assured),
        ("larger, without the set point", handed.larger),
    )
    rows = tuple(
        _box(basis.definition, name, box)
        for name, box in named
        if box is not None and (box is handed.box or box != handed.box)
    )
    if not rows:
        return []
    head = (
        "ranges",
        "from and to",
        "share of the range",
        "lowest probability",
        "at",
        "all at once",
    )
    return [Table(caption="Ranges that hold together", head=head, rows=rows, numbers=(2, 3, 5))]


def _box(definition: Definition, name: str, box: Box) -> tuple[str, ...]:
    return (
        name,
        ranges_text(definition, box.ranges),
        share_text(box.share),
        odds_text(box.least, definition.required_probability),
        condition_text(definition, box.least_at),
        likely_text(box.assurance),
    )


def _margins(definition: Definition, handed: HandOver) -> list[Table]:
    factors = _by_name(definition.factors)
    rows = []
    for margin in handed.margins:
        factor = factors[margin.factor]
        direction = f"{factor.label}, {_ENDS[margin.end]}"
        if margin.edge is None or margin.distance is None:
            end = _with_unit(factor, margin.end_of_range)
            rows.append((direction, "none reached", "", f"the tested range ends at {end}"))
            continue
        edge = f"{_level(factor, margin.edge)} {factor.unit}".rstrip()
        away = f"{_level(factor, margin.distance)} {factor.unit}".rstrip()
        rows.append((direction, edge, away, "a limit of the study" if margin.limited else ""))
    if not rows:
        return []
    head = ("from the set point", "edge at", "away by", "what ends it")
    caption = "How far the edge is, one factor moved at a time"
    return [Table(caption=caption, head=head, rows=tuple(rows), numbers=(1, 2))]


def _corners(definition: Definition, handed: HandOver) -> list[Table]:
    rows = tuple(
        (
            *settings(definition, corner.condition),
            odds_text(corner.p_mean, handed.required),
            odds_text(corner.p_well, handed.required),
        )
        for corner in handed.corners
    )
    if not rows:
        return []
    head = (*map(heading, definition.factors), "process mean passes", "new well passes")
    caption = "Corners of the set point's tolerance, the worst first"
    return [Table(caption=caption, head=head, rows=rows, numbers=tuple(range(len(head))))]


def _repeats(definition: Definition, handed: HandOver) -> list[Table]:
    labels = {r.name: heading(r) for r in definition.responses}
    rows = tuple(
        (
            labels[repeat.response],
            f"{repeat.plate} {repeat.well}",
            condition_text(definition, repeat.condition),
            measure(repeat.read),
            f"{measure(repeat.expected)} ({measure(repeat.low)} to {measure(repeat.high)})",
            measure(repeat.drop),
        )
        for repeat in handed.optimism.best_run
    )
    if not rows:
        return []
    head = ("response", "best well", "condition", "read", "expected again (95 %)", "expected loss")
    caption = "The wells that looked best, and what repeating them is expected to read"
    return [Table(caption=caption, head=head, rows=rows, numbers=(3, 4, 5))]


def _edge(definition: Definition, handed: HandOver) -> list[Table]:
    factors = _by_name(definition.factors)
    rows = []
    for row in handed.edge.to_dict("records"):
        factor = factors[str(row["factor"])]
        low, high = row["low"], row["high"]
        known = [_level(factor, value) for value in (low, high)]
        others = [
            f.named(f.shown(row[f.name])) + f" {f.unit}".rstrip()
            for f in definition.factors
            if f.name != factor.name
        ]
        crossing = _level(factor, row[factor.name])
        where = ", ".join(others)
        rows.append((where, f"{heading(factor)}, {row['end']} end", crossing, *known))
    if not rows:
        return []
    head = ("at", "edge in", "lies at", "95 % from", "to")
    caption = "The edge of the window as conditions, with intervals"
    return [Table(caption=caption, head=head, rows=tuple(rows), numbers=(2, 3, 4))]


def _level(factor: Factor, value: float) -> str:
    """Return an edge to a tenth of a bench step, "beyond" where it is not known."""
    if value is None or np.isnan(value):
        return "beyond"
    return f"{value:.{max(0, 1 - int(np.floor(np.log10(factor.span[2]))))}f}"


def _with_unit(factor: Factor, value: float) -> str:
    return f"{factor.shown(value)} {factor.unit}".rstrip()


def _by_name(factors: Iterable[Factor]) -> dict[str, Factor]:
    return {factor.name: factor for factor in factors}
