"""Moments of one cell against dense quadrature over latent value and scale error."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.special import expit, log_ndtr

from muntin.surrogate.tilted import CellLikelihood, Pair, tilt

# Three cells at two nodes: mid-slope, on the plateau, and a reading below nothing.
MEAN, COUNT = np.array([0.55, 0.97, -0.02]), np.array([1.0, 3.0, 2.0])
WITHIN, VARIANCE = np.array([0.0, 0.003, 0.001]), np.array([0.0, 0.0, 0.02**2])
NOISE, SCALE = np.array([[0.03**2], [0.08**2]]), np.array([[0.03], [0.1]])
OFFSET, CEILING = 0.4, np.array([[0.97], [0.9]])


WANDER = np.array([0.3**2, 0.5**2, 0.2**2])
CENSORED = np.array([-1, 1, -1])


@pytest.fixture(params=["plain", "set with error", "censored"])
def likelihood(request):
    """Readings as they are, set with errors beside, and the last two as well as censored."""
    plain = CellLikelihood(
        link="logit",
        offset=OFFSET,
        mean=MEAN,
        count=COUNT,
        within=WITHIN,
        variance=VARIANCE,
        censored=np.zeros(3, dtype=int),
        wander=np.zeros(3),
        noise=NOISE,
        scale=SCALE,
        ceiling=CEILING,
    )
    if request.param == "plain":
        return plain
    wandering = replace(plain, wander=WANDER)
    if request.param == "set with error":
        return wandering
    return replace(wandering, censored=CENSORED, count=np.ones(3), within=np.zeros(3))


@pytest.fixture
def cavity():
    u = np.array([[0.1, 1.9, -2.5], [-0.4, 2.6, -3.0]])
    uu = np.array([[0.3, 0.9, 0.8], [0.6, 0.4, 1.5]]) ** 2
    s = np.array([[0.2, -0.5, 0.0], [0.8, 0.1, -0.3]])
    ss = np.array([[0.9, 0.7, 1.0], [0.5, 0.8, 0.9]])
    return Pair(u, s, uu, 0.4 * np.sqrt(uu * ss), ss)


def dense(lik, cavity, node, cell):
    """Log normaliser and moments on a grid of latent values and scale errors."""
    mu = np.array([cavity.u[node, cell], cavity.s[node, cell]])
    K = np.array(
        [
            [cavity.uu[node, cell], cavity.us[node, cell]],
            [cavity.us[node, cell], cavity.ss[node, cell]],
        ]
    )
    z = np.linspace(-7.0, 7.0, 561)
    Z = np.stack(np.meshgrid(z, z, indexing="ij")).reshape(2, -1)
    u, s = mu[:, None] + np.linalg.cholesky(K) @ Z
    g = CEILING[node, 0] * expit(u + OFFSET)
    mean = (1.0 + lik.scale[node, 0] * s) * g
    slope = g * (1.0 - expit(u + OFFSET))
    v = lik.noise[node, 0] + lik.variance[cell] + slope**2 * lik.wander[cell]
    # Density of every reading of the cell, written out from its sum of squares about their mean.
    squares = lik.within[cell] + lik.count[cell] * (lik.mean[cell] - mean) ** 2
    log_w = -0.5 * squares / v - 0.5 * lik.count[cell] * np.log(2.0 * np.pi * v)
    if lik.censored[cell]:
        log_w = log_ndtr(-lik.censored[cell] * (lik.mean[cell] - mean) / np.sqrt(v))
    log_w += -0.5 * (Z**2).sum(0) - np.log(2.0 * np.pi) + 2.0 * np.log(z[1] - z[0])
    w = np.exp(log_w)
    total = w.sum()
    w /= total
    mu_u, mu_s = w @ u, w @ s
    return (
        np.log(total),
        mu_u,
        mu_s,
        w @ (u - mu_u) ** 2,
        w @ ((u - mu_u) * (s - mu_s)),
        (w @ (s - mu_s) ** 2),
    )


def test_moments_agree_with_a_dense_grid(likelihood, cavity):
    tilted = tilt(likelihood, cavity, cavity.u, np.sqrt(cavity.uu))
    for node in range(2):
        for cell in range(3):
            log_z, u, s, uu, us, ss = dense(likelihood, cavity, node, cell)
            p = tilted.pair
            # 32 points leave about 1e-3 of an sd where the law bends onto a plateau.
            sd_u, sd_s = np.sqrt(uu), np.sqrt(ss)
            assert tilted.log_z[node, cell] == pytest.approx(log_z, abs=1e-3)
            assert p.u[node, cell] == pytest.approx(u, abs=2e-3 * sd_u)
            assert p.s[node, cell] == pytest.approx(s, abs=2e-3 * sd_s)
            assert p.uu[node, cell] == pytest.approx(uu, rel=4e-3)
            assert p.ss[node, cell] == pytest.approx(ss, rel=4e-3)
            assert p.us[node, cell] == pytest.approx(us, abs=4e-3 * sd_u * sd_s)


@pytest.mark.usefixtures("fine_quadrature")
@pytest.mark.parametrize("what", ["noise", "ceiling"])
def test_slopes_in_noise_and_ceiling_agree_with_differences(likelihood, cavity, what):
    """Of the log normaliser in the logarithms of the noise sd and of the ceiling."""
    h, power = 1e-4, {"noise": 2.0, "ceiling": 1.0}[what]

    def at(step):
        moved = replace(likelihood, **{what: getattr(likelihood, what) * np.exp(power * step)})
        return tilt(moved, cavity, cavity.u, np.sqrt(cavity.uu)).log_z

    tilted = tilt(likelihood, cavity, cavity.u, np.sqrt(cavity.uu))
    slope = getattr(tilted, f"{what}_slope")
    assert slope == pytest.approx((at(h) - at(-h)) / (2.0 * h), rel=1e-5, abs=1e-5)


def test_the_quadrature_finds_the_law_from_afar(likelihood, cavity):
    """Started 5 cavity sds away, or ten times too wide, the answer is the same to its accuracy."""
    good = tilt(likelihood, cavity, cavity.u, np.sqrt(cavity.uu))
    for start, spread in ((-5.0, 1.0), (5.0, 0.3), (0.0, 10.0)):
        sd = np.sqrt(cavity.uu)
        far = tilt(likelihood, cavity, cavity.u + start * sd, spread * sd)
        assert far.log_z == pytest.approx(good.log_z, abs=2e-3)
        assert far.pair.u == pytest.approx(good.pair.u, abs=5e-3)


def test_without_scale_errors_only_the_latent_value_is_told_of(likelihood, cavity):
    zero = np.zeros_like(cavity.u)
    plain = replace(likelihood, scale=np.zeros((2, 1)))
    alone = Pair(cavity.u, zero, cavity.uu, zero, zero + 1.0)
    tilted = tilt(plain, alone, alone.u, np.sqrt(alone.uu))
    assert tilted.pair.s == pytest.approx(zero, abs=1e-12)
    assert tilted.pair.us == pytest.approx(zero, abs=1e-12)
    assert tilted.pair.ss == pytest.approx(zero + 1.0, abs=1e-12)
