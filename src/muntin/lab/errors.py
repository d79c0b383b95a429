"""Errors of the bench: how large they are, and one draw of them for the wells of a run.

Relative errors are log-normal with mean 1, so that no volume falls below 0; the others are
normal about 0. The sizes are those of an ordinary bench; any of them can be replaced by what
was measured.
"""

from collections.abc import Hashable, Sequence
from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Errors:
    """One draw for n wells with J stages. A factor multiplies the true or the aimed-at value.

    Parameters
    ----------
    ph, salt
        Added to the pH and factor on the salt of each well's elution buffer, shape (n,).
    hold_up, resin
        Factors on the hold-up and the settled resin of each well, shape (n,).
    volume, filling
        Factors on the volume added by each stage and on that pipetted for reading, shape (n, J).
    weighing
        Factors on the volume collected, as the balance shows it, shape (n, J).
    reading
        Noise of A280 in units of its standard deviation, shape (n, J).
    path
        Factors on the near infrared difference A977 - A900, shape (n, J).
    load, blank
        Factor on the load concentration that the plate of each well reckons with, and AU added
        to the blank it subtracts, shape (n,).
    """

    ph: Floats
    salt: Floats
    hold_up: Floats
    resin: Floats
    volume: Floats
    filling: Floats
    weighing: Floats
    reading: Floats
    path: Floats
    load: Floats
    blank: Floats

    @classmethod
    def absent(cls, stages: int) -> "Errors":
        """Return no errors at all, for any number of wells: arrays of shape (1,) and (1, J)."""
        none, sure, each = np.zeros(1), np.ones(1), np.ones((1, stages))
        return cls(
            ph=none,
            salt=sure,
            hold_up=sure,
            resin=sure,
            volume=each,
            filling=each,
            weighing=each,
            reading=np.zeros((1, stages)),
            path=each,
            load=sure,
            blank=none,
        )


@dataclass(frozen=True, kw_only=True, slots=True)
class ErrorSizes:
    """Standard deviations; those named cv are relative.

    The defaults are common practice, no source, but for the two marked.

    Parameters
    ----------
    ph_sd, salt_cv
        Setting of pH and salt in each well.
    volume_cv
        Each pipetting, of additions and into the reading plate.
    hold_up_cv, resin_cv
        Hold-up and settled resin from well to well; a well keeps its own through all stages.
    weighing_cv
        Collected volume by the balance.
    a280_cv, a280_floor
        A280 reads with sd hypot(a280_floor, a280_cv A), the floor in AU.
    path_cv
        Near infrared difference A977 - A900.
    load_cv
        Load concentration that all wells of a plate reckon with. Published experience of 2 to
        5 points of recovery from plate to plate, from memory.
    blank_sd
        Blank that all wells of a plate subtract, AU.
    stock_ph_sd, stock_salt_cv
        pH and salt of a stock, the same in all wells that it feeds. Published experience of 3
        to 8 points of recovery from day to day and stock to stock, from memory.
    """

    ph_sd: float = 0.03
    salt_cv: float = 0.02
    volume_cv: float = 0.01
    hold_up_cv: float = 0.25
    resin_cv: float = 0.04
    weighing_cv: float = 0.003
    a280_cv: float = 0.02
    a280_floor: float = 0.002
    path_cv: float = 0.005
    load_cv: float = 0.03
    blank_sd: float = 0.003
    stock_ph_sd: float = 0.03
    stock_salt_cv: float = 0.01

    @classmethod
    def none(cls) -> "ErrorSizes":
        """Return sizes that are all 0."""
        return cls(**{each.name: 0.0 for each in fields(cls)})

    def reading_sd(self, absorbance: Floats) -> Floats:
        """Return the standard deviation of reads about `absorbance`, both in AU."""
        return np.hypot(self.a280_floor, self.a280_cv * absorbance)

    def draw(
        self,
        wells: int,
        stages: int,
        rng: np.random.Generator,
        plates: Sequence[Hashable] | None = None,
        stocks: Sequence[Hashable] | None = None,
    ) -> Errors:
        """Draw the errors of a run.

        The generator moves on equally whatever the sizes, so that runs from the same state
        differ only by the errors whose sizes differ.

        Parameters
        ----------
        wells, stages
            Numbers n and J.
        rng
            Source of chance.
        plates, stocks
            Plate and pH stock of each well, n keys; equal keys share a draw. All wells lie on
            one plate, or are fed by one stock, if not given.

        Raises
        ------
        ValueError
            If there are not n keys.
        """

        def normal(*shape: int) -> Floats:
            return rng.standard_normal(shape)

        def shared(keys: Sequence[Hashable] | None) -> tuple[Floats, Floats]:
            places = _places(keys, wells)
            first, second = normal(2, places.max(initial=-1) + 1)
            return first[places], second[places]

        # Plates come first, so that those of one state err equally whatever stocks feed them.
        load, blank = shared(plates)
        stock_ph, stock_salt = shared(stocks)
        stock_factor = _factor(self.stock_salt_cv, stock_salt)
        return Errors(
            ph=self.stock_ph_sd * stock_ph + self.ph_sd * normal(wells),
            salt=stock_factor * _factor(self.salt_cv, normal(wells)),
            hold_up=_factor(self.hold_up_cv, normal(wells)),
            resin=_factor(self.resin_cv, normal(wells)),
            volume=_factor(self.volume_cv, normal(wells, stages)),
            filling=_factor(self.volume_cv, normal(wells, stages)),
            weighing=_factor(self.weighing_cv, normal(wells, stages)),
            reading=normal(wells, stages),
            path=_factor(self.path_cv, normal(wells, stages)),
            load=_factor(self.load_cv, load),
            blank=self.blank_sd * blank,
        )


def _places(keys: Sequence[Hashable] | None, wells: int) -> NDArray[np.int_]:
    """Number the keys in the order in which they first come."""
    if keys is None:
        return np.zeros(wells, dtype=int)
    if len(keys) != wells:
        raise ValueError(f"{wells} wells but {len(keys)} keys of plates or stocks")
    number: dict[Hashable, int] = {}
    return np.array([number.setdefault(key, len(number)) for key in keys], dtype=int)


def _factor(cv: float, deviate: Floats) -> Floats:
    """Log-normal factor of mean 1 and relative standard deviation `cv`."""
    sigma = np.sqrt(np.log1p(cv**2))
    return np.asarray(np.exp(sigma * deviate - sigma**2 / 2))
