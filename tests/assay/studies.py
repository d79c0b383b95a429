"""Small invented studies with reads, written as files."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from muntin.assay.reduction import Reduction, reduce_reads
from muntin.record import open_study
from muntin.record.template import toml_value
from tests.studies import text

STAGES = (
    {"fraction": "ft", "stage": "load", "volume_ul": 300.0, "buffer": "binding"},
    {"fraction": "e1", "stage": "elution", "volume_ul": 200.0},
    {"fraction": "strip", "stage": "strip", "volume_ul": 200.0},
)
ROWS = (
    "well,role,ph,salt,recovery",
    "A1,test,5,100,",
    "B2,test,6,300,",
    "C3,test,7,200,",
    "D1,blank,,,",
    "D2,blank,,,",
    "E1,load,,,",
)
HEADING = "well,fraction,wavelength,absorbance,dilution"
# Path 200 / 1000 / 0.4 = 0.5 cm, extinction 2: a net absorbance of 1 is 1 mg/mL.
READS = (
    "E1,load,280,0.450,5",
    "D1,ft,280,0.050,",
    "D2,ft,280,0.050,",
    "D1,e1,280,0.050,",
    "D1,strip,280,0.050,",
    "A1,ft,280,0.150,",
    "A1,e1,280,1.050,",
    "A1,strip,280,0.950,",
    "B2,ft,280,0.150,",
    "B2,e1,280,1.850,",
    "B2,strip,280,0.550,",
    "C3,ft,280,0.250,",
    "C3,e1,280,0.060,",
    "C3,strip,280,1.750,",
)


def assay(**given: Any) -> dict[str, Any]:
    """Settings with round numbers."""
    own = {"extinction": 2.0, "read_ul": 200.0, "read_area_cm2": 0.4, "stages": list(STAGES)}
    return own | given


def write(
    folder: Path,
    reads: Sequence[str] | Mapping[str, str] = (HEADING, *READS),
    rows: Sequence[str] = ROWS,
    fixed: Mapping[str, Any] | None = None,
    target: Mapping[str, Any] | None = None,
    **given: Any,
) -> Path:
    """Write a study and its reads: lines of one table, or texts of files by name."""
    told = {"resin_ul": 40.0, "hold_up_ul": 20.0} if fixed is None else dict(fixed)
    more = {"name": "recovery", "kind": "fraction", "at_least": 0.8} | dict(target or {})
    keys = [f"{name} = {toml_value(value)}\n" for name, value in assay(**given).items()]
    definition = text(responses=[more], fixed=told) + "\n[assay]\n" + "".join(keys)
    (folder / "plates").mkdir(parents=True, exist_ok=True)
    (folder / "study.toml").write_text(definition, encoding="utf-8")
    (folder / "plates" / "plate-01.csv").write_text("\n".join(rows) + "\n", encoding="utf-8")
    (folder / "reads").mkdir(exist_ok=True)
    files = reads if isinstance(reads, Mapping) else {"all.csv": "\n".join(reads) + "\n"}
    for name, content in files.items():
        (folder / "reads" / name).write_text(content, encoding="utf-8")
    return folder


def reduced(folder: Path, **given: Any) -> Reduction:
    """Write a study and reduce its reads."""
    write(folder, **given)
    return reduce_reads(open_study(folder, reducing=True), folder / "reads")
