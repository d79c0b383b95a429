"""JSON fields of what was read, and of where a study stands."""

from __future__ import annotations

from muntin.reference.part import Part
from muntin.reference.tables import PROBABILITIES

FAULTS = "any command, exit code 2"
_AT_FACTOR = {"<factor>": "value of the factor, in its unit, or its choice"}
_SETTINGS = {
    "settings": "what the command was asked",
    "settings.surrogate": "gp, quadratic or stacked",
    "settings.seed": "seed; the same seed and input give the same numbers",
}
_ENGINE = {"settings.engine": "fast or nuts"}
_AIM = {"settings.aim": "edge, best or both"}

FAULT = Part(
    (FAULTS,),
    {
        "faults": "everything that is wrong with the input; nothing was written",
        "faults[].file": "file, as a path inside the study where it lies there",
        "faults[].problem": "what is wrong",
        "faults[].where": "row and well, or table and key; empty where the whole file is meant",
        "faults[].column": "column of the table",
        "faults[].value": "what stands there, as shown",
        "faults[].allowed": "what is allowed",
        "faults[].hint": "how to mend it",
        "faults[].text": "all of it in one line, as on the screen",
    },
)

STUDY = Part(
    ("check", "assess", "propose", "rehearse", "advise", "confirm", "report"),
    {
        "study": "what was read",
        "study.folder": "folder of the study, as given",
        "study.title": "its title",
        "study.plates": "plates that count",
        "study.void_plates": "plates that their notes make void",
        "study.wells": "wells that inform the model",
        "study.control_wells": "wells of other roles",
        "study.excluded_wells": "wells left out with a reason",
        "study.readings": "counts of readings by response",
        "study.readings.<response>.read": "readings that are values",
        "study.readings.<response>.awaited": "readings still awaited",
        "study.readings.<response>.excluded": "readings left out with a reason",
        "study.readings.<response>.censored": "readings such as <0.05",
        "study.notices": "what was noticed while reading, in sentences",
    },
)

CHECK = Part(
    ("check",),
    {
        "stocks": "which part of the range the stocks of [bench] cannot make; empty where none",
        "out": "table of the wells that was asked for; null without --out",
        "plans": "what is on record of plans and of how they were run",
        "plans.edits": "records of edited plans, as in plans/<plate>.edit.toml",
        "plans.edits[].<key>": "key of the record; those without a value are left out",
        "plans.run": "plates that were run against the plan they were offered",
        "plans.run[].plate": "the plate",
        "plans.run[].plan": "the plan that it differs least from",
        "plans.run[].changes": "how it differs, well by well",
        "plans.run[].changes[].kind": "changed, moved, left out or added",
        "plans.run[].changes[].was": "well, role and condition as planned; null where added",
        "plans.run[].changes[].now": "the same as run; null where left out",
        "columns": "column runs on record",
        "columns.planned": "runs that were planned",
        "columns.made": "runs that were made, left out ones too",
        "columns.notices": "what was noticed of them",
    },
)

