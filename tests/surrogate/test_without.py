"""A fit without some of its readings, searched from the fit of all, is the fit of the others."""

import numpy as np
import pytest

from muntin.surrogate.fit import fit_stack, stack_without
from tests.benchmarks.trials import GRID, set_with_errors, sixty_wells


def spoiled(trial, rows):
    """The readings of a trial, some of them far off."""
    y = trial.readings.y.copy()
    y[rows] += np.where(y[rows] > 0.5, -0.4, 0.4)
    return type(trial.readings)(**{**vars(trial.readings), "y": y})


@pytest.mark.parametrize(
    ("trial", "rows"),
    [
        pytest.param(set_with_errors, [3], id="set"),
        pytest.param(sixty_wells, [2, 7], id="repeats", marks=pytest.mark.slow),
    ],
)
def test_it_is_the_fit_of_the_others(trial, rows):
    made = trial()
    readings = spoiled(made, rows)
    names = ("gp", "quadratic")
    given = (made.kind, made.columns, made.priors, 1)
    whole = fit_stack(names, readings, *given)
    rest = np.setdiff1d(np.arange(len(readings)), rows)
    anew = fit_stack(names, readings.take(rest), *given)
    found = stack_without(whole, np.array(rows), 1)

    def means(stack):
        moments = stack.surface.latent(GRID)
        return stack.surface.weights @ np.asarray(moments.mean)

    def pit(stack):
        return stack.shares @ np.stack([fit.loo.pit for fit in stack.fits])

    assert len(pit(found)) == len(rest)
    # Two sets of 64 to 128 nodes; the wild readings move the surface and the transforms far more.
    moved = np.abs(means(whole) - means(anew)).mean()
    assert np.abs(means(found) - means(anew)).mean() < 0.15 * moved
    np.testing.assert_allclose(pit(found), pit(anew), atol=0.06)
    assert np.abs(pit(whole)[rest] - pit(anew)).max() > 0.2
