"""Files of a reduction: the results of each plate, and what they were computed from.

results/reduced-plate-01.csv     plate, well, the response and its own standard uncertainty
reductions/plate-01-masses.csv   concentrations, masses and all quantities, well by well
reductions/plate-01-reads.csv    the reads as one tidy table, which reduces to the same again
reductions/plate-01.json         settings, blanks, load, shared uncertainties, flags, hashes
"""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np

from muntin.assay.absorbance import path_cm
from muntin.assay.given import Given
from muntin.assay.inputs import liquid_of, load_of
from muntin.assay.reads import Read
from muntin.assay.reduction import PlateReduction, Reduction
from muntin.record.assay import READ_COLUMNS, Assay
from muntin.record.faults import number
from muntin.record.inputs import hashes, read_inputs, versions
from muntin.record.readings import INFORMING
from muntin.record.reduced import REDUCTIONS
from muntin.record.results import REDUCED
from muntin.report.advice_files import json_text

_NOTHING = 1e-9
_METHOD = (
    "First order (JCGM 100:2008): squares of dy/dx u(x) added up, by complex steps. Own: errors "
    "of one well alone. Shared: load, blanks, extinction, path reference, mean hold-up and mean "
    "resin, the same for all wells of the plate. _sd is own alone."
)


def reduction_files(reduction: Reduction, given: Sequence[Given], source: Path) -> dict[Path, str]:
    """Return the text of each file by its path."""
    folder, files = reduction.study.folder, {}
    read = hashes_of_reads(source)
    for plate in reduction.plates:
        name = plate.inputs.plate
        mine = [one for one in given if one.plate == name]
        files[folder / "results" / f"{REDUCED}{name}.csv"] = results_text(reduction, mine)
        files[folder / REDUCTIONS / f"{name}-masses.csv"] = masses_text(reduction, plate)
        own = [one for one in reduction.reads if one.plate == name]
        files[folder / REDUCTIONS / f"{name}-reads.csv"] = reads_text(reduction.assay, own)
        record = plate_record(reduction, plate, mine) | {"reads": read}
        files[folder / REDUCTIONS / f"{name}.json"] = json_text(record)
    return files


def hashes_of_reads(source: Path) -> dict[str, str]:
    """Return the SHA-256 of each file of reads."""
    files = sorted(source.iterdir()) if source.is_dir() else [source]
    kept = {p.name: p.read_bytes() for p in files if p.is_file() and p.name[0] not in ".~"}
    return hashes(kept)


def results_text(reduction: Reduction, given: Sequence[Given]) -> str:
    """Return the table of results/ of one plate."""
    name = reduction.response.name
    rows = [(one.plate, one.well, one.value, one.sd) for one in given if not one.why]
    return _csv(("plate", "well", name, f"{name}_sd"), rows)


def masses_text(reduction: Reduction, plate: PlateReduction) -> str:
    """Return concentrations, masses and quantities of one plate, a row a well."""
    inputs, assay = plate.inputs, reduction.assay
    with np.errstate(invalid="ignore"):
        liquid = np.asarray(liquid_of(inputs, assay, {}), dtype=float)
        taken, left = inputs.volumes.kept
    columns: dict[str, Sequence[str]] = {"well": inputs.wells, "role": inputs.roles}
    for j, fraction in enumerate(assay.fractions):
        columns[f"{fraction}_state"] = inputs.states[:, j].tolist()
        columns[f"{fraction}_mg_ml"] = _cells(liquid[:, j])
        columns[f"{fraction}_collected_ul"] = _cells(taken[:, j])
        columns[f"{fraction}_ug"] = _cells(liquid[:, j] * taken[:, j])
        columns[f"{fraction}_hold_up_after_ul"] = _cells(left[:, j + 1])
    for name, quantity in plate.quantities.items():
        columns[name] = _cells(quantity.value)
        columns[f"{name}_sd"] = _cells(quantity.own)
        columns[f"{name}_shared_sd"] = _cells(quantity.shared)
    columns["flags"] = [_flags_of(plate, well) for well in inputs.wells]
    return _csv([*columns], zip(*columns.values(), strict=True))


def _flags_of(plate: PlateReduction, well: str) -> str:
    own = [flag for flag in plate.flags if flag.well == well]
    return "; ".join(f"{flag.kind} {flag.fraction}".strip() for flag in own)


def _cells(values: Iterable[float]) -> list[str]:
    return ["" if not np.isfinite(value) else f"{value:.6g}" for value in values]


