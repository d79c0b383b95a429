"""A sound study, read in the forms that people keep it in."""

from __future__ import annotations

import dataclasses
import io
import warnings

import numpy as np
import openpyxl
import pandas as pd
import pytest

from muntin.record import StudyFaults, open_study
from tests.record.conftest import PLATE, STUDY

TOML, CSV = "study.toml", "plates/plate-01.csv"
FACTORS = ("ph", "salt", "resin")
ENDS = ("", "_sd", "_state", "_side", "_exclude")


def workbook(text: str, before: str | None = None) -> bytes:
    """A workbook with the table on its first sheet, or behind a sheet with the text `before`."""
    book = openpyxl.Workbook()
    sheet = book.active
    if before is not None:
        sheet.title = "Notes"
        for line in before.splitlines():
            sheet.append(line.split(","))
        sheet = book.create_sheet("Plate")
    for line in text.splitlines():
        cells = [cell.strip() for cell in line.split(",")]
        sheet.append([float(c) if c.replace(".", "", 1).isdigit() else c or None for c in cells])
    book.create_sheet("second").append(["not", "read"])
    stream = io.BytesIO()
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        book.save(stream)
    return stream.getvalue()


def test_wells_of_the_small_study(make):
    wells = open_study(make({})).wells
    assert list(wells.columns) == [
        *("plate", "well", "role"),
        *(f"{name}{end}" for name in FACTORS for end in ("", "_target", "_measured")),
        *(f"{name}{end}" for name in ("recovery", "hcp") for end in ENDS),
        "exclude",
    ]
    assert list(wells["well"]) == ["A1", "A2", "B1", "B2", "C1", "C2"]
    assert list(wells["role"]) == ["test", "bridge", "reference", "test", "blank", "load"]
    assert list(wells["recovery_state"]) == ["read", "read", "awaited", "excluded", "read", "none"]
    assert list(wells["hcp_state"]) == ["read", "censored", "awaited", "excluded", "none", "none"]
    assert list(wells["exclude"]) == ["", "", "", "pipetted twice", "", ""]
    np.testing.assert_array_equal(wells["recovery"], [0.83, 0.91, np.nan, np.nan, 0.01, np.nan])
    assert list(wells["hcp_side"]) == [0, -1, 0, 0, 0, 0]
    assert not wells[["ph_measured", "salt_measured", "resin_measured"]].any(axis=None)
    np.testing.assert_array_equal(wells["recovery_sd"], [0.02, *[np.nan] * 5])
    np.testing.assert_array_equal(wells["salt"], [100, 200, 250, 300, np.nan, np.nan])
    assert list(wells["resin"]) == ["Alpha", "Beta", "Alpha", "Beta", "", ""]


def test_readings_hold_only_what_informs_the_model(make):
    readings = open_study(make({})).readings("recovery")
    expected = pd.DataFrame(
        {
            "plate": ["plate-01", "plate-01"],
            "well": ["A1", "A2"],
            "role": ["test", "bridge"],
            "ph": [5.5, 5.5],
            "salt": [100.0, 200.0],
            "resin": ["Alpha", "Beta"],
            "ph_target": [5.5, 5.5],
            "ph_measured": [False, False],
            "salt_target": [100.0, 200.0],
            "salt_measured": [False, False],
            "resin_target": ["Alpha", "Beta"],
            "resin_measured": [False, False],
            "y": [0.83, 0.91],
            "sd": [0.02, np.nan],
            "censored": [0, 0],
            "row": [0, 1],
        }
    )
    pd.testing.assert_frame_equal(readings, expected, check_dtype=False)
    with pytest.raises(KeyError):
        open_study(make({})).readings("purity")


def test_counts_add_up_to_the_wells(make):
    counts = open_study(make({})).counts()
    assert dataclasses.asdict(counts) == {
        "plates": 1,
        "void": 0,
        "wells": 4,
        "controls": 2,
        "excluded_wells": 1,
        "read": {"recovery": 2, "hcp": 1},
        "awaited": {"recovery": 1, "hcp": 1},
        "excluded": {"recovery": 1, "hcp": 1},
        "censored": {"recovery": 0, "hcp": 1},
    }


