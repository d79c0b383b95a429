"""Choice of reads: repeats averaged, the least diluted read inside the linear range taken."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Mapping, Sequence
from typing import NamedTuple

import numpy as np

from muntin.assay.reads import Read

Found = Mapping[tuple[str, str, float], Sequence[Read]]


class Chosen(NamedTuple):
    """One read that stands for a sample: AU, its dilution, repeats, whether beyond the range."""

    absorbance: float
    dilution: float
    repeats: int
    over: bool
    others: tuple[Read, ...]


MISSING = Chosen(float("nan"), 1.0, 0, False, ())


def by_sample(reads: Iterable[Read]) -> dict[tuple[str, str, float], list[Read]]:
    """Return the reads of one plate by well, fraction and wavelength."""
    found: dict[tuple[str, str, float], list[Read]] = defaultdict(list)
    for read in reads:
        found[read.well, read.fraction, read.wavelength].append(read)
    return dict(found)


def choose(reads: Sequence[Read], highest: float) -> Chosen:
    """Return the read of a sample: of the least diluted ones within the range, else the most
    diluted; reads at one dilution are averaged.

    `highest` is the largest absorbance of the linear range, AU.
    """
    if not reads:
        return MISSING
    by_dilution: dict[float, list[Read]] = defaultdict(list)
    for read in reads:
        by_dilution[read.dilution].append(read)
    dilutions = sorted(by_dilution)
    sound = [d for d in dilutions if not _over(by_dilution[d], highest)]
    taken = sound[0] if sound else dilutions[-1]
    here = by_dilution[taken]
    others = tuple(read for read in reads if read.dilution != taken)
    value = float(np.mean([read.absorbance for read in here]))
    return Chosen(value, taken, len(here), not sound, others)


def _over(reads: Sequence[Read], highest: float) -> bool:
    return any(read.over or read.absorbance > highest for read in reads)


def beside(reads: Sequence[Read], dilution: float, same: bool) -> Chosen:
    """Return another wavelength of a sample, read at the same dilution where it was.

    Where it was not, the least diluted read stands for it, or with `same` none does.
    """
    at = [read for read in reads if read.dilution == dilution and not read.over]
    if not at and not same:
        sound = [read for read in reads if not read.over]
        least = min((read.dilution for read in sound), default=dilution)
        at = [read for read in sound if read.dilution == least]
    if not at:
        return MISSING
    value = float(np.mean([read.absorbance for read in at]))
    return Chosen(value, at[0].dilution, len(at), False, ())
