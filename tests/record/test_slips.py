"""Slips in TOML files and in number cells: what is there, and what was meant by it."""

from __future__ import annotations

import pytest

from muntin.record import StudyFaults, open_study
from muntin.record.number_slips import number_hint
from tests.record.conftest import PLATE, STUDY

TOML, CSV, NOTES = "study.toml", "plates/plate-01.csv", "plates/plate-01.toml"
TITLE, CHOICES = '"Small invented study"', '["Alpha", "Beta"]'
DOUBLE = "needs double brackets: [[factors]]"
LISTED = f"must be a list of texts in quotation marks: {CHOICES}"
OWN = "is there twice in one table; each of the factors has its own [[factors]] above it"
NO_NOTE = "is neither a key = value nor a [table]; a note begins with #"

SLIPS = {
    "decimal comma": (
        "low = 4.5",
        "low = 4,5",
        "6, low: 4,5 needs a decimal point, not a comma: 4.5",
    ),
    "no digit before the point": ("low = 4.5", "low = .5", "6, low: .5 must be written 0.5"),
    "a zero too many": ("high = 900", "high = 0900", "15, high: 0900 must be written 900"),
    "unit": ("high = 900", "high = 900 mM", "15, high: 900 mM must stand without a unit: 900"),
    "thousands": (
        "high = 900",
        "high = 1.000,5",
        "15, high: 1.000,5 is not a number; meant is perhaps 1000.5",
    ),
    "doubtful thousands": (
        "high = 900",
        "high = 1,000",
        "15, high: 1,000 may mean thousands or decimals; write it without the comma",
    ),
    "letter": ("0.8", "O.8", "25, at_least: O.8 is not a number; meant is perhaps 0.8"),
    "per cent of a fraction": (
        "at_least = 0.8",
        "at_least = 80 %",
        "25, at_least: 80 % must stand without the % sign: 0.8",
    ),
    "per cent in braces": (
        "at_most = 100",
        "priors = { noise_sd = { median = 0,1, log_sd = 1 } }",
        "31, priors: { noise_sd = { median = 0,1, log_sd = 1 } } needs decimal points, not "
        "commas: { noise_sd = { median = 0.1, log_sd = 1 } }",
    ),
    "share": ("0.1\n\n", "5 %\n\n", '9, kept_within: 5 % needs quotation marks: "5 %"'),
    "single brackets": (
        "[[factors]]",
        "[factors]",
        "4: [factors] needs double brackets: [[factors]]",
    ),
    "bracket forgotten": (
        "[[factors]]",
        "[[factors]",
        "4: [[factors] needs double brackets: [[factors]]",
    ),
    "double brackets": ("[study]", "[[study]]", "1: [[study]] needs single brackets: [study]"),
    "opening bracket": ("[study]", "study]", "1: study] needs single brackets: [study]"),
    "no quotation marks": (
        TITLE,
        "Small invented study",
        f"2, title: Small invented study needs quotation marks: {TITLE}",
    ),
    "open quotation mark": (
        TITLE,
        "'Small invented study",
        f"2, title: 'Small invented study has no closing quotation mark: {TITLE}",
    ),
    "smart quotes": (
        TITLE,
        "„Small invented study“",
        f"2, title: „Small invented study“ needs straight quotation marks: {TITLE}",
    ),
    "quotes inside": (
        TITLE,
        '"a "small" study"',
        '2, title: "a "small" study" has quotation marks inside; write \' around it: '
        "'a \"small\" study'",
    ),
    "list without quotes": (CHOICES, "[Alpha, Beta]", f"20, choices: [Alpha, Beta] {LISTED}"),
    "list in smart quotes": (
        CHOICES,
        "[“Alpha”, “Beta”]",
        f"20, choices: [“Alpha”, “Beta”] {LISTED}",
    ),
    "open list": (CHOICES, CHOICES[:-1], f'20, choices: ["Alpha", "Beta" {LISTED}'),
    "no comma": (CHOICES, '["Alpha" "Beta"]', f'20, choices: ["Alpha" "Beta"] {LISTED}'),
    "open text in a list": (CHOICES, '["Alpha", "Beta]', f'20, choices: ["Alpha", "Beta] {LISTED}'),
    "list over lines": (
        CHOICES,
        '[\n"Alpha"\n"Beta"\n]',
        f'20, choices: [ "Alpha" "Beta" ] {LISTED}',
    ),
    "no brackets": (CHOICES, '"Alpha"; "Beta"', f'20, choices: "Alpha"; "Beta" {LISTED}'),
    "no =": ("low = 4.5", "low 4.5", "6: low 4.5 must be written low = 4.5"),
    "colon": ("low = 4.5", "low: 4,5", "6: low: 4,5 must be written low = 4.5"),
    "two =": ("low = 4.5", "low == 4.5", "6: low == 4.5 must be written low = 4.5"),
    "sign": (
        "at_least = 0.8",
        "at_least >= 0.8",
        "25: at_least >= 0.8 must be written at_least = 0.8",
    ),
    "blank": ("at_least", "at least", "25: at least = 0.8 must be written at_least = 0.8"),
    "no note": ("[[factors]]", "// ours\n[[factors]]", f'4: "// ours" {NO_NOTE}'),
    "key twice": ("low = 4.5", "low = 4.5\nlow = 5", f'7: "low" {OWN}'),
    "heading forgotten": ('[[factors]]\nname = "salt"', 'name = "salt"', f'11: "name" {OWN}'),
    "table twice": ("[[factors]]", "[study]\n[[factors]]", "4: [study] is there twice; keep one"),
    "odd blank": (
        "low = 4.5",
        "low\u00a0= 4.5",
        "6: low = 4.5 has a blank of another kind, as word processors make; type it anew: "
        "low = 4.5",
    ),
}

