"""A figure as what a page and a folder of files need: SVG text, PNG bytes, words, panels."""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

from muntin.report.figures import saved

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

# 1920 pixels across a slide of 16:9.
_SLIDE_DPI = 240


@dataclass(frozen=True, kw_only=True)
class Frame:
    """Where a panel lies in its picture, and what its axes show.

    left, top, width, height: shares of the picture's width and height, from its upper left corner.
    x, y: names of the factors; x_ends, y_ends: their values at the panel's ends, raw units; x_log,
    y_log: whether an axis is logarithmic; held: the other factors' values in this panel.
    """

    left: float
    top: float
    width: float
    height: float
    x: str
    y: str
    x_ends: tuple[float, float]
    y_ends: tuple[float, float]
    x_log: bool
    y_log: bool
    held: dict[str, object]


@dataclass(frozen=True, kw_only=True)
class Drawn:
    """One figure of a report.

    name: stem of its files. title: what it shows, in a line. says: what is to be seen, in words,
    for those who cannot see it. svg: the whole element, letters as paths, every id beginning with
    the name, so that several stand on one page; no XML declaration before it. png: 1920 pixels
    wide, of about the shape of a slide. frames: the panels of a map, else empty.
    """

    name: str
    title: str
    says: str
    svg: str
    png: bytes
    frames: tuple[Frame, ...] = ()


def drawn(
    figure: Figure,
    name: str,
    says: str,
    frames: Callable[[], tuple[Frame, ...]] = tuple,
    slide: Figure | None = None,
) -> Drawn:
    """Return a figure as text and bytes, the same whenever it is drawn.

    frames: gives the panels' places; asked once the SVG is drawn, which lays them out. slide: the
    same in the shape of a slide, where the figure of the page has another.
    """
    title = figure.get_suptitle().splitlines()[:1]
    svg = inline_svg(saved(figure, "svg").decode(), name)
    placed = frames()
    return Drawn(
        name=name,
        title=title[0] if title else "",
        says=says,
        svg=svg,
        png=saved(slide or figure, "png", dpi=_SLIDE_DPI),
        frames=placed,
    )


def inline_svg(text: str, name: str) -> str:
    """Return the svg element of an SVG file, its ids and what refers to them begun by a name."""
    body = text[text.index("<svg") :].strip()
    body = re.sub(r"<metadata>.*?</metadata>\s*", "", body, flags=re.DOTALL)
    body = re.sub(r'\bid="', f'id="{name}-', body)
    body = re.sub(r'href="#', f'href="#{name}-', body)
    return body.replace("url(#", f"url(#{name}-")


def frame_of(axes: Axes, x: str, y: str, held: dict[str, object]) -> Frame:
    """Return where a panel of two factors lies, its figure drawn before."""
    box = axes.get_position()
    left, right = axes.get_xlim()
    low, high = axes.get_ylim()
    return Frame(
        left=float(box.x0),
        top=float(1.0 - box.y1),
        width=float(box.width),
        height=float(box.height),
        x=x,
        y=y,
        x_ends=(float(left), float(right)),
        y_ends=(float(low), float(high)),
        x_log=axes.get_xscale() == "log",
        y_log=axes.get_yscale() == "log",
        held=held,
    )
