"""Whether chains have found the posterior: R-hat, effective draws and divergences.

Vehtari, Gelman, Simpson, Carpenter & Burkner 2021; thresholds from there.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.draws import Draws
from muntin.surrogate.psis import RELIABLE
from muntin.surrogate.quiet import arviz

Array = NDArray[np.float64]
MOST_R_HAT = 1.01
LEAST_A_CHAIN = 100.0


@dataclass(frozen=True)
class Sampling:
    """How the sampling of one response by one surrogate went.

    chains and draws of each; r_hat: largest; bulk, tail: smallest effective numbers of draws, over
    hyperparameters, latent values and scale errors; typical: median bulk; divergent: share of
    draws. pareto_k (n,): of the leave-one-out weights of each reading.
    """

    sampler: str
    chains: int
    draws: int
    r_hat: float
    bulk: float
    tail: float
    typical: float
    divergent: float
    pareto_k: Array

    @property
    def passed(self) -> bool:
        """Whether the draws can be relied on."""
        return not self.faults

    @property
    def faults(self) -> tuple[str, ...]:
        """What is wrong with the draws, in words."""
        faults = []
        if not self.r_hat <= MOST_R_HAT:
            faults.append(f"the chains disagree (R-hat {self.r_hat:.3f}, at most {MOST_R_HAT})")
        least = LEAST_A_CHAIN * self.chains
        if not min(self.bulk, self.tail) >= least:
            few = f"{self.bulk:.0f} in the bulk, {self.tail:.0f} in the tails"
            faults.append(f"too few effective draws ({few}, at least {least:.0f})")
        if self.divergent > 0.0:
            faults.append(f"{100.0 * self.divergent:.2g} % of the draws diverged")
        return tuple(faults)

    @property
    def sentence(self) -> str:
        """How the sampling went, in one plain sentence without a full stop."""
        total = f"{self.chains} chains of {self.draws} draws"
        if self.faults:
            return f"{total} cannot be relied on: {'; '.join(self.faults)}"
        agree = f"R-hat {self.r_hat:.3f}, effective draws {min(self.bulk, self.tail):.0f} or more"
        return f"{total} agree ({agree}, none diverged)"

    @property
    def unreliable(self) -> int:
        """Number of readings whose leave-one-out prediction is not to be relied on."""
        return int((self.pareto_k > RELIABLE).sum())


def efficiency_of(draws: Draws) -> tuple[float, float, float, float]:
    """Largest R-hat; smallest bulk and tail, and median bulk effective numbers of draws."""
    az = arviz()
    chains = draws.eta.shape[:2]
    named = {"eta": draws.eta, "u": draws.latents.reshape(*chains, -1), "z": draws.z}
    if draws.nu is not None:
        named["nu"] = np.log(draws.nu)[..., None]
    data = az.convert_to_dataset({k: v for k, v in named.items() if v.shape[-1]})

    def every(found: object) -> Array:
        return np.concatenate([np.ravel(v) for v in found.data_vars.values()])  # type: ignore

    r_hat = every(az.rhat(data))
    bulk, tail = every(az.ess(data, method="bulk")), every(az.ess(data, method="tail"))
    # A variable without spread has no figure; NaN makes the sampling fail, as it should.
    return float(np.max(r_hat)), float(np.min(bulk)), float(np.min(tail)), float(np.median(bulk))
