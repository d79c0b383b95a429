"""Acids: charges, pKa and how these change with temperature.

Constants at 25 °C and ionic strength 0 from Goldberg, Kishore & Lennen 2002, J. Phys. Chem. Ref.
Data 31:231; enthalpies and heat capacities of citric acid are from memory.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property

from muntin.bench.buffer.water import GAS, REFERENCE, pk_at


@dataclass(frozen=True)
class Step:
    """The loss of one proton: pK at 25 °C and ionic strength 0, kJ/mol, J/K/mol."""

    pk: float
    enthalpy: float = 0.0
    heat_capacity: float = 0.0

    @classmethod
    def sloping(cls, pk: float, per_c: float) -> Step:
        """A step whose pK changes by so much per °C at 25 °C: dpK/dT = -dH / (R T^2 ln10)."""
        return cls(pk, -per_c * GAS * REFERENCE**2 * math.log(10))

    def at(self, t_c: float) -> float:
        """The pK at a temperature in °C."""
        return pk_at(self.pk, self.enthalpy, self.heat_capacity, t_c)


@dataclass(frozen=True)
class Acid:
    """An acid with one or more protons to lose.

    charge: with all protons on. steps: in the order in which protons are lost, at least one.
    """

    charge: int
    steps: tuple[Step, ...]

    @cached_property
    def charges(self) -> tuple[int, ...]:
        """The charge of each form, all protons on first."""
        return tuple(self.charge - lost for lost in range(len(self.steps) + 1))

    def pks(self, t_c: float) -> tuple[float, ...]:
        """The pK of each step at a temperature in °C, at ionic strength 0."""
        if t_c not in self._pks:
            self._pks[t_c] = tuple(step.at(t_c) for step in self.steps)
        return self._pks[t_c]

    @cached_property
    def _pks(self) -> dict[float, tuple[float, ...]]:
        return {}


@dataclass(frozen=True)
class Couple:
    """What a buffer is made from: an acid, and its charge in the stocks of both forms.

    Counter-ions in the stocks carry one charge each. acid_form and base_form: what the stocks are.
    """

    acid: Acid
    acid_charge: int
    base_charge: int
    acid_form: str = "acid form"
    base_form: str = "base form"


_CITRIC = (Step(3.128, 4.07, -131), Step(4.761, 2.23, -178), Step(6.396, -3.38, -254))
_PHOSPHORIC = (Step(2.148, -8.0, -141), Step(7.198, 3.6, -230), Step(12.35, 16.0, -242))

COUPLES = {
    "acetate": Couple(Acid(0, (Step(4.756, -0.41, -142),)), 0, -1, "acetic acid", "sodium acetate"),
    "citrate": Couple(Acid(0, _CITRIC), 0, -3, "citric acid", "trisodium citrate"),
    "MES": Couple(Acid(0, (Step(6.270, 14.8, 5),)), 0, -1, "MES", "sodium MES"),
    "phosphate": Couple(Acid(0, _PHOSPHORIC), -1, -2, "NaH2PO4", "Na2HPO4"),
    "HEPES": Couple(Acid(0, (Step(7.564, 20.4, 47),)), 0, -1, "HEPES", "sodium HEPES"),
    "Tris": Couple(Acid(1, (Step(8.072, 47.45, -59),)), 1, 0, "Tris-HCl", "Tris"),
}
