"""Studies on which the engines are compared: invented readings of every kind the model knows."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.stats.qmc import Sobol

from muntin.surrogate.cells import Readings
from muntin.surrogate.coding import Choice, Coding, Columns, Continuous
from muntin.surrogate.priors import Kind, Priors, priors_of
from tests.benchmarks.processes import DrawnProcess, draw, plate_errors

Array = NDArray[np.float64]
Index = NDArray[np.intp]
PLAIN = Columns.plain(2)


@dataclass(frozen=True, kw_only=True)
class Trial:
    """One study: readings on the scale where noise is additive (ln y if positive), the target that
    the process mean must reach (natural unit), and coded conditions (n, D) that span the range.

    surrogates: those worth telling apart on it. setting: the sds with which the bench sets coded
    conditions (n, D), where it is known.
    """

    name: str
    kind: Kind
    readings: Readings
    target: float
    priors: Priors
    grid: Array
    columns: Columns = PLAIN
    surrogates: tuple[str, ...] = ("gp", "quadratic")
    setting: Callable[[Array], Array] | None = None

    @property
    def target_additive(self) -> float:
        """The target on the scale where noise is additive."""
        return float(np.log(self.target)) if self.kind == "positive" else self.target


def square(points: int) -> Array:
    """Conditions (points^2, 2) evenly spread over two coded factors, ends of the range included."""
    x = np.linspace(-1.0, 1.0, points)
    return np.stack(np.meshgrid(x, x, indexing="ij"), axis=-1).reshape(-1, 2)


GRID = square(25)


def spread(count: int, rng: np.random.Generator, depth: int = 2) -> Array:
    """Coded conditions (count, depth), at most 64, that fill the range, on steps of 0.05."""
    points = 2.0 * Sobol(depth, rng=rng).random_base2(6)[:count] - 1.0
    return np.round(points / 0.05) * 0.05


def elution(
    process: DrawnProcess, X: Array, plate: Index, rng: np.random.Generator, sd: Array | None = None
) -> Array:
    """Recoveries (n,) of a drawn process read at coded X (n, 2); sd (n,): further noise."""
    conditions = np.column_stack([6.0 + 1.5 * X[:, 0], 275.0 + 225.0 * X[:, 1]])
    y = process.read(conditions, plate_errors(plate.max() + 1, rng)[plate], rng)
    return y if sd is None else y + sd * rng.standard_normal(len(y))


def fraction(name: str, readings: Readings, target: float = 0.8, **other: object) -> Trial:
    """A trial of a fraction."""
    priors = priors_of("fraction", (0.0, 1.0))
    given = {"grid": GRID, **other}
    return Trial(
        name=name, kind="fraction", readings=readings, target=target, priors=priors, **given
    )  # type: ignore[arg-type]


def plates_of(count: int, plates: int) -> Index:
    """Plate number (count,) of wells shared out evenly."""
    return np.arange(count) * plates // count


def scale_error() -> Trial:
    """24 wells on two plates, each plate with an error that multiplies its readings."""
    rng = np.random.default_rng(101)
    X, plate = spread(24, rng), plates_of(24, 2)
    y = elution(draw("elution", rng), X, plate, rng)
    return fraction("scale error", Readings(X=X, y=y, sd=np.zeros(24), scale=(plate,)))


def both_errors() -> Trial:
    """30 wells on three plates with scale errors, and six stocks a plate that move the process."""
    rng = np.random.default_rng(102)
    X, plate = spread(30, rng), plates_of(30, 3)
    X[:, 0] = np.round(X[:, 0] / 0.4) * 0.4
    stock = np.unique(np.column_stack([plate, X[:, 0]]), axis=0, return_inverse=True)[1].ravel()
    moved = X + np.column_stack([0.05 * rng.standard_normal(stock.max() + 1)[stock], np.zeros(30)])
    y = elution(draw("mixed mode", rng), moved, plate, rng)
    readings = Readings(X=X, y=y, sd=np.zeros(30), inside=(stock,), scale=(plate,))
    return fraction("inside and scale errors", readings, surrogates=("gp",))


def real() -> Trial:
    """24 wells on three plates of a response that may be any number, plates shifted."""
    rng = np.random.default_rng(103)
    X, plate = spread(24, rng), plates_of(24, 3)
    f = 1.0 + 2.0 * X[:, 0] - 1.5 * X[:, 1] ** 2 + X[:, 0] * X[:, 1]
    y = f + 0.1 * rng.standard_normal(3)[plate] + 0.1 * rng.standard_normal(24)
    readings = Readings(X=X, y=y, sd=np.zeros(24), inside=(plate,))
    priors = priors_of("real", (-3.0, 4.0))
    return Trial(
        name="real",
        kind="real",
        readings=readings,
        target=1.5,
        priors=priors,
        grid=GRID,
        surrogates=("gp",),
    )


def positive() -> Trial:
    """24 wells on three plates of a response with relative noise, read as its logarithm."""
    rng = np.random.default_rng(104)
    X, plate = spread(24, rng), plates_of(24, 3)
    f = 1.5 + X[:, 0] + 0.8 * np.sin(2.0 * X[:, 1])
    y = f + 0.08 * rng.standard_normal(3)[plate] + 0.1 * rng.standard_normal(24)
    readings = Readings(X=X, y=y, sd=np.zeros(24), inside=(plate,))
    priors = priors_of("positive", (1.0, 30.0))
    return Trial(
        name="positive",
        kind="positive",
        readings=readings,
        target=6.0,
        priors=priors,
        grid=GRID,
        surrogates=("quadratic",),
    )


def choices() -> Trial:
    """36 wells of three resins on two plates; grid of 17 by 17 conditions for each resin."""
    rng = np.random.default_rng(105)
    coding = Coding(
        (Continuous(low=-1.0, high=1.0), Continuous(low=-1.0, high=1.0), Choice(levels=3))
    )
    X, plate, resin = spread(36, rng), plates_of(36, 2), np.arange(36) % 3
    y = np.zeros(36)
    for number in range(3):
        mine = resin == number
        y[mine] = elution(draw("elution", rng), X[mine], np.zeros(mine.sum(), dtype=int), rng)
    y *= 1.0 + plate_errors(2, rng)[plate]
    every = np.concatenate([np.column_stack([square(17), np.full(289, k)]) for k in range(3)])
    return fraction(
        "three resins",
        Readings(X=coding.code([*X.T, resin]), y=y, sd=np.zeros(36), scale=(plate,)),
        grid=coding.code(list(every.T)),
        columns=coding.columns,
        surrogates=("gp",),
    )


def own_sd() -> Trial:
    """24 wells on two plates whose readings state uncertainties of 0 to 0.1."""
    rng = np.random.default_rng(106)
    X, plate = spread(24, rng), plates_of(24, 2)
    sd = rng.choice([0.0, 0.02, 0.05, 0.1], 24)
    y = elution(draw("elution", rng), X, plate, rng, sd)
    return fraction(
        "uncertainty of each reading",
        Readings(X=X, y=y, sd=sd, scale=(plate,)),
        surrogates=("quadratic",),
    )


def few_wells() -> Trial:
    """12 wells on one plate."""
    rng = np.random.default_rng(107)
    X, plate = spread(12, rng), plates_of(12, 1)
    y = elution(draw("elution", rng), X, plate, rng)
    return fraction("12 wells on one plate", Readings(X=X, y=y, sd=np.zeros(12), scale=(plate,)))


def near_ceiling() -> Trial:
    """24 wells on two plates of a process that hold-up caps less than 0.1 above the target."""
    rng = np.random.default_rng(108)
    X, plate = spread(24, rng), plates_of(24, 2)
    y = elution(draw("elution", rng, near=True), X, plate, rng)
    return fraction(
        "plateau near the target",
        Readings(X=X, y=y, sd=np.zeros(24), scale=(plate,)),
        surrogates=("gp",),
    )


def censored() -> Trial:
    """24 wells on two plates; below 0.1 and above 0.9 the assay says only that."""
    rng = np.random.default_rng(109)
    X, plate = spread(24, rng), plates_of(24, 2)
    y = elution(draw("elution", rng), X, plate, rng)
    side = (y > 0.9).astype(np.intp) - (y < 0.1).astype(np.intp)
    readings = Readings(X=X, y=np.clip(y, 0.1, 0.9), sd=np.zeros(24), scale=(plate,), censored=side)
    return fraction("censored below 0.1, above 0.9", readings, surrogates=("gp",))


def set_with_errors() -> Trial:
    """24 wells on two plates; the bench sets pH with an sd of 0.03 and salt with one of 2 %."""
    rng = np.random.default_rng(110)
    X, plate = spread(24, rng), plates_of(24, 2)
    y = elution(draw("mixed mode", rng), X, plate, rng)

    def setting(x: Array) -> Array:
        return np.column_stack(
            [np.full(len(x), 0.03 / 1.5), 0.02 * (275.0 + 225.0 * x[:, 1]) / 225.0]
        )

    readings = Readings(X=X, y=y, sd=np.zeros(24), scale=(plate,), setting=setting(X))
    return fraction("errors of setting", readings, setting=setting, surrogates=("gp",))


def sixty_wells() -> Trial:
    """60 wells on three plates, 40 conditions among them."""
    rng = np.random.default_rng(111)
    X = spread(40, rng)[rng.integers(0, 40, 60)]
    plate = plates_of(60, 3)
    y = elution(draw("elution", rng), X, plate, rng)
    return fraction(
        "60 wells on three plates",
        Readings(X=X, y=y, sd=np.zeros(60), scale=(plate,)),
        surrogates=("gp",),
    )


TRIALS: tuple[Callable[[], Trial], ...] = (
    scale_error,
    both_errors,
    real,
    positive,
    choices,
    own_sd,
    few_wells,
    near_ceiling,
    censored,
    set_with_errors,
    sixty_wells,
)
