"""Volumes in whole steps of a pipette, counted exactly."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from decimal import Decimal

from muntin.record.bench import Bench

_FINE = "0.1"


@dataclass(frozen=True)
class Pipette:
    """What a pipette can do; a volume is a count of its steps.

    step: µL. floor: the fewest steps that it draws.
    """

    step: Decimal
    floor: int

    def ul(self, steps: int) -> Decimal:
        """A volume in µL, exact."""
        return steps * self.step

    def shown(self, steps: int) -> str:
        """A volume in µL as it is written: 12.5, 200."""
        return volume_text(self.ul(steps))

    def nearest(self, volume_ul: float) -> int:
        """The whole steps nearest to a volume in µL; halves go up."""
        return math.floor(Decimal(repr(float(volume_ul))) / self.step + Decimal("0.5"))


def pipette_of(bench: Bench) -> Pipette:
    """The pipette of a study: steps of 0.1 µL and no floor where it does not say."""
    step = Decimal(_FINE if bench.pipette_step_ul is None else repr(bench.pipette_step_ul))
    floor = Decimal(repr(bench.pipette_floor_ul or 0.0))
    return Pipette(step, max(1, math.ceil(floor / step)))


def volume_text(volume_ul: Decimal) -> str:
    """A volume without needless digits."""
    plain = volume_ul.normalize()
    return f"{plain:f}"


def apportioned(shares: Sequence[float], steps: int) -> list[int]:
    """Share out whole steps so that none is lost: each part is its share rounded down or up, and
    the parts with the largest remainders are those rounded up.

    shares are 0 or above and add up to 1 but for rounding.
    """
    exact = [share * steps for share in shares]
    parts = [math.floor(value + 1e-9) for value in exact]
    behind = sorted(range(len(parts)), key=lambda i: (parts[i] - exact[i], i))
    for i in behind[: steps - sum(parts)]:
        parts[i] += 1
    return parts
