"""Several responses in one future well, against draws of nodes, surfaces, errors and noise."""

from dataclasses import dataclass

import numpy as np
import pytest

from muntin.surrogate.bivariate import bivariate_normal
from muntin.surrogate.nodes import Errors, Surface
from muntin.window.joint import joint_meets
from muntin.window.predicted import Predicted
from muntin.window.probability import Target

DRAWS = 600_000
ROWS, NODES = 7, 3
CEILING = np.array([1.0, 0.97, 0.90])
WEIGHTS = np.array([0.2, 0.5, 0.3])
# Standard error of a probability from so many draws, at most.
ERROR = 0.5 / np.sqrt(DRAWS)


@dataclass(frozen=True)
class Known:
    """A part of a surface of which only the errors are asked."""

    errors: Errors

    def __len__(self):
        return len(self.errors.noise)

    def take(self, index):
        return Known(self.errors.nodes(index))


def surface(link, noise):
    """Three nodes of unequal weight, noise and ceiling; two inside and two scale errors each."""
    growth = np.array([[1.0], [1.4], [0.7]])
    inside, scale = np.array([[0.10, 0.05]]) * growth, np.array([[0.03, 0.02]]) * growth
    return Surface((Known(Errors(noise * growth[:, 0], inside, scale, CEILING)),), WEIGHTS, link)


def predicted(rng, link, target, noise=0.03, shifted=False):
    """A response at conditions (ROWS,) around its target; nodes disagree."""
    mean = rng.normal(1.3, 1.0, (1, ROWS)) + rng.normal(0.0, 0.4, (NODES, ROWS))
    sd = rng.uniform(0.05, 0.9, (NODES, ROWS))
    size = 1.0 if link == "logit" else 0.1
    shift = rng.normal(0.0, 1.0, (ROWS, 2)) * size * 0.15 if shifted else None
    wander = None if shift is None else np.broadcast_to((shift**2).sum(1), (NODES, ROWS))
    moments = size * 1.5 * mean, (size * 0.5 * sd) ** 2
    if link == "logit":
        moments = mean, sd**2
    return Predicted(surface(link, noise), moments, target, wander, shift)


def met(response, noise, setting, rng):
    """Whether drawn readings (draws, ROWS) meet the target, from the model as it is written."""
    errors, count = response.surface.errors, len(noise)
    node = rng.choice(NODES, count, p=WEIGHTS)
    mean, variance = response.moments
    f = mean[node] + np.sqrt(variance[node]) * rng.normal(size=(count, ROWS))
    f += (errors.inside[node] * rng.normal(size=(count, 2))).sum(1, keepdims=True)
    if response.shift is not None:
        f += setting @ response.shift.T
    read = (errors.noise[node] * noise)[:, None]
    if response.surface.link == "logit":
        scale = (errors.scale[node] * rng.normal(size=(count, 2))).sum(1, keepdims=True)
        y = (1.0 + scale) * errors.ceiling[node][:, None] / (1.0 + np.exp(-f)) + read
    else:
        y = np.exp(f + read) if response.surface.link == "log" else f + read
    return (y >= response.target.low) & (y <= response.target.high)


def drawn(responses, correlation, seed):
    rng = np.random.default_rng(seed)
    total = np.zeros(ROWS)
    for _ in range(6):
        count = DRAWS // 6
        noise = rng.multivariate_normal(np.zeros(len(responses)), correlation, count)
        setting = rng.normal(size=(count, 2))
        every = [met(r, noise[:, i], setting, rng) for i, r in enumerate(responses)]
        total += np.logical_and.reduce(every).sum(axis=0)
    return total / DRAWS


def tied(*rhos):
    size = {1: 2, 3: 3}[len(rhos)]
    R = np.eye(size)
    R[np.triu_indices(size, 1)] = rhos
    return R + np.triu(R, 1).T


def joint(responses, correlation):
    return joint_meets(responses, np.stack([r.met() for r in responses]), correlation)


LOW = Target(low=0.8)
CASES = {
    "fractions": (["logit", "logit"], [LOW, Target(low=0.75)], tied(0.7), 0.006),
    "against each other": (["logit", "logit"], [LOW, Target(low=0.75)], tied(-0.7), 0.006),
    "plateau": (["logit", "logit"], [Target(low=0.9), Target(low=0.88)], tied(0.9), 0.015),
    "one at most": (["logit", "log"], [LOW, Target(high=1.25)], tied(0.6), 0.003),
    "between": (["logit", "real"], [Target(0.7, 0.9), Target(0.15, 0.3)], tied(0.7), 0.002),
    "three": (["logit", "log", "real"], [LOW, Target(high=1.25), LOW], tied(0.5, 0.6, 0.7), 0.005),
    "three between": (
        ["logit", "real", "logit"],
        [Target(0.7, 0.9), Target(0.15, 0.3), LOW],
        tied(0.7, 0.6, 0.7),
        0.002,
    ),
}


def built(links, targets, **given):
    rng = np.random.default_rng(11)
    links = ["identity" if link == "real" else link for link in links]
    targets = [
        Target(low=0.15) if link == "identity" and t is LOW else t
        for link, t in zip(links, targets, strict=True)
    ]
    return [predicted(rng, *pair, **given) for pair in zip(links, targets, strict=True)]


