"""Data sets drawn from the model itself: truth from the priors, readings from the truth."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri
from scipy.stats.qmc import Sobol

from muntin.surrogate.cells import Readings, collapse
from muntin.surrogate.coding import Columns
from muntin.surrogate.evidence import Model
from muntin.surrogate.fit import family_of, link_of
from muntin.surrogate.layout import Layout
from muntin.surrogate.links import mean_of
from muntin.surrogate.priors import Kind, Priors, priors_of
from tests.surrogate.problems import surface_covariances

Array = NDArray[np.float64]
COLUMNS = Columns.plain(2)
_TYPICAL: dict[Kind, tuple[float, float]] = {
    "fraction": (0.0, 1.0),
    "real": (-1.0, 3.0),
    "positive": (1.0, 30.0),
}


@dataclass(frozen=True, kw_only=True)
class Setup:
    """What is simulated: a surrogate and a kind of response over two factors.

    wells are read on so many conditions and plates; a plate moves the process and, for a fraction,
    multiplies its readings, too. setting: sd with which the bench sets both coded columns. limits:
    readings below or above them are censored.
    """

    name: str
    kind: Kind = "fraction"
    wells: int = 18
    conditions: int = 12
    plates: int = 3
    setting: float = 0.0
    limits: tuple[float, float] = (-np.inf, np.inf)

    @property
    def priors(self) -> Priors:
        """Priors of the response."""
        return priors_of(self.kind, _TYPICAL[self.kind])

    def model(self, readings: Readings) -> Model:
        """The model of readings, without setting errors."""
        family = family_of(self.name, COLUMNS, self.priors)
        return Model(family, collapse(readings), "logit" if self.kind == "fraction" else "identity")


@dataclass(frozen=True, kw_only=True)
class Simulated:
    """One data set and its truth: readings; log hyperparameters theta (H,); at a new coded
    condition x (1, D) the latent value, the process mean and a future well's reading on a new
    plate, the last two in natural units.
    """

    readings: Readings
    theta: Array
    x: Array
    latent: float
    mean: float
    reading: float


def designed(setup: Setup, rng: np.random.Generator) -> tuple[Readings, Array]:
    """Wells without readings, and a new condition (1, 2); the first wells fill all conditions."""
    X, x = rng.uniform(-1.0, 1.0, (setup.conditions, 2)), rng.uniform(-1.0, 1.0, (1, 2))
    again = rng.integers(0, setup.conditions, setup.wells - setup.conditions)
    rows = np.concatenate([np.arange(setup.conditions), again])
    plate, none = rng.integers(0, setup.plates, setup.wells), np.zeros(setup.wells)
    scale = (plate,) if setup.kind == "fraction" else ()
    setting = np.full((setup.wells, 2), setup.setting)
    return Readings(X=X[rows], y=none, sd=none, inside=(plate,), scale=scale, setting=setting), x


def simulate(setup: Setup, seed: int, design: int | None = None) -> Simulated:
    """Data set number `seed`; the wells are those of set number `design`, its own where None."""
    wells, x = designed(setup, np.random.default_rng((seed if design is None else design, 7)))
    rng = np.random.default_rng((seed, 8))
    layout = setup.model(wells).layout
    theta = layout.theta(_truth(len(layout), seed))
    # Every well is set apart, and so is the future well, which stands last.
    target = np.concatenate([wells.X, x, x])
    moved = target + setup.setting * rng.normal(size=target.shape)
    moved[-2] = x
    f = _surface(setup, layout.family(theta)[0], moved, rng)
    plates = np.append(wells.inside[0], setup.plates)
    y = _read(setup, layout, theta, np.append(f[:-2], f[-1]), plates, rng)
    low, high = setup.limits
    read = np.clip(y[:-1], low, high)
    side = (y[:-1] > high).astype(np.intp) - (y[:-1] < low).astype(np.intp)
    link, ceiling = link_of(setup.kind), layout.ceiling_of(theta)[0]
    return Simulated(
        readings=replace(wells, y=read, censored=side),
        theta=theta[0],
        x=x,
        latent=float(f[-2]),
        mean=float(mean_of(link, f[-2], ceiling)),
        reading=float(np.exp(y[-1]) if setup.kind == "positive" else y[-1]),
    )


def _truth(count: int, seed: int) -> Array:
    """Standardised hyperparameters (1, count) of one set: points of a scrambled Sobol' sequence, so
    that the truths of any number of sets spread as their prior does.
    """
    sequence = Sobol(count, rng=np.random.default_rng(8))
    return np.asarray(ndtri(sequence.random_base2(max(seed, 1).bit_length())[[seed]]))


def _surface(setup: Setup, own: Array, X: Array, rng: np.random.Generator) -> Array:
    """Latent values (n,) at coded X (n, 2), repeats of a condition alike."""
    points, back = np.unique(X, axis=0, return_inverse=True)
    K = surface_covariances(family_of(setup.name, COLUMNS, setup.priors), own, points, points)
    root = np.linalg.cholesky(K + 1e-9 * np.eye(len(points)))
    return setup.priors.mean + (root @ rng.normal(size=len(points)))[np.ravel(back)]


def _read(
    setup: Setup,
    layout: Layout,
    theta: Array,
    f: Array,
    plate: NDArray[np.intp],
    rng: np.random.Generator,
) -> Array:
    """Readings (n,) of latent values f (n,), on the scale where noise is additive."""
    inside = layout.inside_sd(theta)[0, 0] * rng.normal(size=setup.plates + 1)
    f = f + inside[plate]
    noise = layout.noise(theta)[0] * rng.normal(size=len(f))
    if setup.kind != "fraction":
        return np.asarray(f + noise)
    scale = layout.scale_sd(theta)[0, 0] * rng.normal(size=setup.plates + 1)
    return (1.0 + scale[plate]) * mean_of("logit", f, layout.ceiling_of(theta)[0]) + noise
