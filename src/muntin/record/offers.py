"""Plans as they were offered, and how a plan or a plate that was run differs from them."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Literal

import pandas as pd

from muntin.record.cells import CellError, parse_number
from muntin.record.definition import Definition
from muntin.record.faults import Findings
from muntin.record.plates import plate_columns
from muntin.record.readings import INFORMING
from muntin.record.tables import Table, natural_order, read_table
from muntin.record.wells import WellError, well_name

PLANS, OFFERED = "plans", "offered"
Kind = Literal["changed", "moved", "left out", "added", "chosen"]
Condition = tuple[object, ...]
# What muntin itself writes as a reason, and what it adds to one.
_GIVEN = re.compile(
    r"probability [0-9]\.[0-9]{2},|^well [0-9]+ of this condition|: ties plates$|^opening plate,|"
    r"^set by hand"
)
_MEASURED = re.compile(r"(; [^;]+ measured [-+.0-9e]+)+$")


@dataclass(frozen=True)
class OfferedWell:
    """One well of a plan: its name, role, condition (targets, raw units; None for a control) and
    the reason that was given.
    """

    well: str
    role: str
    condition: Condition | None
    reason: str = ""


@dataclass(frozen=True)
class Offer:
    """A plan as it was offered; file is its path inside the study."""

    file: str
    path: Path
    wells: tuple[OfferedWell, ...]


@dataclass(frozen=True)
class Change:
    """One difference between what was offered and what is.

    was and now: the two wells, None where there is none. because: why, in the user's words.
    """

    kind: Kind
    was: OfferedWell | None
    now: OfferedWell | None
    because: str = ""


def offers_of(folder: Path, definition: Definition, plate: str) -> list[Offer]:
    """Return the plans that were offered for a plate, oldest first; unreadable ones left out."""
    offered = folder / PLANS / OFFERED
    paths = [p for p in offered.glob(f"{plate}*.csv") if _is_of(p, plate)]
    paths = sorted(paths, key=lambda p: natural_order(p.name))
    paths += sorted(
        (folder / "advice" / plate).glob("r*/plan.csv"), key=lambda p: natural_order(str(p))
    )
    offers = []
    for path in paths:
        file = path.relative_to(folder).as_posix()
        table = read_table(path, file, plate_columns(definition), Findings())
        if table is not None:
            offers.append(Offer(file, path, tuple(_offered(table, definition))))
    return offers


def _is_of(path: Path, plate: str) -> bool:
    rest = path.stem.removeprefix(plate)
    return rest == "" or (rest.startswith(".r") and rest[2:].isdigit())


def _offered(table: Table, definition: Definition) -> Iterable[OfferedWell]:
    names = definition.factor_names
    columns = [table.cells(name) for name in ("well", "role", "reason", *names)]
    for well, role, reason, *cells in zip(*columns, strict=True):
        try:
            name = well_name(well, definition.plate)
        except WellError:
            continue
        condition = _condition(definition, cells) if role in INFORMING else None
        yield OfferedWell(name, role, condition, reason)


def _condition(definition: Definition, cells: Sequence[str]) -> Condition:
    values: list[object] = []
    for factor, cell in zip(definition.factors, cells, strict=True):
        try:
            values.append(round(parse_number(cell), 9) if factor.continuous else cell)
        except CellError:
            values.append(cell)
    return tuple(values)


def wells_of(definition: Definition, rows: pd.DataFrame, ending: str = "") -> list[OfferedWell]:
    """Return the rows of a plan or plate: well, role, the factors (with `ending`), reason."""
    names = [f"{name}{ending}" for name in definition.factor_names]
    out = []
    for row in rows.to_dict("records"):
        condition: Condition | None = None
        if row["role"] in INFORMING:
            condition = tuple(
                round(float(row[n]), 9) if f.continuous else row[n]
                for f, n in zip(definition.factors, names, strict=True)
            )
        out.append(OfferedWell(row["well"], row["role"], condition, str(row.get("reason", ""))))
    return out


def differences(offered: Sequence[OfferedWell], there: Sequence[OfferedWell]) -> list[Change]:
    """Return what was changed, well by well: first wells that only moved, then those that were
    given another condition or role, then those left out and added.

    A well without a name, still to be found, counts as neither moved nor changed where its
    condition was offered.
    """
    left, right = [*offered], [*there]
    _pair(left, right, lambda a, b: (a.well, a.role, a.condition) == (b.well, b.role, b.condition))
    taken = {well.well for well in right}
    moved = _pair(left, right, lambda a, b: a.well not in taken and _same(a, b))
    moved += _pair(left, right, _same)
    changed = _pair(left, right, lambda a, b: bool(a.well) and a.well == b.well)
    changes = [Change("moved", was, now) for was, now in moved if now.well]
    changes += [Change("changed", was, now) for was, now in changed]
    changes += [Change("left out", was, None) for was in left]
    return changes + [Change("added", None, now) for now in right]


def _same(one: OfferedWell, other: OfferedWell) -> bool:
    """Whether two wells are given the same, wherever they lie."""
    return (one.role, one.condition) == (other.role, other.condition)


def _pair(
    left: list[OfferedWell],
    right: list[OfferedWell],
    alike: Callable[[OfferedWell, OfferedWell], bool],
) -> list[tuple[OfferedWell, OfferedWell]]:
    """Take the pairs that are alike out of both lists, and return them."""
    pairs = []
    for was in [*left]:
        now = next((b for b in right if alike(was, b)), None)
        if now is not None:
            left.remove(was)
            right.remove(now)
            pairs.append((was, now))
    return pairs


def offers_for(offers: Sequence[Offer], path: Path, plans: Path) -> list[Offer]:
    """Return the offers that a plan's file may have been edited from: of a file in plans/ the copy
    of its name, else those kept with advice, else all.
    """
    if path.resolve().parent != plans.resolve():
        return [*offers]
    copy = [o for o in offers if o.path.parent.name == OFFERED and o.path.name == path.name]
    advice = [o for o in offers if o.path.parent.name != OFFERED]
    return copy or advice or [*offers]


def nearest_offer(
    offers: Sequence[Offer], there: Sequence[OfferedWell]
) -> tuple[Offer, list[Change]] | None:
    """Return the offer that a plan differs least from, the latest of equals, and how it differs."""
    best = None
    for offer in offers:
        changes = differences(offer.wells, there)
        if best is None or len(changes) <= len(best[1]):
            best = (offer, changes)
    return best


def own_words(reason: str) -> str:
    """Return a reason as far as it is the user's own, "" for one that muntin gave."""
    plain = without_measured(reason)
    return "" if _GIVEN.search(plain) else plain


