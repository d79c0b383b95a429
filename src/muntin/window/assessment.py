"""Where the study stands: the posterior of every response and what it says of a condition."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from functools import cached_property
from pathlib import Path
from typing import Any, Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.responses import Response
from muntin.record.study import Study
from muntin.surrogate.fit import SURROGATES, Stack, fit_stack, prior_surface
from muntin.surrogate.nodes import Surface, mixture
from muntin.surrogate.nuts import Nuts
from muntin.window.asked import asked_conditions
from muntin.window.checks import Check, study_checks
from muntin.window.coded import code, coding_of, priors_for, readings_of, setting_sd, shared_by
from muntin.window.engine import Engine, inference_data_of, save_draws, settings_of
from muntin.window.grid import judged_grid
from muntin.window.handover import HandOver, hand_over
from muntin.window.influence import DRAWS, chosen_response, influence_of
from muntin.window.joint import joint_meets
from muntin.window.limiting import limiting, sides_of
from muntin.window.notebook import assessment_card, assessment_line
from muntin.window.predicted import Predicted
from muntin.window.probability import Target, process_mean, process_quantile
from muntin.window.residuals import Together, correlation_matrix, residual_correlations
from muntin.window.settings import settings_around
from muntin.window.window import Window, judge_window

Array = NDArray[np.float64]
# Of many conditions most are decided, and a few nodes tell which.
_MANY, _SCOUTS, _SURE = 500, 16, 1e-6
# Nodes that tell what a tolerance takes from a probability, and how far they may be off.
_FEW, _NEAR = 48, 0.03
Surrogate = Literal["gp", "quadratic", "stacked"]


@dataclass(frozen=True, kw_only=True, eq=False)
class Assessment:
    """A study with the posterior surface of every response that has readings, or of the prior.

    stacks: the fits of each response with readings. surfaces: the posterior of each response that
    has readings; where no judged response has any, that of each judged one under its prior.
    engine: `fast` or `nuts`, which fitted them. together: how the readings of one well go
    together, a record for every two responses read.
    """

    study: Study
    surrogate: Surrogate
    seed: int
    stacks: Mapping[str, Stack]
    surfaces: Mapping[str, Surface]
    engine: Engine = "fast"
    together: tuple[Together, ...] = ()

    def __repr__(self) -> str:
        return assessment_line(self)

    def _repr_html_(self) -> str:
        return assessment_card(self)

    @property
    def awaited(self) -> tuple[str, ...]:
        """Judged responses without a reading, by name, while any response has some.

        While there is one, nothing is judged jointly.
        """
        judged = [r.name for r in self.study.definition.judged if self.stacks]
        return tuple(name for name in judged if name not in self.stacks)

    @property
    def fresh(self) -> bool:
        """Whether no judged response has been read yet, so that the prior alone speaks."""
        return not any(r.name in self.stacks for r in self.study.definition.judged)

    def checks(self) -> tuple[Check, ...]:
        """Checks of the model against the readings, made once."""
        return self._checks

    @cached_property
    def _checks(self) -> tuple[Check, ...]:
        return study_checks(self)

    @cached_property
    def inference_data(self) -> Mapping[str, Mapping[str, Any]]:
        """Draws of the engine nuts as ArviZ data, by response and surrogate; empty for the fast."""
        return inference_data_of(self.stacks)

    def save_draws(self, folder: str | Path) -> tuple[Path, ...]:
        """Write the draws to a folder, one netCDF file a response and surrogate; their paths.

        Raises StudyFaults where there are none, or the folder cannot be written.
        """
        return save_draws(self.inference_data, Path(folder))

    def at(self, conditions: pd.DataFrame) -> pd.DataFrame:
        """What is known at conditions: a column a factor, raw units; index kept.

        Per response r: r_mean, r_low, r_high (process mean and its central 95 % interval, in the
        user's unit), r_p_mean, r_p_well (judged responses); over all judged responses jointly
        p_mean, p_well and, where a kept_within is given, p_kept, withheld while one is awaited.
        p_mean is the product over the responses, whose means are independent given the condition
        (Peterson 2004, 2008); in p_well the readings of one well go together as `together` has it.
        Raises StudyFaults where a factor is missing or a value cannot be coded.
        """
        frame = asked_conditions(self.study, conditions)
        X = code(self.study.definition, frame)
        columns: dict[str, Array] = {}
        predicted = self.predicted(frame)
        p_mean, met = np.ones(len(X)), []
        for response in self.study.definition.responses:
            surface = self.surfaces.get(response.name)
            if surface is None:
                continue
            r = response.name
            moments = predicted[r].moments if r in predicted else surface.latent(X)
            columns[f"{r}_mean"] = process_mean(surface, moments) * response.unit_size
            for name, level in (("low", 0.025), ("high", 0.975)):
                quantile = process_quantile(surface, moments, level)
                columns[f"{r}_{name}"] = quantile * response.unit_size
            if response.judged:
                columns[f"{r}_p_mean"] = predicted[r].process_met()
                columns[f"{r}_p_well"] = predicted[r].met()
                p_mean *= columns[f"{r}_p_mean"]
                met.append(columns[f"{r}_p_well"])
        if not self.awaited:
            columns |= {"p_mean": p_mean, "p_well": self._jointly(predicted, met)}
            if any(f.kept_within for f in self.study.definition.factors):
                columns["p_kept"] = self._spread(frame)
        return pd.DataFrame(columns, index=conditions.index)

    def kept(self, frame: pd.DataFrame) -> Array:
        """p_kept (n,): p_well averaged over settings spread evenly within kept_within.

        At many conditions a few nodes tell by how much it differs from p_well, which all tell;
        conditions near the required probability get all nodes.
        """
        if len(frame) <= _MANY:
            return self._spread(frame)
        few = replace(self, surfaces={n: s.lightened(_FEW) for n, s in self.surfaces.items()})
        away = few._spread(frame) - few.judged(frame, "well")
        out = np.clip(self.judged(frame, "well") + away, 0.0, 1.0)
        near = np.abs(out - self.study.definition.required_probability) < _NEAR
        if near.any():
            out[near] = self._spread(frame[near])
        return out

    def _spread(self, frame: pd.DataFrame) -> Array:
        """p_kept (n,) with all nodes at every condition."""
        moved = [*self.settings(frame)]
        every = self.judged(pd.concat([part for _, part in moved], ignore_index=True), "well")
        return np.array([weight for weight, _ in moved]) @ every.reshape(len(moved), len(frame))

    def settings(self, frame: pd.DataFrame) -> Iterator[tuple[float, pd.DataFrame]]:
        """Weights and settings around conditions, spread evenly within kept_within."""
        return settings_around(self.study.definition, frame)

    def judged(self, frame: pd.DataFrame, by: Literal["mean", "well", "kept"]) -> Array:
        """Joint probability (n,) over the judged responses at a frame of valid conditions."""
        if by == "kept":
            return self.kept(frame)
        if by == "well":
            return self._by_well(frame)
        out = np.ones(len(frame))
        for p in self.predicted(frame).values():
            out *= p.process_met()
        return out

    def _by_well(self, frame: pd.DataFrame) -> Array:
        """Joint p_well (n,); where a few nodes are all but sure of a response, theirs stands."""
        nodes = max((len(s.weights) for s in self.surfaces.values()), default=0)
        every = len(frame) <= _MANY or nodes <= _SCOUTS
        few = self.predicted(frame, None if every else _SCOUTS)
        met = [p.met() for p in few.values()]
        if every:
            return self._jointly(few, met)
        out = np.prod(met, axis=0)
        unsure = np.any([(p > _SURE) & (p < 1.0 - _SURE) for p in met], axis=0) & (out > _SURE)
        if unsure.any():
            all_nodes = self.predicted(frame[unsure])
            out[unsure] = self._jointly(all_nodes, [p.met() for p in all_nodes.values()])
        return out

    def predicted(self, frame: pd.DataFrame, nodes: int | None = None) -> dict[str, Predicted]:
        """What the judged responses may read at valid conditions; awaited ones left out.

        nodes: on so many nodes at most, or on all.
        """
        X, setting = code(self.study.definition, frame), setting_sd(self.study.definition, frame)
        surfaces = self.surfaces
        if nodes is not None:
            surfaces = {name: surface.lightened(nodes) for name, surface in surfaces.items()}
        return {
            r.name: Predicted.of(surfaces[r.name], X, target_of(r), setting)
            for r in self.study.definition.judged
            if r.name in surfaces
        }

    def _jointly(self, predicted: Mapping[str, Predicted], met: list[Array]) -> Array:
        """Joint p_well (n,) of the responses, given the p_well of each."""
        correlation = correlation_matrix([*predicted], self.together)
        return joint_meets([*predicted.values()], np.stack(met), correlation)

    def limiting(self, conditions: pd.DataFrame) -> pd.DataFrame:
        """Which judged response is least likely to be met at conditions (raw units); index kept.

        Columns: response (its name), probability (that it is met, of the kind that the study is
        judged by) and fails ("low" or "high", the likelier way). Raises StudyFaults as `at` does.
        """
        return limiting(self, asked_conditions(self.study, conditions)).set_index(conditions.index)

    def influence(
        self,
        response: str | None = None,
        negligible: float | None = None,
        draws: int = DRAWS,
        seed: int | None = None,
    ) -> pd.DataFrame:
        """Influence of each factor on the process mean of a response that has been read.

        Without a name the first judged response that has; see `influence_of` for the columns.
        seed: that of the assessment where None. Raises StudyFaults and ValueError.
        """
        asked = chosen_response(self.study, response, self.stacks)
        seed = self.seed if seed is None else seed
        surface = self.surfaces[asked.name]
        return influence_of(self.study, asked, surface, negligible, draws, seed)

    def window(self) -> Window:
        """The predicted operating window (plate scale), on a grid of bench steps, made once."""
        return self._window

    def handover(self) -> HandOver | None:
        """What is handed over of the window: ranges, margins, edge, repeats; made once, when asked.

        None before any judged response was read. `window.handover.hand_over` takes an assurance, a
        number of draws and a seed of one's own.
        """
        return self._handover

    @cached_property
    def _handover(self) -> HandOver | None:
        return hand_over(self)

    @cached_property
    def _window(self) -> Window:
        definition = self.study.definition
        grid, regular = judged_grid(definition)
        p_mean = self.judged(grid, "mean")
        by = definition.judged_by
        judged = p_mean if by == "mean" else self.judged(grid, by)
        unsupported = tuple(c.sentence for c in self.checks() if not c.passed and c.serious)
        window = judge_window(definition, grid, regular, p_mean, judged, unsupported)
        return replace(window, sides=sides_of(self, window))


def target_of(response: Response) -> Target:
    """The response's target in its natural unit."""
    low, high = response.target
    return Target(-np.inf if low is None else low, np.inf if high is None else high)


def assess(
    study: Study,
    surrogate: Surrogate = "stacked",
    engine: Engine | Nuts = "fast",
    seed: int = 1,
    progress: bool = False,
) -> Assessment:
    """Fit the surrogates to everything that has been read.

    surrogate: `gp`, `quadratic` or `stacked` (both, weighted by leave-one-out predictive
    density). engine: `fast`; or `nuts`, the reference, which samples the same model, also with
    settings of its own; `progress` then shows a bar on stderr. The same seed gives the same
    numbers. Raises ValueError for other names, StudyFaults where PyMC is not installed.
    """
    if surrogate not in (*SURROGATES, "stacked"):
        raise ValueError(f"surrogate {surrogate!r} is none of gp, quadratic, stacked")
    settings = settings_of(engine, progress)
    names = SURROGATES if surrogate == "stacked" else (surrogate,)
    definition = study.definition
    columns = coding_of(definition).columns
    stacks: dict[str, Stack] = {}
    for response in definition.responses:
        readings = readings_of(study, response)
        if len(readings):
            priors = priors_for(study, response)
            stacks[response.name] = fit_stack(
                names, readings, response.kind, columns, priors, seed, settings
            )
    surfaces = {name: stack.surface for name, stack in stacks.items()}
    if not any(r.name in stacks for r in definition.judged):
        surfaces |= {r.name: _prior(study, r, names, seed) for r in definition.judged}
    return Assessment(
        study=study,
        surrogate=surrogate,
        seed=seed,
        stacks=stacks,
        surfaces=surfaces,
        engine="fast" if settings is None else "nuts",
        together=residual_correlations(study, stacks),
    )


def _prior(study: Study, response: Response, names: tuple[str, ...], seed: int) -> Surface:
    shared = shared_by(study.definition, response)
    counts = len(shared.inside), len(shared.scale)
    columns = coding_of(study.definition).columns
    priors = priors_for(study, response)
    every = [prior_surface(n, response.kind, columns, priors, counts, seed) for n in names]
    return mixture(every, np.full(len(names), 1.0 / len(names)))
