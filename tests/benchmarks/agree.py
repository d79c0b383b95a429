"""Does the fast engine agree with a reference: probabilities over the range, and seconds.

Each study is fitted by both engines with the same model and priors; compared are p_mean (the
process mean meets the target) and p_well (one new well does) at conditions spread evenly over the
range, 625 for two factors and 867 for three resins. The reference's own Monte Carlo error is
estimated from independent parts of it: halves of chains, or repeats of the importance sampling with
new draws.

The ratio of seconds tells on a machine that does nothing else.

Run: python -m tests.benchmarks.agree                          # against NUTS
     python -m tests.benchmarks.agree --reference sampling     # against importance sampling
"""

from __future__ import annotations

import argparse
import sys
import time
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.assembly import nodes_of
from muntin.surrogate.fit import Fit, Stack, fit_stack
from muntin.surrogate.hyperparameters import Posterior, integrate
from muntin.surrogate.nodes import Surface
from muntin.window.predicted import Predicted
from muntin.window.probability import Target, node_mean_meets, well_meets
from tests.benchmarks.trials import TRIALS, Trial
from tests.surrogate.exact import exact_node, least_latent, node_weights

Array = NDArray[np.float64]
MEAN_BUDGET, LARGEST_BUDGET, RATIO_BUDGET = 0.005, 0.03, 100.0
SEED = 1
# The reference's own error stays below a quarter of the largest difference allowed.
CHAINS, DRAWS = 4, 6000
REPEATS, NODES, NODE_DRAWS, KEPT = 4, 256, 1024, 16


@dataclass(frozen=True)
class Reference:
    """p_mean and p_well (parts, n) by independent parts of a reference; seconds it took; a note."""

    p_mean: Array
    p_well: Array
    seconds: float
    note: str = ""


@dataclass(frozen=True)
class Line:
    """Differences of one surrogate on one study, in p_mean and in p_well (n,), the Monte Carlo
    error (n,) of each reference, and the seconds of both engines.
    """

    study: str
    surrogate: str
    apart: tuple[Array, Array]
    error: tuple[Array, Array]
    fast: float
    slow: float
    note: str

    def missed(self, timed: bool) -> list[str]:
        """Budgets that are missed, in words."""
        out = []
        for name, apart in zip(("p_mean", "p_well"), self.apart, strict=True):
            if apart.mean() > MEAN_BUDGET:
                out.append(f"{name} on average")
            if apart.max() > LARGEST_BUDGET:
                out.append(f"{name} at the worst")
        if timed and self.slow < RATIO_BUDGET * self.fast:
            out.append("ratio")
        return out


def probabilities(trial: Trial, surface: Surface) -> tuple[Array, Array]:
    """p_mean and p_well (n,) over the trial's grid, as the tool reports them."""
    setting = np.zeros_like(trial.grid) if trial.setting is None else trial.setting(trial.grid)
    predicted = Predicted.of(surface, trial.grid, Target(low=trial.target), setting)
    return predicted.process_met(), predicted.met()


def wander_of(trial: Trial, surface: Surface) -> Array | float:
    """Latent variance (S, n) of new wells that setting errors make, 0 where there are none."""
    if trial.setting is None:
        return 0.0
    return surface.wander(trial.grid, trial.setting(trial.grid))


def fit(trial: Trial, name: str) -> Stack:
    """The fast engine on a trial."""
    return fit_stack((name,), trial.readings, trial.kind, trial.columns, trial.priors, SEED)


def timed_fit(trial: Trial, name: str, times: int = 3) -> tuple[Stack, float]:
    """The fast engine's fit and the median of its seconds."""
    taken = []
    for _ in range(times):
        start = time.perf_counter()
        found = fit(trial, name)
        taken.append(time.perf_counter() - start)
    return found, float(np.median(taken))


def by_sampling(trial: Trial, name: str, fast: Fit) -> Reference:
    """The exact posterior by importance sampling, with more nodes and other seeds than the fast
    engine has, as often as REPEATS says.
    """
    start = time.perf_counter()
    parts = [_sampled(trial, fast, 100 + repeat) for repeat in range(REPEATS)]
    p_mean, p_well = (np.array(p) for p in zip(*parts, strict=True))
    return Reference(p_mean, p_well, time.perf_counter() - start)


def _sampled(trial: Trial, fast: Fit, seed: int) -> tuple[Array, Array]:
    """p_mean and p_well (n,) of one repeat.

    p_mean comes from every draw, p_well from KEPT of them at each node; that p_mean from these
    differs from p_mean from all corrects p_well (a control variate).
    """
    rng, model = np.random.default_rng(seed), fast.model
    posterior = integrate(model, seed, NODES)
    log_z, p_node, means, variances = [], [], [], []
    for node in range(len(posterior.log_weights)):
        exact = exact_node(model, posterior, node, trial.grid, rng, NODE_DRAWS)
        least = least_latent(model, posterior.evidence.theta[[node]], trial.target_additive)
        ticks = (rng.random() + np.arange(KEPT)) / KEPT
        kept = np.minimum(np.searchsorted(np.cumsum(exact.weights), ticks), NODE_DRAWS - 1)
        log_z.append(exact.log_evidence)
        p_node.append(exact.above(least))
        means.append(exact.mean[kept] + model.family.priors.mean)
        variances.append(np.broadcast_to(exact.left, (KEPT, len(exact.left))))
    weights = node_weights(posterior, np.array(log_z))
    p_mean = weights @ np.array(p_node)
    surface = _repeated(fast, posterior, weights)
    moments, target = (np.concatenate(means), np.concatenate(variances)), Target(low=trial.target)
    kept_mean = surface.weights @ node_mean_meets(surface, moments, target)
    wander = wander_of(trial, surface)
    return p_mean, well_meets(surface, moments, target, wander) + p_mean - kept_mean


