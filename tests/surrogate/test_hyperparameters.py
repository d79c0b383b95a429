from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import multivariate_t, norm
from scipy.stats.qmc import Sobol

from muntin.surrogate import hyperparameters
from muntin.surrogate.cells import Readings
from muntin.surrogate.coding import Columns
from muntin.surrogate.evidence import slope
from muntin.surrogate.hyperparameters import Proposal, integrate, log_prior, mode
from tests.surrogate.problems import model_of, readings, settled

NAMES = pytest.mark.parametrize("name", ["gp", "quadratic"])
DEGREES = 6.0


@pytest.fixture
def proposal():
    rng = np.random.default_rng(1)
    root = np.tril(rng.normal(size=(4, 4)))
    np.fill_diagonal(root, rng.uniform(0.3, 1.5, 4))
    return Proposal(rng.normal(size=4), np.array([2, 0, 3, 1]), root, np.ones(4), np.ones(4))


def test_the_prior_is_standard_normal():
    eta = np.random.default_rng(2).normal(size=(3, 5))
    assert log_prior(eta) == pytest.approx(norm.logpdf(eta).sum(1))


def test_the_proposals_density_is_the_multivariate_t(proposal):
    eta = np.random.default_rng(3).normal(0.0, 3.0, (7, 4))
    law = multivariate_t(proposal.centre, proposal.covariance, df=DEGREES)
    assert proposal.log_density(eta) == pytest.approx(law.logpdf(eta), rel=1e-10)


def test_the_proposals_draws_have_its_moments(proposal):
    n = 2**14
    draws = proposal.draw(Sobol(5, rng=np.random.default_rng(4)).random(n))
    covariance = DEGREES / (DEGREES - 2.0) * proposal.covariance
    sd = np.sqrt(np.diag(covariance))
    # Plain Monte Carlo errors: sd / sqrt(n) of a mean; of a variance of this t, kurtosis 6, about
    # sqrt(5 / n). Sobol' points do better, so 3 of them are ample.
    assert (draws.mean(0) - proposal.centre) / sd == pytest.approx(np.zeros(4), abs=3 / n**0.5)
    correlation = (np.cov(draws.T) - covariance) / np.outer(sd, sd)
    assert correlation == pytest.approx(np.zeros((4, 4)), abs=3 * (5 / n) ** 0.5)


def test_the_covariance_is_that_of_the_coordinates_in_order(proposal):
    assert proposal.covariance[np.ix_(proposal.order, proposal.order)] == pytest.approx(
        proposal.root @ proposal.root.T
    )


def test_a_split_proposal_is_a_law_and_draws_follow_it(proposal):
    """Reweighted to the law without a split, its draws have that law's mass and moments; along an
    axis they lie on either side as often as its scales say.
    """
    left, right = np.array([1.0, 0.8, 1.0, 2.5]), np.array([1.0, 1.4, 1.0, 0.7])
    n, split = 2**14, replace(proposal, left=left, right=right)
    draws = split.draw(Sobol(5, rng=np.random.default_rng(5)).random(n))
    weights = np.exp(proposal.log_density(draws) - split.log_density(draws)) / n
    assert weights.sum() == pytest.approx(1.0, abs=0.02)
    sd = np.sqrt(np.diag(proposal.covariance) * DEGREES / (DEGREES - 2.0))
    mean = weights @ (draws - proposal.centre) / sd
    assert mean == pytest.approx(np.zeros(4), abs=0.03)
    z = np.linalg.solve(split.root, (draws - split.centre)[:, split.order].T)
    assert (z < 0.0).mean(axis=1) == pytest.approx(left / (left + right), abs=0.01)
    back = split.log_density(split.centre[None])
    assert proposal.log_density(split.centre[None]) - back == pytest.approx(np.log(1.6 * 1.1))