def without_measured(reason: str) -> str:
    """Return a reason without the measured values that may stand at its end."""
    return _MEASURED.sub("", reason)


def with_reasons(
    changes: Iterable[Change], left_out: Sequence[tuple[OfferedWell, str]]
) -> list[Change]:
    """Return the changes with the user's words: those in the reason column, and those in the
    exclude column of rows left out.
    """
    words = {(w.well, w.role): why for w, why in left_out}
    out = []
    for change in changes:
        because = change.because
        if change.kind == "left out" and change.was is not None:
            because = words.get((change.was.well, change.was.role), "")
        elif change.now is not None:
            because = own_words(change.now.reason)
        out.append(replace(change, because=because))
    return out


def with_chosen(changes: Sequence[Change], chosen: Sequence[OfferedWell]) -> list[Change]:
    """Return the changes with the wells that were chosen besides what was kept.

    Where one is given what a well was that was taken out without a reason, that well only moved, or
    is not changed at all.
    """
    out = [*changes]
    for now in chosen:
        back = [c for c in out if c.kind == "left out" and not c.because and _is(c.was, now)]
        if not back:
            out.append(Change("chosen", None, now))
            continue
        there = next((c for c in back if c.was is not None and c.was.well == now.well), back[0])
        out.remove(there)
        if there.was is not None and there.was.well != now.well:
            out.append(Change("moved", there.was, now))
    return out


def _is(was: OfferedWell | None, now: OfferedWell) -> bool:
    return was is not None and _same(was, now)
