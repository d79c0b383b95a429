"""Well positions against the microplate standard, ANSI/SLAS 4-2004."""

from pathlib import Path

import pandas as pd
import pytest

from muntin.bench import wells

DATA = Path(__file__).parent / "data"

# ANSI/SLAS 1-2004: outside length and width of every microplate, mm.
FOOTPRINT = (127.76, 85.48)


@pytest.mark.parametrize("plate", [96, 384])
def test_positions_and_numbering_agree_with_the_standard(plate):
    table = pd.read_csv(DATA / f"wells_{plate}.csv")
    assert len(table) == plate
    assert tuple(table["well"]) == wells.well_names(plate)
    by_column = table.sort_values("index_col_major_0")["well"]
    assert tuple(by_column) == wells.well_names(plate, "column")
    for row in table.itertuples():
        assert wells.well_index(row.well, plate) == (row.row - 1, row.col - 1)
        assert wells.centre(row.well, plate) == pytest.approx(
            (row.x_mm_from_left, row.y_mm_from_top), abs=1e-9
        )


@pytest.mark.parametrize(("plate", "last"), [(96, "H12"), (384, "P24")])
def test_the_field_of_wells_is_centred_on_the_footprint(plate, last):
    first_centre, last_centre = wells.centre("A1", plate), wells.centre(last, plate)
    for near, far, length in zip(first_centre, last_centre, FOOTPRINT, strict=True):
        assert near + far == pytest.approx(length, abs=1e-9)


@pytest.mark.parametrize(("plate", "count"), [(96, 36), (384, 76)])
def test_number_of_perimeter_wells(plate, count):
    assert len(wells.perimeter(plate)) == count
