"""Rows of a plan in the order of choice, without the wells that are to be found."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import pandas as pd

from muntin.bench.room import Asked
from muntin.design.reasons import reasons
from muntin.design.selection import Selection
from muntin.record.definition import Definition
from muntin.record.offers import Change, Offer, own_words, wells_of
from muntin.record.plan_table import KeptPlan
from muntin.record.readings import INFORMING
from muntin.window.assessment import Assessment

Found = tuple[Offer | None, list[Change]]
_CONTROL = {
    "blank": "buffer on resin, no protein: the blank of the readings",
    "load": "the load itself: what all recoveries are divided by",
    "no_resin": "protein without resin: what filter and plastic keep",
    "water": "water: the zero of the reader",
}
_BY_HAND = "set by hand"


def plan_rows(
    view: Assessment, selection: Selection, asked: Asked, found: Found | None
) -> pd.DataFrame:
    """The plan's rows in order of choice, controls last: the factors (targets), role, p_now,
    reason, well ("" where it is to be found), kept (number of the row that is kept, else -1).
    """
    definition = view.study.definition
    picked = [pick.candidate for pick in selection.picks]
    conditions = selection.candidates.iloc[picked].reset_index(drop=True)
    actual = selection.actual.iloc[picked].reset_index(drop=True)
    p_mean = view.judged(actual, "mean")
    p_now = view.judged(actual, definition.judged_by)
    plain = reasons(definition, selection, p_mean, p_now, opening=view.fresh)
    measured = _measured(definition, conditions, actual)
    rows = conditions.assign(
        role=[pick.role for pick in selection.picks],
        p_now=p_now,
        reason=[f"{said}{more}" for said, more in zip(plain, measured, strict=True)],
        well="",
        kept=_kept_numbers(asked.kept, selection),
    )
    added = {
        "role": [*asked.controls],
        "reason": [_CONTROL[c] for c in asked.controls],
        "well": "",
        "kept": -1,
    }
    parts = [rows, _kept_controls(asked.kept), pd.DataFrame(added)]
    whole = pd.concat([part for part in parts if len(part)], ignore_index=True)
    if asked.kept is not None and found is not None:
        whole = _as_kept(view, whole, asked.kept, found, measured)
    return whole


def _kept_numbers(kept: KeptPlan | None, selection: Selection) -> list[int]:
    """The number in the kept plan of each pick, -1 for those that were chosen."""
    if kept is None:
        return [-1] * len(selection.picks)
    rows = kept.held().index
    return [-1 if p.held is None else int(rows[p.held]) for p in selection.picks]


def _kept_controls(kept: KeptPlan | None) -> pd.DataFrame:
    if kept is None:
        return pd.DataFrame()
    rows = kept.rows[~kept.rows["role"].isin(INFORMING)]
    pairs = zip(rows["role"], rows["reason"], strict=True)
    said = [reason or _CONTROL[role] for role, reason in pairs]
    columns = {"role": rows["role"], "reason": said, "well": rows["well"], "kept": rows.index}
    return pd.DataFrame(columns)


def _as_kept(
    view: Assessment,
    rows: pd.DataFrame,
    kept: KeptPlan,
    found: Found,
    measured: Sequence[str],
) -> pd.DataFrame:
    """The rows with the wells, words and own columns of the kept ones."""
    definition = view.study.definition
    there = wells_of(definition, kept.rows)
    by_hand = [c.now for c in found[1] if c.kind in ("changed", "added")]
    out: list[dict[Any, Any]] = []
    for at, row in enumerate(rows.to_dict("records")):
        number = row["kept"]
        if number >= 0:
            row["well"] = kept.rows.loc[number, "well"]
            row |= kept.cells.loc[number].to_dict()
            if row["role"] in INFORMING:
                well = there[number]
                own = own_words(well.reason)
                hand = well in by_hand or well.reason.startswith(_BY_HAND)
                said = _reason(view, row["reason"], hand)
                row["reason"] = f"{own}{measured[at]}" if own else said
        out.append(row)
    columns = [*rows.columns, *kept.cells.columns]
    frame = pd.DataFrame(out, columns=columns, index=rows.index)
    own_columns = {name: frame[name].fillna("") for name in kept.cells.columns}
    return frame.assign(**own_columns)


def _reason(view: Assessment, said: str, by_hand: bool) -> str:
    """What is said of a kept row without words of the user's own."""
    if not by_hand:
        return said
    return _BY_HAND if view.fresh else f"{_BY_HAND}: {said}"


def _measured(definition: Definition, targets: pd.DataFrame, actual: pd.DataFrame) -> list[str]:
    """The measured values of each row, as "; pH measured 5.12", "" where they are the targets."""
    said = [""] * len(targets)
    for factor in definition.factors:
        pairs = zip(targets[factor.name], actual[factor.name], strict=True)
        for row, (target, value) in enumerate(pairs):
            if factor.continuous and abs(value - target) > 1e-9:
                said[row] += f"; {factor.label} measured {value:.5g}"
    return said
