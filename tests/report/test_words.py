"""Numbers and conditions in words."""

from __future__ import annotations

import json

import pytest

from muntin.record.definition import Definition
from muntin.report.words import (
    amount_text,
    axis_label,
    beside,
    chance_text,
    condition_text,
    joined,
    range_ends_text,
    ranges_text,
    reach_text,
    share_text,
    success_text,
)


def definition(judged_by: str = "kept") -> Definition:
    ph = {"name": "ph", "label": "pH", "low": 4.5, "high": 7.5, "step": 0.1, "kept_within": 0.1}
    salt = {"name": "salt", "unit": "mM", "low": 50, "high": 500, "step": 10, "kept_within": "5 %"}
    resin = {"name": "resin", "choices": ["A", "B"]}
    y = {"name": "recovery", "kind": "fraction", "at_least": 0.8}
    study = {"title": "x", "judged_by": judged_by}
    factors, responses = [ph, salt, resin], [y]
    given = {"study": study, "factors": factors, "responses": responses}
    return Definition.model_validate_json(json.dumps(given))


def test_condition_with_and_without_tolerances() -> None:
    condition = {"ph": 6.0, "salt": 250.0, "resin": "B"}
    assert condition_text(definition(), condition) == "pH 6.0, salt 250 mM and resin B"
    kept = "pH 6.0 ± 0.1, salt 250 ± 12 mM and resin B"
    assert condition_text(definition(), condition, kept=True) == kept


def test_a_choice_that_begins_with_the_label_is_not_doubled() -> None:
    factors = [{"name": "resin", "label": "Resin", "choices": ["Resin A", "resin b", "Resinol"]}]
    study = {"title": "x"}
    given = {"study": study, "factors": factors, "responses": []}
    made = Definition.model_validate_json(json.dumps(given))
    said = [condition_text(made, {"resin": choice}) for choice in factors[0]["choices"]]
    assert said == ["Resin A", "resin b", "Resin Resinol"]
    assert ranges_text(made, {"resin": ("Resin A", "Resin A")}) == "Resin A"


def test_ranges_name_a_single_level_once() -> None:
    ranges = {"ph": (5.0, 5.8), "salt": (100.0, 100.0), "resin": ("A", "A")}
    assert ranges_text(definition(), ranges) == "pH 5.0 to 5.8, salt 100 mM and resin A"


@pytest.mark.parametrize(
    ("ph", "salt", "text"),
    [
        (6.0, 250.0, ""),
        (7.4, 490.0, ""),
        (7.5, 250.0, "the range ends at pH 7.5: no data lie beyond"),
        (4.5, 250.0, "the range ends at pH 4.5: no data lie beyond"),
        (6.0, 496.0, "the range ends at salt 500 mM: no data lie beyond"),
        (7.5, 50.0, "the ranges end at pH 7.5 and salt 50 mM: no data lie beyond"),
    ],
)
def test_a_condition_at_the_end_of_a_range_is_told_to_be_there(
    ph: float, salt: float, text: str
) -> None:
    condition = {"ph": ph, "salt": salt, "resin": "B"}
    assert range_ends_text(definition(), condition) == text


@pytest.mark.parametrize(
    ("share", "limit", "text"),
    [
        (0.025, 0.025, "2.5 %"),
        (0.0249, 0.025, "2.49 %"),
        (0.02502, 0.025, "2.502 %"),
        (0.03, 0.025, "3.0 %"),
        (0.0003, 0.025, "under 0.1 %"),
    ],
)
def test_a_share_is_told_from_its_limit(share, limit, text) -> None:
    assert beside(share, limit) == text


@pytest.mark.parametrize(
    ("share", "text"),
    [
        (0.0, "0.0 %"),
        (0.0004, "under 0.1 %"),
        (0.0006, "0.1 %"),
        (0.322, "32.2 %"),
        (0.9994, "99.9 %"),
        (0.9996, "over 99.9 %"),
        (1.0, "100.0 %"),
    ],
)
def test_shares_are_never_rounded_to_a_certainty(share: float, text: str) -> None:
    assert share_text(share) == text


def test_probabilities_keep_the_digits_they_were_given() -> None:
    assert [chance_text(p) for p in (0.9, 0.95, 0.999)] == ["0.90", "0.95", "0.999"]


def test_what_the_judged_probability_means() -> None:
    assert success_text(definition(), 0.93) == "93.0 % of new wells pass"
    assert success_text(definition("mean"), 0.93) == "93.0 % probable that the process mean passes"


def test_reach() -> None:
    reached = "of the range reaches a probability of 0.90"
    assert reach_text(definition(), 0.322) == f"32.2 % {reached}"
    assert reach_text(definition(), 0.0) == f"nothing {reached}"


def test_small_words() -> None:
    assert [joined(t) for t in ([], ["a"], ["a", "b"], ["a", "b", "c"])] == [
        *("", "a", "a and b", "a, b and c")
    ]
    assert (axis_label("Salt", "mM"), axis_label("pH", "")) == ("Salt (mM)", "pH")
    assert (amount_text(8.5), amount_text(0.1234)) == ("8.5 mg", "0.123 mg")
