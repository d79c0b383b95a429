"""Water: its permittivity and density, what they make of activities, and its own ions.

Concentrations are mol per kg of water; of liquids in mol/L they differ by less than 2 % up to an
ionic strength of 0.5, which no pH here feels.
"""

from __future__ import annotations

import math
from functools import lru_cache

ZERO_C = 273.15
GAS = 8.314462618e-3  # kJ/mol/K
REFERENCE = 298.15  # K
# Beyond it no pH is predicted, and the activities of 0.5 are only a place to begin.
HIGHEST_STRENGTH = 0.5
_PKW, _ENTHALPY, _HEAT_CAPACITY = 13.995, 55.8, -224.6


def pk_at(pk: float, enthalpy: float, heat_capacity: float, t_c: float) -> float:
    """Return the thermodynamic pK at a temperature.

    With dG0 = R T0 ln10 pK and T0 = 298.15 K:
    pK(T) = [dG0 T/T0 + dH (1 - T/T0) + dCp (T - T0 - T ln(T/T0))] / (R T ln10),
    the heat capacity constant (Goldberg, Kishore & Lennen 2002, J. Phys. Chem. Ref. Data 31:231).

    pk: at 25 °C and ionic strength 0. enthalpy: kJ/mol. heat_capacity: J/K/mol. t_c: °C.
    """
    t, t0 = t_c + ZERO_C, REFERENCE
    heat = enthalpy * (1 - t / t0)
    curved = 1e-3 * heat_capacity * (t - t0 - t * math.log(t / t0))
    return pk + (heat + curved) / (GAS * t * math.log(10))


def permittivity(t_c: float) -> float:
    """Relative permittivity of water at 0 to 100 °C (Malmberg & Maryott 1956, J. Res. Natl. Bur.
    Stand. 56:1).
    """
    return 87.740 - 0.40008 * t_c + 9.398e-4 * t_c**2 - 1.410e-6 * t_c**3


def density(t_c: float) -> float:
    """Density of water in g/mL at 0 to 100 °C and 1 atm (Kell 1975, J. Chem. Eng. Data 20:97)."""
    terms = (999.83952, 16.945176, -7.9870401e-3, -46.170461e-6, 105.56302e-9, -280.54253e-12)
    above = sum(term * t_c**power for power, term in enumerate(terms))
    return above / (1 + 16.879850e-3 * t_c) / 1000.0


@lru_cache
def limiting_slope(t_c: float) -> float:
    """The constant A of Debye and Hückel for decadic logarithms, in (kg/mol)^0.5."""
    return 1.82483e6 * math.sqrt(density(t_c)) / (permittivity(t_c) * (t_c + ZERO_C)) ** 1.5


def per_charge_squared(strength: float, t_c: float) -> float:
    """Return g of log10 gamma = -g z^2, by Davies: g = A [sqrt I / (1 + sqrt I) - 0.3 I].

    (Davies 1962, *Ion Association*.) strength: ionic strength in mol/kg; above 0.5, where the
    formula turns back, g stays as it is at 0.5.
    """
    within = min(strength, HIGHEST_STRENGTH)
    root = math.sqrt(within)
    return limiting_slope(t_c) * (root / (1 + root) - 0.3 * within)


@lru_cache
def pkw(t_c: float) -> float:
    """-log10 of the ion product of water at ionic strength 0; constants from memory."""
    return pk_at(_PKW, _ENTHALPY, _HEAT_CAPACITY, t_c)
