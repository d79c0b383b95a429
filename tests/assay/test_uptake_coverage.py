"""Truths drawn from the priors lie in the intervals as often as the intervals say.

A 95 % interval must hold 95 % of the truths: the count must lie in the central 99.8 % of what the
binomial law gives, so that a sound posterior fails once in 500 checks.
"""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import binom

from muntin.assay.uptake import Interval, interval, judge_uptake
from muntin.assay.uptake_laws import LAWS, FirstOrder, Law
from muntin.assay.uptake_priors import LogNormal
from muntin.assay.uptake_quadrature import posterior
from tests.assay.curves import PRIORS, drawn

OFFERED = 60.0


def draw(prior: LogNormal, rng: np.random.Generator) -> float:
    return float(prior.median * np.exp(prior.log_sd * rng.standard_normal()))


def held(found: Interval, truth: float) -> bool:
    """Whether the interval holds a truth; one at the offer itself may differ by rounding."""
    return found.low * (1 - 1e-9) <= truth <= found.high * (1 + 1e-9)


def test_one_law_without_the_offer() -> None:
    rng = np.random.default_rng(20)
    law, count = FirstOrder(), 80
    hits = dict.fromkeys(("equilibrium", "t95", "load"), 0)
    for _ in range(count):
        capacity, half = draw(PRIORS.capacity, rng), draw(PRIORS.half_time, rng)
        found = posterior(law, drawn(law, capacity, half, draw(PRIORS.noise, rng), rng), PRIORS)
        load = capacity * float(law.share(60.0 / half, 0.0))
        for name, values, truth in (
            ("equilibrium", found.equilibrium, capacity),
            ("t95", found.time_to(0.95), half * np.log(20.0) / np.log(2.0)),
            ("load", found.load_at(60.0), load),
        ):
            hits[name] += held(interval(values, found.weights), truth)
    low, high = binom.interval(0.998, count, 0.95)
    assert all(low <= hit <= high for hit in hits.values()), hits


@pytest.mark.slow
@pytest.mark.parametrize("law", LAWS, ids=lambda law: law.name)
def test_ranks_of_truths_are_even_under_every_law(law: Law) -> None:
    """The posterior share below the truth is uniform (Cook, Gelman & Rubin 2006)."""
    rng = np.random.default_rng(21)
    count, below = 250, []
    for _ in range(count):
        capacity, half = draw(PRIORS.capacity, rng), draw(PRIORS.half_time, rng)
        read = drawn(law, capacity, half, draw(PRIORS.noise, rng), rng, offered=OFFERED)
        found = posterior(law, read, PRIORS)
        below.append(
            [
                found.weights[values < truth].sum()
                for values, truth in ((found.half_time, half), (found.capacity, capacity))
            ]
        )
    ranks = np.array(below)
    for bounds in (0.1, 0.5, 0.9):
        low, high = binom.interval(0.998, count, bounds)
        counts = (ranks < bounds).sum(axis=0)
        assert np.all((low <= counts) & (counts <= high)), (bounds, counts)


@pytest.mark.slow
def test_over_the_laws_with_the_law_unknown() -> None:
    rng = np.random.default_rng(22)
    count = 120
    hits = dict.fromkeys(("equilibrium", "t90", "t95", "load"), 0)
    weight_of_truth = []
    for _ in range(count):
        chosen = int(rng.integers(len(LAWS)))
        law = LAWS[chosen]
        capacity, half = draw(PRIORS.capacity, rng), draw(PRIORS.half_time, rng)
        takes, level = capacity / OFFERED, min(capacity, OFFERED)
        read = drawn(law, capacity, half, draw(PRIORS.noise, rng), rng, offered=OFFERED)
        known = judge_uptake(read, PRIORS)
        weight_of_truth.append(known.law_weights[chosen])
        for name, found, truth in (
            ("equilibrium", known.equilibrium(), level),
            ("t90", known.time_to(0.90), float(law.time(0.90, half, takes))),
            ("t95", known.time_to(0.95), float(law.time(0.95, half, takes))),
            ("load", known.load_at(60.0), level * float(law.share(60.0 / half, takes))),
        ):
            hits[name] += held(found, truth)
    low, high = binom.interval(0.998, count, 0.95)
    assert all(low <= hit <= high for name, hit in hits.items() if name != "equilibrium"), hits
    assert hits["equilibrium"] >= low  # a load at the offer is a mass that an interval holds whole
    assert np.mean(weight_of_truth) > 0.3
