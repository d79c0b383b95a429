"""All checks of a study, in the order in which they are told."""

from __future__ import annotations

from typing import TYPE_CHECKING

from muntin.window.checks.check import Check
from muntin.window.checks.comparison import comparison
from muntin.window.checks.confounding import confounding
from muntin.window.checks.coverage import coverage
from muntin.window.checks.integration import integration
from muntin.window.checks.lack_of_fit import lack_of_fit
from muntin.window.checks.other_plates import other_plates
from muntin.window.checks.prior_weight import prior_weight
from muntin.window.checks.sampling import sampling
from muntin.window.checks.shared_errors import shared_errors
from muntin.window.checks.wild_wells import wild_wells

if TYPE_CHECKING:
    from muntin.window.assessment import Assessment


def study_checks(view: Assessment) -> tuple[Check, ...]:
    """All checks of all responses with readings, then those of the study; serious ones first."""
    checks: list[Check] = []
    for response in view.study.definition.responses:
        if response.name in view.stacks:
            stack = view.stacks[response.name]
            checks += coverage(response, stack)
            checks += other_plates(view.study, response, stack, view.seed)
            checks += lack_of_fit(response, stack)
            checks += wild_wells(view, response, stack)
            checks += prior_weight(view, response, stack)
            checks += sampling(response, stack) or integration(response, stack)
            checks += shared_errors(view.study, response, stack)
            checks += comparison(response, stack)
    return (*checks, *confounding(view.study)) if view.stacks else ()
