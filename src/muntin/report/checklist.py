"""The bench checklist: what to do, box by box, with the cautions first."""

from __future__ import annotations

import textwrap
from collections import Counter
from collections.abc import Iterable, Iterator
from decimal import Decimal

from muntin.bench.control_levels import control_levels
from muntin.bench.gaps import gaps
from muntin.bench.sheets import Sheets
from muntin.bench.transfers import Total
from muntin.record.bench import LOAD
from muntin.record.buffers import WATER
from muntin.record.faults import counted, listed, number
from muntin.report.cautions import bench_cautions
from muntin.report.plate_map import roles_text
from muntin.report.recipe_lines import recipe_lines
from muntin.report.sheet_tables import made_ul
from muntin.report.sheet_words import condition_part, held_text, protein_line, volume_ml

_WIDTH = 84
_BOX = "[ ] "
_FILES = {
    "map.pdf, map.png": "the plate; wells lie as seen from above, A1 at the cut corner",
    "conditions.csv": "condition, factors, count, wells: the distinct conditions",
    "recipes.csv": "stocks of each liquid: mL per litre, and µL per well in pipette steps",
    "bottles.csv": "bottle, stock, ml_per_l, ul: what bottles are made from, and for how much",
    "stocks.csv": "bottle, factor, target, measured: the form for what bottles measured",
    "transfers.csv": "stock, well, draw_ul: every draw in the order of work",
    "totals.csv": "stock, wells, drawn_ul (sum of its draws), dead_ul, needed_ul",
}


def checklist_lines(sheets: Sheets, files: Iterable[str]) -> list[str]:
    """Return the checklist as lines of plain text, at most 84 signs wide; files are those that are
    written beside it.
    """
    parts = [
        _head(sheets),
        ("Cautions", [_item("- ", said) for said in bench_cautions(ph_levels(sheets))]),
        ("Before the plate", [_item(_BOX, said) for said in _before(sheets)]),
        ("Bottles", _bottles(sheets)),
        ("Recipes", _recipes(sheets)),
        ("The plate", [_item(_BOX, said) for said in _plate(sheets)]),
        ("Not in these sheets", [_item("- ", said) for said in gaps(sheets)]),
        ("Files", [_item("- ", said) for said in _files(files)]),
    ]
    lines: list[str] = []
    for heading, items in parts:
        if items:
            lines += [heading.upper(), "", *(line for item in items for line in item), ""]
    return lines[:-1]


def _item(mark: str, said: str) -> list[str]:
    rest = " " * len(mark)
    return textwrap.wrap(said, _WIDTH, initial_indent=mark, subsequent_indent=rest)


def _head(sheets: Sheets) -> tuple[str, list[list[str]]]:
    definition = sheets.study.definition
    said = [
        definition.title,
        f"Plan {sheets.file}, fingerprint {sheets.digest[:8]} (SHA-256).",
        roles_text(sheets.rows),
    ]
    head = [*(_item("", line) for line in said), ["", "Run by ____________________  Date ________"]]
    return f"Bench checklist of {sheets.plate}", head


def ph_levels(sheets: Sheets) -> list[float]:
    """Return the pH of each well of a plan, none where [bench] names no pH."""
    name = sheets.study.definition.bench.ph_factor
    return [] if name is None else sheets.rows[name].dropna().astype(float).tolist()


def _before(sheets: Sheets) -> Iterator[str]:
    yield "Plan and map agree: the fingerprint of the map is that of this page."
    yield "Site procedures read, cautions above gone through, eyes and hands protected."
    if sheets.load is not None:
        yield protein_line(sheets.load, sheets.study.definition)
    kept = [
        f"{name} {value if isinstance(value, str) else number(value)}"
        for name, value in sheets.study.definition.fixed.items()
    ]
    if kept:
        yield f"What the window is conditional on is as it was: {', '.join(kept)}."


