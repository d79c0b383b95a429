"""The next plate: conditions at final wells, each with a reason, and what it promises."""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd

from muntin.bench.edit import Edit, declined, edited, scored
from muntin.bench.layout import lay_out
from muntin.bench.mixable import unmixable
from muntin.bench.notebook import plan_card, plan_line
from muntin.bench.outlay import Outlay
from muntin.bench.plan_notices import plan_notices
from muntin.bench.plan_rows import plan_rows
from muntin.bench.protein import protein_left_mg, protein_needed_mg
from muntin.bench.room import Asked, asked_of, given_mg, protein_fault, room_faults, too_many
from muntin.design.budget import ProteinShortError
from muntin.design.further import prospects
from muntin.design.selection import Selection, select
from muntin.design.stopping import Ruling, asked_of_set_point, rule_on
from muntin.design.terms import Terms
from muntin.design.weighing import Aim, NoConditionLeftError
from muntin.record.faults import Fault, Findings, StudyFaults
from muntin.record.levels import check_stocks
from muntin.record.plan_table import KeptPlan, read_plan
from muntin.record.stocks import Stock, planned_stocks
from muntin.record.study import Study
from muntin.window.assessment import Assessment

AIMS = ("edge", "best", "both")
_WELLS = 24


@dataclass(frozen=True, kw_only=True, eq=False)
class Plan:
    """A plate to run.

    plate: its name. wells: well, role, the factors (raw units, empty for controls), p_now (the
    judged probability today, at measured values where a stock has one) and reason, in the order of
    the wells, then the user's own columns of a plan that was kept; the index counts in the order of
    choice. forecast: wells (test wells, 0 means no further plate), plates, mg (protein), assays
    (slots) and days where the study says what they take, wrong_share (expected share of the range
    still called wrongly), set_point (expected probability of the set point) and reached (chance
    that it reaches what the stop rule asks, else what the window requires); the last three are NaN
    before anything was read, but for the share at 0, and the last two where the data do not support
    the window. ruling: the forecast against the stop rule. seed: of the choice and of the layout.
    edit: what was changed in a plan that was kept, None where none was.
    """

    plate: str
    wells: pd.DataFrame
    forecast: pd.DataFrame
    aim: Aim
    seed: int
    protein_mg: float | None
    notices: tuple[str, ...]
    ruling: Ruling
    edit: Edit | None = None

    def __repr__(self) -> str:
        return plan_line(self)

    def _repr_html_(self) -> str:
        return plan_card(self)

    @property
    def wrong_share(self) -> float:
        """Expected share of the range still called wrongly once the plan's own wells are read."""
        tests = int((self.wells["role"] == "test").sum())
        return float(self.forecast.set_index("wells")["wrong_share"][tests])


def propose(
    view: Assessment,
    wells: int | None = None,
    aim: Aim = "edge",
    seed: int = 1,
    keep: str | Path | None = None,
) -> Plan:
    """Choose the next plate: `wells` test wells (24), and bridging wells and controls on top.

    aim: `edge` (most about the edge of the window), `best` (expected improvement) or `both` in
    turns. keep: a plan's table that was edited; its rows stay as they are, and with `wells` a whole
    plate is chosen around them. Stocks in stocks/ that were measured for this plate count with
    their measured values. Raises StudyFaults where the kept plan is at fault, or plate or protein
    do not suffice; ValueError for another aim.
    """
    if aim not in AIMS:
        raise ValueError(f"aim {aim!r} is none of {', '.join(AIMS)}")
    plate = next_plate(view.study)
    asked, stocks = _asked(view.study, view.fresh, wells, plate, keep)
    found = None if asked.kept is None else edited(view, asked.kept, plate)
    terms = _terms(view.study, asked, stocks)
    selection = _selected(view, asked, aim, seed, terms)
    rows = plan_rows(view, selection, asked, found)
    placed = _placed(view.study, rows, seed)
    edit = None
    if asked.kept is not None and found is not None:
        edit = scored(view, asked.kept, found, placed, terms, aim)
    forecast = _forecast(view, selection, rows)
    ruling = _ruling(view, forecast, asked.wells)
    return Plan(
        plate=plate,
        wells=placed.drop(columns="kept"),
        forecast=forecast,
        aim=aim,
        seed=seed,
        protein_mg=protein_needed_mg(view.study, placed),
        notices=plan_notices(view, selection, asked, terms, ruling, found),
        ruling=ruling,
        edit=edit,
    )


def next_plate(study: Study) -> str:
    """Name of the next plate: the highest number among the plates with wells, plus one."""
    filled = study.wells["plate"].unique()
    numbers = [int(m[1]) for name in filled if (m := re.search(r"(\d+)$", name))]
    return f"plate-{max(numbers, default=0) + 1:02d}"


def check_plan(study: Study, wells: int | None = None, keep: str | Path | None = None) -> None:
    """Raise StudyFaults where `propose` would for what is kept, stocks and room; nothing need be
    fitted for it.
    """
    fresh = not any(len(study.readings(r.name)) for r in study.definition.judged)
    _asked(study, fresh, wells, next_plate(study), keep)


