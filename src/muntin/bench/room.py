"""Whether a plate and the protein suffice for a plan."""

from __future__ import annotations

from dataclasses import dataclass, replace

import pandas as pd

from muntin.bench.layout import default_controls
from muntin.bench.protein import protein_left_mg, wells_mg
from muntin.record.definition import Definition
from muntin.record.faults import Fault, counted, number
from muntin.record.plan_table import KeptPlan
from muntin.record.study import Study

_SLACK = 1e-9


@dataclass(frozen=True)
class Asked:
    """What a plan is asked to hold.

    wells: test wells in all. bridging: bridging wells that are to be chosen. controls: roles of the
    control wells that are to be added. fill: whether anything is added to what is kept. kept: rows
    that are in the plan already.
    """

    wells: int
    bridging: int
    controls: tuple[str, ...]
    fill: bool
    kept: KeptPlan | None

    @property
    def tests(self) -> int:
        """Test wells that are kept."""
        return 0 if self.kept is None else self.kept.count("test")

    def others(self) -> tuple[int, int, int]:
        """Bridging wells, controls and reference wells of the whole plan."""
        roles = [] if self.kept is None else self.kept.rows["role"].tolist()
        bridging = self.bridging + roles.count("bridge")
        references = roles.count("reference")
        known = roles.count("test") + roles.count("bridge") + references
        return bridging, len(self.controls) + len(roles) - known, references


def asked_of(
    definition: Definition, wells: int | None, usual: int, kept: KeptPlan | None, fresh: bool
) -> Asked:
    """Return what is asked: a whole plate around what is kept, or without `wells` just that."""
    fill = kept is None or wells is not None
    roles = [] if kept is None else kept.rows["role"].tolist()
    counts = default_controls(definition.plate, len(definition.free_wells)) if fill else {}
    controls = [role for role, n in counts.items() for _ in range(n - roles.count(role))]
    bridging = definition.plan.bridging_wells - roles.count("bridge") if fill and not fresh else 0
    if wells is None:
        wells = usual if kept is None else kept.count("test")
    return Asked(wells, max(0, bridging), tuple(controls), fill, kept)


def room_faults(study: Study, asked: Asked) -> list[Fault]:
    """Return every reason why so many wells cannot be run."""
    faults: list[Fault] = []
    if asked.kept is not None and not asked.fill and not asked.wells:
        problem = "holds no test well; keep one, or ask for new ones with --wells"
        return [Fault(file=asked.kept.file, problem=problem)]
    if asked.wells < 1:
        faults.append(Fault(file="wells", value=str(asked.wells), problem="must be 1 or more"))
    elif asked.wells < asked.tests:
        problem = "is fewer than the test wells that are kept;"
        allowed = f"ask for {asked.tests}, or take rows out"
        faults.append(too_many(asked.wells, problem, allowed))
    free = len(study.definition.free_wells)
    room = max(0, free - sum(asked.others()))
    scarce = _protein_faults(study, asked)
    if asked.wells <= room:
        return faults + scarce
    problem, allowed = "is more than the plate has room for;", f"ask for {room}"
    hint = f"{free} wells are free; {_top(asked)}"
    if not scarce or scarce[0].file != "wells":
        return [*faults, too_many(asked.wells, problem, allowed, hint), *scarce]
    if _protein_faults(study, replace(asked, wells=room)):
        allowed = scarce[0].allowed
    problem = "is more than plate and protein allow;"
    return [
        *faults,
        too_many(asked.wells, problem, allowed, f"{free} wells are free; {scarce[0].hint}"),
    ]


def _top(asked: Asked) -> str:
    bridging, controls, references = asked.others()
    more = f", {counted(references, 'reference well')}" if references else ""
    return f"{bridging} bridging wells{more} and {controls} controls come on top"


def _protein_faults(study: Study, asked: Asked) -> list[Fault]:
    """What goes beyond the protein before any condition is chosen."""
    protein, left = study.definition.protein, protein_left_mg(study)
    if protein is None or left is None:
        return []
    spare = left - given_mg(study.definition, asked)
    if not asked.fill and asked.kept is not None and spare < -_SLACK:
        needs = number(round(left - spare, 6))
        problem = f"needs {needs} mg of protein;"
        allowed = f"{number(round(left, 6))} mg are left beyond the reserve"
        return [Fault(file=asked.kept.file, problem=problem, allowed=allowed)]
    if protein.load_factor is None and protein.per_well_mg is not None and asked.fill:
        bridging = asked.bridging * protein.per_well_mg
        more = int(max(0.0, (spare - bridging) / protein.per_well_mg + _SLACK))
        if asked.wells - asked.tests > more:
            return [protein_fault(study, asked, more)]
    elif spare < -_SLACK:
        return [protein_fault(study, asked, 0)]
    return []


def given_mg(definition: Definition, asked: Asked) -> float:
    """Protein in mg of the rows that are kept and the controls that are added."""
    rows = pd.DataFrame({"role": [*asked.controls]}, dtype=object)
    mg = float(wells_mg(definition, rows).sum())
    return mg if asked.kept is None else mg + float(wells_mg(definition, asked.kept.rows).sum())


def protein_fault(study: Study, asked: Asked, more: int) -> Fault:
    """The fault of wells that the protein does not feed; `more` of the new ones it does."""
    left = protein_left_mg(study) or 0.0
    hint = f"{number(round(left, 6))} mg left beyond the reserve; {_top(asked)}"
    enough = asked.tests + more
    allowed = f"ask for {enough}" if enough else "not even the bridging wells fit"
    return too_many(asked.wells, "is more than the protein allows;", allowed, hint)


def too_many(wells: int, problem: str, allowed: str, hint: str = "") -> Fault:
    """A fault of the number of wells asked for."""
    return Fault(file="wells", value=str(wells), problem=problem, allowed=allowed, hint=hint)
