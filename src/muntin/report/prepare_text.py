"""The sheets on the screen, and as plain values for JSON."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from rich.console import Group, RenderableType
from rich.table import Table
from rich.text import Text

from muntin.bench.gaps import gaps
from muntin.bench.sheets import Sheets
from muntin.bench.volumes import volume_text
from muntin.record.faults import counted
from muntin.report.cautions import bench_cautions
from muntin.report.checklist import ph_levels
from muntin.report.facts import records
from muntin.report.plate_map import roles_text
from muntin.report.plate_wells import conditions_of
from muntin.report.sheet_words import protein_line, volume_ml

_GAP = 2


def sheets_screen(sheets: Sheets, folder: Path, files: list[str], remark: str) -> RenderableType:
    """Return what the sheets come to: wells, stocks, protein, what is not in them, their place."""
    parts: list[RenderableType] = [
        Text(f"{sheets.file}, {roles_text(sheets.rows)}"),
        *([Text("")] if sheets.totals else []),
        *([_totals(sheets)] if sheets.totals else []),
        Text(""),
        *(Text(line) for line in _sentences(sheets)),
        *_cautions(),
        Text(""),
        Text(f"Written to {folder}: {', '.join(files)}."),
        *([Text(remark)] if remark else []),
    ]
    return Group(*parts)


def _totals(sheets: Sheets) -> Table:
    table = Table(box=None, pad_edge=False, padding=(0, _GAP, 0, 0), header_style="dim")
    table.add_column("stock")
    for name in ("wells", "drawn, µL", "stays behind", "have at least"):
        table.add_column(name, justify="right")
    for total in sheets.totals:
        dead = "" if total.dead_ul is None else volume_ml(total.dead_ul)
        drawn = volume_text(total.listed_ul)
        cells = (total.stock, str(total.wells), drawn, dead, volume_ml(total.needed_ul))
        table.add_row(*map(Text, cells))
    return table


def _sentences(sheets: Sheets) -> list[str]:
    said = []
    if sheets.transfers:
        least = min(t.steps for t in sheets.transfers)
        drawn = sheets.pipette.shown(least)
        said.append(f"{counted(len(sheets.transfers), 'draw')}, the smallest {drawn} µL.")
    if sheets.load is not None:
        said.append(protein_line(sheets.load, sheets.study.definition))
    return [*said, *sheets.buffers, *gaps(sheets)]


def _cautions() -> list[RenderableType]:
    return [Text(" ".join(bench_cautions()[:2])), Text("All cautions stand on the checklist.")]


def sheets_facts(sheets: Sheets, folder: Path, files: list[str], remark: str) -> dict[str, Any]:
    """Return the sheets as plain values."""
    load, definition = sheets.load, sheets.study.definition
    return {
        "command": "prepare",
        "plate": sheets.plate,
        "plan": {"file": sheets.file, "sha256": sheets.digest},
        "wells": records(sheets.rows),
        "conditions": records(conditions_of(definition, sheets.rows)),
        "recipes": [
            {
                "condition": dict(of.mix.condition),
                "shares": dict(of.mix.recipe.parts),
                "draw_ul": None
                if of.mix.steps is None
                else {s: float(sheets.pipette.ul(n)) for s, n in of.mix.steps.items()},
                "made": dict(of.mix.made),
                "remarks": list(of.mix.recipe.remarks),
                "wells": list(of.wells),
            }
            for of in sheets.mixes
        ],
        "bottles": [
            {
                "bottle": name,
                "shares": dict(recipe.parts),
                "remarks": list(recipe.remarks),
            }
            for name, recipe in sheets.makings.items()
        ],
        "transfers": [
            {"stock": t.stock, "well": t.well, "draw_ul": float(sheets.pipette.ul(t.steps))}
            for t in sheets.transfers
        ],
        "totals": [
            {
                "stock": t.stock,
                "wells": t.wells,
                "drawn_ul": float(t.listed_ul),
                "dead_ul": None if t.dead_ul is None else float(t.dead_ul),
                "needed_ul": float(t.needed_ul),
            }
            for t in sheets.totals
        ],
        "protein": None
        if load is None
        else {
            "needed_mg": load.needed_mg,
            "left_mg": load.left_mg,
            "measured_mg": load.measured_mg,
            "dead_mg": load.dead_mg,
        },
        "buffers": list(sheets.buffers),
        "not_in_the_sheets": list(gaps(sheets)),
        "cautions": list(bench_cautions(ph_levels(sheets))),
        "files": {"folder": str(folder), "names": files, "remark": remark},
    }
