"""Which conditions the stocks of a study can make."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pandas as pd

from muntin.bench.mixing import Mixer
from muntin.record.definition import Definition
from muntin.record.keys import Truths


def unmixable(definition: Definition) -> Callable[[pd.DataFrame], Truths] | None:
    """Return what tells which rows of a frame (targets, raw units) cannot be mixed, shape (n,);
    None where the study gives no stocks.
    """
    if not definition.bench.held:
        return None
    mixer, names = Mixer(definition), list(definition.factor_names)

    def cannot(frame: pd.DataFrame) -> Truths:
        rows = frame[names].itertuples(index=False, name=None)
        return np.array([not mixer.works(dict(zip(names, r, strict=True))) for r in rows], bool)

    return cannot
