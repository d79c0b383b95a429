"""Wells of the plate table without reads, reads of wells that it does not name: none in silence."""

from __future__ import annotations

from tests.assay.studies import HEADING, READS, ROWS, reduced


def renamed(well: str, other: str) -> list[str]:
    """The reads, those of one well under the name of another."""
    return [HEADING, *(r.replace(f"{well},", f"{other},", 1) for r in READS)]


def test_wells_without_reads_are_named_with_their_roles(tmp_path):
    rows = [*ROWS, "A6,test,5,300,", "E2,load,,,", "D3,blank,,,", "H1,water,,,"]
    reduction = reduced(tmp_path, rows=rows)
    assert reduction.notices == (
        "plate-01: wells of the plate table without reads: A6 (test), E2 (load), D3 (blank)",
    )
    entered = reduced(tmp_path / "entered", rows=rows, load_mg_ml=2.0)
    assert entered.notices == (
        "plate-01: wells of the plate table without reads: A6 (test), D3 (blank)",
    )


def test_a_well_that_was_left_out_needs_no_read(tmp_path):
    rows = [ROWS[0] + ",exclude", *(f"{row}," for row in ROWS[1:]), "A6,test,5,300,,dropped"]
    assert reduced(tmp_path, rows=rows).notices == ()


def test_a_well_read_under_the_name_of_another_of_the_table(tmp_path):
    """B2 went by the name of A1: its reads would be averaged with those of A1 without a word."""
    told, averaged = reduced(tmp_path, reads=renamed("B2", "A1")).notices
    assert "with several reads at one dilution, whose mean is taken (A1 " in averaged
    assert told == (
        "plate-01: wells of the plate table without reads: B2 (test); A1 has more reads of one "
        "sample than others: is a well misnamed?"
    )


def test_a_well_read_under_a_name_that_the_table_does_not_have(tmp_path):
    rows = [*ROWS, "G5,test,6,200,"]
    assert reduced(tmp_path, rows=rows, reads=renamed("A1", "A7")).notices == (
        "plate-01: wells of the plate table without reads: A1 (test), G5 (test)",
        "plate-01: reads of 1 well that its plate table does not name are passed over (A7); is A7 "
        "meant to be A1?",
    )


def test_a_plate_that_was_not_read_is_told_elsewhere(tmp_path):
    plates = tmp_path / "plates"
    plates.mkdir()
    (plates / "plate-02.csv").write_text("\n".join(ROWS) + "\n")
    reads = (f"plate,{HEADING}", *(f"plate-01,{read}" for read in READS))
    assert reduced(tmp_path, reads=reads).notices == ()
