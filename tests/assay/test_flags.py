"""Flags and censoring: each planted fault is pointed out, and nothing is taken out."""

from __future__ import annotations

import numpy as np
import pytest

from muntin.assay.given import given
from tests.assay.studies import HEADING, READS, ROWS, STAGES, reduced


def with_reads(*changed: str, drop: tuple[str, ...] = ()) -> tuple[str, ...]:
    """The usual reads with rows changed by their first three cells, or added."""
    rows = {tuple(row.split(",")[:3]): row for row in READS}
    rows |= {tuple(row.split(",")[:3]): row for row in changed}
    return (HEADING, *(row for at, row in rows.items() if ",".join(at) not in drop))


def kinds(reduction, well="A1"):
    return {
        (flag.kind, flag.fraction)
        for plate in reduction.plates
        for flag in plate.flags
        if flag.well == well
    }


def plate_kinds(reduction):
    return {flag.kind for plate in reduction.plates for flag in plate.flags if not flag.well}


def of(reduction, name, well="A1"):
    (plate,) = reduction.plates
    return float(plate.quantities[name].value[plate.inputs.wells.index(well)])


def told(reduction, well="A1"):
    return next(one for one in given(reduction) if one.well == well)


# Load 2 mg/mL x 300 µL = 600 µg. A1: 0.1 mg/mL flows through, 200 µg are eluted, and strip and
# last hold-up hold 0.9 x 220 = 198 µg: 428 of 600.
def test_round_numbers(tmp_path):
    reduction = reduced(tmp_path)
    assert of(reduction, "loaded_ug") == pytest.approx(600.0)
    assert of(reduction, "bound_ug") == pytest.approx(600.0 - 0.1 * 320)
    assert of(reduction, "collected_of_load") == pytest.approx(200 / 600)
    assert of(reduction, "closure") == pytest.approx((30 + 200 + 0.9 * 220) / 600)
    assert told(reduction).value == "0.3333"


def test_closure_is_judged_by_its_own_uncertainty(tmp_path):
    reduction = reduced(tmp_path)
    (plate,) = reduction.plates
    closure = plate.quantities["closure"]
    row = plate.inputs.wells.index("A1")
    score = (1 - closure.value[row]) / closure.total[row]
    assert score > 3
    assert ("closure", "") in kinds(reduction)
    less_sure = reduced(tmp_path, closure_k=10.0, load_cv=0.1)
    assert ("closure", "") not in kinds(less_sure)
    text = next(f.text for f in plate.flags if f.well == "A1" and f.kind == "closure")
    assert text.endswith("; with so low a recovery: not eluted, or lost")
    assert told(reduction).value == "0.3333"


def test_a_read_beyond_the_range_is_a_censored_recovery(tmp_path):
    reduction = reduced(tmp_path, reads=with_reads("A1,e1,280,>3.5,"))
    assert ("above_range", "e1") in kinds(reduction)
    assert told(reduction).value == f">{3.45 * 200 / 600:.4f}"


def test_a_flow_through_beyond_the_range_makes_the_bound_recovery_higher_still(tmp_path):
    reads = with_reads("A1,ft,280,>0.5,")
    higher = reduced(tmp_path, reads=reads, recovery="freed_of_bound")
    assert told(higher).value.startswith(">")
    same = reduced(tmp_path, reads=reads, recovery="collected_of_load")
    assert told(same).value == "0.3333"


def test_a_load_beyond_the_range_makes_recoveries_lower_still(tmp_path):
    reduction = reduced(tmp_path, reads=with_reads("E1,load,280,>2.5,5"))
    assert told(reduction).value.startswith("<")
    assert "load_high" in plate_kinds(reduction)


def test_two_reads_that_pull_apart_leave_nothing_known(tmp_path):
    reads = with_reads("E1,load,280,>2.5,5", "A1,e1,280,>3.5,")
    one = told(reduced(tmp_path, reads=reads))
    assert one.value == ""
    assert one.why == (
        "a fraction that it needs was not read, or reads beyond the range pull apart"
    )


def test_eluates_below_the_range_are_a_recovery_below_their_limit(tmp_path):
    reduction = reduced(tmp_path)
    assert ("below_range", "e1") in kinds(reduction, "C3")
    assert told(reduction, "C3").value == f"<{0.05 * 200 / 600:.4f}"
    assert of(reduction, "collected_of_load", "C3") == pytest.approx(0.01 * 200 / 600)


def test_a_high_recovery_is_kept_as_it_is(tmp_path):
    reads = with_reads("B2,e1,280,1.95,", "B2,e1,280,1.95,", "E1,load,280,0.35,5")
    reduction = reduced(tmp_path, reads=reads, recovery="collected_of_bound", recovery_most=1.05)
    assert ("recovery_high", "") not in kinds(reduction, "A1")
    high = reduced(tmp_path, reads=with_reads("B2,e1,280,1.99,", "E1,load,280,0.35,5"))
    assert of(high, "collected_of_load", "B2") < 1.1
    over = reduced(tmp_path, reads=with_reads("B2,e1,280,1.99,", "E1,load,280,0.25,5"))
    assert of(over, "collected_of_load", "B2") == pytest.approx(1.94 * 200 / 300)
    assert ("recovery_high", "") in kinds(over, "B2")
    assert told(over, "B2").value == f"{1.94 * 200 / 300:.4f}"


