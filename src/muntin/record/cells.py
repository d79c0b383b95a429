"""Cells of a table: numbers, readings that are censored or awaited, reasons in words."""

from __future__ import annotations

import math
import re

import numpy as np

from muntin.record.faults import Fault
from muntin.record.keys import Floats
from muntin.record.number_slips import number_hint
from muntin.record.tables import NUMBER, Table

_THOUSANDS = re.compile(r"[+-]?[1-9][0-9]{0,2},[0-9]{3}")
_CENSORED = re.compile(r"([<>≤≥])=?\s*(.+)")
_NO_REASON = frozenset(
    {"not", "none", "nan", "yes", "true", "false", "exclude", "excluded", "out", "skip", "drop"}
    | {"omit", "left", "okay", "bad", "nil", "null", "and", "the", "this", "well", "reading"}
)
_WORD = re.compile(r"[^\W\d_]{3,}")


class CellError(ValueError):
    """The cell does not hold what it may; `hint` says how to mend it."""

    def __init__(self, problem: str, hint: str = "") -> None:
        self.hint = hint
        super().__init__(problem)


def parse_number(text: str, comma: bool = False, share: bool = False) -> float:
    """Return the number in a cell; point or comma marks the decimals.

    `comma` tells that commas separate the cells of the file, `share` that the number is one of 0
    to 1, which the hint on a per cent sign needs. Raises CellError.
    """
    if text.lower().lstrip("+-") in ("inf", "infinity", "∞"):
        raise CellError("is not a finite number")
    if not NUMBER.fullmatch(text):
        raise CellError("is not a number", number_hint(text, share))
    if comma and _THOUSANDS.fullmatch(text):
        raise CellError("may mean thousands or decimals", "write it without the comma")
    value = float(text.replace(",", "."))
    if not math.isfinite(value):
        raise CellError("is not a finite number")
    return value


def parse_reading(text: str, comma: bool = False, share: bool = False) -> tuple[str, float]:
    """Return the state of a reading ("awaited", "censored", "read") and its value, NaN if awaited.

    The value of a censored reading is its limit; `comma` and `share` as in parse_number.

    Raises CellError.
    """
    if not text:
        return "awaited", math.nan
    censored = _CENSORED.fullmatch(text)
    if censored:
        return "censored", parse_number(censored[2], comma, share)
    return "read", parse_number(text, comma, share)


def parse_reason(text: str) -> str:
    """Return a reason in words, or "" for an empty cell. Raises CellError for a mere mark."""
    words = [word.lower() for word in _WORD.findall(text)]
    if text and not any(word not in _NO_REASON for word in words):
        raise CellError(
            "is not a reason", 'say in words why, such as "pipetted twice", or leave the cell empty'
        )
    return text


def numbers(table: Table, column: str, faults: list[Fault], share: bool = False) -> Floats:
    """Return the numbers in a column, shape (rows,), NaN where empty or at fault.

    `share` as in parse_number.
    """
    values = np.full(len(table), np.nan)
    for row, cell in enumerate(table.cells(column)):
        if cell:
            try:
                values[row] = parse_number(cell, table.comma, share)
            except CellError as error:
                faults.append(table.fault(row, column, str(error), hint=error.hint))
    return values


def reasons(table: Table, column: str, faults: list[Fault]) -> list[str]:
    """Return the reasons in a column, "" where none is given."""
    texts = []
    for row, cell in enumerate(table.cells(column)):
        try:
            texts.append(parse_reason(cell))
        except CellError as error:
            texts.append(cell)
            faults.append(table.fault(row, column, str(error), hint=error.hint))
    return texts
