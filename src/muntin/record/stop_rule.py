"""The stop rule on record: fixed before data, and changed for a reason only.

muntin keeps each rule as it first saw it, one JSON line a rule, in a small file of the study. The
last line holds. Before any reading the rule may be changed at will; afterwards a change counts
once study.toml gives its reason, and until then the recorded rule is the one that is applied: work
goes on, but the goal does not move unseen.
"""

from __future__ import annotations

import datetime
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from pydantic import ValidationError

from muntin.record.definition import STUDY_FILE, StopRule
from muntin.record.faults import Fault, Findings, counted, number, quoted
from muntin.record.files import NotTextError, decoded
from muntin.record.keys import Keys

STOP_FILE = "stop-rule.jsonl"


class RecordedStop(Keys):
    """A stop rule as it was seen: the day, the rule, how many wells had been read by then, and
    why it was changed; "" for the first, and for changes before any reading.
    """

    date: datetime.date
    wrong_share: float | None
    best_probability: float | None
    wells_read: int
    reason: str

    @property
    def rule(self) -> StopRule | None:
        """The rule itself; None where it has no limit."""
        if self.wrong_share is None and self.best_probability is None:
            return None
        return StopRule(wrong_share=self.wrong_share, best_probability=self.best_probability)


@dataclass(frozen=True, kw_only=True)
class Standing:
    """The rule that holds (None: there is none), a notice on it ("" if there is nothing to say),
    and whether the rule is still to be recorded, with how many wells read and which reason.
    """

    rule: StopRule | None
    notice: str = ""
    unrecorded: bool = False
    wells_read: int = 0
    reason: str = ""


def standing_rule(
    stop: StopRule | None, recorded: Sequence[RecordedStop], wells_read: int
) -> Standing:
    """Return which rule holds: that of study.toml, or the last recorded one where it was changed
    without a new reason after `wells_read` wells had been read.
    """
    given = None if stop is None or _limits(stop) == (None, None) else stop
    reason = "" if stop is None or stop.changed_because is None else stop.changed_because.strip()
    if not recorded:
        late = f"{STUDY_FILE}, stop: seen first after {counted(wells_read, 'well')} had been read"
        notice = f"{late}; a stop rule is fixed before data" if given and wells_read else ""
        unrecorded = given is not None
        return Standing(rule=given, notice=notice, unrecorded=unrecorded, wells_read=wells_read)
    last = recorded[-1]
    if _limits(given) == _limits(last.rule):
        return Standing(rule=last.rule)
    if not wells_read:
        return Standing(rule=given, unrecorded=True)
    change = f"{rule_text(given)} in place of {rule_text(last.rule)}, recorded on {last.date}"
    if reason and reason != last.reason:
        notice = f"{STUDY_FILE}, stop: {change}, because: {quoted(reason)}"
        return Standing(
            rule=given, notice=notice, unrecorded=True, wells_read=wells_read, reason=reason
        )
    again = " (a new one: the reason given is that of the last change)" if reason else ""
    notice = (
        f"{STUDY_FILE}, stop: {change}, without a reason: THE RECORDED RULE HOLDS. To change it, "
        f'write under [stop] changed_because = "why"{again}; else put the recorded values back'
    )
    return Standing(rule=last.rule, notice=notice)


def _limits(rule: StopRule | None) -> tuple[float | None, float | None]:
    return (None, None) if rule is None else (rule.wrong_share, rule.best_probability)


def rule_text(rule: StopRule | None) -> str:
    """Return a rule as study.toml has it, such as "wrong_share 0.02 or best_probability 0.95"."""
    names = ("wrong_share", "best_probability")
    given = zip(names, _limits(rule), strict=True)
    parts = [f"{name} {number(limit)}" for name, limit in given if limit is not None]
    return " or ".join(parts) or "no rule"


def read_stops(folder: Path, found: Findings) -> tuple[RecordedStop, ...]:
    """Return the stop rules on record, oldest first; a line that is none of them is a fault."""
    path, stops = folder / STOP_FILE, []
    if not path.exists():
        return ()
    hint = f"muntin keeps this file; copies lie in advice/*/*/inputs/{STOP_FILE}"
    try:
        lines = decoded(path.read_bytes()).splitlines()
    except (OSError, NotTextError):
        found.faults.append(Fault(file=STOP_FILE, problem="cannot be read as text", hint=hint))
        return ()
    for row, line in enumerate(lines, start=1):
        if line.strip():
            try:
                stops.append(RecordedStop.model_validate_json(line))
            except ValidationError:
                problem = "is not the record of a stop rule"
                found.faults.append(
                    Fault(file=STOP_FILE, where=f"line {row}", problem=problem, hint=hint)
                )
    return tuple(stops)


def stop_text(
    standing: Standing, recorded: Sequence[RecordedStop], today: datetime.date
) -> str | None:
    """Return the record with the rule that holds added to it, or None where it is there already."""
    if not standing.unrecorded:
        return None
    wrong_share, best_probability = _limits(standing.rule)
    new = RecordedStop(
        date=today,
        wrong_share=wrong_share,
        best_probability=best_probability,
        wells_read=standing.wells_read,
        reason=standing.reason,
    )
    return "".join(f"{stop.model_dump_json()}\n" for stop in (*recorded, new))
