"""Verify: recompute recorded advice from its copied inputs, and hold the record against itself."""

from __future__ import annotations

import json
import math
import shutil
import tempfile
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from muntin.advise import AdviceSettings, find
from muntin.record import StudyFaults, open_study
from muntin.record.asked import asked_changes, asked_of
from muntin.record.changes import Explained, explained_changes, well_changes
from muntin.record.faults import counted, number, quoted
from muntin.record.inputs import hashes, read_inputs, versions
from muntin.record.kept import ADVICE_FILE, advice_folders, kept_files, read_advice
from muntin.record.ledger import read_ledger
from muntin.record.offers import PLANS
from muntin.record.writing import unfinished_notice
from muntin.report.advice_files import json_text
from muntin.report.plan_files import PLAN_COPY

# Numbers agree within this, or within this share of the recorded one where that is above 1.
TOLERANCE = 1e-6
_SECTIONS = ("engine", "awaited", "nothing_run", "provisional", "model", "together", "checks")
_COMPARED = (*_SECTIONS, "window", "plan", "cautions")
_MOST = 5


@dataclass(frozen=True, kw_only=True)
class Rechecked:
    """One advice: its folder in the study, how many values were recomputed (None: none), what
    differs and what is to be noted.
    """

    folder: str
    values: int | None
    differs: tuple[str, ...]
    notes: tuple[str, ...]


@dataclass(frozen=True, kw_only=True)
class Verified:
    """What verifying a study found: the lines of its ledger, its advice, and one sentence for
    each thing that differs or is to be noted.
    """

    title: str
    lines: int
    advice: tuple[Rechecked, ...]
    differs: tuple[str, ...]
    notes: tuple[str, ...]

    @property
    def clean(self) -> bool:
        """Whether nothing differs."""
        return not self.differs


def verify(
    folder: str | Path,
    *,
    recompute: bool = True,
    tell: Callable[[str], None] = lambda _: None,
) -> Verified:
    """Hold the ledger, the files it tells of, every advice and the study as it is now against each
    other; nothing is written in the study.

    recompute: whether advice is computed again from its copied inputs; `tell` hears which. Raises
    StudyFaults where there is no such folder, or it holds neither study nor record.
    """
    base = Path(folder)
    ledger = read_ledger(base)
    if not ledger.texts and not ledger.torn:
        open_study(base)
    kept = kept_files(base, ledger)
    title, now, remarks = _as_it_is(base)
    advice = []
    for path in advice_folders(base):
        shown = path.relative_to(base).as_posix()
        tell(f"recomputing {shown}" if recompute else f"reading {shown}")
        advice.append(_rechecked(base, shown, recompute))
    left = unfinished_notice(base)
    return Verified(
        title=title,
        lines=len(ledger.texts),
        advice=tuple(advice),
        differs=(*ledger.problems, *kept.differs, *(d for a in advice for d in a.differs), *now),
        notes=(
            *([left] if left else []),
            *map(_explained, explained_changes(ledger)),
            *kept.notes,
            *(note for a in advice for note in a.notes),
            *remarks,
        ),
    )


def _as_it_is(folder: Path) -> tuple[str, list[str], list[str]]:
    """The study's title, how it differs now from what its advice rested on, and remarks."""
    try:
        study = open_study(folder)
    except StudyFaults as faults:
        return str(folder), [f"the study cannot be read now: {faults.lines()[0]}"], []
    changes = study.changes
    said = (*changes.sentences, *changes.left_out)
    told = [f"since {changes.since}: {one}" for one in said]
    aside = [path.name for path in sorted(folder.glob("ledger-torn-*.txt"))]
    remarks = [f"{name}: a torn line, set aside" for name in aside]
    if changes.sentences:
        remarks.append("muntin advise --by NAME --because TEXT puts on record why it was changed")
    if stopping := study.stopping.notice:
        # A rule that will go on record is a remark; one that is not followed is a change.
        (remarks if study.stopping.unrecorded else told).append(stopping)
    return study.definition.title, told, remarks


def _explained(one: Explained) -> str:
    why = f"{one.by}, {one.time[:10]}: {quoted(one.because)}"
    return f"line {one.line} explains {'; '.join(one.said)} ({why})"


