"""What the user changed in a plan: against which offer, why, and what it costs."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd

from muntin.design.selection import select
from muntin.design.terms import Terms
from muntin.design.weighing import Aim
from muntin.record.definition import Definition
from muntin.record.offers import (
    PLANS,
    Change,
    Offer,
    OfferedWell,
    nearest_offer,
    offers_for,
    offers_of,
    wells_of,
    with_chosen,
    with_reasons,
)
from muntin.record.plan_table import KeptPlan
from muntin.record.readings import INFORMING
from muntin.record.stock_levels import stock_levels
from muntin.record.stocks import Stock
from muntin.window.assessment import Assessment

Condition = tuple[object, ...]


@dataclass(frozen=True, kw_only=True)
class ScoredChange:
    """A change with the judged probability (today) of the conditions before and after, None for
    controls and where there is none.
    """

    change: Change
    p_was: float | None
    p_now: float | None


@dataclass(frozen=True, kw_only=True)
class Edit:
    """An edited plan against the one that was offered.

    kept: the file that was edited. offer: the plan it differs least from, None where none is on
    record. offered_wells and offered_share: its test wells, and the expected share still called
    wrongly after them, by what is known today; None where it cannot be judged.
    """

    kept: KeptPlan
    offer: Offer | None
    changes: tuple[ScoredChange, ...]
    offered_wells: int | None = None
    offered_share: float | None = None


def edited(view: Assessment, kept: KeptPlan, plate: str) -> tuple[Offer | None, list[Change]]:
    """Return the offer that an edited plan differs least from, and how, with the user's reasons."""
    definition = view.study.definition
    there = wells_of(definition, kept.rows)
    folder = view.study.folder
    offers = offers_of(folder, definition, plate)
    found = nearest_offer(offers_for(offers, kept.path, folder / PLANS), there)
    offer, changes = (None, [Change("added", None, w) for w in there]) if found is None else found
    out = kept.left_out
    left_out = [
        (OfferedWell(well, role, None), why)
        for well, role, why in zip(out["well"], out["role"], out["exclude"], strict=True)
    ]
    return offer, with_reasons(changes, left_out)


def declined(definition: Definition, kept: KeptPlan) -> frozenset[Condition]:
    """Conditions of rows that were left out with a reason; they are not chosen again."""
    out = kept.left_out
    whole = out[list(definition.factor_names)].notna().all(axis=1)
    return frozenset(w.condition for w in wells_of(definition, out[whole]) if w.condition)


def chosen_again(changes: Sequence[Change], chosen: Sequence[Condition]) -> int:
    """How many conditions were taken out without a reason, and chosen again."""
    gone = {c.was.condition for c in changes if c.was is not None and c.kind == "left out"}
    return len(gone & set(chosen))


def scored(
    view: Assessment,
    kept: KeptPlan,
    found: tuple[Offer | None, list[Change]],
    placed: pd.DataFrame,
    terms: Terms,
    aim: Aim,
) -> Edit:
    """Return the edit with probabilities, the wells that were found for rows without one, and what
    the offer would have left. placed: the rows of the new plan; `kept` holds the number of the row
    that each keeps, -1 for those that were added.
    """
    offer, changes = found
    definition = view.study.definition
    changes = _with_wells(definition, changes, kept, placed)
    new = wells_of(definition, placed[placed["kept"] < 0])
    changes = with_chosen(changes, new)
    offered = None if offer is None else _frame(definition, offer.wells, terms.stocks)
    wells, share = None, None
    if offered is not None and (offered["role"] == "test").any():
        wells = int((offered["role"] == "test").sum())
        again = Terms(held=offered, stocks=terms.stocks, fill=False)
        share = None if view.fresh else select(view, wells, aim, view.seed, again).forecast[-1]
    known = _probabilities(view, changes, terms.stocks)
    here = placed.set_index("well")["p_now"].dropna().to_dict()
    every = tuple(
        ScoredChange(
            change=c,
            p_was=None if c.was is None else known.get(c.was.condition or ()),
            p_now=None if c.now is None else here.get(c.now.well),
        )
        for c in changes
    )
    return Edit(kept=kept, offer=offer, changes=every, offered_wells=wells, offered_share=share)


def _with_wells(
    definition: Definition, changes: Sequence[Change], kept: KeptPlan, placed: pd.DataFrame
) -> list[Change]:
    """The changes, each row that had no well with the one that was found for it."""
    empty = kept.rows.index[kept.rows["well"] == ""]
    waiting = wells_of(definition, placed[placed["kept"].isin(empty)])
    out = []
    for change in changes:
        now = change.now
        if now is not None and not now.well:
            alike = (now.role, now.condition)
            found = next(well for well in waiting if (well.role, well.condition) == alike)
            waiting.remove(found)
            now = replace(now, well=found.well)
        out.append(Change(change.kind, change.was, now, change.because))
    return out


def _frame(
    definition: Definition, wells: Sequence[OfferedWell], stocks: Sequence[Stock]
) -> pd.DataFrame | None:
    """Offered wells as held rows, None where a condition of theirs cannot be judged any more."""
    told = [w for w in wells if w.role in INFORMING and w.condition is not None]
    names = list(definition.factor_names)
    frame = pd.DataFrame([w.condition for w in told], columns=names)
    for factor in definition.factors:
        values = frame[factor.name]
        if factor.continuous:
            low, high, step = factor.span
            numbers = pd.to_numeric(values, errors="coerce")
            if not numbers.between(low - step, high + step).all():
                return None
            frame[factor.name] = numbers.astype(float)
        elif not values.isin(factor.choices or ()).all():
            return None
    measured = stock_levels(definition, frame, stocks).values
    columns = {f"{n}_measured": measured[:, i] for i, n in enumerate(names)}
    return frame.assign(role=[w.role for w in told], **columns)


def _probabilities(
    view: Assessment, changes: Sequence[Change], stocks: Sequence[Stock]
) -> dict[Condition, float]:
    definition = view.study.definition
    wells = [c.was for c in changes if c.was is not None and c.was.condition]
    distinct = list({w.condition: w for w in wells}.values())
    frame = _frame(definition, distinct, stocks)
    if frame is None or not len(frame):
        return {}
    for factor in definition.factors:
        if factor.continuous:
            measured = frame[f"{factor.name}_measured"]
            frame[factor.name] = measured.where(np.isfinite(measured), frame[factor.name])
    p = view.judged(frame[list(definition.factor_names)], definition.judged_by)
    return {w.condition: float(v) for w, v in zip(distinct, p, strict=True) if w.condition}
