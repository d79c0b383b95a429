import numpy as np
import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from muntin.lab import Hydrophobic, Ionic, Isotherm
from tests.lab.conftest import STEADY

PH = st.floats(3.0, 10.0)
SALT = st.floats(1.0, 2000.0)
LIQUID = st.floats(-12.0, 3.0).map(lambda decades: 10.0**decades)
IONIC = st.builds(
    Ionic,
    groups=st.floats(0.5, 20.0),
    half_ph=st.floats(5.0, 9.0),
    steepness=st.floats(0.0, 1.0),
    log_k=st.floats(-6.0, 1.0),
    log_k_per_ph=st.floats(-1.0, 0.5),
    capacity=st.floats(100.0, 1500.0),
    steric=st.floats(0.0, 2000.0),
)
HYDROPHOBIC = st.builds(
    Hydrophobic,
    log_b=st.floats(-6.0, 1.0),
    per_mm=st.floats(0.0, 0.012),
    bend=st.floats(-0.2, 1.0),
    mildest_ph=st.floats(4.0, 8.0),
    capacity=st.floats(0.01, 2.0),
)
ISOTHERM = st.builds(Isotherm, ionic=IONIC, hydrophobic=st.none() | HYDROPHOBIC)

FULL = 1 - 1e-9


def sma(ionic, ph, salt):
    """Charge, K and Lambda / salt written out again."""
    charge = ionic.groups / (1 + 10 ** (ionic.steepness * (ph - ionic.half_ph)))
    return charge, 10 ** (ionic.log_k + ionic.log_k_per_ph * (ph - 6)), ionic.capacity / salt


def bisected(ionic, liquid, ph, salt):
    """Bound concentration by halving the range that the law allows."""
    charge, k, ratio = sma(ionic, ph, salt)
    low, high = 0.0, ionic.capacity / (charge + ionic.steric)
    for _ in range(1200):
        middle = (low + high) / 2
        free = max(0.0, 1 - (charge + ionic.steric) * middle / ionic.capacity)
        if middle < liquid * k * (ratio * free) ** charge:
            low = middle
        else:
            high = middle
    return (low + high) / 2


@STEADY
@given(IONIC, LIQUID, PH, SALT)
def test_bound_concentration_solves_the_law_of_brooks_and_cramer(ionic, liquid, ph, salt):
    charge, k, ratio = sma(ionic, ph, salt)
    q = float(Isotherm(ionic=ionic).bound(liquid, ph, salt))
    taken = (charge + ionic.steric) * q / ionic.capacity
    free = 1 - taken
    if free < 1e-6:
        return  # the right side is lost to rounding; the bisection below covers these
    right = liquid * k * (ratio * free) ** charge
    # A rounding of q moves the right side by charge taken / free times as much.
    assert right == pytest.approx(q, rel=1e-12 * (1 + charge * taken / free))


@STEADY
@given(IONIC, LIQUID, PH, SALT)
def test_bound_concentration_agrees_with_plain_bisection(ionic, liquid, ph, salt):
    q = float(Isotherm(ionic=ionic).bound(liquid, ph, salt))
    assert q == pytest.approx(bisected(ionic, liquid, ph, salt), rel=1e-11)


@STEADY
@given(IONIC, LIQUID, PH, SALT)
def test_the_linear_limit_is_an_upper_bound_and_is_left_no_faster_than_sites_are_taken(
    ionic, liquid, ph, salt
):
    # (1 - y)^nu lies between 1 - max(nu, 1) y and 1.
    charge, k, ratio = sma(ionic, ph, salt)
    q = float(Isotherm(ionic=ionic).bound(liquid, ph, salt))
    taken = (charge + ionic.steric) * q / ionic.capacity
    share = q / (liquid * k * ratio**charge)
    assert 1 - max(charge, 1) * taken - 1e-11 <= share <= 1 + 1e-11


