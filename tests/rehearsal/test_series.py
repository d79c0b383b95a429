"""A series: wrong calls against the truth, plates added to the study, wells and milligrams."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from muntin.rehearsal.designs import Design, designs_for
from muntin.rehearsal.series import (
    Setup,
    best_probability,
    expected_wrong,
    play,
    with_plate,
    wrongly_called,
)
from muntin.window.assessment import Assessment, assess
from muntin.window.grid import judged_grid
from tests.rehearsal.played import conditions, small
from tests.studies import HCP, LOAD, RECOVERY, SALT, logit_of, read, spread, written


def test_wrong_calls_are_counted_against_the_truth() -> None:
    p = np.array([0.9, 0.5, 0.49, 0.2, 0.0])
    passes = np.array([True, False, True, False, False])
    # 0.5 is called a pass and fails, 0.49 is called a fail and passes.
    assert wrongly_called(p, passes) == pytest.approx(2 / 5)
    assert expected_wrong(p) == pytest.approx((0.1 + 0.5 + 0.49 + 0.2 + 0.0) / 5)


@dataclass
class Plain:
    """A truth made by hand: passes from a salt on, and reads what `logit_of` says."""

    number: int = 0
    passes_from: float = 300.0

    def draw(self) -> Plain:
        return self

    def passes(self, frame: pd.DataFrame) -> np.ndarray:
        return frame["salt"].to_numpy() >= self.passes_from

    def read(self, frame: pd.DataFrame, plate: str, rng: np.random.Generator) -> dict:
        return {"recovery": 1.0 / (1.0 + np.exp(-logit_of(frame)))}


def setup_of(view: Assessment, designs: tuple[Design, ...], best_now: float = np.nan) -> Setup:
    """What series share, on few nodes of the quadratic; the set point is judged with a best_now."""
    return Setup(
        study=view.study,
        designs=designs,
        surrogate="quadratic",
        aim="edge",
        seed=1,
        nodes=4,
        with_best=bool(np.isfinite(best_now)),
        p_now=view.judged(judged_grid(view.study.definition)[0], "mean"),
        best_now=best_now,
        starts={},
    )


def test_a_series_counts_wells_milligrams_and_wrong_calls(tmp_path: Path) -> None:
    protein = {"available_mg": 90.0, "per_well_mg": 0.5}
    study = small(tmp_path, protein=protein, plan={"bridging_wells": 2})
    view = assess(study, "quadratic")
    grid = judged_grid(study.definition)[0]
    designs, notices = designs_for(view, (4, 3), "edge", 1)
    setup = setup_of(view, designs, best_now=0.5)
    played = play(setup, Plain())
    assert notices == ()
    assert list(played.designs) == ["plate by plate", "one shot", "full factorial", "space filling"]
    own = played.designs["plate by plate"]
    # Two bridging wells on a plate, and 8 controls of which 6 hold protein.
    assert [(s.tests, s.wells, s.mg) for s in own] == [(0, 0, 0.0), (4, 14, 6.0), (7, 27, 11.5)]
    one = played.designs["one shot"]
    assert [(s.tests, s.wells, s.mg) for s in one] == [(0, 0, 0.0), (7, 17, 7.5)]
    called = view.judged(grid, "mean") >= 0.5
    wrong = np.mean(called != (grid["salt"].to_numpy() >= 300.0))
    assert 0.0 < wrong < 1.0
    assert [s[0].wrong for s in played.designs.values()] == [pytest.approx(wrong)] * 4
    assert own[0].best == 0.5
    assert all(0.0 < s.best < 1.0 for s in own)


class Heard(Plain):
    """The same, and keeps the name, wells and first chance number of every plate that it reads."""

    def __init__(self, number: int = 0) -> None:
        super().__init__(number)
        self.plates: list[pd.DataFrame] = []
        self.chances: list[tuple[str, float]] = []

    def read(self, frame: pd.DataFrame, plate: str, rng: np.random.Generator) -> dict:
        self.plates.append(frame)
        self.chances.append((plate, float(rng.random())))
        return super().read(frame, plate, rng)


@pytest.mark.parametrize(("per_well", "of_control"), [({"per_well_mg": 0.1}, 0.1), ({}, 0.8)])
def test_protein_goes_by_the_load_of_each_well(
    tmp_path: Path, per_well: dict[str, float], of_control: float
) -> None:
    protein = {"available_mg": 90.0, "load_factor": "load", "resin_ul": 20.0, **per_well}
    factors = [SALT, LOAD]
    study = written(tmp_path, [read(spread(factors, 10))], factors=factors, protein=protein)
    view = assess(study, "quadratic")
    designs, _ = designs_for(view, (4, 3), "edge", 1)
    truth = Heard()
    setup = setup_of(view, designs)
    played = play(setup, truth)
    plates = iter(truth.plates)
    for name, standings in played.designs.items():
        mg = 0.0
        for before, after in pairwise(standings):
            loads = next(plates)["load"].to_numpy(dtype=float)
            assert len(loads) + 8 == after.wells - before.wells, name
            # 20 µL of resin a well; six of the eight controls hold protein.
            mg += 0.02 * loads.sum() + 6 * of_control
            assert after.mg == pytest.approx(mg), name
    assert next(plates, None) is None


def test_plates_of_one_number_have_the_same_chances_whatever_the_design(tmp_path: Path) -> None:
    view = assess(small(tmp_path), "quadratic")
    designs, _ = designs_for(view, (3, 2), "edge", 1)
    first, other = Heard(), Heard(1)
    for truth in (first, other):
        play(setup_of(view, designs), truth)
    # Two plates of two designs, and one plate of the two others.
    assert [name for name, _ in first.chances].count("plate-02") == 4
    assert [name for name, _ in first.chances].count("plate-03") == 2
    assert len(set(first.chances)) == 2
    assert len({chance for _, chance in [*first.chances, *other.chances]}) == 4


def test_only_the_next_plate_has_wells_that_are_taken(tmp_path: Path) -> None:
    study = small(tmp_path, plan={"free_wells": "A1:A12"})
    view = assess(study, "quadratic")
    designs, _ = designs_for(view, (3, 2), "edge", 1)
    own = play(setup_of(view, designs), Plain()).designs["plate by plate"]
    # Three, then eight controls beside four bridging wells.
    assert [standing.wells for standing in own] == [0, 3 + 4 + 3, 10 + 2 + 4 + 8]


def test_more_plates_bring_the_calls_nearer_to_the_truth(tmp_path: Path) -> None:
    study = small(tmp_path, wells=4)
    view = assess(study, "quadratic")
    truth = Plain()
    truth.passes = lambda frame: logit_of(frame) >= np.log(4.0)  # type: ignore[method-assign]
    designs, _ = designs_for(view, (12,), "edge", 1)
    setup = setup_of(view, designs)
    for name, standings in play(setup, truth).designs.items():
        assert standings[-1].wrong < standings[0].wrong, name
        assert standings[-1].expected < standings[0].expected, name
        assert np.isnan(standings[-1].best)


def test_a_plate_added_is_read_as_if_it_had_been_run(tmp_path: Path) -> None:
    study = small(tmp_path, responses=[RECOVERY, HCP])
    wells = conditions((5.0, 100), (6.5, 350)).assign(role=["bridge", "test"])
    more = with_plate(study, "plate-02", wells, {"recovery": np.array([0.2, 0.9])})
    readings = more.readings("recovery")
    assert len(readings) == len(study.readings("recovery")) + 2
    last = readings.tail(2)
    assert last[["plate", "role", "ph", "salt", "y", "censored"]].to_numpy().tolist() == [
        ["plate-02", "bridge", 5.0, 100.0, 0.2, 0],
        ["plate-02", "test", 6.5, 350.0, 0.9, 0],
    ]
    assert len(more.readings("hcp")) == 0
    assert more.counts().awaited == {"recovery": 0, "hcp": 12}
    assert [plate.name for plate in more.plates] == ["plate-01", "plate-02"]


def test_a_first_plate_may_be_added_to_a_study_without_any(tmp_path: Path) -> None:
    study = small(tmp_path, wells=0)
    wells = conditions((5.0, 100)).assign(role="test")
    more = with_plate(study, "plate-01", wells, {"recovery": np.array([0.2])})
    assert more.readings("recovery")["y"].tolist() == [0.2]
    assert set(study.wells.columns) <= set(more.wells.columns)


def test_a_lot_that_plates_name_is_new_with_a_plate(tmp_path: Path) -> None:
    shared = [{"by": ["feed"], "acts": "scale"}]
    plate = small(tmp_path / "plain").wells[["ph", "salt", "recovery"]].assign(feed="F-1")
    study = written(tmp_path / "lots", [plate], shared_errors=shared)
    more = with_plate(
        study,
        "plate-02",
        conditions((5.0, 100)).assign(role="test"),
        {"recovery": np.array([0.2])},
    )
    assert more.readings("recovery")["feed"].unique().tolist() == ["F-1", "plate-02"]


def test_the_best_probability_is_that_of_the_window(tmp_path: Path) -> None:
    view = assess(small(tmp_path), "quadratic")
    assert best_probability(view) == pytest.approx(view.window().grid["probability"].max())
