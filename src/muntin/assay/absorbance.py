"""Absorbance to concentration, by the law of Beer and Lambert.

    c = (A - blank - scatter) D / (extinction L)

with D the dilution and L the path in cm, from the water band or from volume over cross section.
Everything is plain arithmetic on arrays, so that complex numbers (`uncertainty.py`) and draws with
leading axes pass through it.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from muntin.record.assay import Assay

Array = NDArray[Any]
Floats = NDArray[np.float64]
Shifts = Mapping[str, Any]

_MM3_PER_ML = 1000.0
# Scatter of particles far smaller than the wavelength goes with its fourth power (Rayleigh).
_STEEPEST = 4.0


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Optics:
    """Samples in the reading plate, n of them in a plain row, with their standard uncertainties.

    Parameters
    ----------
    absorbance
        As read, AU, shape (n, 3): protein and two scatter wavelengths, NaN where not read.
    read_sd
        Noise of these reads, AU, shape (n, 3).
    blank
        Number of the blank that serves each sample, shape (n,).
    band
        Height of the water band, AU, shape (n,), NaN where the path comes from geometry.
    dilution
        Factor by which each sample was diluted, shape (n,).
    scatter_dilution
        The same for its scatter reads, shape (n,).
    """

    absorbance: Floats
    read_sd: Floats
    blank: NDArray[np.int_]
    band: Floats
    dilution: Floats
    scatter_dilution: Floats


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Blanks:
    """Blanks of a plate: G that serve samples, means of K kinds that were read.

    Parameters
    ----------
    names
        What each of the G is of.
    value
        AU, shape (G, 3).
    kind_sd
        Standard uncertainty of the mean of each kind, AU, shape (K, 3).
    weights
        Share of each kind in each blank, shape (G, K, 3): blanks of one kind err together.
    other_sd
        Standard uncertainty besides, where another buffer's stands for it, AU, shape (G, 3).
    borrowed
        Whether another buffer's stands for it.
    spread
        Range of the single reads of the protein's wavelength, AU, shape (G,).
    count
        Their number, shape (G,); 0 where the blank was entered.
    """

    names: tuple[str, ...]
    value: Floats
    kind_sd: Floats
    weights: Floats
    other_sd: Floats
    borrowed: tuple[bool, ...]
    spread: Floats
    count: NDArray[np.int_]

    @property
    def sd(self) -> Floats:
        """Standard uncertainty of each of the G, AU, shape (G, 3)."""
        return np.hypot(np.sqrt(((self.weights * self.kind_sd) ** 2).sum(axis=1)), self.other_sd)

    def moved(self, shifts: Shifts) -> Array:
        """Return the blanks as shifts of `blank` (..., K, 3) and `blank_other` (..., G, 3) have
        them, shape (..., G, 3).
        """
        moved = self.value + self.other_sd * shifts.get("blank_other", 0.0)
        if "blank" in shifts:
            moved = moved + np.einsum(
                "gkw,...kw->...gw", self.weights * self.kind_sd, shifts["blank"]
            )
        return np.asarray(moved)


def net(optics: Optics, blanks: Blanks, shifts: Shifts, own: str = "") -> Array:
    """Return absorbance less blank, AU, shape (..., n, 3).

    Parameters
    ----------
    optics, blanks
        Samples and blanks.
    shifts
        What moves inputs from their values, in standard uncertainties: {own}read (..., n, 3),
        and those of `Blanks.moved`; none where absent.
    own
        Put before the names of shifts that single samples have.
    """
    blank = blanks.moved(shifts)
    read = optics.absorbance + optics.read_sd * shifts.get(f"{own}read", 0.0)
    return np.asarray(read - blank[..., optics.blank, :])


def concentration(
    optics: Optics, blanks: Blanks, assay: Assay, shifts: Shifts, own: str = ""
) -> Array:
    """Return the concentration of samples before their dilution, mg/mL, shape (..., n).

    Parameters
    ----------
    optics, blanks, shifts, own
        As in `net`; shifts besides: {own}path and {own}dilution (..., n), extinction and
        path_shared (...).
    assay
        Settings.
    """
    above = net(optics, blanks, shifts, own)
    clear = above[..., 0] - scatter(above, optics, assay)
    diluted = np.where(optics.dilution > 1, assay.dilution_cv, 0.0)
    factor = optics.dilution * (1.0 + diluted * shifts.get(f"{own}dilution", 0.0))
    extinction = assay.extinction * (1.0 + assay.extinction_cv * _each(shifts, "extinction"))
    path = path_cm(optics, assay) * (1.0 + assay.path_cv * shifts.get(f"{own}path", 0.0))
    path = path * (1.0 + assay.path_shared_cv * _each(shifts, "path_shared"))
    return np.asarray(clear * factor / (extinction * path))


def _each(shifts: Shifts, name: str) -> Any:
    """A shift that all samples share, with an axis for them."""
    return np.asarray(shifts.get(name, 0.0))[..., None]


def path_cm(optics: Optics, assay: Assay) -> Floats:
    """Return the path of each sample in cm, shape (n,)."""
    geometric = assay.read_ul / _MM3_PER_ML / assay.read_area_cm2
    return np.where(np.isfinite(optics.band), optics.band / assay.water_band, geometric)


def scatter(above: Array, optics: Optics, assay: Assay) -> Array:
    """Return the scatter at the protein's wavelength, AU, shape (..., n); 0 where not read.

    By plain subtraction, or by the power law A = k nm^-p through both wavelengths where both
    stand five times the floor of the noise above the blank; p is held within 0 to 4.
    """
    if assay.scatter == "none":
        return np.zeros(above.shape[:-1])
    first, second = above[..., 1], above[..., 2]
    taken = np.where(np.isnan(first.real), 0.0, first)
    if assay.scatter == "slope":
        clear = (first.real > 5 * assay.read_floor) & (second.real > 5 * assay.read_floor)
        ratio = np.where(clear, first, 1.0) / np.where(clear, second, 1.0)
        power = np.log(ratio) / np.log(assay.scatter_nm[1] / assay.scatter_nm[0])
        power = np.where(power.real < 0, 0.0, np.where(power.real > _STEEPEST, _STEEPEST, power))
        carried = (assay.scatter_nm[0] / assay.protein_nm) ** power
        taken = taken * np.where(clear, carried, 1.0)
    return np.asarray(taken * optics.scatter_dilution / optics.dilution)
