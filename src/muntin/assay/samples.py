"""Samples: the reads of a plate brought to wells and stages, with blanks and volumes."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.assay.absorbance import Blanks, Optics, net
from muntin.assay.balance import Volumes
from muntin.assay.blanks import BlankBook, blank_book, stage_kind
from muntin.assay.choice import Chosen, Found, beside, by_sample, choose
from muntin.assay.inputs import Inputs
from muntin.assay.reads import Read
from muntin.record.assay import Assay, FixedWell
from muntin.record.cells import CellError, parse_number
from muntin.record.faults import Fault, Findings
from muntin.record.readings import INFORMING

Floats = NDArray[np.float64]
Row = Mapping[str, Any]

REDUCED = (*INFORMING, "no_resin")


def plate_inputs(
    plate: str,
    wells: pd.DataFrame,
    reads: Sequence[Read],
    assay: Assay,
    fixed: FixedWell,
    found: Findings,
) -> Inputs | None:
    """Return what a plate is reduced from, None with a fault where it cannot be.

    Parameters
    ----------
    plate
        Its name.
    wells
        Its rows of the wells table.
    reads
        Its reads.
    assay, fixed
        Settings.
    found
        Takes faults and notices.
    """
    samples = by_sample(reads)
    read_wells = {well for well, _, _ in samples}
    rows = [
        {str(name): value for name, value in row.items()}
        for row in wells.to_dict("records")
        if row["role"] in REDUCED and row["well"] in read_wells
    ]
    book = blank_book(assay, wells, samples)
    if not _sound(plate, rows, wells, book, samples, assay, found):
        return None
    numbers = [book.serve(*stage_kind(stage, row)) for row in rows for stage in assay.stages]
    places = [(row["well"], stage.fraction) for row in rows for stage in assay.stages]
    loads = _load_places(wells, samples, assay)
    load_blank = book.serve(_first_load(assay), None) if loads else 0
    blanks = book.blanks()
    optics, over = _optics(places, numbers, samples, blanks, assay)
    load, load_over = _optics(loads, [load_blank] * len(loads), samples, blanks, assay)
    shape = (len(rows), len(assay.stages))
    return Inputs(
        plate=plate,
        wells=tuple(row["well"] for row in rows),
        roles=tuple(row["role"] for row in rows),
        samples=optics,
        load=load if loads else None,
        entered=None if loads else assay.load_mg_ml,
        blanks=blanks,
        volumes=_volumes(plate, rows, samples, assay, fixed, found),
        states=_states(optics, over, blanks, assay).reshape(shape),
        load_states=_states(load, load_over, blanks, assay),
    )


def _first_load(assay: Assay) -> str:
    return next(stage.liquid for stage in assay.stages if stage.stage == "load")


def _load_places(wells: pd.DataFrame, samples: Found, assay: Assay) -> list[tuple[str, str]]:
    """Samples of the load: those of load wells, else of any that were read as the load's."""
    nm = assay.protein_nm
    read = [well for well, name, w in samples if name == assay.load_fraction and w == nm]
    roles = dict(zip(wells["well"], wells["role"], strict=True))
    own = [well for well in read if roles.get(well) == "load"]
    others = [well for well in read if roles.get(well) != "blank"]
    return [(well, assay.load_fraction) for well in own or others]


def _sound(
    plate: str,
    rows: Sequence[Row],
    wells: pd.DataFrame,
    book: BlankBook,
    samples: Found,
    assay: Assay,
    found: Findings,
) -> bool:
    faults = []
    if not rows:
        problem = "has no reads of a test, bridge, reference or no_resin well"
        faults.append(Fault(file=f"plates/{plate}", problem=problem))
    if book.empty:
        problem = "has no read of a blank well"
        hint = "read wells of the role blank, or enter blank_au in study.toml, assay"
        faults.append(Fault(file=f"plates/{plate}", problem=problem, hint=hint))
    if assay.load_mg_ml is None and not _load_places(wells, samples, assay):
        problem = f"has no read of its load (fraction {assay.load_fraction})"
        hint = "or enter load_mg_ml in study.toml, assay"
        faults.append(Fault(file=f"plates/{plate}", problem=problem, hint=hint))
    found.faults.extend(faults)
    return not faults


