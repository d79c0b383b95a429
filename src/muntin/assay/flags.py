"""Flags: what looks wrong in a plate's reduction. Nothing is ever taken out by a flag."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.assay.absorbance import net, path_cm
from muntin.assay.balance import most_collected
from muntin.assay.inputs import Inputs
from muntin.assay.uncertainty import Uncertain
from muntin.record.assay import Assay, FixedWell
from muntin.record.faults import number
from muntin.record.wells import ROWS_COLUMNS, position

Floats = NDArray[np.float64]

# Blanks of one buffer further apart than this many of their single sds do not agree: beyond the
# 99 % point of the range of four.
_BLANK_RANGE = 4.5
_PATH_OFF = 0.2
_FEWEST = 6
# A read so many sds of a single blank below its own blank is hardly noise.
_FAR_BELOW = 5.0
_PERIMETER_T = 3.0


@dataclass(frozen=True, kw_only=True, slots=True)
class Flag:
    """One flag: its kind, where it is raised (no well: the whole plate), and why."""

    kind: str
    plate: str
    well: str = ""
    fraction: str = ""
    text: str


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Judged:
    """What flags are raised on: inputs and settings, and the quantities by name."""

    inputs: Inputs
    assay: Assay
    fixed: FixedWell
    size: int
    quantities: dict[str, Uncertain]

    def flag(self, kind: str, text: str, well: int | None = None, fraction: str = "") -> Flag:
        """Return a flag of this plate."""
        name = "" if well is None else self.inputs.wells[well]
        return Flag(kind=kind, plate=self.inputs.plate, well=name, fraction=fraction, text=text)


def flags(judged: Judged, at_least: float | None) -> list[Flag]:
    """Return all flags of a plate; `at_least` is the target of the recovery, a fraction of 1."""
    return [
        *_reach(judged, at_least),
        *_blanks(judged),
        *_load(judged),
        *_perimeter(judged),
        *_reads(judged),
        *_samples(judged),
        *_wells(judged),
    ]


def _reach(judged: Judged, at_least: float | None) -> Iterator[Flag]:
    assay, hold_up = judged.assay, judged.fixed.hold_up_ul
    if at_least is None or assay.recovery == "freed_of_bound":
        return
    added = [stage.volume_ul for stage in assay.elutions]
    cap = most_collected(added, hold_up)
    if at_least > cap:
        steps = " + ".join(number(volume) for volume in added)
        text = (
            f"the target {number(at_least)} is out of reach: {steps} µL over a hold-up of "
            f"{number(hold_up)} µL collect at most {cap:.3f} of what is bound, even where nothing "
            "binds any more"
        )
        yield judged.flag("target_out_of_reach", text)


def _blanks(judged: Judged) -> Iterator[Flag]:
    blanks = judged.inputs.blanks
    for g, name in enumerate(blanks.names):
        if blanks.borrowed[g]:
            text = f"no blank of the buffer {name}: blanks of others stand for it, less sure"
            yield judged.flag("blank_borrowed", text)
        elif not blanks.count[g]:
            text = f"no blank was read for {name}: the one entered stands for it"
            yield judged.flag("blank_entered", text)
        elif blanks.spread[g] > _BLANK_RANGE * judged.assay.blank_sd:
            text = (
                f"{blanks.count[g]} blanks of {name} lie {blanks.spread[g]:.3f} AU apart, more "
                f"than their standard deviation of {number(judged.assay.blank_sd)} AU explains"
            )
            yield judged.flag("blanks_disagree", text)


def _load(judged: Judged) -> Iterator[Flag]:
    for state in ("low", "high"):
        count = int((judged.inputs.load_states == state).sum())
        if count:
            side = "below" if state == "low" else "above"
            text = f"{count} samples of the load read {side} the linear range"
            yield judged.flag(f"load_{state}", text, fraction=judged.assay.load_fraction)


def _reads(judged: Judged) -> Iterator[Flag]:
    inputs, assay = judged.inputs, judged.assay
    low, high = number(assay.linear_low), number(assay.linear_high)
    said = {
        "low": ("below_range", f"net absorbance below {low} AU, the linear range"),
        "high": ("above_range", f"above {high} AU, the linear range, at every dilution"),
        "missing": ("not_read", "not read"),
    }
    above = net(inputs.samples, inputs.blanks, {})[:, 0].reshape(inputs.shape)
    for i, j in np.argwhere(inputs.states != "read").tolist():
        kind, text = said[str(inputs.states[i, j])]
        if kind == "below_range" and above[i, j] < -_FAR_BELOW * assay.blank_sd:
            kind = "below_blank"
            text = f"{-above[i, j]:.3f} AU below its blank, as one that was not read"
        yield judged.flag(kind, text, i, assay.fractions[j])


def _samples(judged: Judged) -> Iterator[Flag]:
    inputs, assay = judged.inputs, judged.assay
    shape = inputs.shape
    turbid = net(inputs.samples, inputs.blanks, {})[:, 1].reshape(shape)
    path = path_cm(inputs.samples, assay).reshape(shape)
    usual = assay.read_ul / 1000.0 / assay.read_area_cm2
    for i, j in np.argwhere(turbid > assay.turbid_au).tolist():
        text = f"turbid: {turbid[i, j]:.3f} AU at {assay.scatter_nm[0]:g} nm"
        yield judged.flag("turbid", text, i, assay.fractions[j])
    for i, j in np.argwhere(np.abs(path / usual - 1.0) > _PATH_OFF).tolist():
        text = f"path {path[i, j]:.3f} cm by the water band, {usual:.3f} cm by its volume"
        yield judged.flag("path_odd", text, i, assay.fractions[j])
    _, left = inputs.volumes.kept
    for i in np.flatnonzero((left < 0).any(axis=1)).tolist():
        text = f"more was weighed than the well held: hold-up {left[i].min():.1f} µL"
        yield judged.flag("hold_up_negative", text, i)


def _wells(judged: Judged) -> Iterator[Flag]:
    yield from _closure(judged)
    assay = judged.assay
    bound, recovery = judged.quantities["bound_ug"], judged.quantities[assay.recovery]
    resin = np.isfinite(judged.inputs.volumes.resin)
    with np.errstate(invalid="ignore"):
        unsure = bound.total > assay.bound_cv_most * bound.value
        high = recovery.value > assay.recovery_most
    if (judged.inputs.load_states == "high").any():
        high[:] = False
    for i in np.flatnonzero(unsure & resin).tolist():
        text = (
            f"{bound.value[i]:.3g} ± {bound.total[i]:.2g} µg bound: too little for a recovery of "
            "what is bound"
        )
        yield judged.flag("bound_small", text, i)
    for i in np.flatnonzero(high & resin).tolist():
        text = f"recovery {recovery.value[i]:.3f} above {number(assay.recovery_most)}"
        yield judged.flag("recovery_high", text, i)


def _closure(judged: Judged) -> Iterator[Flag]:
    inputs, assay = judged.inputs, judged.assay
    closure = judged.quantities["closure"]
    whole = (inputs.states != "missing").all(axis=1)
    score = (closure.value - 1.0) / closure.total
    # Of a read above the range only the limit is known: closure is at least its value; where the
    # load is above it, at most.
    over, load_over = inputs.states == "high", inputs.load_states == "high"
    whole &= ~(over.any(axis=1) & (score < 0)) & ~(load_over.any() & (score > 0))
    recovery = judged.quantities["collected_of_load"].value
    for i in np.flatnonzero(whole & (np.abs(score) > assay.closure_k)).tolist():
        text = (
            f"closure {closure.value[i]:.3f} ± {closure.total[i]:.3f}, {abs(score[i]):.1f} of its "
            f"standard uncertainties {'below' if score[i] < 0 else 'above'} 1"
        )
        if score[i] < 0 and recovery[i] < 0.5:
            text += "; with so low a recovery: not eluted, or lost"
        yield judged.flag("closure", text, i)


def _perimeter(judged: Judged) -> Iterator[Flag]:
    """Compare the closure of perimeter wells with that of the others (two means, unequal sds)."""
    rows, columns = ROWS_COLUMNS[judged.size]
    places = [position(well, judged.size) for well in judged.inputs.wells]
    outer = np.array([r in (0, rows - 1) or c in (0, columns - 1) for r, c in places])
    whole = (judged.inputs.states != "missing").all(axis=1)
    closure = judged.quantities["closure"].value
    two = [closure[whole & side & np.isfinite(closure)] for side in (outer, ~outer)]
    if min(len(part) for part in two) < _FEWEST:
        return
    apart = two[0].mean() - two[1].mean()
    sd = float(np.sqrt(sum(part.var(ddof=1) / len(part) for part in two)))
    if sd > 0 and abs(apart) > _PERIMETER_T * sd:
        text = (
            f"closure of perimeter wells is {two[0].mean():.3f}, of the others "
            f"{two[1].mean():.3f}: {abs(apart) / sd:.1f} standard errors apart"
        )
        yield judged.flag("perimeter", text)
