"""Changes: what earlier advice rested on and is now otherwise, until somebody says why.

The study is held against the last advice whose changes were all explained. New plates, readings
that were awaited, and wells left out with a reason in words are no changes; what was left out is
told apart.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pandas as pd

from muntin.record.asked import asked_changes, asked_of
from muntin.record.faults import StudyFaults, counted, listed, number, quoted
from muntin.record.inputs import hashes, read_inputs
from muntin.record.ledger import Ledger, Line
from muntin.record.readings import INFORMING, USED

if TYPE_CHECKING:
    from muntin.record.study import Study

_LIKE_IT = 3


@dataclass(frozen=True, kw_only=True)
class Changes:
    """What differs from earlier advice, one sentence each, and what that was; left_out: what that
    advice rested on and was left out since, with the reason in the tables.
    """

    since: str = ""
    sentences: tuple[str, ...] = ()
    left_out: tuple[str, ...] = ()

    @property
    def notice(self) -> str:
        """One sentence for the screen; "" where nothing differs."""
        if not self.sentences:
            return ""
        return (
            f"CHANGED since {self.since}, and no reason was given: {self._first}. Say why with "
            "--by NAME --because TEXT at the next muntin advise"
        )

    def explained(self, by: str, because: str) -> str:
        """The same sentence once somebody says why; "" where nothing differs."""
        if not self.sentences:
            return ""
        return f"Changed since {self.since}: {self._first}. Why: {quoted(because)} ({by})"

    @property
    def _first(self) -> str:
        rest = len(self.sentences) - _LIKE_IT
        more = f"; and {rest} more (muntin verify names all)" if rest > 0 else ""
        return f"{'; '.join(self.sentences[:_LIKE_IT])}{more}"


NO_CHANGES = Changes()


@dataclass(frozen=True, kw_only=True)
class Explained:
    """Changes for which a reason was given: when (UTC), who, why, and what, one sentence each."""

    line: int
    time: str
    by: str
    because: str
    said: tuple[str, ...]


def explained_changes(ledger: Ledger) -> list[Explained]:
    """Return the changes that were explained, oldest first."""
    return [
        Explained(
            line=line.number,
            time=line.time,
            by=line.entry.by or "nobody",
            because=line.entry.because,
            said=line.entry.changes,
        )
        for line in ledger.sound
        if line.entry.changes and line.entry.because
    ]


def changes_of(study: Study, ledger: Ledger, reopen: Callable[[Path], Study]) -> Changes:
    """Return what differs between a study and what its explained advice rested on.

    `reopen` reads a study from a folder.
    """
    lines = [line for line in ledger.sound if line.entry.asked and not line.open]
    advice = [line for line in lines if line.advice is not None]
    asked: list[str] = []
    edited: list[str] = []
    left_out: list[str] = []
    if lines and _has_data(study):
        asked = asked_changes(lines[-1].entry.asked, asked_of(study.definition))
    if advice:
        edited, left_out = input_changes(study, advice[-1], reopen)
    since = lines[-1] if asked else advice[-1] if edited or left_out else None
    return Changes(
        since="" if since is None else _named(since),
        sentences=(*asked, *edited),
        left_out=tuple(left_out),
    )


def _named(line: Line) -> str:
    return line.advice or f"muntin {line.entry.command} of {line.time[:10]}"


def _has_data(study: Study) -> bool:
    wells = study.informing()
    return any(wells[f"{r.name}_state"].isin(USED).any() for r in study.definition.responses)


def input_changes(
    study: Study, line: Line, reopen: Callable[[Path], Study]
) -> tuple[list[str], list[str]]:
    """Return how the tables of a study differ from those that an advice rested on, and what of
    them was left out since.
    """
    now = {n: h for n, h in hashes(read_inputs(study.folder)).items() if "/" in n}
    recorded = {n: h for n, h in line.entry.inputs.items() if "/" in n}
    if now == recorded:
        return [], []
    other = [name for name, of in recorded.items() if now.get(name) != of]
    copy = study.folder / str(line.advice) / "inputs"
    try:
        was = reopen(copy)
    except StudyFaults:
        verb = {True: "reads otherwise", False: "was deleted"}
        return [f"{name} {verb[name in now]}" for name in other], []
    return well_changes(was, study), left_out_since(was, study)


def well_changes(was: Study, now: Study) -> list[str]:
    """Return what wells of one study have otherwise in the other, one sentence a plate and kind."""
    sentences = []
    here = {plate.name: plate for plate in now.plates}
    for plate in was.plates:
        if plate.name not in here:
            count = int((was.wells["plate"] == plate.name).sum())
            sentences.append(f"{plate.name} was deleted ({counted(count, 'well')})")
        elif plate.void and not here[plate.name].void:
            sentences.append(f"{plate.name} counts again; it was void: {plate.void}")
        elif not here[plate.name].void:
            sentences += _plate_changes(was, now, plate.name)
    return sentences


def _plate_changes(was: Study, now: Study, plate: str) -> Iterator[str]:
    found: dict[str, list[str]] = defaultdict(list)
    there = _rows(now, plate)
    for well, row in _rows(was, plate).items():
        if row["role"] not in INFORMING and there.get(well, {}).get("role") not in INFORMING:
            continue
        if well not in there:
            found["wells deleted"].append(well)
            continue
        for what, said in _row_changes(now, row, there[well]):
            found[what].append(f"{well} {said}")
    for what, wells in found.items():
        yield f"{plate}, {what}: {listed(wells, most=4)}"


def left_out_since(was: Study, now: Study) -> list[str]:
    """Return what counted in one study and is left out of the other with a reason, one sentence a
    plate, response and reason.
    """
    sentences = []
    here = {plate.name: plate for plate in now.plates}
    for plate in was.plates:
        if plate.void or plate.name not in here:
            continue
        if why := here[plate.name].void:
            sentences.append(f"{plate.name} was made void: {why}")
        else:
            sentences += _left_out(was, now, plate.name)
    return sentences


def _left_out(was: Study, now: Study, plate: str) -> Iterator[str]:
    found: dict[tuple[str, str], list[str]] = defaultdict(list)
    there = _rows(now, plate)
    for well, row in _rows(was, plate).items():
        for name in (response.name for response in now.definition.responses):
            state = f"{name}_state"
            if row.get(state) in USED and there.get(well, {}).get(state) == "excluded":
                why = there[well]["exclude"] or there[well][f"{name}_exclude"]
                found[name, why].append(f"{well} {_reading(name, row)}")
    for (name, why), wells in found.items():
        yield f"{plate}, {name}: left out {listed(wells, most=4)}: {why}"


def _rows(study: Study, plate: str) -> dict[str, dict[str, Any]]:
    rows = study.wells[study.wells["plate"] == plate].to_dict("records")
    return {str(row["well"]): {str(k): v for k, v in row.items()} for row in rows}


def _row_changes(
    study: Study, was: dict[str, Any], now: dict[str, Any]
) -> Iterator[tuple[str, str]]:
    if now["role"] != was["role"]:
        yield "role", f"{was['role']}, now {now['role']}"
    for factor in study.definition.factors:
        name = factor.name
        both = was.get(f"{name}_measured") and now[f"{name}_measured"]
        for column in (f"{name}_target", *([name] if both else [])):
            if column in was and not _same(was[column], now[column]):
                yield name, f"{_value(was[column])}, now {_value(now[column])}"
                break
    for response in study.definition.responses:
        if f"{response.name}_state" in was and not now["exclude"]:
            yield from _reading_changes(response.name, was, now)


def _reading_changes(
    name: str, was: dict[str, Any], now: dict[str, Any]
) -> Iterator[tuple[str, str]]:
    before, after = was[f"{name}_state"], now[f"{name}_state"]
    if after == "excluded" or before in ("awaited", "none"):
        return
    if before == "excluded":
        why = was["exclude"] or was[f"{name}_exclude"]
        yield name, f"counts again; it was left out: {why}"
    elif after not in USED:
        yield name, f"{_reading(name, was)}, now gone"
    elif _reading(name, was) != _reading(name, now):
        yield name, f"{_reading(name, was)}, now {_reading(name, now)}"
    elif not _same(was[f"{name}_sd"], now[f"{name}_sd"]) and not pd.isna(was[f"{name}_sd"]):
        yield f"{name}_sd", f"{_value(was[f'{name}_sd'])}, now {_value(now[f'{name}_sd'])}"


def _reading(name: str, row: dict[str, Any]) -> str:
    sign = {-1: "<", 0: "", 1: ">"}[int(row[f"{name}_side"])]
    return f"{sign}{_value(row[name])}"


def _same(one: Any, other: Any) -> bool:
    return bool(one == other or (pd.isna(one) and pd.isna(other)))


def _value(value: Any) -> str:
    return number(value) if isinstance(value, float) else str(value)
