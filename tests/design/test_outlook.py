"""What new wells would tell, against dense Gaussian conditioning.

Posterior covariances are small differences of large numbers; identities hold to 1e-6 of them.
"""

from dataclasses import replace

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import expit

from muntin.design.outlook import Outlook
from muntin.surrogate.nodes import Errors
from tests.design.surfaces import points, surface

JUDGED = points(9, 20)
CANDIDATES = points(7, 21)
HALF = (CANDIDATES[:, 0] > 0.0).astype(np.intp)
PLATE = np.zeros(len(CANDIDATES), dtype=np.intp)
PICKS = [4, 0, 2, 4, 5, 0, 4]
KINDS = ["fraction", "positive", "real"]


@pytest.fixture(scope="module", params=KINDS)
def posterior(request):
    return surface(request.param)


def outlook(posterior, picks=(), candidates=CANDIDATES, judged=JUDGED):
    """An outlook whose wells share an inside error by half, and a scale error if they may."""
    scale = (PLATE,) if posterior.errors.scale.shape[1] else ()
    ahead = Outlook(posterior, judged, candidates, (HALF,), scale, np.arange(len(judged)))
    for well in picks:
        ahead.pick(well)
    return ahead


def weighed(mean, variance, of):
    """E[of(f)], f ~ N(mean, variance), by adaptive quadrature."""
    sd = np.sqrt(variance)

    def integrand(z):
        return of(mean + sd * z) * np.exp(-0.5 * z * z) / np.sqrt(2.0 * np.pi)

    return quad(integrand, -12.0, 12.0, epsabs=0.0, epsrel=1e-10, limit=200)[0]


def noise_and_lever(posterior):
    """Noise and lever (S, Q) of a well at each candidate, in latent units."""
    mean, variance = posterior.moments(CANDIDATES)
    sigma = posterior.errors.noise[:, None]
    if posterior.link != "logit":
        return np.broadcast_to(sigma**2, mean.shape), np.zeros_like(mean)

    def slope(f, ceiling):
        return ceiling * expit(f) * expit(-f)

    square, product = np.empty_like(mean), np.empty_like(mean)
    for place in np.ndindex(*mean.shape):
        m, v, top = mean[place], variance[place], posterior.errors.ceiling[place[0]]
        square[place] = weighed(m, v, lambda f, top=top: slope(f, top) ** 2)
        product[place] = weighed(m, v, lambda f, top=top: slope(f, top) * top * expit(f))
    return sigma**2 / square, product / square


def dense(posterior, picks, judged=JUDGED):
    """Variance (S, P) that the picks explain: their readings' covariance written out in full."""
    noise, lever = noise_and_lever(posterior)
    wells = CANDIDATES[picks]
    cross = posterior.covariance(judged, wells)
    whole = posterior.covariance(wells, wells)
    same = HALF[picks][:, None] == HALF[picks][None, :]
    errors = posterior.errors
    explained = np.empty((len(posterior.weights), len(judged)))
    for s in range(len(explained)):
        K = whole[s] + errors.inside[s, 0] ** 2 * same + np.diag(noise[s, picks])
        if errors.scale.shape[1]:
            K += errors.scale[s, 0] ** 2 * np.outer(lever[s, picks], lever[s, picks])
        explained[s] = np.einsum("pk,kl,pl->p", cross[s], np.linalg.inv(K), cross[s])
    return explained


def test_noise_and_lever_agree_with_quadrature(posterior):
    # Fifteen Gauss-Hermite points; sds here reach about 1, where they leave 1e-5.
    ahead = outlook(posterior)
    noise, lever = noise_and_lever(posterior)
    np.testing.assert_allclose(ahead.noise, noise, rtol=1e-4)
    np.testing.assert_allclose(ahead.lever, lever, rtol=1e-4)


@pytest.mark.parametrize("count", [1, 2, 4, len(PICKS)])
def test_explained_variance_agrees_with_dense_conditioning(posterior, count):
    ahead = outlook(posterior, PICKS[:count])
    exact = dense(posterior, PICKS[:count])
    # The points' 1e-5 in noise and lever is all that may differ; far points are explained little.
    np.testing.assert_allclose(ahead.explained, exact, rtol=1e-4, atol=1e-9 * exact.max())


def without_shared_errors(posterior):
    parts = []
    for part in posterior.parts:
        e = part.errors
        bare = Errors(e.noise, np.zeros_like(e.inside), np.zeros_like(e.scale), e.ceiling)
        parts.append(replace(part, errors=bare))
    return replace(posterior, parts=tuple(parts))


