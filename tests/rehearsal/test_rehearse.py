"""Whole rehearsals of small studies: the same answer however they are run."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest

from muntin.record import Study
from muntin.record.faults import StudyFaults
from muntin.record.study import keep_stop_rule
from muntin.rehearsal.rehearse import origin_of
from tests.rehearsal.played import REAL, plain, quick, same, small
from tests.studies import HCP, RESIN, SALT, TIME, read, spread, written


@pytest.fixture(scope="module")
def study(tmp_path_factory: pytest.TempPathFactory) -> Study:
    return plain(tmp_path_factory.mktemp("study"))


def test_same_seed_same_numbers_and_another_seed_others(study: Study) -> None:
    first, again, other = quick(study), quick(study), quick(study, seed=2)
    same(first.table, again.table)
    assert (first.table["wrong"] != other.table["wrong"]).any()


def test_workers_change_nothing(study: Study) -> None:
    same(quick(study).table, quick(study, workers=2).table)


def test_every_series_has_every_plate_of_every_design(study: Study) -> None:
    told = quick(study)
    plates = told.table.groupby(["series", "design"])["plate"].apply(list).unstack("design")
    assert plates.index.tolist() == [1, 2, 3]
    assert (plates["plate by plate"].map(tuple) == (0, 1, 2)).all()
    assert (plates["space filling"].map(tuple) == (0, 1, 2)).all()
    assert (plates["one shot"].map(tuple) == (0, 1)).all()
    assert (plates["full factorial"].map(tuple) == (0, 1)).all()
    tests = told.table.groupby("design")["tests"].max()
    assert set(tests) == {5}


def test_an_interrupt_keeps_what_is_done_and_the_next_start_takes_it_up(
    study: Study, tmp_path: Path
) -> None:
    def stop(done: int, _of: int) -> None:
        if done == 2:
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        quick(study, store=tmp_path, heard=stop)
    assert len([*tmp_path.rglob("series-*.json")]) == 2
    counts: list[tuple[int, int]] = []
    told = quick(study, store=tmp_path, heard=lambda *count: counts.append(count))
    assert counts == [(2, 3), (3, 3)]
    assert told.taken_up == 2
    same(told.table, quick(study).table)


def test_a_spoilt_file_is_told_and_played_again(study: Study, tmp_path: Path) -> None:
    whole = quick(study, store=tmp_path)
    path = next(tmp_path.rglob("series-0002.json"))
    before = path.read_text()
    path.write_text(before[:-20])
    told = quick(study, store=tmp_path)
    assert told.taken_up == 2
    assert told.notices == (f"{path.parent.name}/series-0002.json was spoilt and is played again",)
    same(told.table, whole.table)
    assert path.read_text() == before


def test_more_series_go_on_from_those_played(study: Study, tmp_path: Path) -> None:
    first = quick(study, series=2, store=tmp_path)
    told = quick(study, series=3, store=tmp_path)
    assert (first.taken_up, told.taken_up) == (0, 2)
    same(told.table[told.table["series"] < 3].reset_index(drop=True), first.table)


def test_another_setting_has_series_of_its_own(study: Study, tmp_path: Path) -> None:
    quick(study, series=1, store=tmp_path)
    assert quick(study, series=1, plates=(3, 3), store=tmp_path).taken_up == 0
    assert len([*tmp_path.iterdir()]) == 2


def test_nothing_is_written_without_a_store(tmp_path: Path) -> None:
    own = plain(tmp_path)
    quick(own, series=1)
    assert not (tmp_path / "rehearsals").exists()


def test_before_any_reading_the_virtual_lab_is_played(tmp_path: Path) -> None:
    told = quick(small(tmp_path, wells=0), (6,), series=1)
    assert told.settings.truths == "lab"
    assert told.table["wrong"].between(0.0, 1.0).all()
    assert (told.table["wrong"] > 0.0).any()
    assert told.notices == ()


def test_before_any_reading_the_prior_is_played_where_there_is_no_lab(tmp_path: Path) -> None:
    told = quick(plain(tmp_path, wells=0), (5, 2), series=2)
    assert told.settings.truths == "prior"
    now, last = (told.table[told.table["plate"] == plate]["wrong"].mean() for plate in (0, 1))
    assert last < now
    assert told.notices == ()


def test_where_truths_come_from(study: Study, tmp_path: Path) -> None:
    fresh, other = small(tmp_path / "a", wells=0), written(tmp_path / "b", factors=[TIME, SALT])
    assert origin_of(study, None) == origin_of(study, "posterior") == "posterior"
    assert origin_of(fresh, None) == origin_of(fresh, "lab") == "lab"
    assert origin_of(fresh, "prior") == origin_of(other, None) == "prior"
    with pytest.raises(StudyFaults, match="truths: lab cannot be: the study has readings"):
        origin_of(study, "lab")
    with pytest.raises(StudyFaults, match="truths: posterior cannot be: nothing has been read"):
        origin_of(fresh, "posterior")
    with pytest.raises(StudyFaults, match="truths: lab cannot be: the virtual lab knows"):
        origin_of(other, "lab")


def test_a_study_without_a_rule_is_held_against_an_example(study: Study, tmp_path: Path) -> None:
    told = quick(study, series=1)
    assert told.assumed
    assert told.stop.wrong_share == 0.02
    own = quick(plain(tmp_path, stop={"wrong_share": 0.5}), series=1)
    assert not own.assumed
    assert own.to_stop["tests_most"].tolist() == [0.0] * 4


def test_the_rule_on_record_holds_against_a_later_one_without_a_reason(tmp_path: Path) -> None:
    first = plain(tmp_path, stop={"wrong_share": 0.5})
    keep_stop_rule(first)
    told = quick(plain(tmp_path, stop={"best_probability": 0.2}), series=1)
    assert (told.stop.wrong_share, told.stop.best_probability) == (0.5, None)
    assert not told.assumed
    assert told.table["best"].isna().all()
    assert told.to_stop["tests_most"].tolist() == [0.0] * 4
    assert "THE RECORDED RULE HOLDS" in told.notices[0]


def test_the_set_point_is_judged_only_where_the_rule_asks(study: Study, tmp_path: Path) -> None:
    assert quick(study, series=1).table["best"].isna().all()
    told = quick(plain(tmp_path, stop={"best_probability": 0.2}), series=1)
    assert told.table["best"].between(0, 1).all()
    assert told.to_stop["reached"].tolist() == [1] * 4


def test_an_awaited_response_is_left_out_and_said(tmp_path: Path) -> None:
    told = quick(small(tmp_path, responses=[REAL, HCP]), series=1)
    assert told.notices == ("provisional: no reading yet of hcp, which is not rehearsed",)


def test_protein_that_does_not_suffice_is_said(tmp_path: Path) -> None:
    protein = {"available_mg": 10.0, "per_well_mg": 0.5}
    told = quick(plain(tmp_path, protein=protein), series=1)
    # Ten wells were run; two plates need 5 test, 8 bridging wells and 12 controls with protein.
    assert told.notices == (
        "a series takes up to 12.5 mg of protein; 5 mg are left beyond the reserve",
    )


@pytest.mark.parametrize(
    ("plates", "line"),
    [
        ((0,), "plates, plate 1: 0 must be 1 or more"),
        ((), "plates: none is given to rehearse"),
        (
            (12, 90),
            "plates, plate 2: 90 test wells are more than a plate has room for; ask for 84 "
            "(4 bridging wells and 8 controls come on top)",
        ),
    ],
)
def test_plates_that_cannot_be(study: Study, plates: tuple[int, ...], line: str) -> None:
    with pytest.raises(StudyFaults) as faults:
        quick(study, plates)
    assert faults.value.lines() == [line]


@pytest.mark.parametrize(
    "given", [{"aim": "middle"}, {"series": 0}, {"workers": 0}, {"nodes": 12}, {"truths": "x"}]
)
def test_words_and_numbers_that_are_none(study: Study, given: dict[str, Any]) -> None:
    with pytest.raises(ValueError):
        quick(study, **given)


def test_several_factors_and_choices_are_rehearsed(tmp_path: Path) -> None:
    factors = [SALT, RESIN]
    plate = read(spread(factors, 12))
    told = quick(written(tmp_path, [plate], factors=factors), (6,), series=1)
    assert set(told.table["design"]) == {"plate by plate", "full factorial", "space filling"}
