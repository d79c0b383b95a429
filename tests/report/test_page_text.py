"""The screen of `muntin report`: what was changed without a reason stands on it, too."""

from io import StringIO
from pathlib import Path
from types import SimpleNamespace
from typing import Any

import pytest
from rich.console import Console

from muntin.report.page_text import page_screen


@pytest.mark.parametrize("notice", ["CHANGED since advice/plate-02/r1: a reading.", ""])
def test_open_changes_are_told(notice: str) -> None:
    page: Any = SimpleNamespace(
        basis=SimpleNamespace(definition=SimpleNamespace(title="Small invented study")),
        facts={"answer": ["Nothing passes."]},
    )
    study: Any = SimpleNamespace(
        changes=SimpleNamespace(notice=notice), stopping=SimpleNamespace(notice="")
    )
    console = Console(width=100, record=True, file=StringIO())
    console.print(page_screen(page, study, [Path("report.html"), Path("report.json")]))
    shown = console.export_text()
    assert ("Noted" in shown) == bool(notice)
    assert notice in shown
    assert "Nothing passes." in shown
