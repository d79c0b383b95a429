"""Two readings: the laws through them."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from muntin.assay.uptake_pairs import Pair, first_order_through, second_order_through

STEADY = settings(deadline=None, derandomize=True)


@STEADY
@given(k=st.floats(1e-4, 0.3), level=st.floats(0.1, 300.0), t=st.floats(1.0, 60.0))
def test_first_order_law_is_found_again(k: float, level: float, t: float) -> None:
    times = (t, 2.5 * t)
    if k * times[1] > 12.0 or k * t < 1e-3:
        return
    q = tuple(level * -np.expm1(-k * np.array(times)))
    found = first_order_through(Pair(times, (q[0], q[1])))
    assert found is not None
    assert found.equilibrium == pytest.approx(level, rel=1e-4)
    assert found.rate == pytest.approx(k, rel=1e-4)
    assert found.t95 == pytest.approx(np.log(20.0) / k, rel=1e-4)


@STEADY
@given(k=st.floats(1e-6, 1e-2), level=st.floats(1.0, 300.0), t=st.floats(1.0, 60.0))
def test_second_order_law_is_found_again(k: float, level: float, t: float) -> None:
    times = (t, 3.0 * t)
    q = tuple(k * level**2 * s / (1.0 + k * level * s) for s in times)
    if not 1.0 + 1e-4 < q[1] / q[0] < 3.0 - 1e-4:
        return
    found = second_order_through(Pair(times, (q[0], q[1])))
    assert found is not None
    assert (found.equilibrium, found.rate) == pytest.approx((level, k), rel=1e-6)
    assert k * level * found.t95 == pytest.approx(19.0, rel=1e-6)


@pytest.mark.parametrize("q", [(20.0, 20.0), (20.0, 18.0), (20.0, 40.0), (20.0, 45.0), (0.0, 5.0)])
def test_no_law_where_the_load_stays_falls_or_outruns_the_time(q: tuple[float, float]) -> None:
    pair = Pair((60.0, 120.0), q)
    assert first_order_through(pair) is None
    assert second_order_through(pair) is None
