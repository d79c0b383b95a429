"""The largest box of a grid, against every box there is."""

from itertools import product

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from muntin.window.largest import Axis, largest_box, over_spans, spans_of


def axes_of(shape, rng):
    """Axes with unevenly spaced nodes."""
    return [Axis(np.cumsum(rng.uniform(0.5, 2.0, k)), 1.0) for k in shape]


def size_of(box, axes):
    return np.prod([a.nodes[j] - a.nodes[i] + a.step for a, (i, j) in zip(axes, box, strict=True)])


def by_hand(inside, axes, holding=None):
    """The size of the largest box, box by box."""
    best = None
    sides = [[(i, j) for i in range(k) for j in range(i, k)] for k in inside.shape]
    for box in product(*sides):
        if holding is not None and not all(
            i <= h <= j for (i, j), h in zip(box, holding, strict=True)
        ):
            continue
        if inside[tuple(slice(i, j + 1) for i, j in box)].all():
            size = size_of(box, axes)
            best = size if best is None else max(best, size)
    return best


@settings(deadline=None, derandomize=True, max_examples=120)
@given(
    st.sampled_from([(7,), (6, 9), (1, 5), (4, 3, 5)]),
    st.integers(0, 10_000),
    st.sampled_from([0.3, 0.7, 0.9, 0.98]),
    st.booleans(),
)
def test_box_is_the_largest_of_all(shape, seed, share, held):
    rng = np.random.default_rng(seed)
    inside = rng.random(shape) < share
    axes = axes_of(shape, rng)
    holding = [int(rng.integers(k)) for k in shape] if held else None
    box = largest_box(inside, axes, holding)
    size = by_hand(inside, axes, holding)
    if box is None:
        assert size is None
        return
    assert inside[tuple(slice(i, j + 1) for i, j in box)].all()
    assert size_of(box, axes) == pytest.approx(size, rel=1e-9)
    if holding is not None:
        assert all(i <= h <= j for (i, j), h in zip(box, holding, strict=True))


def test_of_boxes_of_one_size_the_lowest_is_taken():
    inside = np.ones((3, 4), dtype=bool)
    inside[1] = False
    axes = [Axis(np.arange(k, dtype=float), 1.0) for k in inside.shape]
    assert largest_box(inside, axes) == ((0, 0), (0, 3))


def test_no_axis_is_one_node():
    assert largest_box(np.ones((), dtype=bool), []) == ()
    assert largest_box(np.zeros((), dtype=bool), []) is None


def test_bits_are_held_together_span_by_span():
    rng = np.random.default_rng(3)
    values = rng.integers(0, 256, (5, 4, 3)).astype(np.uint8)
    spans = spans_of(4)
    out = over_spans(values, 1, spans)
    assert out.shape == (5, 10, 3)
    for m, (first, last) in enumerate(zip(*spans, strict=True)):
        expected = np.bitwise_and.reduce(values[:, first : last + 1], axis=1)
        np.testing.assert_array_equal(out[:, m], expected)
