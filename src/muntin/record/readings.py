"""Readings of one response: from plate tables, and joined with later results."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from typing import NamedTuple

from muntin.record.cells import CellError, numbers, parse_reading, reasons
from muntin.record.faults import Fault, number
from muntin.record.responses import Response
from muntin.record.tables import Table

INFORMING = ("test", "bridge", "reference")
USED = ("read", "censored")


class Reading(NamedTuple):
    """One cell: its state, value (user's unit), standard uncertainty, reason to leave it out.

    The value of a censored reading is its limit. `text` is the cell as written, `file` and `where`
    its address.
    """

    state: str = "awaited"
    value: float = math.nan
    sd: float = math.nan
    reason: str = ""
    text: str = ""
    file: str = ""
    where: str = ""

    @property
    def side(self) -> int:
        """-1 where the reading lies below its value, 1 where above, 0 where it is the value."""
        if self.state != "censored":
            return 0
        return -1 if self.text[0] in "<≤" else 1


def response_columns(responses: Iterable[Response]) -> list[str]:
    """Return the column names that readings take up: the response, its _sd and its _exclude."""
    return [f"{r.name}{end}" for r in responses for end in ("", "_sd", "_exclude")]


def read_readings(table: Table, response: Response, faults: list[Fault]) -> list[Reading]:
    """Return the readings of one response in a table, one a row."""
    name = response.name
    share = response.kind == "fraction" and not response.per_cent
    deviations = numbers(table, f"{name}_sd", faults, share)
    why = reasons(table, f"{name}_exclude", faults)
    readings = []
    for row, cell in enumerate(table.cells(name)):
        state, value = "awaited", math.nan
        try:
            state, value = parse_reading(cell, table.comma, share)
        except CellError as error:
            hint = error.hint or "leave the cell empty while its reading is awaited"
            faults.append(table.fault(row, name, str(error), hint=hint))
        if deviations[row] < 0:
            problem = "must be 0 or above, as it is a standard uncertainty"
            faults.append(table.fault(row, f"{name}_sd", problem))
        readings.append(
            Reading(
                state, value, float(deviations[row]), why[row], cell, table.file, table.where[row]
            )
        )
    return readings


def joined(old: Reading, new: Reading, name: str, faults: list[Fault]) -> Reading:
    """Return a plate's reading completed by a later result; two that differ are a fault."""
    if not new.text:
        kept = old
    elif not old.text:
        kept = new
    else:
        kept = old
        same = old.value == new.value if old.state == new.state == "read" else old.text == new.text
        if not same:
            faults.append(_differs(old, new, name, old.text, new.text))
    if not (math.isnan(old.sd) or math.isnan(new.sd) or old.sd == new.sd):
        faults.append(_differs(old, new, f"{name}_sd", number(old.sd), number(new.sd)))
    sd = new.sd if math.isnan(old.sd) else old.sd
    reason = "; ".join(dict.fromkeys(reason for reason in (old.reason, new.reason) if reason))
    return kept._replace(sd=sd, reason=reason)


def _differs(old: Reading, new: Reading, column: str, first: str, second: str) -> Fault:
    return Fault(
        file=new.file,
        where=new.where,
        column=column,
        value=second,
        problem=f"differs from {first} in {old.file}, {old.where}",
        hint="give a value in one place",
    )


def reading_faults(response: Response, readings: Sequence[Reading]) -> Iterable[Fault]:
    """Yield the readings that cannot be: at or below 0 for "positive", far outside a fraction.

    `readings` are those in use: read or censored, and not left out.
    """
    if response.kind == "positive":
        for reading in readings:
            if reading.value <= 0:
                problem = 'must lie above 0, as the response is "positive"'
                hint = 'below what the assay can see write "<" and its limit'
                yield _reading_fault(response, reading, problem, hint)
    if response.kind == "fraction":
        yield from _fraction_faults(response, readings)


def _fraction_faults(response: Response, readings: Sequence[Reading]) -> Iterable[Fault]:
    low, high = (-100, 200) if response.per_cent else (-1, 2)
    wrong = [reading for reading in readings if not low <= reading.value <= high]
    like_per_cent = not response.per_cent and all(2 < r.value <= 200 for r in wrong)
    for file in dict.fromkeys(reading.file for reading in wrong):
        here = [reading for reading in wrong if reading.file == file]
        if like_per_cent:
            all_of_them = f", as do {len(here)} cells in all" if len(here) > 1 else ""
            problem = f"looks like per cent{all_of_them}; a fraction is read as 0 to 1"
            hint = f'for per cent set unit = "%" in study.toml, responses, {response.name}'
            yield _reading_fault(response, here[0], problem, hint)
            continue
        for reading in here:
            problem = f"lies outside {low} to {high}, too far for a fraction"
            yield _reading_fault(response, reading, problem, "")


def _reading_fault(response: Response, reading: Reading, problem: str, hint: str) -> Fault:
    return Fault(
        file=reading.file,
        where=reading.where,
        column=response.name,
        value=number(reading.value),
        problem=problem,
        hint=hint,
    )
