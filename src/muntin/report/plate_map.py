"""The plate map: one page in A4 that reads at arm's length, wells as they lie on the plate."""

from __future__ import annotations

import textwrap
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

import pandas as pd

from muntin.bench.fed import fed_lines
from muntin.bench.wells import geometry, well_index, well_name
from muntin.record.definition import Definition
from muntin.record.factors import Factor
from muntin.record.readings import INFORMING
from muntin.report.style import ACCENT, BARRED, INK, PAPER, QUIET
from muntin.report.words import axis_label

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

A4 = (11.69, 8.27)  # inches, the long side across
_DPI = 200
_MOST_LINES, _LONGEST = 3, 7
# Tints for the levels of a stock; ink stands out on all of them, also where they are printed grey.
_TINTS = ("#fdf6e3", "#dcefdc", "#b7e0d6", "#93cbd6", "#86b4de", "#a9a6e0")
_CONTROL = {"blank": "blank", "load": "load", "no_resin": "no\nresin", "water": "water"}
_SHORT = {"blank": "B", "load": "L", "no_resin": "N", "water": "W"}
_ROLES = {
    "test": "test",
    "bridge": "bridging",
    "reference": "reference",
    "blank": "blank",
    "load": "load",
    "no_resin": "no resin",
    "water": "water",
}
_RADIUS = 0.46
_PITCH = 0.74  # inches between the wells of 96
_TOP = 6.72  # the plate's upper side, inches from the foot of the page
_SIZES = {1: (17.0,), 2: (16.5, 14.5), 3: (13.5, 12.5, 12.5)}  # points, at that pitch


def conditions_of(definition: Definition, rows: pd.DataFrame) -> pd.DataFrame:
    """Return the distinct conditions of a plan in plate order: condition (counted from 1), the
    factors (raw units), count (wells) and wells.
    """
    names = list(definition.factor_names)
    wells = rows[rows["role"].isin(INFORMING)].groupby(names, sort=False)["well"]
    frame = pd.DataFrame({"count": wells.size(), "wells": wells.agg(" ".join)}).reset_index()
    return frame.assign(condition=range(1, len(frame) + 1))[["condition", *names, "count", "wells"]]


def by_number(definition: Definition) -> bool:
    """Whether wells show the number of their condition, because its values do not fit in."""
    longest = max(len(f.shown(v)) for f in definition.factors for v in f.plan_levels().tolist())
    return definition.plate != 96 or len(definition.factors) > _MOST_LINES or longest > _LONGEST


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
    place = _Place(definition.plate)
    _frame(axes, place)
    _empty_wells(axes, place, set(rows["well"]))
    _wells(axes, place, definition, rows)
    _feeds(axes, place, definition, rows)
    _words(axes, definition, rows, titles)
    return figure


class _Place:
    """Where wells lie on the page, in inches from its lower left corner."""

    def __init__(self, plate: int) -> None:
        self.plate = plate
        self.rows, self.columns = geometry(plate).rows, geometry(plate).columns
        self.pitch = _PITCH * 8 / self.rows
        self.scale = self.pitch / _PITCH

    def of(self, row: int, column: int) -> tuple[float, float]:
        """The centre of a well."""
        left = (A4[0] - self.pitch * (self.columns - 1)) / 2
        return left + self.pitch * column, _TOP - self.pitch * (row + 0.58)

    def at(self, well: str) -> tuple[float, float]:
        """The centre of a well by name."""
        return self.of(*well_index(well, self.plate))


def _frame(axes: Axes, place: _Place) -> None:
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


def _empty_wells(axes: Axes, place: _Place, taken: set[str]) -> None:
    from matplotlib.patches import Circle

    for row in range(place.rows):
        for column in range(place.columns):
            if well_name(row, column) not in taken:
                ring = Circle(place.of(row, column), 0.12 * place.pitch, fill=False)
                ring.set(edgecolor=BARRED, linewidth=1.0)
                axes.add_patch(ring)


def _wells(axes: Axes, place: _Place, definition: Definition, rows: pd.DataFrame) -> None:
    from matplotlib.patches import Circle

    tints, stock = _level_tints(definition, rows), definition.stock_factors[0]
    numbers = _numbers(definition, rows) if by_number(definition) else {}
    for row in rows.to_dict("records"):
        informing, ringed = row["role"] in INFORMING, row["role"] in ("bridge", "reference")
        disc = Circle(place.at(row["well"]), (_RADIUS - 0.02 * ringed) * place.pitch)
        disc.set(
            facecolor=tints[row[stock]] if informing else BARRED,
            edgecolor=ACCENT if ringed else INK if informing else QUIET,
            linewidth=(3.4 if ringed else 1.0) * max(0.6, place.scale),
            linestyle=(0, (1, 1)) if row["role"] == "reference" else "solid",
        )
        axes.add_patch(disc)
        _label(axes, place, row["well"], _lines(place, definition, row, numbers), informing)


def _lines(
    place: _Place, definition: Definition, row: Mapping[Any, Any], numbers: Mapping[Any, int]
) -> list[str]:
    """What stands in a well: the stock's factor first."""
    if row["role"] not in INFORMING:
        role = str(row["role"])
        return _CONTROL[role].split("\n") if place.plate == 96 else [_SHORT[role]]
    if numbers:
        return [str(numbers[tuple(row[name] for name in definition.factor_names)])]
    return [f.shown(row[f.name]) for f in _ordered(definition)]


