"""Small studies to rehearse, and series made by hand."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from muntin.record import Study
from muntin.rehearsal.played import Series, Standing
from muntin.rehearsal.rehearse import Rehearsal, rehearse
from tests.studies import PH, SALT, read, spread, written

# Readings of this kind have an exact law, which makes their fits cheap.
REAL: dict[str, Any] = {"name": "recovery", "kind": "real", "at_least": 0.7, "typical": [0.0, 1.0]}
QUICK: dict[str, Any] = {"surrogate": "quadratic", "nodes": 4, "series": 3}


def small(folder: Path, wells: int = 10, **given: Any) -> Study:
    """Two factors on coarse steps, one plate of recoveries; none without wells."""
    plates = [read(spread([PH, SALT], wells))] if wells else []
    return written(folder, plates, **given)


def plain(folder: Path, wells: int = 10, **given: Any) -> Study:
    """The same with readings that are cheap to fit."""
    return small(folder, wells, **{"responses": [REAL], **given})


def quick(study: Study, plates: Sequence[int] = (3, 2), **given: Any) -> Rehearsal:
    """A rehearsal of few series, fitted with the quadratic on few nodes."""
    return rehearse(study, plates, **{**QUICK, **given})


def standing(tests: int, expected: float, wrong: float, **given: float) -> Standing:
    """A standing with ten wells a test well and no protein where not given otherwise."""
    own = {"wells": 10 * tests, "mg": math.nan, "best": math.nan, **given}
    return Standing(tests=tests, expected=expected, wrong=wrong, **own)  # type: ignore[arg-type]


def series(number: int, designs: Mapping[str, Sequence[tuple[int, float, float]]]) -> Series:
    """A series from (tests, expected, wrong) of each standing."""
    return Series(
        number, {name: tuple(standing(*one) for one in every) for name, every in designs.items()}
    )


def same(left: pd.DataFrame, right: pd.DataFrame) -> None:
    """Both tables hold the same numbers to the last bit."""
    pd.testing.assert_frame_equal(left, right, check_exact=True)


def conditions(*rows: tuple[float, float]) -> pd.DataFrame:
    """Conditions of pH and salt."""
    return pd.DataFrame(np.array(rows, dtype=float), columns=["ph", "salt"])
