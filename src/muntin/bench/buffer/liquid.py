"""A liquid: acids in all their forms and strong ions, and the pH at which its charges add up to 0.

With concentrations in mol/kg, activities by Davies and pH = -log10 of the activity of H+, form j of
an acid stands to form j - 1 as log10 m_j/m_(j-1) = pH - pK_j - g (z_(j-1)^2 - z_j^2), where g is
that of the liquid's own ionic strength, I = 1/2 sum m z^2.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass

from muntin.bench.buffer.acids import Acid
from muntin.bench.buffer.water import per_charge_squared, pkw

_ACID_END, _BASE_END = -2.0, 16.0
_PRECISE = 1e-12


@dataclass(frozen=True, eq=False)
class Liquid:
    """What is in a liquid.

    acids: mol/kg by acid, all forms together. ions: mol/kg of ions that no pH changes, by charge.
    """

    acids: Mapping[Acid, float]
    ions: Mapping[int, float]


@dataclass(frozen=True)
class State:
    """How a liquid comes to rest: its pH and its ionic strength in mol/kg."""

    ph: float
    strength: float


def state_of(liquid: Liquid, t_c: float) -> State:
    """Return pH and ionic strength of a liquid at a temperature in °C.

    Raises ValueError where no pH from -2 to 16 makes its charges add up to 0.
    """

    def excess(ph: float) -> float:
        g = per_charge_squared(strength_at(liquid, ph, t_c), t_c)
        return charge_of(liquid, ph, g, t_c)

    if excess(_ACID_END) < 0 or excess(_BASE_END) > 0:
        raise ValueError("no pH from -2 to 16 balances the charges")
    ph = root(excess, _ACID_END, _BASE_END)
    return State(ph, strength_at(liquid, ph, t_c))


def strength_at(liquid: Liquid, ph: float, t_c: float) -> float:
    """The ionic strength (mol/kg) of a liquid that is held at a pH, charges balanced or not."""
    fixed = 0.5 * sum(m * z * z for z, m in liquid.ions.items())

    def excess(strength: float) -> float:
        g = per_charge_squared(strength, t_c)
        own = sum(waters(ph, g, t_c))
        squares = sum(m * moments(acid, ph, g, t_c)[1] for acid, m in liquid.acids.items())
        return fixed + 0.5 * (own + squares) - strength

    return own_strength(excess)


def own_strength(excess: Callable[[float], float]) -> float:
    """The ionic strength that is its own result: the root of result less assumption."""
    high = 1.0
    while excess(high) > 0:
        high *= 2.0
    return root(excess, 0.0, high)


def charge_of(liquid: Liquid, ph: float, g: float, t_c: float) -> float:
    """Net charge (mol/kg) of a liquid at a pH and an activity constant g; 0 at its own pH."""
    hydrogen, hydroxide = waters(ph, g, t_c)
    held = sum(m * moments(acid, ph, g, t_c)[0] for acid, m in liquid.acids.items())
    return sum(z * m for z, m in liquid.ions.items()) + held + hydrogen - hydroxide


def waters(ph: float, g: float, t_c: float) -> tuple[float, float]:
    """H+ and OH- in mol/kg: activities over activity coefficients."""
    return 10.0 ** (g - ph), 10.0 ** (g + ph - pkw(t_c))


def moments(acid: Acid, ph: float, g: float, t_c: float) -> tuple[float, float]:
    """Mean charge and mean squared charge of an acid over its forms."""
    shares = forms(acid, ph, g, t_c)
    mean = sum(s * z for s, z in zip(shares, acid.charges, strict=True))
    return mean, sum(s * z * z for s, z in zip(shares, acid.charges, strict=True))


def forms(acid: Acid, ph: float, g: float, t_c: float) -> list[float]:
    """The share of each form, all protons on first; they add up to 1."""
    logs = [0.0]
    for z, pk in zip(acid.charges, acid.pks(t_c), strict=False):
        logs.append(logs[-1] + ph - pk - g * (z * z - (z - 1) ** 2))
    top = max(logs)
    weights = [10.0 ** (value - top) for value in logs]
    total = math.fsum(weights)
    return [weight / total for weight in weights]


def root(excess: Callable[[float], float], low: float, high: float) -> float:
    """The root between two bounds at which a function has different signs, or is 0."""
    from scipy.optimize import brentq

    return float(brentq(excess, low, high, xtol=_PRECISE, rtol=_PRECISE))