def _ordered(definition: Definition) -> list[Factor]:
    """The factors as a well shows them: that of the stocks first."""
    first = definition.stock_factors[0]
    return sorted(definition.factors, key=lambda f: f.name != first)


def _label(axes: Axes, place: _Place, well: str, lines: Sequence[str], informing: bool) -> None:
    sizes = _SIZES[len(lines)] if informing else (12.5,) * len(lines)
    # On 384 wells type shrinks less than the wells do: a number of three digits still fits in.
    scale = place.scale if place.plate == 96 else 0.62
    shown = [
        size * scale * min(1.0, 4.6 / len(text)) for text, size in zip(lines, sizes, strict=True)
    ]
    heights = [size * scale * 1.12 / 72 for size in sizes]
    x, y = place.at(well)
    y += sum(heights) / 2
    for index, (text, size, height) in enumerate(zip(lines, shown, heights, strict=True)):
        weight = "bold" if informing and index == 0 else "normal"
        style: dict[str, Any] = {"ha": "center", "va": "center_baseline", "color": INK}
        axes.text(x, y - height / 2, text, fontsize=size, fontweight=weight, **style)
        y -= height


def _level_tints(definition: Definition, rows: pd.DataFrame) -> dict[Any, str]:
    """The tint of each level of the stocks' factor; beyond six they begin again."""
    name = definition.stock_factors[0]
    factor = next(f for f in definition.factors if f.name == name)
    used = set(rows[rows["role"].isin(INFORMING)][name])
    levels = [level for level in factor.levels().tolist() if level in used]
    if len(levels) > len(_TINTS):
        return {level: _TINTS[k % len(_TINTS)] for k, level in enumerate(levels)}
    step = (len(_TINTS) - 1) / max(1, len(levels) - 1)
    return {level: _TINTS[round(k * step)] for k, level in enumerate(levels)}


def _numbers(definition: Definition, rows: pd.DataFrame) -> dict[Any, int]:
    table = conditions_of(definition, rows)
    keys = table[list(definition.factor_names)].itertuples(index=False, name=None)
    return dict(zip(keys, table["condition"], strict=True))


def _feeds(axes: Axes, place: _Place, definition: Definition, rows: pd.DataFrame) -> None:
    """Beside each plate line that a stock feeds, the level of that stock."""
    by = definition.plan.prepared_by
    factors = [f for f in definition.factors if f.name in definition.stock_factors]
    size = 13 * max(0.7, place.scale)
    style: dict[str, Any] = {"va": "center", "fontsize": size, "fontweight": "bold", "color": INK}
    for line, levels in fed_lines(definition, rows).items():
        text = ", ".join(f.shown(levels[f.name]) for f in factors)
        if by == "row":
            x, y = place.of(line, place.columns - 1)
            axes.text(x + 0.68 * place.pitch, y, f"\u25c2 {text}", ha="left", **style)
        else:
            x, y = place.of(place.rows - 1, line)
            axes.text(x, y - 0.58 * place.pitch - 0.13, f"\u25b4 {text}", ha="center", **style)


def _words(
    axes: Axes, definition: Definition, rows: pd.DataFrame, titles: tuple[str, str, str]
) -> None:
    """Titles, what the wells show, the roles there are, and lines to write on."""
    style: dict[str, Any] = {"ha": "left", "va": "center", "color": INK}
    axes.text(0.5, 7.84, titles[0], fontsize=21, fontweight="bold", **style)
    axes.text(0.5, 7.51, textwrap.shorten(titles[1], 100, placeholder=" ..."), fontsize=12, **style)
    axes.text(0.5, 7.27, titles[2], fontsize=10, **style)
    axes.text(0.5, 0.53, _legend(definition), fontsize=11, **style)
    rings = {"bridge": " Thick ring: bridging.", "reference": " Dotted ring: reference."}
    there = {*rows["role"]}
    roles = roles_text(rows, definition.plate != 96)
    roles += "".join(said for role, said in rings.items() if role in there) + " Cut corner: A1."
    axes.text(0.5, 0.29, roles, fontsize=11, **style)
    write = {**style, "ha": "right", "fontsize": 11}
    axes.text(A4[0] - 0.5, 7.84, "Run by ______________", **write)
    axes.text(A4[0] - 0.5, 7.42, "Date ______________", **write)


def _legend(definition: Definition) -> str:
    """What stands in the wells and beside the lines."""
    ordered = [axis_label(f.label, f.unit) for f in _ordered(definition)]
    rest = f", below it {', '.join(ordered[1:])}" if ordered[1:] else ""
    said = f"In each well: {ordered[0]} in bold{rest}."
    if by_number(definition):
        said = "In each well: the number of its condition, as listed on the pages after this."
    by = definition.plan.prepared_by
    fed = [f.label for f in definition.factors if f.name in definition.stock_factors]
    return said if by == "well" else f"{said} At the arrows: {', '.join(fed)} of each {by}."


def roles_text(rows: pd.DataFrame, short: bool = False) -> str:
    """Return how many wells have which role; `short` adds the letters that controls have on 384."""
    count = rows["role"].value_counts()
    parts = [
        f"{count[role]} {name}{f' ({_SHORT[role]})' if short and role in _SHORT else ''}"
        for role, name in _ROLES.items()
        if role in count
    ]
    return f"{len(rows)} wells: {', '.join(parts)}."
