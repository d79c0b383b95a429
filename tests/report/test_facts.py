"""Plain values for JSON."""

from __future__ import annotations

import json

import numpy as np
import pandas as pd

from muntin.report.facts import plain, records


def test_plain_values_survive_a_strict_round_trip() -> None:
    value = {
        "array": np.array([1.5, np.nan, np.inf]),
        "scalars": (np.float64(2.5), np.int64(3), np.bool_(True)),
        7: {"nothing": None, "missing": pd.NA, "text": "ok"},
    }
    expected = {
        "array": [1.5, None, None],
        "scalars": [2.5, 3, True],
        "7": {"nothing": None, "missing": None, "text": "ok"},
    }
    assert json.loads(json.dumps(plain(value), allow_nan=False)) == expected


def test_records_are_rows() -> None:
    frame = pd.DataFrame({"well": ["A1", "B2"], "p": [0.25, np.nan]})
    assert plain(records(frame)) == [{"well": "A1", "p": 0.25}, {"well": "B2", "p": None}]
