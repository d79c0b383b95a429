"""The columns that are explained are those that the readers of the tables know."""

from __future__ import annotations

import pytest

from muntin.assay.uptake_table import _KNOWN
from muntin.record.assay import READ_COLUMNS
from muntin.record.column_runs import run_columns
from muntin.record.definition import Definition
from muntin.record.plates import plate_columns
from muntin.record.readings import response_columns
from muntin.record.stocks import COLUMNS
from muntin.reference.tables import SHEETS
from tests.reference.emitted import fits
from tests.studies import tables

DEFINITION = Definition.model_validate(tables())
KNOWN = {
    "plates/<plate>.csv": plate_columns(DEFINITION),
    "results/<name>.csv": ["plate", "well", *response_columns(DEFINITION.responses)],
    "stocks/<plate>.csv": COLUMNS,
    "uptake/<curve>.csv": _KNOWN,
    "READS": READ_COLUMNS,
    "columns/<column>.csv": run_columns(DEFINITION),
}


@pytest.mark.parametrize("name", KNOWN)
def test_columns_of_input_tables(name: str) -> None:
    columns = next(sheet.columns for sheet in SHEETS if sheet.file == name)
    told = {c for c in columns if c != "<column>"}
    assert {own for own in KNOWN[name] if not any(fits(c, own) for c in told)} == set()
    assert {c for c in told if not any(fits(c, own) for own in KNOWN[name])} == set()
