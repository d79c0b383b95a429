"""How much each factor moves the process mean of a response, over the whole range of the study."""

from __future__ import annotations

from collections.abc import Collection

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.faults import Fault, StudyFaults, did_you_mean, number, quoted
from muntin.record.responses import Response
from muntin.record.study import Study
from muntin.surrogate.influence import ProductGrid, product_grid, surface_effects
from muntin.surrogate.nodes import Surface
from muntin.window.coded import coding_of

Array = NDArray[np.float64]
DRAWS = 400
_LARGEST = 20_000
_LEVELS = (0.025, 0.975)


def influence_of(
    study: Study,
    response: Response,
    surface: Surface,
    negligible: float | None,
    draws: int,
    seed: int,
) -> pd.DataFrame:
    """Influence of each factor on the process mean g of a response; index `factor`.

    first: share of the variance of g over the range that the factor explains by itself; total:
    with all its interactions (Sobol' indices: Sobol' 1993; Saltelli et al. 2010). Factors vary
    independently, evenly over their range (its logarithm on a log scale), choices equally likely;
    `[[limits]]` and narrower ranges of plans are left aside. Posterior mean, and first_low to
    first_high and so on, its central 95 %. Where g does not vary at all, shares are 0.

    p_negligible, where a size is named (unit of the response): probability that moving the factor
    over its whole range moves g by less than that. The move is the largest less the smallest g
    along the factor, averaged over the settings of the others, so that effects that cancel in the
    average still count. Raises StudyFaults where the size is not above 0, ValueError below 2 draws.
    """
    if negligible is not None and not 0.0 < negligible < np.inf:
        raise StudyFaults([_fault("negligible", number(negligible), "is not above", "0")])
    if draws < 2:
        raise ValueError(f"draws must be at least 2, not {draws}")
    effects = surface_effects(surface, _grid(study), draws, np.random.default_rng(seed))
    columns: dict[str, Array] = {}
    for name, values in (("first", effects.first), ("total", effects.total)):
        low, high = np.quantile(values, _LEVELS, axis=0)
        columns |= {name: values.mean(axis=0), f"{name}_low": low, f"{name}_high": high}
    if negligible is not None:
        moved = effects.change * response.unit_size
        columns["p_negligible"] = (moved < negligible).mean(axis=0)
    return pd.DataFrame(columns, index=pd.Index(study.definition.factor_names, name="factor"))


def chosen_response(study: Study, name: str | None, read: Collection[str]) -> Response:
    """The response of that name; without one the first judged, else the first, of those `read`.

    Raises StudyFaults where there is no such response or it has not been read.
    """
    every = study.definition.responses
    known = [r for r in every if r.name in read]
    if name is None:
        if not known:
            raise StudyFaults([_fault("response", "", "none has been read yet", "")])
        return min(known, key=lambda r: not r.judged)
    for response in known:
        if response.name == name:
            return response
    if name in [r.name for r in every]:
        raise StudyFaults([_fault("response", quoted(name), "has not been read yet", "")])
    hint = did_you_mean(name, [r.name for r in every])
    raise StudyFaults([_fault("response", quoted(name), "is not a response", "", hint)])


def _grid(study: Study) -> ProductGrid:
    grid = product_grid(coding_of(study.definition))
    if grid.size > _LARGEST:
        problem = "makes more combinations than"
        raise StudyFaults([_fault("factors", str(grid.size), problem, f"{_LARGEST:,}")])
    return grid


def _fault(where: str, value: str, problem: str, allowed: str, hint: str = "") -> Fault:
    return Fault(
        file="influence", where=where, value=value, problem=problem, allowed=allowed, hint=hint
    )
