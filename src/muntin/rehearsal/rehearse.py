"""Rehearse: play whole plate series forward and say what they take, beside their rivals."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import asdict, dataclass, field, replace
from pathlib import Path
from typing import Any, Literal, get_args

import numpy as np
import pandas as pd

from muntin.bench.plan import AIMS
from muntin.bench.protein import protein_left_mg
from muntin.design.weighing import Aim
from muntin.record.definition import StopRule
from muntin.record.faults import Fault, StudyFaults, number
from muntin.record.study import Study
from muntin.rehearsal.designs import OWN, check_sizes, designs_for
from muntin.rehearsal.lab_truth import LabFactors, LabRecipe, lab_factors
from muntin.rehearsal.played import Series
from muntin.rehearsal.refit import starts_from
from muntin.rehearsal.series import Setup, best_probability
from muntin.rehearsal.store import Store
from muntin.rehearsal.summary import after_plates, against, table_of, to_stop
from muntin.rehearsal.truth import Recipe, SurfaceRecipe
from muntin.rehearsal.workers import every_core, on_cluster, on_this_machine
from muntin.window.assessment import Assessment, Surrogate, assess
from muntin.window.grid import judged_grid

Origin = Literal["posterior", "lab", "prior"]
PLATES, SERIES = (12, 12), 20
# Where a study fixes no rule, its manual's example stands in.
ASSUMED = StopRule(wrong_share=0.02)
# Hyperparameter nodes of a round of each refit, a power of two.
NODES = 64


@dataclass(frozen=True, kw_only=True)
class Settings:
    """What a rehearsal was asked: test wells of each plate, number of series, what is chosen for,
    surrogate, where truths come from, seed, and hyperparameter nodes of a refit.
    """

    plates: tuple[int, ...]
    series: int
    aim: Aim
    surrogate: Surrogate
    truths: Origin
    seed: int
    nodes: int


@dataclass(frozen=True, kw_only=True, eq=False)
class Rehearsal:
    """Plate series played on drawn truths.

    stop: the rule that series are held against; assumed: whether the study fixes none, so that an
    example stands in. table: a row a series, design and plate (see `table_of`). to_stop: what each
    design takes to reach the rule. after: what each still calls wrongly after each plate. against:
    the rivals' wrong share less that of the plates chosen by muntin. taken_up: series that an
    earlier start had played. notices: what else the user should know. kept: SHA-256 of the
    series on disk, by path in the study.
    """

    study: Study
    settings: Settings
    stop: StopRule
    assumed: bool
    table: pd.DataFrame
    to_stop: pd.DataFrame
    after: pd.DataFrame
    against: pd.DataFrame
    taken_up: int
    notices: tuple[str, ...]
    kept: Mapping[str, str] = field(default_factory=dict)


def rehearse(
    study: Study,
    plates: Sequence[int] = PLATES,
    series: int = SERIES,
    *,
    aim: Aim = "edge",
    surrogate: Surrogate = "stacked",
    truths: Origin | None = None,
    seed: int = 1,
    nodes: int = NODES,
    workers: int | None = 1,
    cluster: str | None = None,
    store: str | Path | None = None,
    heard: Callable[[int, int], None] = lambda _done, _of: None,
) -> Rehearsal:
    """Play series of plates with so many test wells each on drawn truths, beside rival designs.

    Truths are drawn from the posterior of a study with readings; before any from the virtual lab
    where the study is one recovery over pH and salt, else from the prior; `truths` asks for one.
    The same seed gives the same numbers, whatever workers and cluster are. workers: processes,
    None for one a core. cluster: address of a Dask scheduler that plays the series instead. store:
    folder that keeps every series as it is finished, from which a later call takes it up. nodes: of
    hyperparameters in each refit, a power of two. heard: told how many series are done, and of how
    many.

    Raises StudyFaults where plates do not fit, truths cannot be drawn, or the cluster does not
    answer; ValueError for numbers and names that are none.
    """
    origin = origin_of(study, truths)
    if aim not in AIMS:
        raise ValueError(f"aim {aim!r} is none of {', '.join(AIMS)}")
    if series < 1 or (workers is not None and workers < 1):
        raise ValueError("series and workers must be 1 or more")
    if nodes < 2 or nodes & (nodes - 1):
        raise ValueError("nodes must be a power of two, 2 or more")
    settings = Settings(
        plates=tuple(int(n) for n in plates),
        series=series,
        aim=aim,
        surrogate=surrogate,
        truths=origin,
        seed=seed,
        nodes=nodes,
    )
    check_sizes(study, settings.plates, origin != "posterior")
    view = assess(study, surrogate, seed=seed)
    setup, notices = _setup(view, settings)
    kept = None if store is None else Store.of(Path(store), study, _key(settings, setup))
    names = tuple(design.name for design in setup.designs)
    found, spoilt = ([], []) if kept is None else kept.take_up(series, names)
    notices += [f"{file} was spoilt and is played again" for file in spoilt]
    done = [*found]
    heard(len(done), series)
    todo = _recipes(view, settings, {one.number for one in found})
    for one in _play(setup, todo, workers, cluster):
        if kept is not None:
            kept.write(one)
        done.append(one)
        heard(len(done), series)
    told = _told(study, settings, done, len(found), tuple(notices))
    return told if kept is None else replace(told, kept=kept.digests(series, study.folder))


def origin_of(study: Study, asked: Origin | None) -> Origin:
    """Where truths come from; raises StudyFaults where the one asked for cannot be."""
    if asked is not None and asked not in get_args(Origin):
        raise ValueError(f"truths {asked!r} is none of {', '.join(get_args(Origin))}")
    judged = [r.name for r in study.definition.judged]
    read = any(len(study.readings(name)) for name in judged)
    lab = lab_factors(study.definition)
    usual: Origin = "posterior" if read else "prior" if lab is None else "lab"
    problem = ""
    if read and asked in ("lab", "prior"):
        problem = "the study has readings, and truths must agree with them; leave it out"
    elif not read and asked == "posterior":
        problem = "nothing has been read yet; leave it out, or ask for prior"
    elif asked == "lab" and lab is None:
        problem = (
            "the virtual lab knows one recovery with at_least (0.95 at most) over a pH without "
            "unit and a salt in mM or M"
        )
    if problem:
        raise StudyFaults([Fault(file="truths", value=str(asked), problem=f"cannot be: {problem}")])
    return asked or usual


def _setup(view: Assessment, settings: Settings) -> tuple[Setup, list[str]]:
    """What all series share, and what the user should know of it."""
    study = view.study
    designs, notices = designs_for(view, settings.plates, settings.aim, settings.seed)
    rule = study.stopping.rule
    with_best = rule is not None and rule.best_probability is not None
    setup = Setup(
        study=study,
        designs=designs,
        surrogate=settings.surrogate,
        aim=settings.aim,
        seed=settings.seed,
        nodes=settings.nodes,
        with_best=with_best,
        p_now=view.judged(judged_grid(study.definition)[0], "mean"),
        best_now=best_probability(view) if with_best else np.nan,
        starts=starts_from(view),
    )
    told = study.stopping.notice
    return setup, [*([told] if told else []), *notices, *_awaited(view)]


def _awaited(view: Assessment) -> list[str]:
    labels = {r.name: r.label for r in view.study.definition.responses}
    names = "" if view.fresh else ", ".join(labels[name] for name in view.awaited)
    return [f"provisional: no reading yet of {names}, which is not rehearsed"] if names else []


def _key(settings: Settings, setup: Setup) -> dict[str, Any]:
    """What a series depends on beside the study: not on how many there are."""
    own = {name: value for name, value in asdict(settings).items() if name != "series"}
    return own | {"with_best": setup.with_best}


def _recipes(view: Assessment, settings: Settings, done: set[int]) -> list[Recipe]:
    """The truths yet to be played on."""
    left = [i for i in range(settings.series) if i not in done]
    lab: LabFactors | None = None
    if settings.truths == "lab":
        lab = lab_factors(view.study.definition)
    if lab is not None:
        return [LabRecipe(i, settings.seed, view.study.definition, lab) for i in left]
    return [SurfaceRecipe.of(view, i, settings.seed) for i in left]


def _play(
    setup: Setup, recipes: list[Recipe], workers: int | None, cluster: str | None
) -> Iterator[Series]:
    if not recipes:
        return iter(())
    if cluster is not None:
        return on_cluster(setup, recipes, cluster)
    return on_this_machine(setup, recipes, every_core() if workers is None else workers)


def _told(
    study: Study, settings: Settings, done: list[Series], found: int, notices: tuple[str, ...]
) -> Rehearsal:
    """The rehearsal from its series, in whatever order they were finished."""
    table = table_of(sorted(done, key=lambda one: one.number))
    stop = study.stopping.rule
    held = ASSUMED if stop is None else stop
    return Rehearsal(
        study=study,
        settings=settings,
        stop=held,
        assumed=stop is None,
        table=table,
        to_stop=to_stop(table, held),
        after=after_plates(table),
        against=against(table, OWN),
        taken_up=found,
        notices=(*notices, *_protein(study, table)),
    )


def _protein(study: Study, table: pd.DataFrame) -> list[str]:
    left, needed = protein_left_mg(study), float(table["mg"].max())
    if left is None or needed <= left + 1e-9:
        return []
    rest = number(round(max(left, 0.0), 6))
    return [
        f"a series takes up to {needed:.3g} mg of protein; {rest} mg are left beyond the reserve"
    ]