def test_everything_left_out_is_noticed(make):
    assert open_study(make({})).notices == (
        'plate-01: 1 well left out (B2): "pipetted twice"',
        "recovery is awaited in 1 of 4 wells",
        "plate-01: 1 reading of hcp censored (< or >), used as such (A2)",
        "hcp is awaited in 1 of 4 wells",
    )


EUROPEAN = PLATE.replace(",", ";").replace(".", ",")


@pytest.mark.parametrize(
    "content",
    [
        EUROPEAN,
        PLATE.replace(",", "\t"),
        "\ufeff" + PLATE,
        PLATE.replace("\n", "\r\n"),
        EUROPEAN.encode("utf-16"),
        "sep=;\n" + EUROPEAN,
        "\n" + PLATE + "\n,,,,\n",
        PLATE.replace("well,role,ph", "Well,ROLE,pH"),
        PLATE.replace("0.83", '"0,83"'),
    ],
    ids=["semicolons", "tabs", "mark", "crlf", "utf16", "sep", "blank_lines", "capitals", "quoted"],
)
def test_one_table_in_many_forms(make, tmp_path, content):
    plain = open_study(make({}))
    other = open_study(make({CSV: content}))
    pd.testing.assert_frame_equal(other.wells, plain.wells)


def test_a_workbook_reads_as_its_csv(make):
    plain = open_study(make({})).wells
    folder = make({"plates/plate-01.xlsx": workbook(PLATE), "plates/~$plate-01.xlsx": b"lock"})
    (folder / CSV).unlink()
    study = open_study(folder)
    pd.testing.assert_frame_equal(study.wells, plain)
    assert study.plates[0].file == "plates/plate-01.xlsx"


@pytest.mark.parametrize(
    ("before", "problem"),
    [
        ("", "is empty; its first row must hold the headings"),
        ("Second screen", "has no column well"),
        ("screen,day\nsecond,Monday", "has no column well"),
        ("Second screen\nrun by,lab 2", "has 2 cells under 1 headings"),
    ],
)
def test_a_table_behind_the_first_sheet_is_pointed_at(make, before, problem):
    folder = make({"plates/plate-01.xlsx": workbook(PLATE, before)})
    (folder / CSV).unlink()
    with pytest.raises(StudyFaults) as raised:
        open_study(folder)
    where = ", row 2" if "cells" in problem else ""
    assert str(raised.value) == (
        f"plates/plate-01.xlsx{where}: {problem} "
        '(its first sheet, "Notes", was read; not read: "Plate", "second")'
    )


def test_a_formula_that_was_never_calculated_is_a_fault(make):
    folder = make({"plates/plate-01.xlsx": workbook(PLATE.replace("0.83", "=0.8+0.03"))})
    (folder / CSV).unlink()
    with pytest.raises(StudyFaults) as raised:
        open_study(folder)
    assert str(raised.value) == (
        'plates/plate-01.xlsx, row 2, well A1, column recovery: "=0.8+0.03" is not a number '
        "(leave the cell empty while its reading is awaited)"
    )


def test_windows_text_is_read(make):
    content = PLATE.replace("pipetted twice", "Rückstand im Filter").encode("cp1252")
    assert open_study(make({CSV: content})).wells["exclude"][3] == "Rückstand im Filter"


def test_per_cent_is_read_in_per_cent_and_modelled_as_fraction(make):
    toml = STUDY.replace("at_least = 0.8", 'at_least = 80\nunit = "%"')
    plate = PLATE.replace("0.83,0.02", "83,2").replace("0.91", "91").replace("0.40", "40")
    study = open_study(make({TOML: toml, CSV: plate}))
    assert list(study.wells["recovery"][:2]) == [83, 91]
    readings = study.readings("recovery")
    assert list(readings["y"]) == [0.83, 0.91]
    assert readings["sd"][0] == 0.02
    response = study.definition.responses[0]
    assert (response.per_cent, response.target) == (True, (0.8, None))


