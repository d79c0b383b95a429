"""Laws that every liquid obeys, whatever is in it."""

import math

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from muntin.bench.buffer.acids import COUPLES, Acid, Couple, Step
from muntin.bench.buffer.liquid import Liquid, State, bracketed, forms, settled, state_of
from muntin.bench.buffer.titration import Titration
from muntin.bench.buffer.water import per_charge_squared, pkw

BASE = st.floats(0.0, 1.0)
T_C = st.sampled_from([4.0, 22.0, 37.0])


@st.composite
def couples(draw):
    """A known buffer, or one with one to three pK and charges of its own."""
    if draw(st.booleans()):
        return COUPLES[draw(st.sampled_from([*COUPLES]))]
    pks = sorted(draw(st.lists(st.floats(2.0, 11.0), min_size=1, max_size=3, unique=True)))
    top = draw(st.integers(-1, 2))
    enthalpy = draw(st.floats(-20.0, 50.0))
    acid = Acid(top, tuple(Step(pk, enthalpy) for pk in pks))
    lost = draw(st.integers(1, len(pks)))
    return Couple(acid, top, top - lost)


@st.composite
def titrations(draw):
    """One or two buffers with a salt of one or two charges, a temperature."""
    mixed = draw(st.lists(couples(), min_size=1, max_size=2, unique=True))
    amounts = {couple: draw(st.floats(0.005, 0.1)) for couple in mixed}
    salt, sulfate = draw(st.floats(0.0, 0.4)), draw(st.booleans())
    ions = {1: 2 * salt, -2: salt} if sulfate else {1: salt, -1: salt}
    return Titration(amounts, ions, draw(T_C))


def concentrations(liquid, state, t_c):
    """(charge, mol/kg) of every species, counted one by one."""
    g = per_charge_squared(state.strength, t_c)
    found = [*liquid.ions.items(), (1, 10 ** (g - state.ph)), (-1, 10 ** (g + state.ph - pkw(t_c)))]
    for acid, m in liquid.acids.items():
        found += zip(acid.charges, (m * s for s in forms(acid, state.ph, g, t_c)), strict=True)
    return found


@settings(deadline=None, derandomize=True)
@given(titrations(), BASE)
def test_charges_add_up_to_nothing_and_give_the_ionic_strength(titration, base):
    liquid = titration.liquid(base)
    state = titration.state(base)
    species = concentrations(liquid, state, titration.t_c)
    # The slope of the charge along the pH is at most a few mol/kg, the pH is found to 1e-12.
    assert math.fsum(z * m for z, m in species) == pytest.approx(0.0, abs=1e-9)
    half = 0.5 * math.fsum(z * z * m for z, m in species)
    assert state.strength == pytest.approx(half, rel=1e-9)


@settings(deadline=None, derandomize=True)
@given(couples(), st.floats(-2.0, 16.0), st.floats(0.0, 0.2), T_C)
def test_no_form_of_an_acid_is_lost(couple, ph, g, t_c):
    shares = forms(couple.acid, ph, g, t_c)
    assert len(shares) == len(couple.acid.charges)
    assert min(shares) >= 0.0
    assert math.fsum(shares) == pytest.approx(1.0, abs=1e-12)


@settings(deadline=None, derandomize=True)
@given(titrations(), BASE)
def test_forms_obey_their_equilibria(titration, base):
    state, liquid = titration.state(base), titration.liquid(base)
    g = per_charge_squared(state.strength, titration.t_c)
    for acid in liquid.acids:
        shares = forms(acid, state.ph, g, titration.t_c)
        for j, pk in enumerate(acid.pks(titration.t_c)):
            z, y = acid.charges[j], acid.charges[j + 1]
            if shares[j] > 1e-200 and shares[j + 1] > 1e-200:
                # K = a(H) a(base) / a(acid), with log gamma = -g z^2.
                log_k = math.log10(shares[j + 1]) - g * y * y - math.log10(shares[j]) + g * z * z
                assert log_k - state.ph == pytest.approx(-pk, abs=1e-9)


@settings(deadline=None, derandomize=True)
@given(titrations(), BASE, BASE)
def test_more_base_form_raises_the_ph(titration, one, other):
    low, high = sorted((one, other))
    assume(high - low > 1e-6)
    assert titration.state(high).ph > titration.state(low).ph


@settings(deadline=None, derandomize=True)
@given(titrations(), BASE)
def test_steps_and_bounds_find_the_same_state(titration, base):
    liquid = titration.liquid(base)
    bounds = bracketed(liquid, titration.t_c)
    found = titration.state(base)
    assert found.ph == pytest.approx(bounds.ph, abs=1e-8)
    assert found.strength == pytest.approx(bounds.strength, rel=1e-8)


@pytest.mark.parametrize("name", COUPLES)
def test_steps_bring_buffers_to_rest_without_bounds(name):
    liquid = Titration({COUPLES[name]: 0.02}, {1: 0.1, -1: 0.1}, 25.0).liquid(0.4)
    bounds = bracketed(liquid, 25.0)
    found = settled(liquid, State(bounds.ph + 0.2, 0.1), 25.0)
    assert found is not None
    assert found.ph == pytest.approx(bounds.ph, abs=1e-9)


def test_steps_that_do_not_come_to_rest_are_given_up():
    # Far from its pH a liquid without buffer has no capacity to step by.
    salt = Liquid({}, {1: 0.1, -1: 0.099})
    assert settled(salt, State(7.0, 0.1), 25.0) is None
    assert state_of(salt, 25.0).ph == pytest.approx(bracketed(salt, 25.0).ph, abs=1e-9)


@settings(deadline=None, derandomize=True)
@given(titrations(), st.floats(0.01, 0.99))
def test_the_share_of_base_form_comes_back_from_the_ph(titration, base):
    state = titration.state(base)
    back, strength = titration.base_at(state.ph)
    assert back == pytest.approx(base, abs=1e-7)
    assert strength == pytest.approx(state.strength, rel=1e-7)


@pytest.mark.parametrize("t_c", [4.0, 25.0])
def test_water_alone_is_neutral(t_c):
    state = state_of(Liquid({}, {}), t_c)
    assert state.ph == pytest.approx(pkw(t_c) / 2, abs=1e-9)


def test_salt_moves_the_ph_by_the_charges_of_both_forms():
    # An acid whose base form carries the larger charge becomes stronger, Tris weaker.
    for name, sign in (("acetate", -1), ("phosphate", -1), ("citrate", -1), ("Tris", 1)):
        plain = Titration({COUPLES[name]: 0.02}, {}, 25.0).state(0.5).ph
        salted = Titration({COUPLES[name]: 0.02}, {1: 0.2, -1: 0.2}, 25.0).state(0.5).ph
        assert sign * (salted - plain) > 0.02


def test_one_strong_ion_too_many_has_no_ph():
    with pytest.raises(ValueError, match="no pH from -2 to 16"):
        state_of(Liquid({}, {1: 1000.0}), 25.0)
