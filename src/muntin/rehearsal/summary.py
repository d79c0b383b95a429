"""What many series say together: what it takes to reach the stop rule, and what is left wrong."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.definition import StopRule
from muntin.rehearsal.played import Series, Standing

Array = NDArray[np.float64]
HALF, MOST = 0.5, 0.9
_SPENT = ("tests", "plates", "wells", "mg")


def table_of(series: Sequence[Series]) -> pd.DataFrame:
    """A row a series, design and plate, from 0 before any new one.

    Columns: series (from 1), design, plate, and the fields of `Standing`.
    """
    rows = [
        {"series": one.number + 1, "design": name, "plate": plate}
        | {field: getattr(standing, field) for field in Standing.__slots__}
        for one in series
        for name, standings in one.designs.items()
        for plate, standing in enumerate(standings)
    ]
    return pd.DataFrame(rows)


def holds(table: pd.DataFrame, stop: StopRule) -> NDArray[np.bool_]:
    """Which rows of a table meet the stop rule: either of its shares, as the tool says them."""
    met = np.zeros(len(table), dtype=bool)
    if stop.wrong_share is not None:
        met |= table["expected"].to_numpy() <= stop.wrong_share
    if stop.best_probability is not None:
        met |= table["best"].to_numpy() >= stop.best_probability
    return met


def to_stop(table: pd.DataFrame, stop: StopRule) -> pd.DataFrame:
    """What it takes to reach the stop rule, a row a design, in their order.

    Columns: design; planned plates and tests; series; reached, how many met the rule after some
    plate; wrong, mean share of the range that they truly call wrongly then, NaN where none did; for
    tests, plates, wells and mg spent by then, _half and _most: what half of all series and nine in
    ten stay within, infinite where fewer reach the rule, NaN where not known.
    """
    met = table[holds(table, stop)].sort_values("plate", kind="stable")
    spent = met.drop_duplicates(["design", "series"]).assign(plates=lambda t: t["plate"])
    rows = []
    for name in table["design"].unique():
        mine = table[table["design"] == name]
        count, reached = mine["series"].nunique(), spent[spent["design"] == name]
        row = {
            "design": name,
            "planned_plates": int(mine["plate"].max()),
            "planned_tests": int(mine["tests"].max()),
            "series": count,
            "reached": len(reached),
            "wrong": float(reached["wrong"].mean()),
        }
        for what in _SPENT:
            values = reached[what].to_numpy(dtype=float)
            known = what != "mg" or bool(mine["mg"].notna().all())
            row |= {
                f"{what}_half": within(values, count, HALF) if known else np.nan,
                f"{what}_most": within(values, count, MOST) if known else np.nan,
            }
        rows.append(row)
    return pd.DataFrame(rows)


def within(values: Array, count: int, share: float) -> float:
    """What a share of `count` series stay within: the least value that so many do not exceed.

    values: of those that got there, the others never do. Infinite where too few did.
    """
    needed = int(np.ceil(share * count - 1e-9))
    return float(np.sort(values)[needed - 1]) if 0 < needed <= len(values) else float(np.inf)


def after_plates(table: pd.DataFrame) -> pd.DataFrame:
    """Share of the range called wrongly by design and plate, over all series.

    Columns: design, plate, tests, wells, mg; wrong, wrong_se, wrong_half and wrong_most: mean, its
    standard error, median and what nine in ten series stay within of the true share; expected: mean
    of what the tool says.
    """
    rows = []
    for (name, plate), part in table.groupby(["design", "plate"], sort=False):
        wrong = part["wrong"].to_numpy(dtype=float)
        rows.append(
            {
                "design": name,
                "plate": plate,
                "tests": int(part["tests"].max()),
                "wells": int(part["wells"].max()),
                "mg": float(part["mg"].max()),
                "wrong": float(wrong.mean()),
                "wrong_se": standard_error(wrong),
                "wrong_half": within(wrong, len(wrong), HALF),
                "wrong_most": within(wrong, len(wrong), MOST),
                "expected": float(part["expected"].mean()),
            }
        )
    return pd.DataFrame(rows)


def standard_error(values: Array) -> float:
    """Standard error of a mean; NaN of one value."""
    return float(values.std(ddof=1) / np.sqrt(len(values))) if len(values) > 1 else float("nan")


def against(table: pd.DataFrame, own: str) -> pd.DataFrame:
    """Each rival's true wrong share less that of a design `own`, after the last plate of both.

    Columns: design, series, difference (mean over them, truth by truth) and its standard error se.
    """
    last = table.sort_values("plate", kind="stable")
    last = last.drop_duplicates(["design", "series"], keep="last")
    wrong = last.pivot(index="series", columns="design", values="wrong")
    rows = []
    for name in table["design"].unique():
        if name != own:
            away = (wrong[name] - wrong[own]).to_numpy(dtype=float)
            found = {"difference": away.mean(), "se": standard_error(away)}
            rows.append({"design": name, "series": len(away)} | found)
    return pd.DataFrame(rows, columns=["design", "series", "difference", "se"])