def reads_text(assay: Assay, reads: Sequence[Read]) -> str:
    """Return reads as one tidy table under our own headings, every digit kept."""
    kinds = {stage.fraction: stage.stage for stage in assay.stages}
    rows = [
        (
            read.plate,
            read.well,
            read.fraction,
            kinds.get(read.fraction, "load"),
            number(read.wavelength),
            (">" if read.over else "") + repr(float(read.absorbance)),
            number(read.dilution),
            repr(float(read.volume)) if np.isfinite(read.volume) else "",
        )
        for read in reads
    ]
    return _csv(READ_COLUMNS, rows)


def _csv(heading: Sequence[str], rows: Iterable[Iterable[str]]) -> str:
    stream = io.StringIO(newline="")
    writer = csv.writer(stream, lineterminator="\n")
    writer.writerow(heading)
    writer.writerows(rows)
    return stream.getvalue()


def plate_record(
    reduction: Reduction, plate: PlateReduction, given: Sequence[Given]
) -> dict[str, Any]:
    """Return what one plate was computed from, as plain values."""
    inputs, assay = plate.inputs, reduction.assay
    return {
        "plate": inputs.plate,
        "response": reduction.response.name,
        "recovery": assay.recovery,
        "method": _METHOD,
        "settings": {
            "assay": assay.model_dump(),
            "fixed": reduction.fixed.model_dump(),
        },
        "load": _load(reduction, plate),
        "blanks": _blanks(plate),
        "shared": shared_facts(plate, assay),
        "flags": flag_facts(plate),
        "not_given": {one.well: one.why for one in given if one.why},
        "monte_carlo": _drawn(reduction, plate),
        "notices": list(reduction.notices),
        "inputs": hashes(read_inputs(reduction.study.folder)),
        "versions": versions(),
    }


def _load(reduction: Reduction, plate: PlateReduction) -> dict[str, Any]:
    inputs, assay = plate.inputs, reduction.assay
    facts: dict[str, Any] = {"mg_ml": float(load_of(inputs, assay, {}))}
    if inputs.load is not None:
        facts |= {
            "absorbance": inputs.load.absorbance[:, 0],
            "dilution": inputs.load.dilution,
            "path_cm": path_cm(inputs.load, assay),
            "blank": inputs.blanks.names[int(inputs.load.blank[0])],
            "states": inputs.load_states,
        }
    return facts


def _blanks(plate: PlateReduction) -> list[dict[str, Any]]:
    blanks = plate.inputs.blanks
    return [
        {
            "buffer": name,
            "absorbance": blanks.value[g],
            "standard_uncertainty": blanks.sd[g],
            "reads": int(blanks.count[g]),
            "borrowed": blanks.borrowed[g],
        }
        for g, name in enumerate(blanks.names)
    ]


def shared_facts(plate: PlateReduction, assay: Assay) -> dict[str, Any]:
    """Return what the wells of a plate share in their recovery, and by what.

    Parts are root mean squares over test, bridge and reference wells, in the recovery's unit.
    """
    recovery = plate.quantities[assay.recovery]
    use = np.array([role in INFORMING for role in plate.inputs.roles])
    return {
        "scale_error": plate.shared.scale,
        "beyond_scale": plate.shared.rest,
        "shared_by": _parts(recovery.shared_by(), use),
        "own_by": _parts(recovery.own_by, use),
    }


def _parts(by: Mapping[str, Any], use: Any) -> dict[str, float]:
    parts = {}
    for name, values in by.items():
        known = values[use & np.isfinite(values)]
        size = float(np.sqrt((known**2).mean())) if len(known) else float("nan")
        if not size < _NOTHING:
            parts[name] = size
    return parts


def flag_facts(plate: PlateReduction) -> list[dict[str, str]]:
    """Return the flags of a plate as plain values."""
    return [
        {"kind": f.kind, "well": f.well, "fraction": f.fraction, "text": f.text}
        for f in plate.flags
    ]


def _drawn(reduction: Reduction, plate: PlateReduction) -> Mapping[str, Any] | None:
    if not reduction.draws:
        return None
    name = reduction.assay.recovery
    every, own = (plate.drawn[part][name] for part in ("all", "own"))
    return {
        "draws": reduction.draws,
        "recovery": name,
        "wells": plate.inputs.wells,
        "mean": every.mean,
        "standard_uncertainty": every.sd,
        "own_standard_uncertainty": own.sd,
        "interval_95": every.interval,
    }
