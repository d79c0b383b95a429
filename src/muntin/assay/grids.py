"""Grids: a plate as it lies on the bench, 8 x 12 or 16 x 24 cells, one file a fraction and
wavelength.

    plate-01_e1_280.csv           A280 of fraction e1 on plate-01
    plate-01_e1_280_x5.csv        the same of samples diluted 1:5, one part in five
    plate-01_e1_volume.csv        what was collected of e1, µL

The first row may hold the numbers of the columns, the first column the letters of the rows. An
empty cell was not read; ">3.5" or "over" was more than the reader can tell.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from pathlib import Path
from typing import NamedTuple

from muntin.record.faults import Fault, Findings, listed, nearest, number, quoted
from muntin.record.tables import read_rows
from muntin.record.wells import ROWS_COLUMNS

Rows = list[tuple[int, list[str]]]

_NAME = re.compile(
    r"(?P<rest>.+)_(?P<what>[0-9]+(?:[.,][0-9]+)?(?:nm)?|volume)(?:_x(?P<times>[0-9]+(?:[.,][0-9]+)?))?",
    re.IGNORECASE,
)


class GridName(NamedTuple):
    """What a file's name says of a grid; no wavelength where it holds collected volumes."""

    plate: str
    fraction: str
    wavelength: float | None
    dilution: float


def grid_name(stem: str, plates: Sequence[str], fractions: Sequence[str]) -> GridName | None:
    """Return what a file's name says, or None where it names no grid of this study.

    Where a study has one plate the name may leave it out: e1_280.csv.
    """
    found = _NAME.fullmatch(stem.strip())
    if found is None:
        return None
    wavelength = None
    if found["what"].casefold() != "volume":
        wavelength = float(found["what"].lower().removesuffix("nm").replace(",", "."))
    dilution = float((found["times"] or "1").replace(",", "."))
    rest = found["rest"].casefold()
    for fraction in sorted(fractions, key=len, reverse=True):
        if rest == fraction.casefold() and len(plates) == 1:
            return GridName(plates[0], fraction, wavelength, dilution)
        for plate in plates:
            if rest == f"{plate}_{fraction}".casefold():
                return GridName(plate, fraction, wavelength, dilution)
    return None


def name_fault(file: Path, plates: Sequence[str], fractions: Sequence[str]) -> Fault | None:
    """Return what is not understood in the name of a file that holds a grid; None for others."""
    rows = read_rows(file, file.name, Findings())
    if rows is None or not _like_grid(rows):
        return None
    value, problem = _not_understood(file.stem.strip(), plates, fractions)
    hint = (
        f"a grid is named PLATE_FRACTION_WAVELENGTH, such as {plates[0] if plates else 'plate-01'}"
        f"_{fractions[-1]}_280.csv; plates: {listed(plates)}; fractions: "
        f"{listed(fractions)}"
    )
    return Fault(
        file=file.name,
        where="a grid by its content",
        value=quoted(value),
        problem=f"in its name {problem}",
        hint=hint,
    )


def _like_grid(rows: Rows) -> bool:
    """Whether cells lie under column numbers or beside row letters, as in no tidy table."""
    filled = [[cell for cell in cells if cell] for _, cells in rows if any(cells)]
    sizes = ROWS_COLUMNS.values()
    counts = any(_counts(cells, wide) for cells in filled for _, wide in sizes)
    first = [cells[0].upper() for cells in filled]
    return counts or any(first[-high:] == _letters(high) for high, _ in sizes)


def _not_understood(stem: str, plates: Sequence[str], fractions: Sequence[str]) -> tuple[str, str]:
    """The part of a name that is not understood, and why, with the nearest name."""
    found = _NAME.fullmatch(stem)
    if found is None:
        problem = 'is neither a wavelength (280) nor "volume", nor a dilution behind them (x5)'
        return stem.rpartition("_")[2], problem
    rest = found["rest"]
    for plate in plates:
        if rest.casefold().startswith(f"{plate}_".casefold()):
            return _unknown(rest[len(plate) + 1 :], "fraction of [assay]", fractions)
    for fraction in sorted(fractions, key=len, reverse=True):
        if rest.casefold().endswith(f"_{fraction}".casefold()):
            return _unknown(rest[: -len(fraction) - 1], "plate that was run", plates)
    if rest.casefold() in [fraction.casefold() for fraction in fractions]:
        return rest, "stands without its plate, of which there are several"
    if "_" not in rest and len(plates) == 1:
        return _unknown(rest, "fraction of [assay]", fractions)
    return rest, "is no plate that was run and a fraction of [assay], parted by _"


def _unknown(part: str, what: str, known: Sequence[str]) -> tuple[str, str]:
    close = nearest(part, known)
    meant = "" if close is None else f"; did you mean {quoted(close)}?"
    return part, f"is not a {what}{meant}"


def read_grid(path: Path, size: int, found: Findings) -> dict[str, tuple[str, str]]:
    """Return content and address of each cell that is not empty, by well; faults join `found`."""
    rows = read_rows(path, path.name, found)
    if rows is None:
        return {}
    high, wide = ROWS_COLUMNS[size]
    body = _without_headings(rows, wide)
    sound = len(body) == high and all(len(cells) <= wide for _, cells in body)
    if not sound:
        widest = max((len(cells) for _, cells in body), default=0)
        found.faults.append(
            Fault(
                file=path.name,
                value=f"{len(body)} x {widest} cells",
                problem="are not a grid of a",
                allowed=f"{size}-well plate, {high} rows x {wide} columns",
                hint="column numbers above and row letters on the left may stand or not",
            )
        )
        return {}
    return {
        f"{chr(ord('A') + r)}{c + 1}": (
            cell,
            f"row {line}, well {chr(ord('A') + r)}{c + 1}",
        )
        for r, (line, cells) in enumerate(body)
        for c, cell in enumerate(cells)
        if cell
    }


def _without_headings(rows: Rows, wide: int) -> Rows:
    """Rows of cells, without column numbers, row letters and empty rows above and below."""
    filled = [index for index, (_, cells) in enumerate(rows) if any(cells)]
    rows = rows[filled[0] : filled[-1] + 1] if filled else []
    if rows and _counts(rows[0][1], wide):
        rows = rows[1:]
    letters = [cells[0].upper() if cells else "" for _, cells in rows]
    if letters == _letters(len(rows)):
        rows = [(line, cells[1:]) for line, cells in rows]
    return [(line, _trimmed(cells)) for line, cells in rows]


def _letters(high: int) -> list[str]:
    return [chr(ord("A") + r) for r in range(high)]


def _counts(cells: Sequence[str], wide: int) -> bool:
    named = [cell for cell in cells if cell]
    return named[-wide:] == [number(float(n)) for n in range(1, wide + 1)]


def _trimmed(cells: Sequence[str]) -> list[str]:
    kept = list(cells)
    while kept and not kept[-1]:
        kept.pop()
    return kept
