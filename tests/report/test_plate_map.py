"""The plate map: every well in its place, with text that fits into it and on the page."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import to_hex
from matplotlib.figure import Figure
from matplotlib.patches import Circle
from matplotlib.text import Text

from muntin.bench import centre, lay_out
from muntin.record.definition import Definition
from muntin.report.plate_map import draw_plate_map, roles_text
from muntin.report.plate_wells import Place, by_number, conditions_of
from muntin.report.sheet_words import condition_part
from tests.studies import LOAD, PH, RESIN, SALT, TIME, spread, tables

ENDS = {"low salt": 0, "high salt": 500}
TITLES = ("plate-02", "Small invented study", "plans/plate-02.csv")
CONTROLS = ["load", "load", "blank", "no_resin", "water"]


def definition_of(
    factors: Sequence[Mapping[str, Any]] = (PH, SALT), plate: int = 96, by: str = "well"
) -> Definition:
    given = tables(factors=[*factors], study={"plate": plate}, plan={"prepared_by": by})
    return Definition.model_validate(given)


def plan(definition: Definition, tests: int = 20, seed: int = 0) -> pd.DataFrame:
    """Test wells, two bridging wells, a reference and controls, laid out."""
    keys = [factor.model_dump(exclude_none=True) for factor in definition.factors]
    conditions = spread(keys, tests, seed)
    frame = pd.concat([conditions, conditions.iloc[:3]], ignore_index=True)
    roles = ["test"] * tests + ["bridge", "bridge", "reference"] + CONTROLS
    stocks = [*frame[definition.stock_factors[0]], *[None] * len(CONTROLS)]
    wells = lay_out(
        roles,
        plate=definition.plate,
        rng=np.random.default_rng(seed),
        prepared_by=definition.plan.prepared_by,
        stocks=stocks,
    )
    return frame.reindex(range(len(roles))).assign(role=roles, well=wells)


def texts(figure: Figure) -> list[Text]:
    return figure.axes[0].texts


def at(figure: Figure, x: float, y: float, within: float) -> list[str]:
    """The texts whose middle lies so near a place, from the top down."""
    near = [t for t in texts(figure) if np.hypot(t.get_position()[0] - x, _y(t) - y) < within]
    return [t.get_text() for t in sorted(near, key=_y, reverse=True)]


def _y(text: Text) -> float:
    return float(text.get_position()[1])


@pytest.mark.parametrize("factors", [[PH, SALT], [SALT], [PH, LOAD, RESIN]])
def test_each_well_shows_its_condition(factors: list[Mapping[str, Any]]) -> None:
    definition = definition_of(factors)
    rows = plan(definition)
    figure = draw_plate_map(definition, rows, TITLES)
    place = Place(96)
    control = {"no_resin": ["no", "resin"]}
    for row in rows.to_dict("records"):
        shown = at(figure, *place.at(row["well"]), 0.5 * place.pitch)
        if row["role"] in CONTROLS:
            assert shown == control.get(row["role"], [row["role"]])
        else:
            assert shown == [f.shown(row[f.name]) for f in definition.factors]


@pytest.mark.parametrize("plate", [96, 384])
def test_wells_lie_as_on_the_plate(plate: int) -> None:
    # Distances of the microplate standard, in the scale of the page, letters down.
    place, names = Place(plate), ("A1", "B1", "A2", "C11", "H12")
    (x0, y0), (left, top) = place.at("A1"), centre("A1", plate)
    pitch_mm = 9.0 if plate == 96 else 4.5
    for name in names:
        (x, y), (right, down) = place.at(name), centre(name, plate)
        assert (x - x0) / place.pitch == pytest.approx((right - left) / pitch_mm)
        assert (y0 - y) / place.pitch == pytest.approx((down - top) / pitch_mm)


@pytest.mark.parametrize(
    ("factors", "plate", "by", "tests"),
    [
        ([PH, SALT], 96, "row", 20),
        ([PH, SALT], 96, "column", 60),
        ([PH, LOAD, RESIN], 96, "well", 85),
        ([PH, SALT], 384, "column", 200),
        ([RESIN, SALT], 384, "row", 300),
        ([RESIN, SALT], 384, "column", 100),
        ([PH, SALT, LOAD, TIME], 96, "well", 80),
    ],
)
def test_text_fits_into_wells_and_page(
    factors: list[Mapping[str, Any]], plate: int, by: str, tests: int
) -> None:
    definition = definition_of(factors, plate, by)
    rows = plan(definition, tests)
    figure = draw_plate_map(definition, rows, TITLES)
    renderer = FigureCanvasAgg(figure).get_renderer()
    page = figure.bbox
    boxes = [text.get_window_extent(renderer) for text in texts(figure)]
    for text, box in zip(texts(figure), boxes, strict=True):
        inside = page.x0 <= box.x0 and box.x1 <= page.x1 and page.y0 <= box.y0 and box.y1 <= page.y1
        assert inside, text.get_text()
    place, dots = Place(plate), figure.dpi
    half = 0.46 * place.pitch * dots
    for well in rows["well"]:
        x, y = (dots * c for c in place.at(well))
        own = [b for b in boxes if abs((b.x0 + b.x1) / 2 - x) < half and abs(b.y0 - y) < 2 * half]
        own = [b for b in own if abs((b.y0 + b.y1) / 2 - y) < half]
        assert own
        for box in own:
            assert box.width <= 2 * half
    # No two texts lie over each other.
    for i, one in enumerate(boxes):
        for other in boxes[i + 1 :]:
            shared = min(one.x1, other.x1) - max(one.x0, other.x0)
            height = min(one.y1, other.y1) - max(one.y0, other.y0)
            # Boxes of lines in one well have room for descenders that digits lack.
            assert shared <= 1 or height <= 0.35 * min(one.height, other.height)


def test_type_reads_at_arms_length() -> None:
    # 12 points, the type of body text, is read at arm's length; the usual plan has no less.
    definition = definition_of()
    rows = plan(definition)
    figure = draw_plate_map(definition, rows, TITLES)
    shown = {f.shown(v) for f in definition.factors for v in rows[f.name].dropna()}
    sizes = [t.get_fontsize() for t in texts(figure) if t.get_text() in shown]
    assert min(sizes) >= 12
    assert tuple(figure.get_size_inches()) == pytest.approx((297 / 25.4, 210 / 25.4), abs=0.01)


def test_many_values_are_told_by_number() -> None:
    definition = definition_of([PH, SALT, LOAD, TIME])
    assert by_number(definition)
    rows = plan(definition, 30)
    figure = draw_plate_map(definition, rows, TITLES)
    place = Place(96)
    table = conditions_of(definition, rows)
    assert table["condition"].tolist() == [*range(1, len(table) + 1)]
    for row in table.to_dict("records"):
        wells = row["wells"].split()
        assert len(wells) == row["count"]
        for well in wells:
            assert at(figure, *place.at(well), 0.4 * place.pitch) == [str(row["condition"])]
            there = rows.set_index("well").loc[well]
            assert all(there[f.name] == row[f.name] for f in definition.factors)
    assert table["count"].sum() == 33


@pytest.mark.parametrize("by", ["row", "column"])
def test_lines_say_what_feeds_them(by: str) -> None:
    definition = definition_of(by=by)
    rows = plan(definition, 30)
    figure = draw_plate_map(definition, rows, TITLES)
    place = Place(96)
    for row in rows[~rows["role"].isin(CONTROLS)].to_dict("records"):
        x, y = place.at(row["well"])
        edge = place.of(7, 11)
        side = (edge[0] + 0.58 * place.pitch + 0.1, y)
        below = (x, edge[1] - 0.58 * place.pitch - 0.12)
        (shown,) = at(figure, *(side if by == "row" else below), 0.01)
        assert shown == f"{row['ph']:.1f}"


@pytest.mark.parametrize(("by", "fed"), [("well", ""), ("row", ", or what their row is fed")])
def test_what_controls_are_given_stands_below_the_map(by: str, fed: str) -> None:
    definition = definition_of(by=by)
    control = {"ph": 6.0, "salt": 280.0}
    stocks = [{"name": end, "per": "ph", "holds": {"salt": held}} for end, held in ENDS.items()]
    given = Definition.model_validate(
        tables(
            factors=[PH, SALT],
            plan={"prepared_by": by},
            bench={"ph_factor": "ph", "control_condition": control, "stocks": stocks},
        )
    )
    rows = plan(definition, 30)
    said = f"Blank and no resin: {condition_part(given, control)}{fed}."
    assert any(said in t.get_text() for t in texts(draw_plate_map(given, rows, TITLES)))
    informing = rows[~rows["role"].isin(CONTROLS)]
    for figure in (
        draw_plate_map(given, informing, TITLES),
        draw_plate_map(definition, rows, TITLES),
    ):
        assert not any("no resin:" in t.get_text() for t in texts(figure))


def test_rings_tell_bridging_and_reference_wells() -> None:
    definition = definition_of()
    rows = plan(definition)
    figure = draw_plate_map(definition, rows, TITLES)
    place = Place(96)
    width = {}
    for patch in figure.axes[0].patches:
        if hasattr(patch, "center"):
            width[tuple(np.round(patch.center, 6))] = patch
    for row in rows.to_dict("records"):
        disc = width[tuple(np.round(place.at(row["well"]), 6))]
        assert (disc.get_linewidth() > 3) == (row["role"] in ("bridge", "reference"))
        assert (disc.get_linestyle() not in ("solid", "-")) == (row["role"] == "reference")


def test_roles_are_counted() -> None:
    rows = pd.DataFrame({"role": ["test", "test", "bridge", "load", "no_resin"]})
    assert roles_text(rows) == "5 wells: 2 test, 1 bridging, 1 load, 1 no resin."
    assert roles_text(rows, short=True) == (
        "5 wells: 2 test, 1 bridging, 1 load (L), 1 no resin (N)."
    )


@pytest.mark.parametrize("step", [1.0, 0.5, 0.25])
def test_no_two_levels_have_one_colour_and_the_page_says_what_colour_is(step: float) -> None:
    ph = {**PH, "step": step}
    definition = definition_of([ph, SALT])
    levels = np.arange(4.5, 7.51, step)
    rows = pd.DataFrame({"ph": levels, "salt": 100.0}).assign(
        role="test", well=[f"A{1 + i}" if i < 12 else f"B{i}" for i in range(len(levels))]
    )
    figure = draw_plate_map(definition, rows, TITLES)
    radius = 0.3 * Place(96).pitch
    fills = [
        p.get_facecolor()
        for p in figure.axes[0].patches
        if isinstance(p, Circle) and p.get_radius() > radius
    ]
    assert len(fills) == len(levels)
    assert len({to_hex(fill) for fill in fills}) == len(levels)
    assert any("Colour: pH." in text.get_text() for text in texts(figure))
