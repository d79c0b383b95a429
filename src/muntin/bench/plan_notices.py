"""Notices of a plan: what it does not know, lacks, or could do with less."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence

import numpy as np

from muntin.bench.edit import chosen_again
from muntin.bench.layout import default_controls
from muntin.bench.room import Asked
from muntin.design.selection import Selection
from muntin.design.stopping import Ruling
from muntin.design.terms import Terms
from muntin.record.bottles import alike
from muntin.record.definition import Definition
from muntin.record.faults import counted, listed, number
from muntin.record.offers import Change, Offer
from muntin.record.plan_table import KeptPlan
from muntin.record.stock_levels import stock_levels
from muntin.record.stocks import Stock
from muntin.record.unused_stocks import unused_stocks
from muntin.window.assessment import Assessment


def plan_notices(
    view: Assessment,
    selection: Selection,
    asked: Asked,
    terms: Terms,
    ruling: Ruling,
    found: tuple[Offer | None, list[Change]] | None = None,
) -> tuple[str, ...]:
    """Return what the user should know of a plan, in sentences.

    Whether fewer wells would do is told where there is no verdict that says so.
    """
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
    wanted = view.study.definition.plan.bridging_wells
    if wanted and asked.fill and not view.fresh and not bridged:
        notices.append("no bridging wells: no earlier condition lies in the plan's range")
    notices += _of_stocks(view.study.definition, selection, terms.stocks)
    notices += _of_bottles(selection, terms)
    if asked.kept is not None:
        notices += _lacking(view, asked.kept, asked)
    notices += [] if found is None else _again(selection, found[1])
    if not view.fresh and ruling.word == "none":
        notices += _saving(selection.forecast)
    return tuple(notices)


def _of_stocks(definition: Definition, selection: Selection, stocks: Sequence[Stock]) -> list[str]:
    """Stocks of the plan that measured something else than they were made for."""
    rows = selection.candidates.iloc[[pick.candidate for pick in selection.picks]]
    factors = {factor.name: factor for factor in definition.factors}
    levels = stock_levels(definition, rows, stocks)
    notices, blended = [], np.zeros(len(rows), dtype=bool)
    bottles: dict[str, str] = {}
    for stock, used in zip(stocks, levels.used.T, strict=True):
        factor, wells = factors[stock.factor], int(used.sum())
        if not wells or alike(factor, stock.measured, stock.target):
            continue
        if stock.bottle:
            blended |= used
            bottles[stock.bottle] = stock.file
            continue
        said = factor.named(factor.shown(stock.target))
        notices.append(
            f"{said} measured {number(stock.measured)} ({stock.file}): probabilities and "
            f"forecast of {counted(wells, 'well')} are those of the measured value"
        )
    if bottles:
        notices.append(
            f"{listed(bottles, most=4)} measured something else than the target "
            f"({next(iter(bottles.values()))}): probabilities and forecast of "
            f"{counted(int(blended.sum()), 'well')} are those of what the wells then hold"
        )
    return [*notices, *unused_stocks(definition, stocks, levels, "the plan")]


def _of_bottles(selection: Selection, terms: Terms) -> list[str]:
    """Conditions that the stocks of [bench] cannot make."""
    if terms.unfit is None:
        return []
    unfit = terms.unfit(selection.candidates)
    held = {pick.candidate for pick in selection.picks if pick.held is not None}
    kept = sum(bool(unfit[candidate]) for candidate in held)
    notices = []
    if unfit.any():
        notices.append(
            f"{int(unfit.sum())} of {counted(len(unfit), 'candidate')} cannot be mixed from the "
            "stocks (study.toml, [bench]) and were not chosen"
        )
    if kept:
        notices.append(
            f"{counted(kept, 'kept condition')} cannot be mixed from the stocks: muntin prepare "
            "says why, and names the nearest that can"
        )
    return notices


def _lacking(view: Assessment, kept: KeptPlan, asked: Asked) -> list[str]:
    """What a kept plan has less of than the study asks; where it is filled up only repeats may
    be short.
    """
    definition, notices = view.study.definition, []
    wanted = 0 if view.fresh or asked.fill else definition.plan.bridging_wells
    if (bridging := kept.count("bridge")) < wanted:
        notices.append(f"the plan keeps {bridging} of {wanted} bridging wells")
    usual = default_controls(definition.plate, len(definition.free_wells))
    for role, count in ({} if asked.fill else usual).items():
        if kept.count(role) < count:
            notices.append(f"the plan keeps {kept.count(role)} of {count} {role} wells")
    tests = kept.rows[kept.rows["role"] == "test"]
    names = list(definition.factor_names)
    count_of = Counter(tests[names].itertuples(index=False, name=None))
    fewer = sum(n < definition.plan.repeats_min for n in count_of.values())
    if fewer and not asked.fill:
        least = definition.plan.repeats_min
        notices.append(f"{counted(fewer, 'kept condition')} with fewer than {least} wells")
    return notices


def _again(selection: Selection, changes: Sequence[Change]) -> list[str]:
    """Conditions that were taken out of a plan and chosen again."""
    new = [pick.candidate for pick in selection.picks if pick.held is None]
    again = chosen_again(changes, [*selection.candidates.iloc[new].itertuples(index=False)])
    if not again:
        return []
    return [
        f"{counted(again, 'condition')} that you took out chosen again: leave such a row in the "
        "plan with a reason in exclude, and it is not"
    ]


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