@pytest.mark.parametrize("case", CASES)
def test_draws_of_the_model_agree(case):
    links, targets, correlation, least = CASES[case]
    responses = built(links, targets)
    exact = drawn(responses, correlation, 5)
    ours = joint(responses, correlation)
    np.testing.assert_allclose(ours, exact, atol=1.5e-3 + 3.0 * ERROR)
    assert np.abs(ours - exact).mean() < 1e-3
    # The product would not do.
    product = np.prod([r.met() for r in responses], axis=0)
    assert np.abs(product - exact).max() > max(least, 3.0 * np.abs(ours - exact).max())


@pytest.mark.parametrize("rho", [0.0, 0.5])
def test_setting_errors_move_responses_together(rho):
    responses = built(["logit", "real"], [LOW, LOW], shifted=True)
    exact = drawn(responses, tied(rho), 6)
    ours = joint(responses, tied(rho))
    np.testing.assert_allclose(ours, exact, atol=1.5e-3 + 3.0 * ERROR)
    product = np.prod([r.met() for r in responses], axis=0)
    assert np.abs(product - exact).max() > 0.004
    # Setting errors raise some and lower others, as the slopes have the same sign or not.
    gain, same = ours - product, (responses[0].shift * responses[1].shift).sum(1) > 0.0
    if rho == 0.0:
        open_ = np.abs(gain) > 1e-5
        assert ((gain > 0.0) == same)[open_].all()
        assert 0 < same[open_].sum() < open_.sum()


def test_without_a_tie_the_product_is_exact():
    responses = built(["logit", "log", "real"], [LOW, Target(high=1.25), LOW])
    product = np.prod([r.met() for r in responses], axis=0)
    assert (joint(responses, np.eye(3)) == product).all()
    assert (joint(responses[:1], np.eye(1)) == responses[0].met()).all()


@pytest.mark.parametrize("rho", [-0.99, -0.3, 0.3, 0.99])
def test_joint_chances_stay_within_their_bounds(rho):
    responses = built(["logit", "real"], [Target(0.7, 0.9), Target(0.15, 0.3)])
    one, other = (r.met() for r in responses)
    ours = joint(responses, tied(rho))
    assert (ours <= np.minimum(one, other)).all()
    assert (ours >= np.maximum(one + other - 1.0, 0.0)).all()


def test_two_responses_are_a_case_of_three():
    # The third is met in any case, and then alone untied.
    two = built(["logit", "logit"], [LOW, Target(low=0.75)])
    sure = Predicted(two[0].surface, two[0].moments, Target(low=-10.0))
    R = tied(0.6, 0.2, 0.3)
    np.testing.assert_allclose(joint([*two, sure], R), joint(two, R[:2, :2]), atol=3e-4)
    free = tied(0.6, 0.0, 0.0)
    third = built(["real"], [LOW])[0]
    np.testing.assert_allclose(
        joint([*two, third], free), joint(two, R[:2, :2]) * third.met(), atol=3e-4
    )


def test_an_untied_third_multiplies():
    two = built(["logit", "real"], [Target(0.7, 0.9), Target(0.15, 0.3)])
    third = built(["real"], [LOW])[0]
    R = tied(0.7, 0.0, 0.0)
    ours = joint([*two, third], R)
    np.testing.assert_allclose(ours, joint(two, R[:2, :2]) * third.met(), atol=1e-4)


def test_order_of_responses_makes_little_difference():
    responses = built(["logit", "log", "real"], [LOW, Target(high=1.25), LOW])
    R, turn = tied(0.5, -0.3, 0.2), [2, 0, 1]
    ours = joint(responses, R)
    turned = joint([responses[i] for i in turn], R[np.ix_(turn, turn)])
    np.testing.assert_allclose(turned, ours, atol=5e-4)


def known_exactly(target, mean=None):
    """A response of which only the noise of a reading, sd 0.1, is left."""
    errors = Errors(np.full(1, 0.1), np.zeros((1, 0)), np.zeros((1, 0)), np.ones(1))
    surface = Surface((Known(errors),), np.ones(1), "identity")
    mean = np.linspace(-0.2, 0.2, 5)[None] if mean is None else mean
    return Predicted(surface, (mean, np.zeros_like(mean)), target)


@pytest.mark.parametrize("rho", [-0.9, 0.3, 0.9])
def test_noise_alone_is_bivariate_normal(rho):
    one, other = known_exactly(Target(low=0.0)), known_exactly(Target(low=-0.05, high=0.15))
    z = np.linspace(-2.0, 2.0, 5)
    upper = bivariate_normal(z, 1.5 - z, -rho)
    exact = upper - bivariate_normal(z, -0.5 - z, -rho)
    np.testing.assert_allclose(joint([one, other], tied(rho)), exact, atol=1e-9)


def test_wholly_tied_noise_does_not_fail():
    # One and the same response twice: both readings pass or fail together.
    twice = [known_exactly(Target(low=0.0))] * 2
    np.testing.assert_allclose(joint(twice, np.ones((2, 2))), twice[0].met(), atol=1e-4)
    thrice = joint([*twice, twice[0]], np.ones((3, 3)))
    np.testing.assert_allclose(thrice, twice[0].met(), atol=2e-3)
    assert (thrice <= twice[0].met()).all()
