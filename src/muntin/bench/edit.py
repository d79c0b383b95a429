"""What the user changed in a plan: against which offer, why, and what it costs."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from muntin.design.selection import select
from muntin.design.terms import Terms, measured_by_stock
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
    with_reasons,
)
from muntin.record.plan_table import KeptPlan
from muntin.record.readings import INFORMING
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

    def count(self, *kinds: str) -> int:
        """How many changes are of these kinds."""
        return sum(scored.change.kind in kinds for scored in self.changes)


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


def declined(
    definition: Definition, kept: KeptPlan, changes: Sequence[Change]
) -> frozenset[Condition]:
    """Conditions that the user took out of a plan altogether; they are not chosen again."""
    stay = {w.condition for w in wells_of(definition, kept.rows)}
    out = kept.left_out
    whole = out[list(definition.factor_names)].notna().all(axis=1)
    gone = {w.condition for w in wells_of(definition, out[whole])}
    gone |= {c.was.condition for c in changes if c.was is not None}
    return frozenset(c for c in gone - stay if c is not None)


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
    changes = [*_with_wells(changes, kept, placed), *_chosen(definition, placed)]
    offered = None if offer is None else _frame(definition, offer.wells, terms.stocks)
    wells, share = None, None
    if offered is not None and (offered["role"] == "test").any():
        wells = int((offered["role"] == "test").sum())
        again = Terms(held=offered, stocks=terms.stocks, fill=False)
        share = None if view.fresh else select(view, wells, aim, view.seed, again).forecast[-1]
    known = _probabilities(view, changes, terms.stocks)
    every = tuple(
        ScoredChange(change=c, p_was=_of(c.was, known), p_now=_of(c.now, known)) for c in changes
    )
    return Edit(kept=kept, offer=offer, changes=every, offered_wells=wells, offered_share=share)


def _with_wells(changes: Sequence[Change], kept: KeptPlan, placed: pd.DataFrame) -> list[Change]:
    """The changes, each row that had no well with the one that was found for it."""
    empty = kept.rows["well"] == ""
    found = placed[placed["kept"].isin(kept.rows.index[empty])]
    waiting = list(zip(found["role"], found["well"], strict=True))
    out = []
    for change in changes:
        now = change.now
        if now is not None and not now.well:
            at = next(i for i, (role, _) in enumerate(waiting) if role == now.role)
            now = OfferedWell(waiting.pop(at)[1], now.role, now.condition, now.reason)
        out.append(Change(change.kind, change.was, now, change.because))
    return out


def _chosen(definition: Definition, placed: pd.DataFrame) -> list[Change]:
    new = placed[placed["kept"] < 0]
    return [Change("chosen", None, well) for well in wells_of(definition, new)]


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
    measured = measured_by_stock(definition, frame, stocks)
    columns = {f"{n}_measured": measured[:, i] for i, n in enumerate(names)}
    return frame.assign(role=[w.role for w in told], **columns)


def _probabilities(
    view: Assessment, changes: Sequence[Change], stocks: Sequence[Stock]
) -> dict[Condition, float]:
    definition = view.study.definition
    wells = [w for c in changes for w in (c.was, c.now) if w is not None and w.condition]
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


def _of(well: OfferedWell | None, known: dict[Condition, float]) -> float | None:
    return None if well is None or well.condition is None else known.get(well.condition)
