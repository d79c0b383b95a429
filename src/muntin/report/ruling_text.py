"""Go on, go on with fewer, or stop, in a plain sentence."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import pandas as pd

from muntin.record.definition import StopRule
from muntin.record.faults import counted
from muntin.record.study import Study
from muntin.report.words import beside, likely_text, per_cent, share_text

if TYPE_CHECKING:
    from muntin.bench.plan import Plan


def ruling_line(study: Study, plan: Plan) -> str:
    """Return the verdict on another plate, with the figures that it rests on."""
    ruling, forecast = plan.ruling, plan.forecast
    if ruling.word == "none":
        return f"No verdict: {_NONE[ruling.because]}."
    rule = study.stopping.rule or StopRule()
    asked = int((plan.wells["role"] == "test").sum())
    most = int(forecast["wells"].iloc[-1])
    after = f"after {most}: {_figures(forecast, rule, most)}"
    said = {
        "met": f": the stop rule is met today ({_figures(forecast, rule, 0)})",
        "out of reach": (
            f", but do not count on stopping soon: up to {counted(most, 'test well')} are not "
            f"expected to meet the stop rule ({after})"
        ),
        "nothing gained": f": {counted(most, 'test well')} would bring next to nothing ({after})",
    }
    if ruling.wells is not None and ruling.wells > 0:
        wells = counted(ruling.wells, "test well")
        are = "is" if ruling.wells == 1 else "are"
        figures = _figures(forecast, rule, ruling.wells)
        reach = f": {wells} {are} expected to meet the stop rule ({figures})"
        said |= {"enough": reach, "more are needed": f"{reach}, {asked} are not"}
    return f"{ruling.word.capitalize()}{said[ruling.because]}."


_NONE = {
    "no rule": "study.toml has no [stop]; fix a stop rule before the next data",
    "no reading": "nothing has been read yet",
    "awaited": "the advice is provisional",
    "unsupported": "the data do not support the window",
}


def _figures(forecast: pd.DataFrame, rule: StopRule, wells: int) -> str:
    """Return what is expected after so many test wells, each beside its limit."""
    row = forecast[forecast["wells"] == wells].iloc[0]
    parts = []
    if rule.wrong_share is not None:
        limit = per_cent(rule.wrong_share)
        share = beside(row["wrong_share"], rule.wrong_share)
        parts.append(f"{share} called wrongly, rule {limit}")
    if rule.best_probability is not None:
        limit = per_cent(rule.best_probability)
        today = f"set point {share_text(row['set_point'])}, rule {limit}"
        chance = likely_text(row["reached"])
        parts.append(f"chance of a set point at {limit}: {chance}" if wells else today)
    return "; ".join(parts)


def wrong_share_texts(study: Study, plan: Plan) -> list[str]:
    """Return the shares of a forecast that may be called wrongly, each so that it is told from what
    the stop rule asks.
    """
    rule, shares = study.stopping.rule, plan.forecast["wrong_share"]
    if rule is None or rule.wrong_share is None:
        return [share_text(share) for share in shares]
    return [beside(share, rule.wrong_share) for share in shares]


def decision_facts(plan: Plan) -> dict[str, Any]:
    """Return the verdict on another plate as the ledger keeps it."""
    ruling = plan.ruling
    return {
        "plate": plan.plate,
        "verdict": ruling.word,
        "of": ruling.because,
        "wells": ruling.wells,
    }


def ruling_facts(study: Study, plan: Plan) -> dict[str, Any]:
    """Return the verdict with its sentence, and the stop rule that holds with its record."""
    standing, rule = study.stopping, study.stopping.rule or StopRule()
    return {
        "word": plan.ruling.word,
        "because": plan.ruling.because,
        "wells": plan.ruling.wells,
        "sentence": ruling_line(study, plan),
        "stop_rule": {
            "wrong_share": rule.wrong_share,
            "best_probability": rule.best_probability,
            "notice": standing.notice,
            "recorded": [stop.model_dump(mode="json") for stop in study.stops],
        },
    }
