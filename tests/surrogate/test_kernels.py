import numpy as np
import pytest

from muntin.surrogate.coding import Choice, Coding, Columns, Continuous
from muntin.surrogate.kernels import (
    matern52,
    matern52_slope,
    polynomial_basis,
    quadratic_terms,
    same_group,
    squared_distance,
)
from tests.surrogate.problems import matern

NODES, ROWS, OTHERS, DEPTH = 2, 4, 3, 5


@pytest.fixture
def points():
    rng = np.random.default_rng(1)
    lengths = rng.uniform(0.3, 3.0, (NODES, DEPTH))
    return rng.normal(size=(ROWS, DEPTH)), rng.normal(size=(OTHERS, DEPTH)), lengths


def test_squared_distances_agree_with_plain_loops(points):
    X, Z, lengths = points
    r2 = squared_distance(X, Z, lengths)
    assert r2.shape == (NODES, ROWS, OTHERS)
    for s in range(NODES):
        for i in range(ROWS):
            for j in range(OTHERS):
                loop = sum(((X[i, d] - Z[j, d]) / lengths[s, d]) ** 2 for d in range(DEPTH))
                assert r2[s, i, j] == pytest.approx(loop, rel=1e-12)


def test_a_point_is_at_no_distance_from_itself(points):
    X, _, lengths = points
    r2 = squared_distance(100.0 + X, 100.0 + X, lengths)
    # The expanded square loses digits, but never turns negative.
    assert (r2 >= 0.0).all()
    assert np.diagonal(matern52(r2), axis1=1, axis2=2) == pytest.approx(1.0, abs=1e-9)


def test_matern_agrees_with_its_formula_and_leaves_its_input_alone():
    r = np.array([0.0, 1e-4, 0.3, 1.0, 7.0])
    r2 = r**2
    assert matern52(r2) == pytest.approx(matern(r), rel=1e-12)
    assert np.array_equal(r2, r**2)


def test_the_slope_of_matern_agrees_with_differences():
    r2 = np.array([0.01, 0.3, 1.0, 9.0])
    h = 1e-5
    differences = (matern(np.sqrt(r2 + h)) - matern(np.sqrt(r2 - h))) / (2.0 * h)
    assert matern52_slope(r2) == pytest.approx(-2.0 * differences, rel=1e-6)
    assert matern52_slope(np.zeros(1))[0] == pytest.approx(5.0 / 3.0)


def test_same_group_agrees_with_plain_loops():
    a, b = np.array([0, 2, 1, 0]), np.array([2, 0, 5])
    loop = [[1.0 if i == j else 0.0 for j in b] for i in a]
    assert np.array_equal(same_group(a, b), loop)


def test_terms_of_two_numbers_and_a_choice():
    columns = Coding(
        (Continuous(low=0, high=1), Choice(levels=3), Continuous(low=0, high=1))
    ).columns
    # Columns: 0 a number, 1 and 2 the choice, 3 a number. No square and no product of the choice.
    expected = {(), (0,), (1,), (2,), (3,), (0, 0), (3, 3), (0, 1), (0, 2), (0, 3), (1, 3), (2, 3)}
    terms = quadratic_terms(columns)
    assert set(terms) == expected
    assert len(terms) == len(expected)
    assert terms[0] == ()


@pytest.mark.parametrize("factors", [1, 2, 4, 6])
def test_a_full_second_order_polynomial_has_its_number_of_terms(factors):
    terms = quadratic_terms(Columns.plain(factors))
    assert len(set(terms)) == len(terms) == (factors + 1) * (factors + 2) // 2


def test_the_basis_agrees_with_plain_loops():
    X = np.random.default_rng(2).normal(size=(ROWS, OTHERS))
    terms = quadratic_terms(Columns.plain(OTHERS))
    basis = polynomial_basis(X, terms)
    assert basis.shape == (ROWS, len(terms))
    for i in range(ROWS):
        for k, term in enumerate(terms):
            value = 1.0
            for column in term:
                value *= X[i, column]
            assert basis[i, k] == pytest.approx(value, rel=1e-14)
