"""How each plate reads beside what the other plates predict for it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.record.responses import Response
from muntin.record.study import Study
from muntin.surrogate.evenness import evenness, worth_of
from muntin.surrogate.fit import Stack
from muntin.surrogate.group_out import GroupOut, leave_group_out, refit_group_out
from muntin.window.checks.check import Check

Array = NDArray[np.float64]
Index = NDArray[np.intp]
# Level at which some plate of the study is called off where none is.
_LEVEL = 0.02
_UNEVEN = 3.0
# A plate that reweighted nodes put at this share of the limit, or most of whose readings they miss,
# is judged by nodes fitted without it; elsewhere such a fit moves it by less than the rest.
_SUSPECT = 0.85
# A plate of which the others tell less than this share of the readings is not judged.
_COMMON = 0.5
_DO = "; repeat earlier conditions on the next plate"


@dataclass(frozen=True)
class _Plate:
    """One plate beside the others: transforms of its readings, what they are worth as independent
    ones, how far it lies off together, and that in sds of what shared errors and the others allow.
    """

    name: str
    pit: Array
    worth: float
    shift: float
    z: float


def other_plates(study: Study, response: Response, stack: Stack, seed: int) -> list[Check]:
    """Leave-one-plate-out predictions: each plate's common shift against what shared errors and
    the others allow, and the coverage of its readings.

    Conditions of which the other plates hardly tell are left aside, and so is a plate that has few
    others. The readings of one plate are predicted with an error in common, so coverage and
    evenness are judged as if there were fewer of them, by the mean correlation (Kish 1965).
    """
    names = study.readings(response.name)["plate"].to_numpy()
    plates = list(dict.fromkeys(names))
    if len(plates) < 2:
        return []
    limit = _limit(len(plates))
    found = [_plate(str(p), stack, np.flatnonzero(names == p), seed, limit) for p in plates]
    off = [plate for plate in found if abs(plate.z) > limit]
    if len(found) == 2 and off:
        # Each of two is off where the other is; the surer of the two differences is told.
        off = [max(off, key=lambda plate: abs(plate.z))]
    pit = np.concatenate([plate.pit for plate in found])
    hits = int(_inside(pit).sum())
    if not len(pit):
        sentence = (
            f"{response.label}: the plates have too little in common to check one by the others; "
            "bridging wells would tell."
        )
        return [Check("other plates", True, True, sentence, response.name, told=False)]
    others = "plate" if len(found) == 2 else "plates"
    told = f"{hits} of {len(pit)} readings lie in the 90 % range predicted from the other {others}"
    if off:
        said = _off(response, off, len(found), told)
    else:
        said = _uneven(pit, sum(plate.worth for plate in found), told)
    sentence = f"{response.label}: {said or f'{told}; no plate is off'}."
    return [Check("other plates", not said, True, sentence, response.name)]


def _plate(name: str, stack: Stack, readings: Index, seed: int, limit: float) -> _Plate:
    kept = [(f, s) for f, s in zip(stack.fits, stack.shares, strict=True) if s > 0.0]
    outs = [leave_group_out(f.model, f.posterior, readings) for f, _ in kept]
    shares = np.array([s for _, s in kept])
    plate = _mixed(name, outs, shares)
    lost = len(plate.pit) > 0 and bool(_inside(plate.pit).mean() < 0.5)
    if abs(plate.z) > _SUSPECT * limit or lost:
        outs = [refit_group_out(f.model, seed, readings) for f, _ in kept]
        plate = _mixed(name, outs, shares)
    return plate


def _mixed(name: str, outs: list[GroupOut], shares: Array) -> _Plate:
    from scipy.special import ndtri

    pit = shares @ np.stack([out.pit for out in outs])
    told = np.isfinite(pit)
    if told.mean() < _COMMON:
        return _Plate(name, np.zeros(0), 0.0, 0.0, 0.0)
    pit = pit[told]
    place = float(shares @ [out.shift_pit for out in outs])
    z = float(ndtri(np.clip(place, 1e-12, 1.0 - 1e-12)))
    shift = float(shares @ [out.shift for out in outs])
    worth = worth_of(len(pit), float(shares @ [out.likeness for out in outs]))
    return _Plate(name, pit, worth, shift, z)


def _inside(pit: Array) -> NDArray[np.bool_]:
    return (pit > 0.05) & (pit < 0.95)


def _limit(plates: int) -> float:
    """Sds beyond which a plate is off, so that any of them is at _LEVEL (Bonferroni)."""
    from scipy.special import ndtri

    return float(-ndtri(0.5 * _LEVEL / plates))


def _off(response: Response, off: list[_Plate], plates: int, told: str) -> str:
    parts = [f"{plate.name} reads {_size(response, plate.shift)}" for plate in off]
    others = "other plates predict"
    doubt, its = "", "its" if len(off) == 1 else "their"
    if plates == 2:
        others, doubt, its = "other plate predicts", " (of two plates either may be off)", "their"
    return (
        f"{' and '.join(parts)} than the {others}, more than shared errors explain{doubt}; look at "
        f"{its} load, blank and calibration ({told})"
    )


def _size(response: Response, shift: float) -> str:
    more = "more" if shift > 0 else "less"
    if response.kind == "real":
        return f"{abs(shift):.2g}{f' {response.unit}'.rstrip()} {more}"
    share = abs(shift) if response.kind == "fraction" else abs(float(np.expm1(shift)))
    return f"{100 * share:.0f} % {more}"


def _uneven(pit: Array, worth: float, told: str) -> str:
    """What coverage and evenness say against the predictions; "" where they agree."""
    from scipy.stats import binom

    independent = max(1, round(worth))
    least = binom.ppf(0.005, independent, 0.9) / independent
    if len(pit) and _inside(pit).mean() < least:
        few = int(np.ceil(least * len(pit)))
        return f"{told} ({few} or more expected): plates differ by more than is said{_DO}"
    if evenness(pit, worth).width > _UNEVEN:
        return f"{told}, but too many lie far out: plates differ by more than is said{_DO}"
    return ""
