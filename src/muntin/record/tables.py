"""Tables as people keep them: .csv with comma, semicolon or tab, and the first sheet of .xlsx."""

from __future__ import annotations

import csv
import io
import re
import warnings
import zipfile
import zlib
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from muntin.record.faults import Fault, Findings, nearest, quoted
from muntin.record.files import NotTextError, decoded

SUFFIXES = (".csv", ".xlsx")
NUMBER = re.compile(r"[+-]?(?:[0-9]+(?:[.,][0-9]*)?|[.,][0-9]+)(?:[eE][+-]?[0-9]+)?")


@dataclass(frozen=True, slots=True)
class Table:
    """Cells of one table as stripped text, column by column.

    `file` is the path shown in messages, `where` the address of each row ("row 14"), `comma`
    whether commas separate its cells (a comma inside a number is then doubtful), `sheets` the
    names of a workbook's sheets, the one that was read first.
    """

    file: str
    columns: dict[str, list[str]]
    where: list[str]
    comma: bool
    sheets: tuple[str, ...] = ()

    def __len__(self) -> int:
        return len(self.where)

    def cells(self, column: str) -> list[str]:
        """Return the cells of a column, empty ones where the table lacks it."""
        return self.columns.get(column) or [""] * len(self)

    def fault(
        self, row: int, column: str, problem: str, allowed: str = "", hint: str = ""
    ) -> Fault:
        """Return the fault of one cell, with its address and content."""
        cell = self.cells(column)[row]
        return Fault(
            file=self.file,
            where=self.where[row],
            column=column,
            value=cell if NUMBER.fullmatch(cell) else quoted(cell) if cell else "",
            problem=problem if cell else f"is empty; {problem}",
            allowed=allowed,
            hint=hint,
        )


def table_files(folder: Path, found: Findings) -> list[tuple[str, Path]]:
    """Return stem and path of each table in a folder, plate-2 before plate-10.

    A stem that is there as .csv and as .xlsx is a fault; files of other kinds are a notice.
    """
    by_stem: dict[str, list[Path]] = {}
    if folder.exists() and not folder.is_dir():
        found.faults.append(Fault(file=folder.name, problem="is a file; it must be a folder"))
        return []
    for path in sorted(folder.iterdir()) if folder.is_dir() else []:
        if path.name.startswith((".", "~$")) or (
            path.suffix == ".toml" and folder.name == "plates"
        ):
            continue
        if path.suffix.lower() in SUFFIXES and path.is_file():
            by_stem.setdefault(path.stem, []).append(path)
        else:
            found.notices.append(
                f"{folder.name}/{path.name} is not a .csv or .xlsx table; left out"
            )
    for stem, paths in by_stem.items():
        if len(paths) > 1:
            names = " and ".join(path.name for path in paths)
            problem = f"{names} are both there; keep one of them"
            found.faults.append(Fault(file=f"{folder.name}/{stem}", problem=problem))
    return [(stem, by_stem[stem][0]) for stem in sorted(by_stem, key=natural_order)]


def natural_order(name: str) -> list[Any]:
    """Return a sort key that counts digits as numbers: plate-2 before plate-10."""
    parts = re.split(r"([0-9]+)", name.lower())
    return [int(part) if index % 2 else part for index, part in enumerate(parts)]


def read_table(path: Path, file: str, known: Sequence[str], found: Findings) -> Table | None:
    """Return the table in a file, or None where it is none; faults join `found`.

    Headings that equal a known name but for capitals get the known one. Rows without any content
    are passed over; headings without a row below them are not judged.
    """
    told = _rows_of(path, file, known, found)
    if told is None:
        return None
    rows, sheets, comma = told
    filled = [(number, row) for number, row in rows if any(row)]
    if filled:
        return _table(file, filled, known, comma, sheets, found)
    problem = "is empty; its first row must hold the headings"
    found.faults.append(Fault(file=file, problem=problem, hint=_sheet_hint(sheets)))
    return None


def read_rows(path: Path, file: str, found: Findings) -> list[tuple[int, list[str]]] | None:
    """Return the cells of a file without headings, each row with its number, empty rows too.

    Semicolons or tabs part the cells where there are any, else commas. None where the file is no
    table; faults join `found`.
    """
    told = _rows_of(path, file, None, found)
    return None if told is None else told[0]


_Rows = tuple[list[tuple[int, list[str]]], tuple[str, ...], bool]


def _rows_of(path: Path, file: str, known: Sequence[str] | None, found: Findings) -> _Rows | None:
    """Numbered rows, names of sheets, and whether commas part the cells; None with a fault."""
    try:
        if path.suffix.lower() == ".xlsx":
            return *_sheet_rows(path.read_bytes()), False
        rows, comma = _text_rows(decoded(path.read_bytes()), known)
        return rows, (), comma
    except NotTextError:
        found.faults.append(
            Fault(file=file, problem="is not a text table; save it as .csv or .xlsx")
        )
    except _SheetError:
        found.faults.append(Fault(file=file, problem="is not a readable .xlsx workbook"))
    except csv.Error:
        problem = "cannot be split into cells; a quotation mark is not closed"
        found.faults.append(Fault(file=file, problem=problem))
    except OSError as error:
        found.faults.append(Fault(file=file, problem="cannot be read", hint=error.strerror or ""))
    return None


def _sheet_hint(sheets: Sequence[str]) -> str:
    """Return which sheet was read and which were not, "" for a file with no other sheet."""
    if not sheets[1:]:
        return ""
    others = ", ".join(map(quoted, sheets[1:]))
    return f"its first sheet, {quoted(sheets[0])}, was read; not read: {others}"


