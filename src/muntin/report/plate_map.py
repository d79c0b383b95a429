"""The plate map: one page in A4 that reads at arm's length, wells as they lie on the plate."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

import pandas as pd

from muntin.bench.wells import geometry, well_index, well_name
from muntin.record.definition import Definition
from muntin.record.readings import INFORMING
from muntin.report.style import ACCENT, BARRED, INK, PAPER, QUIET
from muntin.report.words import axis_label

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_A4 = (11.69, 8.27)  # inches, the long side across
_DPI = 200
_MOST_LINES, _LONGEST = 3, 7
# Tints for the levels of a stock, from pale to full; ink stands out on all of them, and they fall
# evenly in lightness, so that they part in grey too.
_TINTS = ("#fdf6e3", "#d9efe4", "#a9d8d3", "#78bccb", "#5b9bc4", "#7f8cc6")
_CONTROL = {"blank": "blank", "load": "load", "no_resin": "no\nresin", "water": "water"}
_RADIUS = 0.46
# Points of type in a well whose neighbours lie 0.78 inches away; in proportion on other plates.
_PITCH = 0.78
_SIZES = {1: (17.0,), 2: (16.0, 14.0), 3: (13.5, 12.0, 12.0)}


def conditions_of(definition: Definition, rows: pd.DataFrame) -> pd.DataFrame:
    """Return the distinct conditions of a plan in plate order: condition (counted from 1), the
    factors (raw units), count (wells) and wells.
    """
    names = list(definition.factor_names)
    run = rows[rows["role"].isin(INFORMING)]
    wells = run.groupby(names, sort=False)["well"]
    frame = pd.DataFrame({"count": wells.size(), "wells": wells.agg(" ".join)}).reset_index()
    return frame.assign(condition=range(1, len(frame) + 1))[["condition", *names, "count", "wells"]]


def by_number(definition: Definition) -> bool:
    """Whether wells show the number of their condition, because its values do not fit in."""
    texts = max(
        len(f.shown(level)) for f in definition.factors for level in f.plan_levels()[[0, -1]]
    )
    return definition.plate != 96 or len(definition.factors) > _MOST_LINES or texts > 6


def draw_plate_map(definition: Definition, rows: pd.DataFrame, titles: tuple[str, str]) -> Figure:
    """Draw the wells of a plan (well, role, factors in raw units; empty for controls).

    titles: what stands above, and below in small type. The figure has the size of A4, the long side
    across.
    """
    from matplotlib.figure import Figure

    figure = Figure(figsize=_A4, dpi=_DPI, facecolor=PAPER)
    shape = geometry(definition.plate)
    axes = figure.add_axes((0.0, 0.0, 1.0, 1.0))
    axes.set_axis_off()
    pitch = min(10.4 / shape.columns, 6.3 / shape.rows)
    left = (_A4[0] - pitch * (shape.columns - 1)) / 2 + 0.1
    top = 6.83 - pitch / 2
    axes.set(xlim=(0, _A4[0]), ylim=(0, _A4[1]), aspect="equal")
    place = _Place(left, top, pitch)
    _frame(axes, place, shape.rows, shape.columns)
    _wells(axes, place, definition, rows)
    _words(axes, definition, rows, titles)
    return figure


class _Place:
    """Where wells lie on the page, in inches from its lower left corner."""

    def __init__(self, left: float, top: float, pitch: float) -> None:
        self.left, self.top, self.pitch = left, top, pitch

    def of(self, row: int, column: int) -> tuple[float, float]:
        """The centre of a well."""
        return self.left + self.pitch * column, self.top - self.pitch * row


def _frame(axes: Axes, place: _Place, rows: int, columns: int) -> None:
    """The outline with the corner of A1 cut off, the letters and the numbers."""
    from matplotlib.patches import Polygon

    half = place.pitch * 0.58
    (x0, y0), (x1, y1) = place.of(0, 0), place.of(rows - 1, columns - 1)
    x0, y0, x1, y1 = x0 - half, y0 + half, x1 + half, y1 - half
    cut = place.pitch * 0.35
    outline = [(x0 + cut, y0), (x1, y0), (x1, y1), (x0, y1), (x0, y0 - cut)]
    axes.add_patch(Polygon(outline, closed=True, fill=False, edgecolor=INK, linewidth=1.4))
    size = 17 * max(0.75, place.pitch / _PITCH)
    style: dict[str, Any] = {"ha": "center", "va": "center", "fontsize": size, "color": INK}
    for column in range(columns):
        x, y = place.of(0, column)
        axes.text(x, y0 + 0.17, str(column + 1), fontweight="bold", **style)
    for row in range(rows):
        x, y = place.of(row, 0)
        axes.text(x0 - 0.2, y, well_name(row, 0)[0], fontweight="bold", **style)


def _wells(axes: Axes, place: _Place, definition: Definition, rows: pd.DataFrame) -> None:
    from matplotlib.patches import Circle

    shape, tints = geometry(definition.plate), level_tints(definition, rows)
    names = definition.stock_factors[0]
    numbers = _numbers(definition, rows) if by_number(definition) else {}
    taken = {}
    for row in rows.to_dict("records"):
        at = well_index(row["well"], definition.plate)
        taken[at] = row
    for r in range(shape.rows):
        for c in range(shape.columns):
            centre, row = place.of(r, c), taken.get((r, c))
            if row is None:
                radius = 0.12 if shape.rows == 8 else 0.2
                ring = Circle(centre, radius * place.pitch, fill=False, edgecolor=BARRED)
                axes.add_patch(ring)
                continue
            informing = row["role"] in INFORMING
            tint = tints[row[names]] if informing else BARRED
            width = {"bridge": 3.4, "reference": 3.4}.get(str(row["role"]), 1.0)
            style = (0, (1, 1)) if row["role"] == "reference" else "solid"
            edge = ACCENT if width > 1 else INK if informing else QUIET
            radius = (_RADIUS - 0.02 * (width > 1)) * place.pitch
            disc = Circle(centre, radius, facecolor=tint, edgecolor=edge, linewidth=width)
            disc.set_linestyle(style)
            axes.add_patch(disc)
            _label(axes, place, centre, _lines(definition, row, numbers), informing)


def _lines(definition: Definition, row: Mapping[Any, Any], numbers: Mapping[Any, int]) -> list[str]:
    """What stands in a well: the stock's factor first."""
    if row["role"] not in INFORMING:
        text = _CONTROL[str(row["role"])]
        return [text[:2].strip()] if definition.plate != 96 else text.split("\n")
    if numbers:
        return [str(numbers[tuple(row[name] for name in definition.factor_names)])]
    return [f.shown(row[f.name]) for f in ordered_factors(definition)]


