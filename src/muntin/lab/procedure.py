"""Procedure: what each well of a lab is given, stage by stage."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.lab.errors import Errors
from muntin.lab.stages import Addition, Binding, Fractions, Role, through_stages

Floats = NDArray[np.float64]


@dataclass(frozen=True, kw_only=True, slots=True)
class Procedure:
    """One load, washes with the buffer of the load, elutions with the buffer under test.

    Parameters
    ----------
    load, load_volume
        Protein concentration (mg/mL) and volume (µL) of the load.
    load_ph, load_salt
        pH and salt (mM) of load and washes.
    washes, wash_volume
        Number of washes (0 or more) and volume of each, µL.
    elutions, volume
        Number of elutions (1 or more) and volume of each, µL.
    hold_up, resin
        Liquid left in a well between stages and settled resin, µL.
    """

    load: float = 1.0
    load_volume: float = 300.0
    load_ph: float = 5.0
    load_salt: float = 30.0
    washes: int = 2
    wash_volume: float = 200.0
    elutions: int = 2
    volume: float = 200.0
    hold_up: float = 30.0
    resin: float = 40.0

    @property
    def roles(self) -> tuple[Role, ...]:
        """What each of the J stages is for."""
        washes: list[Role] = ["wash"] * self.washes
        elutions: list[Role] = ["elution"] * self.elutions
        return ("load", *washes, *elutions)

    @property
    def added(self) -> Floats:
        """Volume that each stage is meant to add, µL, shape (J,)."""
        volumes = {"load": self.load_volume, "wash": self.wash_volume, "elution": self.volume}
        return np.array([volumes[role] for role in self.roles])

    def run(
        self, binding: Binding, molar_mass: float, ph: Floats, salt: Floats, errors: Errors
    ) -> Fractions:
        """Take n wells through all stages.

        Parameters
        ----------
        binding
            Parts protein between liquid and resin.
        molar_mass
            Of the protein, kDa: mg/mL over kDa is mM.
        ph, salt
            Meant for the elution buffer of each well, shape (n,); salt in mM.
        errors
            For n wells and J stages, or `Errors.absent(J)`.
        """
        load_buffer = np.asarray(self.load_ph), np.asarray(self.load_salt)
        elution_buffer = ph + errors.ph, salt * errors.salt
        additions = []
        for j, (role, volume) in enumerate(zip(self.roles, self.added, strict=True)):
            buffer = elution_buffer if role == "elution" else load_buffer
            protein = self.load / molar_mass if role == "load" else 0.0
            given = volume * errors.volume[:, j]
            additions.append(
                Addition(role=role, volume=given, ph=buffer[0], salt=buffer[1], protein=protein)
            )
        hold_up, resin = self.hold_up * errors.hold_up, self.resin * errors.resin
        return through_stages(binding, additions, hold_up, resin)
