"""Wells of the virtual lab as inputs of a reduction: what is known of them, and the truth."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from muntin.assay.absorbance import Blanks, Optics
from muntin.assay.balance import Volumes
from muntin.assay.inputs import Inputs
from muntin.lab import ErrorSizes, Fractions, VirtualLab
from muntin.lab.errors import Errors
from muntin.lab.reads import PlateReads, read_fractions
from muntin.record.assay import Assay

LAB = VirtualLab()
SIZES = ErrorSizes()
STAGES = (("ft", "load"), ("w1", "wash"), ("w2", "wash"), ("e1", "elution"), ("e2", "elution"))


def assay(**given) -> Assay:
    """Settings that say of the lab's bench what is true of it."""
    volumes = dict(zip([name for name, _ in STAGES], LAB.procedure.added, strict=True))
    stages = [
        {"fraction": name, "stage": stage, "volume_ul": float(volumes[name])}
        for name, stage in STAGES
    ]
    known = {
        "extinction": LAB.reader.extinction,
        "extinction_cv": 0.0,
        "water_band": LAB.reader.water_band,
        "path_cv": SIZES.path_cv,
        "path_shared_cv": 0.0,
        "load_cv": SIZES.load_cv,
        "read_cv": SIZES.a280_cv,
        "read_floor": SIZES.a280_floor,
        "volume_cv": SIZES.volume_cv,
        "hold_up_well_cv": SIZES.hold_up_cv,
        "hold_up_mean_cv": 0.0,
        "resin_well_cv": SIZES.resin_cv,
        "resin_mean_cv": 0.0,
    }
    return Assay.model_validate({"stages": stages} | known | given)


@dataclass(frozen=True)
class Run:
    """Wells of a run, n of them on plates of `size`, and what was read of them."""

    fractions: Fractions
    reads: PlateReads
    resin: np.ndarray
    size: int

    def truth(self) -> dict[str, np.ndarray]:
        """The true quantities, shape (n,), masses in µg."""
        mass = LAB.molar_mass
        last_wash = 2
        bound = self.fractions.bound[:, 0] * mass
        freed = (self.fractions.bound[:, last_wash] - self.fractions.bound[:, -1]) * mass
        collected = self.fractions.amounts[:, 3:].sum(axis=1) * mass
        return {
            "loaded_ug": self.fractions.loaded * mass,
            "bound_ug": bound,
            "capacity_mg_ml": bound / self.resin,
            "log10_kp": np.log10(bound / self.resin / (self.fractions.liquid[:, 0] * mass)),
            "collected_of_load": collected / (self.fractions.loaded * mass),
            "freed_of_bound": freed / bound,
            "collected_of_bound": collected / bound,
            "closure": self._seen() / self.fractions.loaded,
        }

    def _seen(self) -> np.ndarray:
        """All that filtrates and the last hold-up hold, nmol; the lab strips nothing."""
        last = self.fractions.liquid[:, -1] * self.fractions.hold_up
        return self.fractions.amounts.sum(axis=1) + last

    def plates(self) -> Iterator[tuple[slice, Inputs]]:
        """The inputs of each plate, and its rows."""
        for start in range(0, len(self.resin), self.size):
            rows = slice(start, start + self.size)
            yield rows, plate_inputs(self.reads, rows)


def run(wells: int, size: int, seed: int, *, mean_sd: float = 0.0, mean_off: float = 0.0) -> Run:
    """Run wells; the mean hold-up of each plate is off by `mean_off`, and by draws of `mean_sd`."""
    rng = np.random.default_rng(seed)
    conditions = np.column_stack([rng.uniform(5.0, 6.5, wells), rng.uniform(120, 400, wells)])
    plates = np.repeat(np.arange(wells // size), size)
    errors = SIZES.draw(wells, len(STAGES), rng, plates.tolist())
    mean = 1.0 + mean_off + mean_sd * rng.standard_normal(wells // size)
    errors = replace(errors, hold_up=errors.hold_up * mean[plates])
    return _read(conditions, errors, size)


def exact(conditions) -> Run:
    """Run wells without any error."""
    conditions = np.asarray(conditions, dtype=float)
    none = Errors.absent(len(STAGES))
    same = {
        name: np.broadcast_to(getattr(none, name), (len(conditions), *tail))
        for name in none.__slots__
        for tail in [getattr(none, name).shape[1:]]
    }
    return _read(conditions, Errors(**same), len(conditions), ErrorSizes.none())


def _read(conditions, errors: Errors, size: int, sizes: ErrorSizes = SIZES) -> Run:
    fractions = LAB.fractions(conditions, errors)
    reads = read_fractions(fractions, LAB.procedure, LAB.molar_mass, LAB.reader, errors, sizes)
    return Run(fractions, reads, LAB.procedure.resin * errors.resin, size)


def plate_inputs(reads: PlateReads, rows: slice) -> Inputs:
    """What a bench knows of one plate: reads, its blank and load, nominal volumes."""
    a280 = reads.a280[rows]
    wells, stages = a280.shape
    absorbance = np.full((wells * stages, 3), np.nan)
    absorbance[:, 0] = a280.ravel()
    blank = reads.blank[rows][0]
    sd = np.zeros_like(absorbance)
    sd[:, 0] = SIZES.reading_sd(absorbance[:, 0] - blank)
    ones = np.ones(wells * stages)
    return Inputs(
        plate="plate-01",
        wells=tuple(f"A{i + 1}" for i in range(wells)),
        roles=("test",) * wells,
        samples=Optics(
            absorbance=absorbance,
            read_sd=sd,
            blank=np.zeros(wells * stages, dtype=int),
            band=(reads.a977 - reads.a900)[rows].ravel(),
            dilution=ones,
            scatter_dilution=ones,
        ),
        load=None,
        entered=float(reads.load[rows][0]),
        blanks=Blanks(
            names=("buffer",),
            value=np.array([[blank, np.nan, np.nan]]),
            kind_sd=np.array([[SIZES.blank_sd, 0.0, 0.0]]),
            weights=np.ones((1, 1, 3)),
            other_sd=np.zeros((1, 3)),
            borrowed=(False,),
            spread=np.zeros(1),
            count=np.ones(1, dtype=int),
        ),
        volumes=Volumes(
            added=np.tile(LAB.procedure.added, (wells, 1)),
            collected=np.full((wells, stages), np.nan),
            hold_up=np.full(wells, LAB.procedure.hold_up),
            resin=np.full(wells, LAB.procedure.resin),
        ),
        states=np.full((wells, stages), "read", dtype="<U7"),
        load_states=np.array([], dtype="<U7"),
    )