def test_fractions_under_a_per_cent_unit_are_pointed_out(make):
    toml = STUDY.replace("at_least = 0.8", 'at_least = 80\nunit = "%"')
    notice = (
        "recovery: no reading lies above 1.5 %; are they fractions of 1? "
        "(study.toml, responses, recovery, unit)"
    )
    for reading, noticed in (("0.91", True), ("1.5", True), ("1.51", False)):
        files = {TOML: toml, CSV: PLATE.replace("0.91", reading)}
        assert (notice in open_study(make(files)).notices) == noticed


def test_a_plate_of_fractions_among_plates_of_per_cent_is_pointed_out(make):
    toml = STUDY.replace("at_least = 0.8", 'at_least = 80\nunit = "%"')
    per_cent = PLATE.replace("0.83", "83").replace("0.91", "91")
    study = open_study(make({TOML: toml, CSV: per_cent, "plates/plate-02.csv": PLATE}))
    asked = [notice for notice in study.notices if "fractions of 1" in notice]
    assert asked == [
        "plate-02: no reading of recovery lies above 1.5 %, as they do elsewhere; are they "
        "fractions of 1? (study.toml, responses, recovery, unit)"
    ]


def per_cent_study(make, targets, readings):
    toml = STUDY.replace("at_least = 0.8", f'{targets}\nunit = "%"')
    rows = [f"A{n},5.5,{n}0,Beta,{reading}\n" for n, reading in enumerate(readings, start=1)]
    return open_study(make({TOML: toml, CSV: "well,ph,salt,resin,recovery\n" + "".join(rows)}))


@pytest.mark.parametrize(
    ("targets", "readings", "odd"),
    [
        ("at_least = 0.8", ("83", "91"), {"at_least": ("0.8", "80")}),
        ("at_least = 1", ("83", "91"), {"at_least": ("1", "100")}),
        ("at_least = 1.01", ("83", "91"), {}),
        ("at_most = 0.955", ("83", "91"), {"at_most": ("0.955", "95.5")}),
        (
            "at_least = 0.8\nat_most = 0.95",
            ("83", "91"),
            {"at_least": ("0.8", "80"), "at_most": ("0.95", "95")},
        ),
        # An impurity that must stay low, and does in one well.
        ("at_most = 0.5", ("0.4", "7"), {}),
        ("at_least = 80", ("83", "91"), {}),
        # Before any plate was run.
        ("at_least = 0.8", (), {"at_least": ("0.8", "80")}),
    ],
)
def test_a_target_that_looks_like_a_fraction_in_a_study_in_per_cent(make, targets, readings, odd):
    study = per_cent_study(make, targets, readings)
    assert [notice for notice in study.notices if "is taken as" in notice] == [
        f"study.toml, responses, recovery, {name}: {value} is taken as {value} %, as the unit is "
        f"%; for {meant} % write {meant}"
        for name, (value, meant) in odd.items()
    ]


@pytest.mark.parametrize(
    ("readings", "told"),
    [
        (
            ("80", "0.912", "97", "85"),
            "1 reading of recovery at most 1.5 % (A2 0.912), all others at least 80 %; left in; "
            "is it a fraction of 1?",
        ),
        (
            ("80", "0.912", "97", "1.04"),
            "2 readings of recovery at most 1.5 % (A2 0.912, A4 1.04), all others at least 80 %; "
            "left in; are they fractions of 1?",
        ),
        # Low recoveries do occur: 4 % here, then a true zero, then what a hundredfold is too low.
        (("80", "0.912", "97", "4"), ""),
        (("80", "0.912", "97", "-0.1"), ""),
        (("80", "0.3", "97", "85"), ""),
    ],
)
def test_single_fractions_among_per_cent_are_pointed_out(make, readings, told):
    notices = per_cent_study(make, "at_least = 80", readings).notices
    odd = [notice for notice in notices if "of 1?" in notice]
    assert odd == ([f"plate-01: {told}"] if told else [])


