"""`muntin help`: what it finds, how it looks, and that it is told from what is declared today."""

from __future__ import annotations

import json
import subprocess
import sys

import pytest
from hypothesis import given
from hypothesis import strategies as st

from muntin.reference.lookup import all_entries, found, nearest_names
from tests.reference.write import FOLDER, texts
from tests.test_cli import run

ENTRIES = all_entries()


@pytest.mark.parametrize("name", ["entries.jsonl", "reference.md"])
def test_the_reference_is_up_to_date(name: str) -> None:
    written = (FOLDER / name).read_text(encoding="utf-8")
    assert written == texts()[name], "run python -m tests.reference.write"


@given(st.sampled_from(ENTRIES), st.booleans())
def test_every_entry_is_found_by_its_names(entry, capital) -> None:
    plain = {name for name in entry.names() if not name.startswith(("[", "--"))}
    for name in plain or entry.names():
        assert entry in found(name.upper() if capital else name, ENTRIES)


@pytest.mark.parametrize(
    ("name", "first"),
    [
        ("kept_within", ("key", "kept_within", "[[factors]]")),
        ("factors.kept_within", ("key", "kept_within", "[[factors]]")),
        ("[bench]", ("section", "[bench]", "study.toml")),
        ("[factors]", ("section", "[[factors]]", "study.toml")),
        ("sides[].beyond", ("field", "window.sides[].beyond", "assess, advise, report")),
        ("bench.stocks", ("section", "[[bench.stocks]]", "study.toml")),
        ("assess", ("command", "assess", "")),
        ("muntin assess", ("command", "assess", "")),
        ("negligible", ("option", "--negligible", "assess")),
        ("transfers.csv", ("table", "sheets/<plan>/transfers.csv", "")),
        ("draw_ul", ("column", "draw_ul", "sheets/<plan>/transfers.csv")),
        ("yield_exclude", ("column", "<response>_exclude", "plates/<plate>.csv")),
        ("window.sides[].beyond", ("field", "window.sides[].beyond", "assess, advise, report")),
        ("Sides.Beyond", ("field", "window.sides[].beyond", "assess, advise, report")),
    ],
)
def test_names_lead_to_entries(name: str, first: tuple[str, str, str]) -> None:
    entry = found(name, ENTRIES)[0]
    assert (entry.kind, entry.name, entry.of) == first


def test_marks_ask_for_one_kind() -> None:
    assert {entry.kind for entry in found("--plates", ENTRIES)} == {"option"}
    assert {entry.kind for entry in found("plates", ENTRIES)} > {"option", "table"}
    assert [entry.name for entry in found("[plan]", ENTRIES)] == ["[plan]"]


def test_a_bare_place_fits_no_name() -> None:
    assert found("anything", ENTRIES) == []


def test_an_unknown_name_names_the_nearest() -> None:
    result = run("help", "kept_whithin")
    assert result.exit_code == 2
    assert result.stdout == ""
    start = 'muntin help: "kept_whithin" is not in the reference (near to it: kept_within'
    assert result.stderr.startswith(start)
    assert nearest_names("qqqq", ENTRIES) == []


def test_a_key_on_the_screen() -> None:
    assert run("help", "set_sd").stdout == (
        "set_sd  key of [[factors]]\n"
        '  The bench sets it with this standard deviation; "2 %" is a share of the set\n'
        "  value.\n"
        '  number, or a share such as "5 %"; unit: the factor\'s, or %; example: 0.03\n'
    )


@pytest.mark.parametrize(
    "name", ["", "assess", "[bench]", "plates", "name", "window", "reductions/<plate>-masses.csv"]
)
def test_screens_keep_to_80_columns(name: str) -> None:
    result = run("help", *([name] if name else []))
    assert result.exit_code == 0
    lines = result.stdout.splitlines()
    assert len(lines) > 3
    assert max(map(len, lines)) <= 80


def test_the_overview_names_all_commands_and_sections() -> None:
    shown = run("help").stdout
    for entry in ENTRIES:
        if entry.kind in ("command", "section", "table"):
            assert entry.name in shown


def test_json_and_quiet() -> None:
    facts = json.loads(run("help", "set_sd", "--json").stdout)
    assert (facts["name"], [one["of"] for one in facts["found"]]) == ("set_sd", ["[[factors]]"])
    assert run("help", "set_sd", "--quiet").stdout == ""


def test_help_waits_for_no_large_library() -> None:
    code = (
        "import sys\n"
        "sys.argv = ['muntin', 'help', 'set_sd']\n"
        "from muntin.cli import main\n"
        "try:\n    main()\nexcept SystemExit:\n    pass\n"
        "print({'numpy', 'pandas', 'scipy', 'matplotlib', 'muntin.record'} & set(sys.modules))\n"
    )
    told = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert told.stdout.splitlines()[-1] == "set()"
