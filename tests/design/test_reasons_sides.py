"""A condition that stands in for a pass or a fail is named by its own side."""

import pytest

from muntin.design.selection import Pick
from tests.design.test_reasons import said


@pytest.mark.parametrize(
    ("purpose", "p", "what"),
    [
        ("fail", 0.97, "a known pass"),
        ("fail", 0.7, "a likely pass"),
        ("pass", 0.02, "a known fail"),
        ("pass", 0.3, "a likely fail"),
    ],
)
def test_a_stand_in_is_named_by_its_own_side(purpose, p, what):
    sentence = f"repeats plate-02 A1, {what}: ties plates"
    assert said([Pick(1, "bridge", purpose)], [p]) == [sentence]
