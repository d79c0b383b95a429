"""The share of the range still called wrongly, against draws of what the readings may show."""

from functools import reduce

import numpy as np
import pytest
from scipy.special import logit, ndtr, ndtri

from muntin.design.excursion import expected_wrong
from muntin.design.forecast import Tails, wrong_share
from muntin.design.outlook import Outlook
from muntin.window.predicted import Predicted
from muntin.window.probability import Target, mean_meets
from tests.design.surfaces import points, surface

JUDGED = points(50, 40)
CANDIDATES = points(20, 41)
PLATE = np.zeros(20, dtype=np.intp)
ABOVE, BELOW, BETWEEN = Target(low=0.6), Target(high=0.8), Target(low=-0.8, high=0.7)
STUDIES = [
    (("fraction", ABOVE),),
    (("positive", BELOW),),
    (("real", BETWEEN),),
    (("fraction", Target(low=0.3, high=0.9)),),
    (("real", Target(low=0.1, high=0.3)),),
    (("fraction", ABOVE), ("positive", BELOW)),
    (("fraction", ABOVE), ("real", BETWEEN), ("positive", BELOW)),
]


def outlook(posterior, picks=()):
    scale = (PLATE,) if posterior.errors.scale.shape[1] else ()
    ahead = Outlook(posterior, JUDGED, CANDIDATES, (PLATE,), scale, np.arange(len(JUDGED)))
    for well in picks:
        ahead.pick(well)
    return ahead


def today(posterior, target):
    return Tails.of(Predicted(posterior, posterior.moments(JUDGED), target))


@pytest.fixture(scope="module")
def surfaces():
    return {kind: surface(kind) for kind in ("fraction", "positive", "real")}


@pytest.mark.parametrize("study", STUDIES)
def test_without_wells_it_is_todays_share(surfaces, study):
    p = np.ones(len(JUDGED))
    for kind, target in study:
        p *= mean_meets(surfaces[kind], surfaces[kind].moments(JUDGED), target)
    outlooks = [outlook(surfaces[kind]) for kind, _ in study]
    tails = [today(surfaces[kind], target) for kind, target in study]
    share = wrong_share(outlooks, tails)
    assert share == pytest.approx(np.minimum(p, 1.0 - p).mean(), abs=1e-9)
    assert share > 0.005


def latent(link, value, ceiling):
    if link == "logit":
        share = value / ceiling
        return -np.inf if share <= 0.0 else (np.inf if share >= 1.0 else logit(share))
    if link == "log":
        return -np.inf if value <= 0.0 else np.log(value)
    return value


def drawn_share(outlooks, targets, draws=30_000):
    """Mean over drawn readings of the share called wrongly, for surfaces of one node each."""
    rng, joint = np.random.default_rng(9), []
    for ahead, target in zip(outlooks, targets, strict=True):
        mean, total, explained = ahead.mean[0], ahead.variance[0], ahead.explained[0]
        z = rng.standard_normal((draws, 1))
        moved, left = mean + np.sqrt(explained) * z, np.sqrt(total - explained)
        link, (ceiling,) = ahead.surface.link, ahead.surface.errors.ceiling
        low, high = (latent(link, v, ceiling) for v in (target.low, target.high))
        joint.append(ndtr((high - moved) / left) - ndtr((low - moved) / left))
    p = reduce(np.multiply, joint)
    return np.minimum(p, 1.0 - p).mean()


@pytest.mark.parametrize("study", STUDIES)
def test_what_wells_bring_agrees_with_drawn_readings(study):
    # One node, so that the match of the mixture by a Gaussian is exact; 64 Sobol' points where
    # there is no closed form leave 1 to 2 %, 30,000 draws about 0.5 %.
    posteriors = [surface(kind, nodes=1).take(np.array([0]), np.ones(1)) for kind, _ in study]
    targets = [target for _, target in study]
    tails = [today(p, target) for p, target in zip(posteriors, targets, strict=True)]
    before = wrong_share([outlook(posterior) for posterior in posteriors], tails)
    outlooks = [outlook(posterior, range(20)) for posterior in posteriors]
    gain = before - wrong_share(outlooks, tails)
    assert gain == pytest.approx(before - drawn_share(outlooks, targets), rel=0.03)
    assert gain > 0.1 * before


def test_nodes_that_disagree_are_part_of_what_is_not_known(surfaces):
    # One limit has a closed form, in the share of the whole variance that the wells explain.
    posterior = surfaces["fraction"]
    ahead, w = outlook(posterior, [3, 8]), posterior.weights
    p = today(posterior, ABOVE).above
    between = w @ (ahead.mean - w @ ahead.mean) ** 2
    within = w @ ahead.variance
    rho = (w @ ahead.explained) / (within + between)
    share = wrong_share([ahead], [Tails(above=p, below=None)])
    assert share == pytest.approx(expected_wrong(ndtri(p), rho).mean(), rel=1e-9)
    assert between.sum() > 0.02 * within.sum()


@pytest.mark.parametrize("study", STUDIES)
def test_more_wells_never_leave_more(surfaces, study):
    outlooks = [outlook(surfaces[kind]) for kind, _ in study]
    tails = [today(surfaces[kind], target) for kind, target in study]
    shares = [wrong_share(outlooks, tails)]
    for well in [*range(12), 3, 3, 3]:
        for ahead in outlooks:
            ahead.pick(well)
        shares.append(wrong_share(outlooks, tails))
    assert (np.diff(shares) < 0.0).all()
    assert shares[-1] > 0.0


@pytest.mark.parametrize("target", [ABOVE, BELOW, BETWEEN])
def test_tails_of_a_target(surfaces, target):
    posterior = surfaces["real"]
    tails = today(posterior, target)
    meets = mean_meets(posterior, posterior.moments(JUDGED), target)
    np.testing.assert_allclose(tails.meets, meets, atol=1e-12)
    if np.isinf(target.low):
        assert tails.above is None
    else:
        low = mean_meets(posterior, posterior.moments(JUDGED), Target(low=target.low))
        np.testing.assert_allclose(tails.above, low, atol=1e-12)
