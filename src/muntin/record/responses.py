"""Responses: what is measured, and the target it must meet."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any, Literal

from pydantic import Field, model_validator

from muntin.record.faults import Fault, number
from muntin.record.keys import Keys, Name, Number, Text, key


class Spread(Keys):
    """A log-normal prior."""

    median: Number = key(says="median", example=2.0, gt=0)
    log_sd: Number = key(says="standard deviation of its natural logarithm", example=0.7, gt=0)


class PriorTable(Keys):
    """Priors of one response that replace the built-in ones."""

    mean_sd: Number | None = key(
        None, says="standard deviation of the constant mean", example=2.5, gt=0
    )
    process_sd: Spread | None = key(None, says="standard deviation of the smooth process")
    curvature_sd: Spread | None = key(
        None, says="standard deviation of the polynomial's coefficients"
    )
    length_scale: Spread | None = key(None, says="length scales over coded factors")
    noise_sd: Spread | None = key(None, says="standard deviation of the readings")
    scale_error: Spread | None = key(None, says="standard deviation of errors that act as scale")
    inside_error: Spread | None = key(None, says="standard deviation of errors that act inside")
    ceiling_gap: Spread | None = key(
        None, says="how far below 1 a fraction levels off (hold-up caps recovery)"
    )


_PRIOR_NAMES = (
    "priors that replace the built-in ones, by name: "
    + ", ".join(PriorTable.model_fields)
    + "; each a { median, log_sd }, mean_sd a number"
)


class Response(Keys):
    """One thing that is read in the wells, judged against a target or only tracked."""

    name: Name = key(says="column name in the tables: letters, digits and _", example="recovery")
    label: Text = key(
        "", says="name shown in tables and figures; the name where absent", example="Recovery"
    )
    unit: Text = key(
        "",
        says='unit shown beside values; "%" for a fraction means readings and targets in per cent',
        example="",
    )
    kind: Literal["fraction", "positive", "real"] = key(
        says='"fraction" (levels off at 0 and 1), "positive" (relative noise) or "real"',
        example="fraction",
    )
    at_least: Number | None = key(
        None, says="target: the response must reach it", unit="the response's", example=0.8
    )
    at_most: Number | None = key(
        None, says="target: the response must not exceed it", unit="the response's", example=0.95
    )
    typical: tuple[Number, Number] | None = key(
        None,
        says='range in which readings usually lie, for priors of a "positive" or "real" response',
        unit="the response's",
        example=[1.0, 100.0],
    )
    prior_table: PriorTable | None = Field(
        default=None,
        alias="priors",
        description=_PRIOR_NAMES,
        json_schema_extra={"unit": "", "example": {"noise_sd": {"median": 0.03, "log_sd": 0.5}}},
    )

    @model_validator(mode="before")
    @classmethod
    def _label_is_name(cls, data: Any) -> Any:
        if isinstance(data, dict) and not data.get("label") and "name" in data:
            return {**data, "label": data["name"]}
        return data

    @property
    def judged(self) -> bool:
        """Whether it has a target."""
        return self.at_least is not None or self.at_most is not None

    @property
    def per_cent(self) -> bool:
        """Whether readings and targets of this fraction are given in per cent."""
        return self.kind == "fraction" and self.unit.strip() == "%"

    @property
    def unit_size(self) -> float:
        """What a value in the user's unit is divided by to give the natural unit: 100 or 1."""
        return 100.0 if self.per_cent else 1.0

    @property
    def target(self) -> tuple[float | None, float | None]:
        """Lower and upper target in the natural unit (a fraction of 1 for per cent)."""
        low, high = self.at_least, self.at_most
        by = self.unit_size
        return (None if low is None else low / by, None if high is None else high / by)

    @property
    def priors(self) -> dict[str, Any]:
        """Priors that replace the built-in ones: {name: {"median", "log_sd"}}, mean_sd a number."""
        return {} if self.prior_table is None else self.prior_table.model_dump(exclude_none=True)


def response_faults(response: Response) -> Iterator[Fault]:
    """Yield what is wrong between the keys of one response."""
    where = f"responses, {response.name}"
    top = 100 if response.per_cent else 1
    for name in ("at_least", "at_most"):
        value = getattr(response, name)
        if value is None:
            continue
        if response.kind == "fraction" and not 0 < value < top:
            yield _outside(f"{where}, {name}", value, top)
        if response.kind == "positive" and value <= 0:
            problem = 'must lie above 0, as the response is "positive"'
            yield Fault(
                file="study.toml", where=f"{where}, {name}", value=number(value), problem=problem
            )
    low, high = response.at_least, response.at_most
    if low is not None and high is not None and low >= high:
        yield Fault(
            file="study.toml",
            where=f"{where}, at_least",
            value=number(low),
            problem=f"must lie below at_most, which is {number(high)}",
        )
    yield from _typical_faults(response, where)
    if response.kind != "fraction" and "ceiling_gap" in response.priors:
        problem = f'is for a "fraction"; this response is "{response.kind}"'
        yield Fault(file="study.toml", where=f"{where}, priors, ceiling_gap", problem=problem)


def _outside(where: str, value: float, top: int) -> Fault:
    allowed = f"0 to {top}, ends left out" + (", as the unit is %" if top == 100 else "")
    hint = (
        'for targets and readings in per cent set unit = "%"'
        if top == 1 and 1 < value < 100
        else ""
    )
    return Fault(
        file="study.toml",
        where=where,
        value=number(value),
        problem="lies outside",
        allowed=allowed,
        hint=hint,
    )


def _typical_faults(response: Response, where: str) -> Iterator[Fault]:
    if response.typical is None:
        return
    low, high = response.typical
    value = f"[{number(low)}, {number(high)}]"
    where = f"{where}, typical"
    if response.kind == "fraction":
        problem = 'is for a "positive" or "real" response; a fraction needs none'
        yield Fault(file="study.toml", where=where, value=value, problem=problem)
    elif low >= high:
        problem = "must be a low and a higher value"
        yield Fault(file="study.toml", where=where, value=value, problem=problem)
    elif response.kind == "positive" and low <= 0:
        problem = 'must lie above 0, as the response is "positive"'
        yield Fault(file="study.toml", where=where, value=value, problem=problem)
