"""Where a figure is drawn: on axes that the user gives, or on a new figure that shows itself."""

from __future__ import annotations

import io
from collections.abc import Sequence
from functools import cache
from typing import TYPE_CHECKING

from muntin.report.markers import figure_legend
from muntin.report.style import INK, SLIDE, new_figure

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_SHOWN_DPI = 110


class Panels(tuple["Axes", ...]):
    """The axes of one figure with several panels; in a notebook it shows the figure."""

    def _repr_png_(self) -> bytes:
        return _png(_figure(self[0]))


def blank(
    title: str,
    subtitle: str = "",
    height: float = SLIDE,
    *,
    rows: int = 1,
    columns: int = 1,
    shared: bool = False,
) -> tuple[Figure, Panels]:
    """Return a new figure with its panels, row by row; pyplot does not know of it.

    shared: whether the panels share both axes.

    As the last value of a notebook's cell a panel shows its whole figure.
    """
    figure = new_figure(height, title, subtitle)
    kind = {"axes_class": _panel_class()}
    grid = figure.subplots(
        rows, columns, squeeze=False, subplot_kw=kind, sharex=shared, sharey=shared
    )
    return figure, Panels(grid.flat)


def one_panel(axes: Axes | None, title: str, subtitle: str = "") -> tuple[Axes, bool]:
    """Return the axes given, with the title above them, or those of a new figure; and whether it is
    new.
    """
    if axes is None:
        return blank(title, subtitle)[1][0], True
    axes.set_title(title, loc="left", fontsize=10, color=INK)
    return axes, False


def finish(axes: Axes, new: bool) -> Axes:
    """Put the legend below a new figure, or into the axes that were given; return the axes."""
    if new:
        figure_legend(_figure(axes), [axes])
    else:
        found = axes.get_legend_handles_labels()
        if found[0]:
            axes.legend(*found, loc="best", frameon=False, fontsize=8, labelcolor=INK)
    return axes


def given_panels(axes: Sequence[Axes], wanted: int) -> Panels:
    """Return the axes given. Raises ValueError where they are not as many as there are panels."""
    if len(axes) != wanted:
        raise ValueError(f"this figure has {wanted} panels, and {len(axes)} axes were given")
    return Panels(axes)


@cache
def _panel_class() -> type[Axes]:
    from matplotlib.axes import Axes

    class Panel(Axes):
        """Axes that show their whole figure in a notebook."""

        def _repr_png_(self) -> bytes:
            return _png(_figure(self))

    return Panel


def _figure(axes: Axes) -> Figure:
    figure = axes.get_figure(root=True)
    assert figure is not None
    return figure


def _png(figure: Figure) -> bytes:
    stream = io.BytesIO()
    figure.savefig(stream, format="png", dpi=_SHOWN_DPI)
    return stream.getvalue()
