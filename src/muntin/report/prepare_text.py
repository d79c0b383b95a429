"""The sheets on the screen, and as plain values for JSON."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from rich.console import Group, RenderableType
from rich.table import Table
from rich.text import Text

from muntin.bench.control_levels import control_levels
from muntin.bench.gaps import gaps
from muntin.bench.sheets import Sheets, WellsMix
from muntin.bench.transfers import Total
from muntin.record.faults import counted
from muntin.record.volumes import volume_text
from muntin.report.cautions import bench_cautions
from muntin.report.checklist import ph_levels
from muntin.report.facts import records
from muntin.report.plate_map import roles_text
from muntin.report.plate_wells import conditions_of
from muntin.report.sheet_words import protein_line, volume_ml

_GAP = 2
_PROTEIN = ("needed_mg", "left_mg", "measured_mg", "dead_mg")


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
    return [*said, *control_levels(sheets), *sheets.buffers, *gaps(sheets)]


def _cautions() -> list[RenderableType]:
    return [Text(" ".join(bench_cautions()[:2])), Text("All cautions stand on the checklist.")]


def sheets_facts(sheets: Sheets, folder: Path, files: list[str], remark: str) -> dict[str, Any]:
    """Return the sheets as plain values."""
    load = sheets.load
    return {
        "command": "prepare",
        "plate": sheets.plate,
        "plan": {"file": sheets.file, "sha256": sheets.digest},
        "wells": records(sheets.rows),
        "conditions": records(conditions_of(sheets.study.definition, sheets.rows)),
        "recipes": [_mix_facts(sheets, of) for of in sheets.mixes],
        "bottles": [
            {"bottle": name, "shares": dict(recipe.parts), "remarks": list(recipe.remarks)}
            for name, recipe in sheets.makings.items()
        ],
        "transfers": [
            {"stock": t.stock, "well": t.well, "draw_ul": float(sheets.pipette.ul(t.steps))}
            for t in sheets.transfers
        ],
        "totals": [_total_facts(total) for total in sheets.totals],
        "protein": None if load is None else {name: getattr(load, name) for name in _PROTEIN},
        "controls": list(control_levels(sheets)),
        "buffers": list(sheets.buffers),
        "not_in_the_sheets": list(gaps(sheets)),
        "cautions": list(bench_cautions(ph_levels(sheets))),
        "files": {"folder": str(folder), "names": files, "remark": remark},
    }


def _mix_facts(sheets: Sheets, of: WellsMix) -> dict[str, Any]:
    steps, ul = of.mix.steps, sheets.pipette.ul
    return {
        "condition": dict(of.mix.condition),
        "shares": dict(of.mix.recipe.parts),
        "draw_ul": None if steps is None else {s: float(ul(n)) for s, n in steps.items()},
        "made": dict(of.mix.made),
        "remarks": list(of.mix.recipe.remarks),
        "wells": list(of.wells),
    }


def _total_facts(total: Total) -> dict[str, Any]:
    return {
        "stock": total.stock,
        "wells": total.wells,
        "drawn_ul": float(total.listed_ul),
        "dead_ul": None if total.dead_ul is None else float(total.dead_ul),
        "needed_ul": float(total.needed_ul),
    }
