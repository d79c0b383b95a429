"""Writes the reference again from the declarations: `python -m tests.reference.write`."""

from __future__ import annotations

from pathlib import Path

import muntin.reference
from muntin.cli import COMMANDS
from muntin.reference.collect import collect
from muntin.reference.entry import entries_text
from muntin.reference.lookup import FILE
from muntin.reference.markdown import reference_text

FOLDER = Path(muntin.reference.__file__).parent


def texts() -> dict[str, str]:
    """What the files of the reference should hold, by name."""
    entries = collect(COMMANDS)
    return {FILE: entries_text(entries), "reference.md": reference_text(entries)}


if __name__ == "__main__":
    for name, text in texts().items():
        (FOLDER / name).write_text(text, encoding="utf-8")
