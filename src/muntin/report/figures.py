"""The figures of an advice: which one a study needs, and how it is saved."""

from __future__ import annotations

import io
from typing import TYPE_CHECKING

import pandas as pd

from muntin.report.line import draw_line
from muntin.report.map import draw_map, map_factors
from muntin.report.slices import draw_slices
from muntin.report.verdicts import verdicts
from muntin.report.words import UNSUPPORTED, WINDOW, labels, reach_text
from muntin.window.assessment import Assessment
from muntin.window.window import Window

if TYPE_CHECKING:
    from matplotlib.figure import Figure

FORMATS = ("png", "svg")


def draw(view: Assessment, window: Window | None, wells: pd.DataFrame | None = None) -> Figure:
    """Draw where the study stands and what is proposed.

    Two factors with a range make a map (a panel a choice, up to four), one a line with its
    interval, all others a panel a factor. window is None while nothing was read; wells is the
    plan's table, or None. A window that the data do not support is not drawn, only the wells.
    """
    definition = view.study.definition
    run, proposed = verdicts(view.study), proposed_conditions(view, wells)
    titles = figure_titles(view, window)
    window = None if window is None or window.unsupported else window
    if map_factors(definition) is not None:
        return draw_map(definition, window, run, proposed, titles)
    if not view.fresh and len(definition.factors) == 1 and definition.factors[0].continuous:
        return draw_line(view, window, proposed, titles)
    return draw_slices(view, window, run, proposed, titles)


def proposed_conditions(view: Assessment, wells: pd.DataFrame | None) -> pd.DataFrame:
    """Return the conditions of a plan to run, a row each, with the number of wells, and whether
    none of them is a test well.
    """
    names = list(view.study.definition.factor_names)
    if wells is None:
        return pd.DataFrame({name: [] for name in [*names, "wells", "bridging"]})
    run = wells[wells["role"].isin(["test", "bridge", "reference"])]
    tying = run.assign(bridging=run["role"] != "test").groupby(names, sort=False)["bridging"]
    return tying.agg(wells="size", bridging="all").reset_index()


def figure_titles(view: Assessment, window: Window | None) -> tuple[str, str]:
    """Return the study's title, and what of its range the window takes."""
    return view.study.definition.title, _subtitle(view, window)


def _subtitle(view: Assessment, window: Window | None) -> str:
    definition = view.study.definition
    if window is None:
        return "Nothing has been read yet: the opening plate"
    name = WINDOW[:1].upper() + WINDOW[1:]
    if window.unsupported:
        return f"{name}: {UNSUPPORTED}"
    alone = tuple(r.name for r in definition.judged if r.name not in view.awaited)
    of = f"{labels(definition, alone)} alone, provisional: " if view.awaited else ""
    return f"{name}: {of}{reach_text(definition, window.share)}"


def saved(figure: Figure, form: str, dpi: float | None = None) -> bytes:
    """Return a figure as the bytes of a "png" or "svg" file, the same whenever it is drawn.

    dpi: dots an inch of a "png", those of the figure where None.
    """
    import matplotlib as mpl

    stream = io.BytesIO()
    metadata = {"Software": None} if form == "png" else {"Date": None}
    with mpl.rc_context({"svg.hashsalt": "muntin", "svg.fonttype": "path"}):
        figure.savefig(stream, format=form, metadata=metadata, dpi=dpi or "figure")
    return stream.getvalue()
