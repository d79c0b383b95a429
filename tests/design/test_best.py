"""Wells that may beat the best so far, against Monte Carlo and plain expected improvement."""

import numpy as np
import pytest
from scipy.special import expit, ndtr

from muntin.design.best import BestCriterion
from muntin.design.improvement import log_expected_improvement
from muntin.design.outlook import Outlook
from muntin.window.probability import Target
from tests.design.surfaces import points, surface

CANDIDATES = points(30, 31)
RUN = points(15, 3)
FAILED = RUN[[0, 1, 8]]
FAR = int(np.argmin(CANDIDATES.sum(axis=1)))
PLATE = np.zeros(30, dtype=np.intp)
NONE = np.zeros(0, dtype=np.intp)
INVERSE = {"logit": expit, "log": np.exp, "identity": lambda f: f}


@pytest.fixture(scope="module")
def surfaces():
    return {kind: surface(kind) for kind in ("fraction", "positive", "real")}


def outlook(posterior, picks=()):
    scale = (PLATE,) if posterior.errors.scale.shape[1] else ()
    ahead = Outlook(posterior, CANDIDATES, CANDIDATES, (PLATE,), scale, NONE)
    for well in picks:
        ahead.pick(well)
    return ahead


def one(posterior, target, picks=(), run=RUN):
    criterion = BestCriterion((outlook(posterior, picks),), (target,), run)
    return criterion.values(list(picks))


@pytest.mark.parametrize("rising", [True, False])
@pytest.mark.parametrize("kind", ["fraction", "positive", "real"])
def test_improvement_agrees_with_monte_carlo(surfaces, kind, rising):
    # What the posterior mean at x may become: N(mean, own gain), node by node.
    posterior = surfaces[kind]
    target = Target(low=0.5) if rising else Target(high=0.5)
    picks = (7, 7, 2)
    values = np.exp(one(posterior, target, picks))
    ahead, sign = outlook(posterior, picks), 1.0 if rising else -1.0
    known = np.concatenate([posterior.moments(RUN)[0], ahead.mean[:, list(picks)]], axis=1)
    mark = (sign * known).max(axis=1)[:, None, None] * sign
    z = np.random.default_rng(5).standard_normal(20_000)
    moved = ahead.mean[..., None] + np.sqrt(ahead.own_gain())[..., None] * z
    g = INVERSE[posterior.link]
    gain = np.maximum(sign * (g(moved) - g(mark)), 0.0)
    gain *= posterior.errors.ceiling[:, None, None]
    drawn = np.einsum("s,sqz->qz", posterior.weights, gain)
    error = drawn.std(axis=1) / np.sqrt(len(z))
    # Where fewer than a hundred draws improve, their mean says little.
    clear = (drawn > 0.0).sum(axis=1) > 100
    assert clear.sum() >= 2
    np.testing.assert_array_less(np.abs(drawn.mean(axis=1) - values)[clear], 4.5 * error[clear])


def test_without_noise_it_is_the_usual_expected_improvement():
    # One node, no shared error, noise next to none: the mean then moves by the whole sd.
    posterior = surface("real", nodes=1, shared=False).take(np.array([0]), np.ones(1))
    quiet = posterior.parts[0].errors
    quiet.noise[:] = 1e-9
    values = one(posterior, Target(low=0.5))
    mean, variance = posterior.moments(CANDIDATES)
    best = posterior.moments(RUN)[0].max()
    usual = log_expected_improvement(mean[0], np.sqrt(variance[0]), best)
    np.testing.assert_allclose(values, usual, rtol=1e-5)


@pytest.mark.parametrize("kind", ["fraction", "positive", "real"])
def test_repeating_a_pick_promises_less(surfaces, kind):
    target = Target(low=0.5)
    before = one(surfaces[kind], target)
    well = int(np.argmax(before))
    after = one(surfaces[kind], target, (well,))
    assert after[well] < before[well] - 0.5


def test_mark_counts_picked_conditions_too(surfaces):
    # A pick whose mean lies above all that was run raises the mark for every other candidate.
    posterior = surfaces["real"]
    mean = posterior.weights @ posterior.moments(CANDIDATES)[0]
    top = int(np.argmax(mean))
    low_run = points(15, 3)[:1] * 0.0 - 1.0
    criterion = BestCriterion((outlook(posterior),), (Target(low=0.5),), low_run)
    without, with_pick = criterion.values([]), criterion.values([top])
    assert (with_pick < without).all()


