"""What was predicted for wells before they were read, as the advice of the time has it."""

from __future__ import annotations

import json
import re
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pandas as pd

_COLUMNS = ("plate", "well", "response", "low", "predicted", "high")


def recorded_predictions(folder: Path, factors: tuple[str, ...]) -> pd.DataFrame:
    """Return the predictions in a study's advice/, the latest revision of a plate's last.

    Columns: plate, well, response, the factors (raw unit) for which it was predicted, and low,
    predicted and high in the user's unit. What cannot be read is passed over: what is predicted
    anew says so.
    """
    rows = [row for path in _advice(folder) for row in _rows(path, factors)]
    return pd.DataFrame(rows, columns=[*_COLUMNS[:3], *factors, *_COLUMNS[3:]])


def _advice(folder: Path) -> list[Path]:
    def order(path: Path) -> tuple[str, int]:
        number = re.fullmatch(r"r(\d+)", path.parent.name)
        return path.parent.parent.name, int(number[1]) if number else 0

    return sorted((folder / "advice").glob("*/r*/advice.json"), key=order)


def _rows(path: Path, factors: tuple[str, ...]) -> Iterator[dict[str, Any]]:
    try:
        told = json.loads(path.read_text(encoding="utf-8"))
        plate, predicted = told["plan"]["plate"], told["predicted"]
        wells = {row["well"]: row for row in told["plan"]["wells"]}
        rows = [
            {name: row[name] for name in _COLUMNS[1:]}
            | {name: wells[row["well"]][name] for name in factors}
            for row in predicted
        ]
    except (OSError, ValueError, KeyError, TypeError):
        return
    yield from ({"plate": plate, **row} for row in rows)
