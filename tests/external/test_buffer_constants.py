"""Constants of buffers and water against published ones."""

import math

import pytest

from muntin.bench.buffer.acids import COUPLES
from muntin.bench.buffer.water import density, limiting_slope, per_charge_squared, permittivity, pkw
from tests.external.buffer_acids import acid_of, constants

STEPS = {
    "acetic": COUPLES["acetate"].acid.steps[0],
    "phosphoric1": COUPLES["phosphate"].acid.steps[0],
    "phosphoric2": COUPLES["phosphate"].acid.steps[1],
    "phosphoric3": COUPLES["phosphate"].acid.steps[2],
    "Tris": COUPLES["Tris"].acid.steps[0],
    "citric1": COUPLES["citrate"].acid.steps[0],
    "citric2": COUPLES["citrate"].acid.steps[1],
    "citric3": COUPLES["citrate"].acid.steps[2],
    "HEPES2": COUPLES["HEPES"].acid.steps[0],
    "MES": COUPLES["MES"].acid.steps[0],
}
TEMPERATURES = (4, 10, 15, 20, 25, 30, 37)


@pytest.mark.parametrize("name", STEPS)
def test_pk_at_every_temperature(name):
    # Goldberg, Kishore & Lennen 2002, as quoted by several texts (citric enthalpies and heat
    # capacities from memory); other temperatures by their formula, computed apart from this
    # project. The table has four decimals.
    row = constants().loc[name]
    for t_c in TEMPERATURES:
        assert STEPS[name].at(t_c) == pytest.approx(row[f"pk{t_c}"], abs=1e-4)


@pytest.mark.parametrize("name", STEPS)
def test_temperature_coefficients_at_25_degrees(name):
    # Same source; five decimals are given, and the published enthalpies have three figures.
    step = STEPS[name]
    slope = (step.at(25.5) - step.at(24.5)) / 1.0
    assert slope == pytest.approx(constants().loc[name, "dpk_dT_25"], abs=1e-5)


def test_pk_of_tris_and_hepes_at_22_degrees():
    # Published at 22 °C with three decimals, each rounded on its own way there.
    assert STEPS["Tris"].at(22) == pytest.approx(8.156, abs=1e-3)
    assert STEPS["HEPES2"].at(22) == pytest.approx(7.600, abs=1e-3)


def test_each_buffer_has_the_charges_of_its_acid():
    rows = constants()
    names = {"acetate": ["acetic"], "MES": ["MES"], "HEPES": ["HEPES2"], "Tris": ["Tris"]}
    names |= {k: [f"{v}{i}" for i in (1, 2, 3)] for k, v in (("citrate", "citric"),)}
    names |= {"phosphate": [f"phosphoric{i}" for i in (1, 2, 3)]}
    for buffer, couple in COUPLES.items():
        assert list(couple.acid.charges[:-1]) == rows.loc[names[buffer], "charge"].tolist()
        assert acid_of(*names[buffer]) == couple.acid


@pytest.mark.parametrize(
    ("t_c", "A"), [(4, 0.49457), (20, 0.50667), (25, 0.51081), (30, 0.51512), (37, 0.52146)]
)
def test_limiting_slope(t_c, A):
    # From the permittivity of Malmberg & Maryott 1956 and the density of Kell 1975, computed apart
    # from this project; textbooks have 0.509 to 0.5115 at 25 °C.
    assert limiting_slope(float(t_c)) == pytest.approx(A, abs=1e-5)


def test_water_at_25_degrees():
    # Malmberg & Maryott 1956 give 78.30; densities are those of IAPWS-95 at 25 and 4 °C, a later
    # formula on another scale of temperature (some 3e-6 apart). All from memory.
    assert permittivity(25.0) == pytest.approx(78.30, abs=0.005)
    assert density(25.0) == pytest.approx(0.997047, abs=5e-6)
    assert density(4.0) == pytest.approx(0.999975, abs=5e-6)


@pytest.mark.parametrize(
    ("t_c", "pk"),
    [(0, 14.944), (10, 14.535), (20, 14.167), (25, 13.995), (30, 13.833), (40, 13.535)],
)
def test_ion_product_of_water(t_c, pk):
    # Harned & Owen 1958, from memory; a constant heat capacity leaves 0.01.
    assert pkw(float(t_c)) == pytest.approx(pk, abs=0.01)


def test_davies_by_hand():
    # log10 gamma of a univalent ion at 25 °C and I = 0.1: -0.51081 (0.240253 - 0.03).
    root = math.sqrt(0.1)
    by_hand = 0.51081 * (root / (1 + root) - 0.03)
    assert per_charge_squared(0.1, 25.0) == pytest.approx(by_hand, abs=1e-5)
    assert per_charge_squared(0.0, 25.0) == 0.0
    assert per_charge_squared(2.0, 25.0) == per_charge_squared(0.5, 25.0)
