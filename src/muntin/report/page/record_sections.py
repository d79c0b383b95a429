"""Sections on cautions, and on what the numbers came from."""

from __future__ import annotations

from muntin.record.stop_rule import rule_text
from muntin.report.edit_record import plans_on_record
from muntin.report.page.basis import Basis
from muntin.report.page.blocks import Section, Table
from muntin.report.text import read_lines
from muntin.surrogate.priors import LogNormal
from muntin.window.coded import priors_for

_PRIORS = {
    "process_sd": "process sd",
    "curvature_sd": "sd of square coefficients",
    "length_scale": "length scale",
    "noise_sd": "noise sd of a reading",
    "scale_error": "sd of a shared scale error",
    "inside_error": "sd of a shared inside error",
    "ceiling_gap": "gap of the ceiling below 1",
}


def cautions_section(basis: Basis) -> Section:
    """Return what to keep in mind, as every screen has it."""
    return Section(
        name="cautions",
        title="Keep in mind",
        items=tuple(basis.facts["cautions"]),
    )


def data_section(basis: Basis) -> Section:
    """Return what was read, what was noted, and how plans and plates differ."""
    lines, _ = plans_on_record(basis.study)
    # They have a section of their own.
    changed = (basis.study.changes.notice, basis.study.stopping.notice)
    items = [*(said for said in basis.study.notices if said not in changed), *lines]
    return Section(
        name="data",
        title="What was read",
        says=tuple(read_lines(basis.study)),
        items=tuple(items),
    )


def changes_section(basis: Basis) -> Section:
    """Return what was changed: what nobody gave a reason for yet, and what was explained, by whom,
    when and why.
    """
    changes = basis.facts["changes"]
    since, said, left_out = (changes[name] for name in ("since", "said", "left_out"))
    open_ = f"CHANGED since {since}, and no reason was given: {'; '.join(said)}."
    explained = Table(
        caption="Changes that were explained",
        head=("date", "who", "why", "what was changed"),
        rows=tuple(
            (one["time"][:10], one["by"], one["because"], "; ".join(one["said"]))
            for one in changes["explained"]
        ),
    )
    stops = Table(
        caption="Stop rules on record",
        head=("first seen", "rule", "wells read by then", "why"),
        rows=tuple(
            (str(stop.date), rule_text(stop.rule), str(stop.wells_read), stop.reason)
            for stop in basis.study.stops
        ),
        numbers=(2,),
    )
    tables = (explained, stops)
    kept = tuple(t for t, least in zip(tables, (1, 2), strict=True) if len(t.rows) >= least)
    return Section(
        name="changes",
        title="What was changed since earlier advice",
        says=tuple(one for one in (open_ if said else "", basis.study.stopping.notice) if one),
        tables=kept,
        notes=tuple(f"Left out since {since}, with a reason: {one}." for one in left_out),
    )


def provenance_section(basis: Basis) -> Section:
    """Return time, versions, settings, hashes of the inputs, and the priors."""
    facts = basis.facts
    settings = facts["settings"]
    rows = [
        ("written at", facts["written_at"]),
        *([("written by", facts["by"])] if facts["by"] else []),
        *((name, str(value)) for name, value in settings.items()),
        *(
            (name if name == "processor" else f"version of {name}", value)
            for name, value in facts["versions"].items()
        ),
    ]
    made = Table(caption="How it was made", head=("what", "value"), rows=tuple(rows))
    hashed = Table(
        caption="Files that were read, with their SHA-256",
        head=("file", "SHA-256"),
        rows=tuple(facts["inputs"].items()),
    )
    priors = _priors(basis)
    says = (
        "The same files, settings and versions give the same numbers. The JSON file beside this "
        "page holds them all.",
    )
    notes = (
        "Priors of positive quantities are log-normal, in latent units over coded factors (range "
        "-1 to 1): logits of a fraction, logarithms of a positive response.",
    )
    return Section(
        name="provenance",
        title="Where the numbers come from",
        says=says,
        tables=(made, hashed, *priors),
        notes=notes if priors else (),
    )


def _priors(basis: Basis) -> list[Table]:
    tables = []
    for response in basis.definition.responses:
        if response.name not in basis.view.surfaces:
            continue
        priors, own = priors_for(basis.study, response), response.priors
        whose = {True: "the study's", False: "built in"}
        level = f"{priors.mean:.3g} ± {priors.mean_sd:.3g}"
        rows = [("level (mean ± sd)", level, "", whose["mean_sd" in own])]
        for name, label in _PRIORS.items():
            if name == "ceiling_gap" and response.kind != "fraction":
                continue
            prior: LogNormal = getattr(priors, name)
            rows.append((label, f"{prior.median:.3g}", f"{prior.log_sd:.3g}", whose[name in own]))
        tables.append(
            Table(
                caption=f"Priors of {response.label}",
                head=("what", "median", "sd of its logarithm", "whose"),
                rows=tuple(rows),
                numbers=(1, 2),
            )
        )
    return tables
