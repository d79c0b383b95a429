"""How an assessment and a window show themselves in a notebook."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from muntin.record.faults import counted, number
from muntin.record.notebook import card

if TYPE_CHECKING:
    from muntin.window.assessment import Assessment
    from muntin.window.window import Window

_TITLE = "Predicted operating window (plate scale)"
_NAMES = {"gp": "Gaussian process", "quadratic": "quadratic"}


def assessment_card(view: Assessment) -> str:
    """Return what was fitted; window and checks only where they were made already, since making
    them may take a while.
    """
    labels = {r.name: r.label for r in view.study.definition.responses}
    fits = []
    for name, stack in view.stacks.items():
        shares = zip(stack.fits, stack.shares, strict=True)
        told = ", ".join(f"{_NAMES[fit.name]} {100 * share:.0f} %" for fit, share in shares)
        fits.append(f"{labels[name]}: {counted(len(stack.fits[0].loo.mean), 'reading')}; {told}")
    if view.fresh:
        fits.append("nothing judged has been read yet: the priors speak")
    made: dict[str, Any] = vars(view)
    window, checks = made.get("_window"), made.get("_checks")
    rows: list[tuple[str, Any]] = [
        ("Engine", f"{view.engine}, seed {view.seed}"),
        ("Fits", fits),
        ("Awaited", ", ".join(labels[name] for name in view.awaited)),
        ("Checks", _checks_text(checks) if checks is not None else "view.checks() makes them"),
        ("Window", _standing(window) if window is not None else "view.window() makes it"),
    ]
    return card(f"Assessment: {view.study.definition.title}", rows)


def window_card(window: Window) -> str:
    """Return the window's share, set point and ranges; factors by their names, raw units."""
    if window.unsupported:
        return card(_TITLE, [("Not supported by the data", window.unsupported)])
    names = [name for name in window.setpoint.index if name != "probability"]
    table = pd.DataFrame(
        [
            {
                "factor": name,
                "set point" if window.share else "best so far": _shown(window.setpoint[name]),
                "low": "" if window.ranges is None else _shown(window.ranges[name][0]),
                "high": "" if window.ranges is None else _shown(window.ranges[name][1]),
            }
            for name in names
        ]
    )
    rows = [
        ("Share of the range inside", f"{100 * window.share:.1f} %"),
        ("May still be called wrongly", f"{100 * window.wrong_share:.1f} %"),
        ("Highest probability", f"{float(window.setpoint['probability']):.3f}"),
        ("Conditions judged", str(len(window.grid))),
    ]
    return card(_TITLE, rows, table)


def assessment_line(view: Assessment) -> str:
    """Return an assessment as it shows itself in a console, in a line."""
    read = ", ".join(view.stacks) or "nothing read"
    title = view.study.definition.title
    return (
        f"Assessment({title!r}, {view.surrogate}, engine {view.engine}, seed {view.seed}: {read})"
    )


def window_line(window: Window) -> str:
    """Return a window as it shows itself in a console, in a line."""
    point = ", ".join(
        f"{name} {_shown(value)}"
        for name, value in window.setpoint.items()
        if name != "probability"
    )
    best = "set point" if window.share else "best so far"
    return f"Window({_standing(window)}; {best}: {point})"


def _standing(window: Window) -> str:
    if window.unsupported:
        return "not supported by the data"
    return f"{100 * window.share:.1f} % of the range"


def _checks_text(checks: tuple[Any, ...]) -> list[str]:
    failed = [check.sentence for check in checks if check.serious and not check.passed]
    return failed or [f"{counted(len(checks), 'check')}, none failed that is serious"]


def _shown(value: Any) -> str:
    if isinstance(value, int | float | np.integer | np.floating):
        return number(float(value))
    return str(value)
