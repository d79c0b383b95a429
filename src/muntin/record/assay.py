"""Assay: how plate reads become masses, and how sure each step is."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Literal

from muntin.record.faults import Fault, did_you_mean, number, quoted
from muntin.record.keys import Keys, Number, NumberOrText, Text, key
from muntin.record.responses import Response

_FILE = "study.toml"
_PRACTICE = "common practice, no source"
READ_COLUMNS = (
    "plate",
    "well",
    "fraction",
    "stage",
    "wavelength",
    "absorbance",
    "dilution",
    "volume_ul",
)
Recovery = Literal["collected_of_load", "freed_of_bound", "collected_of_bound"]


class AssayStage(Keys):
    """One stage: what is added to the wells, and the fraction that it leaves."""

    fraction: Text = key(says="name of the fraction in the reads", example="ft")
    stage: Literal["load", "wash", "elution", "strip"] = key(
        says='what the stage is for: "load", "wash", "elution" or "strip"; what runs through while '
        "loading is the fraction of a load",
        example="load",
    )
    volume_ul: Number = key(
        says="volume added to each well; a column named after the fraction, such as e1_ul, in a "
        "plate table stands for it well by well",
        unit="µL",
        example=300.0,
        gt=0,
        le=5000,
    )
    buffer: Text | None = key(
        None,
        says="name of its buffer; stages of one buffer share their blanks; the fraction's own "
        "where absent",
        example="load buffer",
    )
    blank_by: tuple[Text, ...] = key(
        (),
        says="columns of the plate tables in which a well and its blanks must agree, where each "
        "elution buffer has blanks of its own",
        example=["elution_ph"],
    )

    @property
    def liquid(self) -> str:
        """Name of the buffer whose blanks serve this stage."""
        return self.buffer or self.fraction


class Assay(Keys):
    """How reads become concentrations, masses and a recovery."""

    response: Text = key(
        "recovery", says="response that the recovery is given to", example="recovery"
    )
    recovery: Recovery = key(
        "collected_of_load",
        says='which recovery it is: "collected_of_load", eluates over load; "freed_of_bound", set '
        'free while eluting over bound after the load; "collected_of_bound", eluates over bound',
        example="collected_of_load",
    )
    stages: tuple[AssayStage, ...] = key((), says="the stages in their order, from the load on")
    load_fraction: Text = key(
        "load", says="name in the reads of samples of the load itself", example="load"
    )
    load_mg_ml: Number | None = key(
        None,
        says="load concentration, where it is not read on the plate",
        unit="mg/mL",
        example=1.0,
        gt=0,
    )
    load_cv: Number = key(
        0.02,
        says="relative standard uncertainty of the load beyond the noise of its reads "
        f"({_PRACTICE})",
        example=0.02,
        ge=0,
        lt=1,
    )
    extinction: Number = key(
        1.4,
        says=f"extinction at the protein's wavelength; 1.35 to 1.5 for antibodies ({_PRACTICE})",
        unit="mL/mg/cm",
        example=1.4,
        gt=0,
        le=20,
    )
    extinction_cv: Number = key(
        0.03,
        says=f"its relative standard uncertainty; cancels where the load is read too ({_PRACTICE})",
        example=0.03,
        ge=0,
        lt=1,
    )
    protein_nm: Number = key(
        280.0, says="wavelength of the protein", unit="nm", example=280.0, gt=190, le=1100
    )
    scatter_nm: tuple[Number, Number] = key(
        (320.0, 350.0), says="wavelengths at which only scatter is seen", unit="nm"
    )
    scatter: Literal["none", "subtract", "slope"] = key(
        "subtract",
        says='"subtract" takes the first scatter wavelength off as read; "slope" carries it to the '
        "protein's by the power law of both, where both stand clear of the noise",
        example="subtract",
    )
    path: Literal["auto", "geometry", "water_band"] = key(
        "auto",
        says='path length by "geometry" (read_ul over read_area_cm2), by the "water_band", or by '
        "the band where it was read",
        example="auto",
    )
    water_band_nm: tuple[Number, Number] = key(
        (900.0, 977.0), says="base and top of the water band", unit="nm"
    )
    water_band: Number = key(
        0.18,
        says="height of the water band of 1 cm; measure it in the same salt and solvent, which "
        f"shift it ({_PRACTICE})",
        unit="AU",
        example=0.18,
        gt=0,
        le=1,
    )
    read_ul: Number = key(
        200.0, says="volume in each well of the reading plate", unit="µL", gt=0, le=2000
    )
    read_area_cm2: Number = key(
        0.33,
        says=f"cross section of the wells of the reading plate ({_PRACTICE})",
        unit="cm2",
        gt=0,
        le=2,
    )
    path_cv: Number = key(
        0.01, says=f"relative standard uncertainty of each single path ({_PRACTICE})", ge=0, lt=1
    )
    path_shared_cv: Number = key(
        0.02,
        says="that of the band's reference or of the cross section, which all wells share "
        f"({_PRACTICE})",
        ge=0,
        lt=1,
    )
    linear_low: Number = key(
        0.05,
        says=f"net absorbance below which a reading is taken as censored ({_PRACTICE})",
        unit="AU",
        example=0.05,
        ge=0,
    )
    linear_high: Number = key(
        2.0,
        says=f"absorbance as read above which a reading is taken as censored ({_PRACTICE})",
        unit="AU",
        example=2.0,
        gt=0,
        le=6,
    )
    read_cv: Number = key(
        0.02, says=f"noise of a read relative to its net absorbance ({_PRACTICE})", ge=0, lt=1
    )
    read_floor: Number = key(
        0.002, says=f"noise of a read near zero ({_PRACTICE})", unit="AU", ge=0, le=0.5
    )
    blank_au: Number | None = key(
        None, says="blank, where no blank was read on a plate", unit="AU", example=0.05, ge=0, le=2
    )
    blank_sd: Number = key(
        0.004, says=f"standard deviation of single blanks ({_PRACTICE})", unit="AU", ge=0, le=0.5
    )
    blank_between_sd: Number = key(
        0.01,
        says="that between buffers, where the blank of another one stands for a missing one "
        f"({_PRACTICE})",
        unit="AU",
        ge=0,
        le=0.5,
    )
    volume_cv: Number = key(0.01, says=f"error of each volume added ({_PRACTICE})", ge=0, lt=1)
    weighing_cv: Number = key(0.003, says=f"error of a weighed volume ({_PRACTICE})", ge=0, lt=1)
    dilution_cv: Number = key(
        0.01, says=f"error of the factor of a diluted sample ({_PRACTICE})", ge=0, lt=1
    )
    hold_up_well_cv: Number = key(0.25, says=f"hold-up from well to well ({_PRACTICE})", ge=0, lt=1)
    hold_up_mean_cv: Number = key(
        0.10, says=f"mean hold-up against the entered one ({_PRACTICE})", ge=0, lt=1
    )
    resin_well_cv: Number = key(0.04, says=f"resin from well to well ({_PRACTICE})", ge=0, lt=1)
    resin_mean_cv: Number = key(
        0.05, says=f"mean resin against the entered one ({_PRACTICE})", ge=0, lt=1
    )
    closure_k: Number = key(
        3.0,
        says="a closure further from 1 than so many of its own standard uncertainties is flagged",
        example=3.0,
        gt=0,
        le=10,
    )
    bound_cv_most: Number = key(
        0.20,
        says="a bound mass less sure than this, relatively, makes no meaningful recovery "
        f"({_PRACTICE})",
        gt=0,
        lt=1,
    )
    recovery_most: Number = key(
        1.1, says=f"a recovery above this is flagged ({_PRACTICE})", gt=1, le=2
    )
    turbid_au: Number = key(
        0.05,
        says=f"net absorbance at the first scatter wavelength of a turbid sample ({_PRACTICE})",
        unit="AU",
        gt=0,
    )
    columns: dict[str, Text] = key(
        {},
        says="headings of your own in a table of reads, ours on the left: "
        + ", ".join(READ_COLUMNS),
        example={"well": "Position"},
    )

    @property
    def elutions(self) -> tuple[AssayStage, ...]:
        """The elution stages, in order."""
        return tuple(stage for stage in self.stages if stage.stage == "elution")

    @property
    def fractions(self) -> tuple[str, ...]:
        """Names of the stages' fractions, in order."""
        return tuple(stage.fraction for stage in self.stages)


