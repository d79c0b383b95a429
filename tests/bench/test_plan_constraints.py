"""No plan breaks what its study asks, whatever that is, and whatever the user keeps of a plan.

Each study has one cached fit, made light; what is drawn are the rules of the plan and the rows that
are kept. The rules are checked here from their own statements, not by the code that plans.
"""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from hypothesis import Phase, assume, given, settings
from hypothesis import strategies as st

import muntin
from muntin.bench import default_controls, well_range
from muntin.record import StudyFaults
from tests.studies import (
    HCP,
    LOAD,
    PH,
    RECOVERY,
    RESIN,
    SALT,
    changed,
    read,
    read_hcp,
    spread,
    written,
)

STUDIES = {
    "pair": [PH, SALT],
    "joint": [PH, SALT],
    "choices": [PH, RESIN],
    "loads": [SALT, LOAD],
    "three": [PH, LOAD, RESIN],
    "opening": [PH, SALT],
    "opening loads": [LOAD, RESIN],
}
RESPONSES = {"joint": [RECOVERY, {**HCP, "at_most": 60}]}
# A failing example is shown as it was drawn: shrinking it would take minutes.
QUICK = settings(deadline=None, derandomize=True, max_examples=60, phases=[Phase.generate])

# A rule as the study states it, the factors it needs, and the same rule here.
LIMITS = [
    ("salt <= 500 - 60 * (ph - 4.5)", {"ph", "salt"}, lambda r: r["salt"] <= 770 - 60 * r["ph"]),
    ("ph <= 7", {"ph"}, lambda r: r["ph"] <= 7),
    ("load >= 10 or ph > 5", {"ph", "load"}, lambda r: r["load"] >= 10 or r["ph"] > 5),
    ("load * salt <= 12000", {"salt", "load"}, lambda r: r["load"] * r["salt"] <= 12000),
]
FORBIDDEN = [
    ("salt >= 300 and ph < 6", {"ph", "salt"}, lambda r: r["salt"] >= 300 and r["ph"] < 6),
    ("abs(ph - 6) < 0.6", {"ph"}, lambda r: abs(r["ph"] - 6) < 0.6),
    ('resin == "Beta"', {"resin"}, lambda r: r["resin"] == "Beta"),
    ("load > 30", {"load"}, lambda r: r["load"] > 30),
]


@pytest.fixture(scope="module")
def views(tmp_path_factory):
    """A light assessment of each study, by name; a function, too long to be shown."""
    made = {}
    for name, factors in STUDIES.items():
        plate = read(spread(factors, 14, 2))
        if name == "joint":
            plate = read_hcp(plate)
        plates = [] if name.startswith("opening") else [plate]
        folder = tmp_path_factory.mktemp("studies") / "study"
        responses = RESPONSES.get(name, [RECOVERY])
        view = muntin.assess(
            written(folder, plates, factors=factors, responses=responses), "quadratic"
        )
        light = {n: surface.lightened(2) for n, surface in view.surfaces.items()}
        made[name] = replace(view, surfaces=light)
    return lambda name: made[name]


@st.composite
def rules(draw):
    """The name of a study, and what is drawn of its rules."""
    name = draw(st.sampled_from([*STUDIES]))
    factors = []
    for factor in STUDIES[name]:
        own = dict(factor)
        if draw(st.integers(0, 2)) == 0:
            own["per_plate"] = draw(st.integers(2, 4))
        if "choices" in own and draw(st.booleans()):
            own["plan_choices"] = draw(st.sampled_from([["Alpha", "Gamma"], ["Beta", "Alpha"]]))
        elif "low" in own and draw(st.integers(0, 2)) == 0:
            own["plan_low"] = own["low"] + 1.4 * own["step"]
            own["plan_high"] = own["high"] - 0.6 * own["step"]
        factors.append(own)
    names = {factor["name"] for factor in factors}
    fitting = [[rule for rule in some if rule[1] <= names] for some in (LIMITS, FORBIDDEN)]
    limits, forbidden = (
        draw(st.lists(st.sampled_from(some), unique_by=lambda rule: rule[0], max_size=1))
        if some
        else []
        for some in fitting
    )
    protein = {"available_mg": draw(st.sampled_from([9.0, 14.0, 60.0]))}
    if "load" in names:
        protein |= {"load_factor": "load", "resin_ul": 20.0}
        protein |= draw(st.sampled_from([{}, {"per_well_mg": 0.2}]))
    else:
        protein["per_well_mg"] = 0.25
    return name, {
        "factors": factors,
        "responses": RESPONSES.get(name, [RECOVERY]),
        "limits": limits,
        "forbidden": forbidden,
        "protein": protein,
        "plan": {
            "bridging_wells": draw(st.integers(0, 5)),
            "repeats_min": draw(st.integers(1, 3)),
            "free_wells": draw(st.sampled_from(["A1:H12", "C3:H9", "A1:A3, D1:E12"])),
            "prepared_by": draw(st.sampled_from(["well", "well", "row", "column"])),
        },
    }


