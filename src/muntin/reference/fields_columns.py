"""JSON fields of column runs."""

from __future__ import annotations

from muntin.reference.part import Part

CONFIRM = Part(
    ("confirm",),
    {
        "plans": "column plans on record, oldest first, as in columns/<plan>.toml",
        "plans[].<key>": "key of the record",
        "compared": "what came of the runs, an entry a response and run",
        "compared[].run": "number of the run",
        "compared[].place": "set point, edge, or far side of the window",
        "compared[].response": "the response; figures are in its unit",
        "compared[].predicted": "process mean that was predicted beforehand",
        "compared[].reading_low": "lower end of the predicted central 95 % of one reading, widened "
        "by the uncertainty that the reading states",
        "compared[].reading_high": "upper end",
        "compared[].reading": "reading of the column, or the limit where only that is known",
        "compared[].sd": "standard uncertainty that it states; 0 where none",
        "compared[].side": "-1 where the reading lies below the limit, 1 above; 0 for a reading",
        "compared[].verdict": "agrees, off by more than predicted, or only a limit is known",
        "compared[].difference": "column minus plate: reading less predicted process mean; null "
        "where only a limit is known",
        "compared[].low": "lower end of its 95 % interval",
        "compared[].high": "upper end",
        "compared[].meets": "whether the reading meets the target; null without one, or where the "
        "limit does not tell",
        "compared[].beside_shift": "what is left beside the shift that all runs share; a factor "
        "for a positive response, null where no shift is told",
        "compared[].beside_off": "whether that is more than predicted",
        "shifts": "what all runs of a response share, where two or more were read",
        "shifts[].response": "the response",
        "shifts[].runs": "runs that tell of it",
        "shifts[].ratio": "whether the figures are factors, as for a positive response",
        "shifts[].mean": "shift of columns against plates, in the response's unit or as a factor",
        "shifts[].low": "lower end of its 95 % interval",
        "shifts[].high": "upper end",
        "shifts[].plate": "by how much, up or down, a new plate may be off (95 %)",
        "shifts[].verdict": "none to be told, no more than a new plate, or more than plates differ",
        "left_out": "runs or readings left out with a reason",
        "left_out[].run": "the run",
        "left_out[].reason": "the reason",
        "awaited": "planned runs of which nothing counts yet",
        "notices": "what was noticed, in sentences",
        "cautions": "what a column does otherwise than a plate",
        "files": "files written; empty where nothing was planned",
    },
)
