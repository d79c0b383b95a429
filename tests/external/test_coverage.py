"""Predictions of what was left out, on real published data through the public assessment.

Reactor yields of two blocks (Myers, Montgomery & Anderson-Cook 2002, table 7.6) stand beside the
classical leave-one-out prediction intervals; petrol yields (Prater 1956), zone diameters on
penicillin plates (Davies & Goldsmith 1972) and optical densities of an immunoassay (Davidian &
Giltinan 1995, section 5.2.4) are held to the binomial limits of a 90 % range.
"""

import shutil
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy.stats import binom
from scipy.stats import t as student

import muntin
from muntin.window.coded import code
from muntin.window.probability import Target, well_meets
from tests.studies import written

DATA = Path(__file__).parent / "data"
REACTOR = Path(__file__).parents[2] / "examples" / "reactor-yield"


def left_out(stack):
    """Transforms (n,) of the stacked leave-one-out predictions."""
    return stack.shares @ np.stack([fit.loo.pit for fit in stack.fits])


def inside(pit, share):
    return int((np.abs(pit - 0.5) < share / 2.0).sum())


# --- Reactor yields: one run, and one block, left out --------------------------------------------


@pytest.fixture(scope="module")
def reactor():
    return muntin.assess(muntin.open_study(REACTOR), surrogate="quadratic", seed=1)


def deleted(runs):
    """Classical prediction (n, 3) of each run from the others: mean, scale and transform.

    Least squares of the full quadratic with a block term on 13 runs; (y - mean) / scale is the
    externally studentised residual, t on 6 degrees of freedom (Cook & Weisberg 1982, section 2.2).
    """
    x1, x2 = (runs["time"] - 85.0) / 5.0, (runs["temperature"] - 175.0) / 5.0
    second = (runs["plate"] == "plate-02").astype(float)
    X = np.column_stack([np.ones(len(runs)), second, x1, x2, x1 * x2, x1**2, x2**2])
    y = runs["y"].to_numpy(dtype=float)
    out = []
    for i in range(len(y)):
        A, b = np.delete(X, i, axis=0), np.delete(y, i)
        beta, square = np.linalg.lstsq(A, b, rcond=None)[:2]
        scale = np.sqrt(square[0] / 6.0 * (1.0 + X[i] @ np.linalg.solve(A.T @ A, X[i])))
        mean = X[i] @ beta
        out.append([mean, scale, student.cdf((y[i] - mean) / scale, 6)])
    return np.array(out)


def test_each_reactor_run_is_predicted_as_by_least_squares_without_it(reactor):
    """Means within a fifth of the classical scale, sds within a fifth of the t's, transforms within
    0.05: so much the priors may move where 13 runs tell.
    """
    loo = reactor.stacks["yield_percent"].fits[0].loo
    mean, scale, pit = deleted(reactor.study.readings("yield_percent")).T
    assert (np.abs(loo.mean - mean) / scale).max() < 0.2
    assert np.abs(np.log(loo.sd / (scale * np.sqrt(6.0 / 4.0)))).max() < np.log(1.2)
    assert np.abs(loo.pit - pit).max() < 0.05
    assert inside(loo.pit, 0.9) == inside(pit, 0.9)
    for share in (0.5, 0.9):
        assert binom.ppf(0.005, 14, share) <= inside(loo.pit, share) <= binom.ppf(0.995, 14, share)


@pytest.mark.parametrize(("left", "sign"), [("plate-01", 1.0), ("plate-02", -1.0)])
def test_a_reactor_block_left_out_lies_where_a_new_block_may(tmp_path, reactor, left, sign):
    """The second block yields 4.46 less. Every run of it lies in the central 95 % of a new run in a
    new block, as predicted from the other block alone, and on its low side; and turned about.
    """
    folder = tmp_path / "study"
    shutil.copytree(REACTOR, folder)
    (folder / "plates" / f"{left}.csv").unlink()
    view = muntin.assess(muntin.open_study(folder), surrogate="quadratic", seed=1)
    runs = reactor.study.readings("yield_percent").query("plate == @left").reset_index(drop=True)
    surface = view.surfaces["yield_percent"]
    moments = surface.moments(code(view.study.definition, runs[["time", "temperature"]]))
    pit = [well_meets(surface, moments, Target(high=y))[i] for i, y in enumerate(runs["y"])]
    off = sign * (np.array(pit) - 0.5)
    assert len(off) == 7
    assert (off > 0.3).all()
    assert (off < 0.475).all()


# --- Plates and batches --------------------------------------------------------------------------


def petrol():
    """Share of crude oil turned to petrol by end point and 10 % point; a crude is a plate."""
    data = pd.read_csv(DATA / "petrol_prater.csv")
    data = data.assign(end=data["EP"], ten=data["V10"], recovery=data["Y"] / 100.0)
    factors = [
        {"name": "end", "unit": "°F", "low": 205, "high": 445, "step": 1},
        {"name": "ten", "unit": "°F", "low": 190, "high": 316, "step": 1},
    ]
    return data, "No", ["end", "ten", "recovery"], {"factors": factors}


def penicillin():
    """Zone diameters: six samples on each of 24 plates, which move all of their plate alike."""
    data = pd.read_csv(DATA / "penicillin_plates.csv")
    zone = {"name": "diameter", "unit": "mm", "kind": "real", "at_least": 20, "typical": [18, 27]}
    given = {
        "factors": [{"name": "sample", "choices": list("ABCDEF")}],
        "responses": [zone],
        "shared_errors": [{"by": ["plate"], "acts": "inside"}],
    }
    # Two pairs of plates agree in all their whole millimetres and would pass for copies.
    turned = data.groupby("plate", sort=False).ngroup() % 6
    place = data.groupby("plate").cumcount()
    data = data.iloc[np.lexsort(((place + turned) % 6, data["plate"]))]
    return data, "plate", ["sample", "diameter"], given


def immunoassay(kind, typical):
    """Optical density by concentration: eight in duplicate on each of eleven plates."""
    data = pd.read_csv(DATA / "dnase_elisa.csv")
    conc = {"name": "conc", "low": 0.045, "high": 12.5, "step": 0.005, "scale": "log"}
    density = {"name": "density", "kind": kind, "at_least": 0.5, "typical": typical}
    given = {"factors": [conc], "responses": [density]}
    return data, "Run", ["conc", "density"], given


@pytest.mark.parametrize(
    "data",
    [petrol(), penicillin(), immunoassay("real", [0, 2]), immunoassay("positive", [0.02, 2])],
    ids=["petrol", "penicillin", "immunoassay", "immunoassay as positive"],
)
def test_nine_in_ten_readings_left_out_lie_in_their_range(tmp_path, data):
    """Within the 99 % limits of the binomial. The immunoassay's noise grows with concentration,
    which neither kind describes: its transforms crowd the middle, and only the range holds.
    """
    table, plate, columns, given = data
    plates = [group[columns] for _, group in table.groupby(plate, sort=False)]
    view = muntin.assess(written(tmp_path, plates, **given), seed=1)
    pit = left_out(view.stacks[columns[-1]])
    n = len(table)
    assert len(pit) == n
    assert binom.ppf(0.005, n, 0.9) <= inside(pit, 0.9) <= binom.ppf(0.995, n, 0.9)
