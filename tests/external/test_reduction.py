"""Reduction against published examples of uncertainty and closed forms of a batch."""

import numpy as np
import pytest

from muntin.assay.absorbance import Blanks, Optics
from muntin.assay.balance import Volumes
from muntin.assay.inputs import Inputs, results
from muntin.assay.uncertainty import effects, first_order, monte_carlo
from muntin.record.assay import Assay

SURE = dict.fromkeys(
    (
        "load_cv",
        "extinction_cv",
        "path_cv",
        "path_shared_cv",
        "read_cv",
        "read_floor",
        "blank_sd",
        "volume_cv",
        "weighing_cv",
        "dilution_cv",
        "hold_up_well_cv",
        "hold_up_mean_cv",
        "resin_well_cv",
        "resin_mean_cv",
    ),
    0.0,
)


def combined(work, names):
    """Combined standard uncertainty of the result `y`."""
    return float(np.sqrt(sum(effects(work, name, 1.0)["y"] ** 2 for name in names)))


def test_eurachem_example_a1_calibration_standard():
    """EURACHEM/CITAC, Quantifying Uncertainty, example A1: printed 1002.7 mg/L, 0.9 mg/L.

    The guide combines the three contributions to the volume to 0.07 mL before it goes on.
    """

    def work(z):
        purity = 0.9999 + 0.0001 / np.sqrt(3) * z.get("purity", 0.0)
        mass = 100.28 + 0.05 * z.get("mass", 0.0)
        volume = 100.0 + 0.07 * z.get("volume", 0.0)
        return {"y": 1000.0 * mass * purity / volume}

    assert work({})["y"] == pytest.approx(1002.7, abs=0.05)
    found = combined(work, ("purity", "mass", "volume"))
    assert found == pytest.approx(0.8637, abs=5e-5)
    assert round(found, 1) == 0.9


def test_eurachem_example_a2_sodium_hydroxide():
    """Example A2 (inputs from memory): printed 0.10214 mol/L, 0.00010 mol/L."""

    def work(z):
        mass = 0.3888 + 0.00013 * z.get("mass", 0.0)
        purity = 1.0 + 0.00029 * z.get("purity", 0.0)
        molar = 204.2212 + 0.0038 * z.get("molar", 0.0)
        volume = 18.64 + 0.013 * z.get("volume", 0.0)
        repeat = 1.0 + 0.0005 * z.get("repeat", 0.0)
        return {"y": 1000.0 * mass * purity / (molar * volume) * repeat}

    assert round(work({})["y"], 5) == 0.10214
    found = combined(work, ("mass", "purity", "molar", "volume", "repeat"))
    assert round(found, 5) == 0.00010
    assert found == pytest.approx(0.0000986, abs=1e-7)


def recovery_with_blanks(groups: int):
    """A recovery from A 1.250 of the load (1:5, 200 µL) and A 0.520 of the eluate (1:2, 400 µL),
    blank 0.045: one for both, or one each.

    Standard uncertainties 0.006, 0.006 and 0.004 AU; volumes 1 %.
    """
    assay = Assay.model_validate(
        SURE
        | {
            "volume_cv": 0.01,
            "stages": [
                {"fraction": "ft", "stage": "load", "volume_ul": 200.0},
                {"fraction": "e1", "stage": "elution", "volume_ul": 400.0},
            ],
        }
    )

    def optics(absorbance, sd, dilution, blank):
        rows = len(absorbance)
        nan = np.full((rows, 2), np.nan)
        return Optics(
            absorbance=np.column_stack([absorbance, nan]),
            read_sd=np.column_stack([sd, np.zeros((rows, 2))]),
            blank=np.array(blank),
            band=np.full(rows, np.nan),
            dilution=np.array(dilution),
            scatter_dilution=np.array(dilution),
        )

    inputs = Inputs(
        plate="plate-01",
        wells=("A1",),
        roles=("test",),
        samples=optics([0.2, 0.520], [0.0, 0.006], [1.0, 2.0], [0, 0]),
        load=optics([1.250], [0.006], [5.0], [groups - 1]),
        entered=None,
        blanks=Blanks(
            names=("buffer",) * groups,
            value=np.full((groups, 3), 0.045),
            kind_sd=np.tile([0.004, 0.0, 0.0], (groups, 1)),
            weights=np.repeat(np.eye(groups)[:, :, None], 3, axis=2),
            other_sd=np.zeros((groups, 3)),
            borrowed=(False,) * groups,
            spread=np.zeros(groups),
            count=np.ones(groups, dtype=int),
        ),
        volumes=Volumes(
            added=np.array([[200.0, 400.0]]),
            collected=np.full((1, 2), np.nan),
            hold_up=np.zeros(1),
            resin=np.full(1, 50.0),
        ),
        states=np.array([["read", "read"]]),
        load_states=np.array(["read"]),
    )
    return inputs, assay


@pytest.mark.parametrize(("groups", "expected"), [(1, 0.00638833), (2, 0.00680960)])
def test_one_blank_for_load_and_eluate_is_counted_once(groups, expected):
    """First order of (Ae - Ab) Ve De / ((Al - Ab) Vl Dl), worked out apart from this project."""
    inputs, assay = recovery_with_blanks(groups)
    recovery = first_order(inputs, assay)["collected_of_load"]
    assert recovery.value[0] == pytest.approx(0.31535270, abs=5e-9)
    assert recovery.total[0] == pytest.approx(expected, abs=5e-9)


