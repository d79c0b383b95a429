"""Whether the chains of the reference engine can be relied on."""

from __future__ import annotations

from muntin.record.responses import Response
from muntin.surrogate.fit import Stack
from muntin.window.checks.check import Check

_NAMES = {"gp": "the Gaussian process", "quadratic": "the quadratic"}


def sampling(response: Response, stack: Stack) -> list[Check]:
    """One check a sampled fit; none where the fast engine was used."""
    found = []
    for fit in stack.fits:
        if fit.sampling is not None:
            told = f"{response.label}: for {_NAMES[fit.name]} {fit.sampling.sentence}"
            if heavy := fit.sampling.unreliable:
                of = f"{heavy} of {len(fit.sampling.pareto_k)}"
                told += f"; predictions from the others are uncertain for {of} readings"
            told += "."
            found.append(Check("sampling", fit.sampling.passed, True, told, response.name))
    return found
