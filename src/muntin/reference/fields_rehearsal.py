"""JSON fields of a rehearsal."""

from __future__ import annotations

from muntin.reference.part import Part

_SPENT = {
    "tests": "test wells",
    "plates": "plates",
    "wells": "wells of all roles",
    "mg": "protein, mg; null where not known",
}

REHEARSE = Part(
    ("rehearse",),
    {
        "settings.plates": "test wells of each plate to come",
        "settings.series": "plate series that were played",
        "settings.truths": "where truths were drawn from: posterior, lab or prior",
        "settings.nodes": "hyperparameter nodes of a refit",
        "stop": "the stop rule",
        "stop.wrong_share": "its limit of the share called wrongly",
        "stop.best_probability": "its probability of the set point",
        "stop.changed_because": "why it differs from the one on record",
        "stop.assumed": "whether it is an example, since study.toml has none",
        "to_stop": "what each design takes to reach the rule, a row a design",
        "to_stop[].design": "the design",
        "to_stop[].planned_plates": "plates that it may take",
        "to_stop[].planned_tests": "test wells that it may take",
        "to_stop[].series": "series",
        "to_stop[].reached": "of these, how many reach the rule",
        "to_stop[].wrong": "share of the range truly called wrongly then, mean; null where none do",
        **{
            f"to_stop[].{name}_{end}": f"{says}: what {share} of all series stay within; null "
            "where fewer get there"
            for name, says in _SPENT.items()
            for end, share in (("half", "half"), ("most", "nine in ten"))
        },
        "after": "what is called wrongly after each plate, a row a design and plate",
        "after[].design": "the design",
        "after[].plate": "plates run; 0 is today",
        "after[].tests": "test wells by then",
        "after[].wells": "wells of all roles by then",
        "after[].mg": "protein by then, mg",
        "after[].wrong": "share of the range truly called wrongly, mean",
        "after[].wrong_se": "standard error of that mean",
        "after[].wrong_half": "what half of the series stay within",
        "after[].wrong_most": "what nine in ten of the series stay within",
        "after[].expected": "mean of the share that the tool itself says",
        "against": "the rivals' wrong share less that of plates chosen one by one",
        "against[].design": "the rival",
        "against[].series": "series that both played",
        "against[].difference": "mean difference",
        "against[].se": "its standard error",
        "taken_up": "series that an earlier start had played",
        "notices": "what was noticed, in sentences",
        "verdict": "the verdict in sentences, that on the plan first",
    },
)