def ordered_factors(definition: Definition) -> list[Any]:
    """The factors as a well shows them: that of the stocks first."""
    first = definition.stock_factors[0]
    return sorted(definition.factors, key=lambda f: f.name != first)


def _label(
    axes: Axes, place: _Place, centre: tuple[float, float], lines: Sequence[str], informing: bool
) -> None:
    scale = place.pitch / _PITCH
    sizes = _SIZES[len(lines)] if informing else (12.5,) * len(lines)
    if scale < 0.8:
        sizes = (11.0,) if informing else (8.5,)
    else:
        sizes = tuple(scale * size for size in sizes)
    heights = [size * 1.12 / 72 for size in sizes]
    y = centre[1] + sum(heights) / 2
    for index, (text, size, height) in enumerate(zip(lines, sizes, heights, strict=True)):
        weight = "bold" if informing and index == 0 else "normal"
        axes.text(
            centre[0],
            y - height / 2,
            text,
            ha="center",
            va="center_baseline",
            fontsize=size * min(1.0, 4.6 / max(len(text), 1)) if informing else size,
            fontweight=weight,
            color=INK if informing else QUIET,
        )
        y -= height


def level_tints(definition: Definition, rows: pd.DataFrame) -> dict[Any, str]:
    """Return the tint of each level of the stocks' factor in a plan, pale for the lowest."""
    name = definition.stock_factors[0]
    factor = next(f for f in definition.factors if f.name == name)
    used = set(rows[rows["role"].isin(INFORMING)][name])
    levels = [level for level in factor.levels().tolist() if level in used]
    levels += sorted(used - {*levels})
    if len(levels) > len(_TINTS):
        return {level: _TINTS[k % len(_TINTS)] for k, level in enumerate(levels)}
    spread = [round(k * (len(_TINTS) - 1) / max(1, len(levels) - 1)) for k in range(len(levels))]
    return {level: _TINTS[k] for level, k in zip(levels, spread, strict=True)}


def _numbers(definition: Definition, rows: pd.DataFrame) -> dict[Any, int]:
    table = conditions_of(definition, rows)
    keys = table[list(definition.factor_names)].itertuples(index=False, name=None)
    return dict(zip(keys, table["condition"], strict=True))


def _words(axes: Axes, definition: Definition, rows: pd.DataFrame, titles: tuple[str, str]) -> None:
    """Title, what the wells show, the roles there are, and lines to write on."""
    above, below = titles
    style: dict[str, Any] = {"ha": "left", "va": "center", "color": INK}
    axes.text(0.5, 7.85, above, fontsize=17, fontweight="bold", **style)
    axes.text(0.5, 7.55, below, fontsize=10.5, **{**style, "color": QUIET})
    ordered = [axis_label(f.label, f.unit) for f in ordered_factors(definition)]
    if by_number(definition):
        said = "In each well: the number of its condition, as listed on the next page."
    else:
        rest = f", below it {', '.join(ordered[1:])}" if ordered[1:] else ""
        said = f"In each well: {ordered[0]} in bold{rest}."
    axes.text(0.5, 0.36, said, fontsize=11, **style)
    axes.text(0.5, 0.14, _roles(rows), fontsize=11, **style)
    write = {**style, "ha": "right", "fontsize": 11}
    axes.text(_A4[0] - 0.5, 0.36, "Run by ____________________", **write)
    axes.text(_A4[0] - 0.5, 0.14, "Date ____________________", **write)


def _roles(rows: pd.DataFrame) -> str:
    count = rows["role"].value_counts()
    known = {
        "test": "test",
        "bridge": "bridging (thick ring)",
        "reference": "reference (dotted ring)",
        "blank": "blank",
        "load": "load",
        "no_resin": "no resin",
        "water": "water",
    }
    parts = [f"{count[role]} {name}" for role, name in known.items() if role in count]
    return f"{len(rows)} wells: {', '.join(parts)}. The cut corner is at A1."
