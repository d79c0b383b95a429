"""Drawn processes: elution from resin-filled wells whose true recovery is known.

A well is eluted in one to three equilibrium stages. Each adds `volume` to the hold-up left in
the well, and the protein parts between liquid and resin by the coefficient Kp:

    plain elution   Kp = A (salt / 100 mM)^-nu 10^(-b (pH - 6))
    mixed mode      Kp + B 10^(k salt)

The power law in salt is that of stoichiometric displacement (Boardman & Partridge 1955,
Biochem. J. 59:543; Kopaciewicz, Rounds, Fausnaugh & Regnier 1983, J. Chromatogr. 266:3). The
rise of hydrophobic binding with the exponential of the salt concentration is that of Melander,
El Rassi & Horvath 1989, J. Chromatogr. 469:3; they multiply the two influences on one site,
here they act on sites of two kinds and add. The pH dependence is a plain straight line in
log Kp. Ranges of the parameters are wide on purpose and describe no particular resin.
"""

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import ndtr, ndtri
from scipy.stats.qmc import Sobol

Kind = Literal["elution", "mixed mode"]
Floats = NDArray[np.float64]

PH_LEVELS = np.round(np.arange(4.5, 7.55, 0.1), 1)
SALT_LEVELS = np.arange(50.0, 505.0, 10.0)

PH_SD = 0.03  # setting error of pH
SALT_SD = 0.02  # relative setting error of salt
PLATE_SD = 0.03  # relative error shared by the wells of a plate

_LEAST_SHARE, _LARGEST_SHARE = 0.10, 0.60
_LEAST_HYDROPHOBIC_LOSS = 0.05
_ROOM = 0.1  # three plate errors


def truth_grid() -> Floats:
    """Return all conditions the bench can set, shape (1426, 2): pH and salt in mM."""
    ph, salt = np.meshgrid(PH_LEVELS, SALT_LEVELS, indexing="ij")
    return np.column_stack([ph.ravel(), salt.ravel()])


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
    noise_cv: float
    noise_floor: float

    @property
    def kind(self) -> Kind:
        """Tell plain elution from mixed mode."""
        return "mixed mode" if self.hydrophobic > 0 else "elution"

    def partition(self, ph: ArrayLike, salt: ArrayLike) -> Floats:
        """Return Kp, resin over liquid concentration, at pH and salt (mM); shapes broadcast."""
        ph, salt = np.asarray(ph, dtype=float), np.asarray(salt, dtype=float)
        electrostatic = self.a * (salt / 100) ** -self.nu * 10 ** (-self.b * (ph - 6))
        return np.asarray(electrostatic + self.hydrophobic * 10 ** (self.k * salt))

    def recovery(self, ph: ArrayLike, salt: ArrayLike) -> Floats:
        """Return the share of bound protein collected over all stages; shapes broadcast.

        A stage collects V / (V + V_h + Kp V_R) of what is left in the well.
        """
        collected = self.volume / (
            self.volume + self.hold_up + self.partition(ph, salt) * self.resin
        )
        return np.asarray(1 - (1 - collected) ** self.stages)

    def window_share(self, target: float) -> float:
        """Return the true share of all bench conditions that reach `target`."""
        return float(np.mean(self.recovery(*truth_grid().T) >= target))

    def read(
        self, conditions: ArrayLike, plate_effects: ArrayLike, rng: np.random.Generator
    ) -> Floats:
        """Return one reading of recovery for each well; it may exceed 1.

        Parameters
        ----------
        conditions
            Target pH and salt (mM) of n wells, shape (n, 2). Each well is set with errors of
            its own, normal with sd 0.03 pH and 2 % of the salt.
        plate_effects
            Relative error of each well's plate, shape (n,) or one number; see `plate_errors`.
        rng
            Draws setting errors and noise.
        """
        ph, salt = np.asarray(conditions, dtype=float).reshape(-1, 2).T
        ph = ph + PH_SD * rng.standard_normal(ph.shape)
        salt = salt * (1 + SALT_SD * rng.standard_normal(salt.shape))
        expected = self.recovery(ph, salt) * (1 + np.asarray(plate_effects, dtype=float))
        sd = np.hypot(self.noise_floor, self.noise_cv * expected)
        return np.asarray(expected + sd * rng.standard_normal(sd.shape))

    def chances(
        self, conditions: ArrayLike, target: float, rng: np.random.Generator, wells: int = 512
    ) -> Floats:
        """Return the share of future wells whose reading reaches `target` at each condition.

        Parameters
        ----------
        conditions
            Target pH and salt (mM), shape (n, 2).
        target
            Recovery that the reading must reach.
        rng
            Scrambles the points of the errors.
        wells
            Wells simulated at each condition, a power of two, each on a new plate of its own. They
            are set and their plates err on Sobol' points, the same at all conditions; the share of
            their readings that reach the target is summed over the noise, not drawn.
        """
        ph, salt = np.asarray(conditions, dtype=float).reshape(-1, 2, 1).swapaxes(0, 1)
        points = np.clip(Sobol(3, rng=rng).random(wells), 1e-9, 1 - 1e-9)
        by_ph, by_salt, by_plate = ndtri(points).T
        recovery = self.recovery(ph + PH_SD * by_ph, salt * (1 + SALT_SD * by_salt))
        expected = recovery * (1 + PLATE_SD * by_plate)
        sd = np.hypot(self.noise_floor, self.noise_cv * expected)
        return np.asarray(ndtr((expected - target) / sd).mean(axis=-1))


def plate_errors(n_plates: int, rng: np.random.Generator, sd: float = PLATE_SD) -> Floats:
    """Return one relative error for each plate, shape (n_plates,), normal about 0."""
    return sd * rng.standard_normal(n_plates)


def draw(
    kind: Kind, rng: np.random.Generator, target: float = 0.8, near: bool = False
) -> DrawnProcess:
    """Draw a process whose edge at `target` runs through the range.

    Draws are repeated until 10 to 60 % of the bench conditions reach the target and, in mixed
    mode, until hydrophobic binding takes at least 5 % of them away. The best recovery in the
    range lies at least 0.1 above the target; with `near`, less than that: hold-up caps it so
    close to the target that the error of a plate decides over the whole plateau.
    """
    while True:
        process = _draw_any(kind, rng)
        share = process.window_share(target)
        capped = process.recovery(*truth_grid().T).max() < target + _ROOM
        if _LEAST_SHARE <= share <= _LARGEST_SHARE and capped == near:
            if kind == "elution":
                return process
            plain = replace(process, hydrophobic=0.0)
            if plain.window_share(target) - share >= _LEAST_HYDROPHOBIC_LOSS:
                return process


def _draw_any(kind: Kind, rng: np.random.Generator) -> DrawnProcess:
    nu = rng.uniform(3, 8)
    salt_at_one = float(np.exp(rng.uniform(np.log(80), np.log(450))))  # mM where Kp = 1 at pH 6
    hydrophobic = k = 0.0
    if kind == "mixed mode":
        k = rng.uniform(0.002, 0.010)
        hydrophobic = 10 ** (-k * rng.uniform(200, 600))  # Kp = 1 at that salt, mM
    return DrawnProcess(
        stages=int(rng.integers(1, 4)),
        hold_up=rng.uniform(20, 40),
        resin=rng.uniform(20, 50),
        a=(salt_at_one / 100) ** nu,
        nu=nu,
        b=rng.uniform(0.3, 1.2),
        hydrophobic=hydrophobic,
        k=k,
        noise_cv=rng.uniform(0.02, 0.03),
        noise_floor=rng.uniform(0.005, 0.015),
    )
