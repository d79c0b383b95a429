"""The main job: from completed wells to the next plate."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import asdict, dataclass, replace
from pathlib import Path

from muntin.bench.plan import Plan, check_plan, propose
from muntin.design.weighing import Aim
from muntin.record import Study, open_study
from muntin.record.entries import check_reason, entry_for, with_reason
from muntin.record.inputs import hashes, read_inputs, versions
from muntin.record.ledger import Entry
from muntin.record.study import stop_file
from muntin.record.writing import writing
from muntin.report.advice_files import Place, advice_files, find_place, json_text
from muntin.report.cautions import cautions
from muntin.report.facts import Facts, plan_facts, records, standing_facts, study_facts
from muntin.report.figures import FORMATS, draw, saved
from muntin.report.forecast_figure import draw_forecast
from muntin.report.plan_files import plan_table_text
from muntin.report.ruling_text import decision_facts
from muntin.window.assessment import Assessment, Surrogate, assess
from muntin.window.engine import Engine
from muntin.window.new_wells import planned_readings
from muntin.window.window import Window


@dataclass(frozen=True, kw_only=True, eq=False)
class Advice:
    """Where a study stands and what comes next.

    window is None while nothing has been read; facts hold all of it as plain values; place is
    where it was written.
    """

    view: Assessment
    window: Window | None
    plan: Plan
    facts: Facts
    place: Place


@dataclass(frozen=True, kw_only=True)
class AdviceSettings:
    """What an advice was asked: test wells, what they are for, surrogate, engine and seed."""

    wells: int = 24
    aim: Aim = "edge"
    surrogate: Surrogate = "stacked"
    engine: Engine = "fast"
    seed: int = 1


@dataclass(frozen=True, kw_only=True, eq=False)
class Found:
    """What an advice says of a study, before any of it is written."""

    view: Assessment
    window: Window | None
    plan: Plan
    facts: Facts


def advise(
    folder: str | Path,
    *,
    wells: int = 24,
    aim: Aim = "edge",
    surrogate: Surrogate = "stacked",
    engine: Engine = "fast",
    seed: int = 1,
    by: str | None = None,
    because: str | None = None,
    tell: Callable[[str], None] = lambda _: None,
    progress: bool = False,
) -> Advice:
    """Read a study, assess it, plan its next plate, and write the plan and the advice.

    wells counts test wells; by is who asks, because why what earlier advice rested on was changed,
    both for the ledger; `tell` hears the name of each step, or an empty one where the engine
    nuts shows a bar of its own, as it does with `progress`. Raises StudyFaults where the
    study, the number of wells or the folder is at fault, and then nothing is written.
    """
    settings = AdviceSettings(wells=wells, aim=aim, surrogate=surrogate, engine=engine, seed=seed)
    tell("reading the study")
    study = open_study(folder)
    check_reason(study, "advise", by, because)
    study = with_reason(study, by, because)
    inputs = read_inputs(study.folder)
    found = find(study, settings, tell=tell, progress=progress)

    tell("drawing and writing")
    drawn = _drawn(study, found)
    facts: Facts = {
        "command": "advise",
        "written_at": "",
        "by": by,
        "versions": versions(),
        "settings": asdict(settings),
        "inputs": hashes(inputs),
        "changes": {"said": list(study.changes.sentences), "because": because},
        **found.facts,
    }
    entry = entry_for(
        study,
        "advise",
        asdict(settings),
        seed=seed,
        by=by,
        because=because,
        inputs=facts["inputs"],
        decision=decision_facts(found.plan),
    )
    place, facts = _write(study, found.plan, facts, {**drawn, **_copies(inputs)}, entry)
    return Advice(view=found.view, window=found.window, plan=found.plan, facts=facts, place=place)


def find(
    study: Study,
    settings: AdviceSettings,
    *,
    tell: Callable[[str], None] = lambda _: None,
    progress: bool = False,
) -> Found:
    """Assess a study and plan its next plate; nothing is written. Raises StudyFaults."""
    engine, seed = settings.engine, settings.seed
    check_plan(study, settings.wells)
    tell("" if progress and engine == "nuts" else "fitting the readings")
    view = assess(study, surrogate=settings.surrogate, engine=engine, seed=seed, progress=progress)
    window = None if view.fresh else view.window()
    tell("planning the next plate")
    plan = propose(view, wells=settings.wells, aim=settings.aim, seed=seed)
    facts: Facts = {
        "study": study_facts(study),
        **standing_facts(view, window),
        "plan": plan_facts(study, plan),
        "predicted": records(planned_readings(view, plan.wells)),
        "cautions": list(cautions(view)),
    }
    return Found(view=view, window=window, plan=plan, facts=facts)


def _drawn(study: Study, found: Found) -> dict[str, bytes]:
    """The figures by name of file."""
    figures = {"map": draw(found.view, found.window, found.plan.wells)}
    if not found.view.fresh:
        figures["forecast"] = draw_forecast(study, found.plan)
    return {f"{n}.{form}": saved(f, form) for n, f in figures.items() for form in FORMATS}


def _copies(inputs: Mapping[str, bytes]) -> dict[str, bytes]:
    return {f"inputs/{name}": content for name, content in inputs.items()}


def _write(
    study: Study, plan: Plan, facts: Facts, files: Mapping[str, bytes], entry: Entry
) -> tuple[Place, Facts]:
    """Write the advice, the plan and the line of the ledger at once; return where, and the facts
    as written.
    """
    text = plan_table_text(study.definition, plan)
    with writing(study.folder) as pen:
        place = find_place(study.folder, plan.plate, text)
        remark = " ".join([*pen.remarks, place.remark]).strip()
        place = replace(place, remark=remark)
        ledger = {"line": pen.ledger.next_number, "before": pen.ledger.last_hash}
        facts = {**facts, "written_at": pen.moment, "files": place.facts(), "ledger": ledger}
        kept: dict[str, str | bytes] = {"advice.json": json_text(facts), **files}
        pen.commit({**advice_files(place, text, kept), **stop_file(study)}, entry)
    return place, facts
