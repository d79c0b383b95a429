"""Lack of fit against pure error where the model is least squares: published F tests."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy.stats import f as fisher

from muntin.surrogate.hyperparameters import Posterior
from muntin.surrogate.pure_error import pure_error
from tests.external.flat import Flat, flat_model

DATA = Path(__file__).parent / "data"
FIRST_ORDER = ((), (0,), (1,))


def compared(table, terms):
    """The check under flat priors of the coefficients and of ln sigma, over a wide grid of it."""
    y = table["y"].to_numpy()
    model = flat_model(table[["x1", "x2"]].to_numpy(), y, 1e4, terms)
    evidence = Flat.of(model, y.std() * np.exp(np.linspace(-5.0, 9.0, 4000))).evidence
    log_w = evidence.log - np.logaddexp.reduce(evidence.log)
    return pure_error(model, Posterior(evidence, np.zeros((4000, 1)), log_w, 0.0, 1.0, 0.0))


# Montgomery, 2^2 factorial with five centre points: F 0.0607, p 0.942, and the first nine runs of
# the central composite design: F 102.906, p 3.635e-4, on 2 and 4 degrees of freedom.
@pytest.mark.parametrize(
    ("name", "F", "p", "mean_square"),
    [("fact22_centre", 0.0607, 0.942, 0.0430), ("montgomery_ccd", 102.906, 3.635e-4, 0.0530)],
)
def test_montgomery(name, F, p, mean_square):
    found = compared(pd.read_csv(DATA / f"{name}.csv").iloc[:9], FIRST_ORDER)
    assert found.degrees == 4
    assert found.sd**2 == pytest.approx(mean_square, abs=5e-5)
    assert found.tail == pytest.approx(p, rel=1e-3)
    assert found.tail == pytest.approx(fisher.sf(F, 2, 4), rel=1e-3)


def test_a_saturated_model_has_no_lack_of_fit():
    """Montgomery's replicated 2^2 with the interaction: nothing is left to the conditions."""
    table = pd.read_csv(DATA / "fact22_replicated.csv")
    table.columns = ["x1", "x2", "y"]
    found = compared(table, (*FIRST_ORDER, (0, 1)))
    assert found.degrees == 8
    assert found.sd**2 == pytest.approx(3.9167, abs=5e-5)
    assert found.tail > 0.05
