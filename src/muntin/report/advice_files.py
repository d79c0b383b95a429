"""Advice on disk: one folder a revision."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from muntin.record.inputs import hashes as hashes
from muntin.record.inputs import input_paths as input_paths
from muntin.record.inputs import read_inputs as read_inputs
from muntin.record.inputs import versions as versions
from muntin.report.facts import plain
from muntin.report.plan_files import ADVICE, PLAN_COPY, plan_path


def json_text(facts: Mapping[str, Any]) -> str:
    """Return facts as a JSON document."""
    return json.dumps(plain(facts), ensure_ascii=False, indent=2, allow_nan=False) + "\n"


@dataclass(frozen=True, kw_only=True)
class Place:
    """Where an advice goes: the plan's table, the folder of the revision, a remark for the user."""

    plan: Path
    folder: Path
    remark: str

    def facts(self) -> dict[str, str]:
        """Return the place as plain values."""
        return {"plan": str(self.plan), "advice": str(self.folder), "remark": self.remark}


def find_place(folder: Path, plate: str, plan_text: str) -> Place:
    """Return where the advice on a plate goes: the next free revision, r1, r2, ..."""
    plan, remark = plan_path(folder, plate, plan_text)
    number = 1
    while (revision := folder / ADVICE / plate / f"r{number}").exists():
        number += 1
    return Place(plan=plan, folder=revision, remark=remark)


def advice_files(
    place: Place, plan_text: str, files: Mapping[str, str | bytes]
) -> dict[Path, str | bytes]:
    """Return all files of a revision by their paths: those given (by path in it), a copy of the
    plan, and the plan itself.
    """
    kept = {place.folder / name: content for name, content in files.items()}
    return {**kept, place.folder / PLAN_COPY: plan_text, place.plan: plan_text}
