"""Virtual lab against values calculated apart from this project.

The equilibria (`sma_equilibrium.csv`) follow the law of Brooks & Cramer 1992, AIChE J. 38:1969,
with parameters of their time from memory: they test the solver, not nature. Hold-up caps and
the scatter of recoveries are a calculator's and a Monte Carlo's, for the same stages and errors.
"""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from muntin.lab import (
    Addition,
    ErrorSizes,
    Ionic,
    Isotherm,
    Procedure,
    VirtualLab,
    through_stages,
)
from tests.lab.bindings import Linear, Switch

DATA = Path(__file__).parent / "data"

# nu, sigma, K of three proteins on a cation exchanger with Lambda = 567 mM; from memory.
PROTEINS = {
    "chymotrypsinogen": (4.8, 49.2, 9.22e-3),
    "cytochrome_c": (6.0, 53.6, 1.06e-2),
    "lysozyme": (5.3, 34.0, 1.84e-2),
}


def isotherm(protein):
    charge, steric, k = PROTEINS[protein]
    ionic = Ionic(
        groups=2 * charge,
        steepness=0.0,  # the charge is that of half the groups at any pH
        log_k=np.log10(k),
        log_k_per_ph=0.0,
        capacity=567.0,
        steric=steric,
    )
    return Isotherm(ionic=ionic)


def test_bound_concentrations_at_84_points():
    table = pd.read_csv(DATA / "sma_equilibrium.csv")
    assert len(table) == 84
    for row in table.itertuples():
        bound = isotherm(row.protein).bound(row.C_mM, 6.0, row.salt_mM)
        assert float(bound) == pytest.approx(row.q_mM_per_L_bed, rel=1e-8)
        partition = float(isotherm(row.protein).partition(6.0, row.salt_mM))
        assert partition == pytest.approx(row.linear_partition_K, rel=1e-7)


def test_lysozyme_fills_the_resin_to_its_steric_limit():
    assert isotherm("lysozyme").ionic.most(6.0) == pytest.approx(14.427480916, rel=1e-10)


def test_lysozyme_comes_off_one_strip_as_salt_rises():
    # 1 mM on the resin, thirty times as much liquid, no hold-up.
    salt = [50.0, 100.0, 150.0, 200.0, 250.0, 300.0, 500.0]
    expected = [
        *(0.00608832, 0.18373777, 0.62021257, 0.87224116),
        *(0.95575333, 0.98252182, 0.99880756),
    ]
    liquid, _ = isotherm("lysozyme").settle(1.0, 30.0, 1.0, 6.0, salt)
    assert 30 * liquid == pytest.approx(np.array(expected), abs=5e-9)


CAPS = {  # % of bound collected after 1, 2 and 3 stages of 200 µL: by resin, hold-up (µL) and Kp
    (50.0, 40.0, 0.0): (83, 97, 99.5),
    (50.0, 40.0, 0.3): (78, 95, 99),
    (50.0, 40.0, 1.0): (69, 90, 97),
    (50.0, 40.0, 3.0): (51, 76, 88),
    (20.0, 20.0, 0.0): (91, 99, 99.9),
    (20.0, 20.0, 0.3): (88.5, 99, 99.8),  # printed 89, rounded twice: it is 88.4956
    (20.0, 20.0, 1.0): (83, 97, 99.5),
    (20.0, 20.0, 3.0): (71, 92, 98),
}


@pytest.mark.parametrize("well", CAPS)
def test_hold_up_caps_what_elutions_collect(well):
    resin, hold_up, kp = well
    load = Addition(role="load", volume=200.0, ph=6.0, salt=30.0, protein=0.01)
    elution = Addition(role="elution", volume=200.0, ph=6.0, salt=1000.0)
    wells = through_stages(Switch(kp), [load, *[elution] * 3], hold_up, resin)
    collected = 100 * np.cumsum(wells.amounts[0, 1:]) / wells.loaded[0]
    for share, printed in zip(collected, CAPS[well], strict=True):
        digits = 1 if isinstance(printed, float) else 0
        assert round(share, digits) == printed


def test_load_left_in_the_hold_up_by_washes():
    # 40 µL of hold-up, washes of 200 µL: 17, 3 and 0.5 % of what was not bound.
    load = Addition(role="load", volume=200.0, ph=6.0, salt=30.0, protein=0.01)
    wash = Addition(role="wash", volume=200.0, ph=6.0, salt=30.0)
    elution = Addition(role="elution", volume=200.0, ph=6.0, salt=300.0)
    wells = through_stages(Linear(0.0), [load, wash, wash, elution], 40.0, 20.0)
    left = 100 * wells.liquid[0, :3] * 40 / wells.loaded[0]
    assert np.round(left, 1) == pytest.approx([16.7, 2.8, 0.5])


@pytest.mark.parametrize(
    ("other", "cv"),
    [({}, 2.5), ({"a280_cv": 0.03}, 3.2), ({"hold_up_cv": 0.0}, 2.1), ({"resin_cv": 0.1}, 2.6)],
)
def test_scatter_of_a_good_recovery_as_a_monte_carlo_has_it(other, cv):
    # 50 µL of resin, 40 µL of hold-up, Kp 0.3, two elutions: recovery 0.95. Kp, hold-up and the
    # number of pipettings are not stated with the printed cvs, which are therefore met to one
    # unit of their last digit; the last one is printed as 2.5 to 2.7.
    usual = replace(ErrorSizes.none(), a280_cv=0.02, volume_cv=0.01, hold_up_cv=0.25, resin_cv=0.04)
    lab = VirtualLab(binding=Switch(0.3), procedure=Procedure(hold_up=40.0, resin=50.0))
    conditions = np.tile([6.0, 500.0], (40_000, 1))
    reads = lab.read(conditions, np.random.default_rng(8), replace(usual, **other))
    assert lab.recovery([6.0, 500.0]) == pytest.approx([0.953], abs=5e-4)
    found = 100 * reads.recovery.std() / reads.recovery.mean()
    assert found == pytest.approx(cv, abs=0.1)
