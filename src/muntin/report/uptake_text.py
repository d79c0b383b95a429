"""The screen of `uptake`: when the resin is near equilibrium, and what the curve does not tell."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np
from rich.console import Group, RenderableType
from rich.table import Table
from rich.text import Text

from muntin.assay.uptake import Interval, Uptake, three_digits
from muntin.assay.uptake_priors import Priors
from muntin.assay.uptake_remarks import Remark
from muntin.record.faults import counted, number
from muntin.report.text import Section, sheet
from muntin.report.uptake_facts import gain_of_longer, within
from muntin.report.words import likely_text, narrow

_LOAD = "mg/mL resin"
_HINT = "No contact time is planned: --at MIN, or planned_min in [uptake] of study.toml."


def uptake_screen(
    title: str,
    judged: Sequence[tuple[Uptake, Sequence[Remark]]],
    planned: float | None,
    written: Sequence[Path],
) -> RenderableType:
    """Return the screen: a part a curve, then the files that were written."""
    parts: list[RenderableType] = []
    for uptake, remarks in judged:
        heading = f"{title}: contact time, {uptake.curve.name}"
        parts.append(sheet(heading, _sections(uptake, remarks, planned)))
        parts.append(Text(""))
    files = [str(path) for path in written]
    notes = [("Means", [_means(uptake.priors) for uptake, _ in judged[:1]]), ("Written", files)]
    return Group(*parts, sheet("How to read the figures", notes))


def interval_text(found: Interval, centre: float, unit: str) -> str:
    """Return "48.1 mg/mL resin (46.4 to 49.7)" with three digits."""
    return (
        f"{three_digits(centre)} {unit} ({three_digits(found.low)} to {three_digits(found.high)})"
    )


def _sections(uptake: Uptake, remarks: Sequence[Remark], planned: float | None) -> list[Section]:
    loud = [remark.sentence for remark in remarks if remark.loud]
    quiet = [remark.sentence for remark in remarks if not remark.loud]
    level, t90, t95 = uptake.equilibrium(), uptake.time_to(0.90), uptake.time_to(0.95)
    times = (
        f"90 % of equilibrium after {interval_text(t90, t90.median, 'min')}, "
        f"95 % after {interval_text(t95, t95.median, 'min')}."
    )
    return [
        ("Read", [_read(uptake), *uptake.curve.notices]),
        ("Caution", loud),
        ("Load", [f"At equilibrium {interval_text(level, level.median, _LOAD)}."]),
        ("Time", [times]),
        ("Planned", [_HINT if planned is None else _planned(uptake, planned)]),
        ("Laws", [_laws(uptake, planned)]),
        ("Noted", quiet),
    ]


def _read(uptake: Uptake) -> str:
    curve = uptake.curve
    times = np.unique(curve.times)
    offered = "" if curve.offered is None else f" Offered: {three_digits(curve.offered)} {_LOAD}."
    return (
        f"{curve.file}: {counted(len(curve.times), 'reading')} at {counted(len(times), 'time')}, "
        f"{number(float(times[0]))} to {number(float(times[-1]))} min.{offered}"
    )


def _planned(uptake: Uptake, planned: float) -> str:
    load, share = uptake.load_at(planned), uptake.share_at(planned)
    gain = 100.0 * gain_of_longer(uptake, planned)
    more = f"{gain:.0f}" if gain >= 9.5 else f"{gain:.1f}"
    return (
        f"At {number(planned)} min {interval_text(load, load.mean, _LOAD)} are expected, "
        f"{100 * share.median:.0f} % of equilibrium ({100 * share.low:.0f} to "
        f"{100 * share.high:.0f} %); 10 % more time adds {more} % load."
    )


def _laws(uptake: Uptake, planned: float | None) -> Table:
    table = Table(box=None, padding=(0, 2, 0, 0), pad_edge=False)
    at = [] if planned is None else [f"at\n{number(planned)} min"]
    for heading in ("law", "weight", "at equi-\nlibrium", *at, "95 % after,\nmin", "rate,\n1/min"):
        table.add_column(heading, overflow="fold", no_wrap=heading in ("law", "weight"))
    ranked = sorted(zip(uptake.law_weights, uptake.grids, strict=True), key=lambda p: -p[0])
    for weight, grid in ranked:
        columns = [grid.equilibrium, *([] if planned is None else [grid.load_at(planned)])]
        loads = [three_digits(within(grid, values).median) for values in columns]
        time = within(grid, grid.time_to(0.95))
        span = " to ".join(map(three_digits, (time.low, time.high)))
        rate = within(grid, grid.law.rates(grid.half_time, grid.takes)).median
        table.add_row(
            grid.law.name,
            narrow(likely_text(weight)),
            *loads,
            f"{three_digits(time.median)} ({span})",
            three_digits(rate),
        )
    return table


def _means(priors: Priors) -> str:
    capacity, half = (
        " to ".join(three_digits(float(np.exp(end))) for end in prior.span(1.96))
        for prior in (priors.capacity, priors.half_time)
    )
    return (
        "Loads are those of the curve, without a reading's own noise; brackets hold 95 %, over all "
        "laws by their weights, and single values are medians. Rates are k, of pore diffusion "
        f"pi^2 D/R^2, of the shrinking core D C_0/(q R^2). Priors, 95 %: capacity {capacity} "
        f"{_LOAD}, half of equilibrium after {half} min."
    )
