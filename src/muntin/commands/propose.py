"""`muntin propose`: what do I run next?"""

from __future__ import annotations

from muntin.commands.shared import (
    Aim,
    AimOption,
    Engine,
    EngineOption,
    Folder,
    Output,
    Surrogate,
    SurrogateOption,
    Tell,
    Wells,
    command,
)


@command
def propose(
    folder: Folder,
    seed: int,
    tell: Tell,
    wells: Wells = 24,
    aim: AimOption = Aim.edge,
    surrogate: SurrogateOption = Surrogate.stacked,
    engine: EngineOption = Engine.fast,
) -> Output:
    """Plan the next plate: conditions at final wells, each with a reason; write it to plans/."""
    from muntin.bench.plan import propose as plan_next
    from muntin.record import keep_stop_rule, open_study
    from muntin.report.facts import plan_facts, study_facts
    from muntin.report.plan_files import plan_table_text, write_plan
    from muntin.report.text import propose_screen
    from muntin.window.assessment import assess

    tell("reading the study")
    study = open_study(folder)
    bar = tell.fitting(engine)
    view = assess(study, surrogate=surrogate.value, engine=engine.value, seed=seed, progress=bar)
    tell("planning the next plate")
    plan = plan_next(view, wells=wells, aim=aim.value, seed=seed)
    path, remark = write_plan(study.folder, plan.plate, plan_table_text(study.definition, plan))
    keep_stop_rule(study)
    facts = {
        "command": "propose",
        "settings": {
            "wells": wells,
            "aim": aim.value,
            "surrogate": surrogate.value,
            "engine": engine.value,
            "seed": seed,
        },
        "study": study_facts(study),
        "plan": plan_facts(study, plan),
        "files": {"plan": str(path), "remark": remark},
    }
    return Output(facts, propose_screen(view, plan, path, remark))