def test_shared_errors_leave_less_to_learn(posterior):
    # Their covariance adds to that of the readings, so it can only take from what is explained.
    ahead = outlook(posterior, PICKS)
    bare = outlook(without_shared_errors(posterior), PICKS)
    assert (bare.explained > ahead.explained).all()
    assert bare.explained.sum() > 1.01 * ahead.explained.sum()


def test_order_of_picks_does_not_matter(posterior):
    first = outlook(posterior, PICKS)
    for order in (sorted(PICKS), PICKS[::-1]):
        other = outlook(posterior, order)
        np.testing.assert_allclose(other.explained, first.explained, rtol=1e-6, atol=1e-12)
        np.testing.assert_allclose(other.reading_variance, first.reading_variance, rtol=1e-6)


def test_looking_ahead_is_what_a_pick_then_does(posterior):
    ahead = outlook(posterior, PICKS[:3])
    wells = np.array([6, 4, 1])
    promised = ahead.after(wells)
    assert promised.shape == (len(posterior.weights), 9, 3)
    for number, well in enumerate(wells):
        done = outlook(posterior, [*PICKS[:3], well])
        np.testing.assert_allclose(done.explained, promised[:, :, number], rtol=1e-6, atol=1e-12)


def test_looking_ahead_at_watched_points_only(posterior):
    watched = np.array([7, 2])
    scale = (PLATE,) if posterior.errors.scale.shape[1] else ()
    part = Outlook(posterior, JUDGED, CANDIDATES, (HALF,), scale, watched)
    whole = outlook(posterior, [3])
    part.pick(3)
    np.testing.assert_allclose(part.explained, whole.explained, rtol=1e-6)
    wells = np.array([0, 5])
    np.testing.assert_allclose(part.after(wells), whole.after(wells)[:, watched], rtol=1e-6)


def test_covariances_too_many_to_hold_are_computed_when_asked_for(posterior, monkeypatch):
    held = outlook(posterior, picks=(3, 5)).after(np.array([0, 6, 3]))
    monkeypatch.setattr("muntin.design.outlook._HELD", 10)
    single = outlook(posterior, picks=(3, 5))
    assert single._cross.dtype == np.float32
    assert single.after(np.array([0, 6, 3])) == pytest.approx(held, rel=1e-5)
    monkeypatch.setattr("muntin.design.outlook._HELD_SINGLE", 10)
    free = outlook(posterior, picks=(3, 5))
    assert free._cross is None
    assert free.after(np.array([0, 6, 3])) == pytest.approx(held, rel=1e-12)


def test_a_repeat_explains_less_than_the_first(posterior):
    first = outlook(posterior, [4]).explained
    second = outlook(posterior, [4, 4]).explained - first
    third = outlook(posterior, [4, 4, 4]).explained - first - second
    assert (second < first).all()
    assert (third < second).all()
    assert third.min() > 0.0


def test_own_gain_is_what_a_well_explains_of_its_own_condition(posterior):
    ahead = outlook(posterior, PICKS[:4], judged=CANDIDATES)
    before = ahead.explained.copy()
    gain = ahead.own_gain()
    for well in range(len(CANDIDATES)):
        done = outlook(posterior, [*PICKS[:4], well], judged=CANDIDATES)
        now = (done.explained - before)[:, well]
        np.testing.assert_allclose(gain[:, well], now, rtol=1e-6, atol=1e-12)


def test_explained_variance_never_exceeds_the_variance(posterior):
    ahead = outlook(posterior, judged=CANDIDATES)
    for well in [*PICKS, *[3] * 40]:
        ahead.pick(well)
        assert (ahead.explained <= ahead.variance).all()
        assert (ahead.explained >= 0.0).all()
        assert (ahead.reading_variance >= ahead.noise).all()


def test_a_shared_error_is_not_averaged_away():
    # Of a condition read n times on one plate, the inside error stays: v t / (v + t), n endless.
    posterior = surface("real")
    for count in (1, 30, 400):
        ahead = outlook(posterior, [3] * count, judged=CANDIDATES[[3]])
        noise = posterior.errors.noise**2
        error = posterior.errors.inside[:, 0] ** 2 + noise / count
        variance = ahead.variance[:, 0]
        left = variance - ahead.explained[:, 0]
        np.testing.assert_allclose(left, variance * error / (variance + error), rtol=1e-6)


def test_a_well_on_the_plateau_tells_little():
    posterior = surface("fraction")
    top, middle = np.array([[1.0, 1.0]]), np.array([[0.0, 0.0]])
    ahead = Outlook(posterior, JUDGED, np.concatenate([top, middle]), (), (), np.arange(9))
    assert (ahead.noise[:, 0] > 4.0 * ahead.noise[:, 1]).all()
