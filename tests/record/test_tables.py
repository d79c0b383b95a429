"""Cells and tables, whatever they hold."""

from __future__ import annotations

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from muntin.record import StudyFaults, open_study
from muntin.record.cells import CellError, parse_number, parse_reading, parse_reason
from muntin.record.faults import Findings
from muntin.record.tables import natural_order, read_table
from tests.record.conftest import STEADY, STUDY


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("5", 5),
        ("-0.5", -0.5),
        ("0,83", 0.83),
        (".5", 0.5),
        ("1e-3", 1e-3),
        ("+2,5E2", 250),
        ("3.", 3),
    ],
)
def test_numbers(text, value):
    assert parse_number(text) == value


def test_a_comma_may_mean_thousands_only_between_commas():
    assert parse_number("1,000") == 1
    assert parse_number("0,125", comma=True) == 0.125
    with pytest.raises(CellError, match="may mean thousands or decimals"):
        parse_number("1,000", comma=True)


@pytest.mark.parametrize(
    "text", ["", "a", "1.2.3", "1,2,3", "1 000", "0x1f", "1_000", "٣", "5 mM", "--1"]
)
def test_what_is_no_number(text):
    with pytest.raises(CellError, match="is not a number"):
        parse_number(text)


@STEADY
@given(st.floats(allow_nan=False, allow_infinity=False), st.sampled_from(".,"))
def test_any_number_survives_its_cell(value, decimal):
    text = repr(value).replace(".", decimal)
    assert parse_number(text) == value


@pytest.mark.parametrize(
    ("text", "limit"),
    [("<0.05", 0.05), ("> 2,5", 2.5), ("<=1", 1.0), ("≥ 3", 3.0), ("<1e-3", 1e-3)],
)
def test_censored_cells_hold_their_limit(text, limit):
    assert parse_reading(text) == ("censored", limit)


@pytest.mark.parametrize("text", ["pipetted twice", "Luftblase", "no resin in the well", "spilt"])
def test_reasons_in_words(text):
    assert parse_reason(text) == text


def test_natural_order():
    names = ["plate-10", "plate-2", "Plate-1", "a", "2b", "10"]
    assert sorted(names, key=natural_order) == ["2b", "10", "a", "Plate-1", "plate-2", "plate-10"]


@given(
    st.binary(max_size=200) | st.text(max_size=200).map(str.encode),
    st.sampled_from(["csv", "xlsx"]),
)
@settings(STEADY, suppress_health_check=[HealthCheck.function_scoped_fixture])
def test_any_file_is_a_table_or_a_fault(tmp_path, raw, suffix):
    path = tmp_path / f"table.{suffix}"
    path.write_bytes(raw)
    found = Findings()
    table = read_table(path, "table", ["well", "salt"], found)
    assert (table is None) == bool(found.faults)
    if table is not None:
        assert {len(cells) for cells in table.columns.values()} <= {len(table)}


CELLS = st.sampled_from(
    [
        "",
        "A1",
        "b02",
        "test",
        "blank",
        "5.5",
        "6,1",
        "100",
        "0",
        "-3",
        "Alpha",
        "x",
        "<5",
        "pipetted twice",
    ]
)
HEADINGS = ["well", "role", "ph", "salt", "resin", "recovery", "recovery_sd", "hcp", "exclude"]
HEADINGS += ["note", "ph_measured", "recovery_exclude", "salt_target"]


@given(
    st.lists(st.sampled_from(HEADINGS), min_size=1, max_size=9),
    st.lists(st.lists(CELLS, min_size=9, max_size=9), max_size=4),
)
@settings(STEADY, suppress_health_check=[HealthCheck.function_scoped_fixture])
def test_any_plate_is_read_or_at_fault(tmp_path, headings, rows):
    (tmp_path / "plates").mkdir(exist_ok=True)
    (tmp_path / "study.toml").write_text(STUDY)
    lines = [";".join(headings), *(";".join(row[: len(headings)]) for row in rows)]
    (tmp_path / "plates" / "plate-01.csv").write_text("\n".join(lines))
    try:
        study = open_study(tmp_path)
    except StudyFaults as faults:
        lines = faults.lines()
        study = None
    if study is None:
        assert lines
        assert not any("\n" in line for line in lines)
        return
    counts = study.counts()
    for name in ("recovery", "hcp"):
        groups = (counts.read, counts.awaited, counts.excluded, counts.censored)
        assert sum(group[name] for group in groups) == counts.wells
        assert len(study.readings(name)) == counts.read[name]
