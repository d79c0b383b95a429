"""The entry that a command on a study makes in the ledger: one small function for all of them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

from muntin.record.asked import asked_of
from muntin.record.faults import Fault, StudyFaults
from muntin.record.inputs import hashes, read_inputs, versions
from muntin.record.ledger import Entry
from muntin.record.study import Study


def entry_for(
    study: Study,
    command: str,
    settings: Mapping[str, Any],
    *,
    seed: int | None = None,
    by: str | None = None,
    because: str | None = None,
    inputs: Mapping[str, str] | None = None,
    decision: Mapping[str, Any] | None = None,
    results: Mapping[str, str] | None = None,
    judges: bool = True,
) -> Entry:
    """Return the entry of a command: what it read, what is asked and what had changed.

    inputs: hashes of the files that it read; those of the study's input files where not given.
    judges: whether later changes are told against this line.
    """
    return Entry(
        command=command,
        by=by,
        settings=settings,
        seed=seed,
        inputs=hashes(read_inputs(study.folder)) if inputs is None else inputs,
        versions=versions(),
        asked=asked_of(study.definition) if judges else {},
        results=results or {},
        decision=decision,
        changes=study.changes.sentences,
        because=because,
    )


def with_reason(study: Study, by: str | None, because: str | None) -> Study:
    """Return a study that tells its changes with the reason now given, where one is."""
    if by is None or because is None:
        return study
    told = {study.changes.notice: study.changes.explained(by, because)}
    return replace(study, notices=tuple(told.get(said, said) for said in study.notices))


def check_reason(study: Study, command: str, by: str | None, because: str | None) -> None:
    """Raise StudyFaults for a reason that nobody gives, that is empty, or that explains nothing."""
    if because is None:
        return
    problem, hint = "", ""
    if not because.strip():
        problem = "is empty; say in words why"
    elif by is None or not by.strip():
        problem, hint = "needs --by NAME: who gives the reason", ""
    elif not study.changes.sentences:
        problem = "explains a change, and nothing has changed since earlier advice"
    if problem:
        raise StudyFaults(
            [Fault(file=f"muntin {command}", value="--because", problem=problem, hint=hint)]
        )
