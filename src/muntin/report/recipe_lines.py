"""Recipes of bottles as lines of plain text: a table where it fits, else a sentence a bottle."""

from __future__ import annotations

import textwrap
from collections.abc import Mapping

from muntin.bench.recipe import Recipe
from muntin.record.buffers import WATER

_HEAD = "mL per litre"


def recipe_lines(makings: Mapping[str, Recipe], width: int) -> list[list[str]]:
    """Return the recipes by bottle, each as its lines, at most so many signs wide; first the
    heading of the table, where there is one. What is remarked on a bottle stands below it.
    """
    named = dict.fromkeys(stock for recipe in makings.values() for stock in recipe.parts)
    stocks = sorted(named, key=lambda stock: stock == WATER)
    columns = [max(len(stock), 6) + 2 for stock in stocks]
    first = max(len(_HEAD), *(len(name) + 4 for name in makings), 0) if makings else 0
    if first + sum(columns) > width:
        return [_sentence(name, recipe, width) for name, recipe in makings.items()]

    def row(name: str, cells: list[str]) -> str:
        shown = (f"{cell:>{size}}" for cell, size in zip(cells, columns, strict=True))
        return f"{name:<{first}}{''.join(shown)}".rstrip()

    lines = [[row(_HEAD, stocks)]] if makings else []
    for name, recipe in makings.items():
        shares = [recipe.parts.get(stock) for stock in stocks]
        cells = ["" if share is None else f"{1000 * share:.1f}" for share in shares]
        lines.append([row(f"[ ] {name}", cells), *_remarks(recipe, width)])
    return lines


def _remarks(recipe: Recipe, width: int) -> list[str]:
    if not recipe.remarks:
        return []
    said = "; ".join(recipe.remarks)
    return textwrap.wrap(f"{said}.", width, initial_indent="    ", subsequent_indent="    ")


def _sentence(name: str, recipe: Recipe, width: int) -> list[str]:
    parts = "; ".join(f"{stock} {1000 * share:.1f}" for stock, share in recipe.parts.items())
    said = "; ".join([f"{name}, {_HEAD}: {parts}", *recipe.remarks])
    return textwrap.wrap(f"{said}.", width, initial_indent="[ ] ", subsequent_indent="    ")