def _bottles(sheets: Sheets) -> list[list[str]]:
    """A line a bottle, in columns: name, volume to have, what it holds."""
    totals, dead = sheets.totals, sheets.study.definition.bench.dead_volume_ul
    if not totals:
        return []
    stays = "" if dead is None else f", and {number(dead / 1000)} mL that stay behind"
    width = max(len(total.stock) for total in totals)
    lines = [
        f"{_BOX}{total.stock:<{width}} {volume_ml(total.needed_ul):>11}  {_holds(sheets, total)}"
        for total in totals
    ]
    items = [_item("", f"Have what is drawn{stays}:"), *([line.rstrip()] for line in lines)]
    said = [_item("", line) for line in control_levels(sheets)]
    return [*items, *said, *(_item(_BOX, line) for line in _measured(sheets))]


def _measured(sheets: Sheets) -> Iterator[str]:
    definition = sheets.study.definition
    named = [f for f in definition.factors if any(f.name in b.holds for b in sheets.bottles)]
    ranged = [factor.label for factor in named if factor.continuous]
    if ranged:
        yield (
            f"Measure {' and '.join(ranged)} of each bottle, as far as you can, and write it to "
            f"the form stocks.csv; save that as stocks/{sheets.plate}.csv of the study. The model "
            "then uses what bottles measured, also in the wells that are blended from them."
        )


def _holds(sheets: Sheets, total: Total) -> str:
    strength = sheets.study.definition.bench.protein_mg_per_ml
    if total.stock == LOAD:
        return f"protein {number(strength or 0.0)} mg/mL"
    bottle = next(b for b in sheets.bottles if b.name == total.stock)
    return held_text(sheets.study.definition, bottle)


def _recipes(sheets: Sheets) -> list[list[str]]:
    """What bottles are made from, and what is remarked on them and on the liquids of wells."""
    remarked = [of for of in sheets.mixes if of.mix.recipe.remarks]
    said = [*sheets.buffers]
    if sheets.makings or remarked:
        first = (
            "Recipes are starting points: measure the pH, and titrate where it is off. Make as "
            "much as that takes, and no less than stands above."
        )
        said.insert(0, first)
    if taken := _taken(sheets):
        said.append(f"In all, the bottles at the volumes above take {taken}.")
    for of in remarked:
        liquid = condition_part(sheets.study.definition, of.mix.condition)
        remarks = "; ".join(of.mix.recipe.remarks)
        said.append(f"{liquid} ({listed(of.wells)}): {remarks}.")
    table = recipe_lines(sheets.makings, _WIDTH)
    return [*(_item("- ", line) for line in said), *([[""]] if table else []), *table]


def _taken(sheets: Sheets) -> str:
    """What all bottles together take of the stocks that they are made from."""
    sums: Counter[str] = Counter()
    for parts in made_ul(sheets).values():
        sums.update(parts)
    stocks = sorted(sums, key=lambda stock: stock == WATER)
    return ", ".join(f"{volume_ml(Decimal(sums[stock]))} of {stock}" for stock in stocks)


def _plate(sheets: Sheets) -> Iterator[str]:
    definition, draws = sheets.study.definition, sheets.transfers
    by = definition.plan.prepared_by
    if by != "well":
        fed = [f.label for f in definition.factors if f.name in definition.stock_factors]
        side = "beside the rows" if by == "row" else "below the columns"
        yield f"Each {by} is fed one {' and '.join(fed)}: it stands {side} of the map."
    if any(of.mix.steps for of in sheets.mixes):
        volume = number(definition.bench.well_ul or 0.0)
        count = sum(t.stock != LOAD for t in draws)
        yield (
            f"Mix the liquids on a plate of their own, in the wells of the same names: "
            f"{counted(count, 'draw')} of transfers.csv, {volume} µL in each well. Mix before use."
        )
    if sheets.load is not None and sheets.load.steps:
        count = sum(t.stock == LOAD for t in draws)
        yield (
            f"Load the plate: the {counted(count, 'draw')} of {LOAD} in transfers.csv, wells of "
            "load among them."
        )
    yield (
        "Controls as on the map: no protein into blanks; no resin where the map says so, nor in "
        "wells of load, which are the load itself as it is read."
    )
    yield "Balance the rotor before each spin."
    yield (
        f"Fill the readings into {sheets.file} (what differs from the plan too) and move it to "
        f"plates/{sheets.plate}.csv."
    )


def _files(files: Iterable[str]) -> Iterator[str]:
    there = {*files}
    for names, said in _FILES.items():
        if names.split(", ")[0] in there:
            yield f"{names}: {said}"
