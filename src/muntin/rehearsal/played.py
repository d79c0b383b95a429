"""What came of a series: where each design stood after each of its plates."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import astuple, dataclass
from typing import Any


@dataclass(frozen=True, kw_only=True, slots=True)
class Standing:
    """Where a design stands on one truth, before any new plate or after some.

    tests: test wells so far, wells: all of them, bridging wells and controls too, mg: protein used
    by them, NaN where the study does not say. expected: share of the range that may be called
    wrongly, as the tool says it. wrong: the share that is called wrongly on this truth. best:
    highest judged probability; NaN where it was not asked for.
    """

    tests: int
    wells: int
    mg: float
    expected: float
    wrong: float
    best: float


@dataclass(frozen=True)
class Series:
    """The standings of every design on truth `number`, before any new plate first."""

    number: int
    designs: Mapping[str, tuple[Standing, ...]]

    def to_dict(self) -> dict[str, Any]:
        """As plain values; numbers that are not known become None."""
        designs = {name: [_plain(one) for one in all_] for name, all_ in self.designs.items()}
        return {"number": self.number, "designs": designs}

    @classmethod
    def from_dict(cls, plain: Mapping[str, Any]) -> Series:
        """The series again. Raises ValueError, KeyError, TypeError or AttributeError where the
        values are not those of a series.
        """
        designs = {
            str(name): tuple(_standing(values) for values in every)
            for name, every in plain["designs"].items()
        }
        if not isinstance(plain["number"], int) or not all(designs.values()):
            raise ValueError("no series")
        return cls(plain["number"], designs)


def _plain(one: Standing) -> list[float | None]:
    return [None if isinstance(v, float) and math.isnan(v) else v for v in astuple(one)]


def _standing(values: Any) -> Standing:
    tests, wells, *rest = values
    mg, expected, wrong, best = (math.nan if v is None else float(v) for v in rest)
    if not (0.0 <= expected <= 1.0 and 0.0 <= wrong <= 1.0):
        raise ValueError("a share lies outside 0 to 1")
    return Standing(
        tests=int(tests), wells=int(wells), mg=mg, expected=expected, wrong=wrong, best=best
    )
