"""Protein: what there is, and what one well takes of it."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from muntin.record.factors import Factor
from muntin.record.faults import Fault, did_you_mean, number, quoted
from muntin.record.keys import Floats, Keys, Number, Text, key

_FILE = "study.toml"


class Protein(Keys):
    """What there is to load."""

    available_mg: Number = key(says="protein at hand", unit="mg", example=40.0, gt=0)
    reserved_mg: Number = key(
        0.0, says="kept back for column confirmation", unit="mg", example=10.0, ge=0
    )
    per_well_mg: Number | None = key(
        None,
        says="used by one well; with load_factor, by a control that has no load of its own",
        unit="mg",
        example=0.25,
        gt=0,
    )
    load_factor: Text | None = key(
        None,
        says="factor that holds the load in mg per mL of resin; a well then uses load x resin_ul",
        example="load",
    )
    resin_ul: Number | None = key(
        None, says="resin in a well, with load_factor", unit="µL", example=20.0, gt=0
    )

    def well_mg(self, loads: Floats, factors: Sequence[Factor]) -> Floats:
        """Return the protein of wells (n,) in mg, from their loads (n,) in mg per mL of resin.

        mg = load x resin in mL where a load is known; a well without one (NaN) takes per_well_mg,
        or what the highest load of a new plan takes.
        """
        if self.load_factor is None or self.resin_ul is None:
            return np.full(len(loads), self.per_well_mg or 0.0)
        each = loads * self.resin_ul / 1000.0
        own = self.per_well_mg
        if own is None:
            (load,) = (f for f in factors if f.name == self.load_factor)
            own = float(load.plan_levels()[-1]) * self.resin_ul / 1000.0
        return np.where(np.isnan(each), own, each)


def protein_faults(protein: Protein, factors: Sequence[Factor]) -> Iterator[Fault]:
    """Yield what is wrong between the keys of [protein], and between them and the factors."""
    if protein.reserved_mg >= protein.available_mg:
        yield Fault(
            file=_FILE,
            where="protein, reserved_mg",
            value=number(protein.reserved_mg),
            problem="must lie below available_mg, which is",
            allowed=number(protein.available_mg),
        )
    if protein.load_factor is None:
        yield from _without_load(protein)
        return
    if protein.resin_ul is None:
        problem = "needs resin_ul, the resin in a well, beside it"
        yield _fault("load_factor", quoted(protein.load_factor), problem)
    yield from _load_faults(protein.load_factor, factors)


def _without_load(protein: Protein) -> Iterator[Fault]:
    if protein.per_well_mg is None:
        problem = "is missing; or give load_factor and resin_ul"
        yield Fault(file=_FILE, where="protein", value='"per_well_mg"', problem=problem)
    if protein.resin_ul is not None:
        problem = "is read only with load_factor, the factor that holds the load"
        yield _fault("resin_ul", number(protein.resin_ul), problem)


def _load_faults(name: str, factors: Sequence[Factor]) -> Iterator[Fault]:
    ranged = [f.name for f in factors if f.continuous]
    factor = next((f for f in factors if f.name == name), None)
    if factor is None:
        hint = did_you_mean(name, ranged) if ranged else ""
        yield _fault("load_factor", quoted(name), "is not a factor", hint)
    elif not factor.continuous:
        yield _fault("load_factor", quoted(name), "has choices; a load has a range")
    elif factor.low is not None and factor.low < 0:
        yield _fault("load_factor", quoted(name), "has a low below 0, and no load is")


def _fault(name: str, value: str, problem: str, hint: str = "") -> Fault:
    return Fault(file=_FILE, where=f"protein, {name}", value=value, problem=problem, hint=hint)
