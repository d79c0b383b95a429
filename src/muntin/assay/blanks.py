"""Blanks of a plate, by buffer: wells without protein that went through the same stages."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.assay.absorbance import Blanks
from muntin.assay.choice import Found, beside
from muntin.record.assay import Assay, AssayStage
from muntin.record.faults import number

Floats = NDArray[np.float64]
Kind = tuple[str, tuple[str, ...]]


def stage_kind(stage: AssayStage, row: Mapping[str, Any]) -> Kind:
    """Return the buffer of a stage and what tells its blanks apart, for one row of the wells."""
    return stage.liquid, tuple(_text(row.get(name)) for name in stage.blank_by)


def _text(value: Any) -> str:
    if isinstance(value, int | float):
        return "" if value != value else number(float(value))
    return str(value or "").strip()


@dataclass
class BlankBook:
    """Reads of blank wells by kind, and the blanks that have been asked for so far."""

    assay: Assay
    reads: Mapping[Kind, Sequence[Floats]]
    rows: list[tuple[str, Floats, Floats, bool, float, int]] = field(default_factory=list)
    asked: dict[tuple[str, tuple[str, ...] | None], int] = field(default_factory=dict)

    @property
    def empty(self) -> bool:
        """Whether there is neither a blank nor one in the settings."""
        return not self.reads and self.assay.blank_au is None

    def serve(self, liquid: str, by: tuple[str, ...] | None) -> int:
        """Return the number of the blank for a buffer; `by` None takes any of that buffer.

        Where it has none, those of the same buffer at other values stand for it, then all of the
        plate, then the one entered.
        """
        at = (liquid, by)
        if at not in self.asked:
            self.asked[at] = len(self.rows)
            self.rows.append(self._row(liquid, by))
        return self.asked[at]

    def _row(
        self, liquid: str, by: tuple[str, ...] | None
    ) -> tuple[str, Floats, Floats, bool, float, int]:
        name = ", ".join([liquid, *(value for value in by or () if value)])
        same = [read for kind, reads in self.reads.items() if kind[0] == liquid for read in reads]
        exact = same if by is None else [*self.reads.get((liquid, by), ())]
        every = [read for reads in self.reads.values() for read in reads]
        here = exact or same or every
        if not here:
            entered = self.assay.blank_au or 0.0
            sd = np.full(3, self.assay.blank_sd)
            return name, np.full(3, entered), sd, False, 0.0, 0
        value, sd, spread = _summary(np.array(here), self.assay.blank_sd)
        if not exact:
            sd = np.hypot(sd, self.assay.blank_between_sd)
        return name, value, sd, not exact, spread, len(here)

    def blanks(self) -> Blanks:
        """Return all blanks that have been asked for."""
        names, values, sds, borrowed, spread, count = zip(*self.rows, strict=True)
        return Blanks(
            names=names,
            value=np.array(values),
            sd=np.array(sds),
            borrowed=borrowed,
            spread=np.array(spread),
            count=np.array(count),
        )


def _summary(reads: Floats, single_sd: float) -> tuple[Floats, Floats, float]:
    """Mean and its standard uncertainty (3,), and the range at the protein's wavelength.

    Single blanks scatter by the entered sd, or by their own where three or more show more.
    """
    known = np.isfinite(reads)
    count = known.sum(axis=0)
    some = np.maximum(count, 1)
    mean = np.where(known, reads, 0.0).sum(axis=0) / some
    off = np.where(known, reads - mean, 0.0)
    own = np.sqrt((off**2).sum(axis=0) / np.maximum(count - 1, 1))
    sd = np.where(count >= 3, np.maximum(own, single_sd), single_sd) / np.sqrt(some)
    value = np.where(count > 0, mean, np.nan)
    return value, np.where(count > 0, sd, 0.0), float(np.ptp(reads[:, 0]))


def blank_book(assay: Assay, wells: pd.DataFrame, found: Found) -> BlankBook:
    """Return the blanks of one plate; `wells` are its rows, `found` its reads."""
    first = next(stage for stage in assay.stages if stage.stage == "load")
    liquids = [(stage, stage.fraction) for stage in assay.stages]
    liquids.append((first, assay.load_fraction))
    reads: dict[Kind, list[Floats]] = defaultdict(list)
    nm = (assay.protein_nm, *assay.scatter_nm)
    for row in wells[wells["role"] == "blank"].to_dict("records"):
        for stage, fraction in liquids:
            here = [beside(found.get((row["well"], fraction, w), ()), 1.0, False) for w in nm]
            if here[0].repeats:
                values = np.array([chosen.absorbance for chosen in here])
                reads[stage_kind(stage, {str(k): v for k, v in row.items()})].append(values)
    return BlankBook(assay, reads)
