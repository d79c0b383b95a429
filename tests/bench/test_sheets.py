"""Sheets of a plan: every volume adds up, whatever the plan, the bottles and the pipette."""

from __future__ import annotations

from collections import Counter
from decimal import Decimal
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from muntin.bench import lay_out, well_names
from muntin.bench.gaps import gaps
from muntin.bench.sheets import Sheets, prepare
from muntin.bench.transfers import Transfer
from muntin.record import StudyFaults
from tests.bench.bottled import BENCH, HIGH, LOW, ROWS, bottled, opened, write_plan
from tests.studies import LOAD, PH, read, spread, written

QUICK = settings(
    deadline=None,
    derandomize=True,
    max_examples=60,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)
ROLES = ["test", "test", "test", "bridge", "reference", "blank", "load", "no_resin", "water"]
LOADED = {"test", "bridge", "reference", "load", "no_resin"}
WET = {"test", "bridge", "reference", "blank", "no_resin"}
CONTROL = {"ph": 6.0, "salt": 250}


@st.composite
def plans(draw: st.DrawFn) -> dict[str, Any]:
    """A plan with its layout, bottles and pipette."""
    roles = draw(st.lists(st.sampled_from(ROLES), min_size=1, max_size=40))
    informing = {"test", "bridge", "reference"}
    ph = st.integers(0, 4).map(lambda n: 4.5 + 0.5 * n)
    salt = st.integers(0, 8).map(lambda n: 50 + 50 * n)
    keys = [draw(st.tuples(ph, salt)) if role in informing else None for role in roles]
    by = draw(st.sampled_from(["well", "row", "column"]))
    wells = lay_out(
        roles,
        plate=96,
        rng=np.random.default_rng(draw(st.integers(0, 99))),
        prepared_by=by,
        stocks=[None if key is None else key[0] for key in keys],
    )
    # A bridging well must repeat what was read; the small study's plate holds few conditions.
    roles = ["test" if role == "bridge" else role for role in roles]
    pairs = [key or ("", "") for key in keys]
    rows = [(w, r, *k) for w, r, k in zip(wells, roles, pairs, strict=True)]
    step = draw(st.sampled_from([0.1, 0.5, 1]))
    return {
        "rows": rows,
        "plan": f'[plan]\nprepared_by = "{by}"\n',
        "well_ul": draw(st.sampled_from([200, 333, 400, 750])),
        "pipette_step_ul": step,
        "pipette_floor_ul": draw(st.sampled_from([None, 2, 5])),
        "dead_volume_ul": draw(st.sampled_from([None, 0, 1500, 12.3])),
        "protein_mg_per_ml": draw(st.sampled_from([1.3, 2.0, 3.7])),
        "control_condition": draw(st.sampled_from([None, CONTROL])),
        "stocks": [LOW, {**HIGH, "holds": {"salt": draw(st.sampled_from([450, 500, 730]))}}],
    }


@given(plans())
@QUICK
def test_every_volume_adds_up(
    tmp_path_factory: pytest.TempPathFactory, plan: dict[str, Any]
) -> None:
    sheets = prepare(opened(tmp_path_factory.mktemp("study"), **plan))
    step = Decimal(str(plan["pipette_step_ul"]))
    drawn: dict[str, dict[str, Decimal]] = {}
    for t in sheets.transfers:
        assert t.stock not in drawn.setdefault(t.well, {})
        drawn[t.well][t.stock] = t.steps * step
        assert t.steps * step >= Decimal(str(plan["pipette_floor_ul"] or step))
    _check_totals(sheets, plan, step)
    _check_wells(plan, drawn)
    _check_load(sheets, plan, drawn)


def _check_totals(sheets: Sheets, plan: dict[str, Any], step: Decimal) -> None:
    """Stocks used are the totals listed, to the last step."""
    used: Counter[str] = Counter()
    for t in sheets.transfers:
        used[t.stock] += t.steps
    assert {t.stock: t.listed_ul for t in sheets.totals} == {s: n * step for s, n in used.items()}
    dead = plan["dead_volume_ul"]
    for total in sheets.totals:
        assert total.needed_ul - total.listed_ul == (0 if dead is None else Decimal(str(dead)))
        assert total.wells == sum(t.stock == total.stock for t in sheets.transfers)


