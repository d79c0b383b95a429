"""Column runs: the table [columns] of study.toml, what one run takes and how many are offered."""

from __future__ import annotations

from collections.abc import Iterator

from muntin.record.faults import Fault, number
from muntin.record.keys import Keys, Number, Whole, key
from muntin.record.protein import Protein

_FILE = "study.toml"


class Columns(Keys):
    """What a column run takes."""

    bed_ml: Number = key(says="settled resin in the column", unit="mL", example=1.0, gt=0)
    load_mg_per_ml: Number | None = key(
        None,
        says="protein loaded in a run; load_factor of [protein] in its place, where there is one",
        unit="mg/mL resin",
        example=5.0,
        gt=0,
    )
    beside_mg: Number = key(
        0.0,
        says="protein that a run takes beside its load, such as samples and what tubing keeps",
        unit="mg",
        example=0.5,
        ge=0,
    )
    runs: Whole = key(
        3,
        says="runs to offer: the set point and two edges of the window, more of them in turn",
        unit="runs",
        example=3,
        ge=1,
        le=24,
    )
    residence_min: Number | None = key(
        None,
        says="residence time while loading, told beside the contact time on plates",
        unit="min",
        example=4.0,
        gt=0,
    )

    def run_mg(self, load: float | None) -> float:
        """Return the protein of one run in mg, at a load in mg/mL resin; None is load_mg_per_ml."""
        given = self.load_mg_per_ml if load is None else load
        return (given or 0.0) * self.bed_ml + self.beside_mg


def column_faults(columns: Columns, protein: Protein | None) -> Iterator[Fault]:
    """Yield what is wrong between the keys of [columns] and [protein]."""
    factor = None if protein is None else protein.load_factor
    if columns.load_mg_per_ml is None and factor is None:
        problem = "is missing; or name the factor that holds the load, load_factor in [protein]"
        yield Fault(file=_FILE, where="columns", value='"load_mg_per_ml"', problem=problem)
    if columns.load_mg_per_ml is not None and factor is not None:
        yield Fault(
            file=_FILE,
            where="columns, load_mg_per_ml",
            value=number(columns.load_mg_per_ml),
            problem=f"is not read where [protein] has load_factor; runs are loaded by {factor}",
        )
