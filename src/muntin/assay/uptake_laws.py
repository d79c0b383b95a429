"""Laws of uptake: what share of equilibrium the resin holds after a time.

Every law is stated by the time to half of equilibrium, so that laws can be compared under one
prior. `times` are in units of that half time; `takes` is capacity over what is offered in the well
(dimensionless), where that is known.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass
from typing import ClassVar

import numpy as np
from numpy.typing import ArrayLike

from muntin.assay.uptake_core import core_share, core_time
from muntin.record.keys import Floats


@dataclass(frozen=True)
class Law(ABC):
    """One law of uptake; `needs_offer` where it asks for what is offered in the well."""

    name: ClassVar[str]
    says: ClassVar[str]
    source: ClassVar[str]
    rate: ClassVar[str]
    needs_offer: ClassVar[bool] = False

    @abstractmethod
    def share(self, times: ArrayLike, takes: ArrayLike) -> Floats:
        """Return the share of equilibrium at times in half times; shapes broadcast."""

    @abstractmethod
    def reach(self, share: float, takes: ArrayLike) -> Floats:
        """Return rate x time at a share of equilibrium below 1, in the shape of `takes`."""

    def time(self, share: float, half_time: ArrayLike, takes: ArrayLike) -> Floats:
        """Return the time to a share of equilibrium, in the unit of the half time."""
        return np.asarray(half_time) * self.reach(share, takes) / self.reach(0.5, takes)

    def rates(self, half_time: ArrayLike, takes: ArrayLike) -> Floats:
        """Return the rate constant that `rate` names, in 1 / unit of the half time."""
        return np.asarray(self.reach(0.5, takes) / np.asarray(half_time))


class FirstOrder(Law):
    """The rate falls with the distance from equilibrium: q = q_e (1 - exp(-k t))."""

    name = "first order"
    says = "the rate falls with the distance from equilibrium"
    source = "Lagergren 1898; a film with linear binding, Boyd, Adamson & Myers 1947"
    rate = "k"

    def share(self, times: ArrayLike, takes: ArrayLike) -> Floats:
        """Return 1 - exp(-k t)."""
        return np.asarray(-np.expm1(-np.log(2.0) * np.asarray(times) + 0.0 * np.asarray(takes)))

    def reach(self, share: float, takes: ArrayLike) -> Floats:
        """Return k t."""
        return np.full(np.shape(takes), -np.log1p(-share))


class Pores(Law):
    """Diffusion in the bead, liquid steady: q = q_e sqrt(1 - exp(-b t)), b = pi^2 D / R^2."""

    name = "pore diffusion"
    says = "diffusion in the beads, binding in proportion to the liquid"
    source = "Vermeulen 1953, Ind. Eng. Chem. 45:1664"
    rate = "pi^2 D/R^2"

    def share(self, times: ArrayLike, takes: ArrayLike) -> Floats:
        """Return sqrt(1 - exp(-b t))."""
        depth = -np.log(0.75) * np.asarray(times) + 0.0 * np.asarray(takes)
        return np.asarray(np.sqrt(-np.expm1(-depth)))

    def reach(self, share: float, takes: ArrayLike) -> Floats:
        """Return b t."""
        return np.full(np.shape(takes), -np.log1p(-(share**2)))


class Film(Law):
    """A film limits and what reaches the bead stays: C = C_0 exp(-k t) until the resin is full."""

    name = "film"
    says = "a liquid film limits, binding is strong"
    source = "Furusawa & Smith 1973, Ind. Eng. Chem. Fundam. 12:197"
    rate = "k"
    needs_offer = True

    def share(self, times: ArrayLike, takes: ArrayLike) -> Floats:
        """Return (1 - exp(-k t)) / min(takes, 1), at most 1."""
        most = np.minimum(takes, 1.0)
        bound = -np.expm1(np.log1p(-0.5 * most) * np.asarray(times))
        return np.asarray(np.minimum(bound / most, 1.0))

    def reach(self, share: float, takes: ArrayLike) -> Floats:
        """Return k t."""
        return np.asarray(-np.log1p(-share * np.minimum(takes, 1.0)))


class Core(Law):
    """A filled shell grows inwards through the pores while the liquid empties (`uptake_core`)."""

    name = "shrinking core"
    says = "diffusion in the beads, binding is strong"
    source = "Yagi & Kunii 1955; in a well, Teo & Ruthven 1986"
    rate = "D C_0/(q R^2)"
    needs_offer = True

    def share(self, times: ArrayLike, takes: ArrayLike) -> Floats:
        """Return the filled share, interpolated."""
        return core_share(times, takes)

    def reach(self, share: float, takes: ArrayLike) -> Floats:
        """Return D C_0 t / (q R^2)."""
        return core_time(share, takes)


LAWS: tuple[Law, ...] = (FirstOrder(), Pores(), Film(), Core())


def laws_for(offered: float | None) -> tuple[Law, ...]:
    """Return the laws that can be judged, given what is offered (mg/mL resin) or that it is not."""
    return tuple(law for law in LAWS if offered is not None or not law.needs_offer)
