"""Ranges that hold together, judged at bench steps between the nodes of a grid."""

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from muntin.record.definition import Definition
from muntin.window.boxes import Span, largest_span, probes, settled, share_of
from muntin.window.largest import largest_box
from muntin.window.ranges import Start, filled_in, settled_spans
from muntin.window.steps import Judged, Steps, grid_of, whole
from tests.studies import RESIN, tables

NAMES = ("a", "b", "c", "d", "e", "f")
REQUIRED = 0.9


def definition(factors, step=0.02, **given):
    made = [{"name": n, "low": 0.0, "high": 1.0, "step": step} for n in NAMES[:factors]]
    return Definition.model_validate(tables(factors=made, **given))


def surface(factors, seed):
    """A quadratic surface through a logistic curve, highest (0.98) inside the range."""
    rng = np.random.default_rng(seed)
    centre = rng.uniform(0.2, 0.8, factors)
    root = rng.normal(size=(factors, factors)) * 2.0 + 2.0 * np.eye(factors)

    def p(frame):
        away = (frame[list(NAMES[:factors])].to_numpy(dtype=float) - centre) @ root
        return 1.0 / (1.0 + np.exp((away**2).sum(axis=1) - 4.0))

    return centre, p


def coarse(steps, most, at):
    return [
        np.union1d(np.round(np.linspace(0, k - 1, most)).astype(int), here)
        for k, here in zip(steps.counts, at, strict=True)
    ]


def start(made, centre, p):
    steps = Steps.at(made, {})
    at = steps.index(pd.DataFrame([centre], columns=list(steps.names)))[0]
    return Judged(steps, p), at


@settings(deadline=None, derandomize=True, max_examples=25)
@given(st.integers(1, 3), st.integers(0, 10_000), st.sampled_from([4, 7, 12]))
def test_every_bench_step_of_settled_ranges_is_inside(factors, seed, most):
    made = definition(factors, step=0.02 if factors < 3 else 0.05)
    centre, p = surface(factors, seed)
    judged, at = start(made, centre, p)
    nodes = coarse(judged.steps, most, at)
    judged(grid_of(nodes))
    span = largest_span(judged, REQUIRED, nodes, at)
    box = settled(judged, REQUIRED, span, nodes, at)
    assert box.holds(at)
    every = judged.steps.frame(whole(box.low, box.high))
    # Its level sets are ellipsoids, so that what holds at the corners holds between them.
    assert (p(every) >= REQUIRED).all()
    assert share_of(judged.steps, box) >= share_of(judged.steps, span) - 1e-12


def _through(place):
    """The lines of bench steps through a place, as first and last steps."""
    for axis in range(2):
        low, high = place.copy(), place.copy()
        low[axis], high[axis] = 0, 50
        yield low, high


@pytest.mark.parametrize("seed", range(6))
def test_a_dip_between_the_nodes_is_cut_out(seed):
    made = definition(2)
    rng = np.random.default_rng(seed)
    # Nodes lie at every fifth step; only five steps in the middle of four of them fail.
    dip = 5 * rng.integers(1, 8, 2) + 2

    def p(frame):
        away = ((frame.to_numpy(dtype=float) / 0.02 - dip) ** 2).sum(axis=1)
        return 0.97 - 0.075 * np.exp(-away / 18.0)

    judged = Judged(Steps.at(made, {}), p)
    nodes = [np.arange(0, 51, 5)] * 2
    at = np.array([45, 45])
    judged(grid_of(nodes))
    span = largest_span(judged, REQUIRED, nodes, at)
    assert span.size == 51 * 51
    box = settled(judged, REQUIRED, span, nodes, at)
    assert box.holds(at)
    assert (p(judged.steps.frame(whole(box.low, box.high))) >= REQUIRED).all()
    # The largest boxes that hold (45, 45) lie beyond the dip in one of the factors.
    lines = [p(judged.steps.frame(whole(*ends))) for ends in _through(dip)]
    assert box.size == 51 * max(50 - int(np.flatnonzero(y < REQUIRED).max()) for y in lines)


@pytest.mark.parametrize("factors", [4, 5, 6])
def test_many_factors_hold_at_steps_that_were_not_asked(factors):
    made = definition(factors, step=0.1)
    centre, p = surface(factors, factors)
    judged, at = start(made, centre, p)
    nodes = coarse(judged.steps, 4, at)
    judged(grid_of(nodes))
    box = settled_spans(judged, REQUIRED, at, Start(judged, nodes)).held
    rng = np.random.default_rng(9)
    some = rng.integers(box.low, box.high + 1, (4000, factors))
    assert (p(judged.steps.frame(some)) >= REQUIRED).all()
    # No side can be moved out by a tenth of its range: the next step fails somewhere.
    for axis in range(factors):
        for low, high in ((box.low[axis] - 1,) * 2, (box.high[axis] + 1,) * 2):
            if 0 <= low < judged.steps.counts[axis]:
                slab = Span(box.low.copy(), box.high.copy())
                slab.low[axis], slab.high[axis] = low, high
                assert (p(judged.steps.frame(whole(slab.low, slab.high))) < REQUIRED).any()


