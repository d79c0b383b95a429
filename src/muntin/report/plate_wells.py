"""The wells of a plate map: where they lie on the page, their tint, ring and text."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from functools import lru_cache
from typing import TYPE_CHECKING, Any

import pandas as pd

from muntin.bench.wells import geometry, well_index, well_name
from muntin.record.definition import Definition
from muntin.record.factors import Factor
from muntin.record.readings import INFORMING
from muntin.report.style import ACCENT, BARRED, INK, QUIET

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.patches import Patch

A4 = (11.69, 8.27)  # inches, the long side across
SHORT = {"blank": "B", "load": "L", "no_resin": "N", "water": "W"}
_CONTROL = {"blank": "blank", "load": "load", "no_resin": "no\nresin", "water": "water"}
_MOST_LINES, _LONGEST = 3, 7
# Tints for the levels of a stock; ink stands out on all of them, also where they are printed grey.
_TINTS = ("#fdf6e3", "#dcefdc", "#b7e0d6", "#93cbd6", "#86b4de", "#a9a6e0")
_HALF = 0.46  # of a well, in distances between wells
_PITCH = 0.72  # inches between the wells of 96
_TOP = 6.72  # the plate's upper side, inches from the foot of the page
_SIZES = {1: (17.0,), 2: (16.5, 14.5), 3: (13.5, 12.5, 12.5)}  # points, at that pitch
_POINTS = 72.0  # an inch


class Place:
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


def ordered_factors(definition: Definition) -> list[Factor]:
    """Return the factors as a well shows them: that of the stocks first."""
    first = definition.stock_factors[0]
    return sorted(definition.factors, key=lambda f: f.name != first)


def draw_wells(axes: Axes, place: Place, definition: Definition, rows: pd.DataFrame) -> None:
    """Draw the wells of a plan (well, role, factors in raw units), and small rings where none is.

    A bridging well has a thick ring, a reference a dotted one; controls are grey.
    """
    _empty_wells(axes, place, set(rows["well"]))
    tints, stock = _level_tints(definition, rows), definition.stock_factors[0]
    numbers = _numbers(definition, rows) if by_number(definition) else {}
    for row in rows.to_dict("records"):
        informing, ringed = row["role"] in INFORMING, row["role"] in ("bridge", "reference")
        lines = _lines(place, definition, row, numbers)
        patch = _outline(place, row["well"], len(lines), _HALF - 0.02 * ringed)
        patch.set(
            facecolor=tints[row[stock]] if informing else BARRED,
            edgecolor=ACCENT if ringed else INK if informing else QUIET,
            linewidth=(3.4 if ringed else 1.0) * max(0.6, place.scale),
            linestyle=(0, (1, 1)) if row["role"] == "reference" else "solid",
        )
        axes.add_patch(patch)
        _label(axes, place, row["well"], lines, informing)


def _empty_wells(axes: Axes, place: Place, taken: set[str]) -> None:
    from matplotlib.patches import Circle

    for row in range(place.rows):
        for column in range(place.columns):
            if well_name(row, column) not in taken:
                ring = Circle(place.of(row, column), 0.12 * place.pitch, fill=False)
                ring.set(edgecolor=BARRED, linewidth=1.0)
                axes.add_patch(ring)


def _outline(place: Place, well: str, lines: int, half: float) -> Patch:
    """A circle, or for three lines a square with round corners, which has more room."""
    from matplotlib.patches import Circle, FancyBboxPatch

    (x, y), r = place.at(well), half * place.pitch
    if lines < 3:
        return Circle((x, y), r)
    corner = f"round,pad=0,rounding_size={0.4 * r}"
    return FancyBboxPatch((x - r, y - r), 2 * r, 2 * r, boxstyle=corner)


def _lines(
    place: Place, definition: Definition, row: Mapping[Any, Any], numbers: Mapping[Any, int]
) -> list[str]:
    """What stands in a well: the stock's factor first."""
    if row["role"] not in INFORMING:
        role = str(row["role"])
        return _CONTROL[role].split("\n") if place.plate == 96 else [SHORT[role]]
    if numbers:
        return [str(numbers[tuple(row[name] for name in definition.factor_names)])]
    return [f.shown(row[f.name]) for f in ordered_factors(definition)]


def _label(axes: Axes, place: Place, well: str, lines: Sequence[str], informing: bool) -> None:
    # On 384 wells type shrinks less than the wells do: a number of three digits still fits in.
    scale = place.scale if place.plate == 96 else 0.62
    sizes = [size * scale for size in (_SIZES[len(lines)] if informing else (12.5,) * len(lines))]
    heights = [size * 1.12 / _POINTS for size in sizes]
    weights = ["bold" if informing and index == 0 else "normal" for index in range(len(lines))]
    tops = [sum(heights) / 2 - sum(heights[:index]) for index in range(len(lines))]
    middles = [top - height / 2 for top, height in zip(tops, heights, strict=True)]
    rooms = [
        _room(place, len(lines), abs(middle) + 0.4 * size / _POINTS) * _POINTS
        for middle, size in zip(middles, sizes, strict=True)
    ]
    fitting = [
        min(size, room / text_width(text, weight))
        for text, size, weight, room in zip(lines, sizes, weights, rooms, strict=True)
    ]
    if not informing:
        fitting = [min(fitting)] * len(lines)
    x, y = place.at(well)
    for text, size, weight, middle in zip(lines, fitting, weights, middles, strict=True):
        style: dict[str, Any] = {"ha": "center", "va": "center_baseline", "color": INK}
        axes.text(x, y + middle, text, fontsize=size, fontweight=weight, **style)


@lru_cache(maxsize=1024)
def text_width(text: str, weight: str) -> float:
    """Return the width of a text in "bold" or "normal", in sizes of its type."""
    from matplotlib.font_manager import FontProperties
    from matplotlib.textpath import TextPath

    font = FontProperties(weight=weight)
    return float(TextPath((0, 0), text, size=100, prop=font).get_extents().width) / 100


def _room(place: Place, lines: int, off: float) -> float:
    """The width that text has whose upper or lower side lies so far off the middle, in inches."""
    half = (_HALF - 0.045) * place.pitch
    return 2 * half if lines > 2 else 2 * math.sqrt(max(0.0, half**2 - off**2))


def _level_tints(definition: Definition, rows: pd.DataFrame) -> dict[Any, str]:
    """The tint of each level of the stocks' factor, from pale to dark in their order."""
    from matplotlib.colors import LinearSegmentedColormap, to_hex

    name = definition.stock_factors[0]
    factor = next(f for f in definition.factors if f.name == name)
    used = set(rows[rows["role"].isin(INFORMING)][name])
    levels = [level for level in factor.levels().tolist() if level in used]
    if len(levels) > len(_TINTS):
        between = LinearSegmentedColormap.from_list("tints", list(_TINTS))
        ends = max(1, len(levels) - 1)
        return {level: to_hex(between(k / ends)) for k, level in enumerate(levels)}
    step = (len(_TINTS) - 1) / max(1, len(levels) - 1)
    return {level: _TINTS[round(k * step)] for k, level in enumerate(levels)}


def _numbers(definition: Definition, rows: pd.DataFrame) -> dict[Any, int]:
    table = conditions_of(definition, rows)
    keys = table[list(definition.factor_names)].itertuples(index=False, name=None)
    return dict(zip(keys, table["condition"], strict=True))
