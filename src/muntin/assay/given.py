"""What a reduction gives to the study, beside what its tables hold already."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from decimal import Decimal

import numpy as np

from muntin.assay.reduction import PlateReduction, Reduction
from muntin.record.readings import INFORMING

_DECIMALS = 4
# What a study takes for a fraction at all; beyond it the reduction keeps the number for itself.
_LOW, _HIGH = -1.0, 2.0


@dataclass(frozen=True, kw_only=True, slots=True)
class Given:
    """One well of results/: `value` and `sd` as written, in the response's unit.

    `why` says why the well gets none, "" where it does; `agrees` whether a reading that its tables
    hold already was met to its last digit.
    """

    plate: str
    well: str
    value: str = ""
    sd: str = ""
    why: str = ""
    agrees: bool = False


def given(reduction: Reduction) -> list[Given]:
    """Return what each test, bridge and reference well that was read gets.

    A reading that stands in a plate table, or in other results, is never replaced: where the reads
    agree to its last digit the well gets their standard uncertainty, else nothing.
    """
    wells = reduction.study.wells
    name = reduction.response.name
    rows = {
        (row["plate"], row["well"]): {str(k): v for k, v in row.items()}
        for row in wells.to_dict("records")
    }
    return [
        _given(reduction, plate, i, rows[plate.inputs.plate, well], name)
        for plate in reduction.plates
        for i, well in enumerate(plate.inputs.wells)
        if plate.inputs.roles[i] in INFORMING
    ]


def _given(
    reduction: Reduction, plate: PlateReduction, i: int, row: Mapping[str, object], name: str
) -> Given:
    found, unit = plate.recovery, reduction.response.unit_size
    decimals = _DECIMALS - (2 if unit == 100.0 else 0)
    at = (plate.inputs.plate, plate.inputs.wells[i])
    state, value = str(row[f"{name}_state"]), float(found.value[i])
    sd = f"{unit * float(found.sd[i]):.{decimals}f}"
    why = _no_value(value, state)
    if why:
        return Given(plate=at[0], well=at[1], why=why)
    if state == "read":
        held = f"{row[name]:.10g}"
        if found.side[i] or round(unit * value, _places(held)) != float(held):
            more = {-1: "less than ", 0: "", 1: "more than "}[int(found.side[i])]
            text = f"its table holds {held}, the reads give {more}{unit * value:.{decimals}f}"
            return Given(plate=at[0], well=at[1], why=text)
        if np.isfinite(float(str(row[f"{name}_sd"]))):
            text = "its table holds the same reading with a standard uncertainty of its own"
            return Given(plate=at[0], well=at[1], why=text)
        return Given(plate=at[0], well=at[1], value=held, sd=sd, agrees=True)
    sign = {-1: "<", 0: "", 1: ">"}[int(found.side[i])]
    return Given(plate=at[0], well=at[1], value=f"{sign}{unit * value:.{decimals}f}", sd=sd)


def _no_value(value: float, state: str) -> str:
    """Why a well gets no reading, "" where it may."""
    if not np.isfinite(value):
        return "a fraction that it needs was not read, or reads beyond the range pull apart"
    if not _LOW < value < _HIGH:
        return f"{value:.3g} is no fraction that a study could use"
    if state == "excluded":
        return "left out in its plate table"
    if state == "censored":
        return "its table holds a censored reading"
    return ""


def _places(text: str) -> int:
    exponent = Decimal(text).as_tuple().exponent
    return max(0, -exponent) if isinstance(exponent, int) else 0
