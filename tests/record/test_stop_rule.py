"""The stop rule on record: fixed before data, changed for a reason only."""

import datetime

import pytest

from muntin.record import StudyFaults, keep_stop_rule, open_study
from muntin.record.definition import StopRule
from muntin.record.stop_rule import STOP_FILE, RecordedStop, standing_rule
from tests.studies import PH, SALT, read, spread, text, written

DAY = datetime.date(2026, 5, 4)
LATER = datetime.date(2026, 6, 1)
PLATE = read(spread([PH, SALT], 6))
TWO = StopRule(wrong_share=0.02)
THREE = StopRule(wrong_share=0.03)
FIRST = RecordedStop(date=DAY, wrong_share=0.02, best_probability=None, wells_read=0, reason="")


def test_without_a_rule_there_is_nothing_to_record():
    for stop in (None, StopRule(), StopRule(changed_because="why not")):
        standing = standing_rule(stop, (), 24)
        assert (standing.rule, standing.notice, standing.unrecorded) == (None, "", False)


def test_a_first_rule_holds_and_is_to_be_recorded():
    standing = standing_rule(TWO, (), 0)
    assert (standing.rule, standing.notice, standing.unrecorded) == (TWO, "", True)


def test_a_first_rule_after_readings_is_told():
    standing = standing_rule(TWO, (), 24)
    assert (standing.rule, standing.unrecorded, standing.wells_read) == (TWO, True, 24)
    assert standing.notice == (
        "study.toml, stop: seen first after 24 wells had been read; a stop rule is fixed before "
        "data"
    )


def test_the_same_rule_needs_nothing():
    for stop in (TWO, StopRule(wrong_share=0.02, changed_because="an old reason")):
        standing = standing_rule(stop, (FIRST,), 24)
        assert (standing.rule, standing.notice, standing.unrecorded) == (TWO, "", False)


@pytest.mark.parametrize(
    ("changed", "said"),
    [
        (THREE, "wrong_share 0.03"),
        (StopRule(wrong_share=0.02, best_probability=0.9), "wrong_share 0.02 or best_pro"),
        (StopRule(best_probability=0.95), "best_probability 0.95"),
        (None, "no rule"),
    ],
)
def test_after_readings_a_change_without_a_reason_does_not_count(changed, said):
    standing = standing_rule(changed, (FIRST,), 24)
    assert (standing.rule, standing.unrecorded) == (TWO, False)
    assert standing.notice.startswith(f"study.toml, stop: {said}")
    assert "in place of wrong_share 0.02, recorded on 2026-05-04" in standing.notice
    assert "THE RECORDED RULE HOLDS" in standing.notice
    assert 'under [stop] changed_because = "why"; else' in standing.notice


@pytest.mark.parametrize("blank", ["", "  "])
def test_a_blank_reason_is_none(blank):
    stop = StopRule(wrong_share=0.03, changed_because=blank)
    assert standing_rule(stop, (FIRST,), 24).rule == TWO


def test_before_readings_a_rule_may_be_changed_at_will():
    standing = standing_rule(THREE, (FIRST,), 0)
    assert (standing.rule, standing.notice, standing.unrecorded) == (THREE, "", True)
    assert (standing.wells_read, standing.reason) == (0, "")


def test_a_change_with_a_reason_counts():
    stop = StopRule(wrong_share=0.03, changed_because="The next step takes it")
    standing = standing_rule(stop, (FIRST,), 24)
    assert standing.rule == stop
    assert (standing.unrecorded, standing.wells_read) == (True, 24)
    assert standing.reason == "The next step takes it"
    assert standing.notice == (
        "study.toml, stop: wrong_share 0.03 in place of wrong_share 0.02, recorded on 2026-05-04, "
        'because: "The next step takes it"'
    )


def test_one_reason_serves_one_change():
    second = FIRST.model_copy(update={"wrong_share": 0.03, "reason": "The next step takes it"})
    stop = StopRule(wrong_share=0.04, changed_because="The next step takes it")
    standing = standing_rule(stop, (FIRST, second), 24)
    assert standing.rule == THREE
    assert "(a new one: the reason given is that of the last change)" in standing.notice
    other = standing_rule(stop.model_copy(update={"changed_because": "Again"}), (FIRST, second), 24)
    assert other.rule is not None
    assert other.rule.wrong_share == 0.04


def test_a_rule_taken_away_with_a_reason_is_gone():
    standing = standing_rule(StopRule(changed_because="Not asked any more"), (FIRST,), 24)
    assert (standing.rule, standing.unrecorded) == (None, True)


def rules(folder):
    return [(s.date, s.wrong_share, s.wells_read, s.reason) for s in open_study(folder).stops]


def test_the_record_of_a_study(tmp_path):
    study = written(tmp_path, stop={"wrong_share": 0.02})
    assert not (tmp_path / STOP_FILE).exists()
    assert keep_stop_rule(study, DAY) == tmp_path / STOP_FILE
    assert rules(tmp_path) == [(DAY, 0.02, 0, "")]
    assert keep_stop_rule(open_study(tmp_path), LATER) is None

    moved = written(tmp_path, [PLATE], stop={"wrong_share": 0.03})
    assert moved.stopping.rule == TWO
    assert "THE RECORDED RULE HOLDS" in moved.notices[0]
    assert keep_stop_rule(moved, LATER) is None
    assert rules(tmp_path) == [(DAY, 0.02, 0, "")]

    why = {"wrong_share": 0.03, "changed_because": "The next step takes it"}
    changed = written(tmp_path, [PLATE], stop=why)
    assert changed.stopping.rule is not None
    assert changed.stopping.rule.wrong_share == 0.03
    assert keep_stop_rule(changed, LATER) is not None
    assert rules(tmp_path) == [(DAY, 0.02, 0, ""), (LATER, 0.03, 6, "The next step takes it")]
    again = open_study(tmp_path)
    assert not any("stop" in notice for notice in again.notices)
    assert again.stopping.rule == THREE


def test_an_empty_plate_leaves_the_rule_free(tmp_path):
    keep_stop_rule(written(tmp_path, stop={"wrong_share": 0.02}), DAY)
    heading = PLATE.head(0).assign(well=[])
    study = written(tmp_path, [heading], stop={"wrong_share": 0.03})
    assert study.stopping.rule == THREE


def test_a_line_that_is_no_rule_is_a_fault(tmp_path):
    keep_stop_rule(written(tmp_path, stop={"wrong_share": 0.02}), DAY)
    with (tmp_path / STOP_FILE).open("a") as stream:
        stream.write('\n{"date": "soon"}\nnothing\n')
    (tmp_path / "study.toml").write_text(text())
    with pytest.raises(StudyFaults) as caught:
        open_study(tmp_path)
    assert caught.value.lines() == [
        f"stop-rule.jsonl, line {row}: is not the record of a stop rule (muntin keeps this file; "
        "copies lie in advice/*/*/inputs/stop-rule.jsonl)"
        for row in (3, 4)
    ]
