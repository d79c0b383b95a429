"""The line on what gives way first."""

from __future__ import annotations

from muntin.record.definition import Definition
from muntin.report.sides_text import sides_line
from muntin.window.limiting import Side
from tests.studies import HCP, PH, RECOVERY, SALT, tables


def definition(*responses: object) -> Definition:
    factors = [PH, {**SALT, "label": "Salt"}]
    return Definition.model_validate(tables(responses=list(responses), factors=factors))


def side(factor: str, end: str, at: float, response: str | None = None, fails: str = "low") -> Side:
    if response is None:
        return Side(factor=factor, end=end, at=at)
    return Side(
        factor=factor, end=end, at=at, beyond=0.0, response=response, probability=0.847, fails=fails
    )


def test_sides_are_gathered_by_what_gives_way() -> None:
    sides = (
        side("ph", "low", 5.0, "recovery"),
        side("ph", "high", 7.5),
        side("salt", "low", 100, "recovery"),
        side("salt", "high", 300, "hcp", "high"),
    )
    assert sides_line(definition(RECOVERY, HCP), sides) == [
        "Gives way first: Recovery, too low, below pH 5.0 (0.85) and below Salt 100 mM (0.85); "
        "hcp, too high, above Salt 300 mM (0.85); the range ends at pH 7.5."
    ]


def test_ranges_as_wide_as_the_tested_ones() -> None:
    sides = (side("ph", "low", 4.5), side("ph", "high", 7.5))
    assert sides_line(definition(RECOVERY, HCP), sides) == ["The range ends at pH 4.5 and pH 7.5."]


def test_nothing_is_said_of_one_response_or_without_ranges() -> None:
    tracked = {"name": "colour", "kind": "real"}
    sides = (side("ph", "low", 5.0, "recovery"),)
    assert sides_line(definition(RECOVERY, tracked), sides) == []
    assert sides_line(definition(RECOVERY, HCP), ()) == []
