"""A study assessed in brief, as often as a rehearsal needs it."""

from __future__ import annotations

from muntin.record.study import Study
from muntin.surrogate.fit import SURROGATES, Stack, brief_stack
from muntin.window.assessment import Assessment, Surrogate
from muntin.window.coded import coding_of, priors_for, readings_of
from muntin.window.residuals import residual_correlations


def assess_briefly(study: Study, surrogate: Surrogate, seed: int, nodes: int) -> Assessment:
    """The judged responses that have readings, on so many hyperparameter nodes a round (a power of
    two) and without a cloud of draws; else as `assess`.
    """
    names = SURROGATES if surrogate == "stacked" else (surrogate,)
    columns = coding_of(study.definition).columns
    stacks: dict[str, Stack] = {}
    for response in study.definition.judged:
        readings = readings_of(study, response)
        if len(readings):
            priors = priors_for(study, response)
            stacks[response.name] = brief_stack(
                names, readings, response.kind, columns, priors, seed, nodes
            )
    return Assessment(
        study=study,
        surrogate=surrogate,
        seed=seed,
        stacks=stacks,
        surfaces={name: stack.surface for name, stack in stacks.items()},
        together=residual_correlations(study, stacks),
    )
