from dataclasses import fields, replace

import numpy as np
import pytest

from muntin.lab import Errors, ErrorSizes

WELLS, STAGES = 6000, 4
NONE = ErrorSizes.none()

OWN = {
    "ph_sd": ("ph", 0.0),
    "salt_cv": ("salt", 1.0),
    "hold_up_cv": ("hold_up", 1.0),
    "resin_cv": ("resin", 1.0),
    "weighing_cv": ("weighing", 1.0),
    "path_cv": ("path", 1.0),
}
SHARED = {
    "load_cv": ("load", 1.0, "plates"),
    "blank_sd": ("blank", 0.0, "plates"),
    "stock_ph_sd": ("ph", 0.0, "stocks"),
    "stock_salt_cv": ("salt", 1.0, "stocks"),
}


def draw(sizes, seed=1, **keys):
    return sizes.draw(WELLS, STAGES, np.random.default_rng(seed), **keys)


def assert_scattered(values, mean, sd):
    """Mean and sd within 4 standard errors of their own, and as good as uncorrelated."""
    n = values.size
    assert values.mean() == pytest.approx(mean, abs=4 * sd / np.sqrt(n))
    # The kurtosis of a log-normal with a cv of 0.3 is near 5; a normal has 3.
    assert values.std() == pytest.approx(sd, rel=4 * np.sqrt((5 - 1) / (4 * n)))
    assert abs(np.corrcoef(values[:-1], values[1:])[0, 1]) < 4 / np.sqrt(n)


@pytest.mark.parametrize("size", OWN)
def test_each_well_errs_by_its_size(size):
    name, mean = OWN[size]
    drawn = getattr(draw(replace(NONE, **{size: 0.3})), name)
    assert_scattered(drawn[:, 0] if drawn.ndim == 2 else drawn, mean, 0.3)


def test_one_pipette_fills_wells_and_reading_plate():
    drawn = draw(replace(NONE, volume_cv=0.3))
    for factors in (drawn.volume, drawn.filling):
        assert factors.shape == (WELLS, STAGES)
        assert_scattered(factors.ravel(), 1.0, 0.3)
    assert abs(np.corrcoef(drawn.volume[:, 0], drawn.filling[:, 0])[0, 1]) < 4 / np.sqrt(WELLS)


@pytest.mark.parametrize("size", SHARED)
def test_wells_that_share_a_plate_or_stock_share_its_error(size):
    name, mean, keys = SHARED[size]
    labels = [k // 2 for k in range(WELLS)]
    drawn = getattr(draw(replace(NONE, **{size: 0.3}), **{keys: labels}), name).reshape(-1, 2)
    assert np.array_equal(drawn[:, 0], drawn[:, 1])
    assert_scattered(drawn[:, 0], mean, 0.3)
    assert len(set(getattr(draw(replace(NONE, **{size: 0.3})), name))) == 1


def test_the_two_errors_of_a_plate_or_stock_are_drawn_apart():
    alone = list(range(WELLS))
    drawn = draw(replace(NONE, load_cv=0.1, blank_sd=0.1), plates=alone)
    assert abs(np.corrcoef(drawn.load, drawn.blank)[0, 1]) < 4 / np.sqrt(WELLS)
    drawn = draw(replace(NONE, stock_ph_sd=0.1, stock_salt_cv=0.1), stocks=alone)
    assert abs(np.corrcoef(drawn.ph, drawn.salt)[0, 1]) < 4 / np.sqrt(WELLS)


def test_factors_stay_above_zero_and_sizes_of_zero_leave_all_as_it_was():
    assert draw(replace(NONE, hold_up_cv=1.5)).hold_up.min() > 0
    drawn, absent = draw(NONE), Errors.absent(STAGES)
    for each in fields(Errors):
        values = getattr(drawn, each.name)
        if each.name == "reading":
            assert_scattered(values[:, 0], 0.0, 1.0)
        else:
            assert np.all(values == getattr(absent, each.name))
            assert getattr(absent, each.name).shape == (1, *values.shape[1:])


def test_only_the_errors_whose_size_changes_are_drawn_otherwise():
    keys = {"plates": [k % 3 for k in range(WELLS)], "stocks": [k % 7 for k in range(WELLS)]}
    first, second = (draw(s, **keys) for s in (ErrorSizes(), ErrorSizes(resin_cv=0.2)))
    changed = {
        each.name
        for each in fields(Errors)
        if not np.array_equal(getattr(first, each.name), getattr(second, each.name))
    }
    assert changed == {"resin"}


def test_plates_of_one_state_err_equally_whatever_stocks_feed_them():
    few = ErrorSizes().draw(3, STAGES, np.random.default_rng(5), stocks=[0, 0, 0])
    many = ErrorSizes().draw(9, STAGES, np.random.default_rng(5), stocks=list(range(9)))
    assert few.load[0] == many.load[0] != 1.0
    assert few.blank[0] == many.blank[0] != 0.0


def test_a_read_scatters_by_its_floor_and_in_proportion():
    sizes = ErrorSizes(a280_floor=0.03, a280_cv=0.02)
    assert sizes.reading_sd(np.array([0.0, 2.0])) == pytest.approx([0.03, 0.05])


@pytest.mark.parametrize("keys", ["plates", "stocks"])
def test_every_well_has_a_key(keys):
    with pytest.raises(ValueError, match="5 wells but 3 keys of plates or stocks"):
        ErrorSizes().draw(5, 2, np.random.default_rng(1), **{keys: ["a", "b", "a"]})
