"""The screen of `muntin report`."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from rich.console import RenderableType

from muntin.record.study import Study
from muntin.report.page.build import Page
from muntin.report.text import sheet


def page_screen(page: Page, study: Study, written: Sequence[Path]) -> RenderableType:
    """Return the answer, what was changed without a reason, and where the page, its record and its
    figures lie.
    """
    html, record, *figures = written
    count = f"{len(figures)} figures for slides" if len(figures) != 1 else "1 figure for slides"
    places = [f"{html}: the page", f"{record}: its numbers"]
    if figures:
        places.append(f"{figures[0].parent}: {count}")
    return sheet(
        page.basis.definition.title,
        [
            ("Noted", [said for said in (study.changes.notice, study.stopping.notice) if said]),
            ("Answer", page.facts["answer"]),
            ("Written", places),
        ],
    )