def under(view, given):
    """The view under drawn rules."""
    limits = [{"allow": text} for text, _, _ in given["limits"]]
    forbidden = [{"conditions": text, "because": "drawn"} for text, _, _ in given["forbidden"]]
    return changed(view, **{**given, "limits": limits, "forbidden": forbidden})


def levels(factor):
    """The levels that new plans may use of a factor."""
    if "choices" in factor:
        return list(factor.get("plan_choices", factor["choices"]))
    steps = round((factor["high"] - factor["low"]) / factor["step"])
    values = [factor["low"] + factor["step"] * i for i in range(steps + 1)]
    low, high = factor.get("plan_low", -np.inf), factor.get("plan_high", np.inf)
    return [float(v) for v in values if low <= v <= high]


def may_run(given, row):
    """Whether a condition is on the levels of new plans, inside the limits, and not forbidden."""
    on = all(any(same(row[f["name"]], v) for v in levels(f)) for f in given["factors"])
    inside = all(rule(row) for _, _, rule in given["limits"])
    return on and inside and not any(rule(row) for _, _, rule in given["forbidden"])


def same(one, other):
    return one == other if isinstance(other, str) else abs(float(one) - other) < 1e-9


def mg_of(given, row):
    """Protein of a row, from the words of the study."""
    protein = given["protein"]
    if row["role"] in ("blank", "water"):
        return 0.0
    if "load_factor" not in protein:
        return protein["per_well_mg"]
    if row["role"] in ("load", "no_resin"):
        (load,) = (f for f in given["factors"] if f["name"] == "load")
        return protein.get("per_well_mg", max(levels(load)) * 0.02)
    return row["load"] * 0.02


def left_mg(given, view):
    used = sum(mg_of(given, row) for row in view.study.wells.to_dict("records"))
    return given["protein"]["available_mg"] - used


def check(given, view, plan, wells, bridging, repeated=True):
    """Assert every rule on a whole plan."""
    rows = plan.wells.to_dict("records")
    told = [row for row in rows if row["role"] in ("test", "bridge", "reference")]
    free = well_range(given["plan"]["free_wells"], 96)
    assert plan.wells["well"].is_unique
    assert set(plan.wells["well"]) <= set(free)
    assert all(may_run(given, row) for row in told)
    for factor in given["factors"]:
        assert len({row[factor["name"]] for row in told}) <= factor.get("per_plate", 99)
    count = plan.wells["role"].value_counts().to_dict()
    assert count["test"] == wells
    assert count.get("bridge", 0) == bridging
    known = known_to_run(given, view)
    names = [factor["name"] for factor in given["factors"]]
    assert {tuple(r[n] for n in names) for r in told if r["role"] == "bridge"} <= known
    wanted = default_controls(96, len(free))
    assert all(count.get(role, 0) >= n for role, n in wanted.items())
    needed = sum(mg_of(given, row) for row in rows)
    assert plan.protein_mg == pytest.approx(needed)
    assert needed <= left_mg(given, view) + 1e-8
    check_lines(given, told)
    frame = pd.DataFrame(told)
    counts = frame.groupby(names).size()
    if repeated:
        bridged = frame.groupby(names)["role"].agg(lambda role: (role == "bridge").any())
        least = min(given["plan"]["repeats_min"], wells)
        assert (counts[~bridged] >= least).all()


