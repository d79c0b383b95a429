"""A study assessed in brief, as often as a rehearsal needs it."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from muntin.record.study import Study
from muntin.surrogate.fit import SURROGATES, Stack, brief_stack, starts_of
from muntin.window.assessment import Assessment, Surrogate
from muntin.window.coded import coding_of, priors_for, readings_of
from muntin.window.residuals import residual_correlations

Starts = Mapping[str, Mapping[str, NDArray[np.float64]]]


def starts_from(view: Assessment) -> Starts:
    """Where to begin the search for fits to more readings, by response and surrogate."""
    return {name: starts_of(stack) for name, stack in view.stacks.items()}


def assess_briefly(
    study: Study,
    surrogate: Surrogate,
    seed: int,
    nodes: int,
    starts: Starts,
) -> Assessment:
    """The judged responses that have readings, on so many hyperparameter nodes a round (a power of
    two) and without a cloud of draws; else as `assess`. starts: by response where the search
    begins, as an assessment of fewer readings gives them.
    """
    names = SURROGATES if surrogate == "stacked" else (surrogate,)
    columns = coding_of(study.definition).columns
    stacks: dict[str, Stack] = {}
    for response in study.definition.judged:
        readings = readings_of(study, response)
        if len(readings):
            priors = priors_for(study, response)
            stacks[response.name] = brief_stack(
                names,
                readings,
                response.kind,
                columns,
                priors,
                seed,
                nodes,
                starts.get(response.name, {}),
            )
    return Assessment(
        study=study,
        surrogate=surrogate,
        seed=seed,
        stacks=stacks,
        surfaces={name: stack.surface for name, stack in stacks.items()},
        together=residual_correlations(study, stacks),
    )
