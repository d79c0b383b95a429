"""Laws of uptake: shares against closed forms, published series and separate integration."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import quad

from muntin.assay.uptake_core import core_share, core_time
from muntin.assay.uptake_laws import LAWS, Core, FirstOrder, Law, Pores, laws_for

STEADY = settings(deadline=None, derandomize=True)

EVERY = pytest.mark.parametrize("law", LAWS, ids=lambda law: law.name)
TAKES = st.floats(0.02, 50.0)


@EVERY
@STEADY
@given(takes=TAKES, times=st.lists(st.floats(0.0, 200.0), min_size=2, max_size=8))
def test_shares_rise_from_nothing_to_all(law: Law, takes: float, times: list[float]) -> None:
    shares = law.share(np.sort(times), takes)
    assert float(law.share(0.0, takes)) == 0.0
    assert np.all(np.diff(shares) >= -1e-12)
    assert np.all((shares >= 0.0) & (shares <= 1.0))


@EVERY
@STEADY
@given(takes=TAKES)
def test_half_is_reached_after_the_half_time(law: Law, takes: float) -> None:
    assert float(law.share(1.0, takes)) == pytest.approx(0.5, abs=2e-4)
    assert float(law.time(0.5, 30.0, takes)) == pytest.approx(30.0)


@EVERY
@STEADY
@given(takes=TAKES, share=st.floats(0.05, 0.97), half_time=st.floats(0.1, 1e4))
def test_time_to_a_share_is_when_the_share_is_reached(
    law: Law, takes: float, share: float, half_time: float
) -> None:
    time = float(law.time(share, half_time, takes))
    assert float(law.share(time / half_time, takes)) == pytest.approx(share, abs=1e-3)


@EVERY
@STEADY
@given(takes=TAKES, half_time=st.floats(0.1, 1e4))
def test_rate_times_half_time_is_where_half_is_reached(
    law: Law, takes: float, half_time: float
) -> None:
    rate = float(law.rates(half_time, takes))
    assert rate * half_time == pytest.approx(float(law.reach(0.5, takes)))


def test_first_order_by_its_rate() -> None:
    k, t = 0.02, np.array([1.0, 35.0, 240.0])
    half = np.log(2.0) / k
    assert FirstOrder().share(t / half, 0.0) == pytest.approx(1.0 - np.exp(-k * t))
    assert float(FirstOrder().rates(half, 0.0)) == pytest.approx(k)
    assert float(FirstOrder().time(0.95, half, 0.0)) == pytest.approx(np.log(20.0) / k)


def test_pore_diffusion_follows_the_series_it_stands_for() -> None:
    """Boyd, Adamson & Myers 1947, eq. for a sphere: 1 - 6/pi^2 sum exp(-n^2 B t)/n^2."""
    depth = np.array([0.05, 0.2, 0.5, 1.0, 2.0, 4.0])
    n = np.arange(1, 400)[:, None]
    series = 1.0 - 6.0 / np.pi**2 * (np.exp(-(n**2) * depth) / n**2).sum(axis=0)
    half = float(Pores().reach(0.5, 0.0))
    shares = Pores().share(depth / half, 0.0)
    assert np.abs(shares - series).max() < 0.022
    assert shares == pytest.approx(np.sqrt(1.0 - np.exp(-depth)))


def test_film_takes_all_that_arrives_until_the_resin_is_full() -> None:
    """Capacity 30 of 60 offered, k = 0.01: full once half of the protein has left the liquid."""
    film, k, takes = LAWS[2], 0.01, 0.5
    assert film.name == "film"
    full = np.log(2.0) / k
    half = float(film.reach(0.5, takes)) / k
    assert 30.0 * float(film.share(20.0 / half, takes)) == pytest.approx(60.0 * -np.expm1(-0.2))
    assert float(film.share(full / half, takes)) == pytest.approx(1.0)
    assert float(film.share(2.0 * full / half, takes)) == 1.0


@STEADY
@given(takes=st.floats(1.0, 50.0), time=st.floats(0.01, 20.0))
def test_a_film_with_resin_to_spare_is_first_order(takes: float, time: float) -> None:
    expected = float(FirstOrder().share(time, 0.0))
    assert float(LAWS[2].share(time, takes)) == pytest.approx(expected)


@pytest.mark.parametrize("law", [Pores(), Core()], ids=lambda law: law.name)
def test_diffusion_begins_with_the_root_of_time(law: Law) -> None:
    early = law.share(np.array([1e-3, 2e-3]), 0.5)
    assert early[1] / early[0] == pytest.approx(np.sqrt(2.0), rel=0.01)


def test_the_front_keeps_the_root_of_time_below_its_table() -> None:
    """The table begins at 1.2e-4 half times."""
    shares = core_share(np.array([1.3e-4, 1.3e-6, 1.3e-8]), 0.7)
    assert shares[0] / shares[1:] == pytest.approx([10.0, 100.0], rel=0.01)


def core_slope(filled: float, takes: float) -> float:
    """d tau / d F of the shrinking core, written with the shell's resistance 1/rho - 1.

    What flows in, 4 pi D C / (1/rho - 1), fills 4 pi rho^2 of the front for each step of rho.
    """
    rho = (1.0 - filled) ** (1.0 / 3.0)
    liquid = 1.0 - takes * filled
    return (1.0 / rho - 1.0) / (3.0 * liquid)


@pytest.mark.parametrize("takes", [0.05, 0.4, 0.9, 1.0, 1.2, 4.0, 20.0])
@pytest.mark.parametrize("share", [0.03, 0.3, 0.5, 0.9, 0.95])
def test_shrinking_core_by_separate_integration(takes: float, share: float) -> None:
    end = min(1.0, 1.0 / takes)
    whole = quad(core_slope, 0.0, share * end, args=(takes,), epsabs=1e-14, epsrel=1e-11)[0]
    half = quad(core_slope, 0.0, 0.5 * end, args=(takes,), epsabs=1e-14, epsrel=1e-11)[0]
    assert float(core_time(share, takes)) == pytest.approx(whole, rel=4e-4)
    assert float(core_share(whole / half, takes)) == pytest.approx(share, abs=2e-4)


def test_shrinking_core_in_steady_liquid_has_its_closed_form() -> None:
    """6 tau = 1 - 3 rho^2 + 2 rho^3 (Yagi & Kunii 1955), reached as the resin takes up less."""
    rho = np.cbrt(0.25)
    closed = (1.0 - 3.0 * rho**2 + 2.0 * rho**3) / 6.0
    found = [float(core_time(0.75, takes)) / closed - 1.0 for takes in (0.08, 0.04, 0.02)]
    assert found[0] > found[1] > found[2] > 0.0
    assert found[1] / found[0] == pytest.approx(0.5, abs=0.03)
    assert found[2] / found[1] == pytest.approx(0.5, abs=0.03)


def test_laws_that_need_the_offer_are_left_out_without_it() -> None:
    assert [law.name for law in laws_for(None)] == ["first order", "pore diffusion"]
    assert laws_for(60.0) == LAWS
