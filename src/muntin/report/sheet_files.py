"""The sheets of a plan on disk: one folder a plan, made whole or not at all."""

from __future__ import annotations

import secrets
import shutil
import textwrap
from collections.abc import Mapping
from pathlib import Path

from muntin.bench.sheets import Sheets
from muntin.record.faults import StudyFaults
from muntin.record.files import write_atomic
from muntin.report.advice_files import new_folder
from muntin.report.checklist import checklist_lines
from muntin.report.figures import saved
from muntin.report.plate_map import draw_plate_map
from muntin.report.plate_wells import by_number, conditions_of
from muntin.report.sheet_tables import sheet_tables
from muntin.report.text_pages import pdf_of, text_pages

SHEETS = "sheets"
_OWN = ("map.png", "map.pdf", "checklist.txt", "checklist.pdf")
_OWN_TABLES = ("conditions.csv", "recipes.csv", "transfers.csv", "totals.csv", "bottles.csv")
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


def write_sheets(folder: Path, files: Mapping[str, str | bytes]) -> str:
    """Write the files of the sheets, and return a remark on what they replace.

    Earlier sheets in the folder make way all at once, files of others in it stay. Raises
    StudyFaults where it cannot be written; what was there is then untouched.
    """
    if not folder.is_dir():
        _write(folder, files, {})
        return ""
    there = {p.name: p for p in folder.iterdir()}
    kept = {name: path for name, path in there.items() if name not in (*_OWN, *_OWN_TABLES)}
    old = folder.with_name(f".{folder.name}.{secrets.token_hex(4)}.old")
    try:
        _write(folder, files, kept, old)
    except StudyFaults:
        if old.exists() and not folder.exists():
            old.rename(folder)
        raise
    shutil.rmtree(old, ignore_errors=True)
    return "Replaces the sheets that were there."


def _write(
    folder: Path,
    files: Mapping[str, str | bytes],
    kept: Mapping[str, Path],
    old: Path | None = None,
) -> None:
    with new_folder(folder) as part:
        for name, content in files.items():
            write_atomic(part / name, content)
        for name, path in kept.items():
            if path.is_dir():
                shutil.copytree(path, part / name)
            else:
                shutil.copy2(path, part / name)
        if old is not None:
            folder.rename(old)
