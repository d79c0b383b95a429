"""Go on, go on with fewer, or stop: the forecast against the stop rule."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
import pandas as pd

from muntin.record.definition import StopRule
from muntin.record.study import Study

Word = Literal["go on", "go on with fewer", "stop", "none"]
Because = Literal[
    "met",
    "enough",
    "more are needed",
    "out of reach",
    "nothing gained",
    "no rule",
    "no reading",
    "awaited",
    "unsupported",
]
# Wells that close less than this part of what is missing to the rule bring next to nothing.
_NEXT_TO_NOTHING = 0.1
_EVEN = 0.5


@dataclass(frozen=True, kw_only=True)
class Ruling:
    """What the forecast says against the stop rule; `none` where nothing can be said.

    wells: the fewest test wells of the forecast that are expected to meet the rule (0: it is met
    today); None where none are, or where nothing can be said.
    """

    word: Word
    because: Because
    wells: int | None = None


def asked_of_set_point(study: Study) -> float:
    """Probability that the set point is to reach: the stop rule's, else the required one."""
    rule = study.stopping.rule
    given = None if rule is None else rule.best_probability
    return study.definition.required_probability if given is None else given


def rule_on(forecast: pd.DataFrame, rule: StopRule | None, asked: int) -> Ruling:
    """Judge a forecast (columns wells, ascending from 0, wrong_share and reached) by a rule, for a
    plate of `asked` test wells.

    Wells are expected to meet the rule where the expected share does, or where the set point
    reaches the rule's probability more likely than not.
    """
    if rule is None or (rule.wrong_share is None and rule.best_probability is None):
        return Ruling(word="none", because="no rule")
    if forecast[["wrong_share", "reached"]].isna().any(axis=None):
        return Ruling(word="none", because="no reading")
    missing = _missing(forecast, rule)
    meets = forecast["wells"].to_numpy()[(missing <= 0.0).any(axis=0)]
    if len(meets):
        return _expected(int(meets[0]), asked)
    closed = 1.0 - missing[:, -1] / missing[:, 0]
    if closed.max() < _NEXT_TO_NOTHING:
        return Ruling(word="stop", because="nothing gained")
    return Ruling(word="go on", because="out of reach")


def _expected(wells: int, asked: int) -> Ruling:
    if wells == 0:
        return Ruling(word="stop", because="met", wells=0)
    if wells < asked:
        return Ruling(word="go on with fewer", because="enough", wells=wells)
    because: Because = "enough" if wells == asked else "more are needed"
    return Ruling(word="go on", because=because, wells=wells)


def _missing(forecast: pd.DataFrame, rule: StopRule) -> np.ndarray:
    """How much is missing to each limit of the rule (limits, rows of the forecast)."""
    missing = []
    if rule.wrong_share is not None:
        missing.append(forecast["wrong_share"] - rule.wrong_share)
    if rule.best_probability is not None:
        missing.append(_EVEN - forecast["reached"])
    return np.array(missing, dtype=float)
