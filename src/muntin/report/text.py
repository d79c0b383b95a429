"""Screens for the terminal: headings on the left, plain sentences beside them."""

from __future__ import annotations

import shlex
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING

import pandas as pd
from rich.console import Group, RenderableType
from rich.table import Table
from rich.text import Text

from muntin.record.definition import Definition
from muntin.record.faults import counted
from muntin.record.study import Study
from muntin.report.advice_files import Place
from muntin.report.cautions import cautions
from muntin.report.edit_record import edit_lines
from muntin.report.handover_text import handover_lines
from muntin.report.plan_text import (
    bridging_line,
    first_conditions,
    forecast_table,
    height,
    known_table,
    no_set_point_line,
    not_forecast_line,
    plan_heading,
    plan_tables,
    usual_reason,
)
from muntin.report.ruling_text import ruling_line
from muntin.report.sides_text import least_line, sides_line
from muntin.report.words import (
    JUDGED_BY,
    UNSUPPORTED,
    WINDOW,
    condition_text,
    labels,
    range_ends_text,
    ranges_text,
    reach_text,
    share_text,
    success_text,
)
from muntin.window.assessment import Assessment
from muntin.window.checks import Check
from muntin.window.handover import HandOver
from muntin.window.window import Window

if TYPE_CHECKING:
    from muntin.bench.plan import Plan

Section = tuple[str, Sequence[RenderableType]]
_FEW = 3
_FIRST = 10
_SCREEN_LINES = 40
# Checks whose sentence is said even where they passed.
_SAID = ("coverage", "sampling", "readings together")


def sheet(title: str, sections: Sequence[Section]) -> RenderableType:
    """Return a titled screen; sections without lines are left out."""
    grid = Table.grid(padding=(0, 2, 0, 0))
    grid.add_column(no_wrap=True, min_width=8)
    grid.add_column(overflow="fold")
    for heading, lines in sections:
        for index, line in enumerate(lines):
            shown = Text(line) if isinstance(line, str) else line
            grid.add_row(Text("" if index else heading, style="bold"), shown)
    return Group(Text(title, style="bold"), grid)


def read_lines(study: Study) -> list[str]:
    """Return what was read, left out and awaited, in counts."""
    counts = study.counts()
    if not counts.plates:
        return ["No plate yet."]
    void = f" ({counts.void} void)" if counts.void else ""
    total = (
        f"{counted(counts.plates, 'plate')}{void}, {counted(counts.wells, 'well')}, "
        f"{counted(counts.controls, 'control')}. "
    )
    parts = []
    for response in study.definition.responses:
        name = response.name
        states = {
            "left out": counts.excluded[name],
            "censored": counts.censored[name],
            "awaited": counts.awaited[name],
        }
        others = "".join(f", {count} {state}" for state, count in states.items() if count)
        parts.append(f"{response.label}: {counts.read[name]} read{others}")
    return [total + "; ".join(parts) + "."]


def few(
    lines: Sequence[str], most: int = _FEW, where: str = "muntin check lists them"
) -> list[str]:
    """Return at most so many lines, and how many more there are."""
    rest = len(lines) - most
    return [*lines[:most], *([f"and {rest} more: {where}"] if rest > 0 else [])]


def check_lines(
    checks: Sequence[Check], told: Sequence[str] = (), labels: Mapping[str, str] | None = None
) -> list[str]:
    """Return the checks of the model: failures first, then the names of those that passed, and of
    those for which the readings are too few.

    `told` are sentences that stand elsewhere on the screen; here their checks are only named.
    `labels` are those of the responses, by name; where they are few, the coverage of each is said,
    and how far two of them move together.
    """
    labels = labels or {}
    failed = sorted((c for c in checks if not c.passed), key=lambda c: not c.serious)
    below = [c for c in failed if c.sentence in told]
    lines = [f"FAILED: {_named(below, checks, labels)}; why is said with the window."]
    lines = lines if below else []
    said = [c for c in failed if c.sentence not in told]
    lines += [f"{'FAILED' if c.serious else 'Note'} ({c.name}): {c.sentence}" for c in said]
    passed = [c for c in checks if c.passed and c.told]
    few_read = [c for c in checks if c.passed and not c.told]
    counts = []
    if passed:
        counts.append(f"Passed, {len(passed)} of {len(checks)}: {_named(passed, checks, labels)}")
    if few_read:
        counts.append(f"too few readings to tell: {_named(few_read, checks, labels)}")
    if counts:
        lines.append(_capital("; ".join(counts)) + ".")
    if len(labels) <= _FEW:
        lines += [c.sentence for c in passed if c.name in _SAID]
    return lines


