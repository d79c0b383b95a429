"""What an uptake curve does not tell, and what is unusual about it, in plain sentences."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from muntin.assay.uptake import Uptake, quantiles, three_digits
from muntin.assay.uptake_pairs import Pair, first_order_through, second_order_through
from muntin.record.faults import counted, number
from muntin.record.keys import Floats

_USUAL, _BOUNDS = (20.0, 40.0), (4.0, 40.0)
_TOLD = 0.9  # weight above which one law is told from the others
_NEAR = 0.95  # share of equilibrium that counts as reached
_USUAL_NOISE, _NOISY, _LOST = 0.05, 0.10, 0.30


class Remark(NamedTuple):
    """One remark; `loud` where the numbers must not be used without it."""

    kind: str
    loud: bool
    sentence: str


def phase_ratio_remark(ratio: float) -> Remark | None:
    """Return what is unusual about a phase ratio (liquid over settled resin), or None."""
    usual = "20 to 40 is usual (common practice, no source)"
    if not _BOUNDS[0] <= ratio <= _BOUNDS[1]:
        side = "above" if ratio > _BOUNDS[1] else "below"
        bound = _BOUNDS[1] if ratio > _BOUNDS[1] else _BOUNDS[0]
        sentence = (
            f"A phase ratio of {number(ratio)} lies far from practice, {side} {number(bound)}; "
            f"{usual}. Are liquid and resin given in the same unit, and is the resin settled?"
        )
        return Remark("phase ratio", True, sentence)
    if ratio < _USUAL[0]:
        return Remark(
            "phase ratio", False, f"A phase ratio of {number(ratio)} is unusual; {usual}."
        )
    return None


def uptake_remarks(
    uptake: Uptake, phase_ratio: float | None, planned: float | None
) -> tuple[Remark, ...]:
    """Return all remarks on a curve, loud ones first; `planned` is the contact time in min."""
    every = [
        *([] if phase_ratio is None else [phase_ratio_remark(phase_ratio)]),
        _two_times(uptake),
        _climbing(uptake),
        _laws(uptake),
        _prior(uptake),
        _beyond(uptake, planned),
        _whole(uptake),
        _above_offer(uptake),
        _falling(uptake),
        _scatter(uptake),
    ]
    found = [remark for remark in every if remark is not None]
    return tuple(sorted(found, key=lambda remark: not remark.loud))


def _two_times(uptake: Uptake) -> Remark | None:
    times = uptake.curve.distinct
    if len(times) > 2:
        return None
    start = "Two times cannot tell the law of uptake"
    means = [_mean(uptake, time) for time in times]
    pair = Pair((float(times[0]), float(times[1])), (means[0], means[1]))
    first, second = first_order_through(pair), second_order_through(pair)
    if first is None or second is None:
        return Remark("two times", True, f"{start}. Read at other times too.")
    low, high = map(three_digits, means)
    level, other, minutes = map(three_digits, (first.equilibrium, second.equilibrium, first.t95))
    sentence = (
        f"{start}: through {low} and {high} mg/mL a first-order law goes to {level} mg/mL, 95 % of "
        f"it after {minutes} min, a second-order law to {other} mg/mL. Read at other times too."
    )
    return Remark("two times", True, sentence)


def _mean(uptake: Uptake, time: float) -> float:
    curve = uptake.curve
    here = (curve.times == time) & (curve.sides == 0)
    return float(curve.loads[here].mean()) if here.any() else np.nan


def _climbing(uptake: Uptake) -> Remark | None:
    last = float(uptake.curve.times[-1])
    shares, weights = uptake.over_laws(lambda grid: grid.share_at(last))
    if weights[shares < _NEAR].sum() <= 0.5:
        return None
    share = uptake.share_at(last)
    low, middle, high = (100.0 * value for value in (share.low, share.median, share.high))
    sentence = (
        f"The last point still climbs: at {last:.4g} min the resin holds {middle:.0f} % "
        f"({low:.0f} to {high:.0f} %) of equilibrium. What lies beyond rests on law and prior."
    )
    return Remark("still climbing", True, sentence)


def _laws(uptake: Uptake) -> Remark | None:
    ranked = sorted(zip(uptake.law_weights, uptake.grids, strict=True), key=lambda pair: -pair[0])
    if ranked[0][0] >= _TOLD:
        return None
    parts = []
    for weight, grid in ranked:
        if weight >= 0.05:
            (median,) = quantiles(grid.time_to(0.95), grid.weights, (0.5,))
            parts.append(f"{three_digits(median)} min under {grid.law.name}")
    told = f": 95 % of equilibrium after {', '.join(parts)}" if len(parts) > 1 else ""
    return Remark("laws", False, f"The readings do not tell the laws apart{told}.")


def _prior(uptake: Uptake) -> Remark | None:
    times, weights = uptake.over_laws(lambda grid: grid.time_to(0.95))
    (now,) = quantiles(times, weights, (0.5,))
    wide = weights * _widening(uptake)
    (then,) = quantiles(times, wide / wide.sum(), (0.5,))
    if abs(np.log(then / now)) <= np.log(1.25):
        return None
    sentence = (
        f"The priors weigh in: were they twice as wide, 95 % of equilibrium would be reached after "
        f"{three_digits(then)} min and not after {three_digits(now)}."
    )
    return Remark("priors", False, sentence)


def _widening(uptake: Uptake) -> Floats:
    """Return by what the nodes' weights would change under priors twice as wide."""
    change: Floats = np.zeros(sum(len(grid.weights) for grid in uptake.grids))
    for prior, name in (
        (uptake.priors.capacity, "capacity"),
        (uptake.priors.half_time, "half_time"),
    ):
        log_x = np.log(np.concatenate([getattr(grid, name) for grid in uptake.grids]))
        change = change + prior.wider(2.0).log_density(log_x) - prior.log_density(log_x)
    return np.asarray(np.exp(change - np.max(change)))


