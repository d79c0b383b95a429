"""Faults: one line each, nearest names."""

from __future__ import annotations

import pytest

from muntin.record import Fault, StudyFaults
from muntin.record.faults import did_you_mean, listed, nearest, number, quoted


def test_a_fault_is_one_line():
    fault = Fault(
        file="plates/plate-01.csv",
        where="row 14, well C4",
        column="salt",
        value="5000",
        problem="lies outside",
        allowed="0 to 900 mM",
        hint="study.toml, factors, salt",
    )
    assert fault.text == (
        "plates/plate-01.csv, row 14, well C4, column salt: 5000 lies outside 0 to 900 mM "
        "(study.toml, factors, salt)"
    )


def test_line_breaks_in_what_the_user_wrote_do_not_break_the_line():
    fault = Fault(file="a\nb", value="c\r\td\u2028e", problem="is wrong")
    assert fault.text == "a b: c  d e is wrong"


def test_faults_without_a_column_are_all_shown():
    faults = [Fault(file=f"{i}.csv", problem="is empty") for i in range(9)]
    assert StudyFaults(faults).lines() == [f"{i}.csv: is empty" for i in range(9)]


def test_nearest_names():
    assert nearest("Slat", ["salt", "ph"]) == "salt"
    assert nearest("conductivity", ["salt", "ph"]) is None
    assert did_you_mean("stp", ["step", "scale"]) == 'did you mean "step"?'
    assert did_you_mean("zzz", ["step", "scale"]) == "known: step, scale"


@pytest.mark.parametrize(
    ("value", "shown"),
    [("a", '"a"'), (True, "true"), (3, "3"), (0.1 + 0.2, "0.3"), ("x" * 61, f'"{"x" * 57}..."')],
)
def test_values_are_shown_as_they_stand(value, shown):
    assert quoted(value) == shown


def test_lists_and_numbers_are_short():
    assert listed("abcdefghij") == "a, b, c, d, e, f, g, h and 2 more"
    assert listed("ab") == "a, b"
    assert (number(855.0), number(1e-6), number(0.30000000000000004)) == ("855", "1e-06", "0.3")
