"""Simultaneous bands of an empirical distribution against a table computed elsewhere.

Sailynoja, Burkner & Vehtari 2022, Stat. Comput. 32:32, publish the method and no table.
"""

import csv
from pathlib import Path

import numpy as np
import pytest

from tests.benchmarks.bands import bands, counts_below, coverage

TABLE = Path(__file__).parent / "data" / "sbc_ecdf_bands.csv"
ROWS = list(csv.DictReader(TABLE.read_text().splitlines()))


def test_the_table_is_whole():
    assert len(ROWS) == 18


@pytest.mark.parametrize("row", ROWS, ids=lambda r: "-".join(list(r.values())[:3]))
def test_bands_are_those_tabulated(row):
    """Counts exactly, gamma and the coverage to the digits printed."""
    size, points = int(row["N_replicates"]), int(row["K_points"])
    found = bands(size, points, float(row["alpha"]))
    assert f"{found.gamma:.6f}" == row["gamma"]
    assert f"{found.coverage:.5f}" == row["exact_simultaneous_coverage"]
    for z, least, most in (
        ("z_low", "lo_count", "hi_count"),
        ("z_mid", "lo_count_mid", "hi_count_mid"),
    ):
        at = round(float(row[z]) * points) - 1
        assert found.z[at] == pytest.approx(float(row[z]))
        assert (found.least[at], found.most[at]) == (int(row[least]), int(row[most]))


def test_coverage_of_two_values_at_thirds():
    """At most one of two values below 1/3 and at least one below 2/3, counted by hand: with masses
    of 1/3 each the pairs (low, low) and (high, high) fail, 2 of 9.
    """
    assert coverage(2, np.array([0, 1, 2]), np.array([1, 2, 2])) == pytest.approx(7.0 / 9.0)


def test_values_from_a_narrow_or_a_shifted_law_leave_the_bands():
    u = (np.arange(200) + 0.5) / 200
    held = bands(200, 20, 0.01)
    assert held.hold(u)
    assert not held.hold(0.25 + u / 2.0)
    assert not held.hold(np.sqrt(u))
    assert not held.hold(u**2)


def test_counts_are_of_values_strictly_below():
    z = np.array([0.25, 0.5, 1.0])
    assert counts_below([0.5, 0.1, 0.25, 0.9], z).tolist() == [1, 2, 4]
