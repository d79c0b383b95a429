"""The next plate: conditions at final wells, each with a reason, and what it promises."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from muntin.bench.layout import default_controls, lay_out
from muntin.bench.outlay import Outlay
from muntin.bench.protein import protein_left_mg, protein_needed_mg
from muntin.design.further import prospects
from muntin.design.reasons import reasons
from muntin.design.selection import Aim, Selection, select
from muntin.design.stopping import Ruling, asked_of_set_point, rule_on
from muntin.record.faults import Fault, StudyFaults, number
from muntin.record.study import Study
from muntin.window.assessment import Assessment

AIMS = ("edge", "best", "both")


@dataclass(frozen=True, kw_only=True, eq=False)
class Plan:
    """A plate to run.

    plate: its name. wells: well, role, the factors (raw units, empty for controls), p_now (the
    judged probability today) and reason, in the order of the wells; the index counts in the order
    of choice. forecast: wells (test wells, 0 means no further plate), plates, mg (protein), assays
    (slots) and days where the study says what they take, wrong_share (expected share of the range
    still called wrongly), set_point (expected probability of the set point) and reached (chance
    that it reaches what the stop rule asks, else what the window requires); the last three are NaN
    before anything was read, but for the share at 0. ruling: the forecast against the stop
    rule. seed: of the choice and of the layout.
    """

    plate: str
    wells: pd.DataFrame
    forecast: pd.DataFrame
    aim: Aim
    seed: int
    protein_mg: float | None
    notices: tuple[str, ...]
    ruling: Ruling


def propose(view: Assessment, wells: int = 24, aim: Aim = "edge", seed: int = 1) -> Plan:
    """Choose the next plate: `wells` test wells, and bridging wells and controls on top.

    aim: `edge` (most about the edge of the window), `best` (expected improvement) or `both` in
    turns. Raises StudyFaults where plate or protein do not suffice, ValueError for another aim.
    """
    if aim not in AIMS:
        raise ValueError(f"aim {aim!r} is none of {', '.join(AIMS)}")
    study = view.study
    controls = _controls(study)
    bridging = 0 if view.fresh else study.definition.plan.bridging_wells
    _check_room(study, wells, bridging, controls)
    selection = select(view, wells, aim, seed)
    rows = _rows(view, selection, controls)
    placed = _placed(study, rows, seed)
    needed = protein_needed_mg(study, placed["role"])
    forecast = _forecast(view, selection, wells)
    return Plan(
        plate=next_plate(study),
        wells=placed,
        forecast=forecast,
        aim=aim,
        seed=seed,
        protein_mg=needed,
        notices=_notices(view, selection),
        ruling=_ruling(view, forecast, wells),
    )


def next_plate(study: Study) -> str:
    """Name of the next plate: the highest number among the plates with wells, plus one."""
    filled = study.wells["plate"].unique()
    numbers = [int(m[1]) for name in filled if (m := re.search(r"(\d+)$", name))]
    return f"plate-{max(numbers, default=0) + 1:02d}"


def _controls(study: Study) -> list[str]:
    counts = default_controls(study.definition.plate, len(study.definition.free_wells))
    return [role for role, count in counts.items() for _ in range(count)]


def _check_room(study: Study, wells: int, bridging: int, controls: list[str]) -> None:
    """Every reason why so many wells cannot be run, in one report."""
    faults: list[Fault] = []
    free = len(study.definition.free_wells)
    extra = f"{bridging} bridging wells and {len(controls)} controls come on top"
    room = free - bridging - len(controls)
    if wells < 1:
        problem = "must be 1 or more"
        faults.append(Fault(file="wells", value=str(wells), problem=problem))
    if wells > room:
        problem, allowed = "is more than the plate has room for;", f"ask for {max(room, 0)}"
        faults.append(_too_many(wells, problem, allowed, f"{free} wells are free; {extra}"))
    left, protein = protein_left_mg(study), study.definition.protein
    if left is not None and protein is not None:
        fixed = protein_needed_mg(study, ["bridge"] * bridging + controls) or 0.0
        enough = int(max(0.0, (left - fixed) / protein.per_well_mg + 1e-9))
        if wells > enough:
            hint = f"{number(round(left, 6))} mg left beyond the reserve; {extra}"
            problem = "is more than the protein allows;"
            allowed = f"ask for {enough}" if enough else "not even the bridging wells fit"
            faults.append(_too_many(wells, problem, allowed, hint))
    if faults:
        raise StudyFaults(faults)


def _too_many(wells: int, problem: str, allowed: str, hint: str) -> Fault:
    return Fault(file="wells", value=str(wells), problem=problem, allowed=allowed, hint=hint)


def _rows(view: Assessment, selection: Selection, controls: Sequence[str]) -> pd.DataFrame:
    """The plan's rows in order of choice, controls last, without wells."""
    definition = view.study.definition
    picked = [pick.candidate for pick in selection.picks]
    conditions = selection.candidates.iloc[picked].reset_index(drop=True)
    p_mean = view.judged(conditions, "mean")
    p_now = view.judged(conditions, definition.judged_by)
    said = reasons(definition, selection, p_mean, p_now, opening=view.fresh)
    rows = conditions.assign(role=[pick.role for pick in selection.picks], p_now=p_now, reason=said)
    control = pd.DataFrame({"role": list(controls), "reason": [_CONTROL[c] for c in controls]})
    return pd.concat([rows, control], ignore_index=True)


