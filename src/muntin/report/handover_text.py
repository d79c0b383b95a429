"""The hand-over of a window in sentences, and as facts for JSON."""

from __future__ import annotations

from dataclasses import asdict
from typing import Any

import numpy as np
import pandas as pd

from muntin.record.definition import Definition
from muntin.record.factors import Factor
from muntin.record.faults import counted
from muntin.report.words import (
    chance_text,
    condition_text,
    likely_text,
    per_cent,
    ranges_text,
    share_text,
    success_text,
)
from muntin.window.handover import HandOver, Margin, Repeat

_ALL = 0.9995
# A number of wells so near a whole one is told as that.
_NEAR = 0.05
_WAYS = {"low": "down", "high": "up"}


def handover_lines(definition: Definition, handed: HandOver) -> list[str]:
    """Return the hand-over in a few sentences; ranges only where there are some."""
    lines = ranges_lines(definition, handed)
    lines += [margins_line(definition, handed)] if handed.margins else []
    lines += [corner_line(definition, handed)] if handed.corners and handed.box else []
    return [*lines, repeat_line(definition, handed)]


def setpoint_sentence(definition: Definition, handed: HandOver) -> str:
    """Return "pH 5.6 ± 0.1 and Salt 250 ± 12 mM: 93.0 % of new wells pass", with the tolerances
    only where the wells are judged within them.
    """
    where = condition_text(definition, handed.setpoint, kept=handed.judged_by == "kept")
    return f"{where}: {success_text(definition, handed.probability)}"


def ranges_lines(definition: Definition, handed: HandOver) -> list[str]:
    """Return the ranges that hold together, how sure it is that they do at once, and where that
    falls short the ranges that are surer.
    """
    if handed.box is None:
        return []
    lines = [f"Ranges that hold together: {ranges_text(definition, handed.box.ranges)}."]
    sure = f"{at_once_text(handed)} is {likely_text(handed.box.assurance)} probable"
    asked = chance_text(handed.asked_assurance)
    if handed.box.assurance >= handed.asked_assurance:
        lines.append(f"{sure}.")
    elif handed.assured is None:
        lines.append(f"{sure}; no ranges around the set point reach {asked}.")
    else:
        surer = ranges_text(definition, handed.assured.ranges)
        lines.append(f"{sure}; {asked} is reached by {surer}.")
    if handed.larger is not None:
        larger = ranges_text(definition, handed.larger.ranges)
        lines.append(f"Larger, but without the set point: {larger}.")
    return lines


def at_once_text(handed: HandOver) -> str:
    """Return what the assurance of a box is the probability of, as the begin of a sentence."""
    what = "the process mean passes"
    if handed.judged_by != "mean":
        what = f"{per_cent(handed.required)} or more of new wells pass"
    return f"That {what} at all of these conditions at once"


def margins_line(definition: Definition, handed: HandOver) -> str:
    """Return how far the edge is from the set point in each factor, on each side."""
    parts = []
    for factor in definition.factors:
        sides = [_side(factor, m) for m in handed.margins if m.factor == factor.name]
        if sides:
            parts.append(f"{factor.label} {', '.join(sides)}")
    return f"To the edge, one factor moved at a time: {'; '.join(parts)}."


def _side(factor: Factor, margin: Margin) -> str:
    way = _WAYS[margin.end]
    if margin.edge is None or margin.distance is None:
        return f"none {way} (the range ends at {_shown(factor, margin.end_of_range)})"
    limit = " (a limit of the study)" if margin.limited else ""
    return f"{_rough(factor, margin.distance)} {way}{limit}"


def corner_line(definition: Definition, handed: HandOver) -> str:
    """Return the worst corner of the set point's tolerance and what passes there."""
    worst = handed.corners[0]
    mean = handed.judged_by == "mean"
    passes = success_text(definition, worst.p_mean if mean else worst.p_well)
    where = condition_text(definition, worst.condition)
    return f"Worst corner of the tolerance: {where}: {passes}."


def repeat_line(definition: Definition, handed: HandOver) -> str:
    """Return what repeating the best wells is expected to bring, and the repeat proposed."""
    labels = {r.name: r.label for r in definition.responses}
    told = [_repeat(labels[repeat.response], repeat) for repeat in handed.optimism.best_run]
    best = "Best well so far" if len(told) == 1 else "Best wells so far"
    before = f"{best}: {'; '.join(told)}. " if told else ""
    return before + proposal_text(handed)


def proposal_text(handed: HandOver) -> str:
    """Return the repeat that is proposed, and how many of its wells are expected to pass."""
    what = "the set point" if handed.box is not None else "the best so far"
    wells, passes = handed.optimism.wells, handed.optimism.expected_passes
    asked = f"Repeat {what} before believing it: {counted(wells, 'well')} of a new plate"
    return f"{asked}, {_expected(wells, passes)} expected to pass."


def _expected(wells: int, passes: float) -> str:
    """Return "all of them", "3 of them" or "3 or 4 of them"."""
    near = round(passes)
    if abs(passes - near) < _NEAR:
        return {0: "none of them", wells: "all of them"}.get(near, f"{near} of them")
    return f"{int(passes)} or {int(passes) + 1} of them"


def spread_text(handed: HandOver) -> str:
    """Return between which shares of new wells may pass at the set point, and what that leaves out;
    nothing where the process mean is judged.
    """
    low, high = handed.optimism.low, handed.optimism.high
    if low is None or high is None:
        return ""
    shares = f"between {share_text(low)} and {share_text(high)}"
    if high >= _ALL:
        shares = f"above {share_text(min(low, _ALL - 0.0005))}"
    return (
        f"The share of new wells that pass at the set point lies {shares} (95 %) if the model is "
        "right; whether it is right where things look best, only a repeat can tell."
    )


def _repeat(label: str, repeat: Repeat) -> str:
    again = f"{repeat.expected:.3g} ({repeat.low:.3g} to {repeat.high:.3g})"
    where = f"{repeat.plate} {repeat.well}"
    return f"{label} {repeat.read:.3g} in {where}, of which a repeat is expected to read {again}"


def _shown(factor: Factor, value: float) -> str:
    return f"{factor.shown(value)} {factor.unit}".rstrip()


def _rough(factor: Factor, distance: float) -> str:
    """Return a distance with the digits of a tenth of a bench step, and its unit."""
    digits = max(0, 1 - int(np.floor(np.log10(factor.span[2]))))
    return f"{distance:.{digits}f} {factor.unit}".rstrip()


def handover_facts(definition: Definition, handed: HandOver) -> dict[str, Any]:
    """Return the hand-over as plain values, with its sentence."""
    facts = {
        name: value
        for name, value in vars(handed).items()
        if name not in ("box", "larger", "assured", "margins", "corners", "edge", "optimism")
    }
    facts |= {
        name: None if box is None else asdict(box)
        for name, box in (
            ("box", handed.box),
            ("larger", handed.larger),
            ("assured", handed.assured),
        )
    }
    readings = handed.optimism.readings
    return facts | {
        "sentence": setpoint_sentence(definition, handed),
        "margins": [asdict(margin) for margin in handed.margins],
        "corners": [asdict(corner) for corner in handed.corners],
        "edge": _records(handed.edge),
        "optimism": {
            **{k: v for k, v in vars(handed.optimism).items() if k != "best_run"},
            "best_run": [asdict(repeat) for repeat in handed.optimism.best_run],
            "readings": _records(readings),
        },
    }


def _records(frame: pd.DataFrame) -> list[dict[str, Any]]:
    return [{str(k): v for k, v in row.items()} for row in frame.to_dict("records")]
