"""The study definition: all keys of study.toml, and what must hold between them."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Literal

import numpy as np
import pandas as pd

from muntin.record.assay import Assay, FixedWell, assay_faults, known_fixed
from muntin.record.bench import Bench, bench_faults
from muntin.record.columns import Columns, column_faults
from muntin.record.factors import Factor, factor_faults
from muntin.record.faults import Fault, did_you_mean, number, quoted
from muntin.record.keys import Keys, Number, NumberOrText, ShareKey, Text, Truths, Whole, key
from muntin.record.limits import Forbidden, Limit, forbidden_faults, limit_faults
from muntin.record.protein import Protein, protein_faults
from muntin.record.responses import Response, response_faults
from muntin.record.uptake_keys import UptakeKeys, uptake_faults
from muntin.record.wells import WellError, all_wells, last_well, wells_in

STUDY_FILE = "study.toml"
MOST = 6


class StudyTable(Keys):
    """What the study is, and how it is judged."""

    title: Text = key(says="one line that names the study", example="Elution from a resin")
    plate: Literal[96, 384] = key(96, says="wells of a plate: 96 or 384", unit="wells", example=96)
    required_probability: ShareKey = key(
        0.90,
        says="a condition must reach this probability to lie in the window; fixed before data; "
        'a number from 0 to 1, or a share such as "90 %"',
        example=0.90,
        gt=0,
        lt=1,
    )
    judged_by: Literal["mean", "well", "kept"] | None = key(
        None,
        says='what must meet the targets: the process "mean", a new "well", or a well while the '
        'factors are "kept" within their tolerances; "kept" where kept_within is given, else '
        '"well"',
        example="well",
    )


class SharedError(Keys):
    """An error that several wells share."""

    by: tuple[Text, ...] = key(
        says='wells that agree in these share the error: "plate", factors, or columns',
        example=["plate"],
    )
    acts: Literal["scale", "inside"] = key(
        "scale",
        says='"scale" multiplies the readings (load, blank, calibration); "inside" moves the '
        "process itself (a stock made a little wrong)",
        example="scale",
    )
    responses: tuple[Text, ...] | None = key(
        None, says="responses that it touches; all where absent", example=["recovery"]
    )


class PlanRules(Keys):
    """How new plates are planned."""

    bridging_wells: Whole = key(
        4,
        says="wells that repeat earlier conditions on each new plate: a known pass twice, a known "
        "fail twice",
        unit="wells",
        example=4,
        ge=0,
    )
    repeats_min: Whole = key(
        1, says="wells that each new condition gets at least", unit="wells", example=1, ge=1
    )
    free_wells: Text | None = key(
        None, says="wells still free on a part-used plate; all where absent", example="A1:H12"
    )
    prepared_by: Literal["row", "column", "well"] = key(
        "well", says='how stocks reach the plate: by "row", "column" or "well"', example="well"
    )
    days_per_plate: Number | None = key(
        None,
        says="from pipetting a plate to its last plate read, assays that queue not counted",
        unit="days",
        example=2.0,
        gt=0,
    )
    assays_per_well: Number | None = key(
        None,
        says="assay slots (chromatography runs, wells of an assay plate) that one test or bridging "
        "well takes",
        unit="slots",
        example=1.0,
        gt=0,
    )
    assays_per_day: Number | None = key(
        None,
        says="assay slots that are free a day, where results wait for them; needs assays_per_well",
        unit="slots",
        example=96.0,
        gt=0,
    )


class StopRule(Keys):
    """When to stop, fixed before data: when either holds."""

    wrong_share: ShareKey | None = key(
        None,
        says="stop when no more than this share of the range may still be called wrongly; a "
        'number from 0 to 1, or a share such as "2 %"',
        example=0.02,
        gt=0,
        lt=1,
    )
    best_probability: ShareKey | None = key(
        None, says="stop when the set point reaches this probability", example=0.95, gt=0, lt=1
    )
    changed_because: Text | None = key(
        None,
        says="why this rule differs from the one recorded before data; without a reason the "
        "recorded rule holds",
        example="the next step takes what a lower recovery leaves",
    )


class Definition(Keys):
    """A whole study.toml, frozen."""

    study: StudyTable = key(says="what the study is, and how it is judged")
    factors: tuple[Factor, ...] = key((), says="what is varied, 1 to 6")
    responses: tuple[Response, ...] = key((), says="what is measured, 1 to 6")
    limits: tuple[Limit, ...] = key((), says="combinations that may be run")
    forbidden: tuple[Forbidden, ...] = key(
        (), says="conditions that new plans never use, though they stay in the range that is judged"
    )
    shared_errors: tuple[SharedError, ...] = key(
        (SharedError(by=("plate",), acts="scale"),),
        says='errors that several wells share; where absent, one: by = ["plate"], acts = "scale". '
        "For no shared error at all write shared_errors = [] above [study]",
    )
    protein: Protein | None = key(None, says="what there is to load")
    plan: PlanRules = key(PlanRules(), says="how new plates are planned")
    stop: StopRule | None = key(None, says="when to stop, fixed before data")
    uptake: UptakeKeys = key(
        UptakeKeys(), says="what uptake curves (uptake/*.csv) were run with, for the contact time"
    )
    bench: Bench = key(
        Bench(), says="what wells are mixed from and what the pipette can do, for muntin prepare"
    )
    fixed: dict[str, NumberOrText] = key(
        {}, says="what the window is conditional on, repeated wherever it is stated"
    )
    assay: Assay | None = key(None, says="how plate reads become a recovery (muntin reduce)")
    columns: Columns | None = key(None, says="what a column run takes, for muntin confirm")

    @property
    def title(self) -> str:
        """One line that names the study."""
        return self.study.title

    @property
    def plate(self) -> int:
        """Wells of a plate: 96 or 384."""
        return self.study.plate

    @property
    def required_probability(self) -> float:
        """Probability that a condition must reach to lie in the window."""
        return self.study.required_probability

    @property
    def judged_by(self) -> Literal["mean", "well", "kept"]:
        """What must meet the targets, the default resolved."""
        if self.study.judged_by is not None:
            return self.study.judged_by
        return "kept" if any(factor.kept_within for factor in self.factors) else "well"

    @property
    def judged(self) -> tuple[Response, ...]:
        """Responses with a target."""
        return tuple(response for response in self.responses if response.judged)

    @property
    def factor_names(self) -> tuple[str, ...]:
        """Names of the factors, in order."""
        return tuple(factor.name for factor in self.factors)

    @property
    def fixed_well(self) -> FixedWell:
        """What [fixed] tells of the wells; sound wherever there is an [assay]."""
        return FixedWell.model_validate(known_fixed(self.fixed))

    @property
    def stock_factors(self) -> tuple[str, ...]:
        """Factors that make a prepared stock: those with per_plate, else the first."""
        limited = tuple(f.name for f in self.factors if f.per_plate is not None)
        return limited or self.factor_names[:1]

    @property
    def free_wells(self) -> tuple[str, ...]:
        """Wells that new plans may use, row by row."""
        if self.plan.free_wells is None:
            return all_wells(self.plate)
        return wells_in(self.plan.free_wells, self.plate)

    def allowed(self, frame: pd.DataFrame) -> Truths:
        """Return which rows of `frame` (a column a factor, raw units) meet all limits."""
        held = np.ones(len(frame), dtype=bool)
        for limit in self.limits:
            held &= limit.holds(frame)
        return held

    def forbids(self, frame: pd.DataFrame) -> Truths:
        """Return which rows of `frame` (a column a factor, raw units) no new plan may use."""
        barred = np.zeros(len(frame), dtype=bool)
        for forbidden in self.forbidden:
            barred |= forbidden.covers(frame)
        return barred


def definition_faults(definition: Definition) -> list[Fault]:
    """Return everything that is wrong between the keys of a study definition."""
    faults = [*_count_faults(definition), *_name_faults(definition)]
    own = [fault for factor in definition.factors for fault in factor_faults(factor)]
    faults += own
    faults += [fault for response in definition.responses for fault in response_faults(response)]
    faults += _judging_faults(definition)
    if definition.assay is not None:
        faults += assay_faults(definition.assay, definition.responses, definition.fixed)
    if definition.factors and not own:
        faults += limit_faults(definition.limits, definition.factors)
        faults += forbidden_faults(definition.forbidden, definition.limits, definition.factors)
        faults += bench_faults(definition.bench, definition.factors)
    faults += uptake_faults(definition.uptake)
    if definition.columns is not None:
        faults += column_faults(definition.columns, definition.protein)
    return [*faults, *_shared_faults(definition), *_plan_faults(definition)]


def sound_part(definition: Definition) -> Definition:
    """Return the definition without the factors and responses that have faults of their own.

    When study.toml is at fault, tables are read against it, so that their faults are found too.
    """
    return definition.model_copy(
        update={
            "factors": tuple(f for f in definition.factors if not any(factor_faults(f))),
            "responses": tuple(r for r in definition.responses if not any(response_faults(r))),
        }
    )


def _count_faults(definition: Definition) -> Iterator[Fault]:
    for name, items in (("factors", definition.factors), ("responses", definition.responses)):
        if not 1 <= len(items) <= MOST:
            count = "none is" if not items else f"{len(items)} are"
            problem = f"{count} given; a study has 1 to {MOST} [[{name}]]"
            yield Fault(file=STUDY_FILE, where=name, problem=problem)


def _name_faults(definition: Definition) -> Iterator[Fault]:
    seen: dict[str, str] = {}
    tables = [("factors", factor.name) for factor in definition.factors]
    tables += [("responses", response.name) for response in definition.responses]
    for table, name in tables:
        if name.lower() in seen:
            problem = f"is already the name of one of the {seen[name.lower()]}"
            where = f"{table}, {name}, name"
            hint = "capitals make no difference"
            yield Fault(
                file=STUDY_FILE, where=where, value=quoted(name), problem=problem, hint=hint
            )
        seen.setdefault(name.lower(), table)


def _judging_faults(definition: Definition) -> Iterator[Fault]:
    if definition.responses and not definition.judged:
        problem = "none has at_least or at_most; a study needs a target to judge"
        yield Fault(file=STUDY_FILE, where="responses", problem=problem)
    kept = any(factor.kept_within for factor in definition.factors)
    if definition.study.judged_by == "kept" and not kept:
        yield Fault(
            file=STUDY_FILE,
            where="study, judged_by",
            value='"kept"',
            problem="needs kept_within at one of the factors, and none has it",
        )


def _shared_faults(definition: Definition) -> Iterator[Fault]:
    for index, shared in enumerate(definition.shared_errors, start=1):
        where = f"shared_errors {index}, by"
        if not shared.by or len(set(shared.by)) < len(shared.by):
            problem = 'must name one or more different columns, such as ["plate"]'
            yield Fault(file=STUDY_FILE, where=where, problem=problem)
        taken = {"well", "role", "row", "y", "sd", "exclude"} | {
            r.name for r in definition.responses
        }
        for name in shared.by:
            if name in taken:
                problem = "cannot be shared by wells; name plate, a factor or another column"
                yield Fault(file=STUDY_FILE, where=where, value=quoted(name), problem=problem)
        yield from _touched_faults(definition, shared, f"shared_errors {index}, responses")


def _touched_faults(definition: Definition, shared: SharedError, where: str) -> Iterator[Fault]:
    known = [response.name for response in definition.responses]
    if shared.responses is not None and not shared.responses:
        problem = "must name one or more responses; without this key all are touched"
        yield Fault(file=STUDY_FILE, where=where, problem=problem)
    for name in shared.responses or ():
        if known and name not in known:
            yield Fault(
                file=STUDY_FILE,
                where=where,
                value=quoted(name),
                problem="is not a response",
                hint=did_you_mean(name, known),
            )


def _plan_faults(definition: Definition) -> Iterator[Fault]:
    if definition.protein is not None:
        yield from protein_faults(definition.protein, definition.factors)
    if definition.plan.assays_per_day is not None and definition.plan.assays_per_well is None:
        yield Fault(
            file=STUDY_FILE,
            where="plan, assays_per_day",
            value=number(definition.plan.assays_per_day),
            problem="needs assays_per_well beside it",
        )
    if definition.plan.free_wells is not None:
        try:
            wells_in(definition.plan.free_wells, definition.plate)
        except WellError as error:
            yield Fault(
                file=STUDY_FILE,
                where="plan, free_wells",
                value=quoted(definition.plan.free_wells),
                problem=str(error),
                hint=f"write for example A1:{last_well(definition.plate)}",
            )
