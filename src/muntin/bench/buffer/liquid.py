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
_MOST_STEPS = 30


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

    The pH at the ionic strength of the strong ions is found between bounds; from there both are
    brought to rest together, or, where that takes long, again between bounds.

    Raises ValueError where no pH from -2 to 16 makes its charges add up to 0.
    """
    strength = 0.5 * sum(m * z * z for z, m in liquid.ions.items())
    g = per_charge_squared(strength, t_c)
    ends = [charge_of(liquid, end, g, t_c) for end in (_ACID_END, _BASE_END)]
    if ends[0] < 0 or ends[1] > 0:
        raise ValueError("no pH from -2 to 16 balances the charges")
    ph = root(lambda at: charge_of(liquid, at, g, t_c), _ACID_END, _BASE_END)
    return settled(liquid, State(ph, strength), t_c) or bracketed(liquid, t_c)


def settled(liquid: Liquid, start: State, t_c: float) -> State | None:
    """The state by Newton steps in the pH, whose slope is the buffer capacity, the ionic strength
    taken over each time; None where that does not come to rest.
    """
    state = start
    for _ in range(_MOST_STEPS):
        g = per_charge_squared(state.strength, t_c)
        charge, squares, capacity = _totals(liquid, state.ph, g, t_c)
        moved = State(state.ph + charge / capacity, 0.5 * squares)
        if abs(moved.ph - state.ph) + abs(moved.strength - state.strength) < _PRECISE:
            return moved
        if not _ACID_END <= moved.ph <= _BASE_END:
            return None
        state = moved
    return None


def bracketed(liquid: Liquid, t_c: float) -> State:
    """The state by bounds alone: the root of the charge, each pH at its own ionic strength."""

    def excess(ph: float) -> float:
        g = per_charge_squared(strength_at(liquid, ph, t_c), t_c)
        return charge_of(liquid, ph, g, t_c)

    ph = root(excess, _ACID_END, _BASE_END)
    return State(ph, strength_at(liquid, ph, t_c))


def _totals(liquid: Liquid, ph: float, g: float, t_c: float) -> tuple[float, float, float]:
    """Sums of m z and of m z^2 over all ions, and the fall of the first with the pH."""
    hydrogen, hydroxide = waters(ph, g, t_c)
    charge, squares, spread = hydrogen - hydroxide, hydrogen + hydroxide, hydrogen + hydroxide
    for z, m in liquid.ions.items():
        charge += m * z
        squares += m * z * z
    for acid, m in liquid.acids.items():
        mean, square = moments(acid, ph, g, t_c)
        charge += m * mean
        squares += m * square
        spread += m * (square - mean * mean)
    return charge, squares, math.log(10) * spread


def strength_at(liquid: Liquid, ph: float, t_c: float) -> float:
    """The ionic strength (mol/kg) of a liquid that is held at a pH, charges balanced or not."""
    return own_strength(
        lambda strength: (
            0.5 * _totals(liquid, ph, per_charge_squared(strength, t_c), t_c)[1] - strength
        )
    )


def own_strength(excess: Callable[[float], float]) -> float:
    """The ionic strength that is its own result: the root of result less assumption."""
    high = 1.0
    while excess(high) > 0:
        high *= 2.0
    return root(excess, 0.0, high)


def charge_of(liquid: Liquid, ph: float, g: float, t_c: float) -> float:
    """Net charge (mol/kg) of a liquid at a pH and an activity constant g; 0 at its own pH."""
    return _totals(liquid, ph, g, t_c)[0]


def waters(ph: float, g: float, t_c: float) -> tuple[float, float]:
    """H+ and OH- in mol/kg: activities over activity coefficients."""
    return 10.0 ** (g - ph), 10.0 ** (g + ph - pkw(t_c))


def moments(acid: Acid, ph: float, g: float, t_c: float) -> tuple[float, float]:
    """Mean charge and mean squared charge of an acid over its forms."""
    total = mean = square = 0.0
    for weight, z in zip(_weights(acid, ph, g, t_c), acid.charges, strict=True):
        total += weight
        mean += weight * z
        square += weight * z * z
    return mean / total, square / total


def forms(acid: Acid, ph: float, g: float, t_c: float) -> list[float]:
    """The share of each form, all protons on first; they add up to 1."""
    weights = _weights(acid, ph, g, t_c)
    total = math.fsum(weights)
    return [weight / total for weight in weights]


def _weights(acid: Acid, ph: float, g: float, t_c: float) -> list[float]:
    """Each form against that with all protons on; z^2 - (z - 1)^2 = 2 z - 1."""
    weights = [1.0]
    for z, pk in zip(acid.charges, acid.pks(t_c), strict=False):
        weights.append(weights[-1] * 10.0 ** (ph - pk - g * (2 * z - 1)))
    return weights


def root(excess: Callable[[float], float], low: float, high: float) -> float:
    """The root between two bounds at which a function has different signs, or is 0."""
    from scipy.optimize import brentq

    return float(brentq(excess, low, high, xtol=_PRECISE, rtol=_PRECISE))