@pytest.mark.parametrize(
    ("unit", "readings", "shown"),
    [("", ("-0.11", "-0.1"), "-0.1"), ("%", ("-10.5", "-10"), "-10 %")],
)
def test_a_fraction_far_below_0_is_pointed_out(make, unit, readings, shown):
    toml = STUDY.replace("at_least = 0.8", f'at_least = 0.8\nunit = "{unit}"')
    plate = PLATE.replace("0.83", readings[0]).replace("0.91", readings[1])
    study = open_study(make({TOML: toml, CSV: plate}))
    (asked,) = [notice for notice in study.notices if "below" in notice]
    assert asked == (
        f"plate-01: 1 reading of recovery below {shown} (A1), left in; is the blank right?"
    )


def test_readings_beyond_0_and_1_are_not_clipped(make):
    study = open_study(make({CSV: PLATE.replace("0.83", "1.07").replace("0.91", "-0.02")}))
    assert list(study.readings("recovery")["y"]) == [1.07, -0.02]


def test_measured_values_take_precedence_over_stocks_over_targets(make):
    plate = "well,ph,ph_measured,salt,resin,recovery\n"
    plate += "A1,5.5,5.52,100,Beta,0.5\nA2,5.5,,100,Beta,0.5\nA3,5.6,,100,Beta,0.5\n"
    stock = (
        "factor,target,measured,lot,by\nph,5.50,5.58,L1,lab\nph,7.0,7.1,L2,lab\nph,5.6,,L3,lab\n"
    )
    study = open_study(make({CSV: plate, "stocks/plate-01.csv": stock}))
    assert list(study.wells["ph"]) == [5.52, 5.58, 5.6]
    assert list(study.wells["ph_target"]) == [5.5, 5.5, 5.6]
    assert study.notices[:2] == (
        "stocks/plate-01.csv, row 3: no well of plate-01 has ph 7; the stock is not used",
        "plates/plate-01.csv: ph measured more than half a step (0.05) off its target in 1 well "
        "(A2); the measured values are used",
    )


def test_a_measured_value_may_lie_a_step_outside(make):
    toml = STUDY.replace("low = 4.5\nhigh = 7.5", "low = 0.1\nhigh = 0.7")
    plate = "well,ph,ph_measured,salt,resin,recovery\nA1,0.7,0.8,100,Beta,0.5\n"
    study = open_study(make({TOML: toml, CSV: plate}))
    assert study.wells["ph"][0] == 0.8


def test_stocks_and_notes_of_a_planned_plate_wait(make):
    study = open_study(
        make(
            {
                "plans/plate-02.csv": "well\n",
                "stocks/plate-02.csv": "factor,target,measured\nph,5.5,5.58\n",
                "plates/plate-02.toml": 'by = "lab"\n',
            }
        )
    )
    assert [plate.name for plate in study.plates] == ["plate-01"]
    assert study.notices[:2] == (
        "plates/plate-02.toml is not used yet, as plate-02 is planned and not run",
        "stocks/plate-02.csv is not used yet, but for its plan, as plate-02 is planned and not run",
    )


def test_stocks_of_a_planned_plate_are_checked(make):
    folder = make(
        {"plans/plate-02.csv": "well\n", "stocks/plate-02.csv": "factor,target\npH,5.5\n"}
    )
    with pytest.raises(StudyFaults) as raised:
        open_study(folder)
    (line,) = raised.value.lines()
    assert line.startswith("stocks/plate-02.csv: ")
    assert "measured" in line


