"""A study's page, from its assessment to its sections."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import TYPE_CHECKING

from muntin.record.faults import StudyFaults
from muntin.report.advice_files import hashes, versions
from muntin.report.cautions import cautions
from muntin.report.drawn import Drawn
from muntin.report.every_figure import report_figures
from muntin.report.facts import Facts, changes_facts, plan_facts, standing_facts, study_facts
from muntin.report.handover_text import handover_facts
from muntin.report.page.ahead_sections import next_section, protein_section
from muntin.report.page.answer import answer, standing_word
from muntin.report.page.basis import Basis
from muntin.report.page.blocks import Section
from muntin.report.page.evidence_sections import (
    checks_section,
    left_out_section,
    plates_section,
    predicted_section,
)
from muntin.report.page.handover_section import handover_section
from muntin.report.page.html import page_html
from muntin.report.page.put_back import put_back
from muntin.report.page.record_sections import (
    cautions_section,
    changes_section,
    data_section,
    provenance_section,
)
from muntin.report.page.standing_sections import conditional, responses_section, window_section
from muntin.window.assessment import Assessment

if TYPE_CHECKING:
    from muntin.bench.plan import Plan
    from muntin.design.weighing import Aim

_SECTIONS: tuple[Callable[[Basis], Section], ...] = (
    conditional,
    window_section,
    handover_section,
    responses_section,
    next_section,
    predicted_section,
    plates_section,
    checks_section,
    left_out_section,
    protein_section,
    data_section,
    changes_section,
    cautions_section,
    provenance_section,
)


@dataclass(frozen=True, kw_only=True, eq=False)
class Page:
    """A page: its HTML, its figures, what it says as plain values, and what it was written from."""

    html: str
    figures: tuple[Drawn, ...]
    facts: Facts
    basis: Basis


def plan_or_reasons(
    view: Assessment, wells: int, aim: Aim, seed: int
) -> tuple[Plan | None, tuple[str, ...]]:
    """Return the next plate; or None, and why none can be planned: a report goes without one."""
    from muntin.bench.plan import propose

    try:
        return propose(view, wells=wells, aim=aim, seed=seed), ()
    except StudyFaults as faults:
        return None, tuple(faults.lines())


def build_page(
    view: Assessment,
    plan: Plan | None,
    *,
    unplanned: Iterable[str] = (),
    settings: Facts | None = None,
    inputs: dict[str, bytes] | None = None,
    by: str | None = None,
    tell: Callable[[str], None] = lambda _: None,
) -> Page:
    """Return the page of a study.

    plan: its next plate, or None with `unplanned`, the reasons. settings: what the command was
    given, and by whom; inputs: the study's files as they were read, whose hashes the page shows.
    `tell` hears the name of each step.
    """
    window = None if view.fresh else view.window()
    tell("judging the ranges to hand over")
    handed = None if window is None or window.unsupported else view.handover()
    tell("putting back what was left out")
    back = put_back(view)
    tell("drawing the figures")
    drawn = {figure.name: figure for figure in report_figures(view, plan)}
    facts: Facts = {
        "command": "report",
        "written_at": datetime.now(UTC).isoformat(timespec="seconds"),
        "by": by,
        "versions": versions(),
        "settings": settings or {},
        "inputs": hashes(inputs or {}),
        "changes": changes_facts(view.study),
        "study": study_facts(view.study),
        **standing_facts(view, window),
        "plan": None if plan is None else plan_facts(view.study, plan),
        "unplanned": list(unplanned),
        **({} if handed is None else {"handover": handover_facts(view.study.definition, handed)}),
        "put_back": None if back is None else back.facts(),
        "cautions": list(cautions(view)),
    }
    basis = Basis(
        view=view,
        window=window,
        plan=plan,
        unplanned=tuple(unplanned),
        handed=handed,
        put_back=back,
        drawn=drawn,
        facts=facts,
    )
    facts |= {"standing": standing_word(basis), "answer": list(answer(basis))}
    sections = [section for make in _SECTIONS if not (section := make(basis)).empty]
    html = page_html(basis, sections)
    shown = tuple(figure for section in sections for figure in section.figures)
    return Page(html=html, figures=shown, facts=facts, basis=basis)
