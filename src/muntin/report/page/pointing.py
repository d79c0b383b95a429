"""What a map tells when it is pointed at: each panel's conditions with their probabilities."""

from __future__ import annotations

from typing import Any

import pandas as pd

from muntin.record.definition import Definition
from muntin.report.drawn import Drawn, Frame
from muntin.window.window import Window


def pointed_at(definition: Definition, window: Window | None, figure: Drawn) -> dict[str, Any]:
    """Return the panels of a map as plain values; empty where it has none or nothing is known.

    says: what the probability is of. panels: left, top, width, height in shares of the picture; x
    and y with label, unit, ends, whether log, levels and their texts; held: what else is fixed, in
    words; p: probability in per mille, a row a level of y, None where a limit forbids it.
    """
    if window is None or not figure.frames:
        return {}
    says = "the process mean passes" if definition.judged_by == "mean" else "new wells pass"
    return {
        "says": says,
        "chance": definition.judged_by == "mean",
        "panels": [_panel(definition, window.grid, frame) for frame in figure.frames],
    }


def _panel(definition: Definition, grid: pd.DataFrame, frame: Frame) -> dict[str, Any]:
    here = grid
    for name, value in frame.held.items():
        here = here[here[name] == value]
    table = here.pivot_table(index=frame.y, columns=frame.x, values="probability", sort=True)
    factors = {f.name: f for f in definition.factors}
    held = [factors[name].named(factors[name].shown(v)) for name, v in frame.held.items()]
    sides = ((frame.x, frame.x_ends, frame.x_log), (frame.y, frame.y_ends, frame.y_log))
    axes = []
    for (name, ends, log), levels in zip(sides, (table.columns, table.index), strict=True):
        factor = factors[name]
        axes.append(
            {
                "ends": list(ends),
                "log": log,
                "levels": [float(v) for v in levels],
                "texts": [
                    f"{factor.named(factor.shown(v))} {factor.unit}".rstrip() for v in levels
                ],
            }
        )
    return {
        "box": [frame.left, frame.top, frame.width, frame.height],
        "x": axes[0],
        "y": axes[1],
        "held": held,
        "p": [[None if pd.isna(p) else round(1000 * p) for p in row] for row in table.to_numpy()],
    }
