"""What was meant by a text that stands where a number must: said as a hint, never used."""

from __future__ import annotations

import re

_PLAIN = r"[+-]?[0-9]+(?:[.,][0-9]+)?"
_NUMBER = re.compile(_PLAIN)
_GROUPED = re.compile(r"[+-]?[0-9]{1,3}(?:(?P<mark>[., '’])[0-9]{3})+(?:[.,][0-9]+)?")
_PER_CENT = re.compile(rf"({_PLAIN})\s*%")
_UNIT = re.compile(rf"({_PLAIN})\s*([^\W\d_][^\d]*|°.*)")
_ZEROS = str.maketrans({"O": "0", "o": "0"})
_ONES = str.maketrans({"l": "1", "I": "1"})
_SIGNS = str.maketrans({"−": "-", "–": "-", "·": ".", "٫": "."})
_LAST = re.compile(rf"({_PLAIN})\s*[;,.]")
_DATED = re.compile(r"[0-9]{4}-[0-9]{2}-[0-9]{2}(?:[ T]00:00:00)?")
_MONTHS = (
    *("jan", "feb", "mar", "apr", "may", "jun", "jul", "aug", "sep", "oct", "nov", "dec"),
    *("mär", "mai", "okt", "dez"),
)
_NUMBERED = {name: index % 12 + 1 for index, name in enumerate(_MONTHS[:12])}
_NUMBERED |= {"mär": 3, "mai": 5, "okt": 10, "dez": 12}
_NAMES = "|".join(_MONTHS)
_DAY_MONTH = re.compile(rf"([0-9]{{1,2}})(?:\.\s?|[ -])({_NAMES})[a-zä]*\.?", re.IGNORECASE)
_MONTH_YEAR = re.compile(rf"({_NAMES})[a-zä]*\.?(?:\s|-)([0-9]{{2}})", re.IGNORECASE)


def number_hint(text: str, share: bool = False) -> str:
    """Return a hint on the number that a text was meant to be, "" where it cannot be told.

    `share` tells that the number is one of 0 to 1, so that 6.1 % is meant as 0.061.
    """
    text = text.strip()
    if hint := _date_hint(text):
        return hint
    if found := _PER_CENT.fullmatch(text.translate(_SIGNS)):
        if share:
            return f"write {_pointed(f'{float(_pointed(found[1])) / 100:.10g}')} for {text}"
        return f"write {_pointed(found[1])}, without the % sign"
    if meant := number_meant(text):
        return f"did you mean {meant}?"
    if found := _UNIT.fullmatch(text):
        return f"write {_pointed(found[1])}, without {found[2].strip()}"
    return ""


def number_meant(text: str) -> str:
    """Return a number with a decimal point and no marks of thousands, "" where it is unclear."""
    text = text.strip()
    plain = text.translate(_SIGNS)
    if found := _LAST.fullmatch(plain):
        plain = found[1]
    spelt = plain.translate(_ZEROS)
    spelt = spelt[:-1].translate(_ONES) + spelt[-1:]
    for meant in (_without_thousands(plain), spelt, re.sub(r"([.,]){2,}", r"\1", plain)):
        if meant != text and _NUMBER.fullmatch(meant) and any(sign.isdigit() for sign in text):
            return _pointed(meant)
    return ""


def _without_thousands(text: str) -> str:
    """Return the text without marks of thousands; as it is where a mark may be the decimals'."""
    grouped = _GROUPED.fullmatch(text)
    if grouped is None:
        return text
    mark = grouped["mark"]
    decimals = "." if mark == "," else ","
    sure = mark not in ".," or text.count(mark) > 1 or decimals in text
    return text.replace(mark, "") if sure else text


def _pointed(text: str) -> str:
    return text.replace(",", ".")


def _date_hint(text: str) -> str:
    """Return the hint on a date that a spreadsheet made of a number."""
    meant = ""
    if found := _DAY_MONTH.fullmatch(text):
        meant = f"{int(found[1])}.{_NUMBERED[found[2].lower()]}"
    elif found := _MONTH_YEAR.fullmatch(text):
        meant = f"{_NUMBERED[found[1].lower()]}.{found[2]}"
    elif not _DATED.fullmatch(text):
        return ""
    of = f", perhaps {meant}" if meant else ""
    return (
        f"a spreadsheet has made a date of a number{of}: "
        "format the cell as text, then type the number again"
    )