def _check_wells(plan: dict[str, Any], drawn: dict[str, dict[str, Decimal]]) -> None:
    """Each well gets its volume, of bottles of its own pH, and the salt that was asked."""
    strong = plan["stocks"][1]["holds"]["salt"]
    by = plan["plan"].split('"')[1]
    lines = {(w[0] if by == "row" else w[1:]): k for w, r, *k in plan["rows"] if k[0] != ""}
    for well, role, ph, salt in plan["rows"]:
        liquid = {s: v for s, v in drawn.get(well, {}).items() if s != "load"}
        if ph == "" and plan["control_condition"] and role in WET:
            ph, salt = CONTROL["ph"], CONTROL["salt"]
            fed = None if by == "well" else lines.get(well[0] if by == "row" else well[1:])
            ph = ph if fed is None else fed[0]
        if ph == "":
            assert liquid == {}
            continue
        assert sum(liquid.values()) == Decimal(str(plan["well_ul"]))
        assert all(stock.endswith(f"(pH {ph:.1f})") for stock in liquid)
        made = strong * liquid.get(f"high salt (pH {ph:.1f})", Decimal(0)) / plan["well_ul"]
        # Rounding moves it by less than one pipette step.
        assert abs(made - salt) <= strong * Decimal(str(plan["pipette_step_ul"])) / plan["well_ul"]


def _check_load(sheets: Sheets, plan: dict[str, Any], drawn: dict[str, dict[str, Decimal]]) -> None:
    """The protein is that of the plan, each well to half a step."""
    loaded = [well for well, role, *_ in plan["rows"] if role in LOADED]
    assert {w for w, of in drawn.items() if "load" in of} == {*loaded}
    strength, half = plan["protein_mg_per_ml"], plan["pipette_step_ul"] / 2
    for well in loaded:
        assert abs(float(drawn[well]["load"]) - 250 / strength) <= half + 1e-9
    assert sheets.load is not None
    assert sheets.load.needed_mg == pytest.approx(0.25 * len(loaded))
    assert sheets.load.measured_mg == pytest.approx(
        sum(float(drawn[w]["load"]) for w in loaded) * strength / 1000
    )


def test_the_order_of_work_is_load_then_bottle_by_bottle(tmp_path: Path) -> None:
    sheets = prepare(opened(tmp_path))
    stocks = [*dict.fromkeys(t.stock for t in sheets.transfers)]
    assert stocks == [
        "load",
        "low salt (pH 4.5)",
        "high salt (pH 4.5)",
        "low salt (pH 5.0)",
        "high salt (pH 5.0)",
    ]
    assert [t for t in sheets.transfers if t.stock == "high salt (pH 5.0)"] == [
        Transfer("high salt (pH 5.0)", "A1", 160),
        Transfer("high salt (pH 5.0)", "A2", 640),
        Transfer("high salt (pH 5.0)", "C4", 160),
    ]
    assert [of.wells for of in sheets.mixes] == [("A1", "C4"), ("A2",), ("B3",)]


def faults_of(folder: Path, plan: str | None = None, **changed: Any) -> list[str]:
    with pytest.raises(StudyFaults) as raised:
        prepare(opened(folder, **changed), plan)
    return raised.value.lines()


def test_every_condition_that_cannot_be_made_is_named(tmp_path: Path) -> None:
    stocks = [LOW, {**HIGH, "holds": {"salt": 300}}]
    assert faults_of(tmp_path, stocks=stocks, protein_mg_per_ml=100.0) == [
        "plans/plate-02.csv, well A2: ph 5.0, salt 400 is out of reach: the bottles for it hold "
        "salt 0 to 300 (nearest that works: ph 5.0, salt 300)",
        "plans/plate-02.csv, wells A1, A2, B3, C4, E6, F7: 0.25 mg of protein takes 2.5 µL of "
        "load; the pipette draws no less than 5 µL (study.toml, bench, protein_mg_per_ml: a load "
        "of 50 mg/mL or below works)",
    ]


