"""Wells of the plate tables beside those of the reads: which of them stand in one alone."""

from __future__ import annotations

from collections import Counter, defaultdict
from collections.abc import Iterator, Mapping, Sequence
from statistics import median

import pandas as pd

from muntin.assay.reads import Read
from muntin.assay.samples import REDUCED
from muntin.record.assay import Assay
from muntin.record.faults import counted, listed
from muntin.record.tables import natural_order
from muntin.record.wells import position

_FEW = 3


def well_notices(
    wells: pd.DataFrame, reads: Sequence[Read], assay: Assay, size: int
) -> Iterator[str]:
    """Yield wells without a read, and reads of wells that no plate table names, plate by plate.

    `wells` is the wells table of the study. Plates without a read of the protein are passed over.
    """
    read: Mapping[str, list[Read]] = defaultdict(list)
    for one in reads:
        read[one.plate].append(one)
    for plate in sorted(read, key=natural_order):
        here = read[plate]
        if not any(one.wavelength == assay.protein_nm for one in here):
            continue
        table = wells[wells["plate"] == plate]
        roles = dict(zip(table["well"], table["role"], strict=True))
        missing = _missing(table, {one.well for one in here}, assay)
        if missing:
            named = listed(f"{well} ({roles[well]})" for well in missing)
            yield f"{plate}: wells of the plate table without reads: {named}{_more(here, roles)}"
        strangers = [*dict.fromkeys(one.well for one in here if one.well not in roles)]
        if strangers:
            meant = _meant(strangers, missing, size)
            yield (
                f"{plate}: reads of {counted(len(strangers), 'well')} that its plate table does "
                f"not name are passed over ({listed(strangers)}){meant}"
            )


def _missing(table: pd.DataFrame, read: set[str], assay: Assay) -> list[str]:
    """Wells that ought to have been read and were not; not those that were left out."""
    wanted = {*REDUCED, "blank", *(["load"] if assay.load_mg_ml is None else [])}
    rows = zip(table["well"], table["role"], table["exclude"], strict=True)
    return [well for well, role, why in rows if role in wanted and not why and well not in read]


def _more(reads: Sequence[Read], roles: Mapping[str, str]) -> str:
    """What to ask where a few wells have more reads of a sample than the others: two wells may go
    by one name.
    """
    samples = Counter((r.well, r.fraction, r.wavelength, r.dilution) for r in reads)
    most: dict[str, int] = {}
    for (well, *_), count in samples.items():
        if roles.get(well) in REDUCED:
            most[well] = max(count, most.get(well, 0))
    usual = median(most.values()) if most else 0
    more = [well for well, count in most.items() if count > usual]
    if not 0 < len(more) <= _FEW:
        return ""
    have = "has" if len(more) == 1 else "have"
    return f"; {listed(more)} {have} more reads of one sample than others: is a well misnamed?"


def _meant(strangers: Sequence[str], missing: Sequence[str], size: int) -> str:
    """Which well without reads each stranger may be: in its row or column, and near."""
    if not missing or len(strangers) > _FEW:
        return ""
    near = [min(missing, key=lambda well: _apart(well, one, size)) for one in strangers]
    pairs = (f"is {one} meant to be {well}?" for one, well in zip(strangers, near, strict=True))
    return "; " + " ".join(pairs)


def _apart(one: str, other: str, size: int) -> tuple[bool, int]:
    (r, c), (row, column) = position(one, size), position(other, size)
    return r != row and c != column, abs(r - row) + abs(c - column)
