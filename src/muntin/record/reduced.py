"""Results that were reduced from reads: whether they are still what study.toml asks for."""

from __future__ import annotations

import json
from pathlib import Path

from muntin.record.definition import Definition
from muntin.record.faults import listed
from muntin.record.results import REDUCED
from muntin.record.tables import natural_order

REDUCTIONS = "reductions"


def reduced_notices(folder: Path, definition: Definition) -> list[str]:
    """Return a notice where results are of another recovery than [assay] now names."""
    if definition.assay is None:
        return []
    otherwise: dict[str, list[str]] = {}
    for path in sorted(
        (folder / "results").glob(f"{REDUCED}*.csv"), key=lambda p: natural_order(p.name)
    ):
        plate = path.stem.removeprefix(REDUCED)
        recovery = _recovery(folder / REDUCTIONS / f"{plate}.json")
        if recovery not in ("", definition.assay.recovery):
            otherwise.setdefault(recovery, []).append(plate)
    return [
        f"results of {listed(plates)} were reduced as {recovery}; study.toml, [assay] now says "
        f"{definition.assay.recovery}: run muntin reduce again, the old values are used until then"
        for recovery, plates in otherwise.items()
    ]


def _recovery(path: Path) -> str:
    """Which recovery a record of a reduction tells of; "" where it cannot be read."""
    try:
        record = json.loads(path.read_bytes())
    except (OSError, ValueError):
        return ""
    said = record.get("recovery") if isinstance(record, dict) else ""
    return said if isinstance(said, str) else ""
