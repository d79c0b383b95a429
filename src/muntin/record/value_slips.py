"""Values that TOML does not read: what is wrong with each, and what it was meant to be."""

from __future__ import annotations

import datetime
import json
import re
import tomllib
from collections.abc import Callable
from contextlib import suppress
from typing import NamedTuple

_DIGITS = r"[+-]?(?:[0-9]+(?:[.,][0-9]*)?|[.,][0-9]+)"
_NUMBER = re.compile(_DIGITS)
_WITH_UNIT = re.compile(rf"({_DIGITS})\s*(%|°|[^\W\d_]).*")
_DAY = re.compile(r"([0-9]{1,4})([./-])\s?([0-9]{1,2})\2\s?([0-9]{1,4})")
_BARE_LIST = re.compile(r"\[([^\[\]\"'{}=]+)\]")
_TEXTS = re.compile(r'"[^"]*"(?:\s*,\s*"[^"]*")+')
_QUOTES = "\"'“”„«»‘’"

Takes = Callable[[str], bool]


class Mended(NamedTuple):
    """What is wrong with a value, and the value as TOML writes it ("" where it cannot be told).

    problem: "" where the value as it was meant is none that its key takes, so that the fault is
    found when the key is read.
    """

    problem: str
    value: str


def mended(value: str, takes: Takes) -> Mended | None:
    """Return what is wrong with a value that TOML does not read, or None where it is not known.

    takes: whether the value's key takes a text.
    """
    for slip in (_unquoted_end, _curly, _number, _day, _list, _texts):
        found = slip(value)
        if found is not None and (not found.value or readable(found.value)):
            return found
    return _with_unit(value, takes) or _text(value, takes)


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


def _unquoted_end(value: str) -> Mended | None:
    sign = value[:1]
    if sign in ('"', "'") and sign not in value[1:]:
        return Mended("has no closing quotation mark:", json.dumps(value[1:], ensure_ascii=False))
    if value.startswith("[") and value.count('"') % 2:
        return Mended("has a quotation mark that is not closed", "")
    return None


def _curly(value: str) -> Mended | None:
    if value[:1] in _QUOTES[2:] and value[1:] and value[-1] in _QUOTES:
        text = json.dumps(value.strip(_QUOTES), ensure_ascii=False)
        return Mended("needs straight quotation marks:", text)
    return None


def _number(value: str) -> Mended | None:
    if not _NUMBER.fullmatch(value):
        return None
    problem = "needs a decimal point, not a comma:" if "," in value else "must be written"
    return Mended(problem, _plain_number(value))


def _plain_number(text: str) -> str:
    """Return a number with a decimal point and a digit on either side of it."""
    sign = text[:1] if text[:1] in "+-" else ""
    whole, point, decimals = text[len(sign) :].replace(",", ".").partition(".")
    return sign + (whole.lstrip("0") or "0") + (point and point + (decimals or "0"))


def _day(value: str) -> Mended | None:
    if not _DAY.fullmatch(value):
        return None
    day = iso_day(value)
    such = "" if day else ", such as"
    return Mended(f"must be written year-month-day{such}:", day or "2026-05-04")


def _with_unit(value: str, takes: Takes) -> Mended | None:
    found = _WITH_UNIT.fullmatch(value)
    if found is None:
        return None
    text = json.dumps(value, ensure_ascii=False)
    if takes(value):
        return Mended("needs quotation marks:", text)
    what = "the % sign" if found[2] == "%" else "a unit"
    return Mended(f"must stand without {what}:", _plain_number(found[1]))


def _list(value: str) -> Mended | None:
    found = _BARE_LIST.fullmatch(value)
    if found is None:
        return None
    items = [item.strip() for item in found[1].split(",")]
    shown = [item if readable(item) else json.dumps(item, ensure_ascii=False) for item in items]
    return Mended("needs quotation marks:", f"[{', '.join(shown)}]")


def _texts(value: str) -> Mended | None:
    return Mended("needs brackets:", f"[{value}]") if _TEXTS.fullmatch(value) else None


def _text(value: str, takes: Takes) -> Mended | None:
    text = value.strip(_QUOTES)
    if not text or any(sign in text for sign in "\"'[]{}="):
        return None
    problem = "needs quotation marks:" if takes(text) else ""
    return Mended(problem, json.dumps(text, ensure_ascii=False))
