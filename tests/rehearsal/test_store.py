"""Kept series: written whole, told apart by what they depend on, played again where spoilt."""

from __future__ import annotations

import json
import math
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pytest

from muntin.record.faults import StudyFaults
from muntin.rehearsal.played import Series
from muntin.rehearsal.store import Store, key_of
from tests.rehearsal.played import series, small, standing

ONE = Series(2, {"plate by plate": (standing(0, 0.3, 0.25), standing(7, 0.1, 1 / 3, mg=2.5))})
NAMES = ("plate by plate",)


def test_a_series_comes_back_to_the_last_bit(tmp_path: Path) -> None:
    store = Store(tmp_path / "new" / "folder")
    store.write(ONE)
    (again,), spoilt = store.take_up(3, NAMES)
    assert spoilt == []
    assert again.number == 2
    first, last = again.designs["plate by plate"]
    assert math.isnan(first.mg)
    assert last.wrong == 1 / 3
    assert (last.tests, last.wells, last.mg, last.expected) == (7, 70, 2.5, 0.1)


def test_only_the_series_asked_for_are_taken_up(tmp_path: Path) -> None:
    store = Store(tmp_path)
    for number in range(4):
        store.write(series(number, {"plate by plate": [(0, 0.3, 0.2)]}))
    assert [one.number for one in store.take_up(3, NAMES)[0]] == [0, 1, 2]


def cut(text: str) -> str:
    return text[: len(text) // 2]


def bent(text: str) -> str:
    return text.replace("0.25", "0.26")


def swapped(text: str) -> str:
    return text.replace('"number": 2', '"number": 1')


@pytest.mark.parametrize(
    "damage", [cut, bent, swapped, lambda _: "", lambda _: "[]", lambda _: '{"sha256": 3}']
)
def test_spoilt_files_are_named_and_not_taken_up(
    tmp_path: Path, damage: Callable[[str], str]
) -> None:
    store = Store(tmp_path / "key")
    store.write(ONE)
    path = store.path(2)
    whole = path.read_text()
    path.write_text(damage(whole))
    assert path.read_text() != whole
    assert store.take_up(3, NAMES) == ([], ["key/series-0003.json"])


def test_bytes_that_are_no_text_are_spoilt(tmp_path: Path) -> None:
    store = Store(tmp_path)
    store.write(ONE)
    store.path(2).write_bytes(b"\xff\x00\xfe")
    assert store.take_up(3, NAMES)[0] == []


@pytest.mark.parametrize("shares", [(1.3, 0.25), (0.3, 1.25), (0.3, -0.1), (math.nan, 0.25)])
def test_a_file_with_a_share_that_cannot_be_is_spoilt(
    tmp_path: Path, shares: tuple[float, float]
) -> None:
    store = Store(tmp_path)
    store.write(Series(2, {"plate by plate": (standing(0, *shares),)}))
    assert store.take_up(3, NAMES)[0] == []


def test_series_of_other_designs_are_not_taken_up(tmp_path: Path) -> None:
    store = Store(tmp_path)
    store.write(ONE)
    assert store.take_up(3, ("plate by plate", "one shot"))[0] == []


def test_a_series_under_another_number_is_spoilt(tmp_path: Path) -> None:
    store = Store(tmp_path)
    store.write(ONE)
    store.path(2).rename(store.path(0))
    assert store.take_up(3, NAMES) == ([], [f"{tmp_path.name}/series-0001.json"])


def test_a_folder_that_cannot_be_written_is_a_fault(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    with pytest.raises(StudyFaults, match="cannot be written"):
        Store(tmp_path / "file").write(ONE)


def test_the_key_tells_contents_and_settings_apart_but_not_the_stop_rule(tmp_path: Path) -> None:
    settings = {"seed": 1}
    study = small(tmp_path / "a")
    key = key_of(study, settings)
    assert key == key_of(small(tmp_path / "b"), settings)
    assert key == key_of(small(tmp_path / "c", stop={"wrong_share": 0.05}), settings)
    columns = {"bed_ml": 1.0, "load_mg_per_ml": 5.0}
    assert key == key_of(small(tmp_path / "f", columns=columns), settings)
    wells = study.wells.copy()
    wells.loc[3, "recovery"] += 1e-9
    others = [
        key_of(study, {"seed": 2}),
        key_of(replace(study, wells=wells), settings),
        key_of(small(tmp_path / "d", study={"required_probability": 0.8}), settings),
        key_of(small(tmp_path / "e", wells=11), settings),
    ]
    assert len({key, *others}) == 5


def test_files_are_plain_json(tmp_path: Path) -> None:
    store = Store(tmp_path)
    store.write(ONE)
    whole = json.loads(store.path(2).read_text(), parse_constant=pytest.fail)
    assert whole["series"]["designs"]["plate by plate"][0] == [0, 0, None, 0.3, 0.25, None]
