"""Contact time: the table [uptake] of study.toml, what an uptake curve was run with."""

from __future__ import annotations

from collections.abc import Iterator

from muntin.record.faults import Fault, number
from muntin.record.keys import Keys, Number, key

_FILE = "study.toml"


class UptakeKeys(Keys):
    """What uptake curves were run with, and the contact time that is planned."""

    planned_min: Number | None = key(
        None, says="contact time that is planned", unit="min", example=60.0, gt=0
    )
    feed_mg_per_ml: Number | None = key(
        None,
        says="protein in the liquid at time 0; with phase_ratio it tells the load of a liquid "
        "reading, and the most that can bind",
        unit="mg/mL",
        example=2.0,
        gt=0,
    )
    phase_ratio: Number | None = key(
        None,
        says="liquid in a well for each volume of settled resin; 20 to 40 is usual (common "
        "practice, no source)",
        unit="mL/mL",
        example=30.0,
        gt=0,
    )
    capacity: tuple[Number, Number] = key(
        (4.0, 400.0),
        says="prior: range that holds the load at equilibrium with 95 % probability where protein "
        "is not scarce (common practice, no source)",
        unit="mg/mL resin",
        example=[4.0, 400.0],
    )
    half_time_min: tuple[Number, Number] = key(
        (1.0, 250.0),
        says="prior: range that holds the time to half of equilibrium with 95 % probability "
        "(common practice, no source)",
        unit="min",
        example=[1.0, 250.0],
    )

    @property
    def offered(self) -> float | None:
        """Protein offered in mg per mL of resin, the most that can bind; None where not given."""
        if self.feed_mg_per_ml is None or self.phase_ratio is None:
            return None
        return self.feed_mg_per_ml * self.phase_ratio


def uptake_faults(uptake: UptakeKeys) -> Iterator[Fault]:
    """Yield what is wrong with the ranges of [uptake]."""
    for name in ("capacity", "half_time_min"):
        low, high = getattr(uptake, name)
        if not 0 < low < high:
            yield Fault(
                file=_FILE,
                where=f"uptake, {name}",
                value=f"[{number(low)}, {number(high)}]",
                problem="must be a low and a higher value, both above 0",
            )
