"""How large the shared errors are, and whether there are groups enough to tell."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from muntin.record.responses import Response
from muntin.record.study import Study
from muntin.surrogate.fit import Stack
from muntin.window.checks.check import Check
from muntin.window.coded import shared_by

Array = NDArray[np.float64]
_ENOUGH = 3


def shared_errors(study: Study, response: Response, stack: Stack) -> list[Check]:
    """Median and central 90 % range of the sd of each shared error; few groups hardly tell it."""
    by = shared_by(study.definition, response)
    if not by.inside and not by.scale:
        return []
    cells = stack.fits[0].model.cells
    told, enough = [], True
    for acts, columns in (("inside", by.inside), ("scale", by.scale)):
        for j, names in enumerate(columns):
            numbers = cells.inside[:, j] if acts == "inside" else cells.scale[j]
            groups = len(np.unique(numbers))
            enough &= groups >= _ENOUGH
            told.append(_told(response, stack, acts, j, names, groups))
    sentence = f"{response.label}: {'; '.join(told)}."
    return [Check("shared errors", enough, False, sentence, response.name)]


def _told(
    response: Response, stack: Stack, acts: str, j: int, names: tuple[str, ...], groups: int
) -> str:
    group = names[0] if len(names) == 1 else " and ".join(names)
    low, middle, high = _quantiles(stack, f"{acts}_error[{j}]")
    size, unit = _unit(response, acts)
    text = (
        f"wells that share a {group} share an error of {middle * size:.2g}{unit} (90 % range "
        f"{low * size:.2g} to {high * size:.2g}{unit})"
    )
    if groups >= _ENOUGH:
        return text
    few = f"one {group} cannot" if groups == 1 else "two of them hardly"
    return f"{text}, which {few} tell; until there are {_ENOUGH} it rests on the prior"


def _unit(response: Response, acts: str) -> tuple[float, str]:
    """Size and name of the unit of a sd: per cent of a reading, logits, or the response's unit."""
    if acts == "scale" or response.kind == "positive":
        return 100.0, " %"
    return (1.0, " logits") if response.kind == "fraction" else (1.0, f" {response.unit}".rstrip())


def _quantiles(stack: Stack, name: str) -> tuple[float, float, float]:
    """5 %, 50 % and 95 % points of a hyperparameter over the nodes of the stack."""
    values, weights = [], []
    for fit, share in zip(stack.fits, stack.shares, strict=True):
        values.append(fit.theta[:, fit.names.index(name)])
        weights.append(share * fit.weights)
    x, w = np.concatenate(values), np.concatenate(weights)
    order = np.argsort(x)
    below = np.cumsum(w[order]) - 0.5 * w[order]
    low, middle, high = np.exp(np.interp([0.05, 0.5, 0.95], below / w.sum(), x[order]))
    return float(low), float(middle), float(high)
