"""A small sound study, which tests change in one place at a time."""

from __future__ import annotations

import os
from collections.abc import Callable, Mapping
from pathlib import Path

import pytest
from hypothesis import settings

STUDY = """\
[study]
title = "Small invented study"

[[factors]]
name = "ph"
low = 4.5
high = 7.5
step = 0.1
kept_within = 0.1

[[factors]]
name = "salt"
unit = "mM"
low = 0
high = 900
step = 10

[[factors]]
name = "resin"
choices = ["Alpha", "Beta"]

[[responses]]
name = "recovery"
kind = "fraction"
at_least = 0.8

[[responses]]
name = "hcp"
unit = "ng/mL"
kind = "positive"
at_most = 100
"""

PLATE = """\
well,role,ph,salt,resin,recovery,recovery_sd,hcp,exclude
A1,,5.5,100,Alpha,0.83,0.02,40,
A02,bridge,5.5,200,Beta,0.91,,<5,
B1,reference,6.0,250,Alpha,,,,
B2,test,6.5,300,Beta,0.40,,80,pipetted twice
C1,blank,,,,0.01,,,
C2,load,,,,,,,
"""

STEADY = settings(deadline=None, derandomize=True)
FILES = {"study.toml": STUDY, "plates/plate-01.csv": PLATE}
Files = Mapping[str, str | bytes]


@pytest.fixture
def make(tmp_path: Path) -> Callable[[Files], Path]:
    """Write the small study with some files replaced or added; return its folder."""

    def write(changed: Files) -> Path:
        folder = tmp_path / "study"
        for name, content in {**FILES, **changed}.items():
            path = folder / name
            path.parent.mkdir(parents=True, exist_ok=True)
            path.write_bytes(content.encode() if isinstance(content, str) else content)
        return folder

    return write


@pytest.fixture
def quick_disk(monkeypatch: pytest.MonkeyPatch) -> None:
    """Flush nothing to the disk, which is only needed where the power may go."""
    monkeypatch.setattr(os, "fsync", lambda _: None)