def test_before_anything_was_run_candidates_still_rank(surfaces):
    values = one(surfaces["fraction"], Target(low=0.8), run=RUN[:0])
    assert np.isfinite(values).all()
    mean, _ = surfaces["fraction"].moments(CANDIDATES)
    assert np.corrcoef(values, mean[0])[0, 1] > 0.5


def test_values_stay_finite_where_all_is_far_below_the_mark(surfaces):
    posterior = surfaces["real"]
    values = one(posterior, Target(low=0.5), run=np.array([[60.0, -60.0]]))
    assert np.isfinite(values).all()
    assert len(np.unique(values)) == len(values)


def success(posterior, f, target):
    noise = float(posterior.weights @ posterior.errors.noise)
    g = f
    if posterior.link == "logit":
        g = (posterior.weights @ posterior.errors.ceiling) * expit(f)
    low, high = target.low, target.high
    if posterior.link == "log":
        low, high = np.log(low) if low > 0.0 else -np.inf, np.log(high)
    return ndtr((high - g) / noise) - ndtr((low - g) / noise)


JOINT = [
    (("fraction", "real"), (Target(low=0.6), Target(low=-1.5, high=0.5))),
    (("real",), (Target(low=-0.9, high=-0.3),)),
    (("fraction", "positive"), (Target(low=0.6), Target(high=0.8))),
]


@pytest.mark.parametrize(("kinds", "targets"), JOINT)
def test_improvement_of_joint_success_agrees_with_monte_carlo(surfaces, kinds, targets):
    # 128 Sobol' points against 40,000 draws: what differs is the Sobol' error, below 0.02.
    rng = np.random.default_rng(6)
    drawn, mark = np.ones((40_000, 30)), np.ones(len(FAILED) + 1)
    outlooks = []
    for kind, target in zip(kinds, targets, strict=True):
        posterior = surfaces[kind]
        ahead = outlook(posterior, [FAR])
        outlooks.append(ahead)
        w = posterior.weights
        mean = w @ ahead.mean
        sd = np.sqrt(w @ (ahead.own_gain() + (ahead.mean - mean) ** 2))
        drawn *= success(posterior, mean + sd * rng.standard_normal((40_000, 1)), target)
        run = np.concatenate([w @ posterior.moments(FAILED)[0], mean[[FAR]]])
        mark *= success(posterior, run, target)
    exact = np.maximum(drawn - mark.max(), 0.0).mean(axis=0)
    values = np.exp(BestCriterion(tuple(outlooks), targets, FAILED).values([FAR]))
    assert exact.max() > 0.5
    np.testing.assert_allclose(values, exact, atol=0.02)


def test_several_responses_are_weighed_together(surfaces):
    # The best recovery is worth nothing where the second response fails.
    outlooks = (outlook(surfaces["fraction"]), outlook(surfaces["real"]))
    recovery = Target(low=0.6)
    alone = BestCriterion(outlooks, (recovery, Target(low=-50.0)), FAILED).values([])
    both = BestCriterion(outlooks, (recovery, Target(high=-0.5)), FAILED).values([])
    real = surfaces["real"].weights @ surfaces["real"].moments(CANDIDATES)[0]
    assert real[np.argmax(alone)] > 0.0
    assert real[np.argmax(both)] < -0.5
    fails = real > 0.5
    assert (both[fails] < alone[fails] - 1.0)[alone[fails] > -20.0].all()


def test_where_no_draw_improves_the_chance_of_success_ranks(surfaces):
    # A sure pass was run, so nothing beats it; of what likely fails the likeliest pass comes first.
    posterior, target = surfaces["real"], Target(low=-1.5, high=0.5)
    sure = np.array([[-0.2, 0.3]])
    values = BestCriterion((outlook(posterior),), (target,), sure).values([])
    mean = posterior.weights @ posterior.moments(CANDIDATES)[0]
    chance = success(posterior, mean, target)
    fails = (chance > 1e-200) & (chance < 0.5)
    order = np.argsort(chance[fails])
    assert fails.sum() >= 5
    assert (np.diff(values[fails][order]) > 0.0).all()
