"""Sections on what holds, what it holds for, and which response fails where."""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Mapping
from typing import TYPE_CHECKING, Any

import pandas as pd

from muntin.record.factors import Factor
from muntin.record.faults import counted, number
from muntin.report.page.basis import Basis
from muntin.report.page.blocks import Section, Table
from muntin.report.page.phrases import fixed_name, heading, measure, settings, target_text
from muntin.report.sides_figure import side_text
from muntin.report.text import window_lines
from muntin.report.words import JUDGED_BY, chance_text, odds_text, per_cent

if TYPE_CHECKING:
    from muntin.window.limiting import Side

_ALL = 1000
_CHANCES = {
    "p_mean": "process mean passes",
    "p_well": "new well passes",
    "p_kept": "new well passes, kept within ±",
}
_ENDS = {"low": "lowest", "high": "highest"}


def conditional(basis: Basis) -> Section:
    """Return what was varied, what was asked, and what the window is conditional on."""
    definition = basis.definition
    required = chance_text(definition.required_probability)
    targets = "; ".join(target_text(r) for r in definition.judged)
    asked = (
        f"Asked: {targets}. A condition lies in the window where the probability "
        f"{JUDGED_BY[definition.judged_by]} reaches {required}."
    )
    tracked = [r.label for r in definition.responses if not r.judged]
    said = [asked, *([f"Read but not judged: {', '.join(tracked)}."] if tracked else [])]
    said += [f"Only conditions with {limit.allow} may be run." for limit in definition.limits]
    said += [f"Never planned: {f.conditions} ({f.because})." for f in definition.forbidden]
    said += _stop(basis)
    tables = [_factors(definition.factors)]
    if definition.fixed:
        rows = tuple(
            (fixed_name(name), value if isinstance(value, str) else number(value))
            for name, value in definition.fixed.items()
        )
        caption = "Kept fixed: the window holds for these values only"
        tables.append(Table(caption=caption, head=("fixed", "value"), rows=rows, numbers=(1,)))
        notes: tuple[str, ...] = ()
    else:
        notes = ("The study names nothing under [fixed], so what was kept fixed is not on record.",)
    return Section(
        name="holds-for",
        title="What this holds for",
        says=tuple(said),
        tables=tuple(tables),
        notes=notes,
    )


def _stop(basis: Basis) -> list[str]:
    """When the series stops, and since when that is fixed."""
    rule, stops = basis.study.stopping.rule, basis.study.stops
    if rule is None:
        return []
    parts = []
    if rule.wrong_share is not None:
        parts.append(f"{per_cent(rule.wrong_share)} of the range or less may be called wrongly")
    if rule.best_probability is not None:
        parts.append(f"the set point reaches {per_cent(rule.best_probability)}")
    since = ""
    if stops and stops[-1].rule is not None:
        read = counted(stops[-1].wells_read, "well")
        when = f"after {read} had been read" if stops[-1].wells_read else "before any reading"
        since = f" (on record since {stops[-1].date}, {when})"
    return [f"The series stops once {' or '.join(parts)}{since}."]


def _factors(factors: tuple[Factor, ...]) -> Table:
    rows = []
    for factor in factors:
        kept = "" if factor.kept_within is None else f"± {factor.kept_within}"
        set_sd = "" if factor.set_sd is None else f"{factor.set_sd}"
        step = number(factor.span[2]) if factor.continuous else ""
        rows.append((factor.label, factor.range_text, step, kept, set_sd))
    head = ("factor", "range", "bench step", "process keeps it within", "bench sets it with sd")
    return Table(caption="What was varied", head=head, rows=tuple(rows))


def window_section(basis: Basis) -> Section:
    """Return the window: in words, as a map, at single conditions, and what bounds it."""
    tables, several = [], len(basis.definition.judged) > 1
    if basis.standing is not None and not basis.view.awaited:
        tables += _known(basis)
    if basis.standing is not None and basis.standing.sides:
        tables.append(_sides(basis, basis.standing.sides))
    return Section(
        name="window",
        title="The window",
        says=tuple(window_lines(basis.view, basis.window, _ALL, basis.handed)),
        figures=basis.figures("map", *(["joint"] if several else []), "sides"),
        tables=tuple(tables),
    )


