"""Censoring: what is still known of a recovery whose reads lie outside the linear range."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from muntin.assay.inputs import Inputs, results
from muntin.assay.uncertainty import Uncertain
from muntin.record.assay import Assay

Floats = NDArray[np.float64]


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Recovery:
    """Recoveries of n wells: value and own standard uncertainty (n,), NaN where not known; side
    (n,): 0 for a value, -1 where the recovery lies below it, 1 where above.
    """

    value: Floats
    sd: Floats
    side: NDArray[np.int_]


def censored(inputs: Inputs, assay: Assay, quantity: Uncertain) -> Recovery:
    """Return the recovery that a study may use.

    A read above the range stands at its limit: the recovery lies on the side to which a higher
    read would move it, and is not known where two such reads pull apart. Where all eluates lie
    below the range, the recovery lies below the one with all of them at the limit. A low read
    among others is used as it is.

    Parameters
    ----------
    inputs, assay
        What was read, and the settings.
    quantity
        The recovery asked for.
    """
    elutions = np.array([stage.stage == "elution" for stage in assay.stages])
    pulls = np.where(inputs.states == "high", np.sign(quantity.reads), 0.0)
    if (inputs.load_states == "high").any():
        of_load = [name.startswith("load") for name in quantity.names]
        pulls = np.column_stack([pulls, np.sign(quantity.by[of_load].sum(axis=0))])
    pulls = np.nan_to_num(pulls)
    up, down = (pulls > 0).any(axis=1), (pulls < 0).any(axis=1)
    faint = (inputs.states[:, elutions] == "low").all(axis=1)
    side = np.where(up, 1, 0) + np.where(down | faint, -1, 0)
    torn = up & (down | faint)
    value = np.where(faint, _at_limit(inputs, assay, elutions), quantity.value)
    return Recovery(
        value=np.where(torn, np.nan, value), sd=np.where(torn, np.nan, quantity.own), side=side
    )


def _at_limit(inputs: Inputs, assay: Assay, elutions: NDArray[np.bool_]) -> Floats:
    """The recovery with every low eluate at the lower limit of the range, shape (n,)."""
    samples = inputs.samples
    low = ((inputs.states == "low") & elutions).ravel()
    read = samples.absorbance.copy()
    limit = inputs.blanks.value[samples.blank, 0] + assay.linear_low
    read[:, 0] = np.where(low, limit, read[:, 0])
    moved = replace(inputs, samples=replace(samples, absorbance=read))
    return np.asarray(results(moved, assay)[assay.recovery], dtype=float)
