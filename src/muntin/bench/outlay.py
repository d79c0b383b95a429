"""What so many test wells take: plates, protein, assay slots and days."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.bench.layout import default_controls
from muntin.bench.protein import protein_left_mg, protein_needed_mg, wells_mg
from muntin.design.further import Rooms
from muntin.record.study import Study

COUNTS = (0, 6, 12, 24, 48, 96)


@dataclass(frozen=True, eq=False)
class Outlay:
    """What plates take beside and with their test wells.

    plan: rows of the next plate in order of choice (role, and the factor that holds the load).
    bridging: bridging wells of each plate after it, which is whole and has the usual controls.
    """

    study: Study
    plan: pd.DataFrame
    bridging: int

    @property
    def rooms(self) -> Rooms:
        """Test wells that fit on the next plate and on each further one."""
        definition = self.study.definition
        others = int((self.plan["role"] != "test").sum())
        return Rooms(
            first=len(definition.free_wells) - others,
            further=definition.plate - self.bridging - len(self._controls),
        )

    @property
    def _controls(self) -> list[str]:
        """Roles of the controls of a whole plate."""
        counts = default_controls(self.study.definition.plate)
        return [role for role, count in counts.items() for _ in range(count)]

    def counts(self, asked: int) -> tuple[int, ...]:
        """Numbers of test wells to forecast: those of COUNTS that plates and protein allow, and
        the number asked for.
        """
        left, rooms = protein_left_mg(self.study), self.rooms
        most = max(COUNTS) if rooms.further > 0 else rooms.first
        fit = [k for k in COUNTS if k <= most and (left is None or self.mg(k) <= left + 1e-9)]
        return tuple(sorted({*fit, asked}))

    def mg(self, wells: int) -> float:
        """Protein in mg; 0 where the study does not say. Test wells beyond the plan take what its
        own take on average.
        """
        if not wells:
            return 0.0
        each, test = wells_mg(self.study.definition, self.plan), self._is("test")
        beyond = max(0, wells - int(test.sum()))
        own = each[~test].sum() + each[test][:wells].sum()
        roles = [*self._controls, *["bridge"] * self.bridging] * (self.rooms.plates(wells) - 1)
        further = protein_needed_mg(self.study, roles) or 0.0
        return float(own + (beyond * each[test].mean() if beyond else 0.0) + further)

    def assays(self, wells: int) -> float:
        """Assay slots of test, bridging and reference wells; 0 where the study does not say."""
        if not wells:
            return 0.0
        first = int((self._is("bridge") | self._is("reference")).sum())
        further = (self.rooms.plates(wells) - 1) * self.bridging
        return (self.study.definition.plan.assays_per_well or 0.0) * (wells + first + further)

    def _is(self, role: str) -> NDArray[np.bool_]:
        return np.asarray((self.plan["role"] == role).to_numpy(), dtype=bool)

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
