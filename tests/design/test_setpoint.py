"""The expected probability of the set point, against readings drawn and taken in one by one."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.special import ndtr

import muntin
from muntin.design.outlook import Outlook
from muntin.design.setpoint import expected_best
from muntin.window.coded import code
from tests.studies import PH, RECOVERY, SALT, SHIFT, changed, read, read_shift, spread, written

FACTORS = [PH, SALT]
WELLS = [5, 17, 30, 2, 17, 44, 9, 60]
SHARED = [{"by": ["plate"], "acts": "inside"}]


@pytest.fixture(scope="module")
def one_node(tmp_path_factory):
    """A real response on one Gaussian node, whose readings are linear in it."""
    plates = [read_shift(spread(FACTORS, 8, seed), seed) for seed in (1, 2)]
    study = written(tmp_path_factory.mktemp("one"), plates, responses=[SHIFT], shared_errors=SHARED)
    view = muntin.assess(study, "gp")
    return replace(view, surfaces={"shift": view.surfaces["shift"].take(np.array([0]), np.ones(1))})


def judged(view, by, **target):
    keys = {k: v for k, v in SHIFT.items() if not k.startswith("at_")}
    responses = [{**keys, **target}]
    return changed(view, study={"judged_by": by}, responses=responses, shared_errors=SHARED)


def outlook_of(view, name="shift"):
    grid = view.window().grid
    X = code(view.study.definition, grid)
    one = np.zeros(len(X), dtype=np.intp)
    scale = (one,) if view.surfaces[name].errors.scale.shape[1] else ()
    inside = (one,) if view.surfaces[name].errors.inside.shape[1] else ()
    return Outlook(view.surfaces[name], X, X, inside, scale, np.zeros(0, dtype=np.intp))


def drawn_best(view, wells, by, low, high, draws=6000):
    """Mean over drawn readings of the highest probability that the posterior then gives, by the
    textbook update of a normal law (Rasmussen & Williams 2006, eq. 2.23).
    """
    surface, X = view.surfaces["shift"], code(view.study.definition, view.window().grid)
    Z, (noise,), ((plate,),) = X[wells], surface.errors.noise, surface.errors.inside
    mean, variance = (part[0] for part in surface.moments(X))
    R = surface.covariance(Z, Z)[0] + plate**2 + noise**2 * np.eye(len(wells))
    C = surface.covariance(X, Z)[0]
    gain = np.linalg.solve(R, C.T).T
    left = variance - np.einsum("nk,nk->n", gain, C)
    more = noise**2 + plate**2 if by == "well" else 0.0
    news = np.random.default_rng(4).multivariate_normal(np.zeros(len(wells)), R, draws)
    then = mean[:, None] + gain @ news.T
    sd = np.sqrt(left + more)[:, None]
    return (ndtr((high - then) / sd) - ndtr((low - then) / sd)).max(axis=0).mean()


@pytest.mark.parametrize("by", ["mean", "well"])
@pytest.mark.parametrize(
    ("low", "high"), [(1.8, np.inf), (-np.inf, -1.9), (0.2, 0.5)], ids=["low", "high", "both"]
)
def test_agrees_with_drawn_readings(one_node, by, low, high):
    target = {"at_least": low, "at_most": high}
    view = judged(one_node, by, **{k: v for k, v in target.items() if np.isfinite(v)})
    window = view.window()
    today, lead = window.setpoint["probability"], window.grid["probability"].max()
    now, then = expected_best(view, window, [outlook_of(view)], WELLS, [0, len(WELLS)])
    assert now == today
    gain = drawn_best(view, WELLS, by, low, high) - lead
    # 128 pairs of draws of a gain whose sd is about its size.
    assert then - now == pytest.approx(gain, abs=0.15 * gain + 0.003)


def test_never_falls_with_wells(one_node):
    view = judged(one_node, "well", at_least=1.8)
    outlook, window = outlook_of(view), view.window()
    best = expected_best(view, window, [outlook], WELLS, [0, 1, 2, 4, 8])
    assert best[0] == window.setpoint["probability"]
    assert (np.diff(best) >= 0.0).all()
    assert best[-1] > best[0]


@pytest.mark.parametrize("by", ["mean", "well", "kept"])
def test_it_starts_at_the_windows_set_point(tmp_path_factory, by):
    plates = [read_shift(read(spread(FACTORS, 12, 1)))]
    kept = [{**PH, "kept_within": 0.2}, SALT]
    study = written(
        tmp_path_factory.mktemp("kept"), plates, factors=kept, responses=[RECOVERY, SHIFT]
    )
    view = muntin.assess(study, "quadratic")
    view = changed(view, factors=kept, responses=[RECOVERY, SHIFT], study={"judged_by": by})
    outlooks = [outlook_of(view, name) for name in ("recovery", "shift")]
    best = expected_best(view, view.window(), outlooks, WELLS, [0, 8])
    assert best[0] == view.window().setpoint["probability"]
    assert best[0] <= best[1] <= 1.0
