"""What so many test wells take: plates, protein, assay slots and days."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import pandas as pd

from muntin.bench.layout import default_controls
from muntin.bench.protein import protein_left_mg, protein_needed_mg
from muntin.design.further import Rooms
from muntin.record.study import Study

COUNTS = (0, 6, 12, 24, 48, 96)


@dataclass(frozen=True)
class Outlay:
    """What plates take beside their test wells: bridging wells, and controls by role, on the next
    plate and on each one after it, which is whole.
    """

    study: Study
    bridging: int

    @property
    def controls(self) -> tuple[tuple[str, ...], tuple[str, ...]]:
        """Roles of the controls on the next plate and on each further one."""
        definition = self.study.definition
        first = default_controls(definition.plate, len(definition.free_wells))
        return _roles(first), _roles(default_controls(definition.plate))

    @property
    def rooms(self) -> Rooms:
        """Test wells that fit on the next plate and on each further one."""
        definition, (first, further) = self.study.definition, self.controls
        return Rooms(
            first=len(definition.free_wells) - self.bridging - len(first),
            further=definition.plate - self.bridging - len(further),
        )

    def counts(self, asked: int) -> tuple[int, ...]:
        """Numbers of test wells to forecast: those of COUNTS that plates and protein allow, and
        the number asked for.
        """
        left, rooms = protein_left_mg(self.study), self.rooms
        most = max(COUNTS) if rooms.further > 0 else rooms.first
        fit = [k for k in COUNTS if k <= most and (left is None or self.mg(k) <= left + 1e-9)]
        return tuple(sorted({*fit, asked}))

    def mg(self, wells: int) -> float:
        """Protein in mg; 0 where the study does not say."""
        plates, (first, further) = self.rooms.plates(wells), self.controls
        roles = ["test"] * wells + ["bridge"] * (plates * self.bridging)
        roles += [*first, *further * (plates - 1)] if plates else []
        return protein_needed_mg(self.study, roles) or 0.0

    def assays(self, wells: int) -> float:
        """Assay slots of test and bridging wells; 0 where the study does not say."""
        bridging = self.rooms.plates(wells) * self.bridging
        return (self.study.definition.plan.assays_per_well or 0.0) * (wells + bridging)

    def days(self, wells: int) -> float:
        """Days until the last result is in, plates one after the other, assays after them."""
        plan = self.study.definition.plan
        queue = 0.0 if plan.assays_per_day is None else self.assays(wells) / plan.assays_per_day
        return self.rooms.plates(wells) * (plan.days_per_plate or 0.0) + queue

    def table(self, counts: Sequence[int]) -> pd.DataFrame:
        """A row a number of test wells: wells, plates, and mg, assays and days where the study
        says what they take.
        """
        definition = self.study.definition
        plan = definition.plan
        table = pd.DataFrame({"wells": list(counts)})
        table["plates"] = [self.rooms.plates(k) for k in counts]
        if definition.protein is not None:
            table["mg"] = [self.mg(k) for k in counts]
        if plan.assays_per_well is not None:
            table["assays"] = [self.assays(k) for k in counts]
        if plan.days_per_plate is not None or plan.assays_per_day is not None:
            table["days"] = [self.days(k) for k in counts]
        return table


def _roles(counts: dict[str, int]) -> tuple[str, ...]:
    return tuple(role for role, count in counts.items() for _ in range(count))
