"""Each fault of a study, compared as the user reads it: whole message, exactly."""

from __future__ import annotations

import pytest

from muntin.record import StudyFaults, open_study
from tests.record.conftest import PLATE, STUDY

TOML, CSV = "study.toml", "plates/plate-01.csv"


def study(old: str, new: str) -> dict[str, str]:
    assert old in STUDY
    return {TOML: STUDY.replace(old, new, 1)}


def plate(old: str, new: str) -> dict[str, str]:
    assert old in PLATE
    return {CSV: PLATE.replace(old, new, 1)}


def limit(text: str) -> dict[str, str]:
    return {TOML: STUDY + f"[[limits]]\nallow = '''{text}'''\n"}


KEYS = {
    "broken_toml": (
        study('title = "Small invented study"', 'title = "Small'),
        ['study.toml, line 2, title: "Small has no closing quotation mark: "Small"'],
    ),
    "not_text": ({TOML: b"\x00\x01\x02"}, ["study.toml: is not a text file"]),
    "no_study_table": (
        study('[study]\ntitle = "Small invented study"\n', ""),
        ["study.toml: table [study] is missing"],
    ),
    "unknown_key": (
        study("kept_within", "kept_witin"),
        [
            'study.toml, factors, ph: "kept_witin" is not a key of [[factors]] '
            '(did you mean "kept_within"?)'
        ],
    ),
    "unknown_key_in_a_plain_table": (
        study("title", "plat = 96\ntitle"),
        ['study.toml, study: "plat" is not a key of [study] (did you mean "plate"?)'],
    ),
    "unknown_table": (
        {TOML: STUDY + "[protien]\n"},
        ['study.toml: "protien" is not a key (did you mean "protein"?)'],
    ),
    "list_of_the_file_inside_a_table": (
        {TOML: STUDY + "shared_errors = []\n"},
        [
            'study.toml, responses, hcp: "shared_errors" is not a key of [[responses]] '
            "(it is no part of a table: write it above the first [table])"
        ],
    ),
    "missing_key": (
        study("title =", "# title ="),
        ['study.toml, study: "title" is missing (one line that names the study)'],
    ),
    "factors_as_one_table": (
        {
            TOML: STUDY.replace("[[factors]]", "[factors]", 1),
        },
        ["study.toml, line 4: [factors] needs double brackets: [[factors]]"],
    ),
    "low_above_high": (
        study("low = 4.5", "low = 8"),
        ["study.toml, factors, ph, low: 8 must lie below high, which is 7.5"],
    ),
    "low_equals_high": (
        study("low = 4.5", "low = 7.5"),
        ["study.toml, factors, ph, low: 7.5 must lie below high, which is 7.5"],
    ),
    "step_too_large": (
        study("step = 10", "step = 1000"),
        ["study.toml, factors, salt, step: 1000 is larger than the range 0 to 900 mM"],
    ),
    "step_too_small": (
        study("step = 10", "step = 1e-6"),
        [
            "study.toml, factors, salt, step: 1e-06 makes more levels than 100000; "
            "take a larger step"
        ],
    ),
    "step_not_above_zero": (
        study("step = 10", "step = 0"),
        ["study.toml, factors, salt, step: 0 must lie above 0"],
    ),
    "log_from_zero": (
        study("low = 0\n", 'low = 0\nscale = "log"\n'),
        [
            "study.toml, factors, salt, low: 0 must lie above 0 on a log scale; "
            'or set scale = "linear"'
        ],
    ),
    "number_in_quotes": (
        study("low = 4.5", 'low = "4.5"'),
        ['study.toml, factors, ph, low: "4.5" is not a number'],
    ),
    "infinity": (
        study("low = 4.5", "low = -inf"),
        ["study.toml, factors, ph, low: -inf is not a finite number"],
    ),
    "no_step": (
        study("step = 0.1\n", ""),
        ['study.toml, factors, ph: has no "step"; a factor needs low, high and step, or choices'],
    ),
    "no_factor_no_response": (
        {TOML: '[study]\ntitle = "x"\n', CSV: "well\n"},
        [
            "study.toml, factors: none is given; a study has 1 to 6 [[factors]]",
            "study.toml, responses: none is given; a study has 1 to 6 [[responses]]",
        ],
    ),
    "seven_factors": (
        {
            TOML: STUDY
            + "".join(
                f'[[factors]]\nname = "more{i}"\nlow = 0\nhigh = 1\nstep = 1\nearlier_value = 0\n'
                for i in range(4)
            )
        },
        ["study.toml, factors: 7 are given; a study has 1 to 6 [[factors]]"],
    ),
    "plan_range": (
        study("kept_within = 0.1", "plan_low = 3\nplan_high = 5"),
        ["study.toml, factors, ph, plan_low: 3 lies outside 4.5 to 7.5"],
    ),
    "plan_range_backwards": (
        study("kept_within = 0.1", "plan_low = 6\nplan_high = 5"),
        ["study.toml, factors, ph, plan_low: 6 lies above plan_high, which is 5"],
    ),
    "plan_range_between_steps": (
        study("kept_within = 0.1", "plan_low = 5.02\nplan_high = 5.08"),
        ["study.toml, factors, ph: plan_low and plan_high leave no bench step between them"],
    ),
    "per_plate": (
        study("kept_within = 0.1", "per_plate = 0"),
        ["study.toml, factors, ph, per_plate: 0 must be at least 1"],
    ),
    "amount": (
        study("kept_within = 0.1", 'set_sd = "5"'),
        ['study.toml, factors, ph, set_sd: "5" is neither a number nor a share such as "5 %"'],
    ),
    "amount_wider_than_range": (
        study("kept_within = 0.1", "kept_within = 10"),
        ["study.toml, factors, ph, kept_within: 10 is wider than the range 4.5 to 7.5"],
    ),
    "earlier_value": (
        study("kept_within = 0.1", "earlier_value = 9"),
        ["study.toml, factors, ph, earlier_value: 9 lies outside 4.5 to 7.5"],
    ),
    "choices_and_range": (
        study('"Beta"]', '"Beta"]\nlow = 1'),
        [
            'study.toml, factors, resin: "low" is a key of factors with a range; '
            "this one has choices"
        ],
    ),
    "same_choice_twice": (
        study('"Beta"]', '"Alpha"]'),
        [
            "study.toml, factors, resin, choices: must be two or more different names, "
            "none empty, no blanks around them"
        ],
    ),
    "unknown_plan_choice": (
        study('"Beta"]', '"Beta"]\nplan_choices = ["Bata"]'),
        [
            'study.toml, factors, resin, plan_choices: "Bata" is not among the choices '
            '(did you mean "Beta"?)'
        ],
    ),
    "name_of_a_fixed_column": (
        study('name = "hcp"', 'name = "role"'),
        [
            'study.toml, responses, role, name: "role" is a word that muntin keeps for itself; '
            "choose another name"
        ],
    ),
    "name_with_a_kept_ending": (
        study('name = "hcp"', 'name = "hcp_sd"'),
        [
            'study.toml, responses, hcp_sd, name: "hcp_sd" ends in _sd, '
            "which plate tables keep for themselves"
        ],
    ),
    "name_with_a_blank": (
        study('name = "hcp"', 'name = "host cell"'),
        [
            'study.toml, responses, host cell, name: "host cell" is not a name of letters, '
            "digits and _ that starts with a letter"
        ],
    ),
    "name_twice": (
        study('name = "hcp"', 'name = "Recovery"'),
        [
            'study.toml, responses, Recovery, name: "Recovery" is already the name of one of the '
            "responses (capitals make no difference)"
        ],
    ),
    "unknown_kind": (
        study('kind = "positive"', 'kind = "positiv"'),
        ['study.toml, responses, hcp, kind: "positiv" is not "fraction", "positive" or "real"'],
    ),
    "fraction_target": (
        study("at_least = 0.8", "at_least = 80"),
        [
            "study.toml, responses, recovery, at_least: 80 lies outside 0 to 1, ends left out "
            '(for targets and readings in per cent set unit = "%")'
        ],
    ),
    "fraction_target_at_its_end": (
        study("at_least = 0.8", "at_least = 1"),
        ["study.toml, responses, recovery, at_least: 1 lies outside 0 to 1, ends left out"],
    ),
    "per_cent_target": (
        {
            TOML: STUDY.replace("at_least = 0.8", 'at_least = 101\nunit = "%"'),
            CSV: PLATE.replace("0.83", "83").replace("0.91", "91"),
        },
        [
            "study.toml, responses, recovery, at_least: 101 lies outside 0 to 100, ends left out, "
            "as the unit is %"
        ],
    ),
    "targets_crossed": (
        study("at_least = 0.8", "at_least = 0.8\nat_most = 0.7"),
        ["study.toml, responses, recovery, at_least: 0.8 must lie below at_most, which is 0.7"],
    ),
    "positive_target": (
        study("at_most = 100", "at_most = 0"),
        ['study.toml, responses, hcp, at_most: 0 must lie above 0, as the response is "positive"'],
    ),
    "typical_backwards": (
        study("at_most = 100", "at_most = 100\ntypical = [30, 1]"),
        ["study.toml, responses, hcp, typical: [30, 1] must be a low and a higher value"],
    ),
    "typical_of_a_positive_response": (
        study("at_most = 100", "at_most = 100\ntypical = [0, 1]"),
        [
            "study.toml, responses, hcp, typical: [0, 1] must lie above 0, "
            'as the response is "positive"'
        ],
    ),
    "typical_of_a_fraction": (
        study("at_least = 0.8", "at_least = 0.8\ntypical = [0.1, 0.9]"),
        [
            'study.toml, responses, recovery, typical: [0.1, 0.9] is for a "positive" or "real" '
            "response; a fraction needs none"
        ],
    ),
    "no_target": (
        {TOML: STUDY.replace("at_least = 0.8", "").replace("at_most = 100", "")},
        ["study.toml, responses: none has at_least or at_most; a study needs a target to judge"],
    ),
    "unknown_prior": (
        study("at_most = 100", "at_most = 100\npriors = { noise = { median = 1, log_sd = 1 } }"),
        [
            'study.toml, responses, hcp, priors: "noise" is not a key of [responses.priors] '
            '(did you mean "noise_sd"? known: mean_sd, process_sd, curvature_sd, length_scale, '
            "noise_sd, scale_error, inside_error, ceiling_gap)"
        ],
    ),
    "ceiling_of_a_positive_response": (
        study(
            "at_most = 100",
            "at_most = 100\npriors = { ceiling_gap = { median = 0.1, log_sd = 1 } }",
        ),
        [
            'study.toml, responses, hcp, priors, ceiling_gap: is for a "fraction"; '
            'this response is "positive"'
        ],
    ),
    "kept_without_tolerance": (
        {
            TOML: STUDY.replace("kept_within = 0.1\n", "").replace(
                "title", 'judged_by = "kept"\ntitle'
            )
        },
        [
            'study.toml, study, judged_by: "kept" needs kept_within at one of the factors, '
            "and none has it"
        ],
    ),
    "plate_size": (
        study("title", "plate = 48\ntitle"),
        ["study.toml, study, plate: 48 is not 96 or 384"],
    ),
    "probability": (
        study("title", "required_probability = 90\ntitle"),
        [
            "study.toml, study, required_probability: 90 must lie below 1 "
            '(for per cent write "90 %")'
        ],
    ),
    "limit_not_arithmetic": (
        limit("__import__('os').getcwd() < 3"),
        [
            """study.toml, limits 1, allow: "__import__('os').getcwd() < 3" """
            "is not arithmetic over factor names"
        ],
    ),
    "limit_not_a_comparison": (
        limit("salt + 3"),
        [
            'study.toml, limits 1, allow: "salt + 3" is not a comparison '
            "(write for example: salt <= 500)"
        ],
    ),
    "limit_of_unknown_factor": (
        limit("salt <= 900 - 150 * pH"),
        [
            'study.toml, limits 1, allow: "salt <= 900 - 150 * pH" names "pH", '
            'which is no factor (did you mean "ph"?)'
        ],
    ),
    "limit_of_unknown_choice": (
        limit('resin == "Alfa"'),
        [
            'study.toml, limits 1, allow: "resin == "Alfa"" compares resin with "Alfa", '
            'which is not among its choices (did you mean "Alpha"?)'
        ],
    ),
    "limit_never_met": (
        limit("salt < 0"),
        ['study.toml, limits 1, allow: "salt < 0" is met by no condition in the factors\' ranges'],
    ),
    "limits_never_met_together": (
        {TOML: STUDY + '[[limits]]\nallow = "ph < 5"\n[[limits]]\nallow = "ph > 5"\n'},
        ["study.toml, limits: no condition in the factors' ranges meets all of them"],
    ),
    "shared_error_acts": (
        {TOML: STUDY + '[[shared_errors]]\nby = ["plate"]\nacts = "scales"\n'},
        ['study.toml, shared_errors 1, acts: "scales" is not "scale" or "inside"'],
    ),
    "shared_error_column": (
        {TOML: STUDY + '[[shared_errors]]\nby = ["plate", "resins"]\n'},
        [
            'study.toml, shared_errors 1, by: "resins" is neither plate, a factor nor a column of '
            'the plate tables (did you mean "resin"?)'
        ],
    ),
    "shared_error_of_an_unknown_response": (
        {TOML: STUDY + '[[shared_errors]]\nby = ["plate"]\nresponses = ["hcb"]\n'},
        ['study.toml, shared_errors 1, responses: "hcb" is not a response (did you mean "hcp"?)'],
    ),
    "shared_error_of_no_response": (
        {TOML: STUDY + '[[shared_errors]]\nby = ["plate"]\nresponses = []\n'},
        [
            "study.toml, shared_errors 1, responses: must name one or more responses; "
            "without this key all are touched"
        ],
    ),
    "shared_error_by_well": (
        {TOML: STUDY + '[[shared_errors]]\nby = ["well"]\n'},
        [
            'study.toml, shared_errors 1, by: "well" cannot be shared by wells; '
            "name plate, a factor or another column"
        ],
    ),
    "protein_reserved": (
        {TOML: STUDY + "[protein]\navailable_mg = 10\nreserved_mg = 10\nper_well_mg = 0.2\n"},
        ["study.toml, protein, reserved_mg: 10 must lie below available_mg, which is 10"],
    ),
    "free_wells": (
        {TOML: STUDY + '[plan]\nfree_wells = "A1:H13"\n'},
        [
            'study.toml, plan, free_wells: "A1:H13" names "H13", '
            "which is not a well of a 96-well plate (write for example A1:H12)"
        ],
    ),
    "whole_number": (
        {TOML: STUDY + "[plan]\nbridging_wells = 2.5\n"},
        ["study.toml, plan, bridging_wells: 2.5 is not a whole number"],
    ),
    "stop": (
        {TOML: STUDY + "[stop]\nwrong_share = 2\n"},
        ['study.toml, stop, wrong_share: 2 must lie below 1 (for per cent write "2 %")'],
    ),
    "fixed_value": (
        {TOML: STUDY + "[fixed]\nstages = true\n"},
        ["study.toml, fixed, stages: true is neither a number nor text"],
    ),
}