@STEADY
@given(ISOTHERM, PH, SALT)
def test_partition_is_the_slope_of_few_molecules(isotherm, ph, salt):
    partition = float(isotherm.partition(ph, salt))
    few = 1e-12 / (1 + partition)
    assert float(isotherm.bound(few, ph, salt)) / few == pytest.approx(partition, rel=1e-6)


def test_partition_at_a_worked_point():
    ionic = Ionic(
        groups=8.0, half_ph=6.0, steepness=0.4, log_k=-2.0, log_k_per_ph=-0.5, capacity=400.0
    )
    other = Hydrophobic(log_b=-1.0, per_mm=0.01, bend=0.25, mildest_ph=4.0)
    assert ionic.charge(6.0) == pytest.approx(4.0)
    assert Isotherm(ionic=ionic).partition(6.0, 200.0) == pytest.approx(0.01 * 2**4)
    both = Isotherm(ionic=ionic, hydrophobic=other)
    assert both.partition(6.0, 200.0) == pytest.approx(0.16 + 10 ** (-1 + 2 + 1))


@STEADY
@given(IONIC, PH)
def test_a_full_resin_holds_its_charges_over_those_a_molecule_takes(ionic, ph):
    most = ionic.capacity / (float(ionic.charge(ph)) + ionic.steric)
    assert float(Isotherm(ionic=ionic).bound(1e280, ph, 50.0)) == pytest.approx(most, rel=1e-9)


@STEADY
@given(IONIC, HYDROPHOBIC, LIQUID, st.floats(1.001, 1e3), PH, SALT)
def test_more_in_the_liquid_means_more_on_the_resin(ionic, other, liquid, times, ph, salt):
    both = Isotherm(ionic=ionic, hydrophobic=other).bound([liquid, liquid * times], ph, salt)
    assert both[0] <= both[1] * (1 + 1e-14)  # sites may be full to rounding
    less, more = Isotherm(ionic=ionic).bound([liquid, liquid * times], ph, salt)
    assert less < more or less > FULL * ionic.most(ph)


@STEADY
@given(IONIC, LIQUID, PH, SALT, st.floats(1.01, 3.0))
def test_salt_frees_ionic_sites(ionic, liquid, ph, salt, times):
    bound, less = Isotherm(ionic=ionic).bound(liquid, ph, [salt, salt * times])
    assert less < bound or less > FULL * ionic.most(ph)


@STEADY
@given(HYDROPHOBIC, LIQUID, PH, st.floats(1.0, 500.0))
def test_hydrophobic_sites_add_langmuir_binding_that_grows_with_salt(other, liquid, ph, salt):
    ionic = Ionic()
    alone = Isotherm(ionic=ionic)
    both = Isotherm(ionic=ionic, hydrophobic=other)
    added = both.bound(liquid, ph, salt) - alone.bound(liquid, ph, salt)
    slope = 10 ** (other.log_b + other.per_mm * salt + other.bend * (ph - other.mildest_ph) ** 2)
    expected = liquid * slope / (1 + liquid * slope / other.capacity)
    rounding = 1e-14 * float(alone.bound(liquid, ph, salt))
    assert float(added) == pytest.approx(expected, rel=1e-9, abs=10 * rounding)
    richer = other.log_partition(ph, salt + 100) - other.log_partition(ph, salt)
    assert richer == pytest.approx(100 * other.per_mm * np.log(10), abs=1e-11)


