"""Grids under a name that tells no fraction or plate of the study: the name is at fault."""

from __future__ import annotations

import pytest

from muntin.record.faults import StudyFaults
from tests.assay.studies import HEADING, READS, reduced

NUMBERS = "," + ",".join(str(n) for n in range(1, 13))
ROWS = [f"{letter}," + ",".join(["0.1"] * 12) for letter in "ABCDEFGH"]
BOTH, LETTERS = [NUMBERS, *ROWS], ROWS
UNLETTERED = [NUMBERS[1:], *(row[2:] for row in ROWS)]
TITLED = ["Plate read of 2024-05-03", "", *BOTH]
HINT = "a grid is named PLATE_FRACTION_WAVELENGTH, such as plate-01_strip_280.csv; plates: "
ONE = f"({HINT}plate-01; fractions: load, ft, e1, strip)"


def told(folder, name: str, cells=BOTH, plates=()) -> str:
    for plate in plates:
        (folder / "plates").mkdir(exist_ok=True)
        (folder / "plates" / f"{plate}.csv").write_text("well,role,ph,salt,recovery\n")
    heading, reads = (f"plate,{HEADING}", [f"plate-01,{read}" for read in READS])
    files = {"all.csv": "\n".join((heading, *reads)), name: "\n".join(cells) + "\n"}
    with pytest.raises(StudyFaults) as caught:
        reduced(folder, reads=files)
    (line,) = caught.value.lines()
    return line


@pytest.mark.parametrize("cells", [BOTH, LETTERS, UNLETTERED, TITLED])
def test_an_unknown_fraction(tmp_path, cells):
    assert told(tmp_path, "plate-01_stripp_280.csv", cells) == (
        'reads/plate-01_stripp_280.csv, a grid by its content: "stripp" in its name is not a '
        f'fraction of [assay]; did you mean "strip"? {ONE}'
    )


@pytest.mark.parametrize(
    ("name", "said"),
    [
        ("eluate_280.csv", '"eluate" in its name is not a fraction of [assay]'),
        (
            "plat-1_e1_280_x5.csv",
            '"plat-1" in its name is not a plate that was run; did you mean "plate-01"?',
        ),
        (
            "plate-01_e1_A280.csv",
            '"A280" in its name is neither a wavelength (280) nor "volume", nor a dilution behind '
            "them (x5)",
        ),
        (
            "run_7_280.csv",
            '"run_7" in its name is no plate that was run and a fraction of [assay], parted by _',
        ),
    ],
)
def test_what_is_not_understood(tmp_path, name, said):
    assert told(tmp_path, name) == f"reads/{name}, a grid by its content: {said} {ONE}"


def test_the_plate_may_not_be_left_out_where_there_are_several(tmp_path):
    assert told(tmp_path, "e1_280.csv", plates=("plate-02",)) == (
        'reads/e1_280.csv, a grid by its content: "e1" in its name stands without its plate, of '
        f"which there are several ({HINT}plate-01, plate-02; fractions: load, ft, e1, strip)"
    )


def test_a_table_under_the_name_of_a_grid_is_read_as_a_table(tmp_path):
    """What is no grid stays a tidy table, whatever its name."""
    lines = "\n".join((HEADING, *READS)) + "\n"
    assert len(reduced(tmp_path, reads={"run_7_280.csv": lines}).reads) == len(READS)
