"""Well names of both plates."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from muntin.record.wells import (
    ROWS_COLUMNS,
    WellError,
    all_wells,
    last_well,
    position,
    well_name,
    wells_in,
)
from tests.record.conftest import STEADY

PLATES = st.sampled_from([96, 384])


@STEADY
@given(st.data(), PLATES)
def test_a_well_is_known_by_each_of_its_names(data, plate):
    rows, columns = ROWS_COLUMNS[plate]
    row, column = data.draw(st.integers(0, rows - 1)), data.draw(st.integers(0, columns - 1))
    letter, number = chr(ord("A") + row), column + 1
    names = [f"{letter}{number}", f"{letter}{number:02}", f" {letter.lower()}{number:03} "]
    assert {well_name(name, plate) for name in names} == {f"{letter}{number}"}
    assert {position(name, plate) for name in names} == {(row, column)}


@STEADY
@given(st.text(max_size=6), PLATES)
def test_any_text_is_a_well_of_the_plate_or_no_well(text, plate):
    try:
        name = well_name(text, plate)
    except WellError:
        return
    assert name in all_wells(plate)
    assert well_name(name, plate) == name


@pytest.mark.parametrize(
    "text", ["", "A", "1", "A0", "AA1", "A1A", "A 1", "A-1", "A1.0", "Ä1", "A٣"]
)
def test_what_is_no_well_name(text):
    with pytest.raises(WellError, match="is not a well name"):
        well_name(text)


@pytest.mark.parametrize(("text", "plate"), [("I1", 96), ("A13", 96), ("Q1", 384), ("A25", 384)])
def test_what_the_plate_does_not_have(text, plate):
    with pytest.raises(WellError, match=f"is not a well of a {plate}-well plate"):
        well_name(text, plate)


def test_plates_have_their_wells():
    for plate, last in ((96, "H12"), (384, "P24")):
        wells = all_wells(plate)
        assert len(set(wells)) == plate
        assert (wells[0], wells[-1], last_well(plate)) == ("A1", last, last)


def test_ranges_of_wells():
    assert wells_in("B2:C3", 96) == ("B2", "B3", "C2", "C3")
    assert wells_in("H12, a01 , A1:A2", 96) == ("A1", "A2", "H12")
    assert wells_in("A1:P24", 384) == all_wells(384)


@pytest.mark.parametrize(
    ("text", "problem"),
    [
        ("A1:I1", 'names "I1", which is not a well of a 96-well plate'),
        ("A1;B2", 'names "A1;B2", which is not a well name'),
        ("A1:B2:C3", 'names "A1:B2:C3", which is not a range of wells'),
        ("B1:A2", 'names "B1:A2", a range that runs backwards'),
        ("", 'names "", which is not a well name'),
    ],
)
def test_ranges_that_are_none(text, problem):
    with pytest.raises(WellError) as raised:
        wells_in(text, 96)
    assert str(raised.value) == problem