@STEADY
@given(
    ISOTHERM,
    st.floats(-9.0, 4.0).map(lambda decades: 10.0**decades),
    st.floats(1.0, 2000.0),
    st.floats(0.1, 500.0),
    PH,
    SALT,
)
@example(  # as good as no charge, an overloaded resin: the logit of the occupancy is near 20,000
    Isotherm(
        ionic=Ionic(
            groups=1.0,
            half_ph=5.0,
            steepness=1.0,
            log_k=0.0,
            log_k_per_ph=0.0,
            capacity=100.0,
            steric=1.0,
        )
    ),
    *(1000.0, 1.0, 1.0, 9.0, 1.0),
)
def test_a_settled_well_holds_its_protein_and_lies_on_the_isotherm(
    isotherm, total, volume, resin, ph, salt
):
    liquid, bound = isotherm.settle(total, volume, resin, ph, salt)
    assert liquid * volume + bound * resin == pytest.approx(total, rel=1e-12)
    # A rounding of the liquid moves what is bound no more than in proportion.
    assert bound == pytest.approx(float(isotherm.bound(liquid, ph, salt)), rel=1e-11)


def test_wells_settle_as_bisection_says():
    isotherm = Isotherm(hydrophobic=Hydrophobic(log_b=-1.0, per_mm=0.004))
    total, volume, resin, ph, salt = 2.0, 230.0, 40.0, 5.5, 120.0
    low, high = 0.0, total / volume
    for _ in range(200):
        middle = (low + high) / 2
        held = middle * volume + float(isotherm.bound(middle, ph, salt)) * resin
        low, high = (middle, high) if held < total else (low, middle)
    assert isotherm.settle(total, volume, resin, ph, salt)[0] == pytest.approx(low, rel=1e-12)


def test_shapes_broadcast():
    isotherm = Isotherm(hydrophobic=Hydrophobic())
    ph, salt = np.array([[4.5], [6.0], [7.0]]), np.array([50.0, 100.0, 200.0, 400.0])
    whole = isotherm.bound(0.01, ph, salt)
    liquid, bound = isotherm.settle(np.ones((2, 1, 1)), 200.0, 30.0, ph, salt)
    assert whole.shape == (3, 4)
    assert liquid.shape == bound.shape == (2, 3, 4)
    for i, j in np.ndindex(3, 4):
        assert whole[i, j] == pytest.approx(float(isotherm.bound(0.01, ph[i, 0], salt[j])))
        alone = isotherm.settle(1.0, 200.0, 30.0, ph[i, 0], salt[j])
        assert [liquid[1, i, j], bound[1, i, j]] == pytest.approx(np.array(alone))


def test_without_protein_nothing_is_bound():
    isotherm = Isotherm()
    assert isotherm.bound([0.0, 1e-3], 6.0, 100.0)[0] == 0
    liquid, bound = isotherm.settle([0.0, 1.0], 200.0, 30.0, 6.0, 100.0)
    assert (liquid[0], bound[0]) == (0, 0)
    assert liquid[1] > 0
    assert bound[1] > 0


@pytest.mark.parametrize(
    ("values", "what"),
    [
        ((-1.0, 200.0, 30.0, 6.0, 100.0), "protein below 0 nmol"),
        ((1.0, 0.0, 30.0, 6.0, 100.0), "a volume not above 0 µL"),
        ((1.0, 200.0, 0.0, 6.0, 100.0), "a volume not above 0 µL"),
        ((1.0, 200.0, 30.0, 6.0, 0.0), "a salt not above 0 mM"),
    ],
)
def test_wells_that_cannot_be_are_refused(values, what):
    with pytest.raises(ValueError, match=f"^{what} has no equilibrium$"):
        Isotherm().settle(*values)


def test_a_concentration_below_zero_is_refused():
    with pytest.raises(ValueError, match=r"^a concentration below 0 mM has no equilibrium$"):
        Isotherm().bound([0.1, -0.1], 6.0, 100.0)


def test_charge_is_half_of_its_groups_at_the_half_ph_and_falls_as_a_titration():
    ionic = Ionic(groups=12.0, half_ph=6.5, steepness=0.5)
    assert ionic.charge(6.5) == pytest.approx(6.0)
    # Two pH units at half a decade each: one part titrated for ten that are not.
    assert ionic.charge([4.5, 8.5]) == pytest.approx([12 * 10 / 11, 12 / 11])