def _repeated(fast: Fit, posterior: Posterior, weights: Array) -> Surface:
    """The nodes' errors and slopes, each node KEPT times."""
    evidence, approx = posterior.evidence, posterior.evidence.approximation
    own = evidence.root.shape[2]
    mean, V = approx.mean[:, :own], approx.V[:, :own, :own]
    nodes = nodes_of(fast.model, evidence.theta, evidence.root, mean, V)
    nodes = nodes.take(np.repeat(np.arange(len(weights)), KEPT))
    return Surface((nodes,), np.repeat(weights / KEPT, KEPT), fast.surface.link)


def by_nuts(trial: Trial, name: str, fast: Fit) -> Reference:
    """NUTS: every draw a node; halves of chains are the parts."""
    from muntin.surrogate.nuts import Nuts, resampled

    start = time.perf_counter()
    found = resampled(fast, SEED, Nuts(chains=CHAINS, draws=DRAWS))
    seconds = time.perf_counter() - start
    assert found.draws is not None
    assert found.sampling is not None
    draws, sampling = found.draws, found.sampling
    surface = draws.surface(fast.surface.link, len(draws), SEED)
    halves = np.array_split(np.arange(len(draws)), 2 * CHAINS)
    parts = [
        probabilities(trial, surface.take(half, np.full(len(half), 1.0 / len(half))))
        for half in halves
    ]
    p_mean, p_well = (np.array(p) for p in zip(*parts, strict=True))
    note = f"R-hat {sampling.r_hat:.3f}, ESS {min(sampling.bulk, sampling.tail):.0f}"
    if sampling.divergent:
        note += f", {100.0 * sampling.divergent:.2g} % divergent"
    return Reference(p_mean, p_well, seconds, note)


REFERENCES: dict[str, Callable[[Trial, str, Fit], Reference]] = {
    "nuts": by_nuts,
    "sampling": by_sampling,
}


def compare(trial: Trial, name: str, reference: str) -> Line:
    """One surrogate on one trial."""
    found, seconds = timed_fit(trial, name)
    p_fast = probabilities(trial, found.surface)
    held_to = REFERENCES[reference](trial, name, found.fits[0])
    parts = (held_to.p_mean, held_to.p_well)
    apart = [np.abs(p - q.mean(axis=0)) for p, q in zip(p_fast, parts, strict=True)]
    error = [q.std(axis=0, ddof=1) / np.sqrt(len(q)) for q in parts]
    return Line(
        trial.name,
        name,
        (apart[0], apart[1]),
        (error[0], error[1]),
        seconds,
        held_to.seconds,
        held_to.note,
    )


HEAD = (
    f"{'':<31}{'':<11}{'p_mean':^25}{'p_well':^25}\n"
    f"{'study':<31}{'surrogate':<11}"
    + f"{'mean':>7}{'largest':>8}{'(± MC)':>8}  " * 2
    + f"{'fast s':>7}{'ref. s':>8}{'ratio':>7}  budgets"
)


def text(line: Line, timed: bool) -> str:
    """One line of the table; in brackets the largest Monte Carlo error of the reference."""
    out = f"{line.study:<31}{line.surrogate:<11}"
    for apart, error in zip(line.apart, line.error, strict=True):
        out += f"{apart.mean():7.4f}{apart.max():8.4f}{f'({error.max():.4f})':>8}  "
    out += f"{line.fast:7.2f}{line.slow:8.1f}{line.slow / line.fast:7.0f}  "
    missed = line.missed(timed)
    out += f"MISSED: {', '.join(missed)}" if missed else "met"
    return out + (f"; {line.note}" if line.note else "")


def main() -> None:
    """Print the table; exit code 1 when a budget is missed."""
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("--reference", choices=tuple(REFERENCES), default="nuts")
    parser.add_argument("--only", nargs="+", default=[], help="words in the names of the studies")
    given = parser.parse_args()
    timed = given.reference == "nuts"
    print(
        f"budgets: mean <= {MEAN_BUDGET}, largest <= {LARGEST_BUDGET}"
        + (f", ratio >= {RATIO_BUDGET:.0f}" if timed else "; the ratio is not judged")
    )
    print(HEAD)
    failed = False
    for trial in (make() for make in TRIALS):
        if given.only and not any(word in trial.name for word in given.only):
            continue
        for name in trial.surrogates:
            line = compare(trial, name, given.reference)
            failed |= bool(line.missed(timed))
            print(text(line, timed), flush=True)
    sys.exit(int(failed))


if __name__ == "__main__":
    main()
