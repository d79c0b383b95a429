"""The pH of liquids against primary standards and published recipes."""

import numpy as np
import pandas as pd
import pytest

from muntin.bench.buffer.acids import COUPLES, Couple
from muntin.bench.buffer.liquid import Liquid, state_of
from muntin.bench.buffer.titration import Titration
from tests.external.buffer_acids import ACETIC, BORIC, DATA, PHOSPHORIC, PHTHALIC, TRIS

# Primary standards, mol/kg: borax is two boric acids and two borates.
STANDARDS = {
    "KH phthalate 0.05": Liquid({PHTHALIC: 0.05}, {1: 0.05}),
    "KH2PO4 0.025 + Na2HPO4 0.025": Liquid({PHOSPHORIC: 0.05}, {1: 0.075}),
    "KH2PO4 0.008695 + Na2HPO4 0.03043": Liquid(
        {PHOSPHORIC: 0.008695 + 0.03043}, {1: 0.008695 + 2 * 0.03043}
    ),
    "Na2B4O7 0.01": Liquid({BORIC: 0.04}, {1: 0.02}),
}
PHTHALATE = [3.0, 6.6, 11.1, 16.5, 22.6, 28.8, 34.1, 38.8, 42.3]
PHOSPHATE = [3.6, 5.6, 8.1, 11.6, 16.4, 22.4, 29.1, 34.7, 39.1, 42.8, 45.3, 46.7]
TRIS_ML = [46.6, 44.7, 42.0, 38.5, 34.5, 29.2, 22.9, 17.2, 12.4, 8.5, 5.7]
ACETATE = [185, 176, 164, 147, 126, 102, 80, 59, 42, 29, 19]


def ph_of(acids, ions, t_c=25.0):
    return state_of(Liquid(acids, ions), t_c).ph


@pytest.mark.parametrize("name", STANDARDS)
@pytest.mark.parametrize("t_c", [15, 20, 25, 30, 37])
def test_primary_standards(name, t_c):
    # Buck et al. 2002, Pure Appl. Chem. 74:2169 (IUPAC). Davies with 0.2 or 0.3 I and the pK of
    # Goldberg, Kishore & Lennen 2002 leave up to 0.013 here, as a model outside this project does;
    # a wrong sign or no z^2 leaves 0.1 and more, pH = pK + log ratio 0.33.
    table = pd.read_csv(DATA / "ph_standards.csv").set_index(["standard", "t_C"])
    published = table.loc[(name, t_c), "pH"]
    assert state_of(STANDARDS[name], float(t_c)).ph == pytest.approx(published, abs=0.015)


def test_ionic_strength_of_the_equimolal_phosphate():
    # 1/2 (0.075 + 0.025 + 4 * 0.025) by hand.
    state = state_of(STANDARDS["KH2PO4 0.025 + Na2HPO4 0.025"], 25.0)
    assert state.strength == pytest.approx(0.1000, abs=5e-5)


# Bates & Bower 1956, Anal. Chem. 28:1322: 50 mL of 0.1 M stock and x mL of 0.1 M titrant to 100 mL
# at 25 °C. Phthalate and phosphate at pH 7.0 as read in a handbook, all others from memory. The
# tables come from measured curves smoothed to 0.1 mL; Davies leaves up to 0.032.


@pytest.mark.parametrize(("ph", "ml"), [*zip(np.arange(4.2, 5.9, 0.2), PHTHALATE, strict=True)])
def test_phthalate_with_hydroxide(ph, ml):
    made = ph_of({PHTHALIC: 0.05}, {1: 0.05 + ml / 1000})
    assert made == pytest.approx(ph, abs=0.035)


@pytest.mark.parametrize(("ph", "ml"), [*zip(np.arange(5.8, 8.1, 0.2), PHOSPHATE, strict=True)])
def test_phosphate_with_hydroxide(ph, ml):
    made = ph_of({PHOSPHORIC: 0.05}, {1: 0.05 + ml / 1000})
    assert made == pytest.approx(ph, abs=0.035)


@pytest.mark.parametrize(("ph", "ml"), [*zip(np.arange(7.0, 9.1, 0.2), TRIS_ML, strict=True)])
def test_tris_with_hydrochloric_acid(ph, ml):
    assert ph_of({TRIS: 0.05}, {-1: ml / 1000}) == pytest.approx(ph, abs=0.035)


