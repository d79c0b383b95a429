"""Whether conditions scatter about the surface by more than repeats of a condition do."""

from __future__ import annotations

import numpy as np

from muntin.record.faults import counted
from muntin.record.responses import Response
from muntin.surrogate.fit import Stack
from muntin.surrogate.pure_error import agreement, pure_error
from muntin.window.checks.check import Check

_LEVEL = 0.002
_FEWEST = 3
# Repeats that the prior of the noise lets agree so well less often are asked about.
_TOO_WELL = 0.005


def lack_of_fit(response: Response, stack: Stack) -> list[Check]:
    """Repeats within a condition of a plate, against the noise that the surface needs.

    The classical test compares mean squares; here the noise has a posterior, so the chi-square
    tail of the repeats is averaged over it, and over the fits by their stacking shares.
    """
    found = [pure_error(fit.model, fit.posterior) for fit in stack.fits]
    degrees = found[0].degrees
    repeats = counted(degrees, "repeat") if degrees else "no repeat"
    if degrees < _FEWEST:
        sentence = (
            f"{response.label}: too few repeats to tell lack of fit from noise ({repeats}; "
            f"{_FEWEST} are enough)."
        )
        return [Check("lack of fit", True, True, sentence, response.name, told=False)]
    tail = float(stack.shares @ [f.tail for f in found])
    needed = float(np.exp(stack.shares @ np.log([f.needed for f in found])))
    passed = tail >= _LEVEL
    unit = _unit(response)
    sizes = f"sd {_size(needed, unit)}; {repeats} {_size(found[0].sd, unit)}"
    if passed:
        sentence = (
            f"{response.label}: conditions do not clearly scatter about the surface by more than "
            f"repeats do ({sizes})."
        )
    elif agreement(stack.fits[0].model) < _TOO_WELL:
        sentence = (
            f"{response.label}: repeats agree suspiciously well ({repeats} of sd "
            f"{_size(found[0].sd, unit)}, while the other readings ask for {_size(needed, unit)}): "
            "are they wells of their own from the load to the read, or reads of one eluate? Of "
            "reads of one eluate leave out all but one (exclude); if they are wells of their own "
            'and each condition has its own stock, add a shared error by it that acts "inside".'
        )
    else:
        sentence = (
            f"{response.label}: conditions scatter about the surface more than repeats do "
            f"({sizes}); where each condition has its own stock, add a shared error by it that "
            'acts "inside".'
        )
    return [Check("lack of fit", passed, True, sentence, response.name)]


def _unit(response: Response) -> tuple[float, str]:
    """Size and name of the unit in which a sd of readings is told."""
    if response.kind == "positive":
        return 100.0, " %"
    return response.unit_size, f" {response.unit}".rstrip()


def _size(value: float, unit: tuple[float, str]) -> str:
    return f"{value * unit[0]:.2g}{unit[1]}"
