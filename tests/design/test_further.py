"""Wells beyond the plan: the plan's own first, further plates with errors of their own."""

import numpy as np
import pytest

import muntin
from muntin.design.further import Rooms, _Coming, prospects
from muntin.design.selection import select
from tests.studies import PH, RECOVERY, SALT, changed, read, spread, written

FACTORS = [PH, SALT]
EARLIER = [read(spread(FACTORS, 12, seed), seed, error) for seed, error in ((1, 0.02), (2, -0.03))]
ONE_PLATE = Rooms(first=84, further=84)


@pytest.fixture(scope="module")
def view(tmp_path_factory):
    return muntin.assess(written(tmp_path_factory.mktemp("two") / "study", EARLIER), "stacked")


@pytest.fixture(scope="module")
def selection(view):
    return select(view, 6, "edge", 1)


def test_rooms():
    rooms = Rooms(first=10, further=84)
    assert [rooms.plates(k) for k in (0, 1, 10, 11, 94, 95, 178, 179)] == [0, 1, 1, 2, 2, 3, 3, 4]
    full = Rooms(first=3, further=0)
    assert full.plates(3) == 1
    with pytest.raises(ValueError, match=r"^4 test wells do not fit$"):
        full.plates(4)


@pytest.mark.parametrize(
    "target", [{"at_least": 0.8}, {"at_most": 0.4}, {"at_least": 0.4, "at_most": 0.9}]
)
def test_the_plans_own_wells_come_first(view, target):
    keys = {k: v for k, v in RECOVERY.items() if k != "at_least"}
    asked = changed(view, responses=[{**keys, **target}])
    chosen = select(asked, 6, "edge", 1)
    ahead = prospects(asked, asked.window(), chosen, (0, 1, 4, 6), ONE_PLATE, 0.9)
    assert [p.wells for p in ahead] == [0, 1, 4, 6]
    shares = [p.wrong_share for p in ahead[1:]]
    assert shares == pytest.approx([chosen.forecast[k] for k in (1, 4, 6)], rel=1e-8)


def test_without_wells_it_is_the_window_of_today(view, selection):
    window = view.window()
    first = prospects(view, window, selection, (0, 2), ONE_PLATE, 0.9)[0]
    assert first.wrong_share == window.wrong_share
    assert first.set_point == window.setpoint["probability"]
    assert first.reached == float(first.set_point >= 0.9)


def test_more_wells_bring_more(view, selection):
    ahead = prospects(view, view.window(), selection, (0, 3, 6, 10, 16), ONE_PLATE, 0.9)
    assert (np.diff([p.wrong_share for p in ahead]) < 0.0).all()
    assert (np.diff([p.set_point for p in ahead]) >= 0.0).all()


def coming(view, selection, rooms, wells, plates):
    ahead = _Coming(view, view.window(), selection, plates)
    while ahead.tests < wells:
        ahead.next(wells, rooms)
    return ahead


def test_every_plate_begins_with_its_bridging_wells(view, selection):
    rooms = Rooms(first=7, further=3)
    ahead = coming(view, selection, rooms, 12, rooms.plates(12))
    plates = ahead.frame["plate"].iloc[ahead.taken].tolist()
    assert plates == ["new 0"] * (4 + 7) + ["new 1"] * (4 + 3) + ["new 2"] * (4 + 2)
    wells = ahead.frame[["ph", "salt"]].iloc[ahead.taken].to_numpy().tolist()
    chosen = selection.candidates.iloc[[p.candidate for p in selection.picks]].to_numpy().tolist()
    assert wells[:10] == chosen
    assert wells[11:15] == wells[18:22] == wells[:4]


def test_further_plates_have_errors_of_their_own(view, selection):
    ahead = coming(view, selection, Rooms(first=6, further=6), 7, 2)
    (outlook,) = ahead.outlooks
    (groups,) = outlook.scale
    assert set(groups[: ahead.size]) == {groups[0]}
    assert set(groups[ahead.size :]) == {groups[-1]}
    assert groups[0] != groups[-1]


def test_a_second_plate_tells_more_than_the_same_wells_of_one(view, selection):
    # On one plate twelve wells share an error, on two plates six do.
    gained = []
    for last in (0, 1):
        ahead = _Coming(view, view.window(), selection, 2)
        for ahead.plate in (0, last):
            for well in ahead.planned:
                ahead._take(well)
        (outlook,) = ahead.outlooks
        assert len(ahead.taken) == 12
        gained.append((outlook.surface.weights @ outlook.explained).sum())
    assert gained[1] > 1.01 * gained[0]


def test_levels_of_a_plate_are_kept_to(tmp_path_factory):
    factors = [{**PH, "per_plate": 2}, SALT]
    study = written(tmp_path_factory.mktemp("levels"), EARLIER, factors=factors)
    view = muntin.assess(study, "quadratic")
    rooms = Rooms(first=5, further=5)
    ahead = coming(view, select(view, 3, "edge", 1), rooms, 10, 2)
    taken = ahead.frame.iloc[ahead.taken]
    assert (taken.groupby("plate")["ph"].nunique() <= 2).all()


def test_repeats(view):
    repeated = changed(view, plan={"repeats_min": 3, "bridging_wells": 0})
    ahead = coming(repeated, select(repeated, 3, "edge", 1), ONE_PLATE, 9, 1)
    later = ahead.taken[3:]
    assert later[0] == later[1] == later[2]
    assert later[3] == later[4] == later[5]