AT_A1 = "plates/plate-01.csv, row 2, well A1, column"

TABLES = {
    "empty": ({CSV: ""}, ["plates/plate-01.csv: is empty; its first row must hold the headings"]),
    "blank_lines": (
        {CSV: "\n ,,\n"},
        ["plates/plate-01.csv: is empty; its first row must hold the headings"],
    ),
    "binary": (
        {CSV: b"PK\x03\x04\x00\x00"},
        ["plates/plate-01.csv: is not a text table; save it as .csv or .xlsx"],
    ),
    "not_a_workbook": (
        {"plates/plate-02.xlsx": b"none"},
        ["plates/plate-02.xlsx: is not a readable .xlsx workbook"],
    ),
    "csv_and_xlsx": (
        {"plates/plate-01.xlsx": b"none"},
        ["plates/plate-01: plate-01.csv and plate-01.xlsx are both there; keep one of them"],
    ),
    "open_quotation_mark": (
        plate("A1,,5.5", 'A1,,"5.5'),
        ["plates/plate-01.csv: cannot be split into cells; a quotation mark is not closed"],
    ),
    "decimal_comma_between_commas": (
        plate("A1,,5.5", "A1,,5,5"),
        [
            "plates/plate-01.csv, row 2: has 10 cells under 9 headings (with decimal commas "
            "separate the cells by semicolons, or put numbers in quotes)"
        ],
    ),
    "missing_factor_column": (
        plate("salt", "conductivity"),
        [
            "plates/plate-01.csv: has no column salt "
            "(a factor that was added later needs earlier_value in study.toml)"
        ],
    ),
    "misspelt_factor_column": (
        plate("salt", "slat"),
        ["plates/plate-01.csv: has no column salt (did you mean its column slat?)"],
    ),
    "missing_well_column": (
        plate("well", "position"),
        ["plates/plate-01.csv: has no column well"],
    ),
    "misspelt_response_column": (
        plate("recovery,", "recvery,"),
        [
            "plates/plate-01.csv, column recvery: resembles recovery, "
            "which this table lacks (rename one of them)"
        ],
    ),
    "doubled_column": (
        plate("salt", "PH"),
        ["plates/plate-01.csv, column ph: is there twice, as columns 3 and 4"],
    ),
    "column_without_heading": (
        plate("exclude", ""),
        ["plates/plate-01.csv: column 9 has cells but no heading"],
    ),
    "column_that_muntin_keeps": (
        plate("exclude\n", "exclude,salt_target\n"),
        [
            "plates/plate-01.csv, column salt_target: is a name that muntin keeps for itself; "
            "rename the column"
        ],
    ),
    "other_plate_named": (
        {CSV: "plate,well,ph,salt,resin,recovery\nplate-02,A1,5,100,Beta,0.5\n"},
        [
            'plates/plate-01.csv, row 2, column plate: "plate-02" is not plate-01, '
            "the name of the file"
        ],
    ),
    "doubled_well": (
        plate("A02", "A1"),
        ['plates/plate-01.csv, row 3, column well: "A1" is already in row 2'],
    ),
    "well_beyond_the_plate": (
        plate("A02", "I1"),
        [
            'plates/plate-01.csv, row 3, column well: "I1" is not a well of a 96-well plate '
            "(A1 to H12)"
        ],
    ),
    "no_well_name": (
        plate("A02", "first"),
        ['plates/plate-01.csv, row 3, column well: "first" is not a well name (A1 to H12)'],
    ),
    "no_well": (
        plate("A02", ""),
        ["plates/plate-01.csv, row 3, column well: is empty; every row needs its well"],
    ),
    "text_for_a_factor": (
        plate("5.5,100", "5.5,high"),
        [f'{AT_A1} salt: "high" is not a number'],
    ),
    "infinity_for_a_factor": (
        plate("5.5,100", "5.5,-inf"),
        [f'{AT_A1} salt: "-inf" is not a finite number'],
    ),
    "too_large_for_a_number": (
        plate("5.5,100", "5.5,1e999"),
        [f"{AT_A1} salt: 1e999 is not a finite number"],
    ),
    "thousands_or_decimals": (
        plate("5.5,100", '5.5,"1,000"'),
        [f"{AT_A1} salt: 1,000 may mean thousands or decimals (write it without the comma)"],
    ),
    "factor_outside_its_range": (
        plate("5.5,100", "5.5,5000"),
        [f"{AT_A1} salt: 5000 lies outside 0 to 900 mM (study.toml, factors, salt)"],
    ),
    "no_factor_value": (
        plate("5.5,100", "5.5,"),
        [f"{AT_A1} salt: is empty; the well needs its value"],
    ),
    "unknown_choice": (
        plate("Alpha,0.83", "Alfa,0.83"),
        [f'{AT_A1} resin: "Alfa" is not a choice (did you mean "Alpha"?)'],
    ),
    "no_choice": (
        plate("Alpha,0.83", ",0.83"),
        [f"{AT_A1} resin: is empty; the well needs its choice"],
    ),
    "measured_more_than_a_step_outside": (
        {
            CSV: "well,ph,ph_measured,salt,resin,recovery\n"
            "A1,7.5,7.6,100,Beta,0.5\nA2,7.5,7.61,100,Beta,0.5\n"
        },
        [
            "plates/plate-01.csv, row 3, well A2, column ph_measured: 7.61 lies outside "
            "4.4 to 7.6, the range and a step (study.toml, factors, ph)"
        ],
    ),
    "text_for_a_reading": (
        plate("0.83", "n/a"),
        [
            f'{AT_A1} recovery: "n/a" is not a number '
            "(leave the cell empty while its reading is awaited)"
        ],
    ),
    "infinity_for_a_reading": (
        plate("0.83", "∞"),
        [
            f'{AT_A1} recovery: "∞" is not a finite number '
            "(leave the cell empty while its reading is awaited)"
        ],
    ),
    "censored_without_a_number": (
        plate("0.83", "<LOQ"),
        [
            f'{AT_A1} recovery: "<LOQ" is not a number '
            "(leave the cell empty while its reading is awaited)"
        ],
    ),
    "one_reading_in_per_cent": (
        plate("0.83", "83"),
        [
            f"{AT_A1} recovery: 83 looks like per cent; a fraction is read as 0 to 1 "
            '(for per cent set unit = "%" in study.toml, responses, recovery)'
        ],
    ),
    "readings_in_per_cent": (
        {CSV: PLATE.replace("0.83", "83").replace("0.91", "91")},
        [
            f"{AT_A1} recovery: 83 looks like per cent, as do 2 cells in all; a fraction is read "
            'as 0 to 1 (for per cent set unit = "%" in study.toml, responses, recovery)'
        ],
    ),
    "far_below_a_fraction": (
        plate("0.83", "-1.5"),
        [f"{AT_A1} recovery: -1.5 lies outside -1 to 2, too far for a fraction"],
    ),
    "positive_reading_of_zero": (
        plate(",40,", ",0,"),
        [
            f'{AT_A1} hcp: 0 must lie above 0, as the response is "positive" '
            '(below what the assay can see write "<" and its limit)'
        ],
    ),
    "negative_uncertainty": (
        plate("0.02", "-0.02"),
        [f"{AT_A1} recovery_sd: -0.02 must be 0 or above, as it is a standard uncertainty"],
    ),
    "unknown_role": (
        plate("bridge", "brigde"),
        [
            'plates/plate-01.csv, row 3, well A2, column role: "brigde" is not a role '
            '(did you mean "bridge"?)'
        ],
    ),
    "no_reading_at_all": (
        {CSV: "well,ph,salt,resin\nA1,5.5,100,Alpha\nA2,5.5,100,Beta\n"},
        [
            "plates: hold no reading of any response in 2 wells on 1 plate "
            "(fill in recovery, hcp, or keep a table in plans/ until it was run)"
        ],
    ),
    "plates_is_no_folder": (
        {"results": "hello"},
        ["results: is a file; it must be a folder"],
    ),
}

