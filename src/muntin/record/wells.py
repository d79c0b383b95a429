"""Well names of 96- and 384-well plates."""

from __future__ import annotations

import re
from functools import lru_cache

ROWS_COLUMNS = {96: (8, 12), 384: (16, 24)}
_NAME = re.compile(r"([A-Za-z])0{0,2}([1-9][0-9]?)")


class WellError(ValueError):
    """The text names no well of the plate."""


@lru_cache(maxsize=4096)
def well_name(text: str, plate: int = 96) -> str:
    """Return the plain name of a well ("A1" for "A01" or "a1").

    Raises WellError where the text names no well of a plate with `plate` wells.
    """
    row, column = position(text, plate)
    return f"{chr(ord('A') + row)}{column + 1}"


def position(text: str, plate: int = 96) -> tuple[int, int]:
    """Return row and column of a well, both from 0.

    Raises WellError where the text names no well of a plate with `plate` wells.
    """
    rows, columns = ROWS_COLUMNS[plate]
    found = _NAME.fullmatch(text.strip())
    if found is None:
        raise WellError("is not a well name")
    row, column = ord(found[1].upper()) - ord("A"), int(found[2]) - 1
    if row >= rows or column >= columns:
        raise WellError(f"is not a well of a {plate}-well plate")
    return row, column


def _corner(text: str, plate: int) -> tuple[int, int]:
    try:
        return position(text, plate)
    except WellError as error:
        raise WellError(f'names "{text.strip()}", which {error}') from None


def last_well(plate: int) -> str:
    """Return the name of the last well: "H12" or "P24"."""
    rows, columns = ROWS_COLUMNS[plate]
    return f"{chr(ord('A') + rows - 1)}{columns}"


def all_wells(plate: int) -> tuple[str, ...]:
    """Return all wells of the plate, row by row."""
    rows, columns = ROWS_COLUMNS[plate]
    return tuple(
        f"{chr(ord('A') + row)}{column + 1}" for row in range(rows) for column in range(columns)
    )


def wells_in(text: str, plate: int) -> tuple[str, ...]:
    """Return the wells named by ranges, row by row: "A1:C12, D1" takes rows A to C and D1.

    Raises WellError where a part names no wells of the plate.
    """
    chosen = set()
    for part in text.split(","):
        ends = part.split(":")
        if len(ends) > 2:
            raise WellError(f'names "{part.strip()}", which is not a range of wells')
        (row, column), (row_end, column_end) = (_corner(end, plate) for end in (ends[0], ends[-1]))
        if row_end < row or column_end < column:
            raise WellError(f'names "{part.strip()}", a range that runs backwards')
        chosen |= {
            f"{chr(ord('A') + r)}{c + 1}"
            for r in range(row, row_end + 1)
            for c in range(column, column_end + 1)
        }
    return tuple(well for well in all_wells(plate) if well in chosen)
