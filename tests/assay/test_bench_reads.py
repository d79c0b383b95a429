"""A reads folder as a bench leaves it: three wells by hand, then what the folder lacks.

One grid a fraction and wavelength, decimal commas, one read beyond the reader repeated at 1:5,
elutions of 200 and 150 µL, one missing strip, blanks of the binding buffer only. Invented.
"""

from __future__ import annotations

import csv
import json
import shutil
from pathlib import Path

import numpy as np
import pytest

from muntin.assay.given import given
from muntin.assay.reduction import reduce_reads
from muntin.assay.uncertainty import Uncertain
from muntin.record import open_study

FOLDER = Path(__file__).parent / "bench_reads"


@pytest.fixture(scope="module")
def reduction():
    return reduce_reads(open_study(FOLDER, reducing=True), FOLDER / "reads")


@pytest.fixture(scope="module")
def plate(reduction):
    (one,) = reduction.plates
    return one


def of(plate, name: str, well: str) -> float:
    return float(plate.quantities[name].value[plate.inputs.wells.index(well)])


def kinds(plate, well: str) -> set[tuple[str, str]]:
    return {(flag.kind, flag.fraction) for flag in plate.flags if flag.well == well}


# By hand. Path 180 µL / 0.32 cm2 = 0.5625 cm, times 1.42 mL/mg/cm = 0.79875 mL/mg.
# Blank of the binding buffer: (0.051 + 0.047 + 0.048 + 0.050) / 4 = 0.049, at 320 nm 0.040. It
# stands for the elution buffer and the strip too.
# Load, three samples at 1:5: (0.390 - 0.049) x 5 / 0.79875 = 2.13459 mg/mL; 300 µL: 640.376 µg.


def test_well_a1_by_hand(plate):
    ft = (0.118 - 0.049 - (0.042 - 0.040)) / 0.79875  # 0.083881 mg/mL
    w1 = (0.064 - 0.049) / 0.79875  # 0.018779
    e1 = (0.512 - 0.049 - (0.043 - 0.040)) / 0.79875  # 0.575900
    e2 = (0.431 - 0.049) / 0.79875  # 0.478247
    strip = (1.612 - 0.049) / 0.79875  # 1.956808
    bound = 640.37559 - ft * 330  # 612.695 µg
    freed = (e1 * 230 - w1 * 30) + (e2 * 180 - e1 * 30)  # 131.894 + 68.807
    seen = ft * 300 + w1 * 200 + e1 * 200 + e2 * 150 + strip * 230
    assert f"{of(plate, 'bound_ug', 'A1'):.4g}" == f"{bound:.4g}" == "612.7"
    assert f"{of(plate, 'freed_ug', 'A1'):.4g}" == f"{freed:.4g}" == "200.7"
    assert f"{of(plate, 'freed_of_bound', 'A1'):.4g}" == f"{freed / bound:.4g}" == "0.3276"
    assert f"{of(plate, 'closure', 'A1'):.4g}" == f"{seen / 640.37559:.4g}" == "1.04"
    assert f"{of(plate, 'capacity_mg_ml', 'A1'):.4g}" == f"{bound / 40:.4g}" == "15.32"
    assert f"{of(plate, 'log10_kp', 'A1'):.4g}" == f"{np.log10(bound / 40 / ft):.4g}" == "2.262"


def test_well_b3_by_hand_its_first_eluate_read_at_one_in_five(plate):
    ft = (0.131 - 0.049 - (0.041 - 0.040)) / 0.79875
    w1 = (0.069 - 0.049) / 0.79875
    # 2.871 AU lies beyond the range; the scatter was read undiluted, so that a fifth of it counts.
    e1 = (0.464 - 0.049 - (0.049 - 0.040) / 5) * 5 / 0.79875  # 2.586541
    e2 = (0.371 - 0.049) / 0.79875
    strip = (0.145 - 0.049) / 0.79875
    bound = 640.37559 - ft * 330
    freed = (e1 * 230 - w1 * 30) + (e2 * 180 - e1 * 30)
    seen = ft * 300 + w1 * 200 + e1 * 200 + e2 * 150 + strip * 230
    assert (
        f"{of(plate, 'collected_of_load', 'B3'):.4g}" == f"{(e1 * 200 + e2 * 150) / 640.37559:.4g}"
    )
    assert f"{of(plate, 'collected_of_load', 'B3'):.4g}" == "0.9022"
    assert f"{of(plate, 'freed_of_bound', 'B3'):.4g}" == f"{freed / bound:.4g}" == "0.9707"
    assert f"{of(plate, 'closure', 'B3'):.4g}" == f"{seen / 640.37559:.4g}" == "1.001"
    assert ("above_range", "e1") not in kinds(plate, "B3")


def test_well_c5_by_hand_turbid_and_without_a_strip(plate):
    ft = (0.158 - 0.049 - (0.042 - 0.040)) / 0.79875
    w1 = (0.081 - 0.049) / 0.79875
    e1 = (1.941 - 0.049 - (0.118 - 0.040)) / 0.79875
    e2 = (0.402 - 0.049) / 0.79875
    bound = 640.37559 - ft * 330
    freed = (e1 * 230 - w1 * 30) + (e2 * 180 - e1 * 30)
    # What is still held is the hold-up of the last fraction that was read, the second eluate.
    seen = ft * 300 + w1 * 200 + e1 * 200 + e2 * 180
    assert f"{of(plate, 'freed_of_bound', 'C5'):.4g}" == f"{freed / bound:.4g}" == "0.8933"
    assert f"{of(plate, 'collected_of_bound', 'C5'):.4g}" == (
        f"{(e1 * 200 + e2 * 150) / bound:.4g}"
    )
    assert f"{of(plate, 'closure', 'C5'):.4g}" == f"{seen / 640.37559:.4g}" == "0.9088"
    assert {("turbid", "e1"), ("not_read", "strip")} <= kinds(plate, "C5")
    assert ("closure", "") not in kinds(plate, "C5")


