"""All checks of a study, in the order in which they are told."""

from __future__ import annotations

from typing import TYPE_CHECKING

from muntin.record.responses import Response
from muntin.surrogate.fit import Stack, stack_without
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
from muntin.window.checks.together import readings_together
from muntin.window.checks.wild_wells import wild_rows, wild_wells

if TYPE_CHECKING:
    from muntin.window.assessment import Assessment


def study_checks(view: Assessment) -> tuple[Check, ...]:
    """All checks of all responses with readings, then those of the study."""
    checks: list[Check] = []
    for response in view.study.definition.responses:
        if response.name in view.stacks:
            checks += _response_checks(view, response, view.stacks[response.name])
    checks += readings_together(view.study, view.together)
    return (*checks, *confounding(view.study)) if view.stacks else ()


def _response_checks(view: Assessment, response: Response, stack: Stack) -> list[Check]:
    """The checks of one response; a wild well, which is told of itself, fails no other for the
    noise that it asks for.
    """
    wild = wild_rows(view, response, stack)
    some = 0 < len(wild) < len(stack.fits[0].model.cells.y)
    without = stack_without(stack, wild, view.seed) if some else None
    calm = without or stack
    return [
        *coverage(response, stack, calm),
        *other_plates(view.study, response, stack, view.seed),
        *lack_of_fit(response, calm),
        *wild_wells(view, response, wild, without),
        *prior_weight(view, response, calm),
        *(sampling(response, stack) or integration(response, stack)),
        *shared_errors(view.study, response, stack),
        *comparison(response, stack),
    ]
