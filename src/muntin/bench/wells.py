"""Wells of a 96- or 384-well plate: names, order, perimeter and place.

Positions follow ANSI/SLAS 4-2004 (R2012), Microplates: Well Positions. Its distances run from
the left and top outside edges of the plate to the centre of a well; A1 lies top left, letters go
down and numbers across.
"""

import re
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

Order = Literal["row", "column"]

_NAME = re.compile(r"([A-Z])(0?[1-9]|[1-9][0-9])")


@dataclass(frozen=True, kw_only=True, slots=True)
class Geometry:
    """Where the wells of one plate format lie.

    Parameters
    ----------
    rows, columns
        Number of lettered rows and of numbered columns.
    x_a1, y_a1
        Centre of well A1 in mm from the left and from the top outside edge.
    pitch
        Distance in mm between the centres of neighbouring wells, the same both ways.
    """

    rows: int
    columns: int
    x_a1: float
    y_a1: float
    pitch: float


_GEOMETRIES = {
    96: Geometry(rows=8, columns=12, x_a1=14.38, y_a1=11.24, pitch=9.0),
    384: Geometry(rows=16, columns=24, x_a1=12.13, y_a1=8.99, pitch=4.5),
}


def geometry(plate: int) -> Geometry:
    """Return the geometry of a plate with 96 or 384 wells (ANSI/SLAS 4-2004).

    Raises
    ------
    ValueError
        If `plate` is another number.
    """
    if plate not in _GEOMETRIES:
        raise ValueError(f"a plate has 96 or 384 wells, not {plate}")
    return _GEOMETRIES[plate]


def well_name(row: int, column: int) -> str:
    """Return the name of the well at `row` and `column`, both counted from 0: (0, 0) is A1."""
    return f"{chr(ord('A') + row)}{column + 1}"


def well_index(name: str, plate: int) -> tuple[int, int]:
    """Return row and column of a well, both counted from 0.

    Capital and small letters, a leading zero (`A01`) and blanks around the name are understood.

    Raises
    ------
    ValueError
        If `name` is no well of a plate of that size.
    """
    shape = geometry(plate)
    match = _NAME.fullmatch(name.strip().upper())
    if match:
        row, column = ord(match[1]) - ord("A"), int(match[2]) - 1
        if row < shape.rows and column < shape.columns:
            return row, column
    last = well_name(shape.rows - 1, shape.columns - 1)
    raise ValueError(f"{name!r} is no well of a {plate}-well plate (A1 to {last})")


def normalise(name: str, plate: int) -> str:
    """Return the name of a well in its plain form: `a01` becomes `A1`.

    Raises
    ------
    ValueError
        If `name` is no well of a plate of that size.
    """
    return well_name(*well_index(name, plate))


def well_names(plate: int, order: Order = "row") -> tuple[str, ...]:
    """Return all wells of a plate: A1, A2, ... by `row`, or A1, B1, ... by `column`."""
    shape = geometry(plate)
    if order == "row":
        return tuple(well_name(r, c) for r in range(shape.rows) for c in range(shape.columns))
    return tuple(well_name(r, c) for c in range(shape.columns) for r in range(shape.rows))


def well_indices(names: Iterable[str], plate: int) -> NDArray[np.int_]:
    """Return rows and columns of n wells, counted from 0, as an array of shape (n, 2).

    Raises
    ------
    ValueError
        If a name is no well of a plate of that size.
    """
    return np.array([well_index(name, plate) for name in names], dtype=int).reshape(-1, 2)


def perimeter(plate: int) -> frozenset[str]:
    """Return the perimeter wells: first and last row, first and last column."""
    shape = geometry(plate)
    return frozenset(
        well_name(r, c)
        for r in range(shape.rows)
        for c in range(shape.columns)
        if r in (0, shape.rows - 1) or c in (0, shape.columns - 1)
    )


def centre(name: str, plate: int) -> tuple[float, float]:
    """Return the centre of a well, x and y in mm from the left and top outside edges.

    Positions are those of ANSI/SLAS 4-2004.

    Raises
    ------
    ValueError
        If `name` is no well of a plate of that size.
    """
    shape = geometry(plate)
    row, column = well_index(name, plate)
    return shape.x_a1 + shape.pitch * column, shape.y_a1 + shape.pitch * row


def well_range(text: str, plate: int) -> tuple[str, ...]:
    """Return the wells that `text` lists, row by row, each once.

    `text` is a comma list of single wells and of blocks named by two opposite corners, such as
    `"A1:C12, E1, G3:H6"`. Parts may overlap.

    Raises
    ------
    ValueError
        If `text` names nothing, or anything that is no well of a plate of that size.
    """
    chosen: set[str] = set()
    for part in text.split(","):
        corners = [well_index(corner, plate) for corner in part.split(":")]
        if len(corners) > 2:
            raise ValueError(f"{part.strip()!r} is no block of wells: give two corners, as A1:C6")
        (top, bottom), (left, right) = (sorted((k[0], k[-1])) for k in zip(*corners, strict=True))
        chosen.update(
            well_name(r, c) for r in range(top, bottom + 1) for c in range(left, right + 1)
        )
    return tuple(name for name in well_names(plate) if name in chosen)