def test_one_fault_names_all_wells_of_a_condition(tmp_path: Path) -> None:
    rows = [*ROWS, ("H12", "test", 5.0, 400)]
    stocks = [LOW, {**HIGH, "holds": {"salt": 300}}]
    (fault,) = faults_of(tmp_path, rows=rows, stocks=stocks)
    assert fault.startswith("plans/plate-02.csv, wells A2, H12: ph 5.0, salt 400 is out of reach")


def test_the_liquid_of_controls_is_judged_too(tmp_path: Path) -> None:
    condition = {"ph": 6.0, "salt": 700}
    assert faults_of(tmp_path, control_condition=condition) == [
        "plans/plate-02.csv, wells D5, F7: ph 6.0, salt 700 is out of reach: the bottles for it "
        "hold salt 0 to 500 (nearest that works: ph 6.0, salt 450)"
    ]


@pytest.mark.parametrize(("by", "ph"), [("well", 6.0), ("row", 5.0), ("column", 4.5)])
def test_controls_on_a_fed_line_get_its_liquid(tmp_path: Path, by: str, ph: float) -> None:
    rows = [("A1", "test", 5.0, 100), ("B2", "test", 4.5, 100), ("A2", "blank", "", "")]
    plan = f'[plan]\nprepared_by = "{by}"\n'
    sheets = prepare(opened(tmp_path, rows=rows, plan=plan, control_condition=CONTROL))
    stocks = {t.stock for t in sheets.transfers if t.well == "A2"}
    assert stocks == {f"low salt (pH {ph})", f"high salt (pH {ph})"}


def test_more_protein_than_there_is(tmp_path: Path) -> None:
    protein = "[protein]\navailable_mg = 14\nreserved_mg = 10\nper_well_mg = 0.25\n"
    # The plate that was run took 3 mg of the 4.
    assert faults_of(tmp_path, protein=protein) == [
        "plans/plate-02.csv: needs 1.5 mg of protein; 1 mg are left beyond the reserve"
    ]


def test_rows_without_a_well(tmp_path: Path) -> None:
    (fault,) = faults_of(tmp_path, rows=[*ROWS, ("", "test", 5.0, 200)])
    assert fault == (
        f"plans/plate-02.csv: has 1 row without a well (muntin propose {tmp_path} --keep "
        f"{tmp_path}/plans/plate-02.csv finds wells for them)"
    )


def test_a_plan_without_rows(tmp_path: Path) -> None:
    assert faults_of(tmp_path, rows=[]) == ["plans/plate-02.csv: holds no well to run"]


def test_faults_of_the_plan_itself_are_those_of_its_reader(tmp_path: Path) -> None:
    (fault,) = faults_of(tmp_path, rows=[("A1", "test", 5.2, 100)])
    assert "row 2, well A1, column ph: 5.2 is not on a bench step; nearest is 5.0" in fault


def test_the_named_plan_is_taken(tmp_path: Path) -> None:
    study = opened(tmp_path)
    write_plan(tmp_path, ROWS[:2], "plate-02.r2.csv")
    assert prepare(study).file == "plans/plate-02.r2.csv"
    assert prepare(study, "plate-02").file == "plans/plate-02.csv"