def test_results_fill_awaited_cells_by_plate_and_well(make):
    results = "plate;well;hcp;hcp_sd;recovery_exclude;batch\n"
    results += (
        "plate-01;b01;12,5;0,5;bubble in the well;7\nPlate-01;A1;40;;;7\nplate-01;A2;<5;;;7\n"
    )
    study = open_study(make({"results/hcp.csv": results}))
    row = study.wells.loc[2]
    assert (row["hcp"], row["hcp_sd"], row["hcp_state"]) == (12.5, 0.5, "read")
    assert (row["recovery_state"], row["recovery_exclude"]) == ("excluded", "bubble in the well")
    assert list(study.readings("hcp")["y"]) == [40, 5, 12.5]
    assert "results/hcp.csv: columns not used: batch" in study.notices
    assert 'plate-01: 1 reading of recovery left out (B1): "bubble in the well"' in study.notices


@pytest.mark.parametrize("name", ["1", "01", "plate-1", "plate 1", "Plate_01", "plate1"])
def test_results_may_name_a_plate_by_its_number(make, name):
    study = open_study(make({"results/hcp.csv": f"plate,well,hcp\n{name},B1,12.5\n"}))
    assert list(study.readings("hcp")["y"]) == [40, 5, 12.5]


def test_the_exact_name_of_a_plate_comes_first(make):
    files = {"plates/plate-1.csv": PLATE.replace("reference,6.0", "reference,6.1")}
    results = {"results/hcp.csv": "plate,well,hcp\nplate-1,B1,12.5\n"}
    readings = open_study(make({**files, **results})).readings("hcp")
    assert list(readings["plate"][readings["y"] == 12.5]) == ["plate-1"]


def test_results_of_wells_that_inform_nothing_are_noticed(make):
    results = "plate,well,hcp\nplate-01,C1,3\nplate-01,C2,\nplate-01,B1,12.5\n"
    study = open_study(make({"results/hcp.csv": results}))
    assert study.notices[0] == (
        "results/hcp.csv: 1 well whose role informs nothing (plate-01 C1 blank); "
        "kept on record, not used"
    )
    assert study.wells["hcp"][4] == 3
    assert list(study.readings("hcp")["y"]) == [40, 5, 12.5]


COPY = "well,ph,salt,resin,recovery,hcp\n" + "".join(
    f"A{i},5.5,{i}00,Beta,0.{i},{i}\n" for i in (1, 2, 3)
)


FEW = COPY.replace(",3\n", ",\n")
ALIKE = "well,ph,salt,resin,recovery\n" + "".join(f"B{i},5.5,100,Beta,1\n" for i in range(1, 8))


@pytest.mark.parametrize(
    "files",
    [
        {"plates/plate-02.csv": COPY.replace("0.1", "0.11")},
        {"plates/plate-02.csv": COPY.replace("A1", "A4")},
        {"plates/plate-02.csv": COPY, "plates/plate-02.toml": 'void = "a copy"\n'},
        {"plates/plate-02.csv": COPY, "plates/plate-02.toml": 'repeats = "plate-01"\n'},
        {"plates/plate-02.csv": COPY, "plates/plate-01.toml": 'repeats = "plate-02"\n'},
        {CSV: FEW, "plates/plate-02.csv": FEW},
        {CSV: ALIKE, "plates/plate-02.csv": ALIKE},
    ],
    ids=["value", "well", "void", "repeats", "repeated", "few", "alike"],
)
def test_plates_that_are_no_copies(make, files):
    assert len(open_study(make({CSV: COPY, **files})).plates) == 2


def test_a_later_reading_may_complete_a_table_without_the_column(make):
    plate = "\n".join(",".join(line.split(",")[:7]) for line in PLATE.splitlines())
    results = "plate,well,hcp\nplate-01,A1,12\n"
    study = open_study(make({CSV: plate, "results/hcp.csv": results}))
    assert list(study.readings("hcp")["y"]) == [12]