COPY = "well,ph,salt,resin,recovery,hcp\n" + "".join(
    f"A{i},5.5,{i}00,Beta,0.{i},{i}\n" for i in (1, 2, 3)
)

COPIES = {
    "plate_kept_twice": (
        {CSV: COPY, "plates/plate-03.csv": COPY.replace("A1,", "A01,").replace("0.1", "0.10")},
        [
            "plates/plate-03.csv: all 6 readings equal those of plates/plate-01.csv (remove one "
            'of them, or say repeats = "plate-01" or void = "reason" in plates/plate-03.toml)'
        ],
    ),
    "plate_kept_under_other_conditions": (
        {CSV: COPY, "plates/plate-02.csv": COPY.replace("5.5,", "6.5,")},
        [
            "plates/plate-02.csv: all 6 readings equal those of plates/plate-01.csv (remove one "
            'of them, or say repeats = "plate-01" or void = "reason" in plates/plate-02.toml)'
        ],
    ),
}

MARKS = ["no", "No", "0", "x", "X", "yes", "1", "true", "TRUE", "n/a", "-", "excluded", "ok"]

LATER = {
    "void_without_a_reason": (
        {"plates/plate-01.toml": "void = true\n"},
        [
            "plates/plate-01.toml, void: true is not a reason; "
            "say in words why the plate does not count"
        ],
    ),
    "unknown_note": (
        {"plates/plate-01.toml": 'resin_lott = "R1"\n'},
        ['plates/plate-01.toml: "resin_lott" is not a key (did you mean "resin_lot"?)'],
    ),
    "note_of_a_wrong_kind": (
        {"plates/plate-01.toml": 'date = "yesterday"\nfeed_lot = 3\n'},
        [
            'plates/plate-01.toml, date: "yesterday" is not a date such as 2026-05-04',
            "plates/plate-01.toml, feed_lot: 3 is not text; put it in quotes",
        ],
    ),
    "notes_of_no_plate": (
        {"plates/plate-1.toml": 'void = "spilt on the bench"\n'},
        [
            "plates/plate-1.toml: belongs to no plate; there is no plates/plate-1.csv or .xlsx "
            '(did you mean "plate-01"?)'
        ],
    ),
    "repeats_no_plate": (
        {"plates/plate-01.toml": 'repeats = "plate-00"\n'},
        ['plates/plate-01.toml, repeats: "plate-00" is not another plate of this study'],
    ),
    "result_of_a_well_not_run": (
        {"results/hcp.csv": "plate,well,hcp\nplate-01,D07,12\n"},
        ['results/hcp.csv, row 2, column well: "D07" was not run on plate-01'],
    ),
    "result_of_a_plate_not_run": (
        {"results/hcp.csv": "plate,well,hcp\nplate-2,A1,12\n"},
        [
            'results/hcp.csv, row 2, column plate: "plate-2" is not a plate that was run '
            '(did you mean "plate-01"?)'
        ],
    ),
    "results_of_a_plate_not_run": (
        {
            "results/hcp.csv": "plate,well,hcp\nplate-2,A1,12\nplate-01,A1,40\n"
            + "".join(f"Plate-2,A{n},12\nplate-3,A{n},9\n" for n in range(2, 9))
        },
        [
            'results/hcp.csv, row 2, column plate: "plate-2" is not a plate that was run '
            '(did you mean "plate-01"?)',
            'results/hcp.csv, row 4, column plate: "Plate-2" is not a plate that was run '
            '(in 7 rows; did you mean "plate-01"?)',
            'results/hcp.csv, row 5, column plate: "plate-3" is not a plate that was run '
            '(in 7 rows; did you mean "plate-01"?)',
        ],
    ),
    "result_of_one_of_two_plates": (
        {"plates/day2-1.csv": PLATE, "results/hcp.csv": "plate,well,hcp\n1,A1,40\n"},
        [
            "results/hcp.csv, row 2, column plate: 1 may be day2-1 or plate-01 "
            "(write the plate's whole name)"
        ],
    ),
    "result_that_differs": (
        {"results/hcp.csv": "plate,well,hcp\nplate-01,A1,41\n"},
        [
            "results/hcp.csv, row 2, column hcp: 41 differs from 40 in plates/plate-01.csv, "
            "row 2, well A1 (give a value in one place)"
        ],
    ),
    "result_given_twice": (
        {"results/hcp.csv": "plate,well,hcp\nplate-01,B1,41\nplate-01,B01,41\n"},
        ['results/hcp.csv, row 3, column well: "B01" of plate-01 is already in row 2'],
    ),
    "results_without_plate": (
        {"results/hcp.csv": "well,hcp\nA1,41\n"},
        [
            "results/hcp.csv: has no column plate "
            "(expected header: plate,well and any of recovery,hcp)"
        ],
    ),
    "results_with_a_misspelt_column": (
        {"results/hcp.csv": "plates,well,hcp\nplate-01,A1,41\n"},
        [
            "results/hcp.csv: has no column plate (did you mean its column plates?; "
            "expected header: plate,well and any of recovery,hcp)"
        ],
    ),
    "results_without_response": (
        {"results/hcp.csv": "plate,well,hpc\nplate-01,A1,40\n"},
        [
            "results/hcp.csv: has no column of a response (is its column hpc meant to be hcp?; "
            "expected header: plate,well and any of recovery,hcp)"
        ],
    ),
    "stock_of_no_factor": (
        {"stocks/plate-01.csv": "factor,target,measured\nsalte,100,101\n"},
        [
            'stocks/plate-01.csv, row 2, column factor: "salte" is not a factor '
            '(did you mean "salt"?)'
        ],
    ),
    "stock_of_a_choice": (
        {"stocks/plate-01.csv": "factor,target,measured\nresin,1,2\n"},
        [
            'stocks/plate-01.csv, row 2, column factor: "resin" has choices; '
            "only a factor with a range has measured stocks"
        ],
    ),
    "stock_far_off": (
        {"stocks/plate-01.csv": "factor,target,measured\nsalt,100,911\n"},
        [
            "stocks/plate-01.csv, row 2, column measured: 911 lies outside -10 to 910 mM, "
            "the range and a step (study.toml, factors, salt; if it is a bottle that wells are "
            "blended from, name it in the column bottle)"
        ],
    ),
    "two_stocks_of_one_target": (
        {"stocks/plate-01.csv": "factor,target,measured\nsalt,100,101\nsalt,100,102\n"},
        [
            "stocks/plate-01.csv, row 3, column target: 100 is already the target of another "
            "stock of salt on this plate (column bottle tells bottles apart)"
        ],
    ),
    "stocks_of_no_plate": (
        {"stocks/plate-02.csv": "factor,target,measured\n"},
        [
            "stocks/plate-02.csv: belongs to no plate; there is no plates/plate-02.csv or .xlsx "
            '(did you mean "plate-01"?)'
        ],
    ),
}

