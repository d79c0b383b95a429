"""JSON fields of reduced reads and of uptake curves."""

from __future__ import annotations

from muntin.reference.part import Part, under
from muntin.reference.tables import QUANTITIES

RECORD = "reductions/<plate>.json"
_SHARED = {
    "scale_error": "what the plate shares in its recovery, as one scale error (standard deviation)",
    "beyond_scale": "what it shares beyond that, in the recovery's unit",
    "shared_by": "the shared part by source, root mean square",
    "shared_by.<source>": "part of the source",
    "own_by": "what a well errs by alone, by source, root mean square",
    "own_by.<source>": "part of the source",
}
_FLAGS = {
    "flags": "what is odd; nothing is taken out",
    "flags[].kind": "which flag",
    "flags[].well": "well; empty for the whole plate",
    "flags[].fraction": "fraction",
    "flags[].text": "why it is raised",
}
_ENDS = {
    "_sd": ": standard uncertainty by what the well errs by alone",
    "_shared_sd": ": standard uncertainty by what the plate shares",
}

REDUCE = Part(
    ("reduce",),
    {
        "recovery": "which recovery was given, as in [assay]",
        "response": "response that it was given to",
        "reads": "number of reads",
        "plates": "the plates",
        "plates[].plate": "the plate",
        "plates[].load_mg_ml": "concentration of the load, mg/mL",
        "plates[].shared": "errors of its recovery",
        **under("plates[].shared", _SHARED),
        **{f"plates[].{name}": says for name, says in _FLAGS.items()},
        "plates[].wells": "its wells",
        "plates[].wells[].well": "place",
        "plates[].wells[].role": "role",
        **{f"plates[].wells[].{name}": says for name, says in QUANTITIES.items()},
        **{
            f"plates[].wells[].{name}{end}": f"{name}{says}"
            for name in QUANTITIES
            for end, says in _ENDS.items()
        },
        "plates[].wells[].given": "the reading as written to results/, in the response's unit",
        "plates[].wells[].given_sd": "its standard uncertainty as written",
        "plates[].wells[].not_given": "why it was not written; empty where it was",
        "scale_error": "scale error of all plates together, for the line in [[responses]]",
        "notices": "what was noticed, in sentences",
        "files": "files written",
    },
)

REDUCTION = Part(
    (RECORD,),
    {
        "plate": "the plate",
        "response": "response that the recovery was given to",
        "recovery": "which recovery it is",
        "method": "how uncertainties were computed",
        "settings": "keys that the numbers rest on",
        "settings.assay.<assay>": "key of [assay]",
        "settings.fixed.<fixed>": "key of [fixed]",
        "load": "the load",
        "load.mg_ml": "its concentration, mg/mL",
        "load.absorbance": "its reads, AU; these only where it was read",
        "load.dilution": "their dilutions",
        "load.path_cm": "their path lengths, cm",
        "load.blank": "buffer of their blank",
        "load.states": "read, low or high of the linear range",
        "blanks": "the blanks, a row a buffer",
        "blanks[].buffer": "the buffer",
        "blanks[].absorbance": "mean, AU, by wavelength",
        "blanks[].standard_uncertainty": "of that mean, AU",
        "blanks[].reads": "number of reads",
        "blanks[].borrowed": "whether it is that of another buffer",
        "shared": "errors of the recovery",
        **under("shared", _SHARED),
        **_FLAGS,
        "not_given": "wells that got no reading, and why",
        "not_given.<well>": "why",
        "monte_carlo": "the check by draws; null without --monte-carlo",
        "monte_carlo.draws": "number of draws",
        "monte_carlo.recovery": "which recovery",
        "monte_carlo.wells": "the wells, in order",
        "monte_carlo.mean": "mean by well",
        "monte_carlo.standard_uncertainty": "standard uncertainty by well",
        "monte_carlo.own_standard_uncertainty": "the same of what a well errs by alone",
        "monte_carlo.interval_95": "central 95 % by well",
        "notices": "what was noticed",
        "inputs": "SHA-256 of each input file",
        "inputs.<file>": "SHA-256 of the file",
        "versions": "versions that the numbers depend on",
        "versions.<package>": "version of a package or of python, or the kind of processor",
        "reads": "SHA-256 of each file of reads",
        "reads.<file>": "SHA-256 of the file",
    },
)

_INTERVAL = {"mean": "mean", "median": "median", "low": "lower end of the central 95 %"}
_INTERVAL |= {"high": "upper end of the central 95 %"}


def _told(path: str, says: str) -> dict[str, str]:
    return {path: says, **under(path, _INTERVAL)}


UPTAKE = Part(
    ("uptake",),
    {
        "settings": "what the command was asked",
        "settings.planned_min": "planned contact time, min; null where there is none",
        "settings.phase_ratio": "liquid over settled resin, mL/mL",
        "priors": "priors, log-normal",
        "priors.<prior>.median": "median",
        "priors.<prior>.log_sd": "standard deviation of the natural logarithm",
        "curves": "the curves",
        "curves[].name": "name of the curve",
        "curves[].file": "its table",
        "curves[].readings": "number of readings",
        "curves[].times_min": "times that were read, min",
        "curves[].offered": "protein offered, mg/mL resin; null where not known",
        **_told("curves[].equilibrium", "load at equilibrium, mg/mL resin"),
        **_told("curves[].t90_min", "time to 90 % of equilibrium, min"),
        **_told("curves[].t95_min", "time to 95 % of equilibrium, min"),
        "curves[].planned": "what is known at the planned time; null where there is none",
        "curves[].planned.minutes": "that time, min",
        **_told("curves[].planned.load", "load then, mg/mL resin"),
        **_told("curves[].planned.share_of_equilibrium", "the same as a share of equilibrium"),
        "curves[].planned.gain_of_10_per_cent_longer": "share by which 10 % more time raises it",
        "curves[].noise_share": "noise of a reading, as a share of the load at the last time",
        "curves[].laws": "the laws that were weighed",
        "curves[].laws[].name": "the law",
        "curves[].laws[].says": "what it assumes",
        "curves[].laws[].source": "where it is from",
        "curves[].laws[].weight": "its weight",
        "curves[].laws[].log_evidence": "its log evidence",
        **_told("curves[].laws[].capacity", "capacity, mg/mL resin"),
        **_told("curves[].laws[].equilibrium", "load at equilibrium, mg/mL resin"),
        "curves[].laws[].rate": "what its rate is",
        **_told("curves[].laws[].rate_per_min", "the rate, 1/min"),
        **_told("curves[].laws[].t90_min", "time to 90 % of equilibrium, min"),
        **_told("curves[].laws[].t95_min", "time to 95 % of equilibrium, min"),
        **_told("curves[].laws[].load_planned", "load at the planned time; null without one"),
        "curves[].laws[].noise_share": "noise of a reading under this law",
        "curves[].remarks": "what to know before the numbers are used",
        "curves[].remarks[].kind": "which remark",
        "curves[].remarks[].loud": "whether the numbers must not be used without it",
        "curves[].remarks[].sentence": "the remark in words",
        "curves[].notices": "what was noticed while reading",
        "files": "figures written",
    },
)
