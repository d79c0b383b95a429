"""Truths of the virtual lab, for studies of one recovery over pH and salt before any reading."""

from __future__ import annotations

import re
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.lab import ErrorSizes, Kind, VirtualLab, draw_lab
from muntin.record.definition import STUDY_FILE, Definition
from muntin.record.factors import Factor
from muntin.record.faults import Fault, StudyFaults
from muntin.window.assessment import target_of
from muntin.window.grid import judged_grid

Array = NDArray[np.float64]
KINDS: tuple[Kind, ...] = ("elution", "mixed mode", "island")
_MILLIMOLAR = {"mM": 1.0, "mmol/L": 1.0, "mmol/l": 1.0, "M": 1e3, "mol/L": 1e3, "mol/l": 1e3}
_PH_RANGE, _SALT_RANGE = (2.0, 12.0), (1.0, 2000.0)
_HIGHEST = 0.95
_ROOM, _PLATEAU = 0.1, 0.98
# A study's own range must hold the edge, too.
_SHARE, _TRIES = (0.02, 0.95), 25


@dataclass(frozen=True, kw_only=True)
class LabFactors:
    """Which factor of a study is the lab's pH, which its salt, and how many mM its unit is."""

    ph: Factor
    salt: Factor
    millimolar: float

    def conditions(self, frame: pd.DataFrame) -> Array:
        """PH and salt in mM (n, 2) of conditions with a column a factor, raw units."""
        salt = self.millimolar * frame[self.salt.name].to_numpy(dtype=float)
        return np.column_stack([frame[self.ph.name].to_numpy(dtype=float), salt])

    @property
    def sizes(self) -> ErrorSizes:
        """The bench's errors, with those of setting pH and salt where the study gives them."""
        own: dict[str, float] = {}
        if self.ph.set_sd is not None and not self.ph.set_sd.relative:
            own["ph_sd"] = self.ph.set_sd.value
        if self.salt.set_sd is not None and self.salt.set_sd.relative:
            own["salt_cv"] = self.salt.set_sd.value
        return ErrorSizes(**own)


def lab_factors(definition: Definition) -> LabFactors | None:
    """The factors as the lab's; None where the study is not one recovery over pH and salt.

    A study.toml names no roles: a factor without a unit whose name or label has the word pH is
    taken as the pH, one in mM or M as the salt.
    """
    judged = definition.judged
    if len(definition.factors) != 2 or len(judged) != 1:
        return None
    low, high = judged[0].target
    if judged[0].kind != "fraction" or low is None or high is not None or low > _HIGHEST:
        return None
    acid = [f for f in definition.factors if _is_ph(f)]
    salt = [f for f in definition.factors if f.continuous and f.unit in _MILLIMOLAR]
    if len(acid) != 1 or len(salt) != 1:
        return None
    found = LabFactors(ph=acid[0], salt=salt[0], millimolar=_MILLIMOLAR[salt[0].unit])
    ends = [found.millimolar * end for end in salt[0].span[:2]]
    inside = _within(acid[0].span[:2], _PH_RANGE) and _within(ends, _SALT_RANGE)
    return found if inside else None


def _is_ph(factor: Factor) -> bool:
    words = re.split(r"[^a-z]+", f"{factor.name} {factor.label}".lower())
    return factor.continuous and factor.unit.lower() in ("", "ph") and "ph" in words


def _within(ends: tuple[float, ...] | list[float], allowed: tuple[float, float]) -> bool:
    return allowed[0] <= min(ends) and max(ends) <= allowed[1]


@dataclass(frozen=True, eq=False)
class LabTruth:
    """One drawn lab behind a study's factors and response."""

    definition: Definition
    factors: LabFactors
    lab: VirtualLab

    def passes(self, frame: pd.DataFrame) -> NDArray[np.bool_]:
        """Whether the true recovery reaches the target (n,)."""
        target = target_of(self.definition.judged[0])
        return np.asarray(self.lab.recovery(self.factors.conditions(frame)) >= target.low)

    def read(self, frame: pd.DataFrame, plate: str, rng: np.random.Generator) -> dict[str, Array]:
        """Recovery (n,) that a bench would find in the wells of a new plate."""
        response = self.definition.judged[0]
        reads = self.lab.read(
            self.factors.conditions(frame), rng, self.factors.sizes, [plate] * len(frame)
        )
        return {response.name: reads.recovery * response.unit_size}


@dataclass(frozen=True, eq=False)
class LabRecipe:
    """A lab to be drawn; its kind takes turns with the number."""

    number: int
    seed: int
    definition: Definition
    factors: LabFactors

    @property
    def kind(self) -> Kind:
        """The shape of its window."""
        return KINDS[self.number % len(KINDS)]

    def draw(self) -> LabTruth:
        """Draw labs until 2 to 95 % of the study's range passes.

        Raises StudyFaults where none of 25 does.
        """
        rng = np.random.default_rng((self.seed, self.number))
        target = target_of(self.definition.judged[0]).low
        grid = judged_grid(self.definition)[0]
        room = max(min(_ROOM, 0.5 * (_PLATEAU - target)), 0.0)
        for _ in range(_TRIES):
            try:
                lab = draw_lab(rng, self.kind, target, room=room)
            except RuntimeError:
                break
            truth = LabTruth(self.definition, self.factors, lab)
            if _SHARE[0] <= truth.passes(grid).mean() <= _SHARE[1]:
                return truth
        problem = f"no drawn {self.kind} lab has the edge of its window in this range"
        hint = "rehearse with --truths prior"
        raise StudyFaults([Fault(file=STUDY_FILE, where="factors", problem=problem, hint=hint)])
