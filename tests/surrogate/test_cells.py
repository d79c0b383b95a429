from dataclasses import replace

import numpy as np
import pytest

from muntin.surrogate.cells import Readings, collapse
from tests.surrogate.problems import (
    log_normal,
    model_of,
    priors,
    reading_covariance,
    readings,
    settled,
)

NAMES = pytest.mark.parametrize("name", ["gp", "quadratic"])


def by_hand(data):
    """Readings (list) by condition, groups and sd."""
    cells = {}
    for i in range(len(data)):
        inside = tuple(g[i] for g in data.inside)
        scale = tuple(g[i] for g in data.scale)
        cells.setdefault((tuple(data.X[i]), inside, scale, data.sd[i]), []).append(data.y[i])
    return cells


def test_cells_agree_with_a_dictionary_of_wells():
    data = readings(3, n=41, inside=(2, 3), scale=(2,))
    cells, expected = collapse(data), by_hand(data)
    assert len(cells) == len(expected) < len(data)
    for c in range(len(cells)):
        u = cells.latent[c]
        key = (
            tuple(cells.X[u]),
            tuple(cells.inside[u]),
            tuple(g[c] for g in cells.scale),
            np.sqrt(cells.variance[c]),
        )
        y = np.array(expected[key])
        assert cells.count[c] == len(y)
        assert cells.mean[c] == pytest.approx(y.mean())
        assert cells.within[c] == pytest.approx(((y - y.mean()) ** 2).sum(), abs=1e-15)
        assert sorted(cells.y[cells.cell == c]) == sorted(y)


def test_latent_values_are_conditions_with_their_inside_groups():
    data = readings(3, n=41, inside=(2,), scale=(3,))
    cells = collapse(data)
    expected = {(*x, g) for x, g in zip(data.X, data.inside[0], strict=True)}
    found = np.concatenate([cells.X, cells.inside], axis=1)
    assert {tuple(row) for row in found} == expected
    assert len(found) == len(expected)
    assert np.array_equal(cells.X[cells.latent[cells.cell]], data.X)
    assert cells.scale_groups == (3,)


def test_one_condition_read_on_two_plates_is_one_latent_value_in_two_cells():
    data = Readings(
        X=np.zeros((4, 3)),
        y=np.array([0.5, 0.6, 0.7, 0.8]),
        sd=np.array([0.0, 0.0, 0.0, 0.1]),
        scale=(np.array([0, 0, 1, 1]),),
    )
    cells = collapse(data)
    assert cells.X.shape == (1, 3)
    assert list(cells.cell) == [0, 0, 1, 2]
    assert list(cells.latent) == [0, 0, 0]


def test_taking_rows_takes_every_field():
    data = readings(3, inside=(2, 4), scale=(3,))
    rows = np.array([7, 2, 11])
    some = data.take(rows)
    assert len(some) == 3
    for field in ("X", "y", "sd"):
        assert np.array_equal(getattr(some, field), getattr(data, field)[rows])
    for field in ("inside", "scale"):
        for mine, theirs in zip(getattr(some, field), getattr(data, field), strict=True):
            assert np.array_equal(mine, theirs[rows])


@pytest.mark.parametrize("kind", ["real", "fraction"])
def test_a_cell_says_as_much_as_its_wells_at_any_latent_value(kind):
    """Mean, count and spread are sufficient (Binois, Gramacy & Ludkovski 2018, section 2.2)."""
    data = readings(4, kind, n=31, inside=(), scale=())
    model = model_of("gp", data, kind)
    theta = model.layout.theta(np.array([[0.4] * len(model.layout), [-1.0] * len(model.layout)]))
    lik, cells = model.likelihood(theta), model.cells
    for f in (-1.0, 0.5, 3.0):
        u = np.full((2, len(cells)), f)
        mean = lik.process_mean(u)
        collapsed = lik.log_density(u, np.zeros_like(u)).sum(1)
        for s, noise in enumerate(model.layout.noise(theta)):
            variance = noise**2 + data.sd**2
            residual = data.y - mean[s, 0]
            one_by_one = -0.5 * (residual**2 / variance + np.log(2.0 * np.pi * variance))
            assert collapsed[s] == pytest.approx(one_by_one.sum(), rel=1e-10)


@NAMES
def test_evidence_of_cells_is_that_of_the_wells(name):
    data = readings(5, "real", n=37, inside=(2, 4), scale=())
    model = model_of(name, data, "real")
    assert len(model.cells) < len(data)
    theta = model.layout.theta(np.full((1, len(model.layout)), 0.3))
    expected = log_normal(data.y - priors("real").mean, reading_covariance(model, theta, data))
    assert settled(model, theta).log[0] == pytest.approx(expected, abs=1e-6)


@NAMES
@pytest.mark.parametrize("kind", ["real", "fraction"])
def test_wells_kept_apart_say_the_same(name, kind):
    """Sds of a few 1e-6 change no density, but keep every well in a cell of its own.

    Exact for the identity link. For a fraction one site a well is another approximation than one
    a cell; both are within their own error, about 0.01 here, of the same evidence.
    """
    data = readings(6, kind, n=29, inside=(3,), scale=(), with_sd=False)
    apart = replace(data, sd=1e-6 * np.arange(len(data)))
    joined, split = model_of(name, data, kind), model_of(name, apart, kind)
    assert len(joined.cells) < len(split.cells) == len(data)
    theta = joined.layout.theta(np.full((1, len(joined.layout)), 0.3))
    difference = settled(joined, theta).log[0] - settled(split, theta).log[0]
    assert abs(difference) < (1e-6 if kind == "real" else 0.02)


@NAMES
@pytest.mark.parametrize("kind", ["real", "fraction"])
def test_the_order_of_wells_and_the_names_of_groups_do_not_matter(name, kind):
    data = readings(7, kind, n=26, inside=(2,), scale=(3,) if kind == "fraction" else ())
    order = np.random.default_rng(1).permutation(len(data))
    mixed = data.take(order)
    mixed = replace(
        mixed,
        inside=tuple(g.max() - g for g in mixed.inside),
        scale=tuple(g.max() - g for g in mixed.scale),
    )
    model, other = model_of(name, data, kind), model_of(name, mixed, kind)
    theta = model.layout.theta(np.full((1, len(model.layout)), -0.4))
    assert settled(other, theta).log[0] == pytest.approx(settled(model, theta).log[0], abs=1e-7)


def test_no_reading_makes_no_cell():
    cells = collapse(readings(8, n=0, inside=(2,), scale=(3,)))
    assert len(cells) == len(cells.X) == 0
    assert cells.scale_groups == (0,)
