"""Contact time against values calculated apart from this project.

A load of 20 mg/mL at 60 min that is 1.6 times as high at 120 min is common practice without a
source; what follows from it is arithmetic: exp(-60 k) = 0.6.
"""

from __future__ import annotations

import numpy as np
import pytest

from muntin.assay.uptake import judge_uptake
from muntin.assay.uptake_laws import FirstOrder
from muntin.assay.uptake_pairs import Pair, first_order_through, second_order_through
from muntin.assay.uptake_priors import LogNormal, Priors
from muntin.assay.uptake_table import Curve

PAIR = Pair((60.0, 120.0), (20.0, 32.0))


def test_first_order_through_the_two_readings() -> None:
    found = first_order_through(PAIR)
    assert found is not None
    assert found.rate == pytest.approx(0.00851376, abs=5e-9)
    assert found.equilibrium == pytest.approx(50.0, rel=1e-9)
    assert found.t95 == pytest.approx(351.87, abs=5e-3)
    half = np.log(2.0) / found.rate
    assert half == pytest.approx(81.41, abs=0.01)
    law = FirstOrder()
    assert float(law.time(0.90, half, 0.0)) == pytest.approx(270.45, abs=0.01)
    assert float(law.time(0.99, half, 0.0)) == pytest.approx(540.91, abs=0.01)
    loads = 50.0 * law.share(np.array([60.0, 120.0, 240.0]) / half, 0.0)
    assert loads == pytest.approx([20.0, 32.0, 43.52], abs=1e-6)


@pytest.mark.parametrize(
    ("ratio", "level", "rate"),
    [(1.5, 40.0, 0.011552), (1.55, 44.4, 0.009964), (1.65, 57.1, 0.007180), (1.7, 66.7, 0.005945)],
)
def test_what_another_rise_would_mean(ratio: float, level: float, rate: float) -> None:
    found = first_order_through(Pair((60.0, 120.0), (20.0, 20.0 * ratio)))
    assert found is not None
    assert found.equilibrium == pytest.approx(level, abs=0.05)
    assert found.rate == pytest.approx(rate, abs=5e-7)


def test_second_order_through_the_two_readings() -> None:
    found = second_order_through(PAIR)
    assert found is not None
    assert found.equilibrium == pytest.approx(80.0, rel=1e-9)
    assert found.rate == pytest.approx(6.944e-05, abs=5e-9)


def test_the_posterior_closes_in_on_it_as_the_noise_falls() -> None:
    """Two readings without noise leave one first-order curve; pore diffusion cannot pass them."""
    zeros = np.zeros(2)
    curve = Curve(
        name="pair",
        file="pair.csv",
        times=np.array(PAIR.t),
        loads=np.array(PAIR.q),
        sds=zeros,
        sides=zeros,
    )
    wide = Priors(
        capacity=LogNormal(40.0, 1.2), half_time=LogNormal(16.0, 1.4), noise=LogNormal(3e-4, 0.3)
    )
    known = judge_uptake(curve, wide)
    assert known.best.law.name == "first order"
    assert known.law_weights[0] > 0.999
    assert known.equilibrium().median == pytest.approx(50.0, rel=2e-3)
    assert known.time_to(0.95).median == pytest.approx(351.87, rel=2e-3)
    assert known.load_at(240.0).mean == pytest.approx(43.52, rel=2e-3)