def _named(some: Sequence[Check], checks: Sequence[Check], labels: Mapping[str, str]) -> str:
    """Name some of the checks, with their responses where not all of a name are among them."""
    texts = []
    for name in dict.fromkeys(check.name for check in some):
        here = [check for check in some if check.name == name]
        every = [check for check in checks if check.name == name]
        of = [labels[c.response] for c in here if c.response is not None and c.response in labels]
        texts.append(name if len(here) == len(every) else f"{name} ({', '.join(of)})")
    return ", ".join(texts)


def window_lines(
    view: Assessment, window: Window | None, most: int = _FEW, handed: HandOver | None = None
) -> list[str]:
    """Return where the window stands, with the hand-over where it was made."""
    definition = view.study.definition
    if window is None:
        return ["Nothing has been read yet, so there is no window; an opening plate comes first."]
    if window.unsupported:
        reasons = few(window.unsupported, most, "see --json")
        return [f"{_capital(WINDOW)}: {UNSUPPORTED}.", *reasons]
    alone = tuple(r.name for r in definition.judged if r.name not in view.awaited)
    of = f" for {labels(definition, alone)} alone" if view.awaited else ""
    lines = [
        f"{_capital(WINDOW)}{of}: {reach_text(definition, window.share)} "
        f"{JUDGED_BY[definition.judged_by]}.",
        _set_point(definition, window),
    ]
    if handed is not None:
        lines += handover_lines(definition, handed)
    elif window.ranges is not None:
        lines.append(f"Ranges that hold together: {ranges_text(definition, window.ranges)}.")
    if window.ranges is not None:
        lines += sides_line(definition, window.sides)
    elif not window.share:
        lines += least_line(view, window.setpoint)
    lines.append(f"Share of the range we may still call wrongly: {share_text(window.wrong_share)}.")
    return lines + _stop(view, window)


def _set_point(definition: Definition, window: Window) -> str:
    kept = definition.judged_by == "kept"
    where = condition_text(definition, window.setpoint.to_dict(), kept)
    passes = success_text(definition, float(window.setpoint["probability"]))
    ends = range_ends_text(definition, window.setpoint.to_dict())
    told = f"{'Set point' if window.share else 'The best so far'}: {where}: {passes}."
    return f"{told} {_capital(ends)}." if ends else told


def _stop(view: Assessment, window: Window) -> list[str]:
    stop = view.study.stopping.rule
    if stop is None or view.awaited:
        return []
    met = []
    if stop.wrong_share is not None and window.wrong_share <= stop.wrong_share:
        met.append(f"wrong_share {share_text(stop.wrong_share)}")
    best = float(window.setpoint["probability"])
    if stop.best_probability is not None and best >= stop.best_probability:
        met.append(f"best_probability {share_text(stop.best_probability)}")
    return (
        [f"The study's stop rule is met ({' and '.join(met)}): no plate is needed."] if met else []
    )


def _capital(text: str) -> str:
    return text[:1].upper() + text[1:]


def check_screen(
    study: Study, plans: Sequence[str] = (), reach: str = "", written: Sequence[str] = ()
) -> RenderableType:
    """Return the screen of `check`; `plans` is what is on record of edited plans, `reach` what the
    stocks do not make, `written` the table that was asked for.
    """
    return sheet(
        study.definition.title,
        [
            ("Read", read_lines(study)),
            ("Noted", study.notices),
            ("Plans", plans),
            ("Stocks", [reach] if reach else []),
            ("Sound", ["No faults were found."]),
            ("Written", written),
        ],
    )


def standing(
    view: Assessment,
    window: Window | None,
    few_lines: int = _FEW,
    handed: HandOver | None = None,
) -> list[Section]:
    """Return the sections on what was read, the checks and the window, with the hand-over where it
    was made; at most so many lines of notes and of failed checks.
    """
    study = view.study
    awaited = labels(study.definition, view.awaited)
    notes = [f"Awaited: {awaited}; the advice is provisional."] if view.awaited else []
    told = () if window is None else window.unsupported
    read = {r.name: r.label for r in study.definition.responses if r.name in view.stacks}
    checks = check_lines(view.checks(), told, read)
    return [
        ("Read", read_lines(study)),
        ("Noted", [*notes, *few(study.notices, few_lines)]),
        ("Checks", few(checks, max(_FEW, 2 * few_lines), "see --json")),
        ("Window", window_lines(view, window, few_lines, handed)),
    ]


