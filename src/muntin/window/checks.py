"""Checks of the model against the readings, each ending in a plain sentence."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.record.responses import Response
from muntin.record.study import Study
from muntin.surrogate.fit import Stack

Array = NDArray[np.float64]
_WILD = 3.5
# The shape of a short tail is uncertain; so many effective nodes outweigh it.
_MANY_NODES = 64.0


@dataclass(frozen=True)
class Check:
    """One check: what was checked, whether it passed, whether a failure withdraws support from
    the window, and what was found in one sentence.
    """

    name: str
    passed: bool
    serious: bool
    sentence: str


def study_checks(study: Study, stacks: Mapping[str, Stack]) -> tuple[Check, ...]:
    """All checks of all responses with readings."""
    checks: list[Check] = []
    for response in study.definition.responses:
        if response.name in stacks:
            stack = stacks[response.name]
            checks += [_coverage(response, stack), _wild(study, response, stack)]
            checks.append(_integration(response, stack))
    return (*checks, *_plates(study, stacks))


def _predicted(stack: Stack) -> tuple[Array, Array]:
    """Leave-one-out mean and sd (n,) of the stack: of the mixture of its fits'."""
    loos, shares = [fit.loo for fit in stack.fits], stack.shares
    mean = shares @ np.stack([loo.mean for loo in loos])
    square = shares @ np.stack([loo.sd**2 + (loo.mean - mean) ** 2 for loo in loos])
    return mean, np.sqrt(square)


def _coverage(response: Response, stack: Stack) -> Check:
    """Share of readings inside their leave-one-out 90 % range, against its binomial 99 % limits."""
    from scipy.stats import binom

    pit = stack.shares @ np.stack([fit.loo.pit for fit in stack.fits])
    n, hits = len(pit), int(((pit > 0.05) & (pit < 0.95)).sum())
    least = int(binom.ppf(0.005, n, 0.9))
    passed = hits >= least
    sentence = (
        f"{response.label}: {hits} of {n} readings lie in the 90 % range predicted from the "
        f"others ({'' if passed else 'too few: '}{least} or more were to be expected)."
    )
    return Check("coverage", passed, True, sentence)


def _wild(study: Study, response: Response, stack: Stack) -> Check:
    """Readings more than 3.5 predictive sds from what the others say; named, never excluded."""
    readings = study.readings(response.name)
    y = readings["y"].to_numpy(dtype=float)
    y = np.log(y) if response.kind == "positive" else y
    mean, sd = _predicted(stack)
    z = (y - mean) / sd
    wild = np.flatnonzero(np.abs(z) > _WILD)
    if not len(wild):
        return Check("wild wells", True, False, f"{response.label}: no wild wells.")
    names = [f"{readings['plate'].iloc[i]} {readings['well'].iloc[i]}" for i in wild[:5]]
    more = f" and {len(wild) - 5} more" if len(wild) > 5 else ""
    sentence = (
        f"{response.label}: far from what the others predict: {', '.join(names)}{more}; look for "
        "a cause, and exclude only with one."
    )
    return Check("wild wells", False, False, sentence)


def _integration(response: Response, stack: Stack) -> Check:
    k = max(fit.k_hat for fit in stack.fits)
    ess = min(fit.ess for fit in stack.fits)
    passed = all(f.ess >= 20.0 and (f.k_hat < 0.7 or f.ess >= _MANY_NODES) for f in stack.fits)
    verdict = "reliable" if passed else "unreliable: add readings or narrow the priors"
    sentence = (
        f"{response.label}: averages over hyperparameters are {verdict} "
        f"(effective nodes {ess:.0f}, Pareto k {max(k, 0.0):.2f})."
    )
    return Check("integration", passed, True, sentence)


def _plates(study: Study, stacks: Mapping[str, Stack]) -> tuple[Check, ...]:
    """Few plates hardly tell how far plates differ."""
    if not stacks:
        return ()
    count = len({plate for name in stacks for plate in study.readings(name)["plate"]})
    if count >= 3:
        return (Check("plates", True, False, f"{count} plates tell how far plates differ."),)
    said = "One plate cannot" if count == 1 else "Two plates hardly"
    sentence = f"{said} tell how far plates differ; the prior speaks for p_well there."
    return (Check("plates", False, False, sentence),)