CASES = {**KEYS, **TABLES, **COPIES, **LATER}


@pytest.mark.parametrize("name", CASES)
def test_each_fault_is_named_in_one_line(make, name):
    files, lines = CASES[name]
    with pytest.raises(StudyFaults) as raised:
        open_study(make(files))
    assert raised.value.lines() == lines


@pytest.mark.parametrize("mark", MARKS)
def test_a_mark_is_no_reason(make, mark):
    shown = mark if mark.isdigit() else f'"{mark}"'
    with pytest.raises(StudyFaults) as raised:
        open_study(make(plate("pipetted twice", mark)))
    assert raised.value.lines() == [
        f"plates/plate-01.csv, row 5, well B2, column exclude: {shown} is not a reason "
        '(say in words why, such as "pipetted twice", or leave the cell empty)'
    ]


def test_all_faults_of_a_study_come_together(make):
    files = {
        TOML: STUDY.replace("at_most = 100", "at_mots = 100"),
        CSV: PLATE.replace("5.5,100", "5.5,5000").replace("pipetted twice", "x"),
        "plates/plate-02.csv": "",
        "plates/plate-01.toml": "void = 1\n",
        "results/hcp.csv": "plate,well,hcp\nplate-01,D7,12\nplate-02,A1,12\n",
    }
    with pytest.raises(StudyFaults) as raised:
        open_study(make(files))
    assert raised.value.lines() == [
        'study.toml, responses, hcp: "at_mots" is not a key of [[responses]] '
        '(did you mean "at_most"?)',
        "plates/plate-01.toml, void: 1 is not text; put it in quotes",
        "plates/plate-02.csv: is empty; its first row must hold the headings",
        "plates/plate-01.csv, row 5, well B2, column exclude: "
        '"x" is not a reason (say in words why, such as "pipetted twice", or leave the cell empty)',
        "plates/plate-01.csv, row 2, well A1, column salt: 5000 lies outside 0 to 900 mM "
        "(study.toml, factors, salt)",
        'results/hcp.csv, row 2, column well: "D7" was not run on plate-01',
    ]


