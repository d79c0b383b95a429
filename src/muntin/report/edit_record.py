"""The record of an edited plan, and what the records say of the plates that were run."""

from __future__ import annotations

from collections.abc import Mapping
from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING

from muntin.record.definition import Definition
from muntin.record.edits import (
    EditRecord,
    WellChange,
    counts_text,
    record_text,
    recorded_edits,
    sha256,
)
from muntin.record.offers import (
    Change,
    OfferedWell,
    nearest_offer,
    offers_of,
    wells_of,
)
from muntin.record.study import Study
from muntin.report.facts import Facts
from muntin.report.words import setting_text, share_text

if TYPE_CHECKING:
    from muntin.bench.edit import Edit, ScoredChange
    from muntin.bench.plan import Plan


def edit_text(
    study: Study,
    plan: Plan,
    edit: Edit,
    path: Path,
    text: str,
    *,
    by: str | None,
    because: str | None,
    inputs: Mapping[str, str],
) -> str:
    """Return the record of an edited plan that is to be written to `path` with this `text`."""
    offer, tests = edit.offer, int((plan.wells["role"] == "test").sum())
    record = EditRecord(
        plate=plan.plate,
        plan=path.relative_to(study.folder).as_posix(),
        plan_sha256=sha256(text.encode("utf-8")),
        kept=edit.kept.file,
        kept_sha256=sha256(edit.kept.path.read_bytes()),
        offered=None if offer is None else offer.file,
        offered_sha256=None if offer is None else sha256(offer.path.read_bytes()),
        written_at=datetime.now(UTC).isoformat(timespec="seconds"),
        by=by,
        because=because,
        aim=plan.aim,
        seed=plan.seed,
        wells=tests,
        wrong_share=_rounded(plan.wrong_share),
        offered_wells=edit.offered_wells,
        offered_wrong_share=_rounded(edit.offered_share),
        inputs=dict(inputs),
        changes=tuple(_entry(study.definition, change) for change in edit.changes),
    )
    return record_text(record)


def _rounded(value: float | None) -> float | None:
    return None if value is None or value != value else round(value, 6)


def _entry(definition: Definition, scored: ScoredChange) -> WellChange:
    change = scored.change
    return WellChange(
        kind=change.kind,
        was=well_text(definition, change.was),
        now=well_text(definition, change.now),
        p_was=_rounded(scored.p_was),
        p_now=_rounded(scored.p_now),
        because=change.because or None,
    )


def well_text(definition: Definition, well: OfferedWell | None) -> str | None:
    """Return a well in words: "C4 test, pH 5.0, Salt 100 mM"."""
    if well is None:
        return None
    parts = [f"{well.well} {well.role}"]
    if well.condition is not None:
        for factor, value in zip(definition.factors, well.condition, strict=True):
            known = isinstance(value, float) or not factor.continuous
            parts.append(setting_text(factor, value) if known else f"{factor.label} {value}")
    return ", ".join(parts)


def edit_lines(plan: Plan, edit: Edit) -> list[str]:
    """Return what was changed and what it costs, in sentences."""
    kinds = [scored.change.kind for scored in edit.changes]
    every = ("changed", "moved", "left out", "added", "chosen")
    said = ", ".join(f"{kinds.count(kind)} {kind}" for kind in every if kind in kinds)
    if edit.offer is None:
        return [f"{edit.kept.file}: no offered plan of {plan.plate} is on record to compare with."]
    lines = [f"Against {edit.offer.file}: {said or 'nothing was changed'}."]
    if edit.offered_share is not None:
        tests = int((plan.wells["role"] == "test").sum())
        lines.append(
            f"May be called wrongly after it: {share_text(plan.wrong_share)} ({tests} test wells); "
            f"as offered {share_text(edit.offered_share)} ({edit.offered_wells})."
        )
    return lines


def plans_on_record(study: Study) -> tuple[list[str], Facts]:
    """Return, in sentences and as plain values, which plans were edited, and how plates were run
    against their plans.
    """
    lines, edits = [], []
    for recorded in recorded_edits(study.folder):
        if (record := recorded.record) is not None:
            lines.append(_record_line(record))
            edits.append(record.model_dump(exclude_none=True))
        lines += recorded.notices
    runs = []
    for plate in study.plates:
        compared = _as_run(study, plate.name)
        if compared is not None:
            file, changes = compared
            lines.append(_run_line(plate.name, file, changes))
            runs.append(_run_facts(study.definition, plate.name, file, changes))
    return lines, {"edits": edits, "run": runs}


def _record_line(record: EditRecord) -> str:
    against = "" if record.offered is None else f" against {record.offered}"
    by = "" if record.by is None else f", by {record.by}"
    why = "" if record.because is None else f': "{record.because}"'
    return f"{record.plan}: {counts_text(record)}{against}{by}{why}"


def _as_run(study: Study, plate: str) -> tuple[str, list[Change]] | None:
    """The plan that a plate was run by, and how it differs; None where none was offered.

    Wells of the plan that the plate's table has not are left out, whatever became of them.
    """
    offers = offers_of(study.folder, study.definition, plate)
    rows = study.wells[study.wells["plate"] == plate]
    if not offers or not len(rows):
        return None
    there = wells_of(study.definition, rows, "_target")
    found = nearest_offer(offers, there)
    return None if found is None else (found[0].file, found[1])


def _run_line(plate: str, file: str, changes: list[Change]) -> str:
    if not changes:
        return f"{plate} was run as planned in {file}"
    kinds = [change.kind for change in changes]
    names = {"changed": "changed", "moved": "moved", "left out": "not run", "added": "added"}
    said = [
        f"{kinds.count(kind)} {name} ({_wells(changes, kind)})"
        for kind, name in names.items()
        if kind in kinds
    ]
    return f"{plate} was run otherwise than planned in {file}: {', '.join(said)}"


def _wells(changes: list[Change], kind: str) -> str:
    wells = [(c.now or c.was) for c in changes if c.kind == kind]
    names = [well.well for well in wells if well is not None]
    return ", ".join(names[:6]) + (f" and {len(names) - 6} more" if names[6:] else "")


def _run_facts(definition: Definition, plate: str, file: str, changes: list[Change]) -> Facts:
    told = [
        {
            "kind": c.kind,
            "was": well_text(definition, c.was),
            "now": well_text(definition, c.now),
        }
        for c in changes
    ]
    return {"plate": plate, "plan": file, "changes": told}
