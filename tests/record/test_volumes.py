"""Volumes: no step is lost, and sums are exact."""

from __future__ import annotations

from decimal import Decimal

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from muntin.record.bench import Bench
from muntin.record.volumes import Pipette, apportioned, pipette_of, volume_text

STEADY = settings(deadline=None, derandomize=True)
weights = st.lists(st.floats(0.0, 1.0), min_size=1, max_size=6).filter(lambda w: sum(w) > 0.01)


@given(weights, st.integers(0, 5000))
@STEADY
def test_steps_are_shared_out_to_the_last(parts: list[float], steps: int) -> None:
    shares = [part / sum(parts) for part in parts]
    out = apportioned(shares, steps)
    assert sum(out) == steps
    for share, part in zip(shares, out, strict=True):
        assert abs(part - share * steps) < 1.0 + 1e-6
        assert part >= 0
    assert all(part == 0 for share, part in zip(shares, out, strict=True) if share * steps == 0)


def test_the_largest_remainder_is_rounded_up() -> None:
    # 2.6, 3.7 and 3.7 steps: two are left over for the remainders of 0.7.
    assert apportioned([0.26, 0.37, 0.37], 10) == [2, 4, 4]
    assert apportioned([0.5, 0.3, 0.2], 10) == [5, 3, 2]
    assert apportioned([0.18, 0.82], 10) == [2, 8]


@given(st.sampled_from(["0.1", "0.2", "0.5", "1.0"]), st.lists(st.integers(0, 9999), max_size=40))
@STEADY
def test_sums_are_exact(step: str, steps: list[int]) -> None:
    pipette = Pipette(Decimal(step), 1)
    total = sum((pipette.ul(n) for n in steps), Decimal(0))
    assert total == pipette.ul(sum(steps)) == Decimal(step) * sum(steps)


@given(st.floats(0.0, 2000.0), st.sampled_from([0.1, 0.5, 1.0]))
@STEADY
def test_the_nearest_step_is_the_nearest(volume: float, step: float) -> None:
    pipette = pipette_of(Bench(pipette_step_ul=step))
    near = pipette.nearest(volume)
    assert abs(near * step - volume) <= step / 2 + 1e-9


@pytest.mark.parametrize(
    ("bench", "step", "floor"),
    [
        (Bench(), "0.1", 1),
        (Bench(pipette_step_ul=0.5), "0.5", 1),
        (Bench(pipette_step_ul=0.5, pipette_floor_ul=5), "0.5", 10),
        (Bench(pipette_floor_ul=2), "0.1", 20),
    ],
)
def test_a_pipette_by_what_is_known_of_it(bench: Bench, step: str, floor: int) -> None:
    assert pipette_of(bench) == Pipette(Decimal(step), floor)


@pytest.mark.parametrize(
    ("volume", "text"),
    [("200.0", "200"), ("1E+3", "1000"), ("12.50", "12.5"), ("0.0", "0"), ("0.3", "0.3")],
)
def test_volumes_have_no_needless_digits(volume: str, text: str) -> None:
    assert volume_text(Decimal(volume)) == text
