"""The posterior of one law: against a plain grid, under changes that must not matter."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.stats import norm

from muntin.assay import uptake_quadrature
from muntin.assay.uptake_laws import LAWS, Core, Film, FirstOrder, Law, Pores
from muntin.assay.uptake_priors import LogNormal, Priors
from muntin.assay.uptake_quadrature import Grid, posterior
from muntin.assay.uptake_table import Curve
from tests.assay.curves import PRIORS, TIMES, curve, drawn

READ = curve(TIMES, (9.0, 16.5, 27.5, 38.0, 43.0, 48.5))
CASES: dict[str, tuple[Law, Curve]] = {
    "plain": (FirstOrder(), READ),
    "sds": (Pores(), replace(READ, sds=np.array([0.5, 0.5, 1.0, 0.0, 2.0, 0.5]))),
    "limits": (FirstOrder(), replace(READ, sides=np.array([-1.0, 0.0, 0.0, 1.0, 0.0, 1.0]))),
    "offered": (FirstOrder(), replace(READ, offered=52.0)),
    "film": (Film(), replace(READ, offered=70.0)),
    "core": (Core(), curve((5, 20, 60, 180), (14.0, 25.5, 39.0, 55.0), offered=66.0)),
    "two": (FirstOrder(), curve((60.0, 120.0), (20.0, 32.0))),
    "repeats": (Pores(), curve((10, 10, 10, 40, 40), (15.0, 16.0, 15.2, 28.0, 30.5))),
}


def plain(
    law: Law, read: Curve, priors: Priors, wide: float = 1.0
) -> tuple[float, dict[str, float]]:
    """Log evidence and posterior means by one even grid over the prior, reading by reading."""
    axes = []
    for prior, count in ((priors.noise, 25), (priors.half_time, 301), (priors.capacity, 401)):
        ends = np.log(prior.median) + 5.0 * wide * prior.log_sd * np.array([-1.0, 1.0])
        axes.append(np.linspace(*ends, count))
    noise, half, capacity = np.exp(axes[0]), np.exp(axes[1])[:, None], np.exp(axes[2])[None, :]
    level = capacity if read.offered is None else np.minimum(capacity, read.offered)
    takes = 0.0 if read.offered is None else capacity / read.offered
    last = level * law.share(read.times[-1] / half, takes)
    total = np.zeros((len(noise), half.shape[0], capacity.shape[1]))
    for prior, axis, shape in zip(
        (priors.noise, priors.half_time, priors.capacity),
        axes,
        ((-1, 1, 1), (1, -1, 1), (1, 1, -1)),
        strict=True,
    ):
        total += norm.logpdf(axis, np.log(prior.median), prior.log_sd).reshape(shape)
    for time, load, sd, side in zip(read.times, read.loads, read.sds, read.sides, strict=True):
        expected = level * law.share(time / half, takes)
        spread = np.sqrt(sd**2 + (noise[:, None, None] * last) ** 2)
        if side:
            total += norm.logcdf(side * (expected - load) / spread)
        else:
            total += norm.logpdf(load, expected, spread)
    top = total.max()
    mass = np.exp(total - top)
    step = np.prod([axis[1] - axis[0] for axis in axes])
    weights = mass.sum(axis=0) / mass.sum()
    means = {
        "equilibrium": float((weights * level).sum()),
        "t50": float((weights * half).sum()),
        "load": float((weights * level * law.share(30.0 / half, takes)).sum()),
    }
    return float(top + np.log(mass.sum() * step)), means


def means_of(grid: Grid) -> dict[str, float]:
    values = {
        "equilibrium": grid.equilibrium,
        "t50": grid.time_to(0.5),
        "load": grid.load_at(30.0),
    }
    return {name: float(np.dot(grid.weights, value)) for name, value in values.items()}


@pytest.mark.slow
@pytest.mark.parametrize("name", list(CASES))
def test_the_grid_agrees_with_a_plain_one(name: str) -> None:
    law, read = CASES[name]
    # Noise that is small beside the plain grid's steps would show its steps, not the posterior.
    priors = replace(PRIORS, noise=LogNormal(0.08, 0.3))
    evidence, means = plain(law, read, priors)
    found = posterior(law, read, priors)
    assert found.log_evidence == pytest.approx(evidence, abs=1e-3)
    assert means_of(found) == pytest.approx(means, rel=1e-3)


@pytest.mark.parametrize("name", list(CASES))
def test_a_grid_twice_as_fine_tells_the_same(name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    law, read = CASES[name]
    coarse = posterior(law, read, PRIORS)
    for size in ("_FEW", "_NOISES", "_COARSE", "_FINE", "_SEEK", "_CAPACITIES"):
        monkeypatch.setattr(uptake_quadrature, size, 2 * getattr(uptake_quadrature, size) - 1)
    fine = posterior(law, read, PRIORS)
    assert coarse.log_evidence == pytest.approx(fine.log_evidence, abs=2e-3)
    assert means_of(coarse) == pytest.approx(means_of(fine), rel=1e-3)


@settings(max_examples=8, deadline=None, derandomize=True)
@given(slower=st.floats(0.1, 10.0), more=st.floats(0.1, 10.0), law=st.sampled_from(LAWS))
def test_units_of_time_and_load_do_not_matter(slower: float, more: float, law: Law) -> None:
    read = replace(READ, offered=60.0)
    scaled = replace(read, times=slower * read.times, loads=more * read.loads, offered=60.0 * more)
    priors = replace(
        PRIORS,
        capacity=LogNormal(40.0 * more, 1.2),
        half_time=LogNormal(16.0 * slower, 1.4),
    )
    one, other = posterior(law, read, PRIORS), posterior(law, scaled, priors)
    shift = len(read.times) * np.log(more)
    assert other.log_evidence + shift == pytest.approx(one.log_evidence, abs=1e-6)
    expected = slower * float(np.dot(one.weights, one.time_to(0.95)))
    assert float(np.dot(other.weights, other.time_to(0.95))) == pytest.approx(expected, rel=1e-6)
    expected = more * float(np.dot(one.weights, one.equilibrium))
    assert float(np.dot(other.weights, other.equilibrium)) == pytest.approx(expected, rel=1e-6)


@settings(max_examples=10, deadline=None, derandomize=True)
@given(order=st.permutations(range(6)))
def test_the_order_of_repeats_does_not_matter(order: list[int]) -> None:
    times = np.array([10.0, 10.0, 10.0, 60.0, 60.0, 60.0])
    loads = np.array([14.0, 15.0, 16.5, 31.0, 34.0, 32.0])
    first = posterior(FirstOrder(), curve(times, loads), PRIORS)
    other = posterior(FirstOrder(), curve(times[order], loads[order]), PRIORS)
    assert means_of(other) == pytest.approx(means_of(first), rel=1e-9)


def test_repeats_together_are_repeats_apart() -> None:
    """An sd of its own keeps a repeat apart; one next to nothing changes nothing else."""
    times, loads = (10.0, 10.0, 60.0, 60.0), (14.0, 15.0, 31.0, 34.0)
    together = posterior(Pores(), curve(times, loads), PRIORS)
    apart = posterior(Pores(), curve(times, loads, sds=(0.0, 1e-9, 0.0, 1e-9)), PRIORS)
    assert apart.log_evidence == pytest.approx(together.log_evidence, abs=1e-9)
    assert means_of(apart) == pytest.approx(means_of(together), rel=1e-9)


def test_a_limit_far_off_tells_nothing() -> None:
    bare = posterior(FirstOrder(), READ, PRIORS)
    limits = curve(
        (*TIMES, 200.0, 200.0), (*READ.loads, 0.0, 5000.0), sides=(0, 0, 0, 0, 0, 0, 1, -1)
    )
    limited = posterior(FirstOrder(), limits, replace(PRIORS, noise=LogNormal(0.01, 0.05)))
    plain_noise = posterior(FirstOrder(), READ, replace(PRIORS, noise=LogNormal(0.01, 0.05)))
    assert means_of(limited)["equilibrium"] == pytest.approx(
        means_of(plain_noise)["equilibrium"], rel=0.02
    )
    assert bare.offered is None


def test_without_much_to_read_the_prior_comes_back() -> None:
    """Noise many times the load leaves half time and capacity where the priors have them."""
    found = posterior(FirstOrder(), replace(READ, sds=np.full(6, 1e5)), PRIORS)
    log_half, log_capacity = np.log(found.half_time), np.log(found.capacity)
    for values, prior in ((log_half, PRIORS.half_time), (log_capacity, PRIORS.capacity)):
        mean = float(np.dot(found.weights, values))
        assert mean == pytest.approx(np.log(prior.median), abs=0.01)
        spread = np.sqrt(np.dot(found.weights, (values - mean) ** 2))
        assert spread == pytest.approx(prior.log_sd, rel=0.01)


def test_more_protein_than_can_bind_caps_the_load() -> None:
    found = posterior(FirstOrder(), replace(READ, offered=45.0), PRIORS)
    assert found.equilibrium.max() <= 45.0 * (1.0 + 1e-12)
    assert np.all(found.load_at(1e6) <= 45.0 * (1.0 + 1e-12))


@pytest.mark.parametrize("law", LAWS, ids=lambda law: law.name)
@pytest.mark.parametrize("noise", [0.0002, 0.02])
def test_the_truth_is_found(law: Law, noise: float) -> None:
    rng = np.random.default_rng(7)
    times = np.geomspace(2.0, 400.0, 12)
    read = drawn(law, 42.0, 25.0, noise, rng, tuple(times), offered=70.0)
    found = posterior(law, read, replace(PRIORS, noise=LogNormal(noise, 0.7)))
    for values, truth in ((found.equilibrium, 42.0), (found.half_time, 25.0)):
        mean = float(np.dot(found.weights, values))
        sd = float(np.sqrt(np.dot(found.weights, (values - mean) ** 2)))
        assert abs(mean - truth) < 4.0 * sd
        assert sd < 6.0 * noise * truth
