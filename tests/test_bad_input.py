"""Bad input, at the command: exit 2, the reasons on stderr, nothing printed, nothing written."""

from __future__ import annotations

from pathlib import Path

import pytest
from typer.testing import CliRunner

from muntin.cli import app
from tests.report.studies import RESIN, STUDY, plate, small, tree, write

TOML, CSV = "study.toml", "plates/plate-01.csv"
PLATE = plate()
FIRST = "A1,test,4.5,50,0.021,"


def toml(old: str, new: str) -> dict[str, str | bytes]:
    assert old in STUDY
    return {TOML: STUDY.replace(old, new, 1)}


def table(old: str, new: str) -> dict[str, str | bytes]:
    assert old in PLATE
    return {CSV: PLATE.replace(old, new, 1)}


def limit(text: str) -> dict[str, str | bytes]:
    return {TOML: STUDY + f'[[limits]]\nallow = "{text}"\n'}


def cells(*changes: str) -> dict[str, str | bytes]:
    """The plate table with its first row replaced."""
    return table(FIRST, "\n".join(changes))


def per_cent(at_least: str) -> dict[str, str | bytes]:
    return toml("at_least = 0.8", f'at_least = {at_least}\nunit = "%"')


Case = tuple[dict[str, str | bytes], list[str]]
BAD: dict[str, Case] = {
    "broken_toml": (
        toml('title = "Small', "title = Small"),
        [
            'study.toml, line 2, title: Small invented study" needs quotation marks: '
            '"Small invented study"'
        ],
    ),
    "unknown_key": (
        toml("kept_within", "kept_witin"),
        [
            'study.toml, factors, ph: "kept_witin" is not a key of [[factors]] (did you '
            'mean "kept_within"?)',
        ],
    ),
    "low_above_high": (
        toml("low = 50", "low = 500"),
        ["study.toml, factors, salt, low: 500 must lie below high, which is 450"],
    ),
    "step_too_large": (
        toml("step = 50", "step = 500"),
        ["study.toml, factors, salt, step: 500 is larger than the range 50 to 450 mM"],
    ),
    "log_from_zero": (
        toml("low = 50", 'low = 0\nscale = "log"'),
        [
            "study.toml, factors, salt, low: 0 must lie above 0 on a log scale; or set "
            'scale = "linear"',
        ],
    ),
    "no_factor_no_response": (
        {TOML: '[study]\ntitle = "x"\n', CSV: "well\n"},
        [
            "study.toml, factors: none is given; a study has 1 to 6 [[factors]]",
            "study.toml, responses: none is given; a study has 1 to 6 [[responses]]",
        ],
    ),
    "target_outside_fraction": (
        toml("at_least = 0.8", "at_least = 1.2"),
        [
            "study.toml, responses, recovery, at_least: 1.2 lies outside 0 to 1, ends "
            'left out (for targets and readings in per cent set unit = "%")',
        ],
    ),
    "target_outside_per_cent": (
        per_cent("120"),
        [
            "study.toml, responses, recovery, at_least: 120 lies outside 0 to 100, ends "
            "left out, as the unit is %",
        ],
    ),
    "limit_no_arithmetic": (
        limit("__import__('os')"),
        ["study.toml, limits 1, allow: \"__import__('os')\" is not arithmetic over factor names"],
    ),
    "limit_nothing_meets": (
        limit("salt > 1000"),
        [
            'study.toml, limits 1, allow: "salt > 1000" is met by no condition in the '
            "factors' ranges",
        ],
    ),
    "empty_table": (
        {CSV: ""},
        ["plates/plate-01.csv: is empty; its first row must hold the headings"],
    ),
    "binary_table": (
        {CSV: b"\x00\x01\x02\xff"},
        ["plates/plate-01.csv: is not a text table; save it as .csv or .xlsx"],
    ),
    "missing_column": (
        table(",salt,", ",sodium,"),
        [
            "plates/plate-01.csv: has no column salt (a factor that was added later needs "
            "earlier_value in study.toml)",
        ],
    ),
    "doubled_column": (
        table("well,role,ph,salt", "well,role,salt,salt"),
        ["plates/plate-01.csv, column salt: is there twice, as columns 3 and 4"],
    ),
    "doubled_well": (
        table("A2,", "A01,"),
        ['plates/plate-01.csv, row 3, column well: "A01" is already in row 2'],
    ),
    "no_such_well": (
        cells("I1,test,4.5,50,0.021,"),
        [
            'plates/plate-01.csv, row 2, column well: "I1" is not a well of a 96-well '
            "plate (A1 to H12)",
        ],
    ),
    "text_for_a_number": (
        cells("A1,test,acid,50,0.021,"),
        ['plates/plate-01.csv, row 2, well A1, column ph: "acid" is not a number'],
    ),
    "infinity": (
        cells("A1,test,4.5,50,inf,"),
        [
            'plates/plate-01.csv, row 2, well A1, column recovery: "inf" is not a finite '
            "number (leave the cell empty while its reading is awaited)",
        ],
    ),
    "outside_range": (
        cells("A1,test,4.5,500,0.021,"),
        [
            "plates/plate-01.csv, row 2, well A1, column salt: 500 lies outside 50 to 450 "
            "mM (study.toml, factors, salt)",
        ],
    ),
    "unknown_choice": (
        {
            TOML: STUDY.replace("[[responses]]", RESIN + "\n[[responses]]"),
            CSV: plate(column="resin", value="A|B|C"),
        },
        [
            'plates/plate-01.csv, row 4, well A3, column resin: "C" is not a choice (known: A, B)',
            'plates/plate-01.csv, row 7, well A6, column resin: "C" is not a choice (known: A, B)',
            'plates/plate-01.csv, row 10, well A9, column resin: "C" is not a choice (known: A, B)',
            'plates/plate-01.csv, row 13, well A12, column resin: "C" is not a choice '
            "(known: A, B)",
        ],
    ),
    "like_per_cent": (
        table("0.958,", "95.8,"),
        [
            "plates/plate-01.csv, row 6, well A5, column recovery: 95.8 looks like per "
            'cent; a fraction is read as 0 to 1 (for per cent set unit = "%" in '
            "study.toml, responses, recovery)",
        ],
    ),
    "no_reason_no": (
        cells("A1,test,4.5,50,0.021,no"),
        [
            'plates/plate-01.csv, row 2, well A1, column exclude: "no" is not a reason '
            '(say in words why, such as "pipetted twice", or leave the cell empty)',
        ],
    ),
    "no_reason_0": (
        cells("A1,test,4.5,50,0.021,0"),
        [
            "plates/plate-01.csv, row 2, well A1, column exclude: 0 is not a reason (say "
            'in words why, such as "pipetted twice", or leave the cell empty)',
        ],
    ),
    "no_reason_x": (
        cells("A1,test,4.5,50,0.021,x"),
        [
            'plates/plate-01.csv, row 2, well A1, column exclude: "x" is not a reason '
            '(say in words why, such as "pipetted twice", or leave the cell empty)',
        ],
    ),
    "no_reading": (
        {CSV: "well,ph,salt,recovery\nA1,5,100,\nA2,6,200,\n"},
        [
            "plates: hold no reading of any response in 2 wells on 1 plate (fill in "
            "recovery, or keep a table in plans/ until it was run)",
        ],
    ),
    "result_of_a_well_not_run": (
        {"results/late.csv": "plate,well,recovery\nplate-01,H12,0.5\n"},
        ['results/late.csv, row 2, column well: "H12" was not run on plate-01'],
    ),
}


