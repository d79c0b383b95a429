"""Reads as they come: tidy tables, grids, mapped columns, and every fault with its address."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from muntin.assay.choice import choose
from muntin.assay.grids import grid_name
from muntin.assay.reads import Asked, Read, read_reads
from muntin.assay.reduction import reduce_reads
from muntin.record import StudyFaults, open_study
from muntin.record.assay import Assay
from muntin.record.faults import Findings
from tests.assay.studies import HEADING, READS, STAGES, assay, reduced, write

ASKED = Asked(plates=("plate-01",), size=96, assay=Assay.model_validate(assay()))


def reads_of(tmp_path, name, text, asked=ASKED):
    path = tmp_path / name
    path.write_text(text, encoding="utf-8")
    found = Findings()
    return read_reads(path, asked, found), found


def lines_of(tmp_path, **given):
    with pytest.raises(StudyFaults) as raised:
        reduced(tmp_path, **given)
    return raised.value.lines()


def grid(cells, high=8, wide=12, sep=";", letters=True, numbers=True):
    """The text of a grid with these cells, by well."""
    head = [sep.join(["", *map(str, range(1, wide + 1))])] if numbers else []
    rows = []
    for r in range(high):
        letter = chr(ord("A") + r)
        row = [cells.get(f"{letter}{c}", "") for c in range(1, wide + 1)]
        rows.append(sep.join([letter, *row] if letters else row))
    return "\n".join([*head, *rows]) + "\n"


def test_a_tidy_table(tmp_path):
    text = (
        "plate;well;fraction;stage;wavelength;absorbance;dilution;volume_ul\n"
        "plate-01;a01;E1;elution;280;0,512;1:5;198,5\n"
        "plate-01;B2;ft;load;280;>3,5;;\n"
        "plate-01;B3;ft;;280;;;\n"
    )
    reads, found = reads_of(tmp_path, "any.csv", text)
    assert found.faults == []
    one, two = reads
    assert (one.well, one.fraction, one.absorbance, one.dilution, one.volume) == (
        "A1",
        "e1",
        0.512,
        5.0,
        198.5,
    )
    assert (two.absorbance, two.over, two.dilution) == (3.5, True, 1.0)
    assert two.where == "row 3"


@pytest.mark.parametrize("sep", [";", "\t", ","])
@pytest.mark.parametrize(("letters", "numbers"), [(True, True), (False, False), (True, False)])
def test_grids_with_and_without_headings(tmp_path, sep, letters, numbers):
    value = '"0,512"' if sep == "," else "0,512"
    cells = {"A1": value, "C12": "over", "H12": "0.25", "D4": ">3"}
    text = grid(cells, sep=sep, letters=letters, numbers=numbers)
    if not letters and not numbers:
        text = text.replace(f"{sep * 11}\n", f"{sep * 10}0{sep}\n")  # rows that are not empty
    reads, found = reads_of(tmp_path, "plate-01_e1_280_x5.csv", text)
    assert found.faults == []
    by = {read.well: read for read in reads}
    assert by["A1"].absorbance == 0.512
    assert by["H12"].absorbance == 0.25
    assert (by["C12"].absorbance, by["C12"].over) == (2.0, True)
    assert (by["D4"].absorbance, by["D4"].over) == (3.0, True)
    assert {read.dilution for read in reads} == {5.0}
    assert {read.fraction for read in reads} == {"e1"}


def test_a_grid_of_384_wells(tmp_path):
    asked = Asked(plates=("p",), size=384, assay=ASKED.assay)
    text = grid({"P24": "0.3"}, high=16, wide=24)
    reads, found = reads_of(tmp_path, "e1_280nm.csv", text, asked)
    assert [read.well for read in reads] == ["P24"]
    assert found.faults == []


def test_a_grid_of_another_size(tmp_path):
    _, found = reads_of(tmp_path, "plate-01_e1_280.csv", grid({"A1": "0.3"}, high=7))
    (fault,) = found.faults
    assert fault.text == (
        "plate-01_e1_280.csv: 7 x 1 cells are not a grid of a 96-well plate, 8 rows x 12 columns "
        "(column numbers above and row letters on the left may stand or not)"
    )


def test_a_workbook_reads_like_text(tmp_path):
    from openpyxl import Workbook

    book = Workbook()
    sheet = book.active
    sheet.append([None, *range(1, 13)])
    for letter in "ABCDEFGH":
        sheet.append([letter, 0.5 if letter == "B" else None, *[None] * 11])
    path = tmp_path / "plate-01_ft_280.xlsx"
    book.save(path)
    found = Findings()
    (read,) = read_reads(path, ASKED, found)
    assert (read.well, read.fraction, read.absorbance) == ("B1", "ft", 0.5)


def test_weighed_volumes_come_as_a_grid(tmp_path):
    folder = write(
        tmp_path,
        reads={
            "all.csv": "\n".join((HEADING, *READS)),
            "plate-01_e1_volume.csv": grid({"A1": "190"}),
        },
    )
    (plate,) = reduce_reads(open_study(folder, reducing=True), folder / "reads").plates
    row = plate.inputs.wells.index("A1")
    assert plate.inputs.volumes.collected[row, 1] == 190.0
    # 1 mg/mL: 190 µL were collected, so that 30 of 20 + 200 stay.
    assert plate.quantities["collected_ug"].value[row] == pytest.approx(190.0)
    _, left = plate.inputs.volumes.kept
    assert left[row, 2] == pytest.approx(30.0)


@pytest.mark.parametrize(
    ("stem", "expected"),
    [
        ("plate-01_e1_280", ("plate-01", "e1", 280.0, 1.0)),
        ("PLATE-01_E1_280nm_x2,5", ("plate-01", "e1", 280.0, 2.5)),
        ("plate-02_strip_volume", ("plate-02", "strip", None, 1.0)),
        ("e1_280", None),
        ("plate-03_e1_280", None),
        ("plate-01_e9_280", None),
        ("notes", None),
    ],
)
def test_names_of_grids(stem, expected):
    found = grid_name(stem, ("plate-01", "plate-02"), ("load", "ft", "e1", "strip"))
    assert found == expected


def test_columns_of_ones_own(tmp_path):
    renamed = HEADING.replace("well", "Position").replace("absorbance", "OD")
    reduction = reduced(
        tmp_path, reads=(renamed, *READS), columns={"well": "position", "absorbance": "OD"}
    )
    assert len(reduction.reads) == len(READS)


def test_a_mapped_column_that_is_not_there(tmp_path):
    assert lines_of(
        tmp_path, reads=(HEADING.replace("well", "Pos"), *READS), columns={"well": "Posn"}
    ) == [
        'reads/all.csv: has no column Posn (assay, columns, well; did you mean "Pos"?)',
        "reads/all.csv: has no column well (a tidy table has the headings well, fraction, "
        "wavelength, absorbance, and plate where there are several ([assay.columns] names your "
        "own); a grid is named PLATE_FRACTION_WAVELENGTH.csv, such as plate-01_strip_280.csv)",
    ]


def test_all_faults_of_a_table_at_once(tmp_path):
    wrong = (
        "Z9,e1,280,0.5,",
        "A1,e7,280,0.5,",
        "A1,e1,208,0.5,",
        "A1,e1,280,dark,",
        "A1,e1,280,0.5,0.2",
    )
    assert lines_of(tmp_path, reads=(HEADING, *READS, *wrong)) == [
        'reads/all.csv, row 16, column well: "Z9" is not a well of a 96-well plate (A1 to H12)',
        'reads/all.csv, row 17, column fraction: "e7" is not a fraction of [assay] '
        "(known: load, ft, e1, strip)",
        "reads/all.csv, row 18, column wavelength: 208 is none of the wavelengths of [assay] "
        "(known: 280, 320, 350, 900, 977 nm)",
        'reads/all.csv, row 19: "dark" is not a number (write ">" and the limit, or "over", where '
        "the reader could not tell)",
        "reads/all.csv, row 20, column dilution: 0.2 must be at least 1, the factor by which the "
        "sample was diluted",
    ]


def test_a_stage_that_contradicts_its_fraction(tmp_path):
    text = "well,fraction,stage,wavelength,absorbance\nA1,e1,wash,280,0.5\n"
    _, found = reads_of(tmp_path, "any.csv", text)
    assert [fault.text for fault in found.faults] == [
        'any.csv, row 2, column stage: "wash" is not the stage of e1, which is elution '
        "(study.toml, assay, stages)"
    ]


def test_what_a_plate_lacks(tmp_path):
    kept = [row for row in READS if row.split(",")[0] not in ("E1", "D1", "D2")]
    assert lines_of(tmp_path, reads=(HEADING, *kept)) == [
        "plates/plate-01: has no read of a blank well (read wells of the role blank, or enter "
        "blank_au in study.toml, assay)",
        "plates/plate-01: has no read of its load (fraction load) (or enter load_mg_ml in "
        "study.toml, assay)",
    ]


def test_entered_blank_and_load_stand_in(tmp_path):
    kept = [row for row in READS if row.split(",")[0] not in ("E1", "D1", "D2")]
    given = {"blank_au": 0.05, "load_mg_ml": 2.0}
    (plate,) = reduced(tmp_path, reads=(HEADING, *kept), **given).plates
    assert plate.quantities["loaded_ug"].value == pytest.approx([600.0] * 3)
    assert plate.quantities["collected_of_load"].value[0] == pytest.approx(200.0 / 600.0)
    assert {flag.kind for flag in plate.flags if not flag.well} >= {"blank_entered"}


def test_a_study_without_assay(tmp_path):
    folder = write(tmp_path)
    path = folder / "study.toml"
    path.write_text(path.read_text().split("[assay]")[0])
    with pytest.raises(StudyFaults) as raised:
        reduce_reads(open_study(folder, reducing=True), folder / "reads")
    assert str(raised.value) == (
        "study.toml: has no [assay] (muntin new DIR writes a commented [assay] with "
        "[[assay.stages]])"
    )


@pytest.mark.parametrize(
    ("given", "line"),
    [
        (
            {"stages": [STAGES[1], STAGES[0]]},
            "study.toml, assay, stages: must be loads, then washes if any, then elutions, then "
            "strips if any; given: elution, load",
        ),
        (
            {"response": "recovry"},
            'study.toml, assay, response: "recovry" is not a response (did you mean "recovery"?)',
        ),
        (
            {"linear_low": 3.0},
            "study.toml, assay, linear_low: 3 must lie below linear_high, which is 2",
        ),
        (
            {"fixed": {"hold_up_ul": "about 20", "resin_ul": 40.0}},
            'study.toml, fixed, hold_up_ul: "about 20" is not a number',
        ),
        (
            {"fixed": {"hold_up_ul": 20.0}},
            'study.toml, fixed: "resin_ul" is missing (settled resin in a well)',
        ),
        (
            {"columns": {"wel": "Position"}},
            'study.toml, assay, columns: "wel" is not a column of reads (did you mean "well"?)',
        ),
        (
            {"stages": [STAGES[0], {**STAGES[1], "blank_by": ["phh"]}, STAGES[2]]},
            "study.toml, assay, stages, e1, blank_by: phh is no column of the plate tables "
            '(did you mean "ph"?)',
        ),
    ],
)
def test_settings_at_fault(tmp_path, given, line):
    assert lines_of(tmp_path, **given) == [line]


def one(absorbance, dilution=1.0, over=False):
    return Read(
        plate="p",
        well="A1",
        fraction="e1",
        wavelength=280.0,
        absorbance=absorbance,
        dilution=dilution,
        over=over,
    )


def test_the_least_diluted_read_within_the_range_is_taken_and_repeats_are_averaged():
    reads = [one(2.9), one(0.52, 5.0), one(0.54, 5.0), one(0.26, 10.0)]
    chosen = choose(reads, 2.0)
    assert (chosen.absorbance, chosen.dilution, chosen.repeats, chosen.over) == (
        pytest.approx(0.53),
        5.0,
        2,
        False,
    )
    assert chosen.others == (reads[0], reads[3])
    beyond = choose([one(3.5, over=True), one(2.6, 5.0)], 2.0)
    assert (beyond.absorbance, beyond.dilution, beyond.over) == (2.6, 5.0, True)
    assert choose([], 2.0).repeats == 0


def test_wells_that_were_not_run_are_noticed(tmp_path):
    reduction = reduced(tmp_path, reads=(HEADING, *READS, "G9,e1,280,0.4,"))
    assert reduction.notices == (
        "plate-01: reads of 1 well that its plate table does not name are passed over (G9)",
    )


def test_a_read_that_stands_in_two_files_is_taken_once(tmp_path):
    files = {
        "all.csv": "\n".join((HEADING, *READS)),
        "plate-01_e1_280.csv": grid({"A1": "1,050", "B2": "1,850"}),
    }
    reduction = reduced(tmp_path, reads=files)
    assert len(reduction.reads) == len(READS)
    assert reduction.notices == (
        "plate-01_e1_280.csv: 2 reads stand in all.csv as well, and are taken once",
    )


@settings(
    max_examples=10, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture]
)
@given(order=st.permutations(range(len(READS))), cut=st.integers(1, len(READS) - 1))
def test_neither_the_order_of_rows_nor_the_number_of_files_matters(tmp_path, order, cut):
    (plain,) = reduced(tmp_path / "plain").plates
    rows = [READS[index] for index in order]
    files = {"a.csv": "\n".join((HEADING, *rows[:cut])), "b.csv": "\n".join((HEADING, *rows[cut:]))}
    (mixed,) = reduced(tmp_path / "mixed", reads=files).plates
    assert mixed.flags == plain.flags
    for name, quantity in plain.quantities.items():
        np.testing.assert_allclose(mixed.quantities[name].value, quantity.value, rtol=1e-12)
        np.testing.assert_allclose(mixed.quantities[name].total, quantity.total, rtol=1e-12)


def test_reads_in_thousandths_are_one_fault_a_file(tmp_path):
    cells = [row.split(",") for row in READS]
    thousands = [f"{w},{f},{nm},{1000 * float(a):g},{d}" for w, f, nm, a, d in cells]
    assert lines_of(tmp_path, reads=(HEADING, *thousands)) == [
        "reads/all.csv, row 2, column absorbance: 450 lies above 10 AU, more than a reader tells, "
        "and 13 more reads of this file (reads are taken in AU: 1000 mAU are 1)"
    ]


def test_samples_read_again_are_told_and_averaged(tmp_path):
    again = reduced(tmp_path, reads=(HEADING, *READS, "A1,e1,280,1.070,"))
    assert again.notices[-1] == (
        "plate-01: 1 sample with several reads at one dilution, whose mean is taken (A1 e1 280 nm)"
    )
    once = reduced(tmp_path / "once", reads=(HEADING, *READS, "B2,e1,280,0.370,5"))
    assert not [notice for notice in once.notices if "several reads" in notice]


def test_a_load_far_from_what_was_made_is_told(tmp_path):
    def told(name, strength):
        folder = write(tmp_path / name)
        with (folder / "study.toml").open("a") as stream:
            stream.write(f"\n[bench]\nprotein_mg_per_ml = {strength}\n")
        study = open_study(folder, reducing=True)
        notices = reduce_reads(study, folder / "reads").notices
        return [notice for notice in notices if "protein_mg_per_ml" in notice]

    # 0.4 AU above the blank at 1:5: 2 mg/mL.
    assert told("as made", 2.2) == []
    assert told("tenfold", 0.2) == [
        "plate-01: the load reads 2 mg/mL, 10 times the protein_mg_per_ml of [bench] (0.2): are "
        "dilution, path and extinction right?"
    ]
