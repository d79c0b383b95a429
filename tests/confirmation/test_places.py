"""Where columns are run: set point and edges, on windows drawn at random."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from muntin.confirmation.places import spots
from muntin.record.definition import Definition
from muntin.window.grid import judged_grid
from muntin.window.window import Window, judge_window
from tests.studies import PH, RESIN, SALT, tables

PLAIN = Definition.model_validate(tables(factors=[PH, SALT]))
ROWS, COLUMNS = 7, 9


def window(definition: Definition, p: np.ndarray) -> Window:
    """The window of judged probabilities on the grid of a study."""
    grid, regular = judged_grid(definition)
    return judge_window(definition, grid, regular, p, p, ())


def condition(spot, names) -> tuple:
    return tuple(spot.condition[name] for name in names)


@given(st.lists(st.floats(0.5, 1.0), min_size=ROWS * COLUMNS, max_size=ROWS * COLUMNS))
def test_spots_lie_inside_apart_and_edges_border_on_the_outside(p: list[float]) -> None:
    found = window(PLAIN, np.array(p))
    if not found.grid["inside"].any():
        return
    told = spots(PLAIN, found)
    inside = found.grid["inside"].to_numpy().reshape(ROWS, COLUMNS)
    first = [tuple(row) for row in found.grid[["ph", "salt"]].to_numpy()]
    places = [divmod(first.index(condition(spot, ("ph", "salt"))), COLUMNS) for spot in told]
    assert told[0].place == "set point"
    assert condition(told[0], ("ph", "salt")) == tuple(found.setpoint[["ph", "salt"]])
    assert len(set(places)) == len(told) == min(3, inside.sum())
    for spot, (i, j) in zip(told, places, strict=True):
        assert inside[i, j]
        beside = [(i + 1, j), (i - 1, j), (i, j + 1), (i, j - 1)]
        borders = any(not inside[a, b] for a, b in beside if 0 <= a < ROWS and 0 <= b < COLUMNS)
        if spot.place != "set point":
            assert (spot.place == "edge") == borders
    _farthest_edges(told, places, inside)


def _farthest_edges(told, places, inside) -> None:
    """No other two edges lie farther apart, in coded factors."""
    edges = [
        (i, j)
        for i in range(ROWS)
        for j in range(COLUMNS)
        if inside[i, j]
        and (i, j) != places[0]
        and any(
            not inside[a, b]
            for a, b in ((i + 1, j), (i - 1, j), (i, j + 1), (i, j - 1))
            if 0 <= a < ROWS and 0 <= b < COLUMNS
        )
    ]
    chosen = [place for spot, place in zip(told, places, strict=True) if spot.place == "edge"]
    assert len(chosen) == min(2, len(edges))
    if len(edges) < 2:
        return

    def apart(one, other) -> float:
        scale = np.array([2 / (ROWS - 1), 2 / (COLUMNS - 1)])
        return float((((np.array(one) - other) * scale) ** 2).sum())

    most = max(apart(one, other) for one in edges for other in edges)
    assert apart(*chosen) == pytest.approx(most)


def test_edges_keep_the_resin_of_the_set_point_and_pass_over_forbidden_conditions() -> None:
    given = tables(factors=[PH, RESIN])
    given["forbidden"] = [{"conditions": "ph <= 4.5", "because": "it precipitates"}]
    definition = Definition.model_validate(given)
    grid, _ = judged_grid(definition)
    p = np.where(grid["resin"] == "Beta", 0.99, 0.95)
    p[grid["ph"].to_numpy() > 7.2] = 0.1
    told = spots(definition, window(definition, p))
    assert {spot.condition["resin"] for spot in told} == {"Beta"}
    assert [(spot.place, spot.condition["ph"]) for spot in told[1:]] == [
        ("edge", 7.0),
        ("far side", 5.0),
    ]


def test_the_less_probable_edge_comes_first() -> None:
    definition = Definition.model_validate(tables(factors=[PH]))
    p = np.array([0.2, 0.95, 0.99, 0.99, 0.99, 0.91, 0.2])
    told = spots(definition, window(definition, p))
    assert [(spot.condition["ph"], spot.probability) for spot in told[1:]] == [
        (7.0, 0.91),
        (5.0, 0.95),
    ]


def test_without_a_grid_the_least_probable_conditions_are_the_edge() -> None:
    grid = pd.DataFrame({"ph": [5.0, 5.5, 6.0, 6.5, 7.0], "salt": [100.0, 300, 200, 400, 50]})
    p = np.array([0.91, 0.99, 0.999, 0.92, 0.3])
    found = judge_window(PLAIN, grid, False, p, p, ())
    told = spots(PLAIN, found)
    assert [spot.place for spot in told] == ["set point", "edge", "far side"]
    assert [spot.probability for spot in told[:2]] == [0.999, 0.91]
    assert replace(found).regular is False


def test_a_window_without_an_edge_has_two_far_sides() -> None:
    told = spots(PLAIN, window(PLAIN, np.full(ROWS * COLUMNS, 0.99)))
    assert [spot.place for spot in told[1:]] == ["far side", "far side"]
    corners = {condition(spot, ("ph", "salt")) for spot in told[1:]}
    assert corners in ({(4.5, 50.0), (7.5, 450.0)}, {(4.5, 450.0), (7.5, 50.0)})
