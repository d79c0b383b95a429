"""The answer in three sentences, and the word that stands above it."""

from __future__ import annotations

from muntin.bench.plan import Plan
from muntin.report.page.basis import Basis
from muntin.report.page.phrases import targets_text
from muntin.report.plan_text import plan_heading
from muntin.report.ruling_text import ruling_line
from muntin.report.words import (
    JUDGED_BY,
    UNSUPPORTED,
    WINDOW,
    chance_text,
    condition_text,
    labels,
    range_ends_text,
    ranges_text,
    share_text,
    success_text,
)
from muntin.window.window import Window


def standing_word(basis: Basis) -> str:
    """Return where the study stands in one or a few words."""
    window = basis.window
    if window is None:
        return "Nothing read yet"
    if window.unsupported:
        return "Not supported by the data"
    if basis.view.awaited:
        return "Provisional"
    return "Window found" if window.share else "No window yet"


def answer(basis: Basis) -> tuple[str, str, str]:
    """Return what holds, how sure that is, and what comes next."""
    window = basis.window
    if window is None:
        return (*_fresh(basis), _next(basis))
    if window.unsupported:
        return (*_unsupported(window), _next(basis))
    return (_holds(basis, window), _sure(basis, window), _next(basis))


def _fresh(basis: Basis) -> tuple[str, str]:
    definition = basis.definition
    required = chance_text(definition.required_probability)
    return (
        "Nothing has been read yet, so there is no window.",
        f"The study asks for {targets_text(definition)}, with a probability of {required} "
        f"{JUDGED_BY[definition.judged_by]}.",
    )


def _unsupported(window: Window) -> tuple[str, str]:
    rest = len(window.unsupported) - 1
    more = f" ({rest} more below)" if rest else ""
    return (
        f"The {WINDOW} is {UNSUPPORTED}, so no set point is given.",
        f"{window.unsupported[0]}{more}",
    )


def _holds(basis: Basis, window: Window) -> str:
    definition, view = basis.definition, basis.view
    targets = targets_text(definition, view.awaited)
    passes = success_text(definition, float(window.setpoint["probability"]))
    where = condition_text(
        definition, window.setpoint.to_dict(), kept=definition.judged_by == "kept"
    )
    ends = range_ends_text(definition, window.setpoint.to_dict())
    ends = f"; {ends}" if ends else ""
    early = ""
    if view.awaited:
        early = f"Provisional, as {labels(definition, view.awaited)} is not read yet: "
    if window.share:
        return f"{early}{where}: {passes} ({targets}){ends}."
    required = chance_text(definition.required_probability)
    no = f"no condition reaches the required probability of {required} ({targets})"
    best = f"the best so far is {where}, where {passes}{ends}"
    return f"{early}{no if early else no[:1].upper() + no[1:]}; {best}."


def _sure(basis: Basis, window: Window) -> str:
    definition = basis.definition
    wrong = f"{share_text(window.wrong_share)} of the range may still be called wrongly"
    if not window.share:
        return f"{wrong[:1].upper()}{wrong[1:]}."
    required = chance_text(definition.required_probability)
    reach = f"{share_text(window.share)} of the range reaches the required {required}"
    together = ""
    if basis.ranges is not None:
        together = f", {ranges_text(definition, basis.ranges)} together"
    return f"{reach}{together}; {wrong}."


def _next(basis: Basis) -> str:
    if basis.plan is None:
        why = basis.unplanned[0] if basis.unplanned else "it was not asked for"
        return f"No next plate is planned: {why.removesuffix('.')}."
    if basis.view.fresh:
        return f"Next comes an opening plate, {plan_heading(basis.plan)}"
    if basis.plan.ruling.word != "none":
        return ruling_line(basis.study, basis.plan)
    return f"{_gain(basis.plan)} {ruling_line(basis.study, basis.plan)}"


def _gain(plan: Plan) -> str:
    """What the plan is expected to bring, where no stop rule gives a verdict."""
    tests = int((plan.wells["role"] == "test").sum())
    today = float(plan.forecast["wrong_share"].iloc[0])
    wells = "1 more test well" if tests == 1 else f"{tests} more test wells"
    return (
        f"{wells} would bring the share that may be called wrongly from {share_text(today)} to an "
        f"expected {share_text(plan.wrong_share)}."
    )
