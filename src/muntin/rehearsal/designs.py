"""The designs that are rehearsed: muntin's own plates, and its rivals of as many test wells."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import pandas as pd

from muntin.bench.layout import default_controls
from muntin.design.selection import Aim, select
from muntin.record.faults import Fault, StudyFaults, counted
from muntin.record.study import Study
from muntin.rehearsal.spread import bridging, full_factorial, space_filling
from muntin.window.assessment import Assessment

Name = Literal["plate by plate", "one shot", "space filling", "full factorial"]
OWN: Name = "plate by plate"
_LOOKING: tuple[Name, ...] = (OWN, "one shot")


@dataclass(frozen=True, eq=False)
class Design:
    """A way to choose the wells of so many plates.

    sizes: test wells of each plate. first: the first plate, role and factors (raw units), a row a
    well; it is the same on every truth.
    """

    name: Name
    sizes: tuple[int, ...]
    first: pd.DataFrame

    def plate(self, view: Assessment, number: int, aim: Aim, seed: int) -> pd.DataFrame:
        """Plate `number`, from 0: role and factors (raw units), once the earlier ones are read."""
        return wells_of(self.name, view, self.sizes[number], aim, seed) if number else self.first


def wells_of(name: Name, view: Assessment, wells: int, aim: Aim, seed: int) -> pd.DataFrame:
    """Role and factors (raw units) of one plate of so many test wells, bridging wells first.

    Raises ValueError for a full factorial that no such number of wells holds.
    """
    if name in _LOOKING:
        selection = select(view, wells, aim, seed)
        chosen = selection.candidates.iloc[[pick.candidate for pick in selection.picks]]
        return chosen.reset_index(drop=True).assign(role=[p.role for p in selection.picks])
    tie = bridging(view)
    if name == "space filling":
        tests: pd.DataFrame | None = space_filling(view, wells, tie)
    else:
        tests = full_factorial(view.study.definition, wells, tie)
    if tests is None:
        raise ValueError(f"no full factorial has {wells} wells or fewer")
    parts = [part.assign(role=role) for part, role in ((tie, "bridge"), (tests, "test"))]
    return pd.concat([part for part in parts if len(part)], ignore_index=True)


def designs_for(
    view: Assessment, sizes: Sequence[int], aim: Aim, seed: int
) -> tuple[tuple[Design, ...], tuple[str, ...]]:
    """The designs of a rehearsal with their first plates, and notices on rivals left out.

    sizes: test wells of each plate, checked.
    """
    sizes, total = tuple(sizes), sum(sizes)
    wanted: list[tuple[Name, tuple[int, ...]]] = [(OWN, sizes)]
    notices: list[str] = []
    if total > room(view.study, 0 if view.fresh else view.study.definition.plan.bridging_wells):
        left_out = "one shot and full factorial" if len(sizes) > 1 else "full factorial"
        notices.append(f"no {left_out}: {total} test wells do not fit one plate")
    else:
        wanted += [("one shot", (total,))] if len(sizes) > 1 else []
        wanted += [("full factorial", (total,))]
    wanted.append(("space filling", sizes))
    designs = []
    for name, plates in wanted:
        try:
            designs.append(Design(name, plates, wells_of(name, view, plates[0], aim, seed)))
        except ValueError as error:
            notices.append(f"no {name}: {error}")
    return tuple(designs), tuple(notices)


def room(study: Study, bridging_wells: int) -> int:
    """Test wells that one plate has room for beside its controls and so many bridging wells."""
    return len(study.definition.free_wells) - len(controls(study)) - bridging_wells


def controls(study: Study) -> tuple[str, ...]:
    """The roles of the controls of a plate, one a well."""
    definition = study.definition
    counts = default_controls(definition.plate, len(definition.free_wells))
    return tuple(role for role, count in counts.items() for _ in range(count))


def check_sizes(study: Study, sizes: Sequence[int], fresh: bool) -> None:
    """Raise StudyFaults with every plate that cannot hold its test wells."""
    faults = [] if sizes else [Fault(file="plates", problem="none is given to rehearse")]
    for number, wells in enumerate(sizes, start=1):
        tie = 0 if fresh and number == 1 else study.definition.plan.bridging_wells
        most = max(room(study, tie), 0)
        where, value = f"plate {number}", counted(wells, "test well")
        if wells < 1:
            fault = Fault(file="plates", where=where, value=str(wells), problem="must be 1 or more")
            faults.append(fault)
        elif wells > most:
            problem, allowed = "are more than a plate has room for;", f"ask for {most}"
            hint = f"{tie} bridging wells and {len(controls(study))} controls come on top"
            faults.append(
                Fault(
                    file="plates",
                    where=where,
                    value=value,
                    problem=problem,
                    allowed=allowed,
                    hint=hint,
                )
            )
    if faults:
        raise StudyFaults(faults)
