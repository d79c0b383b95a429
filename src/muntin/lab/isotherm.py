"""Isotherm: what a resin binds of one protein at a liquid concentration, a pH and a salt.

Two kinds of sites bind side by side and add. Ionic sites follow steric mass action (Brooks &
Cramer 1992, AIChE J. 38:1969),

    q = c K ((Lambda - (nu + sigma) q) / salt)^nu,

so that q -> c K (Lambda / salt)^nu for c -> 0 and q < Lambda / (nu + sigma). Hydrophobic sites
follow Langmuir's law with an initial slope that grows with the exponential of the salt
(Melander, El Rassi & Horvath 1989, J. Chromatogr. 469:3; they multiply the two influences on
one site).

The first law is implicit in q. With the occupancy y = (nu + sigma) q / Lambda and its logit x,

    log c = log(Lambda / (nu + sigma)) - log(K (Lambda / salt)^nu) + log y - nu log(1 - y),

which is explicit in x and rises with slope (1 - y) + nu y: one root in x settles a whole stage,
whatever else binds. Concentrations are in mM of protein: of the liquid, and of the settled resin.
All default numbers are wide inventions and describe no particular resin or protein.
"""

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from muntin.lab.roots import increasing_root

Floats = NDArray[np.float64]

REFERENCE_PH = 6.0
_LN10 = np.log(10.0)


@dataclass(frozen=True, kw_only=True, slots=True)
class Ionic:
    """Steric mass action with charge and equilibrium constant that fall as pH rises.

    The charge is that of titrating groups whose pK values are spread about one pH,
    nu = groups / (1 + 10^(steepness (pH - half_ph))): nearly a straight line over the usual
    range, as measured charges are, yet never 0 or below, where the law loses its sense. The
    free energy of the exchange changes with the charge, to first order in proportion, hence a
    straight line in pH for log10 K.

    Parameters
    ----------
    groups, half_ph, steepness
        Largest charge, pH of half of it, and decades of the titration for each pH unit (1 if
        all pK were equal, 0 for a constant charge of groups / 2).
    log_k, log_k_per_ph
        log10 of K (no unit) at pH 6 and its change for each pH unit.
    capacity
        Lambda, mM of charges on the settled resin.
    steric
        sigma, charges shielded by one bound molecule and not used by it.
    """

    groups: float = 10.0
    half_ph: float = 7.0
    steepness: float = 0.35
    log_k: float = -2.5
    log_k_per_ph: float = -0.3
    capacity: float = 600.0
    steric: float = 900.0

    def charge(self, ph: ArrayLike) -> Floats:
        """Return nu, charges used by one molecule, at `ph`."""
        decades = self.steepness * (np.asarray(ph, dtype=float) - self.half_ph)
        return np.asarray(self.groups / (1 + 10**decades))

    def most(self, ph: ArrayLike) -> Floats:
        """Return Lambda / (nu + sigma) at `ph`, the bound concentration never reached, mM."""
        return np.asarray(self.capacity / (self.charge(ph) + self.steric))

    def log_partition(self, ph: ArrayLike, salt: ArrayLike) -> Floats:
        """Return the natural logarithm of K (Lambda / salt)^nu, q / c of few molecules."""
        ph, salt = np.asarray(ph, dtype=float), np.asarray(salt, dtype=float)
        log_k = _LN10 * (self.log_k + self.log_k_per_ph * (ph - REFERENCE_PH))
        return np.asarray(log_k + self.charge(ph) * np.log(self.capacity / salt))


@dataclass(frozen=True, kw_only=True, slots=True)
class Hydrophobic:
    """Binding on sites of its own that grows with salt.

    q = B c / (1 + B c / capacity) with log10 B = log_b + per_mm salt + bend (pH - mildest_ph)^2.
    The exponential in salt is that of Melander, El Rassi & Horvath 1989. The parabola in pH is
    an assumption of this module: binding is mildest at one pH, grows above it as the protein
    loses its charge and below it as it opens.

    Parameters
    ----------
    log_b
        log10 of B, q / c of few molecules (no unit), at the mildest pH, extrapolated to no salt.
    per_mm
        Decades of B for each mM of salt.
    bend, mildest_ph
        Decades of B for each squared pH unit, and where they count from.
    capacity
        Bound concentration never reached, mM; infinite for a straight line.
    """

    log_b: float = -2.0
    per_mm: float = 0.005
    bend: float = 0.0
    mildest_ph: float = 6.0
    capacity: float = 0.3

    def log_partition(self, ph: ArrayLike, salt: ArrayLike) -> Floats:
        """Return the natural logarithm of B at pH and salt (mM); shapes broadcast."""
        ph, salt = np.asarray(ph, dtype=float), np.asarray(salt, dtype=float)
        decades = self.log_b + self.per_mm * salt + self.bend * (ph - self.mildest_ph) ** 2
        return np.asarray(_LN10 * decades)