_CONTROL = {
    "blank": "buffer on resin, no protein: the blank of the readings",
    "load": "the load itself: what all recoveries are divided by",
    "no_resin": "protein without resin: what filter and plastic keep",
}


def _placed(study: Study, rows: pd.DataFrame, seed: int) -> pd.DataFrame:
    """The rows at their final wells, in plate order."""
    definition = study.definition
    names = list(definition.factor_names)
    keys = [None if pd.isna(row[0]) else tuple(row) for row in rows[names].itertuples(index=False)]
    limited = [f.name for f in definition.factors if f.per_plate is not None]
    stocks = [
        None if key is None else tuple(key[names.index(n)] for n in limited or names[:1])
        for key in keys
    ]
    try:
        wells = lay_out(
            list(rows["role"]),
            plate=definition.plate,
            rng=np.random.default_rng((seed, 1)),
            free_wells=definition.free_wells,
            prepared_by=definition.plan.prepared_by,
            stocks=stocks,
            conditions=keys,
        )
    except ValueError as error:
        hint = "free more wells, ask for fewer, or lower per_plate"
        fault = Fault(file="study.toml", where="plan", problem=str(error), hint=hint)
        raise StudyFaults([fault]) from None
    order = [(w[0], int(w[1:])) for w in wells]
    placed = rows.assign(well=wells).iloc[sorted(range(len(rows)), key=order.__getitem__)]
    return placed[["well", "role", *names, "p_now", "reason"]]


def _forecast(view: Assessment, selection: Selection, wells: int) -> pd.DataFrame:
    bridging = sum(pick.role == "bridge" for pick in selection.picks)
    outlay = Outlay(view.study, bridging)
    counts = outlay.counts(wells)
    table = outlay.table(counts)
    if view.fresh:
        # Before any reading the prior alone would speak, and it has seen no plateau yet.
        shares = [selection.forecast[0], *[np.nan] * (len(counts) - 1)]
        return table.assign(wrong_share=shares, set_point=np.nan, reached=np.nan)
    limit = asked_of_set_point(view.study)
    ahead = prospects(view, view.window(), selection, counts, outlay.rooms, limit)
    return table.assign(
        wrong_share=[p.wrong_share for p in ahead],
        set_point=[p.set_point for p in ahead],
        reached=[p.reached for p in ahead],
    )


def _ruling(view: Assessment, forecast: pd.DataFrame, wells: int) -> Ruling:
    ruling = rule_on(forecast, view.study.stopping.rule, wells)
    if view.fresh or ruling.because == "no rule":
        return ruling
    if view.awaited:
        return Ruling(word="none", because="awaited")
    return Ruling(word="none", because="unsupported") if view.window().unsupported else ruling


def _notices(view: Assessment, selection: Selection) -> tuple[str, ...]:
    notices = []
    if view.awaited:
        labels = {r.name: r.label for r in view.study.definition.responses}
        names = ", ".join(labels[name] for name in view.awaited)
        notices.append(f"provisional: no reading yet of {names}, which the plan does not weigh")
    read = {
        plate
        for r in view.study.definition.responses
        if r.name in view.stacks
        for plate in view.study.readings(r.name)["plate"]
    }
    unread = [p for p in view.study.informing()["plate"].unique() if p not in read]
    if unread:
        names = ", ".join(unread)
        notices.append(f"no reading yet of {names}: the plan does not know of wells there")
    bridged = any(pick.role == "bridge" for pick in selection.picks)
    if view.study.definition.plan.bridging_wells and not view.fresh and not bridged:
        notices.append("no bridging wells: no earlier condition lies in the plan's range")
    notices += _saving(selection.forecast) if not view.fresh else []
    return tuple(notices)


def _saving(forecast: Sequence[float]) -> list[str]:
    """What fewer test wells would do, where that is nearly as much."""
    gained = forecast[0] - np.array(forecast)
    enough, wells = int(np.argmax(gained >= 0.9 * gained[-1])), len(forecast) - 1
    if enough == 0:
        return ["these wells would bring nothing more about the edge"]
    if enough == wells:
        return []
    some, last = (f"{100.0 * forecast[k]:.1f} %" for k in (enough, wells))
    word = "well" if enough == 1 else "wells"
    against = "as" if some == last else f"against {last}"
    return [
        f"{enough} test {word} would do nearly as well: {some} still called wrongly, "
        f"{against} with {wells}"
    ]