def _table(
    file: str,
    rows: list[tuple[int, list[str]]],
    known: Sequence[str],
    comma: bool,
    sheets: tuple[str, ...],
    found: Findings,
) -> Table | None:
    by_fold = {name.casefold(): name for name in known}
    headings = [by_fold.get(cell.casefold(), cell) for cell in rows[0][1]]
    faults = [*_heading_faults(file, headings, rows[1:])] if rows[1:] else []
    faults += _width_faults(file, len(headings), rows[1:], comma)
    if faults:
        hint = "; ".join(part for part in (faults[0].hint, _sheet_hint(sheets)) if part)
        found.faults.extend([replace(faults[0], hint=hint), *faults[1:]])
        return None
    width = len(headings)
    body = [(row + [""] * width)[:width] for _, row in rows[1:]]
    columns = {name: [row[index] for row in body] for index, name in enumerate(headings) if name}
    return Table(file, columns, [f"row {number}" for number, _ in rows[1:]], comma, sheets)


def _heading_faults(
    file: str, headings: list[str], rows: list[tuple[int, list[str]]]
) -> Iterator[Fault]:
    first: dict[str, int] = {}
    for index, name in enumerate(headings):
        if not name:
            if any(row[index : index + 1] not in ([], [""]) for _, row in rows):
                problem = f"column {index + 1} has cells but no heading"
                yield Fault(file=file, problem=problem)
        elif name.casefold() in first:
            problem = f"is there twice, as columns {first[name.casefold()]} and {index + 1}"
            yield Fault(file=file, column=name, problem=problem)
        first.setdefault(name.casefold(), index + 1)


def _width_faults(
    file: str, room: int, rows: list[tuple[int, list[str]]], comma: bool
) -> Iterator[Fault]:
    hint = ""
    if comma:
        hint = "with decimal commas separate the cells by semicolons, or put numbers in quotes"
    for number, row in rows:
        if len(row) > room:
            problem = f"has {len(row)} cells under {room} headings"
            yield Fault(file=file, where=f"row {number}", problem=problem, hint=hint)


def _text_rows(text: str, known: Sequence[str] | None) -> tuple[list[tuple[int, list[str]]], bool]:
    lines = text.splitlines()
    first = next((line for line in lines if line.strip()), "")
    told = re.fullmatch(r"sep=(.)", first.strip(" \r\n"), re.IGNORECASE)
    if told:
        separator = told[1]
    elif known is None:
        separator = next((sign for sign in (";", "\t") if sign in text), ",")
    else:
        separator = _separator(first, known)
    rows = csv.reader(io.StringIO(text, newline=""), delimiter=separator, strict=True)
    numbered = [
        (number, [_clean(cell) for cell in row]) for number, row in enumerate(rows, start=1)
    ]
    if told:
        numbered = [(number, row) for number, row in numbered if any(row)][1:]
    return numbered, separator == ","


def _separator(heading: str, known: Sequence[str]) -> str:
    names = {name.casefold() for name in known}

    def fit(separator: str) -> tuple[int, int]:
        cells = next(csv.reader([heading], delimiter=separator), [])
        return sum(cell.strip().casefold() in names for cell in cells), len(cells)

    return max((",", ";", "\t"), key=fit)


def _clean(cell: str) -> str:
    return " ".join(cell.replace("\u2212", "-").split())


class _SheetError(ValueError):
    pass


def _sheet_rows(raw: bytes) -> tuple[list[tuple[int, list[str]]], tuple[str, ...]]:
    broken = (zipfile.BadZipFile, zlib.error, EOFError)
    wrong = (KeyError, ValueError, TypeError, IndexError, AttributeError, SyntaxError)
    try:
        rows, sheets = _first_sheet(raw, data_only=True)
        if _has_formulas(raw):
            # A formula that was never calculated has no value; its text says so in the fault.
            texts, _ = _first_sheet(raw, data_only=False)
            rows = [
                [text if value is None else value for value, text in zip(*both, strict=True)]
                for both in zip(rows, texts, strict=True)
            ]
    except (*broken, *wrong):
        raise _SheetError from None
    return [(number, _shown(row)) for number, row in enumerate(rows, start=1)], sheets


def _first_sheet(raw: bytes, data_only: bool) -> tuple[list[list[Any]], tuple[str, ...]]:
    from openpyxl import load_workbook

    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        book = load_workbook(io.BytesIO(raw), read_only=True, data_only=data_only)
        rows = [list(row) for row in book.worksheets[0].iter_rows(values_only=True)]
        sheets = tuple(sheet.title for sheet in book.worksheets)
        book.close()
    return rows, sheets


def _has_formulas(raw: bytes) -> bool:
    with zipfile.ZipFile(io.BytesIO(raw)) as archive:
        sheets = [name for name in archive.namelist() if name.startswith("xl/worksheets/")]
        return any(b"<f" in archive.read(name) for name in sheets)


def _shown(row: Iterable[object]) -> list[str]:
    cells = []
    for value in row:
        if isinstance(value, float) and value.is_integer() and abs(value) < 1e15:
            value = int(value)
        cells.append("" if value is None else _clean(str(value)))
    while cells and not cells[-1]:
        cells.pop()
    return cells


def missing_column(table: Table, column: str, hint: str = "") -> Fault:
    """Return the fault of a table that lacks a column.

    A heading that resembles it is named in place of `hint`, and the sheet that was read besides.
    """
    close = nearest(column, table.columns)
    if close is not None:
        hint = f"did you mean its column {close}?"
    hint = "; ".join(part for part in (hint, _sheet_hint(table.sheets)) if part)
    return Fault(file=table.file, problem=f"has no column {column}", hint=hint)