def test_exact_on_every_bench_step_against_brute_force():
    made = definition(2, step=0.1)
    for seed in range(8):
        centre, p = surface(2, seed)
        judged, at = start(made, centre, p)
        nodes = [np.arange(11)] * 2
        inside = (judged(grid_of(nodes)) >= REQUIRED).reshape(11, 11)
        span = settled_spans(judged, REQUIRED, at, Start(judged, nodes, whole=True)).held
        best = 0
        for a in range(at[0] + 1):
            for b in range(at[0], 11):
                for c in range(at[1] + 1):
                    for d in range(at[1], 11):
                        if inside[a : b + 1, c : d + 1].all():
                            best = max(best, (b - a + 1) * (d - c + 1))
        assert span.size == best > 1


@pytest.mark.parametrize("seed", range(6))
def test_exact_between_the_nodes_of_two_factors(seed):
    made = definition(2, step=0.02)
    centre, p = surface(2, seed)
    judged, at = start(made, centre, p)
    nodes = coarse(judged.steps, 9, at)
    judged(grid_of(nodes))
    every = [np.arange(k) for k in judged.steps.counts]
    filled = filled_in(judged, REQUIRED, nodes, at)
    asked = len(judged.known)
    assert asked < 0.6 * 51 * 51
    inside = (p(judged.steps.frame(grid_of(every))) >= REQUIRED).reshape(51, 51)
    found = np.array([filled.known[tuple(i)] >= REQUIRED for i in grid_of(every).tolist()])
    np.testing.assert_array_equal(found.reshape(51, 51), inside)
    box = settled_spans(judged, REQUIRED, at, Start(judged, nodes), Start(filled, every)).held
    axes = [judged.steps.axis(axis) for axis in range(2)]
    (a, b), (c, d) = largest_box(inside, axes, at.tolist())
    assert share_of(judged.steps, box) == pytest.approx(
        share_of(judged.steps, Span(np.array([a, c]), np.array([b, d])))
    )
    # From the nodes alone it is smaller, or as large.
    coarsely = settled_spans(judged, REQUIRED, at, Start(judged, nodes)).held
    assert share_of(judged.steps, coarsely) <= share_of(judged.steps, box) + 1e-12


def test_larger_ranges_elsewhere_are_named():
    made = definition(2, step=0.1)

    def p(frame):
        small = (frame["a"] < 0.25) & (frame["b"] < 0.25)
        large = frame["a"] > 0.45
        return np.where(small, 0.99, np.where(large, 0.92, 0.1))

    judged = Judged(Steps.at(made, {}), p)
    nodes = [np.arange(11)] * 2
    judged(grid_of(nodes))
    at = np.array([1, 1])
    found = settled_spans(judged, REQUIRED, at, Start(judged, nodes, whole=True))
    assert (found.held.high == 2).all()
    assert found.larger.low.tolist() == [5, 0]
    assert found.larger.high.tolist() == [10, 10]
    there = settled_spans(judged, REQUIRED, np.array([8, 8]), Start(judged, nodes, whole=True))
    assert there.larger is None


def test_a_higher_requirement_never_makes_larger_ranges():
    made = definition(2, step=0.05)
    for seed in range(6):
        centre, p = surface(2, seed)
        judged, at = start(made, centre, p)
        nodes = [np.arange(21)] * 2
        judged(grid_of(nodes))
        sizes = []
        for required in (0.5, 0.8, 0.9, 0.95):
            span = largest_span(judged, required, nodes, at)
            sizes.append(0.0 if span is None else share_of(judged.steps, span))
        assert sizes == sorted(sizes, reverse=True)
        assert sizes[0] > sizes[-1]


def test_a_limit_is_never_inside():
    made = definition(2, step=0.02, limits=[{"allow": "a + b <= 1.03"}])
    judged = Judged(Steps.at(made, {}), lambda frame: np.ones(len(frame)))
    nodes = [np.arange(0, 51, 10)] * 2
    judged(grid_of(nodes))
    at = np.array([10, 10])
    box = settled(judged, REQUIRED, largest_span(judged, REQUIRED, nodes, at), nodes, at)
    assert made.allowed(judged.steps.frame(whole(box.low, box.high))).all()
    assert box.high.sum() == 51


def test_choices_are_held():
    factor = {"name": "a", "low": 0.0, "high": 1.0, "step": 0.1}
    made = Definition.model_validate(tables(factors=[RESIN, factor]))
    steps = Steps.at(made, {"resin": "Beta", "a": 0.5})
    frame = steps.frame(np.array([[0], [10]]))
    assert frame["resin"].tolist() == ["Beta", "Beta"]
    assert frame["a"].tolist() == [0.0, 1.0]
    judged = Judged(steps, lambda f: np.ones(len(f)))
    judged.learn(pd.DataFrame({"resin": ["Alpha", "Beta"], "a": [0.2, 0.3], "probability": [0, 1]}))
    assert judged.known == {(3,): 1.0}


def test_a_condition_is_asked_once():
    asked = []

    def p(frame):
        asked.append(len(frame))
        return np.ones(len(frame))

    judged = Judged(Steps.at(definition(1), {}), p)
    judged(np.array([[1], [2], [1]]))
    judged(np.array([[2], [3]]))
    assert asked == [2, 1]


def test_probes_hold_the_corners():
    span = Span(np.array([2, 3, 1]), np.array([40, 20, 30]))
    found = {tuple(row) for row in probes(span, 100, 64).tolist()}
    assert {(2, 3, 1), (40, 20, 30), (40, 3, 30), (2, 11, 15), (21, 20, 15)} <= found
    assert all(span.holds(np.array([*found])))
    assert len(probes(Span(np.array([0, 0]), np.array([2, 3])))) == 12
