"""Priors of an uptake curve: log-normal laws of capacity, half time and noise."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from muntin.record.keys import Floats
from muntin.record.uptake_keys import UptakeKeys

# Replicate wells scatter by 2 to 5 % of a load that is well above 0: common practice, no source.
_NOISE = (0.008, 0.12)
_Z = 1.959963984540054


@dataclass(frozen=True)
class LogNormal:
    """A log-normal law by the median and the sd of the natural logarithm."""

    median: float
    log_sd: float

    def log_density(self, log_x: ArrayLike) -> Floats:
        """Return the log density over ln x, at ln x."""
        z = (np.asarray(log_x) - np.log(self.median)) / self.log_sd
        return np.asarray(-0.5 * z**2 - np.log(self.log_sd) - 0.5 * np.log(2.0 * np.pi))

    def span(self, sds: float) -> tuple[float, float]:
        """Return ln x at so many sds below and above the median."""
        middle = float(np.log(self.median))
        return middle - sds * self.log_sd, middle + sds * self.log_sd

    def wider(self, by: float) -> LogNormal:
        """Return the law with its sd multiplied."""
        return LogNormal(self.median, by * self.log_sd)


@dataclass(frozen=True, kw_only=True)
class Priors:
    """Laws of the capacity (mg/mL resin), the time to half of equilibrium (min), and the noise of
    one reading as a share of the load at the last time.
    """

    capacity: LogNormal
    half_time: LogNormal
    noise: LogNormal


def holding(low: float, high: float) -> LogNormal:
    """Return the log-normal law whose central 95 % reach from low to high."""
    return LogNormal(float(np.sqrt(low * high)), float(np.log(high / low) / (2.0 * _Z)))


def priors_of(keys: UptakeKeys) -> Priors:
    """Return the priors that [uptake] states."""
    return Priors(
        capacity=holding(*keys.capacity),
        half_time=holding(*keys.half_time_min),
        noise=holding(*_NOISE),
    )