def _conditions(basis: Basis) -> Iterator[tuple[str, dict[Any, Any]]]:
    """The set point, and the corners of the ranges where these are few."""
    window, definition = basis.standing, basis.definition
    if window is None:
        return
    names = list(definition.factor_names)
    yield ("set point" if window.share else "best so far"), window.setpoint[names].to_dict()
    if basis.ranges is None:
        return
    ends = [tuple(dict.fromkeys(basis.ranges[name])) for name in names]
    corners = [*itertools.product(*ends)]
    if 1 < len(corners) <= 8:
        for corner in corners:
            yield "corner of ranges", dict(zip(names, corner, strict=True))


def _known(basis: Basis) -> list[Table]:
    """Joint passes and those of each response alone at single conditions, and the means there."""
    definition, view = basis.definition, basis.view
    required = definition.required_probability
    found = [*_conditions(basis)]
    known = view.at(pd.DataFrame([condition for _, condition in found]))
    rows = known.to_dict("records")
    first = [(what, *settings(definition, condition)) for what, condition in found]
    head = ("condition", *map(heading, definition.factors))
    read = [r for r in definition.responses if f"{r.name}_mean" in known]
    several = [r for r in read if r.judged] if len(definition.judged) > 1 else []
    passes = {f"{r.name}_p_well": f"{r.label}: new well passes" for r in several}
    every = "all: " if several else ""
    passes |= {name: f"{every}{says}" for name, says in _CHANCES.items() if name in known}
    chances = [tuple(odds_text(row[name], required) for name in passes) for row in rows]
    means = [tuple(_interval(row, r.name) for r in read) for row in rows]
    jointly = ", by response and jointly" if several else ""
    named = (
        (f"Probabilities at single conditions{jointly}", tuple(passes.values()), chances),
        ("Process means there, with 95 % intervals", tuple(map(heading, read)), means),
    )
    return [
        Table(
            caption=caption,
            head=(*head, *own),
            rows=tuple((*start, *cells) for start, cells in zip(first, found_cells, strict=True)),
            numbers=tuple(range(1, len(head) + len(own))),
        )
        for caption, own, found_cells in named
    ]


def _interval(row: Mapping[Any, Any], name: str) -> str:
    mean, low, high = (measure(row[f"{name}_{end}"]) for end in ("mean", "low", "high"))
    return f"{mean} ({low} to {high})"


def _sides(basis: Basis, sides: tuple[Side, ...]) -> Table:
    definition = basis.definition
    factors = {f.name: f for f in definition.factors}
    rows = []
    for side in sides:
        factor = factors[side.factor]
        at, told = f"{factor.shown(side.at)} {factor.unit}".rstrip(), side_text(basis.view, side)
        if side.response is None or side.probability is None or side.beyond is None:
            rows.append((factor.label, _ENDS[side.end], at, " ".join(told), "", ""))
            continue
        beyond = f"{factor.shown(side.beyond)} {factor.unit}".rstrip()
        p = odds_text(side.probability, definition.required_probability)
        rows.append((factor.label, _ENDS[side.end], at, told[0], beyond, p))
    return Table(
        caption="What gives way first beyond each side of the ranges",
        head=("factor", "end", "ranges reach to", "gives way", "at", "probability there, alone"),
        rows=tuple(rows),
        numbers=(2, 4, 5),
    )


def responses_section(basis: Basis) -> Section:
    """Return the responses along each factor at the set point."""
    window = basis.standing
    figures, several = basis.figures("together", "factor-"), len(basis.view.stacks) > 1
    where = "the set point" if window is not None and window.share else "the best condition"
    says = (
        f"Each figure moves one factor; the others stay at {where}. Lines are process means. Dark "
        "bands are the central 95 % of what the means may be, pale ones that of new wells.",
    )
    return Section(
        name="factors",
        title="Each factor" + (", and the responses together" if several else ""),
        says=says if figures else (),
        figures=figures,
    )
