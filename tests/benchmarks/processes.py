"""Drawn processes: elution from resin-filled wells whose true recovery is known.

A well is eluted in one to three equilibrium stages. Each adds `volume` to the hold-up left in
the well, and the protein parts between liquid and resin by the coefficient Kp:

    plain elution   Kp = A (salt / 100 mM)^-nu 10^(-b (pH - 6) - c additive)
    mixed mode      Kp + B 10^(k salt - e additive)

The power law in salt is that of stoichiometric displacement (Boardman & Partridge 1955,
Biochem. J. 59:543; Kopaciewicz, Rounds, Fausnaugh & Regnier 1983, J. Chromatogr. 266:3). The
rise of hydrophobic binding with the exponential of the salt concentration is that of Melander,
El Rassi & Horvath 1989, J. Chromatogr. 469:3; they multiply the two influences on one site,
here they act on sites of two kinds and add. The pH dependence is a plain straight line in
log Kp. In an island the protein also leaves solution as it loses its charge: the share
1 / (1 + 10^(d (pH - p))) stays, so that the conditions that pass are bounded on all sides. The
additive, a third factor, weakens binding of either kind. Ranges of the parameters are wide on
purpose and describe no particular resin.
"""

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import ndtr, ndtri
from scipy.stats.qmc import Sobol

Kind = Literal["elution", "mixed mode", "island"]
Floats = NDArray[np.float64]

PH_LEVELS = np.round(np.arange(4.5, 7.55, 0.1), 1)
SALT_LEVELS = np.arange(50.0, 505.0, 10.0)
ADDITIVE_LEVELS = np.arange(0.0, 205.0, 10.0)

PH_SD = 0.03  # setting error of pH
SALT_SD = 0.02  # relative setting error of salt, and of the additive
PLATE_SD = 0.03  # relative error shared by the wells of a plate

_LEAST_SHARE, _LARGEST_SHARE = 0.10, 0.60
_LEAST_HYDROPHOBIC_LOSS = 0.05
_ROOM = 0.1  # three plate errors


def truth_grid(factors: int = 2) -> Floats:
    """Return all conditions the bench can set, shape (1426, 2): pH and salt in mM; of three
    factors, with the additive in mM, every other step of each, shape (4048, 3).
    """
    if factors == 2:
        levels = [PH_LEVELS, SALT_LEVELS]
    else:
        levels = [PH_LEVELS[::2], SALT_LEVELS[::2], ADDITIVE_LEVELS[::2]]
    return np.column_stack([x.ravel() for x in np.meshgrid(*levels, indexing="ij")])


@dataclass(frozen=True, kw_only=True)
class DrawnProcess:
    """One process with known truth.

    Parameters
    ----------
    stages
        Number of elution stages.
    volume, hold_up, resin
        Liquid added by each stage, liquid left in the well between stages, settled resin; µL.
    a, nu, b
        Kp at 100 mM and pH 6, its power in salt, its decades lost for each pH unit.
    hydrophobic, k
        B, the hydrophobic Kp extrapolated to no salt (0 for plain elution), and its decades
        gained for each mM.
    c, e
        Decades that electrostatic and hydrophobic Kp lose for each mM of the additive.
    d, p
        Decades of solubility lost for each pH unit, and the pH where half the protein is lost (0
        and 6 where none is).
    noise_cv, noise_floor
        Standard deviation of a reading of recovery r: sqrt(noise_floor^2 + (noise_cv r)^2).
    """

    stages: int
    volume: float = 200.0
    hold_up: float
    resin: float
    a: float
    nu: float
    b: float
    hydrophobic: float = 0.0
    k: float = 0.0
    c: float = 0.0
    e: float = 0.0
    d: float = 0.0
    p: float = 6.0
    noise_cv: float
    noise_floor: float

    @property
    def kind(self) -> Kind:
        """Tell plain elution, mixed mode and islands apart."""
        if self.hydrophobic == 0:
            return "elution"
        return "island" if self.d > 0 else "mixed mode"

    def partition(self, ph: ArrayLike, salt: ArrayLike, additive: ArrayLike = 0.0) -> Floats:
        """Return Kp, resin over liquid concentration, at pH, salt and additive (mM); shapes
        broadcast.
        """
        ph, salt, z = (np.asarray(x, dtype=float) for x in (ph, salt, additive))
        decades = -self.b * (ph - 6) - self.c * z
        electrostatic = self.a * (salt / 100) ** -self.nu * 10**decades
        return np.asarray(electrostatic + self.hydrophobic * 10 ** (self.k * salt - self.e * z))

    def recovery(self, ph: ArrayLike, salt: ArrayLike, additive: ArrayLike = 0.0) -> Floats:
        """Return the share of bound protein collected over all stages; shapes broadcast.

        A stage collects V / (V + V_h + Kp V_R) of what is left in the well and in solution.
        """
        collected = self.volume / (
            self.volume + self.hold_up + self.partition(ph, salt, additive) * self.resin
        )
        every = 1 - (1 - collected) ** self.stages
        if self.d == 0:
            return np.asarray(every)
        return np.asarray(every / (1 + 10 ** (self.d * (np.asarray(ph, dtype=float) - self.p))))

    def window_share(self, target: float, factors: int = 2) -> float:
        """Return the true share of all bench conditions that reach `target`."""
        return float(np.mean(self.recovery(*truth_grid(factors).T) >= target))

    def read(
        self, conditions: ArrayLike, plate_effects: ArrayLike, rng: np.random.Generator
    ) -> Floats:
        """Return one reading of recovery for each well; it may exceed 1.

        Parameters
        ----------
        conditions
            Target pH, salt and, where it is a factor, additive (mM) of n wells, shape (n, 2) or
            (n, 3). Each well is set with errors of its own, normal with sd 0.03 pH and 2 % of
            the salt and of the additive.
        plate_effects
            Relative error of each well's plate, shape (n,) or one number; see `plate_errors`.
        rng
            Draws setting errors and noise.
        """
        ph, *others = np.atleast_2d(np.asarray(conditions, dtype=float)).T
        ph = ph + PH_SD * rng.standard_normal(ph.shape)
        others = [x * (1 + SALT_SD * rng.standard_normal(x.shape)) for x in others]
        expected = self.recovery(ph, *others) * (1 + np.asarray(plate_effects, dtype=float))
        sd = np.hypot(self.noise_floor, self.noise_cv * expected)
        return np.asarray(expected + sd * rng.standard_normal(sd.shape))

    def chances(
        self, conditions: ArrayLike, target: float, rng: np.random.Generator, wells: int = 512
    ) -> Floats:
        """Return the share of future wells whose reading reaches `target` at each condition.

        Parameters
        ----------
        conditions
            Target pH, salt and, where it is a factor, additive (mM), shape (n, 2) or (n, 3).
        target
            Recovery that the reading must reach.
        rng
            Scrambles the points of the errors.
        wells
            Wells simulated at each condition, a power of two, each on a new plate of its own. They
            are set and their plates err on Sobol' points, the same at all conditions; the share of
            their readings that reach the target is summed over the noise, not drawn.
        """
        ph, *others = np.atleast_2d(np.asarray(conditions, dtype=float)).T[..., None]
        points = np.clip(Sobol(2 + len(others), rng=rng).random(wells), 1e-9, 1 - 1e-9)
        by_ph, *by_others, by_plate = ndtri(points).T
        set_others = (x * (1 + SALT_SD * by) for x, by in zip(others, by_others, strict=True))
        recovery = self.recovery(ph + PH_SD * by_ph, *set_others)
        expected = recovery * (1 + PLATE_SD * by_plate)
        sd = np.hypot(self.noise_floor, self.noise_cv * expected)
        return np.asarray(ndtr((expected - target) / sd).mean(axis=-1))


