"""JSON fields of what is handed over of a window."""

from __future__ import annotations

from muntin.reference.part import Part, under

_BOX = {
    "ranges.<factor>": "lowest and highest value",
    "ranges": "the ranges, by factor",
    "least": "lowest judged probability in them",
    "least_at.<factor>": "its value of the factor",
    "least_at": "the condition where it is lowest",
    "assurance": "probability that what is required holds at all of their conditions at once: that "
    "the share of new wells that pass reaches it, or, judged by the mean, that the mean passes",
    "mean_everywhere": "probability that the process mean passes at all of them at once",
    "share": "share of the whole range that they hold",
    "conditions": "conditions in them that were judged",
    "every": "whether these are all of their bench steps",
}
_CONDITION = {"condition": "the condition", "condition.<factor>": "its value of the factor"}

HANDOVER = Part(
    ("assess", "report"),
    {
        "handover": "what can be handed over of the window; null before any reading, and where the "
        "data do not support a window",
        "handover.setpoint": "the condition of highest judged probability",
        "handover.setpoint.<factor>": "its value of the factor",
        "handover.probability": "its judged probability",
        "handover.required": "probability that a condition must reach",
        "handover.judged_by": "which probability is judged: mean, well or kept",
        "handover.asked_assurance": "assurance asked of the narrower ranges, all at once",
        "handover.draws": "joint posterior draws that assurance and intervals rest on",
        "handover.seed": "their seed",
        "handover.sentence": "set point and probability in words",
        "handover.box": "the largest ranges that hold the set point and of which every condition "
        "reaches the required probability; null where the set point does not",
        **under("handover.box", _BOX),
        "handover.larger": "larger ranges that leave the set point out; null where there are none",
        **under("handover.larger", _BOX),
        "handover.assured": "the largest ranges inside box whose assurance reaches what is asked; "
        "null where none do",
        **under("handover.assured", _BOX),
        "handover.margins": "how far the edge is from the set point, a row a factor and side",
        "handover.margins[].factor": "factor that is moved, the others held",
        "handover.margins[].end": "low or high",
        "handover.margins[].edge": "where the required probability is crossed, in its unit; null "
        "where the range ends first",
        "handover.margins[].distance": "from the set point to it",
        "handover.margins[].end_of_range": "where the range ends on that side",
        "handover.margins[].limited": "whether a limit of the study ends it",
        "handover.corners": "corners of the set point's tolerance, worst first",
        **under("handover.corners[]", _CONDITION),
        "handover.corners[].p_well": "probability that a new well passes there",
        "handover.corners[].p_mean": "probability that the process mean passes there",
        "handover.edge": "conditions on the edge of the window",
        "handover.edge[].<factor>": "its value of the factor",
        "handover.edge[].factor": "factor that crosses the edge there",
        "handover.edge[].end": "low or high: which end of the window it is",
        "handover.edge[].low": "lower end of the edge's 95 % interval; null beyond the range",
        "handover.edge[].high": "upper end",
        "handover.edge[].found": "share of draws that have their edge between",
        "handover.optimism": "what a repeat is expected to bring",
        "handover.optimism.probability": "judged probability of the set point",
        "handover.optimism.low": "lower end of the central 95 % of the share of new wells that "
        "pass there",
        "handover.optimism.high": "upper end",
        "handover.optimism.wells": "wells of the repeat that is proposed",
        "handover.optimism.expected_passes": "how many of them are expected to pass",
        "handover.optimism.readings": "what a new well there is expected to read, by response",
        "handover.optimism.readings[].response": "the response",
        "handover.optimism.readings[].mean": "mean, in its unit",
        "handover.optimism.readings[].low": "lower end of the central 95 %",
        "handover.optimism.readings[].high": "upper end",
        "handover.optimism.best_run": "the wells that looked best, by response",
        "handover.optimism.best_run[].response": "the response",
        "handover.optimism.best_run[].plate": "plate of the well",
        "handover.optimism.best_run[].well": "the well",
        **under("handover.optimism.best_run[]", _CONDITION),
        "handover.optimism.best_run[].read": "its reading",
        "handover.optimism.best_run[].expected": "posterior mean of the process there",
        "handover.optimism.best_run[].low": "lower end of the central 95 % of a new reading there",
        "handover.optimism.best_run[].high": "upper end",
        "handover.optimism.best_run[].drop": "what a repeat is expected to lose of the reading",
    },
)
