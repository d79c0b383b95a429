"""Recipes as lines: each number under its stock, nothing wider than the page."""

import pytest

from muntin.bench.recipe import Recipe
from muntin.report.recipe_lines import recipe_lines

LOW = Recipe(parts={"acid mix": 0.0353, "base mix": 0.0147, "water": 0.95}, remarks=("pH 5.2",))
HIGH = Recipe(parts={"acid mix": 0.05, "NaCl": 0.25, "water": 0.7})


def test_a_table_has_each_share_under_its_stock():
    lines = recipe_lines({"low salt": LOW, "high salt": HIGH}, 84)
    assert lines == [
        ["mL per litre   acid mix  base mix    NaCl   water"],
        ["[ ] low salt       35.3      14.7           950.0", "    pH 5.2."],
        ["[ ] high salt      50.0             250.0   700.0"],
    ]


@pytest.mark.parametrize("width", [30, 48])
def test_what_is_too_wide_is_told_in_sentences(width):
    lines = recipe_lines({"low salt": LOW, "high salt": HIGH}, width)
    assert all(len(line) <= width for item in lines for line in item)
    flat = [" ".join(" ".join(item).split()) for item in lines]
    assert flat == [
        "[ ] low salt, mL per litre: acid mix 35.3; base mix 14.7; water 950.0; pH 5.2.",
        "[ ] high salt, mL per litre: acid mix 50.0; NaCl 250.0; water 700.0.",
    ]


def test_no_recipes_no_lines():
    assert recipe_lines({}, 84) == []