def plate_errors(n_plates: int, rng: np.random.Generator, sd: float = PLATE_SD) -> Floats:
    """Return one relative error for each plate, shape (n_plates,), normal about 0."""
    return sd * rng.standard_normal(n_plates)


def draw(
    kind: Kind,
    rng: np.random.Generator,
    target: float = 0.8,
    near: bool = False,
    factors: int = 2,
) -> DrawnProcess:
    """Draw a process whose edge at `target` runs through the range.

    Draws are repeated until 10 to 60 % of the bench conditions reach the target and, in mixed
    mode, until hydrophobic binding takes at least 5 % of them away. An island touches neither end
    of pH or salt. The best recovery in the range lies at least 0.1 above the target; with `near`,
    less than that: hold-up caps it so close to the target that the error of a plate decides over
    the whole plateau.
    """
    grid = truth_grid(factors)
    outermost = ((grid[:, :2] == grid[:, :2].min(0)) | (grid[:, :2] == grid[:, :2].max(0))).any(1)
    while True:
        process = _draw_any(kind, rng, factors)
        recovery = process.recovery(*grid.T)
        share = float(np.mean(recovery >= target))
        capped = recovery.max() < target + _ROOM
        if not (_LEAST_SHARE <= share <= _LARGEST_SHARE and capped == near):
            continue
        if kind == "elution" or (kind == "island" and recovery[outermost].max() < target):
            return process
        plain = replace(process, hydrophobic=0.0)
        if (
            kind == "mixed mode"
            and plain.window_share(target, factors) - share >= _LEAST_HYDROPHOBIC_LOSS
        ):
            return process


def _draw_any(kind: Kind, rng: np.random.Generator, factors: int) -> DrawnProcess:
    nu = rng.uniform(3, 8)
    salt_at_one = float(np.exp(rng.uniform(np.log(80), np.log(450))))  # mM where Kp = 1 at pH 6
    hydrophobic = k = c = e = d = 0.0
    p = 6.0
    if kind != "elution":
        k = rng.uniform(0.002, 0.010)
        hydrophobic = 10 ** (-k * rng.uniform(200, 600))  # Kp = 1 at that salt, mM
    if kind == "island":
        d, p = rng.uniform(1.5, 4.0), rng.uniform(6.5, 7.5)
    if factors == 3:
        c, e = rng.uniform(0.0, 0.006, 2)
    return DrawnProcess(
        stages=int(rng.integers(1, 4)),
        hold_up=rng.uniform(20, 40),
        resin=rng.uniform(20, 50),
        a=(salt_at_one / 100) ** nu,
        nu=nu,
        b=rng.uniform(0.3, 1.2),
        hydrophobic=hydrophobic,
        k=k,
        c=c,
        e=e,
        d=d,
        p=p,
        noise_cv=rng.uniform(0.02, 0.03),
        noise_floor=rng.uniform(0.005, 0.015),
    )
