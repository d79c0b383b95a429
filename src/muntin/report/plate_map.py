"""The plate map: one page in A4 that reads at arm's length, wells as they lie on the plate."""

from __future__ import annotations

import textwrap
from typing import TYPE_CHECKING, Any

import pandas as pd

from muntin.bench.fed import fed_lines
from muntin.bench.wells import well_name
from muntin.record.definition import Definition
from muntin.report.plate_wells import (
    A4,
    SHORT,
    Place,
    by_number,
    draw_wells,
    ordered_factors,
    text_width,
)
from muntin.report.sheet_words import condition_part
from muntin.report.style import INK, PAPER
from muntin.report.words import axis_label

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_DPI = 200
_ROLES = {
    "test": "test",
    "bridge": "bridging",
    "reference": "reference",
    "blank": "blank",
    "load": "load",
    "no_resin": "no resin",
    "water": "water",
}
_RINGS = {"bridge": " Thick ring: bridging.", "reference": " Dotted ring: reference."}


def draw_plate_map(
    definition: Definition, rows: pd.DataFrame, titles: tuple[str, str, str]
) -> Figure:
    """Draw the wells of a plan (well, role, factors in raw units; empty for controls).

    titles: three lines above the plate, the first in large type. The figure has the size of A4, the
    long side across.
    """
    from matplotlib.figure import Figure

    figure = Figure(figsize=A4, dpi=_DPI, facecolor=PAPER)
    axes = figure.add_axes((0.0, 0.0, 1.0, 1.0))
    axes.set_axis_off()
    axes.set(xlim=(0, A4[0]), ylim=(0, A4[1]), aspect="equal")
    place = Place(definition.plate)
    _frame(axes, place)
    draw_wells(axes, place, definition, rows)
    _feeds(axes, place, definition, rows)
    _words(axes, definition, rows, titles)
    return figure


def roles_text(rows: pd.DataFrame, short: bool = False) -> str:
    """Return how many wells have which role; `short` adds the letters that controls have on 384."""
    count = rows["role"].value_counts()
    parts = [
        f"{count[role]} {name}{f' ({SHORT[role]})' if short and role in SHORT else ''}"
        for role, name in _ROLES.items()
        if role in count
    ]
    return f"{len(rows)} wells: {', '.join(parts)}."


def _frame(axes: Axes, place: Place) -> None:
    """The outline with the corner of A1 cut off, the letters and the numbers."""
    from matplotlib.patches import Polygon

    half, cut = place.pitch * 0.58, place.pitch * 0.35
    (x0, y0), (x1, y1) = place.of(0, 0), place.of(place.rows - 1, place.columns - 1)
    x0, y0, x1, y1 = x0 - half, y0 + half, x1 + half, y1 - half
    outline = [(x0 + cut, y0), (x1, y0), (x1, y1), (x0, y1), (x0, y0 - cut)]
    axes.add_patch(Polygon(outline, closed=True, fill=False, edgecolor=INK, linewidth=1.4))
    size = 17 * max(0.7, place.scale)
    style: dict[str, Any] = {"va": "center", "fontsize": size, "color": INK, "fontweight": "bold"}
    for column in range(place.columns):
        axes.text(place.of(0, column)[0], y0 + 0.16, str(column + 1), ha="center", **style)
    for row in range(place.rows):
        axes.text(x0 - 0.1, place.of(row, 0)[1], well_name(row, 0)[0], ha="right", **style)


def _feeds(axes: Axes, place: Place, definition: Definition, rows: pd.DataFrame) -> None:
    """Beside each plate line that a stock feeds, the level of that stock."""
    by = definition.plan.prepared_by
    factors = [f for f in definition.factors if f.name in definition.stock_factors]
    room = 1.2 * 72 if by == "row" else 0.95 * place.pitch * 72
    for line, levels in fed_lines(definition, rows).items():
        text = ", ".join(f.shown(levels[f.name]) for f in factors)
        style: dict[str, Any] = {"va": "center", "fontweight": "bold", "color": INK}
        style |= {"fontsize": min(13.0, room / text_width(text, "bold"))}
        if by == "row":
            x, y = place.of(line, place.columns - 1)
            axes.text(x + 0.58 * place.pitch + 0.1, y, text, ha="left", **style)
        else:
            x, y = place.of(place.rows - 1, line)
            axes.text(x, y - 0.58 * place.pitch - 0.12, text, ha="center", **style)


def _words(
    axes: Axes, definition: Definition, rows: pd.DataFrame, titles: tuple[str, str, str]
) -> None:
    """Titles, what the wells show, the roles there are, and lines to write on."""
    style: dict[str, Any] = {"ha": "left", "va": "center", "color": INK}
    axes.text(0.5, 7.84, titles[0], fontsize=21, fontweight="bold", **style)
    axes.text(0.5, 7.51, textwrap.shorten(titles[1], 100, placeholder=" ..."), fontsize=12, **style)
    axes.text(0.5, 7.27, titles[2], fontsize=10, **style)
    there = {*rows["role"]}
    rings = "".join(said for role, said in _RINGS.items() if role in there)
    roles = f"{roles_text(rows, definition.plate != 96)} The cut corner is at A1."
    roles += _controls(definition, there)
    for y, said in ((0.51, f"{_legend(definition)}{rings}"), (0.28, roles)):
        axes.text(0.5, y, said, fontsize=min(11.0, 1380 / len(said)), **style)
    write = {**style, "ha": "right", "fontsize": 11}
    axes.text(A4[0] - 0.5, 7.84, "Run by ______________", **write)
    axes.text(A4[0] - 0.5, 7.42, "Date ______________", **write)


def _controls(definition: Definition, there: set[str]) -> str:
    """What controls are given besides the load, where the study says it."""
    given = definition.bench.control_condition
    roles = [_ROLES[role] for role in ("blank", "no_resin") if role in there]
    if given is None or not definition.bench.held or not roles:
        return ""
    by = definition.plan.prepared_by
    fed = "" if by == "well" else f", or what their {by} is fed"
    said = f"{' and '.join(roles)}: {condition_part(definition, given)}{fed}."
    return f" {said[:1].upper()}{said[1:]}"


def _legend(definition: Definition) -> str:
    """What stands in the wells and beside the lines."""
    ordered = [axis_label(f.label, f.unit) for f in ordered_factors(definition)]
    rest = f", below it {', '.join(ordered[1:])}" if ordered[1:] else ""
    said = f"In each well: {ordered[0]} in bold{rest}."
    if by_number(definition):
        said = "In each well: the number of its condition (next pages)."
    said += f" Colour: {ordered[0]}."
    by = definition.plan.prepared_by
    if by == "well":
        return said
    fed = ", ".join(f.label for f in definition.factors if f.name in definition.stock_factors)
    return f"{said} {'Beside each row' if by == 'row' else 'Below each column'}: {fed}."
