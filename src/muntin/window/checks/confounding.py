"""Factors that go with a plate, a lot or another column, so that nothing tells them apart."""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.factors import Factor
from muntin.record.study import Study
from muntin.window.checks.check import Check

Array = NDArray[np.float64]
Index = NDArray[np.intp]
_DECIDED = 0.9
_FILLED = 0.8
# With so many groups or more, a smooth effect of a number stands out from their single errors.
_MANY = 5
_NOTES = ("resin_lot", "feed_lot", "by")
_OWN = ("plate", "well", "role", "exclude", "p_now", "reason")


def confounding(study: Study) -> list[Check]:
    """Factors whose level a group nearly decides, and the other way round.

    A group decides a factor where it holds 0.9 of the factor's variance, less what as many groups
    would hold by chance. Levels that several groups share, such as a stock made anew for each
    plate, or a condition repeated on a later plate, tell the two apart. With five groups or more
    the effect of a number is smooth beside the errors of single groups: that is a note.
    """
    wells = _read(study)
    named = {by for error in study.definition.shared_errors for by in error.by}
    found: dict[tuple[str, bytes], tuple[bool, list[str]]] = {}
    for name, groups in _groups(study, wells).items():
        for factor in study.definition.factors:
            if factor.name in named:
                continue
            verdict = _together(factor, wells, groups)
            if verdict is not None:
                key = factor.name, groups.tobytes()
                found.setdefault(key, (verdict, []))[1].append(name)
    if not found:
        sentence = "No factor goes with a plate, a lot or another column."
        return [Check("confounding", True, True, sentence)]
    labels = {factor.name: factor.label for factor in study.definition.factors}
    return [_check(labels[name], serious, groups) for (name, _), (serious, groups) in found.items()]


def _check(label: str, serious: bool, groups: list[str]) -> Check:
    what = " and ".join(groups)
    if serious:
        sentence = (
            f"{label} goes with {what}: each level was run on its own, so an effect of {label} "
            f"cannot be told from an error of the {what}; repeat conditions across them."
        )
    else:
        sentence = (
            f"{label} goes with {what}: each level has its own, so their errors scatter along "
            f"{label}; a shared error by {groups[0]} would say so."
        )
    return Check("confounding", False, serious, sentence)


def _read(study: Study) -> pd.DataFrame:
    """The informing wells with at least one reading."""
    wells = study.informing()
    states = [f"{response.name}_state" for response in study.definition.responses]
    return wells[wells[states].isin(["read", "censored"]).any(axis=1)]


def _groups(study: Study, wells: pd.DataFrame) -> dict[str, Index]:
    """Group number (n,) of each well by plate, by notes and by text columns, -1 where empty."""
    definition = study.definition
    columns = {"plate": wells["plate"].astype(str)}
    for note in _NOTES:
        told = {plate.name: getattr(plate, note) or "" for plate in study.plates}
        columns[note] = wells["plate"].map(told)
    ours = [*_OWN, *definition.factor_names, *(r.name for r in definition.responses)]
    ours += [f"{f}{end}" for f in definition.factor_names for end in ("_target", "_measured")]
    responses = [r.name for r in definition.responses]
    ours += [f"{r}{end}" for r in responses for end in ("_sd", "_state", "_side", "_exclude")]
    columns |= {str(n): wells[n] for n in wells.columns if n not in ours and _is_text(wells[n])}
    numbers = {name: _numbers(column) for name, column in columns.items()}
    return {name: groups for name, groups in numbers.items() if groups.max(initial=-1) > 0}


def _is_text(column: pd.Series) -> bool:
    """Whether most cells are filled and some are no numbers."""
    filled = column.astype(str).str.strip()
    filled = filled[~filled.isin(["", "nan"])]
    some_text = pd.to_numeric(filled, errors="coerce").isna().any()
    return bool(some_text) and len(filled) >= _FILLED * len(column)


def _numbers(column: pd.Series) -> Index:
    text = column.astype(str).str.strip()
    return np.asarray(pd.factorize(text.where(text != ""))[0], dtype=np.intp)


def _together(factor: Factor, wells: pd.DataFrame, groups: Index) -> bool | None:
    """Whether factor and groups go together: None where not, else whether that is serious."""
    filled = groups >= 0
    levels = pd.factorize(wells[f"{factor.name}_target"][filled])[0]
    groups = groups[filled]
    n, count = len(groups), len(np.unique(groups))
    if len(np.unique(levels)) < 2 or count < 2 or n < 2 * count or filled.mean() < _FILLED:
        return None
    values = _values(factor, wells[filled], levels)
    if _decided(values, groups) < _DECIDED or _shared(levels, groups) > 1.0 - _DECIDED:
        return None
    return not factor.continuous or count < _MANY


def _values(factor: Factor, wells: pd.DataFrame, levels: Index) -> Array:
    """A column of values (n, 1) on the factor's scale, or one indicator (n, L) a choice."""
    if not factor.continuous:
        return np.eye(levels.max() + 1)[levels]
    x = wells[f"{factor.name}_target"].to_numpy(dtype=float)
    return (np.log(x) if factor.scale == "log" else x)[:, None]


def _decided(values: Array, groups: Index) -> float:
    """Share of the variance between groups, less what chance gives as many groups (adjusted R2)."""
    total = ((values - values.mean(0)) ** 2).sum()
    picks = np.eye(groups.max() + 1)[groups]
    counts = np.maximum(picks.sum(0), 1.0)
    means = (picks.T @ values) / counts[:, None]
    within = ((values - means[groups]) ** 2).sum()
    n, k = len(groups), len(np.unique(groups))
    if n <= k or total <= 0.0:
        return 0.0
    return float(1.0 - within / total * (n - 1.0) / (n - k))


def _shared(levels: Index, groups: Index) -> float:
    """Share of wells whose group is not the usual one of their level."""
    table = np.zeros((levels.max() + 1, groups.max() + 1))
    np.add.at(table, (levels, groups), 1.0)
    return float(1.0 - table.max(1).sum() / len(levels))
