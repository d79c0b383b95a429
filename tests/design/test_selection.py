"""The choice of a plate's conditions, pick by pick."""

from collections import Counter

import numpy as np
import pandas as pd
import pytest

import muntin
from muntin.design.candidates import candidate_frame, run_conditions
from muntin.design.selection import select
from muntin.design.terms import Terms, weighed
from muntin.design.weighing import Weighing, future_groups
from muntin.record.definition import Definition
from muntin.window.coded import code
from muntin.window.grid import judged_grid
from tests.studies import (
    HCP,
    LOAD,
    PH,
    RECOVERY,
    RESIN,
    SALT,
    SHIFT,
    changed,
    read,
    read_hcp,
    read_shift,
    spread,
    tables,
    written,
)

FACTORS = [PH, SALT]
EARLIER = [read(spread(FACTORS, 12, seed), seed, error) for seed, error in ((1, 0.02), (2, -0.03))]


@pytest.fixture(scope="module")
def view(tmp_path_factory):
    study = written(tmp_path_factory.mktemp("two") / "study", EARLIER)
    return muntin.assess(study, "stacked")


@pytest.fixture(scope="module")
def joint(tmp_path_factory):
    plates = [read_shift(read_hcp(plate)) for plate in EARLIER]
    responses = [RECOVERY, {**HCP, "at_most": 30}, SHIFT]
    study = written(tmp_path_factory.mktemp("joint") / "study", plates, responses=responses)
    return muntin.assess(study, "stacked")


def of(selection, role="test"):
    return [pick for pick in selection.picks if pick.role == role]


def conditions(selection, picks):
    return selection.candidates.iloc[[pick.candidate for pick in picks]]


# Counts and roles.


@pytest.mark.parametrize("aim", ["edge", "best", "both"])
def test_bridging_wells_come_first_and_test_wells_are_counted(view, aim):
    chosen = select(view, 7, aim, 1)
    assert [pick.role for pick in chosen.picks] == ["bridge"] * 4 + ["test"] * 7
    assert len(chosen.forecast) == 8
    purposes = [pick.purpose for pick in of(chosen)]
    if aim == "both":
        assert purposes == ["edge", "best"] * 3 + ["edge"]
    else:
        assert purposes == [aim] * 7


def test_bridging_wells_repeat_a_pass_and_a_fail(view):
    chosen = select(view, 1, "edge", 1)
    bridge = of(chosen, "bridge")
    assert [pick.purpose for pick in bridge] == ["pass", "fail"] * 2
    assert Counter(pick.candidate for pick in bridge).most_common() == [
        (bridge[0].candidate, 2),
        (bridge[1].candidate, 2),
    ]
    values = list(conditions(chosen, bridge).itertuples(index=False, name=None))
    assert set(values) <= {run.values for run in chosen.run}
    p = view.judged(conditions(chosen, bridge), "mean")
    assert (p[::2] > 0.95).all()
    assert (p[1::2] <= 0.2).all()


@pytest.mark.parametrize(("wells", "repeats"), [(6, 2), (7, 3), (5, 4), (2, 3)])
@pytest.mark.parametrize("aim", ["edge", "best"])
def test_every_new_condition_gets_its_repeats(view, wells, repeats, aim):
    repeated = changed(view, plan={"repeats_min": repeats, "bridging_wells": 0})
    chosen = select(repeated, wells, aim, 1)
    count = Counter(pick.candidate for pick in of(chosen))
    assert sum(count.values()) == wells
    assert len(chosen.forecast) == wells + 1
    assert min(count.values()) >= min(repeats, wells)
    assert sum(pick.purpose == "repeat" for pick in of(chosen)) >= wells // repeats * (repeats - 1)


def test_best_rests_after_four_wells_of_a_condition(view):
    chosen = select(view, 16, "best", 1)
    assert max(Counter(pick.candidate for pick in chosen.picks).values()) <= 4


# What is chosen.


def test_same_input_gives_the_same_picks(view):
    first, again = select(view, 6, "both", 1), select(view, 6, "both", 1)
    assert first.picks == again.picks
    assert first.forecast == again.forecast


def test_wells_go_to_the_edge(view):
    chosen = select(changed(view, plan={"bridging_wells": 0}), 8, "edge", 1)
    picked = view.judged(conditions(chosen, of(chosen)), "mean")
    everywhere = view.judged(chosen.candidates, "mean")
    open_share = (np.abs(everywhere - 0.5) < 0.45).mean()
    assert open_share < 0.2
    assert (np.abs(picked - 0.5) < 0.45).mean() > 2.0 * open_share


