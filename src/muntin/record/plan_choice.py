"""Which plan is meant: the one that was named, else the latest of the next plate."""

from __future__ import annotations

import re
from pathlib import Path

from muntin.record.faults import Fault, Findings, StudyFaults, did_you_mean, listed
from muntin.record.offers import PLANS
from muntin.record.tables import SUFFIXES, table_files

_REVISION = re.compile(r"\.r[0-9]+$")


def chosen_plan(folder: Path, plate: str, name: str | Path | None = None) -> Path:
    """Return the plan to work from: a file, or the name of one in plans/ with or without its
    ending; without a name the last revision of `plate`.

    Raises StudyFaults where there is none.
    """
    found = Findings()
    plans = dict(table_files(folder / PLANS, found))
    if found.faults:
        raise StudyFaults(found.faults)
    if name is not None:
        return _named(Path(name), plans)
    of_plate = [path for stem, path in plans.items() if _REVISION.sub("", stem) == plate]
    if not of_plate:
        others = f"it holds {listed(p.name for p in plans.values())}; " if plans else ""
        hint = f"{others}muntin propose writes one"
        raise StudyFaults([Fault(file=PLANS, problem=f"holds no plan of {plate}", hint=hint)])
    return of_plate[-1]


def _named(name: Path, plans: dict[str, Path]) -> Path:
    if name.is_file():
        return name
    stem = name.stem if name.suffix.lower() in SUFFIXES else name.name
    if str(name.parent) in (".", PLANS) and stem in plans:
        return plans[stem]
    hint = did_you_mean(stem, [*plans]) if plans else "muntin propose writes one"
    raise StudyFaults([Fault(file=str(name), problem="there is no such plan", hint=hint)])
