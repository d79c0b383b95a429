"""Limits: what they allow, and that no text does anything but be judged."""

from __future__ import annotations

import itertools

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from muntin.record.arithmetic import LimitError, check_limit
from muntin.record.factors import Factor
from muntin.record.limits import Limit, limit_faults, sample_conditions
from tests.record.conftest import STEADY

PH = Factor.model_validate({"name": "ph", "low": 4.5, "high": 7.5, "step": 0.1})
SALT = Factor.model_validate({"name": "salt", "low": 0, "high": 900, "step": 10})
RESIN = Factor.model_validate({"name": "resin", "choices": ["A", "B", "C"]})
FACTORS = (PH, SALT, RESIN)
FRAME = pd.DataFrame(
    {"ph": [5.0, 5.3, 6.0, 7.0], "salt": [900.0, 855.0, 760.0, 0.0], "resin": ["A", "B", "C", "A"]}
)


@pytest.mark.parametrize(
    ("text", "held"),
    [
        ("salt <= 900 - 150 * (ph - 5)", [True, True, False, True]),
        ("salt ≤ 900 − 150·(ph − 5)", [True, True, False, True]),
        ("salt < 900 - 150 * (ph - 5)", [False, False, False, True]),
        ("5.3 <= ph < 7", [False, True, True, False]),
        ("not ph > 5.5", [True, True, False, False]),
        ("ph > 5.5 or salt == 900", [True, False, True, True]),
        ("ph > 5.5 and salt != 0", [False, False, True, False]),
        ("resin == 'A'", [True, False, False, True]),
        ("'A' != resin", [False, True, True, False]),
        ("resin in ('A', 'B')", [True, True, False, True]),
        ("resin not in ['A', 'B']", [False, False, True, False]),
        ("resin == 'A' or salt / 10 ** 2 + -1 < 7", [True, False, True, True]),
        ("min(ph, salt, 6) > 5.5", [False, False, True, False]),
        ("max(ph, 6) == 6 and abs(-ph) > 5 and sqrt(ph) < 9", [False, True, True, False]),
        ("log(salt) > exp(1) * 2.4", [True, True, True, False]),
        ("1 / salt > 0", [True, True, True, True]),
        ("(salt - 800) ** 0.5 > 0", [True, True, False, False]),
    ],
)
def test_limits_hold_where_they_should(text, held):
    check_limit(text, FACTORS)
    assert list(Limit(allow=text).holds(FRAME)) == held


def test_a_boundary_on_bench_steps_belongs_to_the_limit():
    # 1000 * (4.6 - 4.5) is 99.99999999999964 in binary.
    edge = pd.DataFrame({"ph": PH.levels(), "salt": np.arange(0.0, 3001.0, 100.0)})
    for sign, held in (("<=", True), (">=", True), ("==", True), ("<", False), (">", False)):
        assert (Limit(allow=f"salt {sign} 1000 * (ph - 4.5)").holds(edge) == held).all()


@pytest.mark.parametrize(
    ("text", "problem"),
    [
        ("", "is not arithmetic over factor names"),
        ("salt <", "is not arithmetic over factor names"),
        ("salt = 3", "is not arithmetic over factor names"),
        ("ph.real < 3", "is not arithmetic over factor names"),
        ("open('x') < ph", "is not arithmetic over factor names"),
        ("[ph][0] < 3", "is not arithmetic over factor names"),
        ("(lambda: 1)() < ph", "is not arithmetic over factor names"),
        ("ph < 3 if ph else 2", "is not arithmetic over factor names"),
        ("ph < 3j", "is not arithmetic over factor names"),
        ("ph < True", "is not arithmetic over factor names"),
        ("ph is 3", "is not arithmetic over factor names"),
        ("ph % 2 < 1", "is not arithmetic over factor names"),
        ("ph ^ 2 < 1", "is not arithmetic over factor names"),
        ("max(ph, key=abs) < 1", "is not arithmetic over factor names"),
        ("f'{ph}' == 'A'", "is not arithmetic over factor names"),
        ("(x := 3) < ph", "is not arithmetic over factor names"),
        ("log(ph, 2) < 1", "gives log the wrong number of values"),
        ("min(ph) < 1", "gives min the wrong number of values"),
        ("ph + (salt < 3) < 4", "mixes numbers, choices and comparisons"),
        ("ph and salt < 4", "mixes numbers, choices and comparisons"),
        ("resin < 'B'", "mixes numbers, choices and comparisons"),
        ("resin == 3", "mixes numbers, choices and comparisons"),
        ("'A' == 'B'", "mixes numbers, choices and comparisons"),
        ("ph in ('A',)", "mixes numbers, choices and comparisons"),
        ("resin in 'AB'", "has an in without a list"),
        ("1 < 2", "names no factor"),
        ("ph", "is not a comparison"),
        ("log < 3", 'names "log", which is no factor'),
        ("ph < 1" + "0" * 390, "holds a number that is too large"),
        ("ph < 1" + "0" * 400, "is longer than 400 signs"),
        ("-" * 100 + "ph < 3", "is nested too deeply"),
        ("(" * 300 + "ph < 3", "is not arithmetic over factor names"),
    ],
)
def test_what_is_no_limit_is_refused(text, problem):
    with pytest.raises(LimitError) as raised:
        check_limit(text, FACTORS)
    assert raised.value.problem == problem


