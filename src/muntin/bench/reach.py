"""How much of the range the stocks of a study reach."""

from __future__ import annotations

from itertools import product

import numpy as np
import pandas as pd

from muntin.bench.mixing import Mixer
from muntin.bench.recipe import Refusal
from muntin.record.bottles import Value
from muntin.record.definition import Definition
from muntin.record.factors import Factor

_MOST = 400


def reach_notice(definition: Definition) -> str:
    """Return which share of the range the stocks cannot make and the commonest cause; "" where they
    make all of it, or the study gives none.

    Judged at the bench steps that plans may use, or at some 400 evenly spread ones of them.
    """
    held = [factor for factor in definition.factors if factor.name in definition.bench.held]
    if not held:
        return ""
    mixer, refused = Mixer(definition), list[tuple[str, str]]()
    steps = _steps(definition, held)
    for condition in steps:
        mix = mixer.mix(condition)
        if isinstance(mix, Refusal):
            shown = ", ".join(f"{f.name} {f.shown(condition[f.name])}" for f in held)
            refused.append((mix.cause or mix.reason, shown))
    if not refused:
        return ""
    causes = [cause for cause, _ in refused]
    common = max(dict.fromkeys(causes), key=causes.count)
    example = next(shown for cause, shown in refused if cause == common)
    names = " and ".join(factor.label for factor in held)
    return (
        f"study.toml, bench: the stocks cannot make {_share(len(refused), len(steps))} of the "
        f"bench steps of {names}, such as {example}: {common}; plans leave them out"
    )


def _steps(definition: Definition, held: list[Factor]) -> list[dict[str, Value]]:
    """Conditions of the held factors that plans may use, thinned out where they are many."""
    most = max(2, int(_MOST ** (1 / len(held))))
    levels = [_thinned(factor.plan_levels().tolist(), most) for factor in held]
    names = [factor.name for factor in held]
    rows = [dict(zip(names, values, strict=True)) for values in product(*levels)]
    if len(held) < len(definition.factors):
        return rows
    frame = pd.DataFrame(rows)[list(definition.factor_names)]
    may = definition.allowed(frame) & ~definition.forbids(frame)
    return [row for row, ok in zip(rows, may, strict=True) if ok]


def _thinned(levels: list[Value], most: int) -> list[Value]:
    if len(levels) <= most:
        return levels
    return [levels[k] for k in np.unique(np.linspace(0, len(levels) - 1, most).round().astype(int))]


def _share(part: int, whole: int) -> str:
    share = 100 * part / whole
    return "under 1 %" if share < 1 else f"{share:.0f} %"
