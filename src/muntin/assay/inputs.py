"""Inputs of one plate's reduction, and the one forward calculation that all results come from."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from muntin.assay.absorbance import Blanks, Optics, Shifts, concentration
from muntin.assay.balance import Volumes, balance
from muntin.record.assay import Assay

Array = NDArray[Any]
Floats = NDArray[np.float64]


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Inputs:
    """What n wells of a plate with J stages are reduced from.

    Parameters
    ----------
    plate, wells, roles
        Name of the plate, and of each well its name and role.
    samples
        Fractions in the reading plate, well by well: n J of them.
    load
        Samples of the load, l of them; none where it was entered.
    entered
        Load concentration, mg/mL, where no sample of it was read.
    blanks
        Blanks that serve samples and load.
    volumes
        As entered and weighed, shape (n, J); hold-up and resin (n,).
    states
        Of each fraction: "read", "low" or "high" of the linear range, or "missing"; shape (n, J).
    load_states
        The same of the load's samples, shape (l,).
    """

    plate: str
    wells: tuple[str, ...]
    roles: tuple[str, ...]
    samples: Optics
    load: Optics | None
    entered: float | None
    blanks: Blanks
    volumes: Volumes
    states: NDArray[np.str_]
    load_states: NDArray[np.str_]

    @property
    def shape(self) -> tuple[int, int]:
        """Numbers n of wells and J of stages."""
        wells, stages = self.states.shape
        return wells, stages


def sources(inputs: Inputs, assay: Assay) -> dict[str, dict[str, tuple[int, ...]]]:
    """Return what errs, "own" to each well and "shared" by the plate, with the shape of each.

    An own source of shape s has shifts (n, *s), a shared one s itself. What is sure, or was not
    done, is no source.
    """
    stages = inputs.shape[1]
    errs = {
        "path": assay.path_cv > 0,
        "dilution": assay.dilution_cv > 0 and bool((inputs.samples.dilution > 1).any()),
        "volume": assay.volume_cv > 0,
        "weighing": assay.weighing_cv > 0 and bool(np.isfinite(inputs.volumes.collected).any()),
    }
    own: dict[str, tuple[int, ...]] = {"read": (stages, 3)}
    own |= {name: (stages,) for name, does in errs.items() if does}
    own |= _given({"hold_up": assay.hold_up_well_cv, "resin": assay.resin_well_cv})
    plate = {"extinction": assay.extinction_cv, "path_shared": assay.path_shared_cv}
    plate |= {"load": assay.load_cv, "hold_up_mean": assay.hold_up_mean_cv}
    plate |= {"resin_mean": assay.resin_mean_cv}
    blanks = inputs.blanks
    shared: dict[str, tuple[int, ...]] = {"blank": blanks.kind_sd.shape, **_given(plate)}
    if any(blanks.borrowed):
        shared["blank_other"] = blanks.other_sd.shape
    if inputs.load is not None:
        loads = len(inputs.load.dilution)
        shared |= {"load_read": (loads, 3), "load_path": (loads,), "load_dilution": (loads,)}
    return {"own": own, "shared": shared}


def _given(sizes: dict[str, float]) -> dict[str, tuple[int, ...]]:
    return {name: () for name, size in sizes.items() if size > 0}


def load_of(inputs: Inputs, assay: Assay, shifts: Shifts) -> Array:
    """Return the load concentration, mg/mL, shape (...): the mean of its samples, else as entered.

    The shift `load` adds what its samples do not tell, such as how it was drawn from the bottle.
    """
    factor = 1.0 + assay.load_cv * np.asarray(shifts.get("load", 0.0))
    if inputs.load is None:
        return np.asarray((np.nan if inputs.entered is None else inputs.entered) * factor)
    read = concentration(inputs.load, inputs.blanks, assay, shifts, own="load_")
    return np.asarray(read.mean(axis=-1) * factor)


def liquid_of(inputs: Inputs, assay: Assay, shifts: Shifts) -> Array:
    """Return the concentration of each fraction, mg/mL, shape (..., n, J)."""
    wells, stages = inputs.shape
    flat = dict(shifts)
    for name in ("read", "path", "dilution"):
        if name in flat:
            given = np.asarray(flat[name])
            tail = given.shape[-1:] if name == "read" else ()
            lead = given.shape[: given.ndim - 2 - len(tail)]
            flat[name] = given.reshape(*lead, wells * stages, *tail)
    found = concentration(inputs.samples, inputs.blanks, assay, flat)
    return found.reshape(*found.shape[:-1], wells, stages)


def volumes_of(inputs: Inputs, assay: Assay, shifts: Shifts) -> Volumes:
    """Return the volumes as the shifts move them; none falls below 0."""
    given = inputs.volumes
    hold_up = given.hold_up * _above_0(1.0 + assay.hold_up_well_cv * _shift(shifts, "hold_up"))
    mean = _above_0(1.0 + assay.hold_up_mean_cv * _shift(shifts, "hold_up_mean"))
    resin = given.resin * _above_0(1.0 + assay.resin_well_cv * _shift(shifts, "resin"))
    resin_mean = _above_0(1.0 + assay.resin_mean_cv * _shift(shifts, "resin_mean"))
    return Volumes(
        added=given.added * (1.0 + assay.volume_cv * _shift(shifts, "volume")),
        collected=given.collected * (1.0 + assay.weighing_cv * _shift(shifts, "weighing")),
        hold_up=hold_up * mean[..., None],
        resin=resin * resin_mean[..., None],
    )


def _shift(shifts: Shifts, name: str) -> Array:
    return np.asarray(shifts.get(name, 0.0))


def _above_0(factor: Array) -> Array:
    return np.where(factor.real < 0, 0.0, factor)


def results(inputs: Inputs, assay: Assay, shifts: Shifts | None = None) -> dict[str, Array]:
    """Return all quantities of `balance.QUANTITIES`, each of shape (..., n).

    `shifts` move the inputs, in standard uncertainties: names and shapes as in `sources`, with the
    same leading axes at all of them.
    """
    shifts = shifts or {}
    with np.errstate(invalid="ignore", divide="ignore"):
        liquid = liquid_of(inputs, assay, shifts)
        load = load_of(inputs, assay, shifts)
        kinds = [stage.stage for stage in assay.stages]
        return balance(liquid, load, volumes_of(inputs, assay, shifts), kinds)
