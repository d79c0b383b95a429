"""What measured stocks make of wells: hand calculations, and a balance of what goes in."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from muntin.bench.mixing import Mix, Mixer
from muntin.bench.recipe import Refusal
from muntin.record import StudyFaults, open_study
from muntin.record.bottles import named_bottle
from muntin.record.definition import Definition
from muntin.record.mixes import mixes_of, poured
from muntin.record.stock_levels import stock_levels
from muntin.record.stocks import Stock
from tests.bench.bottled import BENCH, HIGH, LOW, bench_text
from tests.record.conftest import STUDY
from tests.studies import PH, RESIN, SALT, tables

MID = {"name": "mid salt", "per": "ph", "holds": {"salt": 250}}
HEAD = "bottle,factor,target,measured"
PLATE = """\
well,ph,salt,resin,recovery,hcp
A1,5.5,100,Alpha,0.83,40
A2,5.5,500,Alpha,0.91,40
A3,6.0,300,Alpha,0.81,40
A4,6.5,250,Alpha,0.85,40
"""


def study_of(folder: Path, *rows: str, stocks: Sequence[Any] = (LOW, HIGH), plate: str = PLATE):
    """A study with bottles of each pH, whose stocks/plate-01.csv has these rows."""
    files = {
        "study.toml": f"{STUDY}\n{bench_text(stocks=list(stocks), protein_mg_per_ml=None)}",
        "plates/plate-01.csv": plate,
        "stocks/plate-01.csv": "\n".join([HEAD, *rows]) + "\n",
    }
    for name, content in files.items():
        (folder / name).parent.mkdir(parents=True, exist_ok=True)
        (folder / name).write_text(content, encoding="utf-8")
    return open_study(folder)


def lines_of(folder: Path, *rows: str, **given_: Any) -> list[str]:
    with pytest.raises(StudyFaults) as raised:
        study_of(folder, *rows, **given_)
    return raised.value.lines()


def said(study: Any) -> list[str]:
    return [notice for notice in study.notices if notice.startswith("stocks/")]


def test_wells_follow_the_bottles_that_they_are_blended_from(tmp_path: Path) -> None:
    study = study_of(
        tmp_path,
        "high salt (ph 5.5),salt,500,489",
        "high salt (ph 5.5),ph,5.5,5.62",
        "low salt (ph 5.5),ph,5.5,5.42",
    )
    wells = study.wells.set_index("well")
    # 4 parts of 0 and 1 part of 489 mM; 4 parts of pH 5.42 and 1 part of pH 5.62.
    assert wells.loc["A1", "salt"] == pytest.approx(97.8)
    assert wells.loc["A1", "ph"] == pytest.approx(5.46)
    assert list(wells.loc["A2", ["salt", "ph"]]) == pytest.approx([489, 5.62])
    assert list(wells.loc["A3", ["salt", "ph"]]) == [300, 6.0]
    assert list(wells["salt_target"]) == [100, 500, 300, 250]
    # The pipette errs in what is blended, not in a bottle that goes in undiluted, nor in the pH.
    assert list(wells["salt_measured"]) == [False, True, False, False]
    assert list(wells["ph_measured"]) == [True, True, False, False]
    assert said(study) == []


def test_a_well_of_its_own_and_a_liquid_of_its_own_come_first(tmp_path: Path) -> None:
    plate = PLATE.replace("well,ph,salt", "well,ph,salt,salt_measured")
    plate = plate.replace("100,Al", "100,104,Al").replace("0,Alpha", "0,,Alpha")
    study = study_of(
        tmp_path,
        "high salt (ph 6.0),salt,500,480",
        "high salt (ph 5.5),salt,500,480",
        ",salt,300,297",
        plate=plate,
    )
    wells = study.wells.set_index("well")
    assert list(wells["salt"]) == [104, 480, 297, 250]
    assert list(wells["salt_measured"]) == [True, True, True, False]


def test_what_is_not_known_of_the_other_bottle_is_said(tmp_path: Path) -> None:
    study = study_of(tmp_path, "high salt (ph 5.5),ph,5.5,5.62", "high salt (ph 6.0),ph,6,6.1")
    assert list(study.wells["ph"]) == [5.5, 5.62, 6.0, 6.5]
    assert said(study) == [
        "stocks/plate-01.csv: ph is taken for the target in 2 wells of plate-01, as it is not "
        "known what it measured in low salt (ph 5.5), low salt (ph 6.0)"
    ]


def test_of_several_ways_to_blend_it_is_that_of_the_sheets(tmp_path: Path) -> None:
    rows = ("high salt (ph 6.0),salt,500,480", "mid salt (ph 6.0),salt,250,260")
    plate = PLATE.replace("A2,5.5,500", "A2,6.0,490")
    study = study_of(tmp_path, *rows, stocks=(LOW, MID, HIGH), plate=plate)
    # The mix whose smallest share is largest: 490 of 24 parts of high and 1 of mid, not 49 and 1 of
    # low; 300 of 3 parts of high and 2 of low, not 1 and 4 of mid.
    assert list(study.wells["salt"]) == pytest.approx([100, 471.2, 288, 250])


def test_what_no_blend_makes_is_said(tmp_path: Path) -> None:
    study = study_of(tmp_path, "high salt (ph 6.0),salt,500,480", stocks=(HIGH,))
    assert list(study.wells["salt"]) == [100, 500, 300, 250]
    assert said(study) == [
        "stocks/plate-01.csv: 1 well of plate-01 can be no blend of the bottles of study.toml, "
        "[bench]: salt is taken for the target there; what such wells measured goes to "
        "salt_measured of the plate table"
    ]


def test_what_no_well_rests_on_is_said(tmp_path: Path) -> None:
    rows = ("high salt (ph 7.0),salt,500,480", ",salt,0,3", ",salt,700,705")
    assert said(study_of(tmp_path, *rows)) == [
        "stocks/plate-01.csv, row 3: no well of plate-01 has salt 0; the stock is not used; if it "
        "is a bottle that wells are blended from, name it in the column bottle",
        "stocks/plate-01.csv, row 4: no well of plate-01 has salt 700; the stock is not used",
        "stocks/plate-01.csv: no well of plate-01 is blended from high salt (ph 7.0); what was "
        "measured there is not used",
    ]


def test_a_bottle_far_off_is_used_and_pointed_out(tmp_path: Path) -> None:
    study = study_of(tmp_path, "high salt (ph 6.0),salt,500,400")
    assert study.wells["salt"][2] == pytest.approx(240)
    assert said(study) == [
        "stocks/plate-01.csv, row 2: high salt (ph 6.0) measured 400, far from its target of salt, "
        "500; it is used as it stands"
    ]


def test_a_misspelt_heading_is_named_once(tmp_path: Path) -> None:
    study = study_of(tmp_path, "high salt (ph 6.0),salt,500,480")
    path = tmp_path / "stocks" / "plate-01.csv"
    path.write_text(path.read_text().replace("bottle,", "Bottles,"))
    with pytest.raises(StudyFaults) as raised:
        open_study(study.folder)
    assert raised.value.lines() == [
        "stocks/plate-01.csv, column Bottles: resembles bottle, which this table lacks (rename "
        "the column)"
    ]


def test_a_bottle_of_nothing_may_hold_a_little(tmp_path: Path) -> None:
    rows = ("low salt (ph 5.5),salt,0,5", "high salt (ph 5.5),salt,500,490")
    wells = study_of(tmp_path, *rows).wells
    assert wells["salt"][0] == pytest.approx(0.8 * 5 + 0.2 * 490)


def test_water_dilutes_salt_and_not_the_ph(tmp_path: Path) -> None:
    rows = ("high salt (ph 5.5),ph,5.5,5.62", "high salt (ph 5.5),salt,500,500")
    wells = study_of(tmp_path, *rows, stocks=(HIGH, {"name": "water", "holds": {}})).wells
    assert list(wells["ph"][:2]) == pytest.approx([5.62, 5.62])
    # What goes in undiluted and was measured is known, also where it measured what it should.
    assert list(wells["salt"][:2]) == [100, 500]
    assert list(wells["salt_measured"][:2]) == [False, True]


def test_a_liquid_far_off_is_one_fault_also_beside_bottles(tmp_path: Path) -> None:
    rows = ("high salt (ph 6.0),salt,500,480", ",salt,300,-50")
    (line,) = lines_of(tmp_path, *rows)
    assert line.startswith("stocks/plate-01.csv, row 3, column measured: -50 lies outside")


AT = "stocks/plate-01.csv, row 2, column"
FAULTS = {
    "no bottle": (
        "high slat (ph 5.5),salt,500,489",
        f'{AT} bottle: "high slat (ph 5.5)" is not a bottle of study.toml, [bench] '
        "(one is called high salt (ph 4.5))",
    ),
    "the stock alone": (
        "high salt,salt,500,489",
        f'{AT} bottle: "high salt" is not a bottle of study.toml, [bench] '
        "(one is called high salt (ph 4.5))",
    ),
    "another target": (
        "high salt (ph 5.5),salt,400,389",
        f"{AT} target: 400 is not what high salt (ph 5.5) holds: 500 mM (study.toml, bench, "
        "stocks)",
    ),
    "another level": (
        "high salt (ph 5.5),ph,5.6,5.6",
        f"{AT} target: 5.6 is not what high salt (ph 5.5) holds: 5.5 (study.toml, bench, stocks)",
    ),
    "a slip of a digit": (
        "high salt (ph 5.5),salt,500,48.9",
        f"{AT} measured: 48.9 lies too far from the target for a bottle of it, outside 50 to 950 "
        "mM",
    ),
}


@pytest.mark.parametrize(("row", "line"), FAULTS.values(), ids=FAULTS)
def test_faults_of_bottles(tmp_path: Path, row: str, line: str) -> None:
    assert lines_of(tmp_path, row) == [line]


@pytest.mark.parametrize("bottle", ["", "high salt (ph 5.5)"])
def test_a_bottle_has_one_value(tmp_path: Path, bottle: str) -> None:
    (line,) = lines_of(
        tmp_path, "high salt (ph 5.5),salt,500,489", f"{bottle},salt,500,480", plate=PLATE
    )
    if bottle:
        assert "row 3, column target: 500 of high salt (ph 5.5) has a row of its own alr" in line
    else:
        assert "row 3, column target: 500 is already the target of another stock of salt" in line
        assert line.endswith("(column bottle tells bottles apart)")


def test_without_stocks_there_is_no_bottle(tmp_path: Path) -> None:
    (line,) = lines_of(tmp_path, "high,salt,500,489", stocks=())
    assert line == f'{AT} bottle: "high" names a bottle, but study.toml, bench, has no stocks'


def test_what_a_bottle_carries_beyond_the_range_is_a_fault_of_the_well(tmp_path: Path) -> None:
    strong = {**HIGH, "holds": {"salt": 900}}
    plate = PLATE.replace("5.5,500", "5.5,900")
    row = "high salt (ph 5.5),salt,900,985"
    (line,) = lines_of(tmp_path, row, stocks=(LOW, strong), plate=plate)
    assert line == (
        "plates/plate-01.csv, row 3, well A2, column salt: 900 comes to 985 in the well, outside "
        "-10 to 910 mM, the range and a step (what its bottles measured, in stocks/)"
    )


def test_a_study_at_fault_says_nothing_of_its_bottles(tmp_path: Path) -> None:
    study_of(tmp_path, "high salt (ph 5.5),salt,500,489")
    text = (tmp_path / "study.toml").read_text().replace("step = 0.1", "step = 9")
    (tmp_path / "study.toml").write_text(text)
    with pytest.raises(StudyFaults) as raised:
        open_study(tmp_path)
    assert any("step" in line for line in raised.value.lines())
    assert not [line for line in raised.value.lines() if line.startswith("stocks/")]


@pytest.mark.parametrize(
    ("name", "found"),
    [
        ("High Salt (PH 5.5)", "high salt (pH 5.5)"),
        ("high salt(ph5.5)", "high salt (pH 5.5)"),
        ("high salt (ph 5.50)", None),
        ("high salt (ph nan)", None),
        ("high salt (resin Alpha)", None),
        ("dye (resin Alpha)", "dye (resin Alpha)"),
        ("dye (resin Gamma)", "dye (resin Gamma)"),
        ("dye (resin Delta)", None),
        ("water", "water"),
        ("high salt", "high salt (pH 6.0)"),
        ("", None),
    ],
)
def test_names_of_bottles(name: str, found: str | None) -> None:
    dye = {"name": "dye", "per": "resin", "holds": {"salt": 10}}
    bench = {"ph_factor": "ph", "stocks": [LOW, HIGH, dye, {"name": "water"}]}
    factors = [{**PH, "step": 0.1}, SALT, RESIN]
    definition = Definition.model_validate(tables(factors=factors) | {"bench": bench})
    bottle = named_bottle(definition, name, {"ph": 6.0})
    assert (None if bottle is None else bottle.name) == found


@given(
    salt=st.integers(0, 50).map(lambda n: 10.0 * n),
    ph=st.sampled_from([5.0, 5.5, 6.0]),
    off=st.tuples(*[st.floats(-0.2, 0.2)] * 2, *[st.floats(-20.0, 20.0)] * 2),
)
@settings(deadline=None, derandomize=True, max_examples=60)
def test_levels_are_those_of_the_volumes_poured_together(
    salt: float, ph: float, off: tuple[float, ...]
) -> None:
    bench = {"ph_factor": "ph", "stocks": [LOW, HIGH]}
    definition = Definition.model_validate(tables() | {"bench": bench})
    names = [f"{n} salt (pH {ph:.1f})" for n in ("low", "high")]
    held = {"ph": (ph + off[0], ph + off[1]), "salt": (0.0 + off[2], 500.0 + off[3])}
    targets = {"ph": (ph, ph), "salt": (0.0, 500.0)}
    stocks = [
        Stock(factor, targets[factor][k], held[factor][k], "stocks/plate-01.csv", "row 2", names[k])
        for factor in ("ph", "salt")
        for k in (0, 1)
    ]
    made = stock_levels(definition, pd.DataFrame({"ph": [ph], "salt": [salt]}), stocks)
    # 1000 parts: so many of the high-salt bottle that the target is met if it holds 500 mM.
    high = 2.0 * salt
    poured = [((1000.0 - high) * low + high * top) / 1000.0 for low, top in held.values()]
    kept = np.where(np.isfinite(made.values[0]), made.values[0], [ph, salt])
    np.testing.assert_allclose(kept, poured, atol=1e-6)


@given(
    st.integers(0, 90).map(lambda n: 10.0 * n),
    st.sampled_from([(LOW, HIGH), (LOW, MID, HIGH), (HIGH, {"name": "water"}), (MID, HIGH)]),
    st.sampled_from([None, 5, 60, 200]),
    st.sampled_from([0.5, 5.0, 60.0]),
)
# Of seven steps of 60 µL low and mid make 86 mM, which is too far off; low and high make 71.
@example(70.0, (LOW, {**MID, "holds": {"salt": 300}}, HIGH), 5, 60.0)
@settings(deadline=None, derandomize=True, max_examples=120)
def test_the_mix_is_the_one_of_the_sheets(
    salt: float, stocks: Any, floor: float, step: float
) -> None:
    keys = {**BENCH, "stocks": stocks, "pipette_floor_ul": floor, "pipette_step_ul": step}
    # Steps of 10 mM: where the pipette's are large the best mix may come out too far off.
    factors = [PH, {**SALT, "low": 0, "high": 900, "step": 10}]
    definition = Definition.model_validate(tables(factors=factors) | {"bench": keys})
    held = {"ph": 5.5, "salt": salt}
    mixes, mix = mixes_of(definition, held), Mixer(definition).mix(held)
    shares = poured(definition, mixes)
    if shares is None:
        assert isinstance(mix, Refusal)
    else:
        pairs = zip(mixes.bottles, shares.tolist(), strict=True)
        assert isinstance(mix, Mix)
        assert dict(mix.recipe.parts) == {b.name: share for b, share in pairs if share > 0}