DAY = "must be written year-month-day"
NOTE_SLIPS = {
    "date = 1.12.2026": f"line 1, date: 1.12.2026 {DAY}: 2026-12-01",
    "date = 12/13/2026": f"line 1, date: 12/13/2026 {DAY}: 2026-12-13",
    "date = 3/4/2026": f"line 1, date: 3/4/2026 {DAY}, such as: 2026-05-04",
    "date = 1. Dez 2026": f"line 1, date: 1. Dez 2026 {DAY}, such as: 2026-05-04",
    'date = "1.12.2026"': 'date: "1.12.2026" is not a date such as 2026-05-04 (write 2026-12-01)',
    "feed_age_days = 2 days": "line 1, feed_age_days: 2 days must stand without a unit: 2",
    "feed_lot = 007": 'line 1, feed_lot: 007 needs quotation marks: "007"',
    "by = O'Neill": "line 1, by: O'Neill needs quotation marks: \"O'Neill\"",
    'by = "a"\nby = "b"': 'line 2: "by" is there twice in one table; keep one',
}


def lines_of(folder):
    with pytest.raises(StudyFaults) as raised:
        open_study(folder)
    return raised.value.lines()


@pytest.mark.parametrize("name", SLIPS)
def test_a_slip_is_the_one_fault_of_its_file(make, name):
    old, new, line = SLIPS[name]
    assert old in STUDY
    assert lines_of(make({TOML: STUDY.replace(old, new, 1)})) == [f"study.toml, line {line}"]


@pytest.mark.parametrize("text", NOTE_SLIPS)
def test_a_slip_in_the_notes_of_a_plate(make, text):
    assert lines_of(make({NOTES: f"{text}\n"})) == [f"{NOTES}, {NOTE_SLIPS[text]}"]


def test_all_slips_come_together_and_with_other_faults(make):
    text = STUDY.replace("[[factors]]", "[factors]").replace("4.5", "4,5")
    text = text.replace("at_most", "at_mots").replace('"fraction"', "fraction")
    assert lines_of(make({TOML: text, CSV: PLATE.replace("5.5,100", "5.5,5000")})) == [
        "study.toml, line 6, low: 4,5 needs a decimal point, not a comma: 4.5",
        *(f"study.toml, line {at}: [factors] {DOUBLE}" for at in (4, 11, 18)),
        'study.toml, line 24, kind: fraction needs quotation marks: "fraction"',
        'study.toml, responses, hcp: "at_mots" is not a key of [[responses]] '
        '(did you mean "at_most"?)',
        "plates/plate-01.csv, row 2, well A1, column salt: 5000 lies outside 0 to 900 mM "
        "(study.toml, factors, salt)",
    ]


def test_shares_may_be_given_in_per_cent(make):
    text = STUDY.replace("title", 'required_probability = "85 %"\ntitle')
    text += '[stop]\nwrong_share = "2,5 %"\nbest_probability = "95%"\n'
    definition = open_study(make({TOML: text})).definition
    assert definition.required_probability == 0.85
    assert (definition.stop.wrong_share, definition.stop.best_probability) == (0.025, 0.95)


@pytest.mark.parametrize(
    ("given", "said"),
    [
        ('"100 %"', '"100 %" must lie above 0 % and below 100 %'),
        ('"a few"', '"a few" is neither a number from 0 to 1 nor a share such as "5 %"'),
        ("5", '5 must lie below 1 (for per cent write "5 %")'),
        ("1", "1 must lie below 1"),
    ],
)
def test_a_share_that_is_none(make, given, said):
    text = STUDY + f"[stop]\nwrong_share = {given}\n"
    assert lines_of(make({TOML: text})) == [f"study.toml, stop, wrong_share: {said}"]


DATED = (
    "a spreadsheet has made a date of a number{}: "
    "format the cell as text, then type the number again"
)
HINTS = {
    "6.1 %": "write 6.1, without the % sign",
    "07. Jan": DATED.format(", perhaps 7.1"),
    "7-Dez": DATED.format(", perhaps 7.12"),
    "Mai 50": DATED.format(", perhaps 5.50"),
    "2026-01-07 00:00:00": DATED.format(""),
    "1.234,5": "did you mean 1234.5?",
    "1,234.5": "did you mean 1234.5?",
    "1 200": "did you mean 1200?",
    "1'200": "did you mean 1200?",
    "O.85": "did you mean 0.85?",
    "l.5": "did you mean 1.5?",
    "0..85": "did you mean 0.85?",
    "–0·8": "did you mean -0.8?",
    "0.8;": "did you mean 0.8?",
    "5,2 mM": "write 5.2, without mM",
    "0.8l": "write 0.8, without l",
    "0.8.5": "",
    "o": "",
    "high": "",
    "12 May 2020": "",
}


@pytest.mark.parametrize("text", HINTS)
def test_what_a_number_cell_was_meant_to_be(make, text):
    assert number_hint(text) == HINTS[text]
    hint = f" ({HINTS[text]})" if HINTS[text] else ""
    cells = PLATE.replace(",", ";").replace("5.5;100", f"5.5;{text.replace(';', ',')}")
    shown = text.replace(";", ",")
    if text != "0.8;":
        assert lines_of(make({CSV: cells})) == [
            f'{CSV}, row 2, well A1, column salt: "{shown}" is not a number{hint}'
        ]


def test_per_cent_of_a_fraction_is_a_share(make):
    assert lines_of(make({CSV: PLATE.replace("0.83", "83 %")})) == [
        f'{CSV}, row 2, well A1, column recovery: "83 %" is not a number (write 0.83 for 83 %)'
    ]