def test_wells_that_may_be_best_lie_where_recovery_is_high(view):
    chosen = select(changed(view, plan={"bridging_wells": 0}), 6, "best", 1)
    picked = view.at(conditions(chosen, of(chosen)))["recovery_mean"]
    everywhere = view.at(chosen.candidates)["recovery_mean"]
    assert picked.min() > everywhere.quantile(0.8)


def test_joint_aims_weigh_all_responses(view, joint):
    # Host cell protein rises with salt and the shift falls with pH, so the best of recovery
    # alone, at high pH and salt, fails both.
    alone = select(changed(view, plan={"bridging_wells": 0}), 4, "best", 1)
    responses = [RECOVERY, {**HCP, "at_most": 30}, SHIFT]
    together = select(changed(joint, responses=responses, plan={"bridging_wells": 0}), 4, "best", 1)
    for_recovery = joint.judged(conditions(alone, of(alone)), "mean")
    for_all = joint.judged(conditions(together, of(together)), "mean")
    assert for_all.mean() > for_recovery.mean() + 0.2


def test_every_outlook_knows_every_well_taken(view):
    # The outlooks of the best aim are made when they are first needed, after other picks.
    definition = view.study.definition
    run = run_conditions(view.study)
    offered = weighed(definition, candidate_frame(definition, run), Terms())
    table = Weighing(view, offered, run, 1)
    none = np.zeros(0, dtype=np.intp)
    for well in (5, 40):
        table.take(well)
    table.choose("best", new=True)
    table.take(12)
    (edge,), (best,) = table.outlooks, table.best
    for outlook, points in ((edge, edge.judged), (best, table.X)):
        (fresh,) = table._outlooks(points, none)
        for well in (5, 40, 12):
            fresh.pick(well)
        np.testing.assert_allclose(outlook.explained, fresh.explained, rtol=1e-9)
        assert fresh.explained.max() > 0.0


@pytest.mark.parametrize(
    ("by", "groups"),
    [
        (("plate",), [0, 0, 0, 0]),
        (("plate", "ph"), [0, 1, 0, 1]),
        (("plate", "bottle"), [0, 0, 0, 0]),
        (("bottle",), [0, 0, 0, 0]),
        (("ph", "salt"), [0, 1, 2, 1]),
    ],
)
def test_wells_of_the_new_plate_share_what_they_will_share(by, groups):
    # Of a column that only run plates have, such as a bottle, the new plate has its own.
    definition = Definition.model_validate(tables())
    frame = pd.DataFrame({"ph": [5.0, 6.0, 5.0, 6.0], "salt": [50, 50, 100, 50], "plate": "new"})
    assert future_groups(definition, frame, by).tolist() == groups


def test_per_plate_holds_in_the_selection(view):
    few = [{**PH, "per_plate": 2}, {**SALT, "per_plate": 3}]
    chosen = select(changed(view, factors=few), 12, "both", 1)
    values = conditions(chosen, chosen.picks)
    assert values["ph"].nunique() <= 2
    assert values["salt"].nunique() <= 3


# The forecast.


@pytest.mark.parametrize("aim", ["edge", "best", "both"])
def test_forecast_starts_at_todays_share_and_never_rises(view, joint, aim):
    for study in (view, joint):
        chosen = select(study, 8, aim, 1)
        assert chosen.forecast[0] == pytest.approx(study.window().wrong_share, abs=1e-9)
        assert (np.diff(chosen.forecast) < 0.0).all()


@pytest.mark.parametrize("target", [{"at_least": 0.3, "at_most": 0.9}, {"at_most": 0.5}])
def test_forecast_of_other_targets(view, target):
    response = {"name": "recovery", "kind": "fraction", **target}
    other = changed(view, responses=[response])
    chosen = select(other, 6, "edge", 1)
    assert chosen.forecast[0] == pytest.approx(other.window().wrong_share, abs=1e-9)
    assert (np.diff(chosen.forecast) < 0.0).all()


def test_forecast_is_of_the_whole_range_where_plans_are_narrower(view):
    narrow = changed(view, factors=[{**PH, "plan_high": 6.0}, SALT])
    chosen = select(narrow, 3, "edge", 1)
    assert chosen.candidates["ph"].max() == 6.0
    assert chosen.forecast[0] == pytest.approx(view.window().wrong_share, abs=1e-9)


def test_edge_forecasts_less_than_best(view):
    edge, best = (select(view, 10, aim, 1).forecast[-1] for aim in ("edge", "best"))
    assert edge < best


def test_forecast_without_bridging_wells_starts_the_same_and_ends_higher(view):
    with_bridge = select(view, 3, "edge", 1).forecast
    without = select(changed(view, plan={"bridging_wells": 0}), 3, "edge", 1).forecast
    assert without[0] == with_bridge[0]
    assert with_bridge[1] < without[1]


