"""Protein: what was used, what a plan needs, what is left."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.definition import Definition
from muntin.record.study import Study

LOADED = ("test", "bridge", "reference", "load", "no_resin")


def wells_mg(definition: Definition, rows: pd.DataFrame) -> NDArray[np.float64]:
    """Protein (n,) in mg that each row of a plan or plate takes, 0 where the study does not say.

    rows: role, and the factor that holds the load (raw unit; absent or empty for controls).
    """
    protein = definition.protein
    if protein is None:
        return np.zeros(len(rows))
    loads = np.full(len(rows), np.nan)
    if protein.load_factor is not None and protein.load_factor in rows:
        loads = pd.to_numeric(rows[protein.load_factor]).to_numpy(dtype=float)
    loaded = rows["role"].isin(LOADED).to_numpy()
    return np.where(loaded, protein.well_mg(loads, definition.factors), 0.0)


def protein_left_mg(study: Study) -> float | None:
    """Protein that may still be used, in mg: at hand, less reserve and all wells that were run,
    void and excluded ones too; None where the study does not say.
    """
    protein = study.definition.protein
    if protein is None:
        return None
    used = float(wells_mg(study.definition, study.wells).sum())
    return protein.available_mg - protein.reserved_mg - used


def protein_needed_mg(study: Study, rows: pd.DataFrame | Iterable[str]) -> float | None:
    """Protein that rows of a plan, or wells of these roles, need in mg; None where the study does
    not say.
    """
    if study.definition.protein is None:
        return None
    frame = rows if isinstance(rows, pd.DataFrame) else pd.DataFrame({"role": list(rows)})
    return float(wells_mg(study.definition, frame).sum())
