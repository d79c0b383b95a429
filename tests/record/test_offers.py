"""Plans as they were offered, and how others differ from them."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from muntin.record.definition import Definition
from muntin.record.offers import (
    Change,
    OfferedWell,
    differences,
    nearest_offer,
    offers_of,
    own_words,
    with_chosen,
    with_reasons,
)
from tests.studies import tables

A, B, C = (5.0, 100.0), (6.0, 200.0), (7.0, 300.0)


def well(name, condition, role="test", reason=""):
    return OfferedWell(name, role, condition, reason)


OFFER = [well("A1", A), well("A2", B), well("A3", B), well("A4", None, "blank")]


@pytest.mark.parametrize(
    ("there", "changes"),
    [
        (OFFER, []),
        (OFFER[::-1], []),
        (
            [*OFFER[:3], well("B4", None, "blank")],
            [Change("moved", OFFER[3], well("B4", None, "blank"))],
        ),
        ([well("A1", C), *OFFER[1:]], [Change("changed", OFFER[0], well("A1", C))]),
        (OFFER[:2] + OFFER[3:], [Change("left out", OFFER[2], None)]),
        ([*OFFER, well("H1", C)], [Change("added", None, well("H1", C))]),
        ([well("", A), *OFFER[1:]], []),
        (
            [well("A1", A, "bridge"), *OFFER[1:]],
            [Change("changed", OFFER[0], well("A1", A, "bridge"))],
        ),
        (
            [well("A1", B), well("A2", A), *OFFER[2:]],
            [Change("moved", OFFER[0], well("A2", A)), Change("moved", OFFER[1], well("A1", B))],
        ),
    ],
)
def test_differences(there, changes):
    assert differences(OFFER, there) == changes


@settings(deadline=None, derandomize=True, max_examples=100)
@given(
    *[
        st.lists(
            st.tuples(st.sampled_from("ABCDEFGH"), st.sampled_from([A, B, C])),
            unique_by=lambda pair: pair[0],
        )
    ]
    * 2
)
def test_every_well_is_accounted_for_once(offered, there):
    left = [well(f"{row}1", condition) for row, condition in offered]
    right = [well(f"{row}1", condition) for row, condition in there]
    changes = differences(left, right)
    was = [c.was for c in changes if c.was is not None]
    now = [c.now for c in changes if c.now is not None]
    assert len(set(was)) == len(was)
    assert len(set(now)) == len(now)
    # What is in no change is the same on both sides.
    assert sorted(set(left) - set(was), key=str) == sorted(set(right) - set(now), key=str)
    kinds = {c.kind: (c.was is None, c.now is None) for c in changes}
    assert kinds.get("added", (True, False)) == (True, False)
    assert kinds.get("left out", (False, True)) == (False, True)
    # Conditions are only said to be gone where fewer wells have them.
    for c in (c for c in changes if c.kind == "left out"):
        assert sum(w.condition == c.was.condition for w in left) > sum(
            w.condition == c.was.condition for w in right
        )


def test_reasons_are_the_users_own_words():
    given_by_muntin = "probability 0.41, on the edge at pH 5.5"
    changes = [
        Change("changed", well("A1", A, reason=given_by_muntin), well("A1", B, reason="more salt")),
        Change(
            "changed", well("A2", A, reason=given_by_muntin), well("A2", B, reason=given_by_muntin)
        ),
        Change("left out", well("A3", A), None),
        Change("left out", well("A4", A), None),
        Change("added", None, well("A5", C, reason="asked for by the site; pH measured 5.61")),
    ]
    told = with_reasons(changes, [(well("A3", None), "precipitates")])
    assert [c.because for c in told] == [
        "more salt",
        "",
        "precipitates",
        "",
        "asked for by the site",
    ]


@pytest.mark.parametrize(
    "reason",
    [
        "probability 0.41, on the edge at pH 5.5",
        "repeats plate-01 C4: probability 0.41, inside the edge at pH 5.5",
        "repeats plate-01 C4, a known pass: ties plates; pH measured 5.12",
        "well 3 of this condition: averages the noise",
        "opening plate, spread to find where the target is met",
        "set by hand: probability 0.41, on the edge at pH 5.5",
        "set by hand",
        "",
    ],
)
def test_what_muntin_said_is_not_the_users(reason):
    assert own_words(reason) == ""


DEFINITION = Definition.model_validate(tables())


def write(folder, file, *wells):
    path = folder / file
    path.parent.mkdir(parents=True, exist_ok=True)
    lines = [f"{name},test,{ph},{salt}" for name, (ph, salt) in wells]
    path.write_text("\n".join(["well,role,ph,salt", *lines, "H1,blank,,", "bad,test,5,50"]) + "\n")


def test_offers_lie_in_plans_and_advice(tmp_path):
    write(tmp_path, "plans/offered/plate-02.r10.csv", ("A1", A))
    write(tmp_path, "plans/offered/plate-02.csv", ("A1", A))
    write(tmp_path, "plans/offered/plate-02.r2.csv", ("A1", B))
    write(tmp_path, "plans/offered/plate-021.csv", ("A1", B))
    write(tmp_path, "advice/plate-02/r1/plan.csv", ("A1", C), ("A2", C))
    offers = offers_of(tmp_path, DEFINITION, "plate-02")
    assert [offer.file for offer in offers] == [
        "plans/offered/plate-02.csv",
        "plans/offered/plate-02.r2.csv",
        "plans/offered/plate-02.r10.csv",
        "advice/plate-02/r1/plan.csv",
    ]
    assert offers[-1].wells == (well("A1", C), well("A2", C), well("H1", None, "blank"))


def test_the_nearest_offer_is_the_one_that_was_edited(tmp_path):
    write(tmp_path, "plans/offered/plate-02.csv", ("A1", A), ("A2", B))
    write(tmp_path, "plans/offered/plate-02.r2.csv", ("A1", A), ("A2", C))
    write(tmp_path, "plans/offered/plate-02.r3.csv", ("A1", A), ("A2", C))
    offers = offers_of(tmp_path, DEFINITION, "plate-02")
    blank = well("H1", None, "blank")
    for there, nearest in (([well("A1", A), well("A2", B)], ""), ([well("A2", C)], ".r3")):
        offer, _ = nearest_offer(offers, [*there, blank])
        assert offer.file == f"plans/offered/plate-02{nearest}.csv"
    assert nearest_offer([], [blank]) is None


def test_wells_that_are_chosen_again_only_moved():
    changes = [
        Change("left out", well("A1", A), None),
        Change("left out", well("A2", B), None),
        Change("left out", well("A3", C), None, "precipitates"),
        Change("left out", well("A4", None, "blank"), None),
    ]
    new = [well("A1", A), well("B5", B), well("B6", C), well("B7", None, "blank"), well("B8", B)]
    assert with_chosen(changes, new) == [
        Change("left out", well("A3", C), None, "precipitates"),
        Change("moved", well("A2", B), well("B5", B)),
        Change("chosen", None, well("B6", C)),
        Change("moved", well("A4", None, "blank"), well("B7", None, "blank")),
        Change("chosen", None, well("B8", B)),
    ]