def test_a_void_plate_stays_on_record_and_out_of_the_readings(make):
    notes = 'void = "feed was two weeks old"\ndate = 2026-05-04\nresin_lot = "R-1"\n'
    study = open_study(
        make(
            {
                "plates/plate-02.csv": PLATE,
                "plates/plate-02.toml": notes,
                "plates/plate-10.csv": PLATE,
                "plates/plate-10.toml": 'repeats = "plate-02"\n',
            }
        )
    )
    assert [plate.name for plate in study.plates] == ["plate-01", "plate-02", "plate-10"]
    assert [plate.void for plate in study.plates] == [None, "feed was two weeks old", None]
    assert [plate.name for plate in study.void] == ["plate-02"]
    assert study.plates[1].resin_lot == "R-1"
    assert study.plates[2].repeats == "plate-02"
    assert len(study.wells) == 18
    assert set(study.readings("recovery")["plate"]) == {"plate-01", "plate-10"}
    assert list(study.readings("recovery")["row"]) == [0, 1, 12, 13]
    counts = study.counts()
    assert (counts.plates, counts.void, counts.wells, counts.controls) == (3, 1, 8, 4)
    assert study.notices[0] == ("plate-02 does not count, 4 wells left out: feed was two weeks old")


def test_plates_sort_by_number(make):
    extra = {f"plates/plate-{n}.csv": PLATE for n in (10, 9)}
    plates = open_study(make(extra)).plates
    assert [plate.name for plate in plates] == ["plate-01", "plate-9", "plate-10"]


def test_earlier_value_stands_for_a_column_that_came_later(make):
    later = '[[factors]]\nname = "load"\nlow = 5\nhigh = 40\nstep = 1\nearlier_value = 20\n'
    plate = PLATE.replace("role,", "role,load,").replace("A1,,", "A1,,30,", 1)
    plate = plate.replace("bridge,", "bridge,30,").replace("reference,", "reference,30,")
    plate = plate.replace("test,", "test,30,").replace("blank,", "blank,,")
    plate = plate.replace("C2,load,", "C2,load,,")
    study = open_study(make({TOML: STUDY + later, "plates/plate-02.csv": plate}))
    np.testing.assert_array_equal(
        study.wells["load"], [20, 20, 20, np.nan, np.nan, np.nan, *[30] * 4, np.nan, np.nan]
    )
    assert study.notices[0] == (
        "plates/plate-01.csv has no column load; its earlier_value, 20, stands for it"
    )


def test_an_excluded_well_may_lie_outside_the_range(make):
    study = open_study(make({CSV: PLATE.replace("6.5,300", "6.5,5000")}))
    assert study.wells["salt"][3] == 5000


def test_wells_outside_the_limits_are_used_and_noticed(make):
    study = open_study(make({TOML: STUDY + '[[limits]]\nallow = "salt <= 150"\n'}))
    assert len(study.readings("recovery")) == 2
    assert study.notices[-1] == "plate-01: 2 wells outside the limits (A2, B1); they are used"


def test_other_columns_pass_through_with_one_notice(make):
    plate = "well,ph,salt,resin,recovery,operator,note,recovery_std\nA1,5.5,100,Beta,0.5,01,ok,3\n"
    study = open_study(make({CSV: plate}))
    assert list(study.wells.columns[-3:]) == ["operator", "note", "recovery_std"]
    assert study.wells["operator"][0] == "01"
    assert (
        "plates/plate-01.csv: column recovery_std is not used; is it meant as recovery_sd?"
        in study.notices
    )
    assert study.notices[-1] == "columns passed through, not used: operator, note, recovery_std"


def test_columns_named_by_shared_errors_come_with_the_readings(make):
    toml = STUDY + '[[shared_errors]]\nby = ["plate", "ph", "bottle"]\nacts = "inside"\n'
    plate = "well,ph,ph_measured,salt,resin,recovery,bottle\nA1,5.5,5.52,100,Beta,0.5,b1\n"
    study = open_study(make({TOML: toml, CSV: plate}))
    readings = study.readings("recovery")
    assert readings.loc[0, ["ph", "ph_target", "bottle"]].to_list() == [5.52, 5.5, "b1"]
    assert not any("passed through" in notice for notice in study.notices)
    with pytest.raises(StudyFaults) as raised:
        open_study(make({TOML: toml, CSV: plate.replace("b1", "")}))
    assert str(raised.value) == (
        "plates/plate-01.csv, row 2, well A1, column bottle: is empty; the well needs it "
        "(study.toml, shared_errors 1, names it)"
    )


