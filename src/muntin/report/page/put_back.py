"""What a study would say if nothing had been left out of it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

from muntin.record import StudyFaults, open_study
from muntin.record.readings import USED
from muntin.record.study import Study
from muntin.report.facts import Facts
from muntin.report.words import condition_text, reach_text, share_text, success_text
from muntin.window.assessment import Assessment, assess
from muntin.window.grid import judged_grid
from muntin.window.window import Window, judge_window


@dataclass(frozen=True, kw_only=True, eq=False)
class PutBack:
    """A study with all that was left out: the readings that come back, by plate, well and response
    (user's unit), and the window that they would give, or `unknown`: why they cannot be put back.

    The window is judged on the same grid, without the checks of the model.
    """

    values: Mapping[tuple[str, str, str], float]
    window: Window | None
    unknown: str = ""

    def facts(self) -> Facts:
        """Return it as plain values."""
        facts: Facts = {"readings": len(self.values), "unknown": self.unknown}
        if self.window is not None:
            facts |= {
                "share": self.window.share,
                "wrong_share": self.window.wrong_share,
                "set_point": self.window.setpoint.to_dict(),
            }
        return facts


def standing_text(view: Assessment, window: Window) -> str:
    """Return what a window says: how much of the range reaches it, and the best condition."""
    definition = view.study.definition
    kept = definition.judged_by == "kept"
    where = condition_text(definition, window.setpoint.to_dict(), kept)
    best = "set point" if window.share else "the best condition"
    passes = success_text(definition, float(window.setpoint["probability"]))
    wrong = f"{share_text(window.wrong_share)} may be called wrongly"
    return f"{reach_text(definition, window.share)}, {wrong}; {best} {where}: {passes}"


def put_back(view: Assessment) -> PutBack | None:
    """Return what the study says with every reading that was left out; None where none was.

    The study is read again and fitted with the surrogates and the seed of `view`, by the engine
    fast. Plates that are void stay so, and so do wells of which a factor is not known.
    """
    study = view.study
    if not any(study.counts().excluded.values()):
        return None
    try:
        whole = _known(open_study(study.folder, excluding=False))
    except StudyFaults as faults:
        return PutBack(values={}, window=None, unknown=faults.lines()[0])
    values = _back(study, whole)
    if not values:
        return PutBack(values={}, window=None, unknown="None of them has a reading on record.")
    other = assess(whole, surrogate=view.surrogate, seed=view.seed)
    return PutBack(values=values, window=None if other.fresh else _window(other))


def _known(study: Study) -> Study:
    """The study without the readings of wells of which a factor is not known."""
    names = list(study.definition.factor_names)
    lost = (study.wells[names].isna() | (study.wells[names] == "")).any(axis=1)
    states = [f"{response.name}_state" for response in study.definition.responses]
    wells = study.wells.copy()
    wells.loc[lost, states] = "excluded"
    return replace(study, wells=wells)


def _back(study: Study, whole: Study) -> dict[tuple[str, str, str], float]:
    """The readings that one has more than the other, by plate, well and response."""
    now, then = study.informing(), whole.informing()
    found = {}
    for response in study.definition.responses:
        state = f"{response.name}_state"
        more = then[then[state].isin(USED) & ~now[state].isin(USED)]
        for row in more.itertuples(index=False):
            value = float(getattr(row, response.name))
            found[str(row.plate), str(row.well), response.name] = value
    return found


def _window(view: Assessment) -> Window:
    definition = view.study.definition
    grid, regular = judged_grid(definition)
    p_mean = view.judged(grid, "mean")
    by = definition.judged_by
    judged = p_mean if by == "mean" else view.judged(grid, by)
    return judge_window(definition, grid, regular, p_mean, judged, ())
