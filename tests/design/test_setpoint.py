"""The expected probability of the set point, against readings drawn and taken in one by one."""

from dataclasses import replace
from unittest import mock

import numpy as np
import pytest
from scipy.special import expit, ndtr

import muntin
from muntin.design.outlook import Outlook
from muntin.design.setpoint import Drawn, SetPoint, _around, _unknown, set_points
from muntin.surrogate.assembly import nodes_of
from muntin.surrogate.evidence import evaluate
from muntin.surrogate.nodes import Surface
from muntin.window.coded import code
from tests.design.surfaces import surface
from tests.studies import PH, RECOVERY, SALT, SHIFT, changed, read, read_shift, spread, written

FACTORS = [PH, SALT]
WELLS = [5, 17, 30, 2, 17, 44, 9, 60]
SHARED = [{"by": ["plate"], "acts": "inside"}]


@pytest.fixture(scope="module")
def one_node(tmp_path_factory):
    """A real response on one Gaussian node, at the prior medians of the hyperparameters, whose
    readings are linear in it.
    """
    plates = [read_shift(spread(FACTORS, 8, seed), seed) for seed in (1, 2)]
    study = written(tmp_path_factory.mktemp("one"), plates, responses=[SHIFT], shared_errors=SHARED)
    view = muntin.assess(study, "gp")
    (fit,) = view.stacks["shift"].fits
    evidence = evaluate(fit.model, fit.model.layout.theta(np.zeros((1, len(fit.model.layout)))))
    approx = evidence.approximation
    nodes = nodes_of(fit.model, evidence.theta, evidence.root, approx.mean, approx.V)
    surface = Surface((nodes,), np.ones(1), fit.surface.link)
    return replace(view, surfaces={"shift": surface})


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


def drawn_tops(view, wells, by, low, high, draws=6000):
    """The highest probability that the posterior gives after drawn readings, and that of today's
    set point (draws,): readings are taken in by the textbook update of a normal law (Rasmussen &
    Williams 2006, eq. 2.23).
    """
    window = view.window()
    surface, X = view.surfaces["shift"], code(view.study.definition, window.grid)
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
    p = ndtr((high - then) / sd) - ndtr((low - then) / sd)
    lead = window.grid["probability"].max() - window.setpoint["probability"]
    own = p[window.setpoint.name]
    return np.maximum(p.max(axis=0) - lead, own), own


@pytest.mark.parametrize("by", ["mean", "well"])
@pytest.mark.parametrize(
    ("low", "high"),
    [(2.3, np.inf), (-np.inf, -2.3), (0.2, 0.5)],
    ids=["low", "high", "both"],
)
def test_agrees_with_drawn_readings(one_node, by, low, high):
    target = {"at_least": low, "at_most": high}
    view = judged(one_node, by, **{k: v for k, v in target.items() if np.isfinite(v)})
    outlook, window = outlook_of(view), view.window()
    limit = window.setpoint["probability"] + 0.03
    now, then = set_points(view, window, [outlook], WELLS, [0, len(WELLS)], limit)
    assert now == SetPoint(window.setpoint["probability"], 0.0)
    top, own = drawn_tops(view, WELLS, by, low, high)
    # Three standard errors of the 512 draws, and what half a draw in doubt adds.
    gain, error = (top - own).mean(), (top - own).std() / np.sqrt(512)
    assert then.expected - now.expected == pytest.approx(gain, abs=3.0 * error + 1e-4)
    reached = (top >= limit).mean()
    error = np.sqrt(reached * (1.0 - reached) / 512)
    assert then.reached == pytest.approx(reached, abs=3.0 * error + 0.001)
    assert 0.05 < reached < 0.95


def test_choosing_again_is_worth_something_where_the_best_may_move(one_node):
    view = judged(one_node, "mean", at_least=0.2, at_most=0.5)
    outlook, window = outlook_of(view), view.window()
    best = set_points(view, window, [outlook], WELLS, [0, 1, 2, 4, 8], 0.9)
    expected = [b.expected for b in best]
    assert expected[0] == window.setpoint["probability"]
    assert (np.diff(expected) >= 0.0).all()
    assert expected[-1] > expected[0] + 0.05