class FixedWell(Keys):
    """What [fixed] tells of the wells, where [assay] is there."""

    resin_ul: Number = key(says="settled resin in a well", unit="µL", example=20.0, gt=0, le=2000)
    hold_up_ul: Number = key(
        says="liquid that stays in the bed after the spin and goes with the next stage; measure "
        "it, by weight or a tracer",
        unit="µL",
        example=25.0,
        ge=0,
        le=1000,
    )
    contact_minutes: Number | None = key(
        None, says="time of contact while loading", unit="min", example=60.0, gt=0
    )


def assay_faults(
    assay: Assay, responses: tuple[Response, ...], fixed: Mapping[str, NumberOrText]
) -> Iterator[Fault]:
    """Yield what is wrong between the keys of [assay], and between them and the study."""
    names = [response.name for response in responses]
    found = next((r for r in responses if r.name == assay.response), None)
    if names and found is None:
        problem = "is not a response"
        hint = did_you_mean(assay.response, names)
        yield _fault("response", quoted(assay.response), problem, hint)
    elif found is not None and found.kind != "fraction":
        yield _fault("response", quoted(assay.response), 'must be of the kind "fraction"')
    yield from _stage_faults(assay)
    yield from _number_faults(assay)
    for name in assay.columns:
        if name not in READ_COLUMNS:
            hint = did_you_mean(name, READ_COLUMNS)
            yield _fault("columns", quoted(name), "is not a column of reads", hint)
    yield from _fixed_faults(fixed)


