"""The sheets of a plan: one folder a plan."""

from __future__ import annotations

import re
import textwrap
from collections.abc import Mapping
from pathlib import Path

from muntin.bench.sheets import Sheets
from muntin.record.faults import Findings, StudyFaults
from muntin.record.stocks import COLUMNS
from muntin.record.tables import read_table
from muntin.report.checklist import checklist_lines
from muntin.report.figures import saved
from muntin.report.plate_map import draw_plate_map
from muntin.report.plate_wells import by_number, conditions_of
from muntin.report.sheet_tables import FORM, sheet_tables
from muntin.report.text_pages import pdf_of, text_pages

SHEETS = "sheets"
_OWN = ("map.png", "map.pdf", "checklist.txt", "checklist.pdf")
_OWN_TABLES = ("conditions.csv", "recipes.csv", "transfers.csv", "totals.csv", "bottles.csv", FORM)
_WIDTH = 84


def sheets_folder(sheets: Sheets) -> Path:
    """Return where the sheets of a plan go: sheets/ and the name of the plan."""
    return sheets.study.folder / SHEETS / Path(sheets.file).stem


def sheet_files(sheets: Sheets) -> dict[str, str | bytes]:
    """Return the files of the sheets by name."""
    definition, tables = sheets.study.definition, sheet_tables(sheets)
    titles = (sheets.plate, definition.title, _from(sheets))
    drawn = draw_plate_map(definition, sheets.rows, titles)
    listed = text_pages(_condition_lines(sheets)) if by_number(definition) else []
    lines = checklist_lines(sheets, [*_OWN, *tables])
    return {
        "map.png": saved(drawn, "png"),
        "map.pdf": pdf_of([drawn, *listed]),
        "checklist.txt": "\n".join(lines) + "\n",
        "checklist.pdf": pdf_of(text_pages(lines)),
        **tables,
    }


def _from(sheets: Sheets) -> str:
    return f"{sheets.file}, fingerprint {sheets.digest[:8]}. Development aid, not for release."


def _condition_lines(sheets: Sheets) -> list[str]:
    """The numbered conditions with their wells, for maps that show numbers."""
    definition = sheets.study.definition
    lines = [f"Conditions of {sheets.plate}".upper(), ""]
    for row in conditions_of(definition, sheets.rows).to_dict("records"):
        values = [f"{f.named(f.shown(row[f.name]))} {f.unit}".rstrip() for f in definition.factors]
        said = f"{', '.join(values)}: {row['wells']}"
        mark = f"{row['condition']:>4}  "
        lines += textwrap.wrap(said, _WIDTH, initial_indent=mark, subsequent_indent=" " * 6)
    return lines


def sheets_replaced(folder: Path, files: Mapping[str, str | bytes]) -> tuple[list[Path], str]:
    """Return which earlier sheets have to go, as the new ones are not called so, and a remark.

    Files of others in the folder stay. Raises StudyFaults where the form of the stocks was filled
    in there, which new sheets would replace.
    """
    if not folder.is_dir():
        return [], ""
    _check_form(folder)
    old = [folder / name for name in (*_OWN, *_OWN_TABLES) if name not in files]
    return [path for path in old if path.is_file()], "Replaces the sheets that were there."


def _check_form(folder: Path) -> None:
    path, file = folder / FORM, f"{SHEETS}/{folder.name}/{FORM}"
    form = read_table(path, file, COLUMNS, Findings()) if path.is_file() else None
    filled = [] if form is None else [r for r, cell in enumerate(form.cells("measured")) if cell]
    if form is not None and filled:
        plate = re.sub(r"\.r[0-9]+$", "", folder.name)
        problem = "was filled in and would be lost to the new form; move the file to"
        raise StudyFaults([form.fault(filled[0], "measured", problem, f"stocks/{plate}.csv")])
