"""Conditions, shares and counts in the words of the trade."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from muntin.record.definition import Definition
from muntin.record.factors import Factor

WINDOW = "predicted operating window (plate scale)"
UNSUPPORTED = "not supported by the data"
JUDGED_BY = {
    "mean": "that the process mean passes",
    "well": "that a new well on a new plate passes",
    "kept": "that a new well on a new plate passes, factors kept within their ±",
}


def setting_text(factor: Factor, value: Any, kept: bool = False) -> str:
    """Return "Salt 250 mM", or "Salt 250 ± 12 mM" where asked and `kept_within` is given."""
    width = ""
    if kept and factor.kept_within is not None:
        width = f" ± {float(factor.kept_within.at(float(value))):.2g}"
    return f"{factor.named(factor.shown(value))}{width} {factor.unit}".rstrip()


def condition_text(definition: Definition, condition: Mapping[Any, Any], kept: bool = False) -> str:
    """Return a condition in words, such as "pH 5.6 ± 0.1 and Salt 250 ± 12 mM"."""
    return joined([setting_text(f, condition[f.name], kept) for f in definition.factors])


def range_ends_text(definition: Definition, condition: Mapping[Any, Any]) -> str:
    """Return "the range ends at pH 7.5: no data lie beyond", or "" where no factor of a condition
    is within half a bench step of an end of its range.
    """
    there = []
    for factor in definition.factors:
        if factor.continuous:
            low, high, step = factor.span
            value = float(condition[factor.name])
            ends = [end for end in (low, high) if abs(value - end) < 0.5 * step]
            there += [setting_text(factor, end) for end in ends[:1]]
    if not there:
        return ""
    what = "the range ends" if len(there) == 1 else "the ranges end"
    return f"{what} at {joined(there)}: no data lie beyond"


def ranges_text(definition: Definition, ranges: Mapping[str, tuple[Any, Any]]) -> str:
    """Return ranges that hold together, such as "pH 5.0 to 5.8 and Salt 100 to 300 mM"."""
    texts = []
    for factor in definition.factors:
        low, high = map(factor.shown, ranges[factor.name])
        span = low if low == high else f"{low} to {high}"
        texts.append(f"{factor.named(span)} {factor.unit}".rstrip())
    return joined(texts)


def share_text(share: float) -> str:
    """Return a share of 1 in per cent, never rounded to a certainty that it is not."""
    if 0 < share < 0.0005:
        return "under 0.1 %"
    if 0.9995 < share < 1:
        return "over 99.9 %"
    return f"{100 * share:.1f} %"


def beside(share: float, limit: float) -> str:
    """Return a share of 1 in per cent with the digits, up to four, that tell it from a limit."""
    for digits in range(1, 5):
        if abs(share - limit) < 1e-9 or round(100 * share, digits) != round(100 * limit, 6):
            break
    return share_text(share) if digits == 1 else f"{100 * share:.{digits}f} %"


def per_cent(share: float) -> str:
    """Return a share of 1 that was given, in per cent with the digits it has: "95 %"."""
    return f"{100 * share:.6g} %"


def likely_text(chance: float) -> str:
    """Return a chance that draws tell, in whole per cent, never rounded to a certainty."""
    if 0 < chance < 0.005:
        return "under 1 %"
    if 0.995 <= chance < 1:
        return "over 99 %"
    return f"{100 * chance:.0f} %"


def narrow(text: str) -> str:
    """Return a share or a chance as short as a narrow column needs it: ">99 %"."""
    return text.replace("over ", ">").replace("under ", "<")


def chance_text(probability: float) -> str:
    """Return a probability with two decimals, or more where it has more."""
    short = f"{probability:.2f}"
    return short if abs(float(short) - probability) < 1e-9 else f"{probability:g}"


def odds_text(probability: float, limit: float | None = None) -> str:
    """Return a probability that was computed, with two decimals, never rounded to a certainty, and
    with as many more, up to four, as tell it from a limit.
    """
    if probability < 0.005:
        return "under 0.01"
    if probability >= 0.995:
        return "over 0.99"
    for digits in (2, 3, 4):
        if limit is None or abs(round(probability, digits) - limit) > 1e-9:
            break
    return f"{probability:.{digits}f}"


def reach_text(definition: Definition, share: float) -> str:
    """Return "32.2 % of the range reaches a probability of 0.90"."""
    required = chance_text(definition.required_probability)
    part = share_text(share) if share else "nothing"
    return f"{part} of the range reaches a probability of {required}"


def success_text(definition: Definition, probability: float) -> str:
    """Return what the judged probability means: "93.0 % of new wells pass"."""
    if definition.judged_by == "mean":
        return f"{share_text(probability)} probable that the process mean passes"
    return f"{share_text(probability)} of new wells pass"


def joined(texts: list[str]) -> str:
    """Return "a", "a and b" or "a, b and c"."""
    return " and ".join([", ".join(texts[:-1]), texts[-1]] if len(texts) > 1 else texts)


def labels(definition: Definition, names: tuple[str, ...]) -> str:
    """Return the labels of the responses with these names, joined."""
    return joined([r.label for r in definition.responses if r.name in names])


def amount_text(milligrams: float) -> str:
    """Return an amount of protein with its unit."""
    return f"{milligrams:.3g} mg"


def axis_label(name: str, unit: str) -> str:
    """Return "Salt (mM)", or the bare name where there is no unit."""
    return f"{name} ({unit})" if unit else name