WORDS = st.sampled_from(
    [
        *"()+-*/<>=,'\"[]{}.:;!%^&|~@ \t\n\\",
        *("<=", "==", "**", " and ", " or ", " not ", " in ", " if "),
        *("ph", "salt", "resin", "A", "9", "1e308", "max", "abs", "log"),
        *("lambda", "__import__", "None"),
    ]
)


@STEADY
@given(st.one_of(st.text(), st.lists(WORDS, max_size=30).map("".join)))
def test_no_text_raises_anything_but_a_fault(text):
    faults = limit_faults([Limit(allow=text)], FACTORS)
    if faults:
        assert len(faults) == 1
        assert "\n" not in faults[0].text
    else:
        assert Limit(allow=text).holds(FRAME).shape == (4,)


NUMBERS = st.recursive(
    st.one_of(st.sampled_from(["ph", "salt"]), st.floats(0, 100).map(lambda x: f"{x:.3f}")),
    lambda inner: st.tuples(inner, st.sampled_from("+-*/"), inner).map(
        lambda p: "({}{}{})".format(*p)
    ),
    max_leaves=6,
)


@STEADY
@given(NUMBERS, st.sampled_from(["<", "<=", ">", ">="]), NUMBERS)
def test_limits_agree_with_plain_arithmetic(left, sign, right):
    text = f"{left} {sign} {right} and ph > 0"
    held = Limit(allow=text).holds(FRAME)
    for row, record in enumerate(FRAME[["ph", "salt"]].to_dict("records")):
        try:
            sides = [eval(side, {}, record) for side in (left, right)]
        except ZeroDivisionError:
            continue
        if abs(sides[0] - sides[1]) <= 1e-6 * max(1, *map(abs, sides)):
            continue
        assert held[row] == (sides[0] < sides[1] if "<" in sign else sides[0] > sides[1])


def test_all_conditions_of_a_small_box_are_tried():
    box = sample_conditions(FACTORS)
    assert len(box) == 31 * 91 * 3
    assert not box.duplicated().any()
    assert limit_faults([Limit(allow="ph == 5.5 and salt == 310 and resin == 'C'")], FACTORS) == []


def test_a_large_box_is_sampled_evenly_with_its_corners():
    more = [SALT.model_copy(update={"name": f"s{i}"}) for i in range(4)]
    box = sample_conditions([PH, *more], most=4096)
    assert len(box) == 4096 + 2**5
    corners = box[["s0", "s1", "s2", "s3"]].isin([0, 900]).all(axis=1) & box["ph"].isin([4.5, 7.5])
    assert len(box[corners].drop_duplicates()) == 2**5
    names = list(box.columns)
    for one, other in itertools.combinations(range(5), 2):
        sizes = [31 if name == "ph" else 91 for name in (names[one], names[other])]
        levels = [box[names[i]][32:].rank(method="dense").to_numpy() - 0.5 for i in (one, other)]
        shares = [level / size for level, size in zip(levels, sizes, strict=True)]
        count = np.histogram2d(*shares, bins=4, range=[[0, 1], [0, 1]])[0]
        # A random sample strays by up to 0.2; the Halton sequence stays within its discrepancy.
        np.testing.assert_allclose(count / 4096, 1 / 16, rtol=0.16)
