"""Drawing: virtual labs of three kinds whose window edge runs through the bench's range.

Parameters are drawn from wide ranges, invented and of no particular resin, until the truth has
the shape and the share of passing conditions that are asked for.
"""

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from muntin.lab.isotherm import REFERENCE_PH, Hydrophobic, Ionic, Isotherm
from muntin.lab.lab import VirtualLab
from muntin.lab.procedure import Procedure

Floats = NDArray[np.float64]
Kind = Literal["elution", "mixed mode", "island"]

PH_LEVELS = np.round(np.arange(4.5, 7.55, 0.1), 1)
SALT_LEVELS = np.arange(50.0, 505.0, 10.0)

_MOLAR_MASS = 150.0  # kDa, an antibody's


@dataclass(frozen=True, kw_only=True, slots=True)
class _Ranges:
    """What differs between kinds.

    share: of the grid that passes. ionic_at_one, hydrophobic_at_one: mM where the binding of
    few molecules has Kp = 1, at pH 6 and at the mildest pH. per_mm, bend: decades of hydrophobic
    binding for each mM and for each squared pH unit.
    """

    share: tuple[float, float]
    ionic_at_one: tuple[float, float]
    hydrophobic_at_one: tuple[float, float] = (0.0, 0.0)
    per_mm: tuple[float, float] = (0.0, 0.0)
    bend: tuple[float, float] = (0.0, 0.0)


_RANGES: dict[Kind, _Ranges] = {
    "elution": _Ranges(share=(0.10, 0.60), ionic_at_one=(200.0, 700.0)),
    "mixed mode": _Ranges(
        share=(0.10, 0.60),
        ionic_at_one=(120.0, 500.0),
        hydrophobic_at_one=(200.0, 500.0),
        per_mm=(0.002, 0.010),
        bend=(0.0, 0.1),
    ),
    "island": _Ranges(
        share=(0.05, 0.40),
        ionic_at_one=(120.0, 350.0),
        hydrophobic_at_one=(250.0, 450.0),
        per_mm=(0.004, 0.012),
        bend=(0.8, 3.0),
    ),
}
_LEAST_LOSS = 0.05
_ROUNDING = 1e-9


def bench_grid() -> Floats:
    """Return all conditions a bench can set, shape (1426, 2): pH and salt in mM.

    pH runs from 4.5 to 7.5 in steps of 0.1, salt from 50 to 500 mM in steps of 10; salt is the
    faster index.
    """
    ph, salt = np.meshgrid(PH_LEVELS, SALT_LEVELS, indexing="ij")
    return np.column_stack([ph.ravel(), salt.ravel()])


def draw_lab(
    rng: np.random.Generator,
    kind: Kind,
    target: float = 0.8,
    share: tuple[float, float] | None = None,
    room: float = 0.1,
    tries: int = 500,
) -> VirtualLab:
    """Draw a lab whose true recovery of load reaches `target` on part of the bench grid.

    Kinds:

    - `elution`: ionic sites only; recovery falls nowhere as pH or salt rises.
    - `mixed mode`: hydrophobic sites take at least 5 % of the grid away, and at some pH recovery
      fails at both ends of the salt range and passes in between.
    - `island`: hydrophobic sites grow with pH too; no condition on the rim of the grid passes.

    Parameters
    ----------
    rng
        Source of chance.
    kind
        Shape of the window.
    target
        Recovery to be reached, between 0 and 1.
    share
        Least and largest share of the grid that passes; 0.1 and 0.6, for an island 0.05 and 0.4
        if not given.
    room
        The best recovery on the grid lies at least this far above the target; 0.1 is three
        times the default error of a plate's load.
    tries
        Draws before giving up.

    Raises
    ------
    ValueError
        If `kind` is another word, or the shares are not 0 <= least <= largest <= 1.
    RuntimeError
        If no draw of `tries` fits.
    """
    if kind not in _RANGES:
        raise ValueError(f"kind {kind!r} is none of {', '.join(_RANGES)}")
    least, largest = share or _RANGES[kind].share
    if not 0 <= least <= largest <= 1:
        raise ValueError(f"a share cannot lie between {least} and {largest}")
    for _ in range(tries):
        isotherm = _draw_isotherm(rng, kind)
        lab = VirtualLab(binding=isotherm, procedure=_draw_procedure(rng), molar_mass=_MOLAR_MASS)
        truth = lab.recovery(bench_grid())
        share_passing = np.mean(truth >= target)
        if truth.max() < target + room or not least <= share_passing <= largest:
            continue
        plain = replace(lab, binding=Isotherm(ionic=isotherm.ionic))
        if _has_shape(kind, truth, plain, target):
            return lab
    raise RuntimeError(
        f"no {kind} lab of {tries} drawn has {least:.0%} to {largest:.0%} of the range at {target} "
        f"or above and its best {room} above: widen the share, or lower target or room"
    )


def _has_shape(kind: Kind, truth: Floats, plain: VirtualLab, target: float) -> bool:
    """Tell whether recovery has the shape of its kind; `plain` lacks the hydrophobic sites."""
    surface = truth.reshape(len(PH_LEVELS), len(SALT_LEVELS))
    passing = surface >= target
    if kind == "elution":
        steps = np.diff(surface, axis=0), np.diff(surface, axis=1)
        return all(bool(np.all(step >= -_ROUNDING)) for step in steps)
    if kind == "island":
        return not passing[[0, -1]].any() and not passing[:, [0, -1]].any()
    shut = passing.any(axis=1) & ~passing[:, 0] & ~passing[:, -1]
    loss = plain.window_share(target, bench_grid()) - passing.mean()
    return bool(shut.any() and loss >= _LEAST_LOSS)


def _draw_procedure(rng: np.random.Generator) -> Procedure:
    return Procedure(
        elutions=int(rng.integers(1, 4)),
        hold_up=rng.uniform(20, 40),
        resin=rng.uniform(20, 50),
    )


def _draw_isotherm(rng: np.random.Generator, kind: Kind) -> Isotherm:
    ranges = _RANGES[kind]
    ionic = _draw_ionic(rng, ranges)
    return Isotherm(
        ionic=ionic, hydrophobic=None if kind == "elution" else _draw_hydrophobic(rng, ranges)
    )


def _draw_ionic(rng: np.random.Generator, ranges: _Ranges) -> Ionic:
    charge = rng.uniform(3, 8)  # at pH 6
    half_ph, steepness = rng.uniform(6.5, 8.5), rng.uniform(0.2, 0.5)
    capacity = rng.uniform(500, 1000)
    most = rng.uniform(60, 150) / _MOLAR_MASS  # at pH 6, mg/mL to mM
    salt_at_one = np.exp(rng.uniform(*np.log(ranges.ionic_at_one)))
    return Ionic(
        groups=charge * (1 + 10 ** (steepness * (REFERENCE_PH - half_ph))),
        half_ph=half_ph,
        steepness=steepness,
        log_k=-charge * float(np.log10(capacity / salt_at_one)),
        log_k_per_ph=-rng.uniform(0.0, 0.6),
        capacity=capacity,
        steric=capacity / most - charge,
    )


def _draw_hydrophobic(rng: np.random.Generator, ranges: _Ranges) -> Hydrophobic:
    per_mm = rng.uniform(*ranges.per_mm)
    return Hydrophobic(
        log_b=-per_mm * rng.uniform(*ranges.hydrophobic_at_one),
        per_mm=per_mm,
        bend=rng.uniform(*ranges.bend),
        mildest_ph=rng.uniform(5.5, 6.5),
        capacity=rng.uniform(20, 80) / _MOLAR_MASS,
    )
