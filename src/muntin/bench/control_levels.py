"""Levels of bottles that only controls ask for."""

from __future__ import annotations

from collections.abc import Iterator

from muntin.bench.sheets import Sheets
from muntin.record.faults import listed
from muntin.record.readings import INFORMING


def control_levels(sheets: Sheets) -> Iterator[str]:
    """Yield a sentence on each factor of the stocks of which controls need a level of their own."""
    definition, rows = sheets.study.definition, sheets.rows
    informing = rows[rows["role"].isin(INFORMING)]
    for factor in definition.factors:
        if factor.name not in definition.stock_factors or factor.name not in definition.bench.held:
            continue
        planned = {factor.shown(value) for value in informing[factor.name]}
        given = {
            factor.shown(of.mix.condition[factor.name])
            for of in sheets.mixes
            if factor.name in of.mix.condition
        }
        own = sorted(given - planned)
        if not own:
            continue
        count = len(planned) + len(own)
        most = factor.per_plate
        over = "" if most is None or count <= most else f", where per_plate allows {most}"
        yield (
            f"Only controls ask for {factor.named(listed(own))} (study.toml, [bench], "
            f"control_condition): {count} levels of {factor.label} to prepare{over}."
        )
