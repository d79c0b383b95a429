"""Factors: what is varied, over which range, in which steps."""

from __future__ import annotations

import re
from collections.abc import Iterator
from decimal import Decimal
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray
from pydantic import model_validator

from muntin.record.faults import Fault, did_you_mean, number, quoted
from muntin.record.keys import (
    Amount,
    AmountKey,
    Floats,
    Keys,
    Name,
    Number,
    NumberOrText,
    Text,
    Whole,
    key,
)

_MOST_LEVELS = 100_000
_ONLY_NUMBERS = (
    "low",
    "high",
    "step",
    "scale",
    "kept_within",
    "set_sd",
    "plan_low",
    "plan_high",
)


class Factor(Keys):
    """One thing that is varied: a number between low and high, or one of several choices."""

    name: Name = key(
        says="column name in the plate tables: letters, digits and _", example="elution_ph"
    )
    label: Text = key(
        "", says="name shown in tables and figures; the name where absent", example="Elution pH"
    )
    unit: Text = key("", says="unit shown beside values", example="")
    low: Number | None = key(
        None, says="lowest value of the range", unit="the factor's", example=4.5
    )
    high: Number | None = key(
        None, says="highest value of the range", unit="the factor's", example=7.5
    )
    step: Number | None = key(
        None,
        says="smallest step the bench can make; proposals lie on steps counted from low",
        unit="the factor's",
        example=0.1,
        gt=0,
    )
    scale: Literal["linear", "log"] = key(
        "linear",
        says='"linear", or "log" where ratios matter more than differences',
        example="linear",
    )
    choices: tuple[Text, ...] | None = key(
        None, says="names to choose from, instead of low, high and step", example=["A", "B"]
    )
    kept_within: AmountKey | None = key(
        None,
        says='the process keeps it within plus or minus this; "5 %" is a share of the set value',
        unit="the factor's, or %",
        example=0.1,
    )
    set_sd: AmountKey | None = key(
        None,
        says='the bench sets it with this standard deviation; "2 %" is a share of the set value',
        unit="the factor's, or %",
        example=0.03,
    )
    per_plate: Whole | None = key(
        None, says="at most so many distinct levels on one plate (prepared stocks)", example=6, ge=1
    )
    plan_low: Number | None = key(
        None, says="new plans go no lower; wells already run stay", unit="the factor's", example=5.0
    )
    plan_high: Number | None = key(
        None,
        says="new plans go no higher; wells already run stay",
        unit="the factor's",
        example=7.0,
    )
    plan_choices: tuple[Text, ...] | None = key(
        None, says="new plans use only these choices; wells already run stay", example=["A"]
    )
    earlier_value: NumberOrText | None = key(
        None,
        says="value on earlier plates, whose tables lack the column of a factor added later",
        unit="the factor's",
        example=5.5,
    )

    @model_validator(mode="before")
    @classmethod
    def _label_is_name(cls, data: Any) -> Any:
        if isinstance(data, dict) and not data.get("label") and "name" in data:
            return {**data, "label": data["name"]}
        return data

    @property
    def continuous(self) -> bool:
        """Whether it is a number with a range, not a choice."""
        return self.choices is None

    @property
    def span(self) -> tuple[float, float, float]:
        """Low, high and step in raw units; raises TypeError for a factor with choices."""
        if self.low is None or self.high is None or self.step is None:
            raise TypeError(f"{self.name} has choices, not a range")
        return self.low, self.high, self.step

    def levels(self) -> NDArray[Any]:
        """Return all values on bench steps from low to high (raw unit), or the choices."""
        if self.choices is not None:
            return np.array(self.choices, dtype=object)
        return _steps(*self.span)

    def plan_levels(self) -> NDArray[Any]:
        """Return the levels that new plans may use (raw unit), or the choices they may use."""
        if self.choices is not None:
            return np.array(self.plan_choices or self.choices, dtype=object)
        low, high, step = self.span
        levels = _steps(low, high, step)
        floor = low if self.plan_low is None else self.plan_low
        ceiling = high if self.plan_high is None else self.plan_high
        kept: Floats = levels[(levels >= floor) & (levels <= ceiling)]
        return kept

    def shown(self, value: Any) -> str:
        """Return a value (raw unit) as the bench writes it: 6.0 where steps are 0.1; no unit. One
        off the steps has up to two digits more.
        """
        if self.choices is not None:
            return str(value)
        low, _, step = self.span
        digits = max(_decimals(low), _decimals(step))
        rounded = round(float(value), digits + 2)
        texts = (f"{rounded:.{more}f}" for more in range(digits, digits + 3))
        return next(text for text in texts if float(text) == rounded)

    def named(self, shown: str) -> str:
        """Return label and value, "pH 6.0"; a choice that begins with the label has it already."""
        label = re.escape(self.label)
        if self.choices is not None and re.match(rf"{label}\b", shown, re.IGNORECASE):
            return shown
        return f"{self.label} {shown}"

    @property
    def range_text(self) -> str:
        """The range with its unit, or the choices, for messages."""
        if self.choices is not None:
            return "one of " + ", ".join(self.choices)
        low, high, _ = self.span
        return f"{number(low)} to {number(high)} {self.unit}".rstrip()


