"""Mass balance of a well through its stages, the hold-up carried from each to the next.

Stage j adds V_j to the hold-up H_(j-1) of the stage before; of the liquid C_j the part E_j is
collected and H_j = H_(j-1) + V_j - E_j stays. What the resin gives away (takes up where negative):

    d_j = C_j (E_j + H_j) - C_(j-1) H_(j-1) - C_L V_j      (the last term while loading)

    bound        m = -sum of d over the loads              = C_L V_L - C_FT (V_L + H), one load
    capacity     q = m / V_R,   Kp = q / C_FT
    of load      sum of C_j E_j over the elutions / (C_L V_L)
    of bound     sum of d_j over the elutions / m: set free; sum of C_j E_j / m: collected
    closure      (all that was collected and the last C_j H_j) / (C_L V_L)

Where a fraction was not weighed as much is collected as was added, and the hold-up is steady.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[Any]
Floats = NDArray[np.float64]

QUANTITIES = (
    "loaded_ug",
    "bound_ug",
    "collected_ug",
    "freed_ug",
    "capacity_mg_ml",
    "log10_kp",
    "collected_of_load",
    "freed_of_bound",
    "collected_of_bound",
    "closure",
)


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Volumes:
    """Volumes of n wells and J stages in µL, each with leading axes where draws have them.

    Parameters
    ----------
    added
        Shape (..., n, J).
    collected
        As weighed, shape (..., n, J), NaN where not weighed.
    hold_up, resin
        Shape (..., n); resin NaN where a well has none.
    """

    added: Array
    collected: Array
    hold_up: Array
    resin: Array

    @property
    def kept(self) -> tuple[Array, Array]:
        """What is collected (..., n, J), and the hold-up before and after each (..., n, J + 1)."""
        weighed = ~np.isnan(self.collected.real)
        left = [np.broadcast_to(self.hold_up, self.added.shape[:-1])]
        taken = []
        for j in range(self.added.shape[-1]):
            gone = np.where(weighed[..., j], self.collected[..., j], self.added[..., j])
            taken.append(gone)
            left.append(left[-1] + self.added[..., j] - gone)
        return np.stack(taken, axis=-1), np.stack(left, axis=-1)


def balance(liquid: Array, load: Array, volumes: Volumes, kinds: Sequence[str]) -> dict[str, Array]:
    """Return what the module's formulas give, each of shape (..., n): names as in QUANTITIES.

    Closure leaves out fractions that were not read; all else that needs one is NaN.

    Parameters
    ----------
    liquid
        Concentration of each fraction, mg/mL, shape (..., n, J), NaN where not read.
    load
        Concentration of the load, mg/mL, shape (...).
    volumes
        Volumes.
    kinds
        What each of the J stages is: load, wash, elution or strip.
    """
    of = {kind: np.array([each == kind for each in kinds]) for kind in ("load", "elution")}
    taken, left = volumes.kept
    masses = liquid * taken
    given = np.asarray(load)[..., None, None] * volumes.added * of["load"]
    loaded = given.sum(axis=-1)
    freed = freed_by_stage(liquid, taken, left) - given
    bound = -freed[..., of["load"]].sum(axis=-1)
    collected = masses[..., of["elution"]].sum(axis=-1)
    set_free = freed[..., of["elution"]].sum(axis=-1)
    last_load = int(np.flatnonzero(of["load"])[-1])
    capacity = bound / volumes.resin
    return {
        "loaded_ug": loaded,
        "bound_ug": bound,
        "collected_ug": collected,
        "freed_ug": set_free,
        "capacity_mg_ml": capacity,
        "log10_kp": _log10(capacity / liquid[..., last_load]),
        "collected_of_load": collected / loaded,
        "freed_of_bound": set_free / bound,
        "collected_of_bound": collected / bound,
        "closure": (_known(masses).sum(axis=-1) + _last(liquid, left)) / loaded,
    }


def freed_by_stage(liquid: Array, taken: Array, left: Array) -> Array:
    """Return C_j (E_j + H_j) - C_(j-1) H_(j-1) in µg, shape (..., n, J)."""
    held = liquid * (taken + left[..., 1:])
    carried = liquid[..., :-1] * left[..., 1:-1]
    first = np.zeros((*carried.shape[:-1], 1))
    return np.asarray(held - np.concatenate([first, carried], axis=-1))


def _log10(ratio: Array) -> Array:
    """The decadic logarithm, NaN where the ratio is not above 0."""
    sound = np.where(ratio.real > 0, ratio, 1.0)
    return np.where(ratio.real > 0, np.log(sound) / np.log(10.0), np.nan)


def _known(values: Array) -> Array:
    return np.where(np.isnan(values.real), 0.0, values)


def _last(liquid: Array, left: Array) -> Array:
    """What the hold-up of the last fraction that was read still holds, µg."""
    kept = _known(liquid * left[..., 1:])
    read = ~np.isnan(liquid.real)
    at = liquid.shape[-1] - 1 - np.argmax(read[..., ::-1], axis=-1)
    at = np.broadcast_to(at, kept.shape[:-1])
    return np.take_along_axis(kept, at[..., None], axis=-1)[..., 0]


def most_collected(added: Sequence[float], hold_up: float) -> float:
    """Return the largest share of what is bound that these elutions collect, even without binding.

    Each collects V / (V + H) of what is in the well, so that 1 - product of H / (V + H) is the cap.
    """
    return 1.0 - float(np.prod([hold_up / (volume + hold_up) for volume in added]))
