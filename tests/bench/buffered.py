"""Definitions with buffers, for the tests of recipes and their cautions."""

from __future__ import annotations

from typing import Any

from muntin.record.definition import Definition, definition_faults
from tests.studies import tables

PH = {"name": "ph", "label": "pH", "low": 3.0, "high": 9.0, "step": 0.1}
SALT = {"name": "salt", "unit": "mM", "low": 0, "high": 1000, "step": 10}
SUGAR = {"name": "sugar", "unit": "mM", "low": 0, "high": 300, "step": 25}


def buffer(name: str, **given: Any) -> dict[str, Any]:
    return {"name": name, "mm": 20.0, "stock_mm": 200.0, **given}


def buffered(*buffers: dict[str, Any], factors: Any = (PH, SALT), **bench: Any) -> Definition:
    """A sound definition with these buffers; NaCl 2 M where not given otherwise."""
    keys = {"ph_factor": "ph", "salt_factor": "salt", "salt_stock_mm": 2000.0, "buffers": buffers}
    definition = Definition.model_validate(tables(factors=factors, bench={**keys, **bench}))
    assert definition_faults(definition) == []
    return definition
