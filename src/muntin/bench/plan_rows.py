"""Rows of a plan in the order of choice, without the wells that are to be found."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from muntin.bench.room import Asked
from muntin.design.reasons import reasons
from muntin.design.selection import Selection
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
    said = reasons(definition, selection, p_mean, p_now, opening=view.fresh)
    rows = conditions.assign(
        role=[pick.role for pick in selection.picks],
        p_now=p_now,
        reason=said,
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
        whole = _as_kept(view, whole, asked.kept, found)
    return whole


def _kept_numbers(kept: KeptPlan | None, selection: Selection) -> list[int]:
    """The number in the kept plan of each pick, -1 for those that were chosen."""
    if kept is None:
        return [-1] * len(selection.picks)
    rows = kept.rows.index[kept.rows["role"].isin(INFORMING)]
    return [-1 if p.held is None else int(rows[p.held]) for p in selection.picks]


def _kept_controls(kept: KeptPlan | None) -> pd.DataFrame:
    if kept is None:
        return pd.DataFrame()
    rows = kept.rows[~kept.rows["role"].isin(INFORMING)]
    pairs = zip(rows["role"], rows["reason"], strict=True)
    said = [reason or _CONTROL[role] for role, reason in pairs]
    columns = {"role": rows["role"], "reason": said, "well": rows["well"], "kept": rows.index}
    return pd.DataFrame(columns)


def _as_kept(view: Assessment, rows: pd.DataFrame, kept: KeptPlan, found: Found) -> pd.DataFrame:
    """The rows with the wells, words and own columns of the kept ones."""
    definition = view.study.definition
    there = wells_of(definition, kept.rows)
    by_hand = [c.now for c in found[1] if c.kind in ("changed", "added")]
    out: list[dict[Any, Any]] = []
    for row in rows.to_dict("records"):
        number = row["kept"]
        if number >= 0:
            row["well"] = kept.rows.loc[number, "well"]
            row |= kept.cells.loc[number].to_dict()
            if row["role"] in INFORMING:
                well = there[number]
                own = own_words(well.reason)
                row["reason"] = own or _reason(view, row["reason"], well in by_hand)
                row["reason"] += _measured(view, kept.rows.loc[number])
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


def _measured(view: Assessment, row: pd.Series) -> str:
    """The measured values of a row, as "; pH measured 5.12"."""
    said = []
    for factor in view.study.definition.factors:
        value = row[f"{factor.name}_measured"]
        if np.isfinite(value) and abs(value - row[factor.name]) > 1e-9:
            said.append(f"; {factor.label} measured {value:.6g}")
    return "".join(said)
