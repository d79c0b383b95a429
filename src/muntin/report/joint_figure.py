"""The joint pass by response: how likely each target is met at the set point, and all at once."""

from __future__ import annotations

from collections.abc import Hashable, Mapping
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from muntin.report.canvas import finish, one_panel
from muntin.report.sections import best_word
from muntin.report.style import ACCENT, INK, LINE, PAPER, QUIET, dress
from muntin.report.words import chance_text, condition_text, odds_text
from muntin.window.assessment import Assessment

if TYPE_CHECKING:
    from matplotlib.axes import Axes

ALL = "all targets at once"
_LOOKS = (
    ("p_mean", "process mean passes", "o", PAPER, 0.13),
    ("p_well", "new well passes", "o", LINE, 0.0),
    ("p_kept", "new well passes, factors kept within ±", "D", ACCENT, -0.13),
)


def joint_passes(view: Assessment, condition: pd.DataFrame | None = None) -> pd.DataFrame:
    """Return the chance that each judged response meets its target, and that all do, a row each.

    Columns: what (the response's label, or "all targets at once"), response (its name, None for
    all), p_mean, p_well and, for all at once where a kept_within is given, p_kept. condition: one
    row in raw units, the set point where None. The row of all is left out while one is awaited.
    Raises ValueError where nothing was read.
    """
    if view.fresh:
        raise ValueError("nothing has been read yet")
    known = view.at(_there(view, condition)).iloc[0]
    rows: list[dict[str, object]] = [
        {"what": r.label, "response": r.name}
        | {f"p_{kind}": float(known[f"{r.name}_p_{kind}"]) for kind in ("mean", "well")}
        for r in view.study.definition.judged
        if r.name in view.stacks
    ]
    if not view.awaited:
        kinds = [k for k in ("p_mean", "p_well", "p_kept") if k in known]
        rows.append({"what": ALL, "response": None} | {k: float(known[k]) for k in kinds})
    return pd.DataFrame(rows)


def joint(
    view: Assessment, axes: Axes | None = None, condition: pd.DataFrame | None = None
) -> Axes:
    """Draw the table of `joint_passes` as points from 0 to 1, with the required probability.

    Raises ValueError where nothing was read.
    """
    table = joint_passes(view, condition)
    definition = view.study.definition
    where = condition_text(definition, _there(view, condition).iloc[0].to_dict())
    told = f"{_place(view, condition)}: {where}"
    axes, new = one_panel(axes, "Chance to pass, by response", told)
    required = definition.required_probability
    for row, one in enumerate(table.to_dict("records")):
        axes.axhline(-row, color="#dfe4e6", linewidth=1, zorder=0)
        _points(axes, table, row)
        text = odds_text(_judged(definition.judged_by, one), required)
        axes.text(1.035, -row, text, va="center", fontsize=9.5, color=INK)
    axes.axvline(required, color=INK, linewidth=1, linestyle=(0, (4, 3)), zorder=1)
    name = f"required {chance_text(required)}"
    axes.text(required, 0.62, name, ha="center", fontsize=8.5, color=INK)
    axes.set(xlim=(-0.02, 1.0), ylim=(-len(table) + 0.4, 0.6), xlabel="Probability")
    axes.set_yticks(-np.arange(len(table)), [*table["what"]])
    dress(axes)
    axes.spines["left"].set_visible(False)
    axes.tick_params(axis="y", length=0, labelcolor=INK, colors=QUIET)
    return finish(axes, new)


def _points(axes: Axes, table: pd.DataFrame, row: int) -> None:
    """Mark the chances of one row of the table, each kind once in the legend."""
    for kind, label, marker, fill, above in _LOOKS:
        known = np.flatnonzero(table[kind].notna()) if kind in table else np.zeros(0)
        if row in known:
            axes.plot(
                [float(table[kind].iloc[row])],
                [above - row],
                linestyle="none",
                marker=marker,
                markersize=9,
                markerfacecolor=fill,
                markeredgecolor=LINE if marker == "o" else INK,
                markeredgewidth=1.5,
                label=label if row == known[0] else None,
                clip_on=False,
                zorder=3,
            )


def _there(view: Assessment, condition: pd.DataFrame | None) -> pd.DataFrame:
    names = [*view.study.definition.factor_names]
    if condition is None:
        return pd.DataFrame([view.window().setpoint[names].to_dict()])
    return condition[names].iloc[[0]]


def _place(view: Assessment, condition: pd.DataFrame | None) -> str:
    if condition is not None:
        return "At"
    word = best_word(view)
    return word[:1].upper() + word[1:]


def _judged(by: str, row: Mapping[Hashable, Any]) -> float:
    """Return the chance that is judged; of one response, which has no p_kept, that of a well."""
    if by == "kept" and "p_kept" in row and pd.notna(row["p_kept"]):
        return float(row["p_kept"])
    return float(row["p_mean"] if by == "mean" else row["p_well"])