@pytest.mark.parametrize(
    ("changed", "said"),
    [
        ({"stocks": None, "protein_mg_per_ml": None}, ["No stocks are", "No protein_mg_per_ml is"]),
        ({"well_ul": None}, ["No well_ul is", "No control_condition is"]),
        ({"pipette_step_ul": None}, ["No pipette_step_ul is", "No control_condition is"]),
        ({"dead_volume_ul": None}, ["No dead_volume_ul is", "No control_condition is"]),
        ({"control_condition": CONTROL}, []),
        (
            {"control_condition": CONTROL, "protein_mg_per_ml": 1.3},
            # 192.3 µL come out as 192.5 in each of six wells.
            ["In whole pipette steps the wells get 1.502 mg of protein, 0.0015 mg more than"],
        ),
        (
            {"control_condition": CONTROL, "dead_volume_ul": 20000.0},
            ["With what stays in its trough the load takes 41.5 mg; 27 mg are left beyond"],
        ),
        (
            {"control_condition": CONTROL, "pipette_floor_ul": None},
            [
                "No pipette_floor_ul is given (study.toml, [bench]): small draws were not judged; "
                "the smallest is 40 µL of high salt (pH 4.5) into B3."
            ],
        ),
        (
            {"stocks": [{"name": "any", "holds": {"salt": 450}}, {"name": "w"}], "ph_factor": None},
            ["Not set by the stocks, see to it by hand: pH.", "No control_condition is"],
        ),
    ],
)
def test_what_is_not_known_is_said(
    tmp_path: Path, changed: dict[str, Any], said: list[str]
) -> None:
    *told, procedure = gaps(prepare(opened(tmp_path, **changed)))
    assert procedure.startswith("Binding, wash and strip buffers")
    made = "No buffers are given (study.toml, [[bench.buffers]]): how the bottles are made is not "
    bottles = "stocks" not in changed
    assert [sentence for sentence in told if sentence.startswith(made)] == [told[0]] * bottles
    told = told[bottles:]
    assert len(told) == len(said)
    for sentence, begin in zip(told, said, strict=True):
        assert sentence.startswith(begin)


def test_without_protein_and_bench_the_wells_are_there(tmp_path: Path) -> None:
    folder = bottled(tmp_path, protein="", **dict.fromkeys(BENCH))
    from muntin.record import open_study

    sheets = prepare(open_study(folder))
    assert (sheets.mixes, sheets.transfers, sheets.totals, sheets.load) == ((), (), (), None)
    assert sheets.rows["well"].tolist() == [row[0] for row in ROWS]
    assert [s.split(" is")[0].split(" are")[0] for s in gaps(sheets)] == [
        "No stocks",
        "No [protein]",
        "Binding, wash and strip buffers, what blanks get in place of the load, and the steps on "
        "the resin plate (equilibrate, wash, elute from the mixing plate, strip)",
    ]


def test_the_load_follows_the_factor_that_holds_it(tmp_path: Path) -> None:
    factors = [PH, LOAD]
    plate = read(spread(factors, 8, 1))
    rows = pd.DataFrame({"ph": [5.0, 5.5, None], "load": [10, 40, None]})
    rows = rows.assign(well=["A1", "A2", "A3"], role=["test", "test", "load"])
    protein = {"available_mg": 40, "load_factor": "load", "resin_ul": 20}
    bench = {"protein_mg_per_ml": 2.0, "pipette_step_ul": 0.5}
    study = written(tmp_path, [plate], factors=factors, protein=protein, bench=bench)
    (tmp_path / "plans").mkdir()
    rows.to_csv(tmp_path / "plans" / "plate-02.csv", index=False)
    sheets = prepare(study)
    # mg/mL times 20 µL of resin, at 2 mg/mL; a load well takes the most that a well can.
    assert [(t.well, sheets.pipette.ul(t.steps)) for t in sheets.transfers] == [
        ("A1", 100),
        ("A2", 400),
        ("A3", 400),
    ]
    assert sheets.load is not None
    assert sheets.load.needed_mg == pytest.approx(1.8)
    assert not any("by hand" in sentence for sentence in gaps(sheets))


def test_plate_order_is_row_by_row(tmp_path: Path) -> None:
    wells = ["H12", "A10", "B1", "A2"]
    sheets = prepare(opened(tmp_path, rows=[(w, "test", 5.0, 100) for w in wells]))
    assert sheets.rows["well"].tolist() == ["A2", "A10", "B1", "H12"]
    assert set(wells) <= set(well_names(96))
