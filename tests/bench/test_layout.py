from collections import Counter, defaultdict

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from muntin.bench import default_controls, lay_out, perimeter, well_names
from muntin.bench.wells import well_indices

ROLES = ["test", "bridge", "reference", "blank", "load", "no_resin", "water"]
CONTROLS = ["blank"] * 2 + ["load"] * 4 + ["no_resin"] * 2


def gaps(wells, plate=96):
    """Distances in pitches between all pairs of wells."""
    places = well_indices(wells, plate)
    distance = np.sqrt(((places[:, None] - places[None]) ** 2).sum(axis=2))
    return distance[np.triu_indices(len(wells), k=1)]


@st.composite
def plans(draw):
    plate = draw(st.sampled_from([96, 384]))
    seed = draw(st.integers(0, 2**32 - 1))
    free = draw(st.integers(1, 60))
    rng = np.random.default_rng(seed)
    free_wells = rng.choice(well_names(plate), size=free, replace=False).tolist()
    roles = draw(st.lists(st.sampled_from(ROLES), max_size=free))
    conditions = [None if role in ROLES[3:] else int(rng.integers(5)) for role in roles]
    return {"roles": roles, "plate": plate, "free_wells": free_wells, "conditions": conditions}


@given(plans(), st.integers(0, 99))
def test_every_row_gets_a_free_well_of_its_own(plan, seed):
    wells = lay_out(**plan, rng=np.random.default_rng(seed))
    assert len(wells) == len(plan["roles"]) == len(set(wells))
    assert set(wells) <= set(plan["free_wells"])


@given(plans(), st.integers(0, 99))
def test_the_same_seed_gives_the_same_layout(plan, seed):
    first = lay_out(**plan, rng=np.random.default_rng(seed))
    assert lay_out(**plan, rng=np.random.default_rng(seed)) == first


def test_other_seeds_give_other_layouts():
    layouts = {
        lay_out(["test"] * 5, plate=96, rng=np.random.default_rng(seed)) for seed in range(20)
    }
    assert len(layouts) == 20


@given(
    st.sampled_from(["row", "column"]),
    st.sampled_from([96, 384]),
    st.lists(st.integers(1, 9), min_size=1, max_size=6),
    st.integers(0, 12),
    st.integers(0, 99),
)
def test_no_plate_line_is_fed_by_two_stocks(prepared_by, plate, needs, n_controls, seed):
    stocks = [f"pH {k}" for k, need in enumerate(needs) for _ in range(need)]
    roles = ["bridge" if k % 7 == 0 else "test" for k in range(len(stocks))]
    wells = lay_out(
        [*roles, *["load"] * n_controls],
        plate=plate,
        rng=np.random.default_rng(seed),
        prepared_by=prepared_by,
        stocks=[*stocks, *[None] * n_controls],
    )
    assert len(set(wells)) == len(wells)
    lines = well_indices(wells, plate)[:, 0 if prepared_by == "row" else 1]
    fed_by = defaultdict(set)
    for line, stock in zip(lines, stocks, strict=False):
        fed_by[int(line)].add(stock)
    assert all(len(found) == 1 for found in fed_by.values())


def test_controls_leave_each_stock_its_wells_on_a_full_plate():
    stocks = [pH for pH in range(8) for _ in range(11)]
    wells = lay_out(
        ["test"] * 88 + CONTROLS,
        plate=96,
        rng=np.random.default_rng(4),
        prepared_by="row",
        stocks=stocks + [None] * 8,
    )
    rows = well_indices(wells, 96)[:, 0]
    assert len(set(wells)) == 96
    assert all(len(set(rows[11 * k : 11 * k + 11])) == 1 for k in range(8))
    assert sorted(rows[88:]) == list(range(8))


def test_stocks_that_do_not_fit_on_lines_of_their_own_are_refused():
    with pytest.raises(ValueError, match="9 stocks need 1, 1, 1, 1, 1, 1, 1, 1, 1 wells"):
        lay_out(
            ["test"] * 9,
            plate=96,
            rng=np.random.default_rng(0),
            prepared_by="row",
            stocks=list(range(9)),
        )


@given(st.integers(0, 2**32 - 1), st.sampled_from([96, 384]), st.integers(0, 40))
def test_controls_keep_apart_and_off_a_crowded_perimeter(seed, plate, n_test):
    wells = lay_out(["test"] * n_test + CONTROLS, plate=plate, rng=np.random.default_rng(seed))
    controls = wells[n_test:]
    assert gaps(controls, plate).min() > np.sqrt(2)
    share = len(perimeter(plate)) / plate
    assert len(perimeter(plate) & set(controls)) <= share * len(controls)


def test_controls_are_spread_wider_than_chance_spreads_them():
    rng = np.random.default_rng(11)
    spread = [
        gaps(lay_out(["test"] * 24 + CONTROLS, plate=96, rng=rng)[24:]).min() for _ in range(60)
    ]
    chance = [gaps(rng.choice(well_names(96), 8, replace=False)).min() for _ in range(2000)]
    assert np.median(spread) > np.quantile(chance, 0.95)
    assert min(spread) > np.median(chance)


