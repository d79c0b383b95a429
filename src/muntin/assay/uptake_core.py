"""Pore diffusion with strong binding in a well: a full shell grows around an empty core.

The sharp front of Yagi & Kunii 1955 (5th Symp. Combust., p. 231) and Teo & Ruthven 1986 (Ind. Eng.
Chem. Process Des. Dev. 25:17; both from memory) without a film: with F the filled share of the
capacity q, rho = (1 - F)^(1/3) the core's radius, Lambda = q/offered what the capacity takes up of
the protein offered, and tau = D C0 t / (q R^2),

    d tau / d F = (1 - rho) / (3 rho (1 - Lambda F)),

which ends at F = min(1, 1/Lambda). For Lambda = 0 it is 6 tau = 1 - 3 rho^2 + 2 rho^3.
"""

from __future__ import annotations

from functools import lru_cache
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike

from muntin.record.keys import Floats

_MOST, _ROWS = 50.0, 321
_TIMES = (-9.0, 7.0, 641)
_DEEP, _CELLS = 18.0, 1500


class _Tables(NamedTuple):
    """What is interpolated, over Lambda (takes,) and even steps of ln t/t50 (times,).

    `share` (takes, times) of equilibrium; `tau` (takes, cells + 1) at the depths `z` (cells + 1,),
    where the share of equilibrium is 1 - exp(-z).
    """

    share: Floats
    tau: Floats
    z: Floats


def core_share(times: ArrayLike, takes: ArrayLike) -> Floats:
    """Return the share of equilibrium at times in units of the time to half of it.

    `takes` is Lambda, capacity over what is offered, held to 1/50 to 50; both shapes broadcast.
    """
    low, high, count = _TIMES
    with np.errstate(divide="ignore"):
        log_time = np.log(np.asarray(times, dtype=float))
    at = np.clip((log_time - low) / (high - low) * (count - 1), 0.0, count - 1 - 1e-9)
    early = np.exp(0.5 * np.minimum(log_time - low, 0.0))  # the front starts with the root of time
    row, row_part = _row(takes)
    column = at.astype(np.intp)
    part = at - column
    table = _tables().share
    near = table[row, column] * (1 - part) + table[row, column + 1] * part
    far = table[row + 1, column] * (1 - part) + table[row + 1, column + 1] * part
    return early * (near * (1 - row_part) + far * row_part)


def core_time(share: float, takes: ArrayLike) -> Floats:
    """Return tau, D C0 t / (q R^2), at a share of equilibrium below 1, in the shape of `takes`."""
    tables = _tables()
    depth = -np.log1p(-share)
    cell = int(np.searchsorted(tables.z, depth)) - 1
    part = (depth - tables.z[cell]) / (tables.z[cell + 1] - tables.z[cell])
    log_tau = np.log(tables.tau[:, cell] * (1 - part) + tables.tau[:, cell + 1] * part)
    row, row_part = _row(takes)
    return np.asarray(np.exp(log_tau[row] * (1 - row_part) + log_tau[row + 1] * row_part))


def _row(takes: ArrayLike) -> tuple[np.ndarray, Floats]:
    """Return the row below and the part of the way to the next."""
    bounded = np.clip(np.asarray(takes, dtype=float), 1.0 / _MOST, _MOST)
    far = np.log(bounded) / np.log(_MOST)
    at = 0.5 * (_ROWS - 1) * (1.0 + np.sign(far) * np.sqrt(np.abs(far)))
    at = np.clip(at, 0.0, _ROWS - 1 - 1e-9)
    row = at.astype(np.intp)
    return row, at - row


@lru_cache(maxsize=1)
def _tables() -> _Tables:
    even = np.linspace(-1.0, 1.0, _ROWS)
    takes = _MOST ** (np.sign(even) * even**2)  # close where the law bends, at 1
    z = _DEEP * (np.arange(_CELLS + 1) / _CELLS) ** 3
    middle = 0.5 * (z[1:] + z[:-1])
    ends, between = _slope(z, takes), _slope(middle, takes)
    cells = (ends[:, :-1] + 4.0 * between + ends[:, 1:]) * np.diff(z) / 6.0  # Simpson
    tau = np.concatenate([np.zeros((len(takes), 1)), np.cumsum(cells, axis=1)], axis=1)
    log_times = np.linspace(*_TIMES)
    half = [np.interp(np.log(2.0), z, row) for row in tau]
    share = [
        -np.expm1(-np.interp(t50 * np.exp(log_times), row, z))
        for row, t50 in zip(tau, half, strict=True)
    ]
    return _Tables(np.array(share), tau, z)


def _slope(z: Floats, takes: Floats) -> Floats:
    """Return d tau / d z, shape (takes, z), where F = F_end (1 - exp(-z))."""
    end = np.minimum(1.0, 1.0 / takes)[:, None]
    bound = np.minimum(1.0, takes)[:, None]
    left = np.exp(-z)
    core = np.log1p(-end * -np.expm1(-z)) / 3.0
    shell = -np.expm1(core) / (3.0 * np.exp(core))
    return np.asarray(shell * end * left / (1.0 - bound + bound * left))