def run(*arguments: object) -> tuple[int, str, list[str]]:
    """Exit code, stdout, and the lines of stderr."""
    result = CliRunner().invoke(app, [str(argument) for argument in arguments])
    return result.exit_code, result.stdout, result.stderr.splitlines()


@pytest.mark.parametrize("command", ["check", "advise"])
@pytest.mark.parametrize(("files", "lines"), BAD.values(), ids=BAD)
def test_faults_of_a_study(
    tmp_path: Path, files: dict[str, str | bytes], lines: list[str], command: str
) -> None:
    folder = write(small(tmp_path / "study"), files)
    before = tree(folder)
    assert run(command, folder) == (2, "", lines)
    assert tree(folder) == before


@pytest.mark.parametrize("command", ["check", "assess", "propose", "advise"])
def test_no_study(tmp_path: Path, command: str) -> None:
    missing, empty = tmp_path / "missing", tmp_path / "empty"
    empty.mkdir()
    line = f"{missing}: there is no such folder (muntin new DIR makes one)"
    assert run(command, missing) == (2, "", [line])
    line = f"{empty}: holds no study.toml (muntin new DIR writes one)"
    assert run(command, empty) == (2, "", [line])
    assert tree(tmp_path) == {}


@pytest.mark.parametrize("command", ["propose", "advise"])
def test_more_wells_than_the_plate_or_the_protein_has(tmp_path: Path, command: str) -> None:
    folder = small(tmp_path, toml=STUDY.replace("available_mg = 40", "available_mg = 20"))
    before = tree(folder)
    on_top = "4 bridging wells and 8 controls come on top"
    assert run(command, folder, "--wells", 90) == (
        2,
        "",
        [
            "wells: 90 is more than plate and protein allow; ask for 18 "
            f"(96 wells are free; 7 mg left beyond the reserve; {on_top})",
        ],
    )
    assert tree(folder) == before


@pytest.mark.parametrize(
    ("command", "blocked"), [("propose", "plans"), ("advise", "plans"), ("advise", "advice")]
)
def test_a_folder_that_cannot_be_written(tmp_path: Path, command: str, blocked: str) -> None:
    folder = small(tmp_path)
    (folder / blocked).write_text("a file where a folder belongs")
    before = tree(folder)
    line = f"{folder}/{blocked}: is a file where a folder belongs (move it away)"
    assert run(command, folder, "--wells", 3) == (2, "", [line])
    assert tree(folder) == before
    assert not [path for path in folder.rglob("*") if path.is_dir() and not any(path.iterdir())]
