"""The designs of a rehearsal: muntin's own plates and the rivals that can be run."""

from __future__ import annotations

from pathlib import Path

import pytest

from muntin.design.selection import select
from muntin.rehearsal.designs import controls, designs_for, room, wells_of
from muntin.window.assessment import assess
from tests.rehearsal.played import small
from tests.studies import PH, RESIN, SALT, read, spread, written


def test_rivals_have_as_many_test_wells_and_the_same_bridging_wells(tmp_path: Path) -> None:
    view = assess(small(tmp_path), "quadratic")
    designs, notices = designs_for(view, (5, 3), "edge", 1)
    assert notices == ()
    assert [(d.name, d.sizes) for d in designs] == [
        ("plate by plate", (5, 3)),
        ("one shot", (8,)),
        ("full factorial", (8,)),
        ("space filling", (5, 3)),
    ]
    for design in designs:
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
    designs, _ = designs_for(assess(small(tmp_path), "quadratic"), (6,), "edge", 1)
    assert [d.name for d in designs] == ["plate by plate", "full factorial", "space filling"]


def test_rivals_that_fit_no_plate_are_left_out_and_said(tmp_path: Path) -> None:
    study = small(tmp_path, plan={"free_wells": "A1:A12"})
    assert controls(study) == ("blank", "load", "load")
    assert room(study, 4) == 5
    designs, notices = designs_for(assess(study, "quadratic"), (3, 3), "edge", 1)
    assert [d.name for d in designs] == ["plate by plate", "space filling"]
    assert notices == ("no one shot and full factorial: 6 test wells do not fit one plate",)


def test_a_factorial_too_large_is_left_out_and_said(tmp_path: Path) -> None:
    factors = [SALT, RESIN]
    study = written(tmp_path, [read(spread(factors, 12))], factors=factors)
    designs, notices = designs_for(assess(study, "quadratic"), (4,), "edge", 1)
    assert [d.name for d in designs] == ["plate by plate", "space filling"]
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
