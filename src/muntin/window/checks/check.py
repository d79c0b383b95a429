"""One check of the model against the readings."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Check:
    """What was checked, whether it passed, whether a failure withdraws support from the window,
    what was found in one sentence, the name of the response, or None where it is of all, and
    whether the readings are enough to tell; where they are not, it counts as passed.
    """

    name: str
    passed: bool
    serious: bool
    sentence: str
    response: str | None = None
    told: bool = True