def test_a_limit_that_is_reached_today(one_node):
    view = judged(one_node, "well", at_least=1.8)
    p = view.window().setpoint["probability"]
    for limit, reached in ((p, 1.0), (np.nextafter(p, 1.0), 0.0)):
        (now,) = set_points(view, view.window(), [outlook_of(view)], WELLS, [0], limit)
        assert now == SetPoint(p, reached)


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
    now, then = set_points(view, view.window(), outlooks, WELLS, [0, 8], 0.9)
    p = view.window().setpoint["probability"]
    assert now.expected == p
    assert now.expected <= then.expected <= 1.0
    # Wells that tell nothing leave it as it is, to what 40 nodes are off in these chances.
    for outlook in outlooks:
        outlook.noise = 1e9 * outlook.noise
    for limit, reached in ((p - 1e-4, 1.0), (p + 1e-4, 0.0)):
        _, then = set_points(view, view.window(), outlooks, WELLS, [0, 8], limit)
        assert then.expected == pytest.approx(p, abs=1e-5)
        assert then.reached == pytest.approx(reached, abs=0.001)


@pytest.mark.parametrize("by", ["mean", "well"])
def test_every_condition_is_expected_to_stay_what_it_is(one_node, by):
    # The mean of posterior probabilities is the prior one.
    view = judged(one_node, by, at_least=0.2, at_most=0.7)
    (around,) = _around(view, view.window().grid, [outlook_of(view)], WELLS)
    drawn = Drawn.of(around.weights, len(WELLS), np.random.default_rng(3))
    then, now = around.then(len(WELLS), drawn), around.now()
    np.testing.assert_allclose(around.then(0, drawn), now[:, None] + np.zeros(512), atol=1e-12)
    unsure = (now > 0.05) & (now < 0.95)
    assert unsure.sum() >= 5
    error = then[unsure].std(axis=1) / np.sqrt(512)
    assert (np.abs(then.mean(axis=1) - now)[unsure] < 4.0 * error).all()
    assert error.max() > 0.005


@pytest.mark.parametrize("limit", [0.3, 0.8])
def test_what_a_well_adds_where_the_surface_is_known(limit):
    # Without inside errors the chance that a reading meets the limit is exact.
    posterior = surface("fraction")
    none = np.zeros((len(posterior.weights), 0))
    errors = replace(posterior.errors, inside=none)
    place = posterior.thresholds(limit)
    assert np.isfinite(place).all()
    away = np.array([-3.0, -1.0, -1e-6, 1e-6, 0.5, 1.5, 4.0])
    mean = place + away
    with mock.patch.object(Surface, "errors", errors):
        n = _unknown(posterior, limit, mean)
        for node in range(len(posterior.weights)):
            g = errors.ceiling[node] * expit(mean[node])
            sd = np.sqrt(errors.noise[node] ** 2 + (errors.scale[node] ** 2).sum() * g**2)
            exact = ndtr((g - limit) / sd)
            np.testing.assert_allclose(ndtr(away / np.sqrt(n[node])), exact, atol=1e-6)
    assert (n[:, -1] > n[:, 3]).all()


def test_a_limit_above_the_ceiling_is_out_of_reach():
    posterior = surface("fraction")
    assert np.isinf(_unknown(posterior, 1.0, np.ones((len(posterior.weights), 2)))).all()


def test_nodes_that_disagree_are_part_of_what_is_not_known(tmp_path):
    study = written(tmp_path, [read(spread(FACTORS, 12, 1))], study={"judged_by": "mean"})
    view = muntin.assess(study, "stacked")
    (outlook,) = [outlook_of(view, "recovery")]
    (around,) = _around(view, view.window().grid, [outlook], WELLS)
    w, means, variance = outlook.surface.weights, outlook.mean, outlook.variance
    between = np.array([np.cov(f, aweights=w, ddof=0) for f in means.T])
    np.testing.assert_allclose(around.spread[0], variance + between, rtol=1e-8)
    assert between.max() > 0.05