def _steps(low: float, high: float, step: float) -> Floats:
    count = int(np.floor((high - low) / step + 1e-9)) + 1
    return np.round(low + step * np.arange(count), max(_decimals(low), _decimals(step)))


def _decimals(value: float) -> int:
    exponent = Decimal(repr(value)).normalize().as_tuple().exponent
    return max(0, -exponent) if isinstance(exponent, int) else 0


def factor_faults(factor: Factor) -> Iterator[Fault]:
    """Yield what is wrong between the keys of one factor."""
    if factor.choices is not None:
        yield from _choice_faults(factor, factor.choices)
        return
    missing = [name for name in ("low", "high", "step") if getattr(factor, name) is None]
    if missing:
        keys = " and ".join(f'"{name}"' for name in missing)
        problem = f"has no {keys}; a factor needs low, high and step, or choices"
        yield Fault(file="study.toml", where=f"factors, {factor.name}", problem=problem)
        return
    yield from _range_faults(factor)


def _choice_faults(factor: Factor, choices: tuple[str, ...]) -> Iterator[Fault]:
    where = f"factors, {factor.name}"
    for name in _ONLY_NUMBERS:
        if name in factor.model_fields_set:
            problem = "is a key of factors with a range; this one has choices"
            yield Fault(file="study.toml", where=where, value=f'"{name}"', problem=problem)
    plain = [choice.strip() for choice in choices]
    if len(plain) < 2 or len(set(plain)) < len(plain) or "" in plain or list(choices) != plain:
        problem = "must be two or more different names, none empty, no blanks around them"
        yield Fault(file="study.toml", where=f"{where}, choices", problem=problem)
    for name in ("plan_choices", "earlier_value"):
        given = getattr(factor, name)
        for choice in given if isinstance(given, tuple) else (given,):
            if choice is not None and choice not in choices:
                yield Fault(
                    file="study.toml",
                    where=f"{where}, {name}",
                    value=quoted(choice),
                    problem="is not among the choices",
                    hint=did_you_mean(str(choice), choices),
                )


def _range_faults(factor: Factor) -> Iterator[Fault]:
    low, high, step = factor.span

    def fault(name: str, value: float, problem: str, allowed: str) -> Fault:
        where = f"factors, {factor.name}, {name}"
        shown = number(value)
        return Fault(file="study.toml", where=where, value=shown, problem=problem, allowed=allowed)

    if low >= high:
        yield fault("low", low, "must lie below high,", f"which is {number(high)}")
        return
    if step > high - low:
        yield fault("step", step, "is larger than the range", factor.range_text)
        return
    if (high - low) / step > _MOST_LEVELS:
        yield fault("step", step, "makes more levels than", f"{_MOST_LEVELS}; take a larger step")
        return
    if factor.scale == "log" and low <= 0:
        yield fault("low", low, "must lie above 0 on a log scale;", 'or set scale = "linear"')
    for name in ("plan_low", "plan_high"):
        value = getattr(factor, name)
        if value is not None and not low <= value <= high:
            yield fault(name, value, "lies outside", factor.range_text)
    yield from _plan_and_extras(factor, low, high)


def _plan_and_extras(factor: Factor, low: float, high: float) -> Iterator[Fault]:
    where = f"factors, {factor.name}"
    ends = (factor.plan_low, factor.plan_high)
    if ends[0] is not None and ends[1] is not None and ends[0] > ends[1]:
        problem = f"lies above plan_high, which is {number(ends[1])}"
        value = number(ends[0])
        yield Fault(file="study.toml", where=f"{where}, plan_low", value=value, problem=problem)
    elif ends != (None, None) and not len(factor.plan_levels()):
        problem = "leave no bench step between them"
        yield Fault(file="study.toml", where=where, value="plan_low and plan_high", problem=problem)
    if factor.plan_choices is not None:
        problem = "is a key of factors with choices; this one has a range (use plan_low, plan_high)"
        yield Fault(file="study.toml", where=where, value='"plan_choices"', problem=problem)
    earlier = factor.earlier_value
    if earlier is not None and not (isinstance(earlier, float | int) and low <= earlier <= high):
        yield Fault(
            file="study.toml",
            where=f"{where}, earlier_value",
            value=quoted(earlier),
            problem="lies outside" if not isinstance(earlier, str) else "is not a number in",
            allowed=factor.range_text,
        )
    for name in ("kept_within", "set_sd"):
        amount: Amount | None = getattr(factor, name)
        if amount is not None and not amount.relative and amount.value > high - low:
            yield Fault(
                file="study.toml",
                where=f"{where}, {name}",
                value=number(amount.value),
                problem="is wider than the range",
                allowed=factor.range_text,
            )
