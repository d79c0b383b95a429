"""A drawn truth: whether each condition really passes, and what a plate of wells would read."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Protocol

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.definition import Definition
from muntin.record.responses import Response
from muntin.surrogate.drawn_surface import DrawnSurface, draw_surface, one_node
from muntin.surrogate.links import mean_of
from muntin.surrogate.nodes import Surface
from muntin.window.assessment import Assessment, target_of
from muntin.window.coded import code, group_numbers, setting_sd, shared_by
from muntin.window.grid import judged_grid

Array = NDArray[np.float64]
Truths = NDArray[np.bool_]
# Conditions at which a surface is drawn; in between it follows from them.
_SUPPORT = 600
_DRAWING = 11


class Truth(Protocol):
    """What a series is played on. Frames have a column a factor, raw units."""

    def passes(self, frame: pd.DataFrame) -> Truths:
        """Whether the process mean meets all targets (n,)."""

    def read(
        self, frame: pd.DataFrame, plate: str, rng: np.random.Generator
    ) -> Mapping[str, Array]:
        """Readings (n,) in the user's unit of the wells of a new plate, by response."""


class Recipe(Protocol):
    """A truth that is yet to be drawn: small, and the same wherever it is drawn."""

    @property
    def number(self) -> int:
        """Which of the truths of a rehearsal it is, from 0."""

    def draw(self) -> Truth:
        """Draw it."""


@dataclass(frozen=True, eq=False)
class SurfaceTruth:
    """A truth of one drawn surface a response, with the errors of its node."""

    definition: Definition
    surfaces: Mapping[str, DrawnSurface]

    def passes(self, frame: pd.DataFrame) -> Truths:
        """Whether the process mean meets all targets (n,)."""
        X, met = code(self.definition, frame), np.ones(len(frame), dtype=bool)
        for response in self._responses:
            target, mean = target_of(response), self.surfaces[response.name].process_mean(X)
            met &= (mean >= target.low) & (mean <= target.high)
        return met

    def read(self, frame: pd.DataFrame, plate: str, rng: np.random.Generator) -> dict[str, Array]:
        """Readings (n,) of the wells of a new plate; each well is set once, with its error.

        Errors that wells share are drawn first, so that plates of equal groups have the same.
        """
        together, alone = rng.spawn(2)
        X, setting = code(self.definition, frame), setting_sd(self.definition, frame)
        X = X + setting * alone.standard_normal(X.shape)
        return {
            response.name: self._reading(response, X, frame.assign(plate=plate), together, alone)
            for response in self._responses
        }

    @property
    def _responses(self) -> tuple[Response, ...]:
        return tuple(r for r in self.definition.judged if r.name in self.surfaces)

    def _reading(
        self,
        response: Response,
        X: Array,
        wells: pd.DataFrame,
        together: np.random.Generator,
        alone: np.random.Generator,
    ) -> Array:
        surface, shared = self.surfaces[response.name], shared_by(self.definition, response)
        errors, link = surface.errors, surface.node.link
        inside = self._shared(wells, shared.inside, errors.inside[0], together)
        scale = self._shared(wells, shared.scale, errors.scale[0], together)
        noise = errors.noise[0] * alone.standard_normal(len(X))
        f = surface.at(X) + inside
        if link == "logit":
            y = (1.0 + scale) * mean_of(link, f, errors.ceiling[0]) + noise
        else:
            y = mean_of(link, f + noise)
        return np.asarray(y * response.unit_size)

    def _shared(
        self,
        wells: pd.DataFrame,
        every: tuple[tuple[str, ...], ...],
        sds: Array,
        rng: np.random.Generator,
    ) -> Array:
        """The sum (n,) of the errors that wells of a new plate share, in units of the sds."""
        total = np.zeros(len(wells))
        for by, sd in zip(every, sds, strict=True):
            # A column that only plates already run know is the new plate's own.
            known = tuple(name for name in by if name in wells) or ("plate",)
            groups = group_numbers(self.definition, wells, known)
            total += sd * rng.standard_normal(int(groups.max(initial=-1)) + 1)[groups]
        return total


@dataclass(frozen=True, eq=False)
class SurfaceRecipe:
    """A truth to be drawn at one node of each response."""

    number: int
    seed: int
    definition: Definition
    nodes: Mapping[str, Surface]

    @classmethod
    def of(cls, view: Assessment, number: int, seed: int) -> SurfaceRecipe:
        """Truth `number` of the posterior of a study, or of its prior where nothing was read."""
        rng = np.random.default_rng((seed, number))
        judged = [r.name for r in view.study.definition.judged if r.name in view.surfaces]
        nodes = {name: one_node(view.surfaces[name], float(rng.random())) for name in judged}
        return cls(number, seed, view.study.definition, nodes)

    def draw(self) -> SurfaceTruth:
        """Draw one surface a response."""
        rng = np.random.default_rng((self.seed, self.number, _DRAWING))
        support = code(self.definition, judged_grid(self.definition, _SUPPORT)[0])
        surfaces = {name: draw_surface(node, support, rng) for name, node in self.nodes.items()}
        return SurfaceTruth(self.definition, surfaces)
