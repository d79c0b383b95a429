"""Columns of the tables that are read and written: the one place where each is explained."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass


@dataclass(frozen=True, kw_only=True)
class Sheet:
    """One table: its file, what stands in it, and its columns with what each holds.

    <factor>, <response> and so on stand for the names of the study.
    """

    file: str
    says: str
    columns: Mapping[str, str]


_WELL = "place on the plate: A1 or A01"
_SD = "standard uncertainty of that reading, in the response's unit"
_READING = (
    "the reading, in the response's unit; empty while it is awaited, <0.05 or >2.5 where no more "
    "is known of it"
)
_OUT = "a reason in words leaves the well out and keeps it on record"
_OWN_OUT = "a reason in words leaves that one reading out and keeps it on record"
_ROLE = (
    "test (also where empty), bridge and reference inform the model; blank, load, no_resin and "
    "water do not"
)

_INPUTS = (
    Sheet(
        file="plates/<plate>.csv",
        says="what was run and measured, a row a well; never rewritten",
        columns={
            "well": _WELL,
            "role": _ROLE,
            "plate": "if there, the name of the file",
            "<factor>": "what the well was set to, in the factor's unit",
            "<factor>_measured": "what was measured there; the model uses it, the layout does not",
            "<response>": _READING,
            "<response>_sd": _SD,
            "exclude": _OUT,
            "<response>_exclude": _OWN_OUT,
            "p_now": "from the plan; not read",
            "reason": "from the plan; not read",
            "<column>": "any other column passes through with a notice; by in [[shared_errors]] "
            "may name it",
        },
    ),
    Sheet(
        file="results/<name>.csv",
        says="readings that come later, joined by plate and well; reduce writes "
        "reduced-<plate>.csv",
        columns={
            "plate": "plate that was run; 1 or plate 1 will do for plate-01",
            "well": _WELL,
            "<response>": _READING,
            "<response>_sd": _SD,
            "<response>_exclude": _OWN_OUT,
        },
    ),
    Sheet(
        file="stocks/<plate>.csv",
        says="what the prepared stocks of a plate measured",
        columns={
            "factor": "factor that the stock sets",
            "target": "value it was made for, in the factor's unit",
            "measured": "value it measured; empty where it was not measured",
            "bottle": "the bottle of [bench] that it is, as its name stands on the sheets: wells "
            "blended from it follow; empty where it is the liquid of all wells with that target",
            "lot": "lot of the stock, if you like",
            "by": "who measured it, if you like",
        },
    ),
    Sheet(
        file="uptake/<curve>.csv",
        says="one uptake curve, a row a reading",
        columns={
            "time_min": "contact time, min",
            "load": "bound protein, mg/mL resin; or give liquid",
            "liquid": "protein left in the liquid, mg/mL; needs feed_mg_per_ml and phase_ratio",
            "sd": "standard uncertainty of the reading, in its unit",
            "exclude": "a reason in words leaves the reading out",
        },
    ),
    Sheet(
        file="READS",
        says="plate reads as one tidy table, or a folder of tables and of 8 x 12 or 16 x 24 grids; "
        "reduce keeps them as reductions/<plate>-reads.csv",
        columns={
            "plate": "plate that was read; may be absent where the study has one",
            "well": _WELL,
            "fraction": "fraction of [[assay.stages]], or the load",
            "stage": "load, wash, elution or strip; told by the fraction where absent",
            "wavelength": "nm",
            "absorbance": "AU as read; over, or >3.5, is more than the reader can tell",
            "dilution": "5 or 1:5 for a sample diluted five times; 1 where empty",
            "volume_ul": "volume collected, weighed, µL; that of the stage where empty",
        },
    ),
    Sheet(
        file="columns/<column>.csv",
        says="column runs that were made, a row a run; never pooled with wells",
        columns={
            "run": "number of the planned run",
            "<factor>": "what it was run at, within half a step of the plan; may be absent",
            "<response>": _READING,
            "<response>_sd": _SD,
            "exclude": "a reason in words leaves the run out and keeps it on record",
            "<response>_exclude": _OWN_OUT,
            "place": "from the plan; not read",
            "protein_mg": "from the plan; not read",
        },
    ),
    Sheet(
        file="CONDITIONS",
        says="conditions to judge (assess --at), a row a condition",
        columns={
            "<factor>": "its value, in the factor's unit, or a choice",
            "<column>": "any other column is kept beside what is known",
        },
    ),
)

_PROBABILITIES = {
    "<response>_mean": "process mean, in the response's unit",
    "<response>_low": "lower end of the central 95 % interval of the process mean",
    "<response>_high": "upper end of the same interval",
    "<response>_p_mean": "probability that the process mean meets its targets",
    "<response>_p_well": "probability that one new well on a new plate meets its targets",
    "p_mean": "probability that the process means meet all targets together",
    "p_well": "probability that one new well on a new plate meets all targets together",
    "p_kept": "the same while the factors wander evenly within kept_within; where one is given",
}

_QUANTITIES = {
    "loaded_ug": "protein loaded, µg",
    "bound_ug": "protein bound after the load, µg",
    "collected_ug": "protein in what was collected of the elutions, µg",
    "freed_ug": "protein that the resin gave away while eluting, µg",
    "capacity_mg_ml": "bound protein over settled resin, mg/mL",
    "log10_kp": "decimal logarithm of the partition coefficient: capacity over what is left in the "
    "liquid",
    "collected_of_load": "recovery: eluates over load",
    "freed_of_bound": "recovery: set free while eluting, over bound after the load",
    "collected_of_bound": "recovery: eluates over bound after the load",
    "closure": "all that was found, the last hold-up included, over the load",
}

_OUTPUTS = (
    Sheet(
        file="plans/<plate>.csv",
        says="a plan, a row a well, written by propose and advise; fill it in and move it to "
        "plates/",
        columns={
            "well": _WELL,
            "role": _ROLE,
            "<factor>": "what to set the well to, in the factor's unit",
            "<column>": "columns that [[shared_errors]] need, and your own from propose --keep",
            "<response>": "empty, for the reading",
            "exclude": "with propose --keep: a reason keeps the condition from being chosen again",
            "p_now": "judged probability of the condition on the day of planning",
            "reason": "why the well is there, in one sentence",
        },
    ),
    Sheet(
        file="columns/<plan>.csv",
        says="planned column runs, written by confirm; fill it in and save it as "
        "columns/<column>.csv",
        columns={
            "run": "number of the run, over all plans",
            "place": "set point, edge, or far side",
            "<factor>": "what to run it at, in the factor's unit",
            "protein_mg": "protein that it takes, mg",
            "<response>": "empty, for the reading",
            "exclude": "empty, for a reason to leave it out",
        },
    ),
    Sheet(
        file="OUT",
        says="what is known at conditions (assess --out, muntin.assess(study).at)",
        columns={"<factor>": "the condition, in the factor's unit", **_PROBABILITIES},
    ),
    Sheet(
        file="WELLS",
        says="the wells as they were read (check --out)",
        columns={
            "plate": "the plate",
            "well": "place on the plate",
            "role": _ROLE,
            "<factor>": "the value that the model uses, in the factor's unit: what the well "
            "measured, or what its stocks and bottles make of it, or the target",
            "<factor>_target": "what the well was set to",
            "<response>": "the reading; of a censored one its limit; empty while awaited or left "
            "out",
            "<response>_sd": _SD,
            "<response>_state": "read, censored, awaited, excluded, or none for a control without",
            "exclude": "why the well was left out",
        },
    ),
    Sheet(
        file="reductions/<plate>-masses.csv",
        says="concentrations, masses and quantities of a plate, a row a well, written by reduce",
        columns={
            "well": _WELL,
            "role": "as in the plate table",
            "<fraction>_state": "read, low or high of the linear range, or missing",
            "<fraction>_mg_ml": "protein in the liquid, mg/mL",
            "<fraction>_collected_ul": "volume collected, µL",
            "<fraction>_ug": "protein collected, µg",
            "<fraction>_hold_up_after_ul": "liquid that stayed in the well, µL",
            **_QUANTITIES,
            "<quantity>_sd": "standard uncertainty by what the well errs by alone",
            "<quantity>_shared_sd": "standard uncertainty by what the plate shares",
            "flags": "what is odd about the well; nothing is taken out",
        },
    ),
    Sheet(
        file="sheets/<plan>/conditions.csv",
        says="the conditions of a plan, numbered as on the plate map",
        columns={
            "condition": "its number",
            "<factor>": "its value, in the factor's unit",
            "count": "wells with this condition",
            "wells": "their places",
        },
    ),
    Sheet(
        file="sheets/<plan>/recipes.csv",
        says="what the liquid of each condition is mixed from, a row a stock",
        columns={
            "<factor>": "value of a factor that the liquid sets",
            "stock": "stock or bottle",
            "ml_per_l": "mL of it in a litre",
            "ul_per_well": "µL of it in a well, whole pipette steps",
            "count": "wells with this liquid",
            "wells": "their places",
        },
    ),
    Sheet(
        file="sheets/<plan>/bottles.csv",
        says="what the bottles are made from, a row a stock",
        columns={
            "bottle": "the bottle",
            "stock": "what goes into it",
            "ml_per_l": "mL of it in a litre",
            "ul": "µL of it for what has to be there",
        },
    ),
    Sheet(
        file="sheets/<plan>/stocks.csv",
        says="a form for what the bottles measured, a row a factor of a bottle; filled in, it is "
        "saved as stocks/<plate>.csv",
        columns={
            "bottle": "what stands on the bottle",
            "factor": "what it holds",
            "target": "how much of it, in the factor's unit",
            "measured": "empty, to be filled in",
        },
    ),
    Sheet(
        file="sheets/<plan>/transfers.csv",
        says="the draws in the order of work, a row a draw",
        columns={
            "stock": "what is drawn; load goes into the resin plate, all else into a mixing plate",
            "well": "where it goes",
            "draw_ul": "how much, µL",
        },
    ),
    Sheet(
        file="sheets/<plan>/totals.csv",
        says="what has to be at hand, a row a stock",
        columns={
            "stock": "the stock",
            "wells": "wells that get of it",
            "drawn_ul": "sum of its draws, µL",
            "dead_ul": "what stays in the trough, µL",
            "needed_ul": "have at least this, µL",
        },
    ),
)

QUANTITIES = _QUANTITIES
PROBABILITIES = _PROBABILITIES
SHEETS = (*_INPUTS, *_OUTPUTS)
