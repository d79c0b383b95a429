"""What a page rests on: the study's assessment, its window, its next plate, and their facts."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

from muntin.record.definition import Definition
from muntin.record.study import Study
from muntin.report.drawn import Drawn
from muntin.report.facts import Facts
from muntin.report.page.put_back import PutBack
from muntin.window.assessment import Assessment
from muntin.window.handover import HandOver
from muntin.window.window import Window

if TYPE_CHECKING:
    from muntin.bench.plan import Plan


@dataclass(frozen=True, kw_only=True, eq=False)
class Basis:
    """All that the sections are written from.

    window is None while nothing was read; plan is None where no plate can be planned, and
    `unplanned` says why. handed: the window in ranges, None where the data support none. put_back:
    what the study says with everything that was left out, None where nothing was. drawn: the
    figures by name. facts: the same as plain values, with settings, versions and inputs.
    """

    view: Assessment
    window: Window | None
    plan: Plan | None
    unplanned: tuple[str, ...]
    handed: HandOver | None
    put_back: PutBack | None
    drawn: Mapping[str, Drawn]
    facts: Facts

    @property
    def study(self) -> Study:
        """The study."""
        return self.view.study

    @property
    def definition(self) -> Definition:
        """The study's definition."""
        return self.view.study.definition

    @property
    def standing(self) -> Window | None:
        """The window where the data support it, else None."""
        return None if self.window is None or self.window.unsupported else self.window

    @property
    def ranges(self) -> dict[str, tuple[object, object]] | None:
        """The ranges around the set point that hold together, if there are some."""
        if self.handed is not None:
            return None if self.handed.box is None else self.handed.box.ranges
        return None if self.standing is None else self.standing.ranges

    def figures(self, *names: str) -> tuple[Drawn, ...]:
        """Return those of the named figures that were drawn; "factor-" names all that begin so."""
        return tuple(
            figure
            for name in names
            for key, figure in self.drawn.items()
            if key == name or (name.endswith("-") and key.startswith(name))
        )
