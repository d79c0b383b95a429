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

_GAP = 3
_DESIGNS = (
    "Plate by plate: muntin's choice after each plate; one shot: its choice of all wells at once."
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
    """Return the screen of `rehearse`."""
    return sheet(
        told.study.definition.title,
        [
            ("Read", read_lines(told.study)),
            ("Played", _played(told)),
            ("Noted", few(told.notices, 4, "see --json")),
            ("Stop rule", [_rule(told), _WITHIN, _to_stop(told)]),
            ("Wrong calls", [_SHARES, _after(told.after)]),
            ("Verdict", verdict(told)),
            ("Caution", [_CAUTION[told.settings.truths]]),
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
        fewer = row["planned_plates"] < len(told.settings.plates)
        name = f"{row['design']}, one plate" if fewer else str(row["design"])
        reach = f"{row['reached']} of {row['series']}"
        spent = [f"{_number(row[f'{k}_half'])} / {_number(row[f'{k}_most'])}" for k in columns]
        wrong = share_text(row["wrong"]) if row["reached"] else "-"
        table.add_row(*map(Text, (name, reach, *spent, wrong)))
    return table


def _number(value: Any) -> str:
    return f"{value:.3g}" if np.isfinite(value) else "-"


def _after(after: pd.DataFrame) -> Table:
    """A row a design, a column a number of test wells."""
    tests = sorted(set(after["tests"]))
    table = _plain("", *("now" if n == 0 else f"{n} wells" for n in tests))
    for name in after["design"].unique():
        mine = after[after["design"] == name].set_index("tests")
        cells = [
            f"{share_text(mine.at[n, 'wrong'])} ({share_text(mine.at[n, 'wrong_most'])})"
            if n in mine.index
            else ""
            for n in tests
        ]
        table.add_row(*map(Text, (name, *cells)))
    return table


def _plain(first: str, *others: str) -> Table:
    table = Table(box=None, pad_edge=False, padding=(0, _GAP, 0, 0), header_style="dim")
    table.add_column(first, no_wrap=True)
    for heading in others:
        table.add_column(heading, justify="right")
    return table
