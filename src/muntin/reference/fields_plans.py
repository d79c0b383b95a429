"""JSON fields of plans, sheets and advice."""

from __future__ import annotations

from muntin.reference.part import Part, under

_VERDICT = {
    "verdict": "go on, go on with fewer, or stop",
    "verdict.word": "go on, go on with fewer, stop, or none where nothing can be said",
    "verdict.because": "met, enough, more are needed, out of reach, nothing gained; or no rule, no "
    "reading, awaited, unsupported",
    "verdict.wells": "fewest test wells that are expected to meet the stop rule; 0 where it is met "
    "today, null where none are",
    "verdict.sentence": "the verdict in words",
    "verdict.stop_rule": "the stop rule that holds",
    "verdict.stop_rule.wrong_share": "its limit of the share called wrongly",
    "verdict.stop_rule.best_probability": "its probability of the set point",
    "verdict.stop_rule.notice": "what there is to say of it",
    "verdict.stop_rule.recorded": "rules on record, as in stop-rule.jsonl",
    "verdict.stop_rule.recorded[].date": "day on which it was first seen",
    "verdict.stop_rule.recorded[].wrong_share": "its limit then",
    "verdict.stop_rule.recorded[].best_probability": "its probability then",
    "verdict.stop_rule.recorded[].wells_read": "wells that had been read by then",
    "verdict.stop_rule.recorded[].reason": "why it was changed",
}
_CHANGED = {"well": "its place", "role": "its role", "reason": "its reason in the plan"}
_CHANGED |= {"condition": "values of the factors, in their order; null for a control"}
_EDIT = {
    "edit": "what was changed in a plan (propose --keep); null where none was kept",
    "edit.kept": "the file that was kept",
    "edit.offered": "the plan on record that it differs least from; null where there is none",
    "edit.offered_wells": "test wells of that plan",
    "edit.offered_wrong_share": "share that may still be called wrongly after that plan",
    "edit.changes": "the changes, well by well",
    "edit.changes[].kind": "changed, moved, left out, added or chosen",
    "edit.changes[].was": "the well as offered; null where there was none",
    **under("edit.changes[].was", _CHANGED),
    "edit.changes[].now": "the well as it is; null where there is none",
    **under("edit.changes[].now", _CHANGED),
    "edit.changes[].because": "why, in the user's words",
    "edit.changes[].p_was": "judged probability of the condition offered",
    "edit.changes[].p_now": "judged probability of the condition now",
}

PLAN = Part(
    ("propose", "advise", "report"),
    {
        "settings.wells": "test wells asked for",
        "plan": "the next plate",
        **under(
            "plan",
            {
                "plate": "its name",
                "aim": "edge, best or both",
                "seed": "seed of choice and layout",
                "protein_mg": "protein that it takes, mg; null where the study does not say",
                "notices": "what was noticed while planning, in sentences",
                "wells": "the wells, in the order of the plate",
                "wells[].well": "its place",
                "wells[].role": "test, bridge, or that of a control",
                "wells[].<factor>": "what to set it to; null for a control",
                "wells[].p_now": "judged probability of the condition today",
                "wells[].reason": "why it is there",
                "wells[].<column>": "another column of a plan that was kept",
                "forecast": "what numbers of test wells are expected to bring, a row a number",
                "forecast[].wells": "test wells; 0 is no further plate",
                "forecast[].plates": "plates that they take",
                "forecast[].mg": "protein that they take, mg",
                "forecast[].assays": "assay slots that they take, where [plan] tells",
                "forecast[].days": "days that they take, where [plan] tells",
                "forecast[].wrong_share": "share of the range that may still be called wrongly",
                "forecast[].set_point": "expected probability of the set point; null where the "
                "data do not support the window",
                "forecast[].reached": "chance that the set point reaches what is asked of it; "
                "null likewise",
                **_VERDICT,
                **_EDIT,
            },
        ),
    },
)

PROPOSE = Part(
    ("propose",),
    {
        "files": "what was written",
        "files.plan": "the plan's table",
        "files.record": "the record of what was changed (--keep)",
        "files.remark": "what to know of its name",
    },
)

PREPARE = Part(
    ("prepare",),
    {
        "plate": "the plate",
        "plan": "the plan that the sheets are of",
        "plan.file": "its table",
        "plan.sha256": "SHA-256 of it",
        "wells": "its wells",
        "wells[].well": "its place",
        "wells[].role": "its role",
        "wells[].<factor>": "what to set it to; null for a control",
        "conditions": "its conditions, as in sheets/<plan>/conditions.csv",
        "conditions[].condition": "number, as on the map",
        "conditions[].<factor>": "value of the factor",
        "conditions[].count": "wells with it",
        "conditions[].wells": "their places",
        "recipes": "what the liquid of each condition is mixed from",
        "recipes[].condition": "values of the factors that the liquid sets",
        "recipes[].condition.<factor>": "value of the factor",
        "recipes[].shares": "share of the volume by stock",
        "recipes[].shares.<stock>": "share of the stock",
        "recipes[].draw_ul": "µL drawn for a well by stock; null without volume or pipette",
        "recipes[].draw_ul.<stock>": "µL of the stock",
        "recipes[].made": "what the mix comes out as",
        "recipes[].made.<factor>": "value of the factor",
        "recipes[].remarks": "what to know of it",
        "recipes[].wells": "wells with this liquid",
        "bottles": "what bottles are made from",
        "bottles[].bottle": "the bottle",
        "bottles[].shares": "share of the volume by stock",
        "bottles[].shares.<stock>": "share of the stock",
        "bottles[].remarks": "what to know of it",
        "transfers": "the draws, in the order of work",
        "transfers[].stock": "what is drawn",
        "transfers[].well": "where it goes",
        "transfers[].draw_ul": "how much, µL",
        "totals": "what has to be at hand",
        "totals[].stock": "the stock",
        "totals[].wells": "wells that get of it",
        "totals[].drawn_ul": "sum of its draws, µL",
        "totals[].dead_ul": "what stays in the trough, µL; null where not known",
        "totals[].needed_ul": "have at least this, µL",
        "protein": "protein of the plan; null without [protein]",
        "protein.needed_mg": "what its wells take, mg",
        "protein.left_mg": "what may still be used before it is run, the reserve kept back, mg",
        "protein.measured_mg": "what the draws hold, mg; null without protein_mg_per_ml",
        "protein.dead_mg": "what stays in the trough, mg",
        "controls": "levels of bottles that only controls ask for, in sentences",
        "buffers": "what to know of the buffers, in sentences",
        "not_in_the_sheets": "what cannot be told, and the key that it needs",
        "cautions": "what to keep in mind",
        "files": "what was written",
        "files.folder": "folder of the sheets",
        "files.names": "files in it",
        "files.remark": "what they replace",
    },
)
