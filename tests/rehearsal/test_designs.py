"""The designs of a rehearsal: muntin's own plates and the rivals that can be run."""

from __future__ import annotations

from pathlib import Path

import pytest

from muntin.design.selection import select
from muntin.design.weighing import NoConditionLeftError
from muntin.record.faults import StudyFaults
from muntin.rehearsal import designs
from muntin.rehearsal.designs import check_sizes, controls, designs_for, room, wells_of
from muntin.window.assessment import assess
from tests.rehearsal.played import small
from tests.studies import PH, RESIN, SALT, read, spread, written


def test_rivals_have_as_many_test_wells_and_the_same_bridging_wells(tmp_path: Path) -> None:
    view = assess(small(tmp_path), "quadratic")
    found, notices = designs_for(view, (5, 3), "edge", 1)
    assert notices == ()
    assert [(d.name, d.sizes) for d in found] == [
        ("plate by plate", (5, 3)),
        ("one shot", (8,)),
        ("full factorial", (8,)),
        ("space filling", (5, 3)),
    ]
    for design in found:
        roles = design.first["role"].tolist()
        assert roles == ["bridge"] * 4 + ["test"] * design.sizes[0], design.name


def test_the_first_plate_is_the_one_that_propose_chooses(tmp_path: Path) -> None:
    view = assess(small(tmp_path), "quadratic")
    own = designs_for(view, (5,), "edge", 1)[0][0]
    selection = select(view, 5, "edge", 1)
    expected = selection.candidates.iloc[[p.candidate for p in selection.picks]]
    assert own.first[["ph", "salt"]].to_numpy().tolist() == expected.to_numpy().tolist()


def test_a_later_plate_looks_at_the_readings_and_bridges(tmp_path: Path) -> None:
    fresh = assess(small(tmp_path / "fresh", wells=0), "quadratic")
    own, _, _, filling = designs_for(fresh, (5, 3), "edge", 1)[0]
    assert own.first["role"].tolist() == filling.first["role"].tolist() == ["test"] * 5
    view = assess(small(tmp_path / "read"), "quadratic")
    for design in (own, filling):
        assert design.plate(view, 1, "edge", 1)["role"].tolist() == ["bridge"] * 4 + ["test"] * 3


def test_one_plate_is_its_own_one_shot(tmp_path: Path) -> None:
    found, _ = designs_for(assess(small(tmp_path), "quadratic"), (6,), "edge", 1)
    assert [d.name for d in found] == ["plate by plate", "full factorial", "space filling"]


def test_rivals_that_fit_no_plate_are_left_out_and_said(tmp_path: Path) -> None:
    study = small(tmp_path, plan={"free_wells": "A1:A12"})
    assert controls(study) == ("blank", "load", "load")
    assert room(study, 4) == 5
    found, notices = designs_for(assess(study, "quadratic"), (3, 3), "edge", 1)
    assert [d.name for d in found] == ["plate by plate", "space filling"]
    assert notices == ("no one shot and full factorial: 6 test wells do not fit one plate",)


def test_wells_that_are_taken_are_taken_on_the_next_plate_only(tmp_path: Path) -> None:
    study = small(tmp_path, wells=0, plan={"free_wells": "A1:A12"})
    assert controls(study, 1) == ("blank",) * 2 + ("load",) * 4 + ("no_resin",) * 2
    assert room(study, 4, 1) == 84
    check_sizes(study, (9, 84), fresh=True)
    with pytest.raises(StudyFaults) as faults:
        check_sizes(study, (10, 85), fresh=True)
    assert faults.value.lines() == [
        "plates, plate 1: 10 test wells are more than a plate has room for; ask for 9 "
        "(0 bridging wells and 3 controls come on top)",
        "plates, plate 2: 85 test wells are more than a plate has room for; ask for 84 "
        "(4 bridging wells and 8 controls come on top)",
    ]


def test_a_plate_without_conditions_left_is_a_fault(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def none_left(*_given: object) -> None:
        raise NoConditionLeftError

    view = assess(small(tmp_path), "quadratic")
    monkeypatch.setattr(designs, "select", none_left)
    with pytest.raises(StudyFaults) as faults:
        designs_for(view, (3,), "edge", 1)
    assert faults.value.lines() == [
        "plates: no condition is left that may be chosen for 3 test wells"
    ]


def test_a_factorial_too_large_is_left_out_and_said(tmp_path: Path) -> None:
    factors = [SALT, RESIN]
    study = written(tmp_path, [read(spread(factors, 12))], factors=factors)
    found, notices = designs_for(assess(study, "quadratic"), (4,), "edge", 1)
    assert [d.name for d in found] == ["plate by plate", "space filling"]
    assert notices == ("no full factorial: no full factorial has 4 wells or fewer",)


def test_spread_plates_do_not_look_at_the_readings(tmp_path: Path) -> None:
    first, second = (
        assess(written(tmp_path / name, [read(spread([PH, SALT], 10), seed)]), "quadratic")
        for name, seed in (("a", 1), ("b", 2))
    )
    chosen = [wells_of("full factorial", view, 6, "edge", 1) for view in (first, second)]
    tests = [plate[plate["role"] == "test"].to_numpy().tolist() for plate in chosen]
    assert tests[0] == tests[1]
    with pytest.raises(ValueError, match="no full factorial has 1 wells or fewer"):
        wells_of("full factorial", first, 1, "edge", 1)
