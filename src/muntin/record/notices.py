"""Notices: everything left out, awaited or passed over, counted and named."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterator, Mapping, Sequence

import pandas as pd

from muntin.record.definition import Definition
from muntin.record.faults import counted, listed, number, quoted
from muntin.record.responses import Response

_LIKE_FRACTIONS = 1.5
_PLAIN_PER_CENT = 10.0
_NEAR = 1.5


def definition_notices(definition: Definition) -> Iterator[str]:
    """Yield what is odd, but not wrong, in study.toml."""
    for factor in definition.factors:
        if factor.continuous:
            _, high, step = factor.span
            last = float(factor.levels()[-1])
            if high - last > 1e-6 * step:
                yield (
                    f"study.toml, factors, {factor.name}: whole steps from low end at "
                    f"{number(last)}, short of high, which is {number(high)}"
                )
    judged_by = definition.study.judged_by
    kept = [factor.name for factor in definition.factors if factor.kept_within is not None]
    if judged_by in ("well", "mean") and kept:
        yield (
            f"study.toml, factors, {', '.join(kept)}: the window does not count kept_within, as "
            f'judged_by is "{judged_by}"; "kept" does'
        )
    fractions = [response for response in definition.responses if response.kind == "fraction"]
    if len(fractions) > 1 and "shared_errors" not in definition.model_fields_set:
        names = ", ".join(response.name for response in fractions)
        yield (
            f"study.toml: wells of a plate are taken to share an error of load or blank in each of "
            f"{names}; a ratio within one well, such as a purity, has none: list the responses "
            "that have it under [[shared_errors]]"
        )


def well_notices(
    definition: Definition, wells: pd.DataFrame, void: Mapping[str, str]
) -> Iterator[str]:
    """Yield counts of what was left out and what is awaited.

    `wells` are the test, bridge and reference wells of all plates, `void` the reasons of plates
    that do not count.
    """
    for plate, why in void.items():
        count = int((wells["plate"] == plate).sum())
        yield f"{plate} does not count, {counted(count, 'well')} left out: {why}"
    counting = wells[~wells["plate"].isin([*void])]
    yield from _reasons(counting, "exclude", "")
    for response in definition.responses:
        name = response.name
        here = counting[counting["exclude"] == ""]
        yield from _reasons(here, f"{name}_exclude", f" of {name}")
        states = counting[f"{name}_state"]
        for name_of, group in counting[states == "censored"].groupby("plate", sort=False):
            yield (
                f"{name_of}: {counted(len(group), 'reading')} of {name} censored (< or >), used as "
                f"such ({listed(group['well'])})"
            )
        awaited = int((states == "awaited").sum())
        if awaited:
            line = f"{name} is awaited in {awaited} of {counted(len(counting), 'well')}"
            yield line + _reduce_next(definition, response, counting)


def _reduce_next(definition: Definition, response: Response, wells: pd.DataFrame) -> str:
    """What is next where plate reads give a response, and whole plates lack it."""
    if definition.assay is None or definition.assay.response != response.name:
        return ""
    kept = wells[wells[f"{response.name}_state"] != "excluded"]
    awaited = kept[f"{response.name}_state"] == "awaited"
    whole = awaited.groupby(kept["plate"], sort=False).all()
    plates = [str(plate) for plate in whole.index[whole]]
    return f", in all of {listed(plates)}: muntin reduce DIR READS is next" if plates else ""


def odd_notices(
    definition: Definition, wells: pd.DataFrame, void: Mapping[str, str]
) -> Iterator[str]:
    """Yield readings that may stand, but look wrong; wells and void as in `well_notices`."""
    counting = wells[~wells["plate"].isin([*void])]
    for response in definition.responses:
        if response.kind == "fraction":
            yield from _odd_fractions(
                response, counting[counting[f"{response.name}_state"] == "read"]
            )


def _odd_fractions(response: Response, wells: pd.DataFrame) -> Iterator[str]:
    """Yield readings that look like fractions among per cent, or lie far below 0."""
    name = response.name
    low = wells[name] < -0.1 * response.unit_size
    for plate, names in wells["well"][low].groupby(wells["plate"], sort=False):
        yield (
            f"{plate}: {counted(len(names), 'reading')} of {name} below "
            f"{'-10 %' if response.per_cent else '-0.1'} ({listed(names)}), left in; "
            "is the blank right?"
        )
    if response.per_cent:
        yield from _odd_targets(response, wells)
        if not wells.empty:
            yield from _like_fractions(response, wells)


def _odd_targets(response: Response, wells: pd.DataFrame) -> Iterator[str]:
    """Yield targets of at most 1 %, which look like fractions.

    An impurity may have to stay below 1 %: an upper target that a reading meets is not asked about.
    """
    met = (wells[response.name] <= 1).any()
    for name, value in (("at_least", response.at_least), ("at_most", response.at_most)):
        if value is not None and value <= 1 and not (name == "at_most" and met):
            yield (
                f"study.toml, responses, {response.name}, {name}: {number(value)} is taken as "
                f"{number(value)} %, as the unit is %; for {number(100 * value)} % "
                f"write {number(100 * value)}"
            )


def _like_fractions(response: Response, wells: pd.DataFrame) -> Iterator[str]:
    """Yield plates and single wells whose readings look like fractions among per cent."""
    name = response.name
    question = f"fractions of 1? (study.toml, responses, {name}, unit)"
    highest = wells.groupby("plate", sort=False)[name].max()
    if (highest <= _LIKE_FRACTIONS).all():
        yield f"{name}: no reading lies above 1.5 %; are they {question}"
        return
    whole = highest.index[highest <= _LIKE_FRACTIONS]
    for plate in whole:
        yield (
            f"{plate}: no reading of {name} lies above 1.5 %, as they do elsewhere; "
            f"are they {question}"
        )
    yield from _single_fractions(name, wells[~wells["plate"].isin(whole)])


def _single_fractions(name: str, wells: pd.DataFrame) -> Iterator[str]:
    """Yield single readings that would fit the others a hundredfold, where no other is so low."""
    small = wells[name] <= _LIKE_FRACTIONS
    others = wells[name][~small]
    fits = (100 * wells[name][small]).between(others.min() / _NEAR, others.max() * _NEAR)
    if others.min() < _PLAIN_PER_CENT or not fits.all():
        return
    for plate, group in wells[small].groupby("plate", sort=False):
        shown = (
            f"{well} {number(value)}"
            for well, value in zip(group["well"], group[name], strict=True)
        )
        yield (
            f"{plate}: {counted(len(group), 'reading')} of {name} at most 1.5 % "
            f"({listed(shown)}), all others at least {number(others.min())} %; left in; "
            f"{'is it a fraction' if len(group) == 1 else 'are they fractions'} of 1?"
        )


def _reasons(wells: pd.DataFrame, column: str, what: str) -> Iterator[str]:
    groups: dict[tuple[str, str], list[str]] = defaultdict(list)
    for plate, well, why in zip(wells["plate"], wells["well"], wells[column], strict=True):
        if why:
            groups[plate, why].append(well)
    for (plate, why), names in groups.items():
        left = f"{counted(len(names), 'reading')}{what}" if what else counted(len(names), "well")
        yield f"{plate}: {left} left out ({listed(names)}): {quoted(why)}"


def column_notice(definition: Definition, others: Sequence[str]) -> Iterator[str]:
    """Yield the one notice about columns that passed through unused."""
    used = {name for shared in definition.shared_errors for name in shared.by}
    unused = [name for name in dict.fromkeys(others) if name not in used]
    if unused:
        yield f"columns passed through, not used: {listed(unused)}"
