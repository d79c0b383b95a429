import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from muntin.bench import wells

PLATES = st.sampled_from([96, 384])


@given(PLATES, st.data())
def test_name_and_index_are_inverse(plate, data):
    shape = wells.geometry(plate)
    row = data.draw(st.integers(0, shape.rows - 1))
    column = data.draw(st.integers(0, shape.columns - 1))
    assert wells.well_index(wells.well_name(row, column), plate) == (row, column)


@pytest.mark.parametrize(
    ("written", "plain"),
    [("A1", "A1"), ("a01", "A1"), (" h12 ", "H12"), ("B10", "B10"), ("C09", "C9")],
)
def test_names_are_brought_to_one_form(written, plain):
    assert wells.normalise(written, 96) == plain


@pytest.mark.parametrize(
    "name", ["", "A", "1", "A0", "A00", "A13", "I1", "1A", "A1B", "A001", "AA1", "A-1", "A١"]
)
def test_other_names_are_refused_with_the_allowed_range(name):
    with pytest.raises(ValueError, match=r"is no well of a 96-well plate \(A1 to H12\)"):
        wells.well_index(name, 96)


def test_the_larger_plate_has_wells_the_smaller_has_not():
    assert wells.normalise("P24", 384) == "P24"
    with pytest.raises(ValueError, match=r"'Q1' is no well of a 384-well plate \(A1 to P24\)"):
        wells.normalise("Q1", 384)


def test_a_plate_of_another_size_is_refused():
    with pytest.raises(ValueError, match="a plate has 96 or 384 wells, not 48"):
        wells.geometry(48)


@given(PLATES)
def test_both_orders_hold_every_well_once(plate):
    by_row, by_column = wells.well_names(plate, "row"), wells.well_names(plate, "column")
    assert len(by_row) == len(set(by_row)) == plate
    assert set(by_row) == set(by_column)


def test_orders_start_along_their_line():
    assert wells.well_names(96, "row")[:3] == ("A1", "A2", "A3")
    assert wells.well_names(96, "column")[:3] == ("A1", "B1", "C1")


@pytest.mark.parametrize("plate", [96, 384])
def test_perimeter_wells_are_those_with_fewer_than_eight_neighbours(plate):
    places = wells.well_indices(wells.well_names(plate), plate)
    steps = np.abs(places[:, None, :] - places[None, :, :]).max(axis=2)
    fewer = (steps == 1).sum(axis=1) < 8
    expected = {name for name, few in zip(wells.well_names(plate), fewer, strict=True) if few}
    assert wells.perimeter(plate) == expected


def test_indices_have_one_row_a_well():
    assert wells.well_indices(["B3", "A01", "H12"], 96).tolist() == [[1, 2], [0, 0], [7, 11]]
    assert wells.well_indices([], 96).shape == (0, 2)


@pytest.mark.parametrize(
    ("text", "names"),
    [
        ("B2", ("B2",)),
        ("A11:B12", ("A11", "A12", "B11", "B12")),
        ("B12:A11", ("A11", "A12", "B11", "B12")),
        ("C3, A1:A2 ,a02", ("A1", "A2", "C3")),
    ],
)
def test_ranges_list_their_wells_row_by_row_and_once(text, names):
    assert wells.well_range(text, 96) == names


@given(PLATES)
def test_the_range_between_the_corners_is_the_plate(plate):
    names = wells.well_names(plate)
    assert wells.well_range(f"{names[0]}:{names[-1]}", plate) == names


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", "'' is no well of a 96-well plate"),
        ("A1:", "'' is no well of a 96-well plate"),
        ("A1,,B1", "'' is no well of a 96-well plate"),
        ("A1:H13", "'H13' is no well of a 96-well plate"),
        ("A1:B2:C3", "'A1:B2:C3' is no block of wells: give two corners, as A1:C6"),
    ],
)
def test_faulty_ranges_are_refused(text, message):
    with pytest.raises(ValueError, match=message):
        wells.well_range(text, 96)