def test_little_bound_is_pointed_out(tmp_path):
    reduction = reduced(
        tmp_path, reads=with_reads("A1,ft,280,1.85,"), recovery="collected_of_bound"
    )
    assert ("bound_small", "") in kinds(reduction)
    assert ("bound_small", "") not in kinds(reduction, "B2")


def test_a_recovery_that_no_study_could_use_stays_in_the_record(tmp_path):
    reads = with_reads("A1,ft,280,1.95,", "A1,e1,280,1.95,")
    one = told(reduced(tmp_path, reads=reads, recovery="collected_of_bound"))
    assert one.value == ""
    assert one.why.endswith("is no fraction that a study could use")


def test_turbid_wells(tmp_path):
    reads = with_reads("A1,e1,320,0.16,", "D1,e1,320,0.04,", "B2,e1,320,0.05,")
    reduction = reduced(tmp_path, reads=reads)
    assert ("turbid", "e1") in kinds(reduction)
    assert ("turbid", "e1") not in kinds(reduction, "B2")
    assert of(reduction, "collected_of_load") == pytest.approx((1.0 - 0.12) * 200 / 600)
    plain = reduced(tmp_path, reads=reads, scatter="none")
    assert of(plain, "collected_of_load") == pytest.approx(200 / 600)


def test_scatter_by_the_power_law_of_two_wavelengths(tmp_path):
    power = 3.0
    second = 0.12 * (320 / 350) ** power
    reads = with_reads(
        "A1,e1,320,0.16,", f"A1,e1,350,{0.04 + second:.6f},", "D1,e1,320,0.04,", "D1,e1,350,0.04,"
    )
    reduction = reduced(tmp_path, reads=reads, scatter="slope")
    at_280 = 0.12 * (320 / 280) ** power
    assert of(reduction, "collected_of_load") == pytest.approx((1.0 - at_280) * 200 / 600, rel=1e-5)


def test_the_water_band_gives_the_path_and_an_odd_one_is_pointed_out(tmp_path):
    reads = with_reads(
        "A1,e1,900,0.040,", "A1,e1,977,0.1075,", "B2,e1,900,0.04,", "B2,e1,977,0.13,"
    )
    reduction = reduced(tmp_path, reads=reads)
    # 0.0675 / 0.18 = 0.375 cm in place of 0.5 cm.
    assert of(reduction, "collected_of_load") == pytest.approx(0.5 / 0.375 * 200 / 600)
    assert ("path_odd", "e1") in kinds(reduction)
    assert ("path_odd", "e1") not in kinds(reduction, "B2")
    plain = reduced(tmp_path, reads=reads, path="geometry")
    assert of(plain, "collected_of_load") == pytest.approx(200 / 600)


def test_blanks_that_disagree(tmp_path):
    reduction = reduced(tmp_path, reads=with_reads("D1,ft,280,0.08,"))
    assert "blanks_disagree" in plate_kinds(reduction)
    assert "blanks_disagree" not in plate_kinds(reduced(tmp_path))


def test_blanks_go_by_the_buffer_of_each_well(tmp_path):
    rows = [row.replace("D1,blank,,,", "D1,blank,5,,") for row in ROWS]
    rows = [row.replace("D2,blank,,,", "D2,blank,6,,") for row in rows]
    stages = [STAGES[0], {**STAGES[1], "blank_by": ["ph"]}, STAGES[2]]
    reads = with_reads("D1,e1,280,0.050,", "D2,e1,280,0.070,", "D1,e1,320,,")
    reduction = reduced(tmp_path, rows=rows, stages=stages, reads=reads)
    assert of(reduction, "collected_of_load", "A1") == pytest.approx(1.00 * 200 / 600)
    assert of(reduction, "collected_of_load", "B2") == pytest.approx(1.78 * 200 / 600)
    borrowed = [f.text for f in reduction.plates[0].flags if f.kind == "blank_borrowed"]
    assert borrowed == ["no blank of the buffer e1, 7: blanks of others stand for it, less sure"]


def test_a_target_that_hold_up_puts_out_of_reach(tmp_path):
    fixed = {"resin_ul": 40.0, "hold_up_ul": 60.0}
    reduction = reduced(tmp_path, fixed=fixed)
    texts = [f.text for f in reduction.plates[0].flags if f.kind == "target_out_of_reach"]
    assert texts == [
        "the target 0.8 is out of reach: 200 µL over a hold-up of 60 µL collect at most 0.769 of "
        "what is bound, even where nothing binds any more"
    ]
    just = {"resin_ul": 40.0, "hold_up_ul": 49.9}
    assert "target_out_of_reach" not in plate_kinds(reduced(tmp_path, fixed=just))
    freed = reduced(tmp_path, fixed=fixed, recovery="freed_of_bound")
    assert "target_out_of_reach" not in plate_kinds(freed)


