"""What was found, as plain values for JSON: one function a section."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from muntin.record.changes import explained_changes
from muntin.record.ledger import read_ledger
from muntin.record.study import Study
from muntin.report.ruling_text import ruling_facts
from muntin.report.words import WINDOW
from muntin.window.assessment import Assessment
from muntin.window.checks import Check
from muntin.window.window import Window

if TYPE_CHECKING:
    from muntin.bench.edit import Edit
    from muntin.bench.plan import Plan
    from muntin.surrogate.convergence import Sampling

Facts = dict[str, Any]


def study_facts(study: Study) -> Facts:
    """Return what was read, left out and awaited."""
    counts = study.counts()
    by_response = {
        name: {
            "read": counts.read[name],
            "awaited": counts.awaited[name],
            "excluded": counts.excluded[name],
            "censored": counts.censored[name],
        }
        for name in counts.read
    }
    return {
        "folder": str(study.folder),
        "title": study.definition.title,
        "plates": counts.plates,
        "void_plates": counts.void,
        "wells": counts.wells,
        "control_wells": counts.controls,
        "excluded_wells": counts.excluded_wells,
        "readings": by_response,
        "notices": list(study.notices),
    }


def changes_facts(study: Study) -> Facts:
    """Return what was changed since earlier advice, and what of it was explained: by whom, when,
    why.
    """
    changes = study.changes
    return {
        "since": changes.since,
        "said": list(changes.sentences),
        "left_out": list(changes.left_out),
        "explained": [asdict(one) for one in explained_changes(read_ledger(study.folder))],
    }


def standing_facts(view: Assessment, window: Window | None) -> Facts:
    """Return where the study stands: awaited responses, model, checks and window."""
    return {
        "nothing_run": view.fresh,
        "provisional": bool(view.awaited) and not view.fresh,
        "awaited": list(view.awaited),
        "engine": view.engine,
        "model": {name: _model(stack) for name, stack in view.stacks.items()},
        "together": [asdict(pair) for pair in view.together],
        "checks": [_check(check) for check in view.checks()],
        "window": None if window is None else _window(view, window),
    }


def _check(check: Check) -> Facts:
    return {
        "name": check.name,
        "response": check.response,
        "passed": check.passed,
        "told": check.told,
        "serious": check.serious,
        "sentence": check.sentence,
    }


def _model(stack: Any) -> Facts:
    return {
        "shares": {f.name: float(s) for f, s in zip(stack.fits, stack.shares, strict=True)},
        "effective_nodes": {f.name: float(f.ess) for f in stack.fits},
        "pareto_k": {f.name: float(f.k_hat) for f in stack.fits},
        "log_marginal": {f.name: float(f.log_marginal) for f in stack.fits},
        "laplace_nodes": {f.name: f.laplace for f in stack.fits},
        "sampling": {f.name: _sampling(f.sampling) for f in stack.fits if f.sampling is not None},
    }


def _sampling(sampling: Sampling) -> Facts:
    """Return how the chains of the engine nuts went."""
    return {
        "sampler": sampling.sampler,
        "passed": sampling.passed,
        "chains": sampling.chains,
        "draws": sampling.draws,
        "r_hat": sampling.r_hat,
        "bulk_ess": sampling.bulk,
        "tail_ess": sampling.tail,
        "divergent": sampling.divergent,
        "unreliable_leave_one_out": sampling.unreliable,
    }


def _window(view: Assessment, window: Window) -> Facts:
    definition = view.study.definition
    judged = [r.name for r in definition.judged if r.name not in view.awaited]
    facts: Facts = {
        "name": WINDOW,
        "supported": not window.unsupported,
        "unsupported": list(window.unsupported),
        "required_probability": definition.required_probability,
        "judged_by": definition.judged_by,
        "judged": judged,
        "conditional_on": dict(definition.fixed),
    }
    if not window.unsupported:
        facts |= {
            "conditions": len(window.grid),
            "share": window.share,
            "wrong_share": window.wrong_share,
            "set_point": window.setpoint.to_dict(),
            "ranges": window.ranges,
            "sides": [asdict(side) for side in window.sides],
        }
    return facts


def plan_facts(study: Study, plan: Plan) -> Facts:
    """Return the plan with its forecast and the verdict on it, and what was changed in it where it
    was edited.
    """
    return {
        "plate": plan.plate,
        "aim": plan.aim,
        "seed": plan.seed,
        "protein_mg": plan.protein_mg,
        "notices": list(plan.notices),
        "wells": records(plan.wells),
        "forecast": records(plan.forecast),
        "verdict": ruling_facts(study, plan),
        "edit": None if plan.edit is None else edit_facts(plan.edit),
    }


def edit_facts(edit: Edit) -> Facts:
    """Return what was changed in an edited plan."""
    offer = edit.offer
    return {
        "kept": edit.kept.file,
        "offered": None if offer is None else offer.file,
        "offered_wells": edit.offered_wells,
        "offered_wrong_share": edit.offered_share,
        "changes": [
            asdict(scored.change) | {"p_was": scored.p_was, "p_now": scored.p_now}
            for scored in edit.changes
        ],
    }


def records(frame: pd.DataFrame) -> list[Facts]:
    """Return the rows of a table, one mapping each."""
    return [{str(k): v for k, v in row.items()} for row in frame.to_dict("records")]


def plain(value: Any) -> Any:
    """Return a value as JSON knows it: no arrays, no numbers that are not finite."""
    if isinstance(value, Mapping):
        return {str(name): plain(item) for name, item in value.items()}
    if isinstance(value, list | tuple | np.ndarray):
        return [plain(item) for item in value]
    if isinstance(value, np.generic):
        return plain(value.item())
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return None if value is pd.NA or value is pd.NaT else value