def test_grams_of_the_standards():
    # Grams a litre at 25 °C of the National Bureau of Standards, as a handbook has them (masses in
    # air for molal solutions); molar masses by hand. 0.4 to 0.9 % less than mol/L asks: no pH of a
    # buffer feels it.
    phthalate, borax = 10.12 / 204.22, 3.80 / 381.37
    mono, di = 3.39 / 136.086, 3.53 / 141.96
    assert ph_of({PHTHALIC: phthalate}, {1: phthalate}) == pytest.approx(4.005, abs=0.015)
    assert ph_of({PHOSPHORIC: mono + di}, {1: mono + 2 * di}) == pytest.approx(6.865, abs=0.015)
    assert ph_of({BORIC: 4 * borax}, {1: 2 * borax}) == pytest.approx(9.180, abs=0.015)


@pytest.mark.parametrize(("ph", "acid_ml"), [*zip(np.arange(3.6, 5.7, 0.2), ACETATE, strict=True)])
def test_acetate_from_both_forms(ph, acid_ml):
    # The classic table, mL of 0.1 M acetic acid in 200 mL with 0.1 M acetate, stands on the older
    # scale of pH, some 0.04 lower.
    acetate = 0.1 * (1 - acid_ml / 200)
    assert ph_of({ACETIC: 0.1}, {1: acetate}) == pytest.approx(ph, abs=0.06)


@pytest.mark.parametrize(
    ("hydrochloride", "base", "at_5", "at_25", "at_37"),
    [
        (7.02, 0.67, 7.76, 7.20, 6.91),
        (6.61, 0.97, 7.97, 7.40, 7.12),
        (6.06, 1.39, 8.18, 7.60, 7.30),
    ],
)
def test_tris_in_the_cold_and_in_the_warm(hydrochloride, base, at_5, at_25, at_37):
    # Grams a litre for 0.05 M in a published reference table, which names no scale of pH: 0.1 is
    # asked of the pH (Davies leaves up to 0.09 in the cold), 0.05 of its shift with temperature.
    salt, free = hydrochloride / 157.60, base / 121.14
    cold, room, warm = (ph_of({TRIS: salt + free}, {-1: salt}, t) for t in (5.0, 25.0, 37.0))
    np.testing.assert_allclose([cold, room, warm], [at_5, at_25, at_37], atol=0.1)
    np.testing.assert_allclose([cold - room, warm - room], [at_5 - at_25, at_37 - at_25], atol=0.05)


# Strong base or acid that a pH takes at 25 °C, computed apart from this project with the same
# formulas (Davies with 0.3 I, A = 0.51081), printed to 0.001 mM.


@pytest.mark.parametrize(
    ("buffer", "mm", "ph", "salt", "counter_ions"),
    [
        ("acetate", 50, 5.0, 0, 33.756),
        ("acetate", 50, 5.0, 150, 35.018),
        ("phosphate", 20, 7.0, 0, 30.473),
        ("phosphate", 20, 7.0, 150, 32.059),
        ("Tris", 50, 8.0, 0, 29.048),
        ("Tris", 50, 8.0, 150, 30.564),
        ("citrate", 50, 5.5, 150, 116.002),
    ],
)
def test_counter_ions_of_a_ph(buffer, mm, ph, salt, counter_ions):
    couple = COUPLES[buffer]
    ions = {1: salt / 1000, -1: salt / 1000}
    base, _ = Titration({couple: mm / 1000}, ions, 25.0).base_at(ph)
    charge = (1 - base) * couple.acid_charge + base * couple.base_charge
    assert mm * abs(charge) == pytest.approx(counter_ions, abs=2e-3)


def test_ionic_strength_of_the_acetate():
    # Same source; by hand the acetate ions with half of both sodium and chloride.
    couple = Couple(ACETIC, 0, -1)
    for salt, strength in ((0.0, 0.03377), (0.15, 0.18503)):
        found = Titration({couple: 0.05}, {1: salt, -1: salt}, 25.0).base_at(5.0)[1]
        assert found == pytest.approx(strength, abs=1e-5)
