"""A screen as the lines that a terminal of 100 columns shows."""

from __future__ import annotations

import io

from rich.console import Console, RenderableType


def shown(screen: RenderableType) -> list[str]:
    """The lines, without blanks at their ends."""
    stream = io.StringIO()
    Console(width=100, file=stream, highlight=False, markup=False).print(screen)
    return [line.rstrip() for line in stream.getvalue().splitlines()]
