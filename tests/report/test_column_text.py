"""Figures and tables of column runs on the screen."""

from __future__ import annotations

import pytest

from muntin.report.column_text import _spread, figure


@pytest.mark.parametrize(
    ("figures", "text"),
    [
        ((0.9497, 0.8673, 1.0306), "0.95 (0.87 to 1.03)"),
        ((0.9512, 0.94, 0.965), "0.951 (0.940 to 0.965)"),
        ((728.4, 154.2, 3088.0), "728 (154 to 3088)"),
        ((1.234, 0.6, 2.7), "1.2 (0.6 to 2.7)"),
    ],
)
def test_intervals_have_the_digits_that_their_width_deserves(figures, text) -> None:
    assert _spread(*figures) == text


def test_differences_show_their_sign() -> None:
    assert _spread(0.04, -0.05, 0.13, plus=True) == "+0.04 (-0.05 to +0.13)"
    assert _spread(-0.09, -0.18, -0.001, plus=True) == "-0.09 (-0.18 to 0.00)"


@pytest.mark.parametrize(("value", "text"), [(2000.0, "2000"), (0.8612, "0.861"), (1234.6, "1230")])
def test_figures_have_no_exponent(value, text) -> None:
    assert figure(value) == text
