"""Sections on how far to trust it: predictions, plates beside each other, checks, omissions."""

from __future__ import annotations

import numpy as np
import pandas as pd

from muntin.record.responses import Response
from muntin.report.page.ahead_sections import roles_text
from muntin.report.page.basis import Basis
from muntin.report.page.blocks import Section, Table
from muntin.report.page.phrases import heading, measure, settings
from muntin.report.page.put_back import standing_text
from muntin.window.checks.check import Check

_OPEN = "too few"


def predicted_section(basis: Basis) -> Section:
    """Return readings beside what the others predict for them."""
    figures = basis.figures("predicted-")
    says = [c.sentence for c in basis.view.checks() if c.name in ("coverage", "other plates")]
    if not figures and not says:
        return Section(name="predicted", title="Observed against predicted")
    how = (
        "Each reading is set beside what all other readings predict for it, as if it had not been "
        "made."
    )
    return Section(
        name="predicted",
        title="Observed against predicted",
        says=(how, *says),
        figures=figures,
    )


def plates_section(basis: Basis) -> Section:
    """Return the plates, their notes and controls, and conditions that several of them share."""
    study = basis.study
    if not study.plates:
        return Section(name="plates", title="Plates, controls and shared errors")
    errors = [c.sentence for c in basis.view.checks() if c.name == "shared errors"]
    tables = [_plates(basis)]
    for response in basis.definition.responses:
        if response.name in basis.view.stacks:
            tables += _repeated(basis, response)
    return Section(
        name="plates",
        title="Plates, controls and shared errors",
        says=tuple(errors),
        figures=basis.figures("plates-", "errors"),
        tables=tuple(tables),
    )


def _plates(basis: Basis) -> Table:
    wells = basis.study.wells
    noted = ("date", "by", "resin_lot", "feed_lot", "feed_age_days")
    used = [n for n in noted if any(getattr(p, n) is not None for p in basis.study.plates)]
    rows = []
    for plate in basis.study.plates:
        notes = [getattr(plate, name) for name in used]
        said = ["" if note is None else str(note) for note in notes]
        state = f"void: {plate.void}" if plate.void else "counts"
        rows.append((plate.name, roles_text(wells[wells["plate"] == plate.name]), *said, state))
    head = ("plate", "wells by role", *(name.replace("_", " ") for name in used), "state")
    return Table(caption="Plates that were run", head=head, rows=tuple(rows))


def _repeated(basis: Basis, response: Response) -> list[Table]:
    """Conditions that were read on several plates: the mean reading of each plate."""
    names = list(basis.definition.factor_names)
    readings = basis.study.readings(response.name)
    readings = readings[readings["censored"] == 0]
    targets = [f"{name}_target" for name in names]
    shown = (
        readings[targets]
        .set_axis(names, axis=1)
        .assign(plate=readings["plate"], y=readings["y"] * response.unit_size)
    )
    means = shown.pivot_table(index=names, columns="plate", values="y", aggfunc="mean", sort=False)
    means = means[means.notna().sum(axis=1) > 1]
    if means.empty:
        return []
    plates = [*means.columns]
    rows = []
    for values in means.reset_index().to_dict("records"):
        cells = ["" if np.isnan(values[p]) else measure(values[p]) for p in plates]
        rows.append((*settings(basis.definition, values), *cells))
    head = (*map(heading, basis.definition.factors), *map(str, plates))
    caption = f"{response.label}: conditions read on several plates, mean of each plate"
    return [Table(caption=caption, head=head, rows=tuple(rows), numbers=tuple(range(len(head))))]


def checks_section(basis: Basis) -> Section:
    """Return every check of the model with its verdict, failures first."""
    checks = sorted(basis.view.checks(), key=lambda c: (c.passed, not c.serious))
    if not checks:
        return Section(name="checks", title="Checks of the model")
    rows = tuple((check.name, _verdict(check), check.sentence) for check in checks)
    passed, open_, notes, failed = (
        sum(row[1] == verdict for row in rows) for verdict in ("passed", _OPEN, "note", "FAILED")
    )
    untold = f"{open_} with too few readings to tell, " if open_ else ""
    count = f"{passed} passed, {untold}{notes} with a note, {failed} failed."
    return Section(
        name="checks",
        title="Checks of the model",
        says=(count,),
        tables=(
            Table(
                caption="What was checked", head=("check", "verdict", "what was found"), rows=rows
            ),
        ),
    )


def _verdict(check: Check) -> str:
    if check.passed:
        return "passed" if check.told else _OPEN
    return "FAILED" if check.serious else "note"


def left_out_section(basis: Basis) -> Section:
    """Return what was left out and why, and the answer with it."""
    study, definition = basis.study, basis.definition
    void = [(plate.name, "whole plate", "", "", str(plate.void)) for plate in study.void]
    rows = [*void, *(row for r in definition.responses for row in _left_out(basis, r))]
    if not rows:
        return Section(name="left-out", title="Left out", says=("Nothing was left out.",))
    table = Table(
        caption="Left out of the calculation, kept on record",
        head=("plate", "well", "response", "reading", "because"),
        rows=tuple(rows),
        numbers=(3,),
    )
    return Section(
        name="left-out", title="Left out", says=_with_and_without(basis), tables=(table,)
    )


def _left_out(basis: Basis, response: Response) -> list[tuple[str, ...]]:
    wells: pd.DataFrame = basis.study.informing()
    wells = wells[wells[f"{response.name}_state"] == "excluded"]
    values = {} if basis.put_back is None else basis.put_back.values
    rows: list[tuple[str, ...]] = []
    for row in wells.to_dict("records"):
        value = values.get((row["plate"], row["well"], response.name))
        shown = "" if value is None else measure(value)
        why = row["exclude"] or row[f"{response.name}_exclude"]
        rows.append((row["plate"], row["well"], response.label, shown, why))
    return rows


def _with_and_without(basis: Basis) -> tuple[str, ...]:
    back, window = basis.put_back, basis.standing
    if back is None:
        return ()
    if back.window is None:
        return (f"They cannot be put back to see what they change. {back.unknown}".strip(),)
    count = len(back.values)
    what = "1 reading" if count == 1 else f"{count} readings"
    now = () if window is None else (f"As it stands: {standing_text(basis.view, window)}.",)
    by = "" if basis.view.engine == "fast" else ", by the engine fast"
    return (*now, f"With {what} put back{by}: {standing_text(basis.view, back.window)}.")
