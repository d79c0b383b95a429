from dataclasses import replace

import numpy as np
import pytest

from muntin.lab import Errors, ErrorSizes, Isotherm, Procedure, Reader
from muntin.lab.reads import read_fractions

NONE = ErrorSizes.none()
MOLAR_MASS = 120.0
READER = Reader(extinction=1.6, fill=180.0, area=0.3, background=0.07, water_band=0.17)
PROCEDURE = Procedure(load=2.0, washes=1, elutions=2, load_salt=120.0)
PH = np.array([5.2, 5.8, 6.4])
SALT = np.array([150.0, 240.0, 330.0])
FRACTIONS = PROCEDURE.run(Isotherm(), MOLAR_MASS, PH, SALT, Errors.absent(4))


def read(errors=None, sizes=NONE):
    errors = errors or Errors.absent(4)
    return read_fractions(FRACTIONS, PROCEDURE, MOLAR_MASS, READER, errors, sizes)


def draw(**sizes):
    return replace(NONE, **sizes).draw(3, 4, np.random.default_rng(2), plates=["a", "b", "a"])


def test_a_read_is_the_law_of_beer_and_lambert_over_the_background():
    path = 180 / 1000 / 0.3
    mg_per_ml = FRACTIONS.liquid * MOLAR_MASS
    reads = read()
    assert reads.a280 == pytest.approx(1.6 * mg_per_ml * path + 0.07, rel=1e-12)
    assert reads.a977 - reads.a900 == pytest.approx(np.full((3, 4), 0.17 * path), rel=1e-12)
    assert reads.concentration == pytest.approx(mg_per_ml, rel=1e-6)
    assert np.array_equal(reads.collected[0], [300.0, 200.0, 200.0, 200.0])
    assert reads.recovery == pytest.approx(FRACTIONS.recovery_of_load, rel=1e-12)


def test_the_water_band_undoes_uneven_filling():
    filling = draw(volume_cv=0.2).filling
    uneven = read(replace(Errors.absent(4), filling=filling))
    net, even = uneven.a280 - 0.07, read().a280 - 0.07
    assert net / even == pytest.approx(filling, rel=1e-6)
    assert uneven.recovery == pytest.approx(read().recovery, rel=1e-12)


def test_the_error_of_a_path_stays_in_its_fraction():
    path = draw(path_cv=0.2).path
    ratio = read().concentration / read(replace(Errors.absent(4), path=path)).concentration
    assert ratio == pytest.approx(path, rel=1e-9)


def test_a_plates_load_divides_all_its_recoveries():
    reads = read(draw(load_cv=0.2))
    ratio = read().recovery / reads.recovery
    assert ratio == pytest.approx(reads.load / 2.0)
    assert ratio[0] == pytest.approx(ratio[2])
    assert abs(ratio[0] - ratio[1]) > 0.01


def test_a_plates_blank_lowers_all_its_concentrations_alike():
    reads = read(draw(blank_sd=0.01))
    shift = read().concentration - reads.concentration
    expected = (reads.blank - 0.07) / (1.6 * 0.6)
    assert shift == pytest.approx(np.tile(expected[:, None], (1, 4)), rel=1e-6)
    assert reads.blank[0] == reads.blank[2] != reads.blank[1]


def test_noise_of_reads_grows_from_its_floor_with_the_protein():
    sizes = replace(NONE, a280_cv=0.1, a280_floor=0.05)
    errors = draw()
    off = read(errors, sizes).a280 - read().a280
    expected = errors.reading * np.hypot(0.05, 0.1 * (read().a280 - 0.07))
    assert off == pytest.approx(expected, rel=1e-9)


def test_the_balance_errs_without_touching_reads_or_recovery():
    errors = draw(weighing_cv=0.1)
    reads = read(errors)
    assert reads.collected == pytest.approx(FRACTIONS.collected * errors.weighing)
    assert np.array_equal(reads.a280, read().a280)
    assert np.array_equal(reads.recovery, read().recovery)


def test_uneven_wells_are_read_as_they_are_and_reckoned_as_they_were_meant():
    errors = replace(draw(volume_cv=0.1, hold_up_cv=0.3, resin_cv=0.2), filling=np.ones((3, 4)))
    fractions = PROCEDURE.run(Isotherm(), MOLAR_MASS, PH, SALT, errors)
    assert fractions.hold_up == pytest.approx(30 * errors.hold_up)
    assert fractions.collected == pytest.approx([300, 200, 200, 200] * errors.volume)
    assert fractions.closure == pytest.approx(np.ones(3), rel=1e-12)
    reads = read_fractions(fractions, PROCEDURE, MOLAR_MASS, READER, errors, NONE)
    reckoned = fractions.liquid[:, 2:].sum(axis=1) * MOLAR_MASS * 200 / (2 * 300)
    assert reads.recovery == pytest.approx(reckoned, rel=1e-9)
    assert np.array_equal(reads.collected, fractions.collected)