def assess_screen(
    view: Assessment,
    window: Window | None,
    known: pd.DataFrame | None,
    out: Path | None,
    influence: Sequence[RenderableType] = (),
    draws: Sequence[Path] = (),
    handed: HandOver | None = None,
) -> RenderableType:
    """Return the screen of `assess`; `known` is the table of the conditions asked for, `influence`
    what each factor does, where asked, and `draws` the files of draws.
    """
    sections = [*standing(view, window, handed=handed), ("Factors", influence)]
    if known is not None and out is None:
        sections.append(("There", [known_table(view.study.definition, known)]))
    written = [str(path) for path in (out, *draws) if path is not None]
    sections.append(("Written", written))
    return sheet(view.study.definition.title, sections)


def plan_sections(
    view: Assessment, plan: Plan, table: RenderableType, full: bool = True
) -> list[Section]:
    """Return the sections on the next plate, with the table of its test wells, and on its
    forecast; its notices and bridging wells, and why there is no verdict, only in full.
    """
    told: list[RenderableType] = [plan_heading(plan)]
    if full:
        told += few(plan.notices, 2, "see --json")
        told += bridging_line(view.study.definition, plan.wells)
    if view.fresh:
        told.append(f"{_capital(usual_reason(plan.wells))}.")
    early = "No forecast before the first readings."
    ahead: list[RenderableType] = [
        forecast_table(view.study, plan, full),
        *no_set_point_line(plan, " (muntin assess says why)"),
    ]
    if full:
        ahead += not_forecast_line(view.study, plan)
    if full or plan.ruling.word != "none":
        ahead.append(ruling_line(view.study, plan))
    return [("Next", [*told, table]), ("Forecast", [early] if view.fresh else ahead)]


def _tables(view: Assessment, plan: Plan) -> tuple[list[RenderableType], list[RenderableType]]:
    """Tables of the test wells, those that say most first: of all of them, and of the first few."""
    definition, why = view.study.definition, not view.fresh
    whole: list[RenderableType] = [*plan_tables(definition, plan.wells, why)]
    cut = [first_conditions(definition, plan.wells, most, why) for most in range(_FIRST, 0, -1)]
    return whole, [*cut]


def propose_screen(view: Assessment, plan: Plan, path: Path, remark: str) -> RenderableType:
    """Return the screen of `propose`."""
    written = ("Written", _plan_lines(path, remark))
    whole, cut = _tables(view, plan)
    sections = plan_sections(view, plan, [*whole, *cut][0])
    edited = ("Edited", [] if plan.edit is None else edit_lines(plan, plan.edit))
    told = (view.study.changes.notice, view.study.stopping.notice)
    noted = ("Noted", [line for line in told if line])
    return sheet(view.study.definition.title, [noted, edited, *sections, written])


def _plan_lines(path: Path, remark: str) -> list[str]:
    to_do = "fill in the readings and move it to plates/"
    return [f"{path}: {to_do}", *([remark] if remark else [])]


def advice_screen(
    view: Assessment, window: Window | None, plan: Plan, place: Place
) -> RenderableType:
    """Return the screen of `advise`, cut to 40 lines at 100 columns as far as that goes.

    Notes go before reasons, reasons before conditions.
    """
    whole, cut = _tables(view, plan)
    tables = [(table, full) for full in (True, False) for table in whole[:-1]]
    tables += [(table, full) for table in whole[-1:] for full in (True, False)]
    for table, full in [*tables, *((table, False) for table in cut)]:
        screen = _advice_sheet(view, window, plan, place, table, full)
        if height(screen) <= _SCREEN_LINES:
            break
    return screen


def _advice_sheet(
    view: Assessment,
    window: Window | None,
    plan: Plan,
    place: Place,
    table: RenderableType,
    full: bool,
) -> RenderableType:
    """The screen of `advise`; in short it leaves notes, bridging wells and what is fixed to the
    files.
    """
    kept = "map, advice.json, inputs" if view.fresh else "map, forecast, advice.json, inputs"
    written = [*_plan_lines(place.plan, place.remark), f"{place.folder}: {kept}"]
    said = " ".join(cautions(view, fixed=full))
    return sheet(
        view.study.definition.title,
        [
            *standing(view, window, _FEW if full else 1),
            *plan_sections(view, plan, table, full),
            ("Cautions", [said]),
            ("Written", written),
        ],
    )


def new_screen(folder: Path, written: Sequence[Path]) -> RenderableType:
    """Return the screen of `new`."""
    study, plate = written
    named = shlex.quote(str(folder))
    return sheet(
        "A new study",
        [
            ("Written", [f"{study}: put your process in the example's place", str(plate)]),
            (
                "Next",
                [
                    f"muntin check {named}    names whatever cannot be read",
                    f"muntin advise {named}   plans the opening plate",
                ],
            ),
        ],
    )