def test_columns_of_a_plan_pass_without_notice(make):
    plate = "well,role,ph,salt,resin,recovery,p_now,reason\nA1,,5.5,100,Beta,0.5,0.46,on the edge\n"
    assert open_study(make({CSV: plate})).notices == ("hcp is awaited in 1 of 1 well",)


EMPTY = ["well,role,ph,salt,resin,recovery,hcp\n", "position\n", "well,pH_old,salt,salt,hpc\n"]


@pytest.mark.parametrize("files", [*({CSV: heading} for heading in EMPTY), None])
def test_nothing_run_yet_is_sound(make, files):
    folder = make(files or {})
    if files is None:
        (folder / CSV).unlink()
        (folder / "plates").rmdir()
    study = open_study(folder)
    assert len(study.readings("recovery")) == 0
    assert list(study.readings("recovery").columns) == [
        *("plate", "well", "role", *FACTORS),
        *(f"{name}{end}" for name in FACTORS for end in ("_target", "_measured")),
        *("y", "sd", "censored", "row"),
    ]
    assert study.counts().wells == 0
    assert study.notices == ()


MOVE = "to have them counted"


@pytest.mark.parametrize(
    ("files", "notice"),
    [
        (
            {"plans/plate-02.csv": PLATE},
            f"plans/plate-02.csv holds 7 readings: move it to plates/ {MOVE}",
        ),
        (
            {"plans/plate-02.r3.csv": PLATE},
            f"plans/plate-02.r3.csv holds 7 readings: move it to plates/ as plate-02.csv {MOVE}",
        ),
        (
            {"plans/plate-02.csv": PLATE, "plates/plate-02.csv": "well\n"},
            "plans/plate-02.csv holds 7 readings: move it to plates/, in place of the empty table "
            f"there, {MOVE}",
        ),
        (
            {"plans/plate-01.csv": PLATE.replace("Alpha,,", "Alpha,0.7,")},
            "plans/plate-01.csv holds 8 readings, the table of plate-01 in plates/ 7: only the "
            "latter count",
        ),
    ],
    ids=["plan", "revision", "empty", "more"],
)
def test_a_plan_with_readings_is_pointed_at_first(make, files, notice):
    assert open_study(make(files)).notices[0] == notice


@pytest.mark.parametrize(
    "files",
    [
        {"plans/plate-02.csv": "well,ph,salt,resin,recovery\nA1,5.5,100,Beta,\n"},
        {"plans/plate-01.csv": PLATE},
        {"plans/plate-02.csv": b"\x00", "plans/plate-03.xlsx": b"none"},
    ],
    ids=["unread", "moved", "broken"],
)
def test_other_plans_are_no_matter(make, files):
    assert open_study(make(files)).notices == open_study(make({})).notices


def test_files_of_other_kinds_are_noticed(make):
    study = open_study(make({"plates/scan.pdf": b"%PDF", "plates/.hidden": b""}))
    assert study.notices[0] == "plates/scan.pdf is not a .csv or .xlsx table; left out"


def test_a_study_is_only_read(make):
    folder = make({})
    before = {path: path.read_bytes() for path in folder.rglob("*") if path.is_file()}
    open_study(folder)
    assert {path: path.read_bytes() for path in folder.rglob("*") if path.is_file()} == before


def test_records_are_frozen(make):
    study = open_study(make({}))
    with pytest.raises(dataclasses.FrozenInstanceError):
        study.folder = None
    with pytest.raises(ValueError, match="frozen"):
        study.definition.factors[0].low = 3
