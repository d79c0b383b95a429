"""Which plan is meant."""

from __future__ import annotations

from pathlib import Path

import pytest

from muntin.record import StudyFaults
from muntin.record.plan_choice import chosen_plan


def plans(folder: Path, *names: str) -> Path:
    for name in names:
        path = folder / "plans" / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text("well\n")
    return folder


def told(folder: Path, name: str | Path | None = None) -> str:
    with pytest.raises(StudyFaults) as raised:
        chosen_plan(folder, "plate-03", name)
    return str(raised.value)


def test_the_last_revision_of_the_next_plate(tmp_path: Path) -> None:
    names = ["plate-02.r9.csv", "plate-03.csv", "plate-03.r2.csv", "plate-03.r10.xlsx"]
    folder = plans(tmp_path, *names, "offered/plate-03.r11.csv", "plate-04.csv")
    assert chosen_plan(folder, "plate-03").name == "plate-03.r10.xlsx"
    assert chosen_plan(plans(tmp_path / "b", "plate-03.csv"), "plate-03").name == "plate-03.csv"


@pytest.mark.parametrize("name", ["plate-03", "plate-03.csv", "plans/plate-03.csv", "plate-03.r2"])
def test_a_plan_by_name(tmp_path: Path, name: str) -> None:
    folder = plans(tmp_path, "plate-03.csv", "plate-03.r2.csv")
    stem = Path(name).name.removesuffix(".csv")
    assert chosen_plan(folder, "plate-03", name) == tmp_path / "plans" / f"{stem}.csv"


def test_a_file_from_anywhere(tmp_path: Path) -> None:
    path = tmp_path / "mine.csv"
    path.write_text("well\n")
    assert chosen_plan(plans(tmp_path, "plate-03.csv"), "plate-03", path) == path


def test_no_plan(tmp_path: Path) -> None:
    said = "plans: holds no plan of plate-03 ({}muntin propose writes one)"
    assert told(tmp_path) == said.format("")
    assert told(plans(tmp_path, "plate-02.csv")) == said.format("it holds plate-02.csv; ")


def test_no_such_plan(tmp_path: Path) -> None:
    assert told(tmp_path, "plate-3") == (
        "plate-3: there is no such plan (muntin propose writes one)"
    )
    folder = plans(tmp_path, "plate-03.csv")
    assert told(folder, "plate-3") == 'plate-3: there is no such plan (did you mean "plate-03"?)'


def test_two_files_of_one_name(tmp_path: Path) -> None:
    folder = plans(tmp_path, "plate-03.csv", "plate-03.xlsx")
    assert told(folder) == (
        "plans/plate-03: plate-03.csv and plate-03.xlsx are both there; keep one of them"
    )