def _asked(
    study: Study, fresh: bool, wells: int | None, plate: str, keep: str | Path | None
) -> tuple[Asked, tuple[Stock, ...]]:
    """Read what is kept and the stocks, and look for room; every fault comes in one report."""
    found = Findings()
    stocks = planned_stocks(study.folder, study.definition, plate, found)
    kept = None if keep is None else read_plan(Path(keep), study, plate, stocks, found)
    if keep is None:
        for factor in study.definition.factors:
            if factor.continuous:
                check_stocks(factor, stocks, found)
    asked = asked_of(study.definition, wells, _WELLS, kept, fresh)
    readable = keep is None or kept is not None
    faults = [*found.faults, *(room_faults(study, asked) if readable else [])]
    if faults:
        raise StudyFaults(faults)
    return asked, stocks


def _terms(study: Study, asked: Asked, stocks: tuple[Stock, ...]) -> Terms:
    """What the choice must keep to."""
    kept: KeptPlan | None = asked.kept
    left = protein_left_mg(study)
    budget = None if left is None else left - given_mg(study.definition, asked)
    unfit = unmixable(study.definition)
    if kept is None:
        return Terms(stocks=stocks, budget_mg=budget, unfit=unfit)
    return Terms(
        held=kept.held(),
        declined=declined(study.definition, kept),
        stocks=stocks,
        budget_mg=budget,
        fill=asked.fill,
        unfit=unfit,
    )


def _selected(view: Assessment, asked: Asked, aim: Aim, seed: int, terms: Terms) -> Selection:
    try:
        return select(view, asked.wells, aim, seed, terms)
    except ProteinShortError as short:
        raise StudyFaults([protein_fault(view.study, asked, short.enough)]) from None
    except NoConditionLeftError:
        problem = "cannot be chosen: no condition is left that the plan may use;"
        allowed = "keep fewer levels, or take fewer conditions out"
        if terms.unfit is not None:
            allowed += "; are the stocks of study.toml, [bench] strong enough?"
        raise StudyFaults([too_many(asked.wells, problem, allowed)]) from None


def _placed(study: Study, rows: pd.DataFrame, seed: int) -> pd.DataFrame:
    """The rows at their final wells, in plate order."""
    definition = study.definition
    names = list(definition.factor_names)
    keys = [None if pd.isna(row[0]) else tuple(row) for row in rows[names].itertuples(index=False)]
    prepared = [names.index(name) for name in definition.stock_factors]
    stocks = [None if key is None else tuple(key[i] for i in prepared) for key in keys]
    try:
        wells = lay_out(
            list(rows["role"]),
            plate=definition.plate,
            rng=np.random.default_rng((seed, 1)),
            free_wells=definition.free_wells,
            prepared_by=definition.plan.prepared_by,
            stocks=stocks,
            conditions=keys,
            fixed=[well or None for well in rows["well"]],
        )
    except ValueError as error:
        hint = "free more wells, ask for fewer, or lower per_plate"
        fault = Fault(file="study.toml", where="plan", problem=str(error), hint=hint)
        raise StudyFaults([fault]) from None
    order = [(w[0], int(w[1:])) for w in wells]
    placed = rows.assign(well=wells).iloc[sorted(range(len(rows)), key=order.__getitem__)]
    first = ["well", "role", *names, "p_now", "reason"]
    return placed[[*first, *(name for name in placed if name not in first)]]


def _forecast(view: Assessment, selection: Selection, rows: pd.DataFrame) -> pd.DataFrame:
    """The forecast by test wells; rows: those of the plan in order of choice."""
    roles = rows["role"].tolist()
    # An opening plate has nothing to repeat yet, the plates after it do.
    usual = view.study.definition.plan.bridging_wells
    outlay = Outlay(view.study, rows, usual if view.fresh else roles.count("bridge"))
    counts = outlay.counts(roles.count("test"))
    table = outlay.table(counts)
    if view.fresh:
        # Before any reading the prior alone would speak, and it has seen no plateau yet.
        shares = [selection.forecast[0], *[np.nan] * (len(counts) - 1)]
        return table.assign(wrong_share=shares, set_point=np.nan, reached=np.nan)
    limit = asked_of_set_point(view.study)
    ahead = prospects(view, view.window(), selection, counts, outlay.rooms, limit)
    # A window that the data do not support has no set point either.
    told = not view.window().unsupported
    return table.assign(
        wrong_share=[p.wrong_share for p in ahead],
        set_point=[p.set_point if told else np.nan for p in ahead],
        reached=[p.reached if told else np.nan for p in ahead],
    )


def _ruling(view: Assessment, forecast: pd.DataFrame, wells: int) -> Ruling:
    ruling = rule_on(forecast, view.study.stopping.rule, wells)
    if view.fresh or ruling.because == "no rule":
        return ruling
    if view.awaited:
        return Ruling(word="none", because="awaited")
    return Ruling(word="none", because="unsupported") if view.window().unsupported else ruling
