"""The verdict of a rehearsal: one plain sentence for each way it may come out."""

from __future__ import annotations

from types import SimpleNamespace
from typing import Any

import pandas as pd
import pytest

from muntin.record.definition import StopRule
from muntin.rehearsal.played import Series
from muntin.rehearsal.summary import after_plates, against, table_of, to_stop
from muntin.report.rehearse_verdict import verdict
from tests.rehearsal.played import standing

OWN = "plate by plate"
RULE = StopRule(wrong_share=0.05)


def told(*every: dict[str, list[tuple[int, float, float]]]) -> Any:
    """A rehearsal of series, each {design: [(tests, expected, wrong), ...]}, half a mg a well."""
    played = [
        Series(
            number,
            {
                name: tuple(standing(n, e, w, mg=0.5 * n) for n, e, w in standings)
                for name, standings in one.items()
            },
        )
        for number, one in enumerate(every)
    ]
    table = table_of(played)
    return SimpleNamespace(
        to_stop=to_stop(table, RULE), after=after_plates(table), against=against(table, OWN)
    )


def own(*ends: tuple[float, float], wrong: tuple[float, float, float] = (0.2, 0.1, 0.04)) -> Any:
    """Series of two plates of 12 with these expected shares after the first and the second."""
    return told(
        *(
            {OWN: [(n, e, w) for n, e, w in zip((0, 12, 24), (0.2, *end), wrong, strict=True)]}
            for end in ends
        )
    )


SOON, LATE, NEVER = (0.04, 0.03), (0.1, 0.04), (0.1, 0.09)


@pytest.mark.parametrize(
    ("ends", "line"),
    [
        (
            [SOON] * 10,
            "Go on with fewer: 10 of 10 series reach the stop rule, nine in ten within 12 test "
            "wells (1 plate, 6 mg).",
        ),
        (
            [SOON] * 6 + [LATE] * 3 + [NEVER],
            "Go on: 9 of 10 series reach the stop rule, half within 12 test wells (1 plate, 6 mg), "
            "nine in ten within 24 test wells (2 plates, 12 mg).",
        ),
        (
            [SOON] * 1 + [LATE] * 5 + [NEVER] * 4,
            "Go on, but do not count on stopping then: 6 of 10 series reach the stop rule with 24 "
            "test wells, half within 24 test wells (2 plates, 12 mg); what is called wrongly goes "
            "from 20.0 % to 4.0 %.",
        ),
        (
            [LATE] * 2 + [NEVER] * 8,
            "These plates are too few to stop after: 2 of 10 series reach the stop rule with 24 "
            "test wells; what is called wrongly goes from 20.0 % to 4.0 %.",
        ),
    ],
)
def test_sentences(ends: list[tuple[float, float]], line: str) -> None:
    assert verdict(own(*ends)) == (line,)


def test_plates_that_tell_hardly_more_say_stop() -> None:
    assert verdict(own(NEVER, NEVER, wrong=(0.2, 0.2, 0.19))) == (
        "Stop, or ask otherwise: 0 of 2 series reach the stop rule with 24 test wells, and what is "
        "called wrongly goes from 20.0 % to 19.0 %.",
    )


def test_a_rule_that_holds_already_says_stop() -> None:
    assert verdict(told({OWN: [(0, 0.05, 0.04), (12, 0.02, 0.01)]})) == (
        "Stop: the stop rule is met already; no plate is needed.",
    )


def test_rivals_are_told_apart_only_where_the_difference_is_clear() -> None:
    def one(jitter: float) -> dict[str, list[tuple[int, float, float]]]:
        ends = {"one shot": 0.05 + jitter, "full factorial": 0.09 + jitter, "space filling": 0.02}
        last = {name: [(0, 0.2, 0.2), (24, 0.04, wrong)] for name, wrong in ends.items()}
        return {OWN: [(0, 0.2, 0.2), (24, 0.04, 0.05)], **last}

    lines = verdict(told(one(-0.01), one(0.01), one(0.003)))
    assert lines[1] == (
        "With as many test wells: more is called wrongly by full factorial (4.1 points); "
        "less by space filling (3.0 points); no clear difference to one shot."
    )


def test_a_difference_of_few_series_must_exceed_what_students_t_allows() -> None:
    def one(away: float) -> dict[str, list[tuple[int, float, float]]]:
        ends = {OWN: 0.05, "x": 0.05 + away}
        return {name: [(0, 0.2, 0.2), (9, 0.1, wrong)] for name, wrong in ends.items()}

    def said(*every: float) -> str:
        return verdict(told(*map(one, every)))[1]

    # Means of 3.52 and 4.46 standard errors; Student's t with two degrees of freedom allows 4.303.
    assert said(0.010, 0.019, 0.029).endswith("no clear difference to x.")
    assert said(0.012, 0.019, 0.027).endswith("more is called wrongly by x (1.9 points).")


def test_one_series_tells_no_difference() -> None:
    lines = verdict(
        told({OWN: [(0, 0.2, 0.2), (9, 0.1, 0.1)], "x": [(0, 0.2, 0.2), (9, 0.1, 0.3)]})
    )
    assert lines[1] == "With as many test wells: no clear difference to x."


def test_the_table_of_a_hand_made_series_has_a_row_a_standing() -> None:
    table = table_of([Series(0, {OWN: (standing(0, 0.2, 0.1),)})])
    assert isinstance(table, pd.DataFrame)
    assert table.to_dict("records")[0]["wrong"] == 0.1
