"""Where a figure is drawn: on axes that the user gives, or on a new figure that shows itself."""

from __future__ import annotations

import io
import textwrap
from collections.abc import Sequence
from functools import cache
from typing import TYPE_CHECKING, Any

from muntin.report.markers import figure_legend
from muntin.report.style import INK, PAPER, SLIDE, new_figure

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from matplotlib.transforms import Transform

_SHOWN_DPI = 110
# Inches that a letter takes of a title and of a legend, and a legend's handle; points below axes.
_TITLE, _LETTER, _HANDLE, _BELOW = 0.08, 0.064, 0.6, 4


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


def one_panel(
    axes: Axes | None, title: str, subtitle: str = "", height: float = SLIDE
) -> tuple[Axes, bool]:
    """Return the axes given, with the title above them, or those of a new figure of so many inches;
    and whether it is new.
    """
    if axes is None:
        return blank(title, subtitle, height)[1][0], True
    axes.set_title(_within(title, _width(axes) / _TITLE), loc="left", fontsize=10, color=INK)
    return axes, False


def finish(axes: Axes, new: bool) -> Axes:
    """Put the legend below a new figure, or with the axes that were given; return the axes.

    Where the figure makes room for what lies outside its axes the legend lies below them, else
    within them. Its lines are broken so that it is no wider than they are before the layout.
    """
    if new:
        figure_legend(_figure(axes), [axes])
        return axes
    handles, labels = axes.get_legend_handles_labels()
    if not handles:
        return axes
    if _figure(axes).get_layout_engine() is None:
        place: dict[str, Any] = {"loc": "best", "frameon": True, "facecolor": PAPER}
        place |= {"edgecolor": "none", "framealpha": 0.85}
    else:
        place = {"loc": "upper left", "frameon": False, "borderaxespad": 0.0, "borderpad": 0.0}
        place |= {"bbox_to_anchor": (0.0, 0.0), "bbox_transform": _below(axes)}
    width = _width(axes)
    room = width / _LETTER - _HANDLE / _LETTER
    labels = [_within(str(label), room) for label in labels]
    longest = max(len(line) for label in labels for line in label.splitlines())
    columns = 1
    if "bbox_to_anchor" in place:
        columns = max(1, int(width // (_HANDLE + _LETTER * longest)))
    axes.legend(handles, labels, fontsize=8, labelcolor=INK, ncols=columns, **place)
    return axes


def _below(axes: Axes) -> Transform:
    """Coordinates of the axes, moved below their ticks and the label of x."""
    from matplotlib.transforms import ScaledTranslation

    figure = _figure(axes)
    shown = axes.get_tightbbox()
    deep = 0.0 if shown is None else (axes.get_window_extent().y0 - shown.y0) / figure.dpi
    down = ScaledTranslation(0.0, -deep - _BELOW / 72.0, figure.dpi_scale_trans)
    return axes.transAxes + down


def _width(axes: Axes) -> float:
    """Width of the axes in inches, as they lie before the figure is laid out."""
    return float(axes.get_window_extent().width / _figure(axes).dpi)


def _within(text: str, letters: float) -> str:
    """The text broken into lines of so many letters, 16 at least."""
    return textwrap.fill(text, max(16, int(letters)))


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
