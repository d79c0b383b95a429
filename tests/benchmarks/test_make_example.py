from collections import Counter

import pytest

from muntin.assay.given import given
from muntin.assay.reduction import reduce_reads
from muntin.bench import well_names
from muntin.record import open_study
from tests.benchmarks import example_reads
from tests.benchmarks.make_example import EXAMPLE, PLATES, TARGET, tables, true_process, write


def test_the_example_is_what_its_seeds_give(tmp_path):
    write(tmp_path)
    names = sorted(path.name for path in tmp_path.iterdir())
    assert names == [f"{name}.csv" for name in PLATES]
    for name in names:
        kept = (EXAMPLE / "plates" / name).read_text(encoding="utf-8")
        assert (tmp_path / name).read_text(encoding="utf-8") == kept


def test_the_reads_are_what_their_seed_gives(tmp_path):
    example_reads.write(tmp_path, tables())
    for name in PLATES:
        kept = (EXAMPLE / "reads" / f"{name}.csv").read_text(encoding="utf-8")
        assert (tmp_path / f"{name}.csv").read_text(encoding="utf-8") == kept


def test_the_reads_reduce_to_the_recoveries_of_the_plate_tables():
    reduction = reduce_reads(open_study(EXAMPLE, reducing=True), EXAMPLE / "reads")
    found = given(reduction)
    assert [one.agrees for one in found].count(True) == 43
    assert [(one.plate, one.well, one.why) for one in found if not one.agrees] == [
        ("plate-01", "G12", "left out in its plate table")
    ]
    flagged = [
        (flag.plate, flag.well)
        for plate in reduction.plates
        for flag in plate.flags
        if flag.kind != "below_range"
    ]
    assert flagged == [("plate-01", "G12")]


def test_the_readme_tells_the_truth():
    process = true_process()
    readme = (EXAMPLE / "README.md").read_text(encoding="utf-8")
    assert f"{process.window_share(TARGET):.1%}".replace("%", " %") in readme
    law = (
        f"Kp = {process.a:.2f} (salt / 100 mM)^-{process.nu:.2f} "
        f"10^(-{process.b:.3f} (pH - 6)) + {process.hydrophobic:.4f} 10^({process.k:.5f} salt)"
    )
    assert law in readme
    assert f"{process.resin:.1f} µL resin, {process.hold_up:.1f} µL hold-up" in readme
    assert f"√({process.noise_floor:.4f}² + ({process.noise_cv:.4f} r)²)" in readme


@pytest.mark.parametrize(("name", "tests", "bridges"), [("plate-01", 24, 0), ("plate-02", 16, 4)])
def test_each_plate_holds_its_wells_in_plate_order(name, tests, bridges):
    rows = dict(tables())[name]
    count = Counter(row["role"] for row in rows)
    assert (count["test"], count["bridge"]) == (tests, bridges)
    assert (count["blank"], count["load"], count["no_resin"]) == (2, 4, 2)
    order = [well_names(96).index(row["well"]) for row in rows]
    assert order == sorted(set(order))


def test_bridging_wells_repeat_a_pass_and_a_fail_of_the_first_plate():
    first, second = (rows for _, rows in tables())
    bridges = {(r["elution_ph"], r["salt"]) for r in second if r["role"] == "bridge"}
    verdicts = set()
    for condition in bridges:
        readings = [
            float(r["recovery"])
            for r in first
            if r["role"] == "test" and (r["elution_ph"], r["salt"]) == condition
        ]
        passed = {reading >= TARGET for reading in readings}
        assert len(passed) == 1
        verdicts |= passed
    assert verdicts == {True, False}


def test_a_spoiled_well_keeps_its_reading_and_its_reason():
    rows = [row for _, table in tables() for row in table if row.get("exclude")]
    assert len(rows) == sum(len(plan.spoiled) for plan in PLATES.values()) > 0
    for row in rows:
        truth = true_process().recovery(float(row["elution_ph"]), float(row["salt"]))
        assert float(row["recovery"]) < 0.7 * float(truth)


@pytest.mark.parametrize(
    ("name", "wells", "read"), [("fab-elution", 60, 43), ("reactor-yield", 14, 14)]
)
def test_the_examples_are_sound_studies(name, wells, read):
    study = open_study(EXAMPLE.parent / name)
    assert len(study.wells) == wells
    (response,) = study.definition.judged
    assert len(study.readings(response.name)) == read
    for factor in study.definition.factors:
        assert study.readings(response.name)[factor.name].between(factor.low, factor.high).all()