def test_the_split_finds_the_long_tail_of_a_gap():
    """A plateau at 0.9: gaps far smaller than 0.1 are told apart by the prior alone."""
    rng = np.random.default_rng(6)
    x = np.linspace(-1.0, 1.0, 16)
    y = 0.9 / (1.0 + np.exp(-1.0 - 4.0 * x)) + 0.02 * rng.normal(size=16)
    data = Readings(X=x[:, None], y=y, sd=np.zeros(16), scale=(np.arange(16) // 8,))
    model = model_of("quadratic", data, columns=Columns.plain(1))
    eta, top = mode(model)
    found = hyperparameters._at_mode(model, eta, top)
    gap = model.layout.names.index("ceiling_gap")
    assert found.order[-1] == gap
    assert found.left[-1] > 1.5 * found.right[-1]
    # Far more nodes of another seed agree on how much of the tail there is.
    few, many = integrate(model, 1, 128), integrate(model, 2, 1024)
    below = [np.exp(p.log_weights) @ (p.eta[:, gap] < eta[gap] - 1.0) for p in (few, many)]
    assert below[1] > 0.05
    assert below[0] == pytest.approx(below[1], abs=0.08)


@NAMES
@pytest.mark.parametrize("kind", ["real", "fraction"])
def test_the_mode_is_where_evidence_and_prior_balance(name, kind):
    scale = (2,) if kind == "fraction" else ()
    model = model_of(name, readings(31, kind, n=25, inside=(3,), scale=scale), kind)
    eta, top = mode(model)
    assert top.log == pytest.approx(settled(model, model.layout.theta(eta[None])).log, abs=1e-4)
    gradient = slope(model, settled(model, model.layout.theta(eta[None])))[0]
    # The search stops where no move of a prior sd would gain more than about 0.01.
    assert gradient * model.layout.log_sd - eta == pytest.approx(np.zeros(len(eta)), abs=0.05)


@NAMES
def test_readings_that_say_nothing_leave_the_prior(name):
    """With every reading drowned in its own sd the posterior nodes have the prior's moments."""
    data = readings(32, "real", n=6, inside=(2,), scale=())
    data = type(data)(X=data.X, y=data.y, sd=np.full(6, 1e4), inside=data.inside)
    model = model_of(name, data, "real")
    posterior = integrate(model, seed=1, nodes=512)
    w = np.exp(posterior.log_weights)
    eta = (posterior.evidence.theta - model.layout.log_median) / model.layout.log_sd
    assert w.sum() == pytest.approx(1.0)
    # 512 weighted nodes of effective size 400: 1 / sqrt(400) = 0.05 if they were independent.
    assert w @ eta == pytest.approx(np.zeros(eta.shape[1]), abs=0.05)
    assert w @ eta**2 == pytest.approx(np.ones(eta.shape[1]), abs=0.15)
    flat = -0.5 * 6 * np.log(2.0 * np.pi * 1e8)
    assert posterior.log_marginal == pytest.approx(flat, abs=0.01)


def test_the_same_seed_gives_the_same_numbers():
    model = model_of("gp", readings(33, n=18, inside=(), scale=(2,)))
    one, again, other = integrate(model, 5), integrate(model, 5), integrate(model, 6)
    assert np.array_equal(one.log_weights, again.log_weights)
    assert one.log_marginal == again.log_marginal
    assert one.log_marginal != other.log_marginal
    # Sobol' points of another seed answer the same question: 64 nodes, error about 1 / ess.
    assert one.log_marginal == pytest.approx(other.log_marginal, abs=0.15)


def test_effective_nodes_are_counted_from_the_weights():
    posterior = integrate(model_of("quadratic", readings(34, n=18, inside=(), scale=(2,))), 1)
    w = np.exp(posterior.log_weights)
    assert posterior.ess == pytest.approx(1.0 / (w**2).sum())
    assert len(w) == len(posterior.evidence.log)
    assert 0.4 * 64 <= posterior.ess <= len(w)


def test_poor_weights_ask_for_more_nodes(monkeypatch):
    """With a shape that never pleases, rounds are drawn until as many nodes count as one round
    has, and answer as one mixture.
    """
    model = model_of("gp", readings(35, n=14, inside=(), scale=(2,)))
    reference = integrate(model, seed=2, nodes=1024)
    monkeypatch.setattr(hyperparameters, "tail_shape", lambda log_w: np.inf)
    rounds = integrate(model, seed=1, nodes=256)
    assert len(rounds.log_weights) == len(rounds.evidence.log)
    assert len(rounds.log_weights) in (512, 768)
    assert np.exp(rounds.log_weights).sum() == pytest.approx(1.0)
    assert rounds.ess >= 256
    # Some 300 effective nodes against 800.
    assert rounds.log_marginal == pytest.approx(reference.log_marginal, abs=0.05)
