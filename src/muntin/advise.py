"""The main job: from completed wells to the next plate."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path

from muntin.bench.plan import Plan, propose
from muntin.design.weighing import Aim
from muntin.record import keep_stop_rule, open_study
from muntin.report.advice_files import (
    Place,
    find_place,
    hashes,
    json_text,
    read_inputs,
    versions,
    write_advice,
)
from muntin.report.cautions import cautions
from muntin.report.facts import Facts, plan_facts, records, standing_facts, study_facts
from muntin.report.figures import FORMATS, draw, saved
from muntin.report.forecast_figure import draw_forecast
from muntin.report.plan_files import plan_table_text
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


def advise(
    folder: str | Path,
    *,
    wells: int = 24,
    aim: Aim = "edge",
    surrogate: Surrogate = "stacked",
    engine: Engine = "fast",
    seed: int = 1,
    tell: Callable[[str], None] = lambda _: None,
    progress: bool = False,
) -> Advice:
    """Read a study, assess it, plan its next plate, and write the plan and the advice.

    wells counts test wells; `tell` hears the name of each step, or an empty one where the engine
    nuts shows a bar of its own, as it does with `progress`. Raises StudyFaults where the
    study, the number of wells or the folder is at fault, and then nothing is written.
    """
    tell("reading the study")
    study = open_study(folder)
    inputs = read_inputs(study.folder)

    tell("" if progress and engine == "nuts" else "fitting the readings")
    view = assess(study, surrogate=surrogate, engine=engine, seed=seed, progress=progress)
    window = None if view.fresh else view.window()

    tell("planning the next plate")
    plan = propose(view, wells=wells, aim=aim, seed=seed)
    plan_text = plan_table_text(study.definition, plan)
    place = find_place(study.folder, plan.plate, plan_text)

    tell("drawing and writing")
    facts: Facts = {
        "command": "advise",
        "written_at": datetime.now(UTC).isoformat(timespec="seconds"),
        "versions": versions(),
        "settings": {
            "wells": wells,
            "aim": aim,
            "surrogate": surrogate,
            "engine": engine,
            "seed": seed,
        },
        "inputs": hashes(inputs),
        "study": study_facts(study),
        **standing_facts(view, window),
        "plan": plan_facts(study, plan),
        "predicted": records(planned_readings(view, plan.wells)),
        "cautions": list(cautions(view)),
        "files": place.facts(),
    }
    figures = {"map": draw(view, window, plan.wells)}
    if not view.fresh:
        figures["forecast"] = draw_forecast(study, plan)
    drawn = {f"{n}.{form}": saved(f, form) for n, f in figures.items() for form in FORMATS}
    copies = {f"inputs/{name}": content for name, content in inputs.items()}
    write_advice(place, plan_text, {"advice.json": json_text(facts), **drawn, **copies})
    keep_stop_rule(study)
    return Advice(view=view, window=window, plan=plan, facts=facts, place=place)
