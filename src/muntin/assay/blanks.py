"""Blanks of a plate, by buffer: wells without protein that went through the same stages."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, NamedTuple

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


class Served(NamedTuple):
    """One blank that serves samples: its name, the kinds whose mean it is, whether borrowed."""

    name: str
    kinds: tuple[int, ...]
    borrowed: bool


@dataclass
class BlankBook:
    """Reads of blank wells by kind, (m, 3) each, and the blanks that have been asked for so far."""

    assay: Assay
    reads: Mapping[Kind, Floats]
    served: list[Served] = field(default_factory=list)

    @property
    def empty(self) -> bool:
        """Whether there is neither a blank nor one in the settings."""
        return not self.reads and self.assay.blank_au is None

    def serve(self, liquid: str, by: tuple[str, ...] | None) -> int:
        """Return the number of the blank for a buffer; `by` None takes any of that buffer.

        Where it has none, those of the same buffer at other values stand for it, then all of the
        plate, then the one entered.
        """
        every = [*enumerate(self.reads)]
        same = tuple(k for k, kind in every if kind[0] == liquid)
        exact = same if by is None else tuple(k for k, kind in every if kind == (liquid, by))
        kinds = exact or same or tuple(k for k, _ in every)
        name = ", ".join([liquid, *(value for value in by or () if value)])
        one = Served(name, kinds, bool(kinds) and not exact)
        if one not in self.served:
            self.served.append(one)
        return self.served.index(one)

    def blanks(self) -> Blanks:
        """Return all blanks that have been asked for."""
        reads = [*self.reads.values()] or [np.full((1, 3), self.assay.blank_au or 0.0)]
        kinds = [one.kinds or (0,) for one in self.served]
        counts = np.array([np.isfinite(each).sum(axis=0) for each in reads])
        taken = np.array([np.isin(np.arange(len(reads)), each) for each in kinds])
        weights = taken[:, :, None] * counts
        total = weights.sum(axis=1, keepdims=True)
        weights = weights / np.maximum(total, 1)
        means = np.array([_mean(each) for each in reads])
        value = np.where(total[:, 0] > 0, (weights * np.nan_to_num(means)).sum(axis=1), np.nan)
        borrowed = np.array([one.borrowed for one in self.served])
        other = np.where(borrowed, self.assay.blank_between_sd, 0.0)
        whole = [np.concatenate([reads[k] for k in each])[:, 0] for each in kinds]
        return Blanks(
            names=tuple(one.name for one in self.served),
            value=value,
            kind_sd=np.array([_mean_sd(each, self.assay.blank_sd) for each in reads]),
            weights=weights,
            other_sd=np.where(total[:, 0] > 0, other[:, None], 0.0),
            borrowed=tuple(borrowed.tolist()),
            spread=np.array([float(np.ptp(each)) for each in whole]),
            count=np.array([len(each) if self.reads else 0 for each in whole]),
        )


def _mean(reads: Floats) -> Floats:
    known = np.isfinite(reads)
    count = known.sum(axis=0)
    sums = np.where(known, reads, 0.0).sum(axis=0)
    return np.where(count > 0, sums / np.maximum(count, 1), np.nan)


def _mean_sd(reads: Floats, single_sd: float) -> Floats:
    """Standard uncertainty of the mean of reads (m, 3), shape (3,); 0 where there are none.

    Single blanks scatter by the entered sd, or by their own where three or more show more.
    """
    known = np.isfinite(reads)
    count = known.sum(axis=0)
    off = np.where(known, reads - _mean(reads), 0.0)
    own = np.sqrt((off**2).sum(axis=0) / np.maximum(count - 1, 1))
    single = np.where(count >= 3, np.maximum(own, single_sd), single_sd)
    return np.where(count > 0, single / np.sqrt(np.maximum(count, 1)), 0.0)


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
    return BlankBook(assay, {kind: np.array(rows) for kind, rows in reads.items()})
