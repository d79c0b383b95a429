"""Lines of text as pages in A4, and figures as one PDF."""

from __future__ import annotations

import io
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from muntin.report.style import INK, PAPER

if TYPE_CHECKING:
    from matplotlib.figure import Figure

_A4 = (8.27, 11.69)  # inches
_LINES, _MOST_LINES = 58, 62
_LEFT, _TOP, _LEADING, _SIZE = 0.85, 10.95, 0.174, 9.0


def text_pages(lines: Sequence[str]) -> list[Figure]:
    """Return pages, the long side up, that show lines of at most 84 signs in type of one width."""
    from matplotlib.figure import Figure

    pages, most = _pages(lines, _LINES), _LINES
    for closer in range(_LINES + 1, _MOST_LINES + 1):
        # A last page of a few lines is spared by setting all a little closer.
        if len(fewer := _pages(lines, closer)) < len(pages):
            pages, most = fewer, closer
            break
    leading = _LEADING * _LINES / most
    figures = []
    for number, page in enumerate(pages, start=1):
        figure = Figure(figsize=_A4, facecolor=PAPER)
        for row, line in enumerate(page):
            y = (_TOP - row * leading) / _A4[1]
            weight = "bold" if line.isupper() else "normal"
            style: dict[str, Any] = {
                "family": "monospace",
                "fontsize": _SIZE,
                "color": INK,
                "fontweight": weight,
            }
            figure.text(_LEFT / _A4[0], y, line, va="top", parse_math=False, **style)
        foot = f"page {number} of {len(pages)}"
        figure.text(1 - _LEFT / _A4[0], 0.04, foot, ha="right", fontsize=8.5, color=INK)
        figures.append(figure)
    return figures


def _pages(lines: Sequence[str], most: int) -> list[list[str]]:
    """The lines of each page; a heading does not stand alone at the foot of one."""
    pages: list[list[str]] = [[]]
    for at, line in enumerate(lines):
        room = most - len(pages[-1])
        if room < 1 or (room < 4 and line.isupper() and at):
            pages.append([])
        if line or pages[-1]:
            pages[-1].append(line)
    return pages


def pdf_of(figures: Sequence[Figure]) -> bytes:
    """Return figures as the pages of a PDF file, the same bytes whenever it is drawn."""
    from matplotlib.backends.backend_pdf import PdfPages

    stream = io.BytesIO()
    with PdfPages(stream, metadata={"CreationDate": None}) as pages:
        for figure in figures:
            pages.savefig(figure)
    return stream.getvalue()
