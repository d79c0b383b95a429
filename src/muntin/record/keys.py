"""What all tables of keys share: frozen, no unknown keys, one declaration a key."""

from __future__ import annotations

import re
import typing
from typing import Annotated, Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field, Strict

Floats = NDArray[np.float64]
Truths = NDArray[np.bool_]

_PER_CENT = re.compile(r"\s*([0-9]+(?:[.,][0-9]*)?)\s*%\s*")
_NAME = re.compile(r"[A-Za-z][A-Za-z0-9_]*")
_WORDS = frozenset(
    {"and", "or", "not", "in", "is", "if", "else", "for", "lambda", "None", "True", "False"}
)
_FUNCTIONS = frozenset({"min", "max", "abs", "log", "exp", "sqrt"})
_COLUMNS = frozenset(
    {"well", "role", "plate", "exclude", "row", "y", "sd", "reason"}
    | {"p_now", "p_mean", "p_well", "p_kept"}
)
_ENDINGS = ("_sd", "_measured", "_exclude", "_target", "_state")


class Keys(BaseModel):
    """A table of study.toml or of a plate's notes; each field is the one declaration of a key."""

    model_config = ConfigDict(frozen=True, extra="forbid", populate_by_name=True)


def key(default: Any = ..., *, says: str, unit: str = "", example: Any = None, **rules: Any) -> Any:
    """Declare a key: default (none: required), help, unit, an example, and pydantic's rules."""
    return Field(
        default, description=says, json_schema_extra={"unit": unit, "example": example}, **rules
    )


def inner_model(annotation: Any) -> type[BaseModel] | None:
    """Return the table of keys that an annotation holds, alone or in a tuple; None for a value."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    inner = (inner_model(part) for part in typing.get_args(annotation))
    return next((model for model in inner if model is not None), None)


def is_list(annotation: Any) -> bool:
    """Whether an annotation is that of several tables of keys, each headed [[name]]."""
    return typing.get_origin(annotation) is tuple and inner_model(annotation) is not None


def _column_name(text: str) -> str:
    if not _NAME.fullmatch(text):
        raise ValueError("is not a name of letters, digits and _ that starts with a letter")
    if text in _WORDS or text.lower() in _FUNCTIONS or text.lower() in _COLUMNS:
        raise ValueError("is a word that muntin keeps for itself; choose another name")
    ending = next((end for end in _ENDINGS if text.lower().endswith(end)), None)
    if ending:
        raise ValueError(f"ends in {ending}, which plate tables keep for themselves")
    return text


def _number_or_text(value: object) -> object:
    if isinstance(value, bool) or not isinstance(value, int | float | str):
        raise ValueError("is neither a number nor text")
    if isinstance(value, int | float) and not np.isfinite(value):
        raise ValueError("is not a finite number")
    return value


Number = Annotated[float, Field(strict=True, allow_inf_nan=False)]
Whole = Annotated[int, Strict()]
Text = Annotated[str, Strict()]
Name = Annotated[str, Strict(), AfterValidator(_column_name)]
NumberOrText = Annotated[float | str, BeforeValidator(_number_or_text)]


class Amount(BaseModel):
    """A half width or standard deviation: absolute in the factor's unit, or relative.

    `value` is in raw units, or a share of the set value where `relative` ("5 %" is 0.05).
    """

    model_config = ConfigDict(frozen=True)

    value: float
    relative: bool = False

    def at(self, x: ArrayLike) -> Floats:
        """Return the absolute amount at raw values `x` (shape kept), in raw units."""
        at = np.abs(np.asarray(x, dtype=float))
        return at * self.value if self.relative else np.full_like(at, self.value)

    def __str__(self) -> str:
        return f"{100 * self.value:.6g} %" if self.relative else f"{self.value:.6g}"


def _amount(value: object) -> Amount:
    if isinstance(value, Amount):
        return value
    if isinstance(value, str) and (found := _PER_CENT.fullmatch(value)):
        share = float(found[1].replace(",", ".")) / 100
        if share >= 1:
            raise ValueError("must lie below 100 %")
        return Amount(value=share, relative=True)
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise ValueError('is neither a number nor a share such as "5 %"')
    if not np.isfinite(value) or value < 0:
        raise ValueError("must be 0 or above")
    return Amount(value=float(value))


def _share(value: object) -> object:
    """Return the share that "5 %" stands for; any other value as it is."""
    if isinstance(value, str) and (found := _PER_CENT.fullmatch(value)):
        share = float(found[1].replace(",", ".")) / 100
        if not 0 < share < 1:
            raise ValueError("must lie above 0 % and below 100 %")
        return share
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise ValueError('is neither a number from 0 to 1 nor a share such as "5 %"')
    if 1 < value <= 100:
        raise ValueError(f'must lie below 1 (for per cent write "{value:g} %")')
    return value


ShareKey = Annotated[Number, BeforeValidator(_share)]
AmountKey = Annotated[Amount, BeforeValidator(_amount)]