def test_uncertainty_of_a_well_by_another_library(plate, reduction):
    """First order by the library `uncertainties`, from the same inputs, written out in full."""
    from uncertainties import ufloat
    from uncertainties.umath import log10

    def read(value, blank):
        return ufloat(value, np.hypot(0.002, 0.02 * (value - blank)), "own")

    blank = ufloat(0.049, 0.004 / np.sqrt(4), "shared")
    other = blank + ufloat(0, 0.01, "shared")
    blank_320 = ufloat(0.040, 0.004 / np.sqrt(2), "shared")
    other_320 = blank_320 + ufloat(0, 0.01, "shared")
    common = ufloat(1.42, 0.03 * 1.42, "shared") * 0.5625 * ufloat(1, 0.02, "shared")

    def path():
        return common * ufloat(1, 0.01, "own")

    def stage(volume):
        return volume * ufloat(1, 0.01, "own")

    v = {"ft": stage(300), "w1": stage(200), "e1": stage(200), "e2": stage(150)}
    samples = [
        (ufloat(a, np.hypot(0.002, 0.02 * (a - 0.049)), "shared") - blank)
        * ufloat(5, 0.05, "shared")
        / (common * ufloat(1, 0.01, "shared"))
        for a in (0.389, 0.396, 0.385)
    ]
    load = sum(samples) / 3 * ufloat(1, 0.02, "shared")
    ft = (read(0.118, 0.049) - blank - (read(0.042, 0.040) - blank_320)) / path()
    w1 = (read(0.064, 0.049) - blank) / path()
    e1 = (read(0.512, 0.049) - other - (read(0.043, 0.040) - other_320)) / path()
    e2 = (read(0.431, 0.049) - other) / path()
    held = 30 * ufloat(1, 0.25, "own") * ufloat(1, 0.10, "shared")
    resin = 40 * ufloat(1, 0.04, "own") * ufloat(1, 0.05, "shared")
    bound = load * v["ft"] - ft * (v["ft"] + held)
    freed = (e1 * (v["e1"] + held) - w1 * held) + (e2 * (v["e2"] + held) - e1 * held)
    row = plate.inputs.wells.index("A1")
    for name, value in {
        "bound_ug": bound,
        "freed_of_bound": freed / bound,
        "collected_of_load": (e1 * v["e1"] + e2 * v["e2"]) / (load * v["ft"]),
        "capacity_mg_ml": bound / resin,
        "log10_kp": log10(bound / resin / ft),
    }.items():
        found: Uncertain = plate.quantities[name]
        parts = {"own": 0.0, "shared": 0.0}
        for variable, sd in value.error_components().items():
            parts[variable.tag] += sd**2
        assert found.value[row] == pytest.approx(value.n, rel=1e-6), name
        assert found.own[row] == pytest.approx(np.sqrt(parts["own"]), rel=1e-6), name
        assert found.shared[row] == pytest.approx(np.sqrt(parts["shared"]), rel=1e-6), name
    assert reduction.assay.recovery == "freed_of_bound"


def test_a_buffer_without_blanks_borrows_them_and_says_so(plate):
    texts = [flag.text for flag in plate.flags if flag.kind == "blank_borrowed"]
    assert texts == [
        "no blank of the buffer elution: blanks of others stand for it, less sure",
        "no blank of the buffer strip: blanks of others stand for it, less sure",
    ]
    sd = dict(zip(plate.inputs.blanks.names, plate.inputs.blanks.sd[:, 0], strict=True))
    assert sd["binding"] == pytest.approx(0.002)
    assert sd["elution"] == pytest.approx(np.hypot(0.002, 0.01))


def test_a_well_without_resin_is_balanced_and_given_nothing(plate, reduction):
    assert np.isnan(of(plate, "capacity_mg_ml", "H12"))
    assert of(plate, "closure", "H12") == pytest.approx(0.935, abs=0.001)
    assert [one.well for one in given(reduction)] == ["A1", "A2", "B2", "B3", "C4", "C5"]


def test_its_own_tidy_table_reduces_to_the_same(reduction, plate, tmp_path):
    from muntin.report.reduce_files import reads_text

    table = tmp_path / "reads.csv"
    table.write_text(reads_text(reduction.assay, reduction.reads), encoding="utf-8")
    (again,) = reduce_reads(open_study(FOLDER, reducing=True), table).plates
    for name, quantity in plate.quantities.items():
        np.testing.assert_array_equal(again.quantities[name].value, quantity.value)
        np.testing.assert_array_equal(again.quantities[name].total, quantity.total)
    assert again.flags == plate.flags


def test_results_join_the_study(tmp_path):
    from tests.test_cli import run

    study = tmp_path / "study"
    shutil.copytree(FOLDER, study)
    before = (study / "plates" / "plate-01.csv").read_bytes()
    result = run("reduce", study, "reads", "--json")
    assert result.exit_code == 0, result.output
    facts = json.loads(result.output)
    assert facts["recovery"] == "freed_of_bound"
    assert (study / "plates" / "plate-01.csv").read_bytes() == before
    read = open_study(study).readings("recovery").set_index("well")
    rows = csv.DictReader((study / "results" / "reduced-plate-01.csv").read_text().splitlines())
    for row in rows:
        assert read.loc[row["well"], "y"] == float(row["recovery"])
        assert read.loc[row["well"], "sd"] == float(row["recovery_sd"])
    assert len(read) == 6
    again = run("reduce", study, "reads", "--quiet")
    assert (again.exit_code, again.output) == (0, "")