def _rechecked(base: Path, shown: str, recompute: bool) -> Rechecked:
    """Recompute one advice."""
    facts = read_advice(base / shown / ADVICE_FILE)
    try:
        copies = read_inputs(base / shown / "inputs")
        settings = AdviceSettings(**facts["settings"])
        recorded, was = facts["inputs"], facts["versions"]
    except (StudyFaults, KeyError, TypeError):
        problem = f"{shown}: {ADVICE_FILE} or its inputs cannot be read"
        return Rechecked(folder=shown, values=None, differs=(problem,), notes=())
    differs = [*_altered_copies(base, shown, recorded, hashes(copies))]
    notes = [f"{shown}: {said}" for said in _other_versions(was)]
    count = None
    if settings.engine == "nuts":
        notes.append(f"{shown}: made by --engine nuts, which is not sampled again")
    elif recompute:
        count, other = _recomputed(base / shown, facts, settings)
        with_versions = " (with other versions)" if notes else ""
        differs += [f"{shown}{with_versions}: {said}" for said in other]
    return Rechecked(folder=shown, values=count, differs=tuple(differs), notes=tuple(notes))


def _other_versions(was: Mapping[str, str]) -> list[str]:
    now = versions()
    return [
        f"{name} was {of}, is now {now.get(name, 'not there')}"
        for name, of in was.items()
        if now.get(name) != of
    ]


def _altered_copies(
    base: Path, shown: str, recorded: Mapping[str, str], there: Mapping[str, str]
) -> Iterator[str]:
    """Say which copied inputs are not what was read, and in which cells where that can be told."""
    names = dict.fromkeys([*recorded, *there])
    other = [name for name in names if recorded.get(name) != there.get(name)]
    for name in other:
        verb = "was deleted" if name not in there else "was altered after it was read"
        yield f"{shown}/inputs/{name} {verb if name in recorded else 'was added'}"
    if not other:
        return
    try:
        original, copy = open_study(base), open_study(base / shown / "inputs")
        now = hashes(read_inputs(base))
    except StudyFaults:
        return
    if all(now.get(name) == recorded.get(name) for name in other):
        asked = asked_changes(asked_of(original.definition), asked_of(copy.definition))
        for said in (*asked, *well_changes(original, copy)):
            yield f"{shown}/inputs: {said}"


def _recomputed(
    path: Path, facts: Mapping[str, Any], settings: AdviceSettings
) -> tuple[int | None, list[str]]:
    """How many values were compared, and which differ."""
    with tempfile.TemporaryDirectory() as made:
        folder = Path(made)
        shutil.copytree(path / "inputs", folder, dirs_exist_ok=True)
        if (path / PLAN_COPY).is_file():
            (folder / PLANS).mkdir(exist_ok=True)
            shutil.copy(path / PLAN_COPY, folder / PLANS / f"{path.parent.name}.csv")
        try:
            found = json.loads(json_text(find(open_study(folder), settings).facts))
        except StudyFaults as faults:
            return None, [f"cannot be computed again: {faults.lines()[0]}"]
    count, other = 0, []
    for section in _COMPARED:
        if section in facts:
            for where, was, now in differences(facts[section], found.get(section), (section,)):
                count += 1
                if not agree(was, now):
                    other.append(f"{where}: {_shown(was)} on record, {_shown(now)} recomputed")
    rest = len(other) - _MOST
    return count, other[:_MOST] + ([f"and {counted(rest, 'more value')}"] if rest > 0 else [])


def differences(was: Any, now: Any, path: Sequence[str]) -> Iterator[tuple[str, Any, Any]]:
    """Yield every recorded value with its place and what was recomputed; notices are left out,
    since they speak of the whole folder.
    """
    if isinstance(was, Mapping) and isinstance(now, Mapping):
        for name, value in was.items():
            if name not in ("notices", "notice"):
                yield from differences(value, now.get(name), (*path, name))
    elif isinstance(was, list) and isinstance(now, list) and len(was) == len(now):
        for index, (one, other) in enumerate(zip(was, now, strict=True)):
            yield from differences(one, other, (*path, _label(one, index)))
    else:
        yield ", ".join(path), was, now


def _label(one: Any, index: int) -> str:
    """The name of an entry of a list: its well or its own name, else its place."""
    if isinstance(one, Mapping):
        for name in ("well", "name"):
            if isinstance(one.get(name), str):
                return str(one[name])
    return str(index + 1)


def agree(was: Any, now: Any) -> bool:
    """Whether two values agree: numbers within the tolerance, all else exactly."""
    numbers = all(isinstance(v, int | float) and not isinstance(v, bool) for v in (was, now))
    if numbers:
        return math.isclose(was, now, rel_tol=TOLERANCE, abs_tol=TOLERANCE)
    return bool(was == now)


def _shown(value: Any) -> str:
    if isinstance(value, list | dict):
        return counted(len(value), "entry").replace("entrys", "entries")
    if value is None:
        return "nothing"
    return number(value) if isinstance(value, float) else quoted(value)
