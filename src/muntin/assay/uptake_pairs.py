"""Two readings of an uptake curve: the first-order and the second-order law through them."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np


class Pair(NamedTuple):
    """Loads q (mg/mL resin) at two times t (min), the earlier first."""

    t: tuple[float, float]
    q: tuple[float, float]


class Through(NamedTuple):
    """A law through two readings: rate (1/min, or mL/(mg min) of second order), load at
    equilibrium (mg/mL resin), and minutes to 95 % of it.
    """

    rate: float
    equilibrium: float
    t95: float


def first_order_through(pair: Pair) -> Through | None:
    """Return q = q_e (1 - exp(-k t)) through two readings; None where there is none.

    There is one where the load rises less than in proportion to the time. Where the second time is
    twice the first and the load R times as high, k = -ln(R - 1)/t and q_e = q/(2 - R).
    """
    (first, second), (low, high) = pair
    ratio = high / low if low > 0 else np.inf
    if not 1 < ratio < second / first:
        return None
    few, many = 1e-12 / first, 60.0 / first
    for _ in range(200):
        middle = np.sqrt(few * many)
        grows = np.expm1(-middle * second) / np.expm1(-middle * first) > ratio
        few, many = (middle, many) if grows else (few, middle)
    rate = float(np.sqrt(few * many))
    return Through(rate, float(high / -np.expm1(-rate * second)), float(np.log(20.0) / rate))


def second_order_through(pair: Pair) -> Through | None:
    """Return q = k q_e^2 t / (1 + k q_e t) (Ho & McKay 1999) through two readings, or None.

    t/q is linear in t: its slope is 1/q_e, its intercept 1/(k q_e^2).
    """
    (first, second), (low, high) = pair
    if not low > 0 or not 1 < high / low < second / first:
        return None
    slope = (second / high - first / low) / (second - first)
    start = first / low - slope * first
    rate = slope**2 / start
    return Through(rate, 1.0 / slope, 19.0 * slope / rate)
