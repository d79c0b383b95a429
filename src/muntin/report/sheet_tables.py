"""The tables of the sheets: conditions, recipes, transfers and totals, as .csv."""

from __future__ import annotations

import csv
import io
import math
from collections.abc import Iterable, Iterator, Mapping
from typing import Any

from muntin.bench.sheets import Sheets, WellsMix
from muntin.record.definition import Definition
from muntin.record.volumes import apportioned, volume_text
from muntin.report.plate_wells import conditions_of

FORM = "stocks.csv"
_ML_PER_L = 1000.0


def sheet_tables(sheets: Sheets) -> dict[str, str]:
    """Return the tables by file name; those of which nothing is known are left out.

    conditions.csv: number, factors, count of wells, wells. recipes.csv: a row a stock of a liquid:
    the factors it sets, stock, ml_per_l, ul_per_well (whole pipette steps), count of wells, wells.
    bottles.csv: what bottles are made from, a row a stock: bottle, stock, ml_per_l, ul (for what
    has to be there, in whole µL). stocks.csv: what bottles are to hold, a row a factor of a bottle,
    with an empty column for what they measured: the form of stocks/.
    transfers.csv: a row a draw, in the order of work: stock, well, draw_ul. totals.csv: a row a
    stock: stock, wells, drawn_ul (the sum of its draws), dead_ul, needed_ul.
    """
    definition = sheets.study.definition
    names = list(definition.factor_names)
    tables = {"conditions.csv": _table(["condition", *names, "count", "wells"], _numbered(sheets))}
    if sheets.mixes:
        held = [name for name in names if name in definition.bench.held]
        heading = [*held, "stock", "ml_per_l", "ul_per_well", "count", "wells"]
        tables["recipes.csv"] = _table(heading, _recipe_rows(sheets))
    if sheets.makings:
        heading = ["bottle", "stock", "ml_per_l", "ul"]
        tables["bottles.csv"] = _table(heading, _making_rows(sheets))
    if form := [*_form_rows(sheets)]:
        tables[FORM] = _table(["bottle", "factor", "target", "measured"], form)
    if sheets.transfers:
        draws = (
            {"stock": t.stock, "well": t.well, "draw_ul": sheets.pipette.shown(t.steps)}
            for t in sheets.transfers
        )
        tables["transfers.csv"] = _table(["stock", "well", "draw_ul"], draws)
        heading = ["stock", "wells", "drawn_ul", "dead_ul", "needed_ul"]
        tables["totals.csv"] = _table(heading, _total_rows(sheets))
    return tables


def _table(heading: list[str], rows: Iterable[Mapping[Any, Any]]) -> str:
    stream = io.StringIO()
    writer = csv.DictWriter(stream, heading, lineterminator="\n")
    writer.writeheader()
    writer.writerows(rows)
    return stream.getvalue()


def _numbered(sheets: Sheets) -> Iterator[dict[Any, Any]]:
    definition = sheets.study.definition
    for row in conditions_of(definition, sheets.rows).to_dict("records"):
        yield row | _written(definition, row)


def _written(definition: Definition, condition: Mapping[Any, Any]) -> dict[str, str]:
    """A condition as the bench writes it."""
    named = [f for f in definition.factors if f.name in condition]
    return {f.name: f.shown(condition[f.name]) for f in named}


def _recipe_rows(sheets: Sheets) -> Iterator[dict[str, Any]]:
    for of in sheets.mixes:
        condition = _written(sheets.study.definition, of.mix.condition)
        for stock, share in of.mix.recipe.parts.items():
            yield condition | {
                "stock": stock,
                "ml_per_l": f"{_ML_PER_L * share:.2f}",
                "ul_per_well": _per_well(sheets, of, stock),
                "count": len(of.wells),
                "wells": " ".join(of.wells),
            }


def made_ul(sheets: Sheets) -> dict[str, dict[str, int]]:
    """Return what each bottle takes of each stock, in whole µL that add up to what has to be there;
    empty where no volume is known.
    """
    needed = {total.stock: math.ceil(total.needed_ul) for total in sheets.totals}
    out = {}
    for bottle, recipe in sheets.makings.items():
        if bottle in needed:
            parts = apportioned([*recipe.parts.values()], needed[bottle])
            out[bottle] = dict(zip(recipe.parts, parts, strict=True))
    return out


def _making_rows(sheets: Sheets) -> Iterator[dict[str, Any]]:
    volumes = made_ul(sheets)
    for bottle, recipe in sheets.makings.items():
        for stock, share in recipe.parts.items():
            ml, ul = f"{_ML_PER_L * share:.2f}", volumes.get(bottle, {}).get(stock, "")
            yield {"bottle": bottle, "stock": stock, "ml_per_l": ml, "ul": ul}


def _form_rows(sheets: Sheets) -> Iterator[dict[str, str]]:
    for bottle in sheets.bottles:
        for factor in sheets.study.definition.factors:
            if factor.continuous and factor.name in bottle.holds:
                target = factor.shown(bottle.holds[factor.name])
                yield {"bottle": bottle.name, "factor": factor.name, "target": target}


def _per_well(sheets: Sheets, of: WellsMix, stock: str) -> str:
    return "" if of.mix.steps is None else sheets.pipette.shown(of.mix.steps[stock])


def _total_rows(sheets: Sheets) -> Iterator[dict[str, Any]]:
    for total in sheets.totals:
        yield {
            "stock": total.stock,
            "wells": total.wells,
            "drawn_ul": volume_text(total.listed_ul),
            "dead_ul": "" if total.dead_ul is None else volume_text(total.dead_ul),
            "needed_ul": volume_text(total.needed_ul),
        }