@dataclass(frozen=True, kw_only=True, slots=True)
class Isotherm:
    """Ionic sites, and hydrophobic ones beside them where given."""

    ionic: Ionic = field(default_factory=Ionic)
    hydrophobic: Hydrophobic | None = None

    def partition(self, ph: ArrayLike, salt: ArrayLike) -> Floats:
        """Return Kp, the limit of q / c for c -> 0, at pH and salt (mM); shapes broadcast."""
        site = self._at(ph, salt)
        return np.asarray(np.exp(np.logaddexp(site.log_a, site.log_b)))

    def bound(self, liquid: ArrayLike, ph: ArrayLike, salt: ArrayLike) -> Floats:
        """Return q in mM of settled resin at `liquid` concentration (mM), pH and salt (mM).

        Shapes broadcast. Raises ValueError for a concentration below 0 or a salt not above 0.
        """
        liquid = np.asarray(liquid, dtype=float)
        _refuse(bool(np.any(liquid < 0)), "a concentration below 0 mM")
        site = self._at(ph, salt)
        some = liquid > 0
        log_c = np.log(np.where(some, liquid, 1.0))
        low, high = site.bounds(log_c, log_c)
        x = increasing_root(lambda x: (site.log_liquid(x) - log_c, site.rise(x)), low, high)
        return np.where(some, site.bound(x, liquid), 0.0)

    def settle(
        self,
        total: ArrayLike,
        volume: ArrayLike,
        resin: ArrayLike,
        ph: ArrayLike,
        salt: ArrayLike,
    ) -> tuple[Floats, Floats]:
        """Return liquid and bound concentration at equilibrium in wells, both in mM.

        Shapes broadcast; c volume + q resin = total holds to rounding.

        Parameters
        ----------
        total
            Protein in the well, nmol (mM times µL).
        volume, resin
            All liquid in the well and its settled resin, µL, above 0.
        ph, salt
            Of the liquid; salt in mM of counter-ions, taken as constant while protein binds.

        Raises
        ------
        ValueError
            If protein is below 0, or a volume or salt is not above 0.
        """
        total, volume, resin = (np.asarray(v, dtype=float) for v in (total, volume, resin))
        _refuse(bool(np.any(total < 0)), "protein below 0 nmol")
        _refuse(bool(np.any(volume <= 0) or np.any(resin <= 0)), "a volume not above 0 µL")
        site = self._at(ph, salt)
        some = total > 0
        log_total = np.log(np.where(some, total, 1.0))

        def excess(x: Floats) -> tuple[Floats, Floats]:
            c = np.exp(site.log_liquid(x))
            held = c * volume + site.bound(x, c) * resin
            slope = c * site.rise(x) * volume + site.bound_slope(x, c) * resin
            return np.log(held) - log_total, slope / held

        # All of it in the liquid at the most; bound as if no site were ever taken at the least.
        taken = np.log(resin) + np.logaddexp(site.log_a, site.log_b)
        least = log_total - np.logaddexp(np.log(volume), taken)
        x = increasing_root(excess, *site.bounds(least, log_total - np.log(volume)))
        c = np.exp(site.log_liquid(x))
        return np.where(some, c, 0.0), np.where(some, site.bound(x, c), 0.0)

    def _at(self, ph: ArrayLike, salt: ArrayLike) -> "_Sites":
        _refuse(not np.all(np.asarray(salt) > 0), "a salt not above 0 mM")
        ionic, other = self.ionic, self.hydrophobic
        return _Sites(
            log_a=ionic.log_partition(ph, salt),
            nu=ionic.charge(ph),
            most=ionic.most(ph),
            log_b=np.asarray(-np.inf) if other is None else other.log_partition(ph, salt),
            room=np.inf if other is None else other.capacity,
        )


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class _Sites:
    """Both kinds of sites at fixed pH and salt; x is the logit of the ionic occupancy."""

    log_a: Floats
    nu: Floats
    most: Floats
    log_b: Floats
    room: float

    def log_liquid(self, x: Floats) -> Floats:
        # log y = -log(1 + e^-x), log(1 - y) = -log(1 + e^x)
        free = self.nu * np.logaddexp(0, x)
        return np.log(self.most) - self.log_a - np.logaddexp(0, -x) + free

    def rise(self, x: Floats) -> Floats:
        """Slope of log c in x."""
        return np.exp(-np.logaddexp(0, x)) + self.nu * np.exp(-np.logaddexp(0, -x))

    def bound(self, x: Floats, c: Floats) -> Floats:
        slope = np.exp(self.log_b)
        hydrophobic = slope * c / (1 + slope * c / self.room)
        return self.most * np.exp(-np.logaddexp(0, -x)) + hydrophobic

    def bound_slope(self, x: Floats, c: Floats) -> Floats:
        """Slope of q in x."""
        slope = np.exp(self.log_b)
        hydrophobic = slope * c / (1 + slope * c / self.room) ** 2
        ionic = self.most * np.exp(-np.logaddexp(0, x) - np.logaddexp(0, -x))
        return ionic + hydrophobic * self.rise(x)

    def bounds(self, low: Floats, high: Floats) -> tuple[Floats, Floats]:
        """Bounds on x for log c between `low` and `high`.

        log(1 + e^x) lies between max(x, 0) and max(x, 0) + log 2, and x + (nu - 1) max(x, 0)
        has the inverse b for b < 0 and b / nu above.
        """
        to_b = self.log_a - np.log(self.most)
        slack = (self.nu - 1) * np.log(2)
        ends = (low + to_b - np.maximum(slack, 0), high + to_b - np.minimum(slack, 0))
        first, last = (np.where(b < 0, b, b / self.nu) for b in ends)
        return first, last


def _refuse(wrong: bool, what: str) -> None:
    if wrong:
        raise ValueError(f"{what} has no equilibrium")
