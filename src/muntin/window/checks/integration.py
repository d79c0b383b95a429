"""Whether the averages over hyperparameters rest on enough nodes."""

from __future__ import annotations

from muntin.record.responses import Response
from muntin.surrogate.fit import Stack
from muntin.window.checks.check import Check

_FEWEST, _HEAVY = 20.0, 0.7
# The shape of a short tail is uncertain; so many effective nodes outweigh it.
_MANY_NODES = 64.0


def integration(response: Response, stack: Stack) -> list[Check]:
    """The check of one response; the worst of its fits counts."""
    k = max(fit.k_hat for fit in stack.fits)
    ess = min(fit.ess for fit in stack.fits)
    passed = all(
        f.ess >= _FEWEST and (f.k_hat < _HEAVY or f.ess >= _MANY_NODES) for f in stack.fits
    )
    numbers = f"(effective nodes {ess:.0f}, Pareto k {max(k, 0.0):.2f})"
    sentence = f"{response.label}: probabilities average over enough model settings {numbers}."
    if not passed:
        sentence = (
            f"{response.label}: probabilities rest on too few model settings {numbers}; add "
            "readings, narrow the priors, or use --engine nuts."
        )
    return [Check("integration", passed, True, sentence, response.name)]