# Other shapes of a study.


@pytest.mark.parametrize(
    ("factors", "aim"),
    [
        ([SALT], "edge"),
        ([SALT], "best"),
        ([PH, SALT, RESIN], "both"),
        ([PH, SALT, LOAD], "edge"),
        pytest.param([PH, SALT, LOAD, RESIN], "both", marks=pytest.mark.slow),
    ],
)
def test_one_three_and_four_factors(tmp_path, factors, aim):
    plates = [read(spread(factors, 14))]
    view = muntin.assess(written(tmp_path / "study", plates, factors=factors), "quadratic")
    chosen = select(view, 2, aim, 1)
    assert list(chosen.candidates.columns) == [factor["name"] for factor in factors]
    assert len(of(chosen)) == 2
    assert chosen.forecast[0] == pytest.approx(view.window().wrong_share, abs=1e-9)
    assert (np.diff(chosen.forecast) < 0.0).all()


def test_an_awaited_response_is_not_weighed(tmp_path, view):
    plates = [plate.assign(hcp="") for plate in EARLIER]
    study = written(tmp_path / "study", plates, responses=[RECOVERY, HCP])
    awaiting = muntin.assess(study, "stacked")
    assert awaiting.awaited == ("hcp",)
    assert select(awaiting, 5, "edge", 1).picks == select(view, 5, "edge", 1).picks


# The opening plate.


def distance(definition, frame):
    """Root mean square distance (coded) from a judged condition to the nearest of a frame."""
    grid, _ = judged_grid(definition)
    G, X = code(definition, grid), code(definition, frame)
    squared = ((G[:, None] - X[None]) ** 2).sum(-1).min(axis=1)
    return np.sqrt(squared.mean()), grid


@pytest.mark.parametrize("surrogate", ["gp", "stacked"])
@pytest.mark.parametrize("wells", [6, 12])
def test_an_opening_plate_fills_the_range(tmp_path, surrogate, wells):
    # Closer to every condition than 95 of 100 random plates of as many wells.
    view = muntin.assess(written(tmp_path / "study"), surrogate)
    assert view.fresh
    chosen = select(view, wells, "edge", 1)
    assert of(chosen, "bridge") == []
    assert chosen.run == ()
    ours, grid = distance(view.study.definition, conditions(chosen, chosen.picks))
    rng = np.random.default_rng(1)
    drawn = [
        distance(view.study.definition, grid.iloc[rng.choice(len(grid), wells, replace=False)])[0]
        for _ in range(200)
    ]
    assert ours < np.quantile(drawn, 0.05)


def test_an_opening_plate_for_the_quadratic_asks_for_the_ends_and_the_middle(tmp_path):
    view = muntin.assess(written(tmp_path / "study"), "quadratic")
    chosen = select(view, 12, "edge", 1)
    X = code(view.study.definition, conditions(chosen, chosen.picks))
    at_an_end = (np.abs(X) > 0.99).any(axis=1)
    assert at_an_end.mean() > 0.5
    assert {tuple(np.round(x, 6)) for x in X[~at_an_end]} >= {(0.0, 0.0)}


@pytest.mark.parametrize(("wells", "centred"), [(7, False), (8, True), (13, True)])
@pytest.mark.parametrize("repeats", [1, 2])
def test_an_opening_plate_of_some_size_begins_and_ends_with_its_centre(
    tmp_path, wells, centred, repeats
):
    study = written(tmp_path / "study", plan={"repeats_min": repeats})
    chosen = select(muntin.assess(study, "gp"), wells, "edge", 1)
    assert len(chosen.picks) == wells
    values = list(conditions(chosen, chosen.picks).itertuples(index=False, name=None))
    centre = (6.0, 250.0)
    count = Counter(values)
    if centred:
        assert values[0] == values[-1] == centre
        assert count[centre] >= 2
    elif repeats == 1:
        assert count[centre] <= 1
    alone = [n for condition, n in count.items() if n < repeats]
    assert alone == []


def test_a_later_plate_has_no_centre_of_its_own(view):
    chosen = select(changed(view, plan={"bridging_wells": 0}), 8, "edge", 1)
    values = list(conditions(chosen, chosen.picks).itertuples(index=False, name=None))
    assert (6.0, 250.0) not in (values[0], values[-1])


@pytest.mark.parametrize("aim", ["best", "both"])
def test_an_opening_plate_with_another_aim(tmp_path, aim):
    view = muntin.assess(written(tmp_path / "study"), "gp")
    chosen = select(view, 6, aim, 1)
    assert len(of(chosen)) == 6
    assert len({pick.candidate for pick in chosen.picks}) >= 2
