"""How the wells that were run did, condition by condition, for the figures."""

from __future__ import annotations

import numpy as np
import pandas as pd

from muntin.record.keys import Floats, Truths
from muntin.record.readings import USED
from muntin.record.responses import Response
from muntin.record.study import Study

VERDICTS = ("passed", "failed", "between", "awaited")


def verdicts(study: Study) -> pd.DataFrame:
    """Return a row a condition that was run: the factors, wells and verdict.

    "passed" where every well met all targets read so far, "failed" where none did, "between"
    where repeats differ, "awaited" where nothing was read; a censored reading counts where its
    limit decides. Wells left out are not among them.
    """
    definition = study.definition
    wells = study.informing()
    states = [f"{response.name}_state" for response in definition.judged]
    counted = wells[~(wells[states].isin(["excluded"]).all(axis=1))]
    met = np.ones(len(counted), dtype=bool)
    read = np.zeros(len(counted), dtype=bool)
    for response in definition.judged:
        value = counted[response.name].to_numpy(dtype=float)
        side = counted[f"{response.name}_side"].to_numpy()
        least, most = np.where(side < 0, -np.inf, value), np.where(side > 0, np.inf, value)
        passes = meets(response, least) & meets(response, most)
        fails = ~meets(response, value) & (side == 0) | _misses(response, least, most)
        here = counted[f"{response.name}_state"].isin(USED).to_numpy() & (passes | fails)
        met &= ~here | passes
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


def _misses(response: Response, least: Floats, most: Floats) -> Truths:
    """Return which ranges of values lie outside the target whole."""
    low = -np.inf if response.at_least is None else response.at_least
    high = np.inf if response.at_most is None else response.at_most
    return (most < low) | (least > high)


def meets(response: Response, values: Floats) -> Truths:
    """Return which values (user's unit) meet the response's target; NaN meets none."""
    low = -np.inf if response.at_least is None else response.at_least
    high = np.inf if response.at_most is None else response.at_most
    return (values >= low) & (values <= high)
