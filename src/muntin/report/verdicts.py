"""How the wells that were run did, condition by condition, for the figures."""

from __future__ import annotations

import numpy as np
import pandas as pd

from muntin.record.keys import Floats, Truths
from muntin.record.responses import Response
from muntin.record.study import Study

VERDICTS = ("passed", "failed", "between", "awaited")


def verdicts(study: Study) -> pd.DataFrame:
    """Return a row a condition that was run: the factors, wells and verdict.

    "passed" where every well met all targets read so far, "failed" where none did, "between"
    where repeats differ, "awaited" where nothing was read. Wells left out are not among them.
    """
    definition = study.definition
    wells = study.informing()
    states = [f"{response.name}_state" for response in definition.judged]
    counted = wells[~(wells[states].isin(["excluded", "censored"]).all(axis=1))]
    met = np.ones(len(counted), dtype=bool)
    read = np.zeros(len(counted), dtype=bool)
    for response in definition.judged:
        here = (counted[f"{response.name}_state"] == "read").to_numpy()
        met &= ~here | meets(response, counted[response.name].to_numpy(dtype=float))
        read |= here
    names = list(definition.factor_names)
    table = counted[names].assign(read=read, passed=met & read)
    grouped = table.groupby(names, sort=False, dropna=False)
    sums = grouped[["read", "passed"]].sum().assign(wells=grouped.size()).reset_index()
    return sums[names].assign(
        wells=sums["wells"],
        verdict=np.select(
            [sums["read"] == 0, sums["passed"] == sums["read"], sums["passed"] == 0],
            ["awaited", "passed", "failed"],
            "between",
        ),
    )


def meets(response: Response, values: Floats) -> Truths:
    """Return which values (user's unit) meet the response's target; NaN meets none."""
    low = -np.inf if response.at_least is None else response.at_least
    high = np.inf if response.at_most is None else response.at_most
    return (values >= low) & (values <= high)