def _stage_faults(assay: Assay) -> Iterator[Fault]:
    order = ("load", "wash", "elution", "strip")
    kinds = [stage.stage for stage in assay.stages]
    ranks = [order.index(kind) for kind in kinds]
    if ranks != sorted(ranks) or not {"load", "elution"} <= set(kinds):
        given = ", ".join(kinds) or "none"
        problem = "must be loads, then washes if any, then elutions, then strips if any; given:"
        yield _fault("stages", "", problem, allowed=given)
    seen: set[str] = {assay.load_fraction.casefold()}
    for stage in assay.stages:
        if not stage.fraction.strip() or stage.fraction.casefold() in seen:
            problem = "is empty, named twice, or the name of the load's own samples"
            yield _fault("stages, fraction", quoted(stage.fraction), problem)
        seen.add(stage.fraction.casefold())


def _number_faults(assay: Assay) -> Iterator[Fault]:
    if assay.linear_low >= assay.linear_high:
        yield _fault(
            "linear_low",
            number(assay.linear_low),
            "must lie below linear_high, which is",
            allowed=number(assay.linear_high),
        )
    wavelengths = [assay.protein_nm, *assay.scatter_nm, *assay.water_band_nm]
    if len(set(wavelengths)) < len(wavelengths):
        yield _fault("scatter_nm", "", "all wavelengths must differ from each other")


def _fixed_faults(fixed: Mapping[str, NumberOrText]) -> Iterator[Fault]:
    # pydantic speaks of its own model; the faults are those of toml_files, which needs no import
    # of this module.
    from muntin.record.toml_files import parse

    faults: list[Fault] = []
    parse(_InFixed, {"fixed": known_fixed(fixed)}, _FILE, faults)
    yield from faults


class _InFixed(Keys):
    fixed: FixedWell = key(says="what [fixed] tells of the wells")


def known_fixed(fixed: Mapping[str, NumberOrText]) -> dict[str, NumberOrText]:
    """Return the entries of [fixed] that reads need."""
    return {name: value for name, value in fixed.items() if name in FixedWell.model_fields}


def _fault(name: str, value: str, problem: str, hint: str = "", allowed: str = "") -> Fault:
    return Fault(
        file=_FILE,
        where=f"assay, {name}",
        value=value,
        problem=problem,
        allowed=allowed,
        hint=hint,
    )
