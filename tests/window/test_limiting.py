"""Which response gives way first: at conditions, and beyond each side of the ranges."""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

import muntin
from muntin.record import StudyFaults
from muntin.window.limiting import sides_of
from tests.studies import HCP, PH, RECOVERY, SALT, changed, read, read_hcp, spread, written

FACTORS = [PH, SALT]
# Recovery asks for much salt, host cell protein for little; neither minds the other.
RESPONSES = [RECOVERY, {**HCP, "at_most": 45}]
WIDE = [{**RECOVERY, "at_least": 0.6}, {**HCP, "at_most": 60}]
ASKED = pd.DataFrame(
    {"salt": [100, 250, 450, 300], "ph": [7.0, 6.0, 7.0, 7.5]}, index=["d", "b", "a", "b"]
)


@pytest.fixture(scope="module")
def view(tmp_path_factory):
    plates = [read_hcp(read(spread(FACTORS, 20, seed), seed), seed + 9) for seed in (1, 2)]
    folder = tmp_path_factory.mktemp("two")
    return muntin.assess(written(folder, plates, responses=RESPONSES), "quadratic")


@pytest.mark.parametrize("by", ["mean", "well", "kept"])
def test_least_likely_response_is_the_smallest_column(view, by):
    factors = [{**PH, "kept_within": 0.2}, {**SALT, "kept_within": 20}]
    judged = changed(view, responses=RESPONSES, factors=factors, study={"judged_by": by})
    table = judged.at(ASKED)
    found = judged.limiting(ASKED)
    assert list(found.columns) == ["response", "probability", "fails"]
    assert list(found.index) == list(ASKED.index)
    kind = "mean" if by == "mean" else "well"
    columns = table[[f"recovery_p_{kind}", f"hcp_p_{kind}"]]
    assert list(found["response"]) == [
        ["recovery", "hcp"][i] for i in columns.to_numpy().argmin(axis=1)
    ]
    assert list(found["response"])[:3] == ["recovery", "recovery", "hcp"]
    assert list(found["fails"])[:3] == ["low", "low", "high"]
    least = columns.min(axis=1)
    if by == "kept":
        assert 1e-3 < np.abs(found["probability"].to_numpy() - least.to_numpy()).max() < 0.2
        assert (found["probability"] >= table["p_kept"] - 1e-9).all()
    else:
        np.testing.assert_allclose(found["probability"], least, rtol=1e-9)


def test_a_target_between_may_fail_on_either_side(view):
    both = changed(view, responses=[{**RECOVERY, "at_least": 0.4, "at_most": 0.8}])
    ends = pd.DataFrame({"ph": [4.5, 7.5], "salt": [50, 450]})
    found = both.limiting(ends)
    assert list(found["fails"]) == ["low", "high"]
    assert set(found["response"]) == {"recovery"}


def test_conditions_are_checked(view):
    with pytest.raises(StudyFaults):
        view.limiting(ASKED.drop(columns="ph"))


def test_sides_name_what_gives_way(view):
    window = view.window()
    assert window.ranges is not None
    sides = {(side.factor, side.end): side for side in window.sides}
    assert list(sides) == [(f, end) for f in ("ph", "salt") for end in ("low", "high")]
    for (name, end), side in sides.items():
        assert side.at == window.ranges[name][0 if end == "low" else 1]
    # Less salt elutes less, more salt brings host cell protein with it.
    assert (sides["salt", "low"].response, sides["salt", "low"].fails) == ("recovery", "low")
    assert (sides["salt", "high"].response, sides["salt", "high"].fails) == ("hcp", "high")
    assert sides["ph", "low"].response == "recovery"
    # Host cell protein is blind to pH, recovery rises with it: the tested range ends first.
    assert sides["ph", "high"].at == 7.5
    assert sides["ph", "high"].beyond is None
    assert sides["ph", "high"].response is None


def test_a_side_tells_the_worst_condition_just_beyond(view):
    view = changed(view, responses=WIDE)
    window = view.window()
    low, high = window.ranges["ph"]
    side = next(s for s in window.sides if (s.factor, s.end) == ("salt", "low"))
    assert side.beyond == side.at - 50
    beyond = pd.DataFrame({"ph": np.arange(low, high + 0.1, 0.5), "salt": side.beyond})
    table = view.at(beyond)
    worst = beyond.loc[[table["p_well"].idxmin()]]
    found = view.limiting(worst).iloc[0]
    assert side.probability == pytest.approx(found["probability"], rel=1e-9)
    assert table["p_well"].min() < 0.9 < table["p_well"].max()


def test_a_box_that_could_grow_has_nothing_in_its_way(view):
    # Such a box is left where a limit cuts the next level short.
    view = changed(view, responses=WIDE)
    window = view.window()
    (low, high), salt = window.ranges["ph"], window.ranges["salt"]
    assert high - low >= 0.5
    small = replace(window, ranges={"ph": (low + 0.5, high), "salt": salt})
    side = sides_of(view, small)[0]
    assert (side.factor, side.end, side.beyond) == ("ph", "low", None)


def test_a_limit_in_the_way_is_no_failure(view):
    limits = [{"allow": "salt <= 250"}]
    window = changed(view, responses=RESPONSES, limits=limits).window()
    side = next(s for s in window.sides if (s.factor, s.end) == ("salt", "high"))
    assert (side.at, side.beyond, side.response) == (250.0, None, None)


def test_without_a_window_there_are_no_sides(view):
    hard = [{**RECOVERY, "at_least": 0.995}, {**HCP, "at_most": 2}]
    window = changed(view, responses=hard).window()
    assert window.ranges is None
    assert window.sides == ()