def test_more_weighed_than_the_well_held(tmp_path):
    reads = (f"{HEADING},volume_ul", *(f"{row}," for row in READS))
    reads = tuple(row.replace("A1,e1,280,1.050,,", "A1,e1,280,1.050,,230") for row in reads)
    assert ("hold_up_negative", "") in kinds(reduced(tmp_path, reads=reads))


def perimeter_study(shift):
    """Twenty wells, half of them on the perimeter, whose strips are off there."""
    wells = [f"{row}{column}" for row in "ABCDE" for column in (1, 2, 3, 4)]
    rows = [f"{well},test,6,200," for well in wells]
    rows += ["H2,blank,,,", "H3,blank,,,", "H5,load,,,"]
    reads = [f"{w},{f},280,0.05," for w in ("H2", "H3") for f in ("ft", "e1", "strip")]
    reads.append("H5,load,280,0.450,5")
    rng = np.random.default_rng(1)
    for well in wells:
        outer = well[0] == "A" or well[1:] == "1"
        lost = shift if outer else 0.0
        noise = 0.01 * rng.standard_normal()
        reads += [f"{well},ft,280,0.15,", f"{well},e1,280,1.85,"]
        reads.append(f"{well},strip,280,{0.95 - lost + noise:.4f},")
    return {"rows": ("well,role,ph,salt,recovery", *rows), "reads": (HEADING, *reads)}


@pytest.mark.parametrize(("shift", "seen"), [(0.15, True), (0.0, False)])
def test_an_effect_of_the_perimeter(tmp_path, shift, seen):
    reduction = reduced(tmp_path, **perimeter_study(shift))
    assert ("perimeter" in plate_kinds(reduction)) == seen


def test_a_volume_of_its_own_for_a_well(tmp_path):
    rows = ["well,role,ph,salt,recovery,e1_ul", *(f"{row}," for row in ROWS[1:])]
    rows[1] = "A1,test,5,100,,150"
    reduction = reduced(tmp_path, rows=rows)
    assert of(reduction, "collected_ug") == pytest.approx(150.0)
    assert of(reduction, "collected_ug", "B2") == pytest.approx(1.8 * 200)


def test_readings_that_a_table_holds_are_never_replaced(tmp_path):
    rows = list(ROWS)
    rows[1], rows[2] = "A1,test,5,100,0.33", "B2,test,6,300,0.55"
    reduction = reduced(tmp_path, rows=rows)
    same, other = told(reduction, "A1"), told(reduction, "B2")
    assert (same.value, same.agrees) == ("0.33", True)
    assert float(same.sd) > 0
    assert (other.value, other.why) == ("", "its table holds 0.55, the reads give 0.6000")


def test_per_cent(tmp_path):
    one = told(reduced(tmp_path, target={"unit": "%", "at_least": 80}))
    assert one.value == "33.33"
    assert float(one.sd) > 0.1


def test_a_reading_in_place_of_a_censored_one_stands(tmp_path):
    rows = list(ROWS)
    rows[3] = "C3,test,7,200,0.017"
    one = told(reduced(tmp_path, rows=rows), "C3")
    assert (one.value, one.why) == ("", "its table holds 0.017, the reads give less than 0.0167")


def test_a_standard_uncertainty_that_a_table_holds_stands(tmp_path):
    rows = ["well,role,ph,salt,recovery,recovery_sd", *(f"{row}," for row in ROWS[1:])]
    rows[1] = "A1,test,5,100,0.333,0.05"
    one = told(reduced(tmp_path, rows=rows))
    assert (one.value, one.why) == (
        "",
        "its table holds the same reading with a standard uncertainty of its own",
    )


def test_a_bound_of_closure_is_not_flagged_on_the_side_on_which_it_says_nothing(tmp_path):
    below = reduced(tmp_path, reads=with_reads("A1,e1,280,>0.9,"))
    assert of(below, "closure") < 0.9
    assert {("above_range", "e1")} == {
        k for k in kinds(below) if k[0] in ("above_range", "closure")
    }
    above = with_reads("B2,e1,280,1.99,", "E1,load,280,0.25,5")
    assert ("closure", "") in kinds(reduced(tmp_path, reads=above), "B2")
    load_over = with_reads("B2,e1,280,1.99,", "E1,load,280,>0.25,5")
    unknown = reduced(tmp_path, reads=load_over)
    assert of(unknown, "closure", "B2") > 1.5
    assert not {("closure", ""), ("recovery_high", "")} & kinds(unknown, "B2")


def test_a_read_far_below_its_blank_is_pointed_out_and_used(tmp_path):
    reduction = reduced(tmp_path, reads=with_reads("A1,e1,280,0,"))
    assert ("below_blank", "e1") in kinds(reduction)
    assert of(reduction, "collected_of_load") < 0
    near = reduced(tmp_path, reads=with_reads("A1,e1,280,0.048,"))
    assert ("below_range", "e1") in kinds(near)
    assert ("below_blank", "e1") not in kinds(near)
