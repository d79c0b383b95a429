"""Reduction: reads of a study to masses, recoveries, their uncertainties and flags."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from muntin.assay.censoring import Recovery, censored
from muntin.assay.flags import Flag, Judged, flags
from muntin.assay.inputs import Inputs, load_of
from muntin.assay.reads import Asked, Read, read_reads
from muntin.assay.samples import plate_inputs
from muntin.assay.uncertainty import (
    Drawn,
    Shared,
    Uncertain,
    first_order,
    monte_carlo,
    shared_scale,
)
from muntin.assay.unread_wells import well_notices
from muntin.record.assay import Assay, FixedWell
from muntin.record.faults import Fault, Findings, StudyFaults, did_you_mean, number
from muntin.record.readings import INFORMING
from muntin.record.responses import Response
from muntin.record.study import Study
from muntin.record.tables import natural_order

_STUDY = "study.toml"
# A load farther off than this factor is hardly what was made.
_LOAD_OFF = 1.25


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class PlateReduction:
    """One plate.

    Parameters
    ----------
    inputs
        What it was reduced from.
    quantities
        All quantities of `balance.QUANTITIES` with their uncertainties, n wells each.
    recovery
        What the response gets.
    shared
        What its recoveries share: a scale error, and the rest.
    flags
        What looks wrong.
    drawn
        The quantities by Monte Carlo, where asked for: "all", and "own" errors alone.
    """

    inputs: Inputs
    quantities: Mapping[str, Uncertain]
    recovery: Recovery
    shared: Shared
    flags: tuple[Flag, ...]
    drawn: Mapping[str, Mapping[str, Drawn]]


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Reduction:
    """All plates that were read, in their order, and the reads that they came from."""

    study: Study
    assay: Assay
    fixed: FixedWell
    response: Response
    plates: tuple[PlateReduction, ...]
    reads: tuple[Read, ...]
    notices: tuple[str, ...]
    draws: int


def reduce_reads(study: Study, path: Path, draws: int = 0, seed: int = 1) -> Reduction:
    """Reduce the reads in a table or folder against a study; nothing is written.

    Parameters
    ----------
    study
        Opened with `reducing`, so that plates may be unread.
    path
        A tidy table, or a folder of tables and grids.
    draws
        Draws of a Monte Carlo beside the first order; none if 0.
    seed
        Of the draws.

    Raises
    ------
    StudyFaults
        With all that is wrong in the reads or lacks for them.
    """
    assay = study.definition.assay
    if assay is None:
        hint = "muntin new DIR writes a commented [assay] with [[assay.stages]]"
        raise StudyFaults([Fault(file=_STUDY, problem="has no [assay]", hint=hint)])
    found = Findings()
    _check_columns(study, assay, found)
    names = tuple(plate.name for plate in study.plates)
    size = study.definition.plate
    asked = Asked(plates=names, size=size, assay=assay)
    reads = read_reads(path, asked, found)
    found.notices[:0] = well_notices(study.wells, reads, assay, size)
    plates = [] if found.faults else _reduced(study, assay, reads, draws, seed, found)
    if not plates and not found.faults:
        problem = "hold no read of the protein's wavelength"
        found.faults.append(Fault(file=str(path), problem=problem, hint=f"{assay.protein_nm:g} nm"))
    if found.faults:
        raise StudyFaults(found.faults)
    return Reduction(
        study=study,
        assay=assay,
        fixed=study.definition.fixed_well,
        response=_response(study, assay),
        plates=tuple(plates),
        reads=tuple(reads),
        notices=tuple(found.notices),
        draws=draws,
    )


def _response(study: Study, assay: Assay) -> Response:
    return next(r for r in study.definition.responses if r.name == assay.response)


def _check_columns(study: Study, assay: Assay, found: Findings) -> None:
    """Blanks may be told apart by columns of the plate tables only."""
    known = [str(name) for name in study.wells.columns]
    for stage in assay.stages:
        for name in stage.blank_by:
            if name not in known:
                where = f"assay, stages, {stage.fraction}, blank_by"
                problem = f"{name} is no column of the plate tables"
                hint = did_you_mean(name, known)
                found.faults.append(Fault(file=_STUDY, where=where, problem=problem, hint=hint))


def _reduced(
    study: Study, assay: Assay, reads: list[Read], draws: int, seed: int, found: Findings
) -> list[PlateReduction]:
    plates = []
    protein = {read.plate for read in reads if read.wavelength == assay.protein_nm}
    for index, plate in enumerate(sorted(protein, key=natural_order)):
        wells = study.wells[study.wells["plate"] == plate]
        run = set(wells["well"])
        here = [read for read in reads if read.plate == plate and read.well in run]
        inputs = plate_inputs(plate, wells, here, assay, study.definition.fixed_well, found)
        if inputs is not None:
            found.notices.extend(_load_notice(study, plate, float(load_of(inputs, assay, {}))))
            rng = np.random.default_rng([seed, index])
            plates.append(reduce_plate(inputs, study, draws, rng))
    return plates


def _load_notice(study: Study, plate: str, mg_per_ml: float) -> Iterator[str]:
    """Yield a word where the load reads otherwise than [bench] has it."""
    expected = study.definition.bench.protein_mg_per_ml
    if expected is None or not np.isfinite(mg_per_ml):
        return
    ratio = mg_per_ml / expected
    if not 1.0 / _LOAD_OFF <= ratio <= _LOAD_OFF:
        yield (
            f"{plate}: the load reads {mg_per_ml:.3g} mg/mL, {ratio:.2g} times the "
            f"protein_mg_per_ml of [bench] ({number(expected)}): are dilution, path and "
            "extinction right?"
        )


def reduce_plate(
    inputs: Inputs, study: Study, draws: int, rng: np.random.Generator
) -> PlateReduction:
    """Return the reduction of one plate."""
    assay, definition = study.definition.assay, study.definition
    assert assay is not None
    quantities = first_order(inputs, assay)
    judged = Judged(
        inputs=inputs,
        assay=assay,
        fixed=definition.fixed_well,
        size=definition.plate,
        quantities=quantities,
    )
    informing = np.array([role in INFORMING for role in inputs.roles])
    recovery = quantities[assay.recovery]
    drawn = {}
    if draws:
        drawn = {
            "all": monte_carlo(inputs, assay, draws, rng),
            "own": monte_carlo(inputs, assay, draws, rng, ("own",)),
        }
    return PlateReduction(
        inputs=inputs,
        quantities=quantities,
        recovery=censored(inputs, assay, recovery),
        shared=shared_scale(recovery, informing),
        flags=tuple(flags(judged, _response(study, assay).target[0])),
        drawn=drawn,
    )