def check_lines(given, told):
    """No plate line is fed by two stocks."""
    by = given["plan"]["prepared_by"]
    if by == "well":
        return
    limited = [f["name"] for f in given["factors"] if "per_plate" in f]
    stocks = {}
    for row in told:
        line = row["well"][0] if by == "row" else row["well"][1:]
        stock = tuple(row[n] for n in limited or [given["factors"][0]["name"]])
        assert stocks.setdefault(line, stock) == stock


def proposed(view, **asked):
    """The plan and "", or None and why it was refused."""
    try:
        return muntin.propose(view, **asked), ""
    except StudyFaults as found:
        return None, str(found)


def known_to_run(given, view):
    """Conditions that were run and may be run again."""
    if view.fresh:
        return set()
    names = [factor["name"] for factor in given["factors"]]
    return {
        tuple(row[n] for n in names)
        for row in view.study.wells.to_dict("records")
        if may_run(given, row)
    }


SHORT = ("room for", "protein allows", "plate and protein allow", "no condition is left")


@QUICK
@given(rules(), st.integers(1, 26), st.sampled_from(["edge", "best", "both"]), st.integers(0, 9))
def test_new_plans(views, drawn, wells, aim, seed):
    name, rule = drawn
    view = under(views(name), rule)
    plan, refused = proposed(view, wells=wells, aim=aim, seed=seed)
    if plan is None:
        lines = rule["plan"]["prepared_by"] != "well" and refused.startswith("study.toml, plan: ")
        assert lines or any(said in refused for said in SHORT)
        assert lines or not plainly_enough(rule, view, wells)
        return
    bridging = rule["plan"]["bridging_wells"] if known_to_run(rule, view) else 0
    check(rule, view, plan, wells, bridging)


def plainly_enough(given, view, wells):
    """Whether room and protein suffice even where every well takes the highest load."""
    free = well_range(given["plan"]["free_wells"], 96)
    controls = default_controls(96, len(free))
    others = given["plan"]["bridging_wells"] + sum(controls.values())
    most = {f["name"]: max(levels(f)) for f in given["factors"] if f["name"] == "load"}
    each = mg_of(given, {"role": "test", **most})
    loaded = wells + others - controls["blank"]
    return wells + others <= len(free) and loaded * each <= left_mg(given, view)


@st.composite
def kept_rows(draw):
    """A study's name, its rules, and rows that a user may keep: conditions that may be run, in free
    wells or without a well.
    """
    name, given = draw(rules())
    grid = [{}]
    for factor in given["factors"]:
        grid = [{**row, factor["name"]: v} for row in grid for v in levels(factor)]
    grid = [row for row in grid if may_run(given, row)]
    for factor in given["factors"]:
        if "per_plate" in factor:
            chosen = sorted({row[factor["name"]] for row in grid}, key=str)
            few = draw(st.permutations(chosen))[: factor["per_plate"]]
            grid = [row for row in grid if row[factor["name"]] in few] or grid[:1]
    picked = draw(st.lists(st.sampled_from(grid), min_size=1, max_size=6)) if grid else []
    free = well_range(given["plan"]["free_wells"], 96)
    wells = draw(st.permutations(free))[: len(picked)]
    rows = []
    for row, well in zip(picked, wells, strict=True):
        role = draw(st.sampled_from(["test", "test", "reference"]))
        rows.append({"well": draw(st.sampled_from([well, well, ""])), "role": role, **row})
    if draw(st.booleans()):
        rows.append({"well": "" if free[-1] in wells else free[-1], "role": "blank"})
    return name, given, rows