def test_wells_of_one_control_are_spread_wider_than_controls_at_large():
    rng = np.random.default_rng(12)
    loads, mixed = [], []
    for _ in range(60):
        controls = np.array(lay_out(CONTROLS, plate=96, rng=rng))
        loads.append(gaps(controls[2:6]).min())
        mixed.append(gaps(rng.choice(controls, 4, replace=False)).min())
    assert np.mean(loads) > np.mean(mixed) + 0.5


@given(st.integers(0, 2**32 - 1), st.sampled_from(["well", "row", "column"]))
def test_repeats_do_not_touch_where_room_is_left(seed, prepared_by):
    conditions = [k for k in range(6) for _ in range(3)]
    wells = lay_out(
        ["test"] * 18,
        plate=96,
        rng=np.random.default_rng(seed),
        prepared_by=prepared_by,
        stocks=conditions,
        conditions=conditions,
    )
    for k in range(6):
        assert gaps(wells[3 * k : 3 * k + 3]).min() > np.sqrt(2)


def test_repeats_that_must_touch_are_placed_all_the_same():
    wells = lay_out(
        ["test"] * 4,
        plate=96,
        free_wells="C3:D4",
        rng=np.random.default_rng(0),
        conditions=["a"] * 4,
    )
    assert sorted(wells) == ["C3", "C4", "D3", "D4"]


def test_a_test_row_may_fall_on_any_free_well():
    rng = np.random.default_rng(8)
    counts = Counter(
        lay_out(["test", "test"], plate=96, free_wells="B2:C7", rng=rng)[0] for _ in range(1200)
    )
    assert len(counts) == 12
    # 100 expected a well; binomial sd 9.6, so 4 sd either way
    assert min(counts.values()) > 62
    assert max(counts.values()) < 138


@pytest.mark.parametrize(
    ("given_by", "message"),
    [
        ({"free_wells": "A1:A3"}, "4 rows need a well each, but only 3 wells are free"),
        ({"conditions": ["a"]}, "4 roles but 1 conditions"),
        ({"prepared_by": "row", "stocks": ["a"]}, "4 roles but 1 stocks"),
        ({"free_wells": ["A1", "J9"]}, "'J9' is no well of a 96-well plate"),
    ],
)
def test_impossible_plans_are_refused(given_by, message):
    with pytest.raises(ValueError, match=message):
        lay_out(["test"] * 4, plate=96, rng=np.random.default_rng(0), **given_by)


def test_an_empty_plan_has_no_wells():
    assert lay_out([], plate=96, rng=np.random.default_rng(0)) == ()


def test_a_whole_plate_carries_the_usual_controls():
    assert default_controls(96) == {"blank": 2, "load": 4, "no_resin": 2}
    assert default_controls(384) == {"blank": 4, "load": 8, "no_resin": 4}


@given(st.sampled_from([96, 384]), st.integers(0, 384))
def test_controls_take_at_most_a_quarter_of_the_free_wells(plate, free):
    assume(free <= plate)
    controls, whole = default_controls(plate, free), default_controls(plate)
    assert sum(controls.values()) == min(free // 4, sum(whole.values()))
    assert all(controls[role] <= whole[role] for role in whole)


def test_the_first_controls_kept_are_a_load_and_a_blank():
    assert default_controls(96, 8) == {"blank": 1, "load": 1, "no_resin": 0}


# Wells that rows have already.


def test_fixed_wells_stay():
    roles = ["test"] * 6 + ["blank"] * 2
    fixed = ["C3", None, "a04", None, None, None, "H12", None]
    wells = lay_out(roles, plate=96, rng=np.random.default_rng(1), fixed=fixed)
    assert (wells[0], wells[2], wells[6]) == ("C3", "A4", "H12")
    assert len(set(wells)) == 8


@pytest.mark.parametrize(
    ("fixed", "free"), [(["C3", "c03"], None), (["C3", None], "A1:B12"), (["C3"], None)]
)
def test_fixed_wells_that_cannot_be(fixed, free):
    with pytest.raises(ValueError, match="fixed wells"):
        lay_out(["test"] * 2, plate=96, rng=np.random.default_rng(1), fixed=fixed, free_wells=free)


@settings(deadline=None, derandomize=True, max_examples=60)
@given(
    st.lists(st.integers(0, 3), min_size=1, max_size=24),
    st.sampled_from(["row", "column"]),
    st.integers(0, 9),
    st.data(),
)
def test_lines_belong_to_one_stock_with_fixed_wells_too(stocks, by, seed, data):
    # Fixed wells as an earlier layout had them, so that they agree with one another.
    roles = ["test"] * len(stocks)
    asked = {"plate": 96, "prepared_by": by, "stocks": stocks}
    earlier = lay_out(roles, rng=np.random.default_rng(seed), **asked)
    held = [well if data.draw(st.booleans()) else None for well in earlier]
    wells = lay_out(roles, rng=np.random.default_rng(seed + 1), fixed=held, **asked)
    assert len(set(wells)) == len(wells)
    assert all(h is None or h == w for h, w in zip(held, wells, strict=True))
    feeds = {}
    for stock, well in zip(stocks, wells, strict=True):
        line = well[0] if by == "row" else well[1:]
        assert feeds.setdefault(line, stock) == stock
