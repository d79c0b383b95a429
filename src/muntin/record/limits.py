"""Limits: which combinations of factors may be run."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pandas as pd

from muntin.record.arithmetic import LimitError, check_limit, holds
from muntin.record.factors import Factor
from muntin.record.faults import Fault, quoted
from muntin.record.keys import Floats, Keys, Text, Truths, key

_PRIMES = (2, 3, 5, 7, 11, 13)


class Limit(Keys):
    """A rule that every new condition must meet."""

    allow: Text = key(
        says="conditions that may be run: arithmetic and comparisons over factors; and, or, not",
        example="salt <= 900 - 150 * (elution_ph - 5)",
    )

    def holds(self, frame: pd.DataFrame) -> Truths:
        """Return which rows of `frame` (a column a factor, raw units) may be run, shape (n,).

        Raises LimitError where the text is not a limit, KeyError where a column is missing.
        """
        columns = {str(name): frame[name].to_numpy() for name in frame.columns}
        return np.array(np.broadcast_to(holds(self.allow, columns), (len(frame),)), dtype=bool)


class Forbidden(Keys):
    """Conditions that no new plan may use."""

    conditions: Text = key(
        says="which conditions: arithmetic and comparisons over factors; and, or, not",
        example="salt >= 400 and elution_ph < 5",
    )
    because: Text = key(says="why, in words", example="the protein precipitates there")

    def covers(self, frame: pd.DataFrame) -> Truths:
        """Return which rows of `frame` (a column a factor, raw units) are meant, shape (n,).

        Raises LimitError where the text is not a rule, KeyError where a column is missing.
        """
        columns = {str(name): frame[name].to_numpy() for name in frame.columns}
        met = holds(self.conditions, columns)
        return np.array(np.broadcast_to(met, (len(frame),)), dtype=bool)


def limit_faults(limits: Sequence[Limit], factors: Sequence[Factor]) -> list[Fault]:
    """Return what is wrong with the limits, each alone and all together."""
    faults = []
    for index, limit in enumerate(limits, start=1):
        try:
            check_limit(limit.allow, factors)
        except LimitError as error:
            faults.append(_fault(index, limit, error.problem, error.hint))
    if faults or not limits:
        return faults
    box = sample_conditions(factors)
    held = np.array([limit.holds(box) for limit in limits])
    for index, limit in enumerate(limits, start=1):
        if not held[index - 1].any():
            faults.append(_fault(index, limit, "is met by no condition in the factors' ranges"))
    if not faults and not held.all(axis=0).any():
        problem = "no condition in the factors' ranges meets all of them"
        faults.append(Fault(file="study.toml", where="limits", problem=problem))
    return faults


def forbidden_faults(
    forbidden: Sequence[Forbidden], limits: Sequence[Limit], factors: Sequence[Factor]
) -> list[Fault]:
    """Return what is wrong with the forbidden conditions; some must be left to plan with."""
    faults = []
    for index, rule in enumerate(forbidden, start=1):
        where = f"forbidden {index}, conditions"
        try:
            check_limit(rule.conditions, factors)
        except LimitError as error:
            faults.append(
                Fault(
                    file="study.toml",
                    where=where,
                    value=quoted(rule.conditions),
                    problem=error.problem,
                    hint=error.hint,
                )
            )
    if faults or not forbidden or limit_faults(limits, factors):
        return faults
    box = sample_conditions(factors, planned=True)
    left = np.all([~rule.covers(box) for rule in forbidden], axis=0)
    for limit in limits:
        left &= limit.holds(box)
    if not left.any():
        problem = "leave no condition that a new plan may use"
        faults.append(Fault(file="study.toml", where="forbidden", problem=problem))
    return faults


def _fault(index: int, limit: Limit, problem: str, hint: str = "") -> Fault:
    where = f"limits {index}, allow"
    value = quoted(limit.allow)
    return Fault(file="study.toml", where=where, value=value, problem=problem, hint=hint)


def sample_conditions(
    factors: Sequence[Factor], most: int = 65_536, planned: bool = False
) -> pd.DataFrame:
    """Return conditions on bench steps over the whole box, a column a factor (raw units).

    planned: over what new plans may use.

    All of them where there are at most `most`; else the corners and `most` points of the Halton
    sequence (Halton 1960), which cover the box evenly.
    """
    levels = [factor.plan_levels() if planned else factor.levels() for factor in factors]
    counts = [len(level) for level in levels]
    if np.prod(counts, dtype=float) <= most:
        picks = np.indices(counts).reshape(len(counts), -1)
    else:
        corners = np.indices([2] * len(counts)).reshape(len(counts), -1)
        even = np.array([_radical_inverse(most, base) for base in _PRIMES[: len(counts)]])
        size = np.array(counts)[:, None]
        picks = np.hstack([corners * (size - 1), np.floor(even * size).astype(int)])
    return pd.DataFrame(
        {
            factor.name: level[pick]
            for factor, level, pick in zip(factors, levels, picks, strict=True)
        }
    )


def _radical_inverse(count: int, base: int) -> Floats:
    """Return 1 to `count` with their digits in `base` mirrored at the point, in (0, 1)."""
    rest, weight = np.arange(1, count + 1), 1.0
    mirrored = np.zeros(count)
    while rest.any():
        weight /= base
        mirrored += weight * (rest % base)
        rest //= base
    return mirrored