def test_tables_are_judged_though_a_factor_is_at_fault(make):
    files = {**study("low = 4.5", "low = 8"), **plate("5.5,100", "5.5,5000")}
    with pytest.raises(StudyFaults) as raised:
        open_study(make(files))
    assert raised.value.lines() == [
        "study.toml, factors, ph, low: 8 must lie below high, which is 7.5",
        f"{AT_A1} salt: 5000 lies outside 0 to 900 mM (study.toml, factors, salt)",
    ]


def test_wells_are_judged_though_study_toml_cannot_be_read(make):
    with pytest.raises(StudyFaults) as raised:
        open_study(make({TOML: "[study]\ntitle = {\n", **plate("A02", "A1")}))
    assert [fault.file for fault in raised.value.faults] == [TOML, CSV]


def test_many_faults_of_a_kind_are_counted(make):
    rows = "".join(f"A{column},5.5,{column}000,Beta,0.5\n" for column in range(1, 13))
    with pytest.raises(StudyFaults) as raised:
        open_study(make({CSV: "well,ph,salt,resin,recovery\n" + rows}))
    assert len(raised.value.faults) == 12
    lines = raised.value.lines()
    assert len(lines) == 6
    assert lines[-1] == ("plates/plate-01.csv, column salt: 7 more cells like these (lies outside)")


def test_a_folder_without_a_study(tmp_path):
    with pytest.raises(StudyFaults) as raised:
        open_study(tmp_path)
    assert str(raised.value) == f"{tmp_path}: holds no study.toml (muntin new DIR writes one)"


def test_a_folder_that_is_not_there(tmp_path):
    with pytest.raises(StudyFaults) as raised:
        open_study(tmp_path / "none")
    assert (
        str(raised.value) == f"{tmp_path}/none: there is no such folder (muntin new DIR makes one)"
    )


def test_a_file_instead_of_a_folder(make):
    path = make({}) / TOML
    with pytest.raises(StudyFaults) as raised:
        open_study(path)
    assert str(raised.value) == (
        f"{path}: is a file, not the folder of a study (name the folder that holds it)"
    )
