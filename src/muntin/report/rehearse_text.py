"""A rehearsal on the screen: what was played, what it takes to stop, and a verdict."""

from __future__ import annotations

from dataclasses import asdict
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd
from rich.console import RenderableType
from rich.table import Table
from rich.text import Text

from muntin.record.definition import StopRule
from muntin.report.facts import Facts, records, study_facts
from muntin.report.rehearse_verdict import verdict
from muntin.report.text import few, read_lines, sheet
from muntin.report.words import share_text

if TYPE_CHECKING:
    from muntin.rehearsal.rehearse import Rehearsal

_GAP, _MOST_COLUMNS = 2, 4
_DESIGNS = (
    "Plate by plate: muntin's choice after each plate. One shot: its choice of all wells at once; "
    "the full factorial is one plate, too."
)
_WITHIN = "What half of the series / nine in ten need at most; - where too few reach the rule:"
_SHARES = "Share of the range called wrongly after test wells: mean (nine in ten at most):"
_TRUTHS = {
    "posterior": "surfaces drawn from what the readings leave open",
    "lab": "labs drawn from published mechanism: elution, mixed mode and island windows in turn",
    "prior": "surfaces drawn from the prior",
}
_CAUTION = {
    "posterior": "Truths are what the study's own model holds possible: where the model is wrong, "
    "so is the rehearsal.",
    "lab": "The labs are of no particular resin or protein: they tell plans apart, they do not "
    "foretell yours.",
    "prior": "Nothing has been read: the prior alone says what a truth may look like.",
}


def rehearse_facts(told: Rehearsal) -> Facts:
    """Return a rehearsal as plain values; what is not reached, or not known, is null."""
    settings = asdict(told.settings)
    return {
        "command": "rehearse",
        "settings": settings,
        "study": study_facts(told.study),
        "stop": {**told.stop.model_dump(), "assumed": told.assumed},
        "to_stop": records(told.to_stop),
        "after": records(told.after),
        "against": records(told.against),
        "taken_up": told.taken_up,
        "notices": list(told.notices),
        "verdict": list(verdict(told)),
    }


def rehearse_screen(told: Rehearsal) -> RenderableType:
    """Return the screen of `rehearse`; it ends in the verdict."""
    own, *rivals = verdict(told)
    return sheet(
        told.study.definition.title,
        [
            ("Read", read_lines(told.study)),
            ("Played", _played(told)),
            ("Noted", few(told.notices, 4, "see --json")),
            ("Stop rule", [_rule(told), _WITHIN, _to_stop(told)]),
            ("Wrong calls", [_SHARES, _after(told.after)]),
            ("Caution", [_CAUTION[told.settings.truths]]),
            ("Rivals", rivals),
            ("Verdict", [own]),
        ],
    )


def _played(told: Rehearsal) -> list[str]:
    settings = told.settings
    sizes = " + ".join(map(str, settings.plates))
    lines = [
        f"{settings.series} series of {sizes} test wells (aim {settings.aim}, seed "
        f"{settings.seed}) on {_TRUTHS[settings.truths]}; refits in brief, on {settings.nodes} "
        "nodes a round."
    ]
    if "one shot" in set(told.to_stop["design"]):
        lines.append(_DESIGNS)
    if told.taken_up:
        lines.append(f"{told.taken_up} of them were played before and taken up from rehearsals/.")
    return lines


def rule_text(stop: StopRule) -> str:
    """Return a stop rule in words."""
    parts = []
    if stop.wrong_share is not None:
        parts.append(f"at most {share_text(stop.wrong_share)} of the range may be called wrongly")
    if stop.best_probability is not None:
        parts.append(f"the set point reaches {share_text(stop.best_probability)}")
    return " or ".join(parts)


def _rule(told: Rehearsal) -> str:
    rule = rule_text(told.stop)
    said = f"{rule[:1].upper()}{rule[1:]}, as the tool says it."
    if told.assumed:
        said += " An example: study.toml has no [stop] yet; fix yours before the next plate."
    return said


def _to_stop(told: Rehearsal) -> Table:
    """What each design takes: half of the series stay within / nine in ten do."""
    known = told.to_stop["mg_half"].notna().all()
    columns = {"tests": "test wells", "plates": "plates"} | ({"mg": "mg"} if known else {})
    table = _plain("", "reach it", *columns.values(), "wrong then")
    for _, row in told.to_stop.iterrows():
        reach = f"{row['reached']} of {row['series']}"
        spent = [f"{_number(row[f'{k}_half'])} / {_number(row[f'{k}_most'])}" for k in columns]
        wrong = share_text(row["wrong"]) if row["reached"] else "-"
        table.add_row(*map(Text, (str(row["design"]), reach, *spent, wrong)))
    return table


def _number(value: Any) -> str:
    return f"{value:.3g}" if np.isfinite(value) else "-"


def _after(after: pd.DataFrame) -> Table:
    """A row a design and a column a number of test wells, or the other way where these are many."""
    cells = {
        (
            row["design"],
            row["tests"],
        ): f"{share_text(row['wrong'])} ({share_text(row['wrong_most'])})"
        for _, row in after.iterrows()
    }
    tests, designs = sorted(set(after["tests"])), list(after["design"].unique())
    shown = ["now" if n == 0 else f"{n} wells" for n in tests]
    if len(tests) <= _MOST_COLUMNS:
        table = _plain("", *shown)
        for name in designs:
            table.add_row(*map(Text, (name, *(cells.get((name, n), "") for n in tests))))
        return table
    table = _plain("", *designs)
    for n, heading in zip(tests, shown, strict=True):
        table.add_row(*map(Text, (heading, *(cells.get((name, n), "") for name in designs))))
    return table


def _plain(first: str, *others: str) -> Table:
    table = Table(box=None, pad_edge=False, padding=(0, _GAP, 0, 0), header_style="dim")
    table.add_column(first, no_wrap=True)
    for heading in others:
        table.add_column(heading, justify="right")
    return table
