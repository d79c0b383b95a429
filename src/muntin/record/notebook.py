"""How records show themselves in a notebook: a small table of plain words, escaped HTML."""

from __future__ import annotations

from collections.abc import Iterable
from html import escape
from typing import TYPE_CHECKING

import pandas as pd

from muntin.record.factors import Factor
from muntin.record.faults import counted, number
from muntin.record.responses import Response

if TYPE_CHECKING:
    from muntin.record.study import Study

_HEAD = 'style="text-align: left; vertical-align: top; padding-right: 1em"'
_CELL = 'style="text-align: left"'


def card(title: str, rows: Iterable[tuple[str, str | Iterable[str]]], *tables: pd.DataFrame) -> str:
    """Return a title, a table of headings with one or more lines each, and tables below it.

    Whatever is given is text, never HTML; headings without a line are left out.
    """
    said = [(head, [lines] if isinstance(lines, str) else [*lines]) for head, lines in rows]
    body = "".join(
        f'<tr><th scope="row" {_HEAD}>{escape(head)}</th>'
        f"<td {_CELL}>{'<br>'.join(map(escape, lines))}</td></tr>"
        for head, lines in said
        if any(lines)
    )
    below = "".join(_table(table) for table in tables if len(table))
    return f"<div><p><b>{escape(title)}</b></p><table>{body}</table>{below}</div>"


def _table(table: pd.DataFrame) -> str:
    html: str = table.to_html(index=False, escape=True, na_rep="", border=0, float_format=_short)
    return html


def _short(value: float) -> str:
    """Return a number with four digits; of a small probability no more than four decimals."""
    return f"{value:.4f}" if 0 < abs(value) < 1e-3 else f"{value:.4g}"


def study_card(study: Study) -> str:
    """Return what a study asks and what it holds."""
    definition, counts = study.definition, study.counts()
    void = f" ({counts.void} void)" if counts.void else ""
    wells = (
        f"{counted(counts.plates, 'plate')}{void}, {counted(counts.wells, 'well')}, "
        f"{counted(counts.controls, 'control')}"
    )
    read = [
        f"{response.label}: {_readings(study, response.name)}" for response in definition.responses
    ]
    return card(
        definition.title,
        [
            ("Folder", str(study.folder)),
            ("Factors", map(_factor, definition.factors)),
            ("Responses", map(_response, definition.responses)),
            ("Run", wells if counts.plates else "no plate yet"),
            ("Read", read if counts.plates else []),
            ("Notices", study.notices),
        ],
    )


def study_line(study: Study) -> str:
    """Return a study as it shows itself in a console, in a line."""
    counts = study.counts()
    held = f"{counted(counts.plates, 'plate')}, {counted(counts.wells, 'well')}"
    return f"Study({study.definition.title!r}, {held}, {str(study.folder)!r})"


def _factor(factor: Factor) -> str:
    if factor.choices is not None:
        return f"{factor.label}: {', '.join(factor.choices)}"
    low, high, step = map(number, factor.span)
    return f"{factor.label}: {low} to {high} {factor.unit}".rstrip() + f", steps of {step}"


def _response(response: Response) -> str:
    limits = (("at least", response.at_least), ("at most", response.at_most))
    told = [f"{word} {number(v)} {response.unit}".rstrip() for word, v in limits if v is not None]
    return f"{response.label}: {' and '.join(told) if told else 'tracked'}"


def _readings(study: Study, name: str) -> str:
    counts = study.counts()
    parts = [
        f"{count[name]} {word}"
        for word, count in (
            ("read", counts.read),
            ("censored", counts.censored),
            ("awaited", counts.awaited),
            ("left out", counts.excluded),
        )
        if count[name]
    ]
    return ", ".join(parts)
