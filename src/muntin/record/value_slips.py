"""Values that TOML does not read: what is wrong with each, and what it was meant to be."""

from __future__ import annotations

import datetime
import json
import re
import tomllib
from collections.abc import Callable
from contextlib import suppress
from functools import partial
from typing import Any, NamedTuple

from muntin.record.number_slips import number_meant

_DIGITS = r"[+-]?(?:[0-9]+(?:[.,][0-9]*)?|[.,][0-9]+)"
_NUMBER = re.compile(_DIGITS)
_THOUSANDS = re.compile(r"[+-]?[1-9][0-9]{0,2},[0-9]{3}")
_WITH_UNIT = re.compile(rf"({_DIGITS})\s*(%|°|[^\W\d_])(?:(?!\s[0-9]).)*")
_DAY = re.compile(r"([0-9]{1,4})([./-])\s?([0-9]{1,2})\2\s?([0-9]{1,4})")
_BETWEEN_DIGITS = re.compile(r"(?<=[0-9]),(?=[0-9])")
_ITEM = re.compile(r"[^,;]+")
_QUOTED = re.compile(r"[\"'“”„«»‘’]([^\"'“”„«»‘’]*)[\"'“”„«»‘’]")
_QUOTES = "\"'“”„«»‘’"
_SUCH_A_DAY = "2026-05-04"


class Wanted(NamedTuple):
    """What the key of a value takes.

    takes: whether it takes a value of Python. share: whether a number of it is one of 0 to 1.
    """

    takes: Callable[[Any], bool]
    share: bool = False

    @property
    def number(self) -> bool:
        """Whether it takes numbers."""
        return any(self.takes(value) for value in (0.5, 1, 96))

    @property
    def day(self) -> bool:
        """Whether it takes a day."""
        return not self.number and self.takes(datetime.date(2026, 5, 4))

    @property
    def texts(self) -> bool:
        """Whether it takes a list of texts."""
        return not self.number and not self.takes("a") and self.takes(["a", "b"])


class Mended(NamedTuple):
    """What is wrong with a value, and the value as TOML writes it ("" where it cannot be told).

    problem: "" where the value as it was meant is none that its key takes, so that the fault is
    found when the key is read.
    """

    problem: str
    value: str


_Way = Callable[[str], Mended | None]


def mended(value: str, wanted: Wanted) -> Mended | None:
    """Return what is wrong with a value that TOML does not read, or None where it is not known."""
    if wanted.day:
        return _day(value)
    ways: list[_Way] = [_listed] if wanted.texts else [_unquoted_end, _curly, _quoted_inside]
    ways += [_number, partial(_with_unit, wanted=wanted)] if wanted.number else []
    ways += [_braces, partial(_text, wanted=wanted)]
    for way in ways:
        found = way(value)
        if found is not None and (not found.value or readable(found.value)):
            return found
    return None


def readable(value: str) -> bool:
    """Whether TOML reads a value that stands on one line."""
    with suppress(tomllib.TOMLDecodeError):
        return bool(tomllib.loads(f"value = {value}\n"))
    return False


def iso_day(text: str) -> str | None:
    """Return a day such as 1.12.2026 as 2026-12-01, or None where it may be another or is none.

    Points part day, month and year; with strokes the month may come first, unless a number is
    above 12.
    """
    found = _DAY.fullmatch(text.strip())
    if found is None:
        return None
    first, sign, second, last = int(found[1]), found[2], int(found[3]), int(found[4])
    year, month, day = (first, second, last) if len(found[1]) == 4 else (last, second, first)
    if len(found[1]) < 4 and sign != ".":
        if first <= 12 and second <= 12 and first != second:
            return None
        month, day = (first, second) if second > 12 else (second, first)
    with suppress(ValueError):
        return datetime.date(year + 2000 if year < 100 else year, month, day).isoformat()
    return None


def _day(value: str) -> Mended:
    day = iso_day(value.strip(_QUOTES))
    such = "" if day else ", such as"
    return Mended(f"must be written year-month-day{such}:", day or _SUCH_A_DAY)


def _unquoted_end(value: str) -> Mended | None:
    sign = value[:1]
    if sign in ('"', "'") and sign not in value[1:]:
        return Mended("has no closing quotation mark:", _text_of(value[1:]))
    return None


def _curly(value: str) -> Mended | None:
    if value[:1] in _QUOTES[2:] and value[1:] and value[-1] in _QUOTES:
        return Mended("needs straight quotation marks:", _text_of(value.strip(_QUOTES)))
    return None


def _quoted_inside(value: str) -> Mended | None:
    if len(value) > 2 and value[0] == value[-1] == '"' and "'" not in value:
        return Mended("has quotation marks inside; write ' around it:", f"'{value[1:-1]}'")
    return None


def _number(value: str) -> Mended | None:
    if _THOUSANDS.fullmatch(value):
        return Mended("may mean thousands or decimals; write it without the comma", "")
    if _NUMBER.fullmatch(value):
        problem = "needs a decimal point, not a comma:" if "," in value else "must be written"
        return Mended(problem, _plain_number(value))
    meant = number_meant(value)
    return Mended("is not a number; meant is perhaps", meant) if meant else None


def _plain_number(text: str) -> str:
    """Return a number with a decimal point and a digit on either side of it."""
    sign = text[:1] if text[:1] in "+-" else ""
    whole, point, decimals = text[len(sign) :].replace(",", ".").partition(".")
    return sign + (whole.lstrip("0") or "0") + (point and point + (decimals or "0"))


def _with_unit(value: str, wanted: Wanted) -> Mended | None:
    found = _WITH_UNIT.fullmatch(value)
    if found is None:
        return None
    if wanted.takes(value):
        return Mended("needs quotation marks:", _text_of(value))
    plain = _plain_number(found[1])
    if found[2] != "%":
        return Mended("must stand without a unit:", plain)
    meant = f"{float(plain) / 100:.10g}" if wanted.share else plain
    return Mended("must stand without the % sign:", meant)


def _listed(value: str) -> Mended:
    """Read a list of texts whatever its brackets, quotation marks and commas are like."""
    inner = value.strip("[]() ")
    items = [*_QUOTED.findall(inner)] if inner.strip(_QUOTES) != inner else []
    if not items or sum(len(item) + 2 for item in items) < len(re.sub(r"[\s,;]", "", inner)):
        items = [item.strip().strip(_QUOTES) for item in _ITEM.findall(inner)]
    shown = ", ".join(_text_of(item.strip()) for item in items if item.strip())
    return Mended("must be a list of texts in quotation marks:", f"[{shown}]")


def _braces(value: str) -> Mended | None:
    if value[:1] not in ("{", "["):
        return None
    pointed = _BETWEEN_DIGITS.sub(".", value)
    return Mended("needs decimal points, not commas:", pointed) if pointed != value else None


def _text(value: str, wanted: Wanted) -> Mended | None:
    text = value.strip(_QUOTES) if value.count('"') % 2 else value
    if not text or value[0] in "[{" or (value[0] in _QUOTES[:2] and value[-1] in _QUOTES[:2]):
        return None
    return Mended("needs quotation marks:" if wanted.takes(text) else "", _text_of(text))


def _text_of(text: str) -> str:
    """Return a text as TOML writes it."""
    return json.dumps(text, ensure_ascii=False)
