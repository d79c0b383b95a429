"""The set of levels that a plate is given of a factor with `per_plate`."""

from itertools import combinations

import numpy as np
import pytest

import muntin
from muntin.design.candidates import candidate_frame, run_conditions
from muntin.design.level_sets import Scout, choose_level_sets
from muntin.design.levels import Levels
from muntin.design.selection import select
from muntin.design.terms import Terms, weighed
from muntin.design.weighing import Weighing
from tests.studies import PH, RESIN, SALT, changed, read, spread, written

FINE = {**PH, "step": 0.25}


@pytest.fixture(scope="module")
def view(tmp_path_factory):
    study = written(
        tmp_path_factory.mktemp("levels") / "study",
        [read(spread([FINE, SALT], 12, 1), 1)],
        factors=[FINE, SALT],
    )
    return muntin.assess(study, "gp")


@pytest.fixture(scope="module")
def resins(tmp_path_factory):
    factors = [PH, RESIN]
    study = written(
        tmp_path_factory.mktemp("resins") / "study",
        [read(spread(factors, 14))],
        factors=factors,
    )
    return muntin.assess(study, "quadratic")


def scout_of(view, wells, used=(), barred=None):
    definition = view.study.definition
    run = run_conditions(view.study)
    offered = weighed(definition, candidate_frame(definition, run), Terms())
    table = Weighing(view, offered, run, 1)
    levels = Levels(definition, offered.targets)
    for column, level in used:
        levels.use(int(np.flatnonzero(offered.targets[column] == level)[0]))
    watched = np.arange(0, len(table.P), 3)
    light = table._outlooks(table.P[watched], np.arange(len(watched)))
    closed = offered.barred if barred is None else barred(offered.targets)
    return Scout(light, table.targets, levels, wells, closed)


def limited(view, most, factors=(FINE, SALT)):
    few = [{**factors[0], "per_plate": most}, *factors[1:]]
    return changed(view, factors=few, plan={"bridging_wells": 0})


def reach(scout, levels):
    kept = scout.levels.over(scout.levels.frame)
    kept.keep_to("ph", levels)
    return scout.run(kept)[0]


@pytest.mark.parametrize("most", [2, 3])
def test_the_set_is_among_the_best_of_all_sets(view, most):
    # Every one of 78 or 286 sets was judged the same way; the search judges 24 of them.
    scout = scout_of(limited(view, most), 4)
    chosen = choose_level_sets(scout)["ph"]
    assert len(chosen) == most
    every = [
        reach(scout, frozenset(s))
        for s in combinations(sorted(set(scout.levels.frame["ph"])), most)
    ]
    ours = reach(scout, chosen)
    assert np.mean([other > ours + 1e-12 for other in every]) <= 0.03


def test_levels_in_use_are_in_the_set_and_closed_ones_are_not(view):
    scout = scout_of(
        limited(view, 3), 4, used=[("ph", 4.5)], barred=lambda frame: frame["ph"].to_numpy() > 6.6
    )
    chosen = choose_level_sets(scout)["ph"]
    assert 4.5 in chosen
    assert max(chosen) <= 6.5
    assert len(chosen) == 3


def test_nothing_is_chosen_where_a_plate_holds_every_level(view):
    assert choose_level_sets(scout_of(limited(view, 13), 4)) == {}
    assert choose_level_sets(scout_of(view, 4)) == {}


def test_closed_levels_are_not_counted(view):
    # Three levels are left, as many as a plate may hold.
    few = scout_of(limited(view, 3), 4, barred=lambda frame: frame["ph"].to_numpy() > 5.1)
    assert choose_level_sets(few) == {}


def test_all_levels_in_use_stay(view):
    scout = scout_of(limited(view, 2), 4, used=[("ph", 4.5), ("ph", 7.5)])
    assert choose_level_sets(scout) == {"ph": {4.5, 7.5}}


def test_a_factor_with_choices_is_given_its_set(resins):
    few = changed(resins, factors=[PH, {**RESIN, "per_plate": 2}], plan={"bridging_wells": 0})
    chosen = choose_level_sets(scout_of(few, 5))
    assert set(chosen) == {"resin"}
    assert len(chosen["resin"]) == 2


def test_several_factors_take_their_turns(view):
    both = changed(
        view,
        factors=[{**FINE, "per_plate": 2}, {**SALT, "per_plate": 3}],
        plan={"bridging_wells": 0},
    )
    chosen = choose_level_sets(scout_of(both, 5))
    assert {name: len(levels) for name, levels in chosen.items()} == {"ph": 2, "salt": 3}
    plan = select(both, 8, "edge", 1)
    told = plan.candidates.iloc[[pick.candidate for pick in plan.picks]]
    assert told["ph"].nunique() <= 2
    assert told["salt"].nunique() <= 3


def test_chosen_sets_tell_more_than_levels_as_they_come(view, monkeypatch):
    # By the criterion with all nodes and points, over plates of 2, 3 and 4 levels together.
    tables = []

    class Kept(Weighing):
        def __post_init__(self):
            super().__post_init__()
            tables.append(self)

    def told():
        tables.clear()
        for most in (2, 3, 4):
            select(limited(view, most), 8, "edge", 1)
        return [table.greedy.criterion.now() for table in tables]

    monkeypatch.setattr("muntin.design.selection.Weighing", Kept)
    chosen = told()
    monkeypatch.setattr("muntin.design.weighing.choose_level_sets", lambda scout: {})
    assert np.sum(chosen) > np.sum(told()) + 1e-5