@QUICK
@given(kept_rows(), st.integers(0, 12), st.integers(0, 9))
def test_plans_around_kept_rows(views, tmp_path_factory, drawn, more, seed):
    name, rule, rows = drawn
    view = under(views(name), rule)
    assume(rows)
    path = tmp_path_factory.mktemp("kept") / "mine.csv"
    pd.DataFrame(rows).to_csv(path, index=False)
    tests = sum(row["role"] == "test" for row in rows)
    wells = max(1, tests + more)
    plan, refused = proposed(view, wells=wells, seed=seed, keep=path)
    if plan is None:
        lines = rule["plan"]["prepared_by"] != "well" and (
            "study.toml, plan: " in refused or "is fed" in refused
        )
        levels_gone = "per_plate allows" in refused
        assert lines or levels_gone or any(said in refused for said in SHORT)
        return
    told = plan.wells.to_dict("records")
    known = known_to_run(rule, view)
    bridging = sum(row["role"] == "bridge" for row in told)
    assert bridging in ({0, rule["plan"]["bridging_wells"]} if known else {0})
    check(rule, view, plan, wells, bridging, repeated=False)
    check_kept(rule, rows, told)


def check_kept(given, rows, told):
    """Every kept row is in the plan as it was: its well if it had one, its role and condition."""
    names = [factor["name"] for factor in given["factors"]]
    there = list(told)
    for row in sorted(rows, key=lambda row: not row.get("well")):
        match = next(
            t
            for t in there
            if t["role"] == row["role"]
            and row.get("well", "") in ("", t["well"])
            and (row["role"] == "blank" or all(same(t[n], row[n]) for n in names))
        )
        there.remove(match)


@QUICK
@given(kept_rows())
def test_kept_plans_without_more_wells_are_just_what_is_kept(views, tmp_path_factory, drawn):
    name, rule, rows = drawn
    rule = {**rule, "plan": {**rule["plan"], "prepared_by": "well"}}
    view = under(views(name), rule)
    assume(any(row["role"] == "test" for row in rows))
    path = tmp_path_factory.mktemp("kept") / "mine.csv"
    pd.DataFrame(rows).to_csv(path, index=False)
    plan, refused = proposed(view, keep=path)
    if plan is None:
        assert "per_plate allows" in refused or "mg of protein" in refused
        return
    assert len(plan.wells) == len(rows)
    check_kept(rule, rows, plan.wells.to_dict("records"))


BROKEN = {
    "a step": lambda row, factor: {**row, factor["name"]: factor["low"] + 0.37 * factor["step"]},
    "the range": lambda row, factor: {**row, factor["name"]: factor["high"] + factor["step"]},
    "a number": lambda row, factor: {**row, factor["name"]: "some"},
    "a value": lambda row, factor: {**row, factor["name"]: ""},
    "the wells": lambda row, factor: {**row, "well": "Q99"},
    "a role": lambda row, factor: {**row, "role": "tets"},
    "bridging": lambda row, factor: {**row, "role": "bridge", factor["name"]: factor["high"]},
}


@QUICK
@given(kept_rows(), st.lists(st.sampled_from([*BROKEN]), min_size=1, max_size=4))
def test_kept_rows_that_break_a_rule_are_refused_each_with_its_row(
    views, tmp_path_factory, drawn, breaks
):
    name, rule, rows = drawn
    view = under(views(name), rule)
    rows = [row for row in rows if row["role"] != "blank"]
    assume(len(rows) >= len(breaks))
    ranged = next(f for f in rule["factors"] if "low" in f)
    spoiled = [BROKEN[how](row, ranged) for how, row in zip(breaks, rows, strict=False)]
    known = known_to_run(rule, view)
    names = [factor["name"] for factor in rule["factors"]]
    assume(not any(tuple(row[n] for n in names) in known for row in spoiled))
    path = tmp_path_factory.mktemp("kept") / "mine.csv"
    pd.DataFrame([*spoiled, *rows[len(spoiled) :]]).to_csv(path, index=False)
    with pytest.raises(StudyFaults) as found:
        muntin.propose(view, wells=len(rows) + 1, keep=path)
    places = [fault.where.split(",")[0] for fault in found.value.faults]
    assert {f"row {i + 2}" for i in range(len(spoiled))} <= set(places)
