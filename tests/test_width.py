"""How wide screens are: the terminal or COLUMNS, in a pipe too, and what stands in 80 columns."""

from __future__ import annotations

import pandas as pd
import pytest
from rich.text import Text

from muntin.commands.shared import _shown
from muntin.report.plan_text import forecast_table
from muntin.report.text import sheet
from tests.assay.studies import write
from tests.report.test_ruling_text import plan_of, written
from tests.test_cli import run
from tests.test_cli_uptake import PAIR, WHOLE
from tests.test_cli_uptake import study as uptake_study


@pytest.mark.parametrize(
    ("columns", "widest"),
    [(None, 100), ("80", 80), ("64", 64), ("200", 100), ("3", 40), ("wide", 100), ("", 100)],
)
def test_a_piped_screen_is_as_wide_as_columns_says(monkeypatch, columns, widest):
    if columns is not None:
        monkeypatch.setenv("COLUMNS", columns)
    lines = _shown(Text("x" * 250)).splitlines()
    assert len(lines[0]) == widest


def test_a_reduction_fits_80_columns_and_keeps_its_ranges_whole(monkeypatch, tmp_path):
    monkeypatch.setenv("COLUMNS", "80")
    study = write(tmp_path)
    lines = run("reduce", study, "reads").output.splitlines()
    assert max(map(len, lines)) <= 80
    (row,) = (line.split() for line in lines if line.strip().startswith("plate-01  "))
    assert row[:6] == ["plate-01", "3", "2", "0.00", "to", "0.60"]


def test_laws_of_uptake_take_a_line_each_in_80_columns(monkeypatch, tmp_path):
    monkeypatch.setenv("COLUMNS", "80")
    screen = run("uptake", uptake_study(tmp_path, whole=WHOLE, pair=PAIR)).output
    assert all(len(line) <= 80 for line in screen.splitlines() if "figures/" not in line)
    for law in ("first order ", "pore diffusion "):
        rows = [line for line in screen.splitlines() if line.strip().startswith(law)]
        assert len(rows) == 2
        assert all(row.count(")") == 1 for row in rows)
    assert "\nHow to read the figures\nMeans " in screen


def test_the_forecast_breaks_at_most_its_labels_in_80_columns(monkeypatch, tmp_path):
    monkeypatch.setenv("COLUMNS", "80")
    counts = [0, 6, 12, 24, 48, 96]
    forecast = pd.DataFrame(
        {
            "wells": counts,
            "mg": [0, 4, 5.5, 8.5, 14.5, 26.5],
            "wrong_share": [0.08, 0.05, 0.04, 0.03, 0.02, 0.01],
            "set_point": 0.999,
            "reached": [1.0, *[0.999] * 5],
        }
    )
    plan = plan_of(None, forecast=forecast)
    screen = _shown(sheet("Title", [("Forecast", [forecast_table(written(tmp_path), plan)])]))
    told = [" ".join(line.split()) for line in screen.splitlines()]
    assert told[1:] == [
        "Forecast test wells 0 6 12 24 48 96",
        "protein, mg 0 4 5.5 8.5 14.5 26.5",
        "may be called wrongly 8.0 % 5.0 % 4.0 % 3.0 % 2.0 % 1.0 %",
        "set point passes 99.9 % 99.9 % 99.9 % 99.9 % 99.9 % 99.9 %",
        "chance set point yes >99 % >99 % >99 % >99 % >99 %",
        "reaches 90 %",
    ]
