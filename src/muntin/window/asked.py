"""Conditions that a user asks about, checked."""

from __future__ import annotations

import numpy as np
import pandas as pd

from muntin.record.faults import Fault, StudyFaults, did_you_mean, quoted
from muntin.record.study import Study


def asked_conditions(study: Study, conditions: pd.DataFrame) -> pd.DataFrame:
    """The factor columns of the conditions (raw units), every problem in one StudyFaults."""
    faults: list[Fault] = []
    names = study.definition.factor_names
    for factor in study.definition.factors:
        if factor.name not in conditions:
            hint = did_you_mean(factor.name, [str(c) for c in conditions.columns])
            problem = "is missing"
            faults.append(Fault(file="conditions", column=factor.name, problem=problem, hint=hint))
            continue
        for row, value in enumerate(conditions[factor.name], start=1):
            problem = _value_problem(factor.choices, factor.scale, value)
            if problem:
                allowed = factor.range_text
                faults.append(
                    Fault(
                        file="conditions",
                        where=f"row {row}",
                        column=factor.name,
                        value=quoted(value),
                        problem=problem,
                        allowed=allowed,
                    )
                )
    if faults:
        raise StudyFaults(faults)
    return conditions[list(names)].reset_index(drop=True)


def _value_problem(choices: tuple[str, ...] | None, scale: str, value: object) -> str:
    if choices is not None:
        return "" if isinstance(value, str) and value in choices else "is not"
    if not isinstance(value, int | float | np.integer | np.floating) or isinstance(value, bool):
        return "is not a number in"
    if not np.isfinite(value):
        return "is not a number in"
    return "lies at or below 0, outside" if scale == "log" and value <= 0 else ""