def test_monte_carlo_of_the_shared_blank():
    """4,000,000 draws apart from this project: 0.315390, sd 0.006387, 95 % 0.30302 to 0.32805."""
    inputs, assay = recovery_with_blanks(1)
    drawn = monte_carlo(inputs, assay, 200_000, np.random.default_rng(3))["collected_of_load"]
    # 200,000 draws: standard errors 1.4e-5 of the mean, 0.16 % of the sd, 4e-5 of the limits.
    assert drawn.mean[0] == pytest.approx(0.315390, abs=6e-5)
    assert drawn.sd[0] == pytest.approx(0.006387, rel=6e-3)
    assert drawn.interval[0] == pytest.approx([0.30302, 0.32805], abs=1.6e-4)


def batch(liquid, load, volume, resin, hold_up=0.0, second=0.0):
    """Quantities of one well with a load and an elution of the same volume."""
    inputs, assay = recovery_with_blanks(1)
    from dataclasses import replace

    epsilon_l = assay.extinction * assay.read_ul / 1000.0 / assay.read_area_cm2
    read = np.full((2, 3), np.nan)
    read[:, 0] = 0.045 + epsilon_l * np.array([liquid, second])
    samples = replace(inputs.samples, absorbance=read, dilution=np.ones(2))
    volumes = Volumes(
        added=np.full((1, 2), volume),
        collected=np.full((1, 2), np.nan),
        hold_up=np.array([hold_up]),
        resin=np.array([resin]),
    )
    well = replace(inputs, samples=samples, volumes=volumes, load=None, entered=load)
    return {name: float(value[0]) for name, value in results(well, assay).items()}


@pytest.mark.parametrize(
    ("load", "ratio", "most", "kd", "liquid", "bound"),
    [
        (2.0, 20.0, 60.0, 0.05, 0.087882534, 38.242349328),
        (2.0, 30.0, 60.0, 0.05, 0.292214439, 51.233566845),
        (2.0, 40.0, 60.0, 0.05, 0.613104367, 55.475825304),
        (2.0, 30.0, 60.0, 2.0, np.sqrt(5.0) - 1.0, 30.0 * (3.0 - np.sqrt(5.0))),
        (4.0, 30.0, 60.0, 2.0, 2.0 * np.sqrt(2.0), 30.0 * (4.0 - 2.0 * np.sqrt(2.0))),
    ],
)
def test_langmuir_batches(load, ratio, most, kd, liquid, bound):
    """Closed forms of a batch with Langmuir's isotherm; phase ratio mL liquid per mL resin."""
    found = batch(liquid, load, ratio * 10.0, 10.0)
    assert found["capacity_mg_ml"] == pytest.approx(bound, rel=1e-8)
    assert found["capacity_mg_ml"] == pytest.approx(most * liquid / (kd + liquid), rel=1e-7)
    assert 10.0 ** found["log10_kp"] == pytest.approx(bound / liquid, rel=1e-8)


def test_hold_up_carries_thirty_micrograms():
    """15 µL of a load of 2 mg/mL that does not bind stay, 30 µg, and make 0.0952381 mg/mL in the
    next 300 µL: nothing is set free.
    """
    first = 2.0 * 300.0 / 315.0
    second = first * 15.0 / 315.0
    found = batch(first, 2.0, 300.0, 10.0, hold_up=15.0, second=second)
    assert found["bound_ug"] == pytest.approx(0.0, abs=1e-9)
    assert found["freed_ug"] == pytest.approx(0.0, abs=1e-9)
    kept = batch(2.0, 2.0, 300.0, 10.0, hold_up=15.0, second=0.0952381)
    assert kept["bound_ug"] == pytest.approx(-30.0, abs=1e-9)
    assert kept["freed_ug"] == pytest.approx(0.0, abs=1e-4)


def test_beer_and_lambert():
    """A 0.700, blank 0.045, path 0.56 cm, 1.4 mL/mg/cm: 0.835459 mg/mL."""
    inputs, assay = recovery_with_blanks(1)
    from dataclasses import replace

    from muntin.assay.absorbance import concentration

    read = np.full((2, 3), np.nan)
    read[:, 0] = 0.700
    band = np.full(2, 0.56 * assay.water_band)
    samples = replace(inputs.samples, absorbance=read, dilution=np.ones(2), band=band)
    found = concentration(samples, inputs.blanks, assay, {})
    assert found == pytest.approx([0.835459] * 2, abs=5e-7)


def test_hold_up_caps_what_one_to_three_elutions_collect():
    """200 µL over 40 µL and over 20 µL of hold-up; caps as calculated in the trade, two figures."""
    from muntin.assay.balance import most_collected

    assert [round(100 * most_collected([200.0] * n, 40.0), 1) for n in (1, 2, 3)] == [
        83.3,
        97.2,
        99.5,
    ]
    assert [round(100 * most_collected([200.0] * n, 20.0)) for n in (1, 2)] == [91, 99]