_MODEL = {
    "nothing_run": "true while no judged response has been read",
    "provisional": "true while a judged response has no reading at all",
    "awaited": "those responses",
    "engine": "what fitted the surrogates: fast or nuts",
    "model": "the fits, by response",
    "model.<response>.shares.<surrogate>": "stacking weight of the surrogate",
    "model.<response>.effective_nodes.<surrogate>": "effective number of hyperparameter nodes",
    "model.<response>.pareto_k.<surrogate>": "Pareto k of their weights; above 0.7 is poor",
    "model.<response>.log_marginal.<surrogate>": "log marginal likelihood",
    "model.<response>.laplace_nodes.<surrogate>": "nodes used as Laplace's approximation",
    "model.<response>.sampling": "how the chains of the engine nuts went, by surrogate; else empty",
}
_CHAINS = {
    "sampler": "the sampler that drew",
    "passed": "whether the chains agree well enough",
    "chains": "number of chains",
    "draws": "draws kept of each chain",
    "r_hat": "largest R-hat",
    "bulk_ess": "smallest effective number of draws in the bulk",
    "tail_ess": "the same in the tails",
    "divergent": "draws that diverged",
    "unreliable_leave_one_out": "readings whose leave-one-out prediction cannot be relied on",
}
_SAMPLED = {
    f"model.<response>.sampling.<surrogate>.{name}": f"{says} (--engine nuts)"
    for name, says in _CHAINS.items()
}
_TOGETHER = {
    "together": "how the readings of one well go together, an entry for two responses",
    "together[].first": "one response",
    "together[].second": "the other",
    "together[].wells": "wells in which both were read",
    "together[].effective": "the same less what the fits use up",
    "together[].rho": "correlation of their noise, posterior mean",
    "together[].low": "lower end of its 95 % interval; null where too few wells tell",
    "together[].high": "upper end",
}
_CHECKS = {
    "checks": "the checks on the model",
    "checks[].name": "which check",
    "checks[].response": "response that it is about, empty for all",
    "checks[].passed": "whether it passed",
    "checks[].told": "whether the readings are enough to tell; where not, it counts as passed",
    "checks[].serious": "whether the window is not supported where it fails",
    "checks[].sentence": "what it found",
}
_WINDOW = {
    "window": "the predicted operating window; null before any reading",
    "window.name": "what it must be called",
    "window.supported": "whether the data support it; if not, it is not given",
    "window.unsupported": "the reasons why not",
    "window.required_probability": "probability that a condition must reach to lie in it",
    "window.judged_by": "which probability is judged: mean, well or kept",
    "window.judged": "responses that are judged together",
    "window.conditional_on": "what it is conditional on, from [fixed]",
    "window.conditional_on.<fixed>": "a key of [fixed]",
    "window.conditions": "conditions that were judged",
    "window.share": "share of the range inside the window",
    "window.wrong_share": "share of the range that may still be called wrongly",
    "window.set_point": "the condition of highest judged probability",
    "window.set_point.<factor>": "its value of the factor",
    "window.set_point.probability": "its judged probability",
    "window.ranges": "factor ranges that hold together, all inside; null where there are none",
    "window.ranges.<factor>": "lowest and highest value",
    "window.sides": "what lies beyond each side of the ranges",
    "window.sides[].factor": "factor of the side",
    "window.sides[].end": "low or high",
    "window.sides[].at": "the last level of the ranges",
    "window.sides[].beyond": "the next level, where a condition lies outside; null where the range "
    "ends",
    "window.sides[].response": "response that gives way first there",
    "window.sides[].probability": "its probability at the worst of these conditions",
    "window.sides[].fails": "low or high: the likelier way",
}

STANDING = Part(
    ("assess", "advise", "report"),
    {**_MODEL, **_SAMPLED, **_TOGETHER, **_CHECKS, **_WINDOW},
)

ASSESS = Part(
    ("assess",),
    {
        "settings.noise": "normal or student",
        "at": "what is known at the conditions of --at, a row a condition, its own columns first",
        **{f"at[].{name}": says for name, says in {**_AT_FACTOR, **PROBABILITIES}.items()},
        "at[].<column>": "another column of the table of conditions",
        "influence": "how much each factor moves each response (--influence)",
        "influence.negligible": "the size that counts as negligible; null where none was named",
        "influence.responses": "a row a factor, by response",
        "influence.responses.<response>[].factor": "the factor",
        "influence.responses.<response>[].first": "share of the variation that it explains by "
        "itself (Sobol' index)",
        "influence.responses.<response>[].first_low": "lower end of its 95 % interval",
        "influence.responses.<response>[].first_high": "upper end",
        "influence.responses.<response>[].total": "share with all its interactions",
        "influence.responses.<response>[].total_low": "lower end of its 95 % interval",
        "influence.responses.<response>[].total_high": "upper end",
        "influence.responses.<response>[].p_negligible": "probability that it moves the response "
        "by less than the negligible size; only where that is named",
        "files": "tables written (--out)",
        "draws": "files of draws written (--draws, --engine nuts)",
    },
)

SETTINGS = (
    Part(("assess", "propose", "rehearse", "advise", "report"), _SETTINGS),
    Part(("assess", "propose", "advise", "report"), _ENGINE),
    Part(("propose", "rehearse", "advise", "report"), _AIM),
)
