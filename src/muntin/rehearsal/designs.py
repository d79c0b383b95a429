"""The designs that are rehearsed: muntin's own plates, and its rivals of as many test wells."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import pandas as pd

from muntin.bench.layout import default_controls
from muntin.design.selection import Selection, select
from muntin.design.weighing import Aim, NoConditionLeftError
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

    Raises ValueError for a full factorial that no such number of wells holds, StudyFaults where no
    condition is left that a plate may use.
    """
    if name in _LOOKING:
        selection = _selected(view, wells, aim, seed)
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


def _selected(view: Assessment, wells: int, aim: Aim, seed: int) -> Selection:
    try:
        return select(view, wells, aim, seed)
    except NoConditionLeftError:
        problem, value = "no condition is left that may be chosen for", counted(wells, "test well")
        raise StudyFaults([Fault(file="plates", problem=problem, allowed=value)]) from None


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


def room(study: Study, bridging_wells: int, number: int = 0) -> int:
    """Test wells that new plate `number`, from 0, has room for beside its controls and so many
    bridging wells.
    """
    return _free(study, number) - len(controls(study, number)) - bridging_wells


def controls(study: Study, number: int = 0) -> tuple[str, ...]:
    """The roles of the controls of new plate `number`, from 0, one a well."""
    counts = default_controls(study.definition.plate, _free(study, number))
    return tuple(role for role, count in counts.items() for _ in range(count))


def _free(study: Study, number: int) -> int:
    """Wells of new plate `number`: the free ones of the first, all of those that follow."""
    definition = study.definition
    return definition.plate if number else len(definition.free_wells)


def check_sizes(study: Study, sizes: Sequence[int], fresh: bool) -> None:
    """Raise StudyFaults with every plate that cannot hold its test wells."""
    faults = [] if sizes else [Fault(file="plates", problem="none is given to rehearse")]
    for number, wells in enumerate(sizes):
        tie = 0 if fresh and not number else study.definition.plan.bridging_wells
        most = max(room(study, tie, number), 0)
        where, value = f"plate {number + 1}", counted(wells, "test well")
        if wells < 1:
            fault = Fault(file="plates", where=where, value=str(wells), problem="must be 1 or more")
            faults.append(fault)
        elif wells > most:
            problem, allowed = "are more than a plate has room for;", f"ask for {most}"
            hint = f"{tie} bridging wells and {len(controls(study, number))} controls come on top"
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
