"""Reads: what the plate reader and the balance show, and the recovery worked out from it.

A read is A280 = extinction c L + background for a path L that the filling of the reading plate
sets, and the water band gives L back: (A977 - A900) over that of 1 cm. Nothing scatters, no read
is too high for the reader, and salt does not shift the water band.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.lab.errors import Errors, ErrorSizes
from muntin.lab.procedure import Procedure
from muntin.lab.stages import Fractions, Role

Floats = NDArray[np.float64]

_MM3_PER_ML = 1000.0


@dataclass(frozen=True, kw_only=True, slots=True)
class Reader:
    """Optics of the protein, the reading plate and the reader.

    Parameters
    ----------
    extinction
        At 280 nm, mL/mg/cm; 1.35 to 1.5 for antibodies, from memory.
    fill, area
        Volume in each well of the reading plate (µL) and its cross section (cm²): a path of
        about 0.6 cm.
    background
        A280 of plate and buffer, and A900 of both, AU; no source.
    water_band
        A977 - A900 of 1 cm of the buffer, AU; from memory.
    """

    extinction: float = 1.4
    fill: float = 200.0
    area: float = 0.33
    background: float = 0.05
    water_band: float = 0.18

    def path(self, filling: Floats) -> Floats:
        """Return the path in cm for factors on the volume filled in."""
        return self.fill * filling / _MM3_PER_ML / self.area


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class PlateReads:
    """Reads of n wells with J fractions, and the figures that go with them.

    Parameters
    ----------
    roles
        What each of the J fractions is: load, wash or elution.
    a280, a977, a900
        Absorbances of the samples in the reading plate, AU, shape (n, J).
    blank
        A280 of the matched buffer blank on each well's plate, AU, shape (n,).
    collected
        Weighed volume of each fraction, µL, shape (n, J).
    added
        Volume that each stage is meant to add, µL, shape (J,).
    load
        Load concentration that each well's plate reckons with, mg/mL, shape (n,).
    reader
        Its extinction and water band serve the reduction too.
    """

    roles: tuple[Role, ...]
    a280: Floats
    a977: Floats
    a900: Floats
    blank: Floats
    collected: Floats
    added: Floats
    load: Floats
    reader: Reader

    @property
    def concentration(self) -> Floats:
        """Protein in each fraction by net A280 over extinction and path, mg/mL, shape (n, J)."""
        path = (self.a977 - self.a900) / self.reader.water_band
        return (self.a280 - self.blank[:, None]) / (self.reader.extinction * path)

    @property
    def recovery(self) -> Floats:
        """Protein in the elution fractions over protein loaded, shape (n,); it may exceed 1.

        Volumes are those meant to be added, which a bench uses as long as hold-up is steady.
        """
        amounts = self.concentration * self.added
        given = self.load * self.added[np.array(self.roles) == "load"].sum()
        return amounts[:, np.array(self.roles) == "elution"].sum(axis=1) / given


def read_fractions(
    fractions: Fractions,
    procedure: Procedure,
    molar_mass: float,
    reader: Reader,
    errors: Errors,
    sizes: ErrorSizes,
) -> PlateReads:
    """Return the reads of n wells.

    Parameters
    ----------
    fractions
        What the wells gave.
    procedure
        What they were meant to be given.
    molar_mass
        Of the protein, kDa.
    reader
        Optics.
    errors, sizes
        A draw for these n wells, and the sizes it is from.
    """
    path = reader.path(errors.filling)
    protein = reader.extinction * fractions.liquid * molar_mass * path
    absorbance = protein + reader.background
    a900 = np.full(absorbance.shape, reader.background)
    return PlateReads(
        roles=fractions.roles,
        a280=absorbance + sizes.reading_sd(protein) * errors.reading,
        a977=a900 + reader.water_band * path * errors.path,
        a900=a900,
        blank=reader.background + errors.blank,
        collected=fractions.collected * errors.weighing,
        added=procedure.added,
        load=procedure.load * errors.load,
        reader=reader,
    )