def _optics(
    places: Sequence[tuple[str, str]],
    blank: Sequence[int],
    samples: Found,
    blanks: Blanks,
    assay: Assay,
) -> tuple[Optics, NDArray[np.bool_]]:
    """Samples in a row, and which of them lie beyond the reader."""
    chosen = [
        choose(samples.get((*place, assay.protein_nm), ()), assay.linear_high) for place in places
    ]
    scatter = [
        [beside(samples.get((*p, nm), ()), c.dilution, False) for nm in assay.scatter_nm]
        for p, c in zip(places, chosen, strict=True)
    ]
    bands = [_band(p, c, samples, assay) for p, c in zip(places, chosen, strict=True)]
    rows = [
        [c.absorbance, *(s.absorbance for s in each)]
        for c, each in zip(chosen, scatter, strict=True)
    ]
    optics = Optics(
        absorbance=np.array(rows).reshape(-1, 3),
        read_sd=np.zeros((len(places), 3)),
        blank=np.array(blank, dtype=int),
        band=np.array(bands),
        dilution=np.array([c.dilution for c in chosen]),
        scatter_dilution=np.array(
            [
                s[0].dilution if s[0].repeats else c.dilution
                for c, s in zip(chosen, scatter, strict=True)
            ]
        ),
    )
    repeats = np.array(
        [[c.repeats, *(s.repeats for s in each)] for c, each in zip(chosen, scatter, strict=True)]
    ).reshape(-1, 3)
    return _with_noise(optics, repeats, blanks, assay), np.array([c.over for c in chosen], bool)


def _with_noise(optics: Optics, repeats: NDArray[np.int_], blanks: Blanks, assay: Assay) -> Optics:
    single = np.hypot(assay.read_floor, assay.read_cv * net(optics, blanks, {}))
    return replace(optics, read_sd=np.nan_to_num(single / np.sqrt(np.maximum(repeats, 1))))


def _band(place: tuple[str, str], chosen: Chosen, samples: Found, assay: Assay) -> float:
    """Height of the water band of a sample, NaN where it was not read or is not wanted."""
    if assay.path == "geometry":
        return float("nan")
    base, top = (
        beside(samples.get((*place, nm), ()), chosen.dilution, True).absorbance
        for nm in assay.water_band_nm
    )
    return top - base


def _states(
    optics: Optics, over: NDArray[np.bool_], blanks: Blanks, assay: Assay
) -> NDArray[np.str_]:
    above = net(optics, blanks, {})[..., 0]
    states = np.where(above < assay.linear_low, "low", "read")
    states = np.where(over, "high", states)
    return np.where(np.isnan(optics.absorbance[:, 0]), "missing", states)


def _volumes(
    plate: str,
    rows: Sequence[Row],
    samples: Found,
    assay: Assay,
    fixed: FixedWell,
    found: Findings,
) -> Volumes:
    added = np.array(
        [
            [_added(plate, row, stage.fraction, stage.volume_ul, found) for stage in assay.stages]
            for row in rows
        ]
    )
    collected = np.array(
        [[_collected(row["well"], name, samples) for name in assay.fractions] for row in rows]
    )
    bare = np.array([row["role"] == "no_resin" for row in rows])
    return Volumes(
        added=added,
        collected=collected,
        hold_up=np.full(len(rows), fixed.hold_up_ul),
        resin=np.where(bare, np.nan, fixed.resin_ul),
    )


def _added(plate: str, row: Row, fraction: str, usual: float, found: Findings) -> float:
    """What a stage added to a well: the plate table's own column, else the stage's volume."""
    column = f"{fraction}_ul"
    text = str(row.get(column) or "").strip()
    if not text or text == "nan":
        return usual
    try:
        volume = parse_number(text)
        if volume > 0:
            return volume
        problem, hint = "must lie above 0", ""
    except CellError as error:
        problem, hint = str(error), error.hint
    where = f"well {row['well']}"
    found.faults.append(
        Fault(
            file=f"plates/{plate}",
            where=where,
            column=column,
            value=text,
            problem=problem,
            hint=hint,
        )
    )
    return usual


def _collected(well: str, fraction: str, samples: Found) -> float:
    volumes = {
        read.volume
        for (at, name, _), reads in samples.items()
        if at == well and name == fraction
        for read in reads
        if np.isfinite(read.volume)
    }
    return float(np.mean([*volumes])) if volumes else float("nan")
