"""Stages: wells that are loaded, washed and eluted at equilibrium, with hold-up in between.

Each stage adds liquid to the hold-up V_h of the stage before, the protein parts between all of
that liquid and the resin V_R, and as much liquid as was added is collected again:

    C_j (V_j + V_h) + q_j V_R = C_add V_j + C_(j-1) V_h + q_(j-1) V_R.

The hold-up carries salt and pH as well, so that a step reaches the resin a little diluted. Few
molecules with q = Kp C leave a well by V / (V + V_h + Kp V_R) of what it holds in every stage.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal, Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]
Role = Literal["load", "wash", "elution"]


class Binding(Protocol):
    """What stages ask of an isotherm."""

    def settle(
        self,
        total: ArrayLike,
        volume: ArrayLike,
        resin: ArrayLike,
        ph: ArrayLike,
        salt: ArrayLike,
    ) -> tuple[Floats, Floats]:
        """Return liquid and bound concentration (mM); see `Isotherm.settle`."""
        ...


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Addition:
    """Liquid given to n wells, each number a scalar or of shape (n,).

    Parameters
    ----------
    role
        What the stage is for.
    volume
        µL added, and collected afterwards.
    ph, salt
        Of the liquid added; salt in mM.
    protein
        Its concentration in the liquid added, mM.
    """

    role: Role
    volume: ArrayLike
    ph: ArrayLike
    salt: ArrayLike
    protein: ArrayLike = 0.0


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Fractions:
    """What n wells gave and kept in J stages.

    Parameters
    ----------
    roles
        What each stage was for, J names, loads first and elutions last.
    loaded
        Protein given to each well, nmol, shape (n,).
    liquid
        Concentration of each filtrate, mM, shape (n, J).
    collected
        Volume of each filtrate, µL, shape (n, J).
    bound
        Protein on the resin after each stage, nmol, shape (n, J).
    hold_up
        Liquid left in each well between stages, µL, shape (n,).
    """

    roles: tuple[Role, ...]
    loaded: Floats
    liquid: Floats
    collected: Floats
    bound: Floats
    hold_up: Floats

    @property
    def amounts(self) -> Floats:
        """Protein in each filtrate, nmol, shape (n, J)."""
        return self.liquid * self.collected

    @property
    def recovery_of_load(self) -> Floats:
        """Protein in all elution filtrates over protein loaded, shape (n,)."""
        eluted = np.array(self.roles) == "elution"
        return self.amounts[:, eluted].sum(axis=1) / self.loaded

    @property
    def recovery_of_bound(self) -> Floats:
        """Protein set free by the elution over protein bound by the load, shape (n,).

        What is free but still in the hold-up counts, what the washes set free does not.
        """
        last = {role: j for j, role in enumerate(self.roles)}
        before = self.roles.index("elution") - 1
        freed = self.bound[:, before] - self.bound[:, -1]
        return freed / self.bound[:, last["load"]]

    @property
    def closure(self) -> Floats:
        """Protein in filtrates, last hold-up and on the resin over protein loaded, shape (n,)."""
        kept = self.bound[:, -1] + self.liquid[:, -1] * self.hold_up
        return (self.amounts.sum(axis=1) + kept) / self.loaded


def through_stages(
    binding: Binding, additions: Sequence[Addition], hold_up: ArrayLike, resin: ArrayLike
) -> Fractions:
    """Take wells through stages at equilibrium.

    The wells start without protein, with the hold-up at pH and salt of the first addition. The
    pH of mixed liquids is their mean by volume, as for buffers of like and constant capacity.

    Parameters
    ----------
    binding
        Parts protein between liquid and resin.
    additions
        Stages in their order.
    hold_up, resin
        Liquid left between stages (0 or more) and settled resin (above 0), µL, scalar or (n,).

    Raises
    ------
    ValueError
        If the stages are not loads, then washes if any, then elutions; or from `binding`.
    """
    roles = tuple(addition.role for addition in additions)
    _refuse_order(roles)
    hold_up = np.asarray(hold_up, dtype=float)
    resin = np.asarray(resin, dtype=float)
    liquid, bound, loaded = np.zeros(()), np.zeros(()), np.zeros(())
    ph, salt = np.asarray(additions[0].ph), np.asarray(additions[0].salt)
    stages: list[tuple[Floats, Floats, Floats]] = []
    for addition in additions:
        volume = np.asarray(addition.volume, dtype=float)
        wet = volume + hold_up
        ph = (volume * np.asarray(addition.ph) + hold_up * ph) / wet
        salt = (volume * np.asarray(addition.salt) + hold_up * salt) / wet
        given = np.asarray(addition.protein) * volume
        loaded = loaded + given
        total = given + liquid * hold_up + bound
        liquid, on_resin = binding.settle(total, wet, resin, ph, salt)
        bound = on_resin * resin
        stages.append((liquid, volume, bound))
    wells = np.broadcast_shapes((1,), ph.shape, salt.shape, resin.shape)
    return _fractions(roles, stages, loaded, hold_up, wells)


def _refuse_order(roles: tuple[Role, ...]) -> None:
    order: tuple[Role, ...] = ("load", "wash", "elution")
    ranks = [order.index(role) for role in roles]
    if ranks != sorted(ranks) or not {"load", "elution"} <= set(roles):
        raise ValueError(f"stages are loads, then washes, then elutions, not {', '.join(roles)}")


def _fractions(
    roles: tuple[Role, ...],
    stages: list[tuple[Floats, Floats, Floats]],
    loaded: Floats,
    hold_up: Floats,
    wells: tuple[int, ...],
) -> Fractions:
    """Bring all stages to the same n wells."""
    parts = [part for stage in stages for part in stage]
    whole = np.broadcast_arrays(np.zeros(wells), loaded, hold_up, *parts)[1:]
    columns = np.stack(whole[2:], axis=-1)
    return Fractions(
        roles=roles,
        loaded=whole[0],
        hold_up=whole[1],
        liquid=columns[:, 0::3],
        collected=columns[:, 1::3],
        bound=columns[:, 2::3],
    )
