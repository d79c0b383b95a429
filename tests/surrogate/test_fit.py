from dataclasses import replace

import numpy as np
import pytest

from muntin.surrogate.coding import Columns
from muntin.surrogate.fit import SURROGATES, family_of, fit_stack, fit_surrogate, prior_surface
from muntin.surrogate.priors import priors_of
from muntin.surrogate.stacking import stacking_shares
from tests.surrogate.problems import COLUMNS, priors, readings, surface_covariances

NAMES = pytest.mark.parametrize("name", SURROGATES)


def points(rows, seed):
    return np.random.default_rng(seed).uniform(-1.0, 1.0, (rows, len(COLUMNS.factor)))


@NAMES
@pytest.mark.parametrize("kind", ["real", "fraction", "positive"])
def test_before_any_reading_the_surface_is_the_priors(name, kind):
    p = priors("real") if kind == "positive" else priors(kind)
    surface = prior_surface(name, kind, COLUMNS, p, (2, 1), seed=3, nodes=16)
    X, Z = points(5, 1), points(4, 2)
    mean, variance = surface.moments(X)
    covariance = surface.covariance(X, Z)
    assert surface.weights == pytest.approx(np.full(16, 1 / 16))
    assert mean == pytest.approx(np.full((16, 5), p.mean))
    part = surface.parts[0]
    for s in range(16):
        if name == "gp":
            own = part.own[s]
        else:
            sds = np.sqrt(np.diagonal(part.V[s]))
            own = [sds[1], sds[part.family.terms.index((0, 0))]]
        expected = surface_covariances(part.family, own, X, X)
        assert variance[s] == pytest.approx(np.diag(expected), rel=1e-10)
        assert covariance[s] == pytest.approx(
            surface_covariances(part.family, own, X, Z), rel=1e-10
        )
    assert surface.errors.inside.shape == (16, 2)
    assert surface.errors.scale.shape == (16, 1)
    assert surface.errors.ceiling.shape == (16,)
    assert (surface.errors.ceiling < 1.0).all() == (kind == "fraction")
    assert surface.link == {"real": "identity", "fraction": "logit", "positive": "log"}[kind]


@NAMES
def test_the_nodes_of_the_prior_surface_have_the_priors_medians_and_spread(name):
    p = priors()
    errors = prior_surface(name, "fraction", COLUMNS, p, (1, 2), seed=3, nodes=256).errors
    for values, law in (
        (errors.noise, p.noise_sd),
        (errors.inside[:, 0], p.inside_error),
        (errors.scale[:, 0], p.scale_error),
        (errors.scale[:, 1], p.scale_error),
        (1.0 - errors.ceiling, p.ceiling_gap),
    ):
        # 256 Sobol' points; plain draws would leave log_sd / 16 of the mean.
        assert np.log(values).mean() == pytest.approx(np.log(law.median), abs=law.log_sd / 16)
        assert np.log(values).std() == pytest.approx(law.log_sd, rel=0.1)


@NAMES
@pytest.mark.parametrize("kind", ["real", "fraction"])
def test_the_same_seed_gives_the_same_numbers(name, kind):
    data = readings(61, kind, n=17, inside=(), scale=(2,) if kind == "fraction" else ())
    X = points(5, 3)
    one, again = (fit_surrogate(name, data, kind, COLUMNS, priors(kind), 7) for _ in range(2))
    other = fit_surrogate(name, data, kind, COLUMNS, priors(kind), 8)
    assert np.array_equal(one.surface.moments(X)[0], again.surface.moments(X)[0])
    assert np.array_equal(one.loo.log_density, again.loo.log_density)
    assert not np.array_equal(one.theta, other.theta)


@NAMES
def test_the_surface_is_made_of_the_nodes_and_keeps_their_averages(name):
    fit = fit_surrogate(
        name, readings(62, n=17, inside=(), scale=(2,)), "fraction", COLUMNS, priors(), 1
    )
    noise, kept = np.exp(fit.theta[:, 0]), fit.surface.errors.noise
    assert np.isin(kept, noise).all()
    assert len(kept) < len(noise)
    assert fit.weights.sum() == pytest.approx(1.0)
    assert fit.surface.weights.sum() == pytest.approx(1.0)
    # Nodes of 2e-3 of the weight in all are left out.
    log = fit.surface.weights @ np.log(kept), fit.weights @ fit.theta[:, 0]
    assert log[0] == pytest.approx(log[1], abs=0.01)


def test_a_positive_response_is_a_real_one_on_its_logarithm():
    data = readings(63, "real", n=17, inside=(2,), scale=())
    real = fit_surrogate("gp", data, "real", COLUMNS, priors("real"), 1)
    positive = fit_surrogate("gp", data, "positive", COLUMNS, priors("real"), 1)
    X = points(5, 4)
    for a, b in zip(real.surface.moments(X), positive.surface.moments(X), strict=True):
        assert np.array_equal(a, b)
    assert (real.surface.link, positive.surface.link) == ("identity", "log")


@pytest.mark.parametrize("kind", ["real", "fraction"])
def test_a_stack_is_both_by_their_leave_one_out_shares(kind):
    data = readings(64, kind, n=19, inside=(), scale=())
    stack = fit_stack(SURROGATES, data, kind, COLUMNS, priors(kind), 1)
    assert [fit.name for fit in stack.fits] == ["gp", "quadratic"]
    expected = stacking_shares(np.stack([fit.loo.log_density for fit in stack.fits]))
    assert np.array_equal(stack.shares, expected)
    X = points(5, 5)
    weighted = sum(
        share * fit.surface.weights @ fit.surface.moments(X)[0]
        for share, fit in zip(stack.shares, stack.fits, strict=True)
    )
    assert stack.surface.weights @ stack.surface.moments(X)[0] == pytest.approx(weighted)


@NAMES
def test_units_do_not_matter_to_a_real_response(name):
    """Readings, their sds and the typical range times 1000, plus 5: predictions follow."""
    data = readings(65, "real", n=15, inside=(2,), scale=())
    moved = replace(data, y=5.0 + 1000.0 * data.y, sd=1000.0 * data.sd)
    X = points(5, 6)
    base = fit_surrogate(name, data, "real", COLUMNS, priors_of("real", (-1.0, 3.0)), 1)
    other = fit_surrogate(name, moved, "real", COLUMNS, priors_of("real", (-995.0, 3005.0)), 1)
    mean, variance = base.surface.moments(X)
    moved_mean, moved_variance = other.surface.moments(X)
    # The search for the mode ends where it likes within its tolerance, so nodes differ a little.
    sd = np.sqrt(base.surface.weights @ variance)
    ours, theirs = base.surface.weights @ mean, other.surface.weights @ moved_mean
    assert (theirs - 5.0) / 1000.0 == pytest.approx(ours, abs=0.02 * sd.min())
    assert np.sqrt(other.surface.weights @ moved_variance) == pytest.approx(1000.0 * sd, rel=0.02)


@NAMES
def test_a_fit_knows_its_hyperparameters_by_name(name):
    fit = fit_surrogate(
        name, readings(66, n=14, inside=(2,), scale=(3,)), "fraction", COLUMNS, priors(), 1
    )
    assert fit.names[:3] == ("noise_sd", "inside_error[0]", "scale_error[0]")
    assert fit.theta.shape == (len(fit.weights), len(fit.names))
    assert fit.loo.log_density.shape == (14,)
    assert fit.laplace >= 0


def test_an_unknown_surrogate_is_refused():
    with pytest.raises(ValueError, match=r"^surrogate 'krig' is none of gp, quadratic$"):
        family_of("krig", Columns.plain(2), priors())