def _beyond(uptake: Uptake, planned: float | None) -> Remark | None:
    last = float(uptake.curve.times[-1])
    if planned is None or planned <= last:
        return None
    sentence = f"The planned {planned:.4g} min lie beyond the last reading, at {last:.4g} min."
    return Remark("beyond the readings", False, sentence)


def _whole(uptake: Uptake) -> Remark | None:
    offered, chance = uptake.curve.offered, uptake.whole()
    if offered is None or chance < 0.2:
        return None
    start = "Likely" if chance > 0.8 else "Possibly"
    sentence = (
        f"{start} ({100 * min(chance, 0.99):.0f} %) all that is offered binds in the end, "
        f"{three_digits(offered)} mg/mL resin: how much more the resin could take is not told."
    )
    return Remark("scarce protein", False, sentence)


def _above_offer(uptake: Uptake) -> Remark | None:
    curve = uptake.curve
    if curve.offered is None:
        return None
    offered = three_digits(curve.offered)
    count = int((curve.loads[curve.sides >= 0] > 1.05 * curve.offered).sum())
    if not count:
        return None
    sentence = (
        f"{counted(count, 'reading')} above what is offered, {offered} mg/mL resin: is the feed, "
        "the phase ratio or the blank right?"
    )
    return Remark("above the offer", True, sentence)


def _falling(uptake: Uptake) -> Remark | None:
    """Whether the mean load of the last time lies 3 standard errors below an earlier one."""
    curve = uptake.curve
    times = [float(t) for t in curve.distinct if np.isfinite(_mean(uptake, float(t)))]
    if len(times) < 2:
        return None
    means = np.array([_mean(uptake, t) for t in times])
    counts = np.array([((curve.times == t) & (curve.sides == 0)).sum() for t in times])
    top = int(np.argmax(means))
    # A fall that no law follows counts as noise in the fit, so that its noise says too much here.
    noise = min(uptake.noise(), _USUAL_NOISE) * uptake.load_at(times[-1]).median
    sd = noise * np.sqrt(1 / counts[top] + 1 / counts[-1])
    if means[top] - means[-1] <= 3.0 * sd:
        return None
    high, low = three_digits(means[top]), three_digits(means[-1])
    sentence = (
        f"The load falls from {high} mg/mL at {times[top]:.4g} min to {low} at "
        f"{times[-1]:.4g} min, which no law here does: is something lost, displaced or drifting?"
    )
    return Remark("falling", True, sentence)


def _scatter(uptake: Uptake) -> Remark | None:
    noise = uptake.noise()
    if noise <= _NOISY:
        return None
    lost = noise > _LOST
    sentence = (
        f"The readings scatter by {100 * noise:.0f} % of the last load about the curve"
        f"{', which then tells hardly anything' if lost else ''}; 2 to 5 % is usual between wells "
        "(common practice, no source)."
    )
    return Remark("scatter", lost, sentence)
