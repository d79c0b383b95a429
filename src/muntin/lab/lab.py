"""Virtual lab: recoveries at any pH and salt, the true ones and those a bench would find."""

from collections.abc import Hashable, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from muntin.lab.errors import Errors, ErrorSizes
from muntin.lab.isotherm import Isotherm
from muntin.lab.procedure import Procedure
from muntin.lab.reads import PlateReads, Reader, read_fractions
from muntin.lab.stages import Binding, Fractions

Floats = NDArray[np.float64]


@dataclass(frozen=True, kw_only=True, slots=True)
class VirtualLab:
    """A protein, a resin and a way to run wells, all known.

    Recovery is that of load: protein in all elution filtrates over protein loaded. Conditions
    are pH and salt (mM) of the elution buffer, shape (n, 2), raw units.

    Parameters
    ----------
    binding
        Isotherm, or anything else that parts protein between liquid and resin.
    procedure
        What each well is given.
    molar_mass
        Of the protein, kDa.
    reader
        Optics of the reads.
    """

    binding: Binding = field(default_factory=Isotherm)
    procedure: Procedure = field(default_factory=Procedure)
    molar_mass: float = 150.0
    reader: Reader = field(default_factory=Reader)

    def fractions(self, conditions: ArrayLike, errors: Errors | None = None) -> Fractions:
        """Return what n wells give and keep, without errors or with a draw of them."""
        ph, salt = np.asarray(conditions, dtype=float).reshape(-1, 2).T
        errors = errors or Errors.absent(len(self.procedure.roles))
        return self.procedure.run(self.binding, self.molar_mass, ph, salt, errors)

    def recovery(self, conditions: ArrayLike) -> Floats:
        """Return the true recovery at n conditions, shape (n,), within 0 to 1."""
        return self.fractions(conditions).recovery_of_load

    def window_share(self, target: float, conditions: ArrayLike) -> float:
        """Return the share of the conditions whose true recovery reaches `target`."""
        return float(np.mean(self.recovery(conditions) >= target))

    def read(
        self,
        conditions: ArrayLike,
        rng: np.random.Generator,
        sizes: ErrorSizes | None = None,
        plates: Sequence[Hashable] | None = None,
        stocks: Sequence[Hashable] | None = None,
    ) -> PlateReads:
        """Run n wells with errors and return their reads; `.recovery` is what a bench reports.

        Parameters
        ----------
        conditions
            Meant pH and salt (mM) of n wells, shape (n, 2).
        rng
            Source of chance.
        sizes
            Sizes of the errors; the defaults of `ErrorSizes` if not given.
        plates
            Plate of each well, n keys; all on one if not given.
        stocks
            pH stock that feeds each well, n keys; if not given, one for each plate and pH.

        Raises
        ------
        ValueError
            If `plates` or `stocks` are not n keys, or a salt set is not above 0 with no hold-up.
        """
        conditions = np.asarray(conditions, dtype=float).reshape(-1, 2)
        sizes = sizes or ErrorSizes()
        plates = [0] * len(conditions) if plates is None else plates
        if stocks is None:
            stocks = list(zip(plates, conditions[:, 0].tolist(), strict=False))
        stages = len(self.procedure.roles)
        errors = sizes.draw(len(conditions), stages, rng, plates, stocks)
        fractions = self.fractions(conditions, errors)
        return read_fractions(
            fractions, self.procedure, self.molar_mass, self.reader, errors, sizes
        )
