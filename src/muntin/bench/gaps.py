"""What the sheets do not say, because the study does not: one plain sentence each."""

from __future__ import annotations

from collections.abc import Iterator

from muntin.bench.sheets import Sheets
from muntin.record.bench import LOAD
from muntin.record.bottles import Bottle
from muntin.record.faults import listed, number

_SLACK = 1e-6
_STEPS = (
    "Binding, wash and strip buffers, what blanks get in place of the load, and the steps on the "
    "resin plate (equilibrate, wash, elute from the mixing plate, strip) are those of your "
    "procedure."
)


def gaps(sheets: Sheets) -> tuple[str, ...]:
    """Return what could not be computed, and what is to be seen to by hand."""
    found = (*_of_liquids(sheets), *_of_volumes(sheets), *_of_load(sheets), *_by_hand(sheets))
    return (*found, _STEPS)


def _of_liquids(sheets: Sheets) -> Iterator[str]:
    bench = sheets.study.definition.bench
    if not bench.held:
        yield (
            "No stocks are given (study.toml, [[bench.stocks]]): no recipes, and no draws of them."
        )
    elif not bench.buffers and any(bench.ph_factor in b.holds for b in sheets.bottles):
        yield (
            "No buffers are given (study.toml, [[bench.buffers]]): how the bottles are made is not "
            "in these sheets."
        )
    elif unmade := [b.name for b in sheets.bottles if bench.buffers and _holds_own(sheets, b)]:
        yield (
            f"How much of {listed(bench.every_mix)} a bottle holds is your own (study.toml, "
            f"[bench], stocks): how to make {listed(unmade, most=3)} is not in these sheets."
        )
    if bench.held and bench.well_ul is None:
        yield "No well_ul is given (study.toml, [bench]): recipes are shares, with no draws."


def _holds_own(sheets: Sheets, bottle: Bottle) -> bool:
    """Whether a bottle has no recipe because it holds something of every_mix."""
    own = sheets.study.definition.bench.every_mix
    return bottle.name not in sheets.makings and any(name in bottle.holds for name in own)


def _of_volumes(sheets: Sheets) -> Iterator[str]:
    bench = sheets.study.definition.bench
    if not sheets.transfers:
        return
    if bench.pipette_step_ul is None:
        yield "No pipette_step_ul is given (study.toml, [bench]): volumes are rounded to 0.1 µL."
    if bench.pipette_floor_ul is None:
        least = min(sheets.transfers, key=lambda t: t.steps)
        drawn = sheets.pipette.shown(least.steps)
        yield (
            "No pipette_floor_ul is given (study.toml, [bench]): small draws were not judged; the "
            f"smallest is {drawn} µL of {least.stock} into {least.well}."
        )
    if bench.dead_volume_ul is None:
        yield (
            "No dead_volume_ul is given (study.toml, [bench]): totals are what is drawn, without "
            "what stays in the bottle."
        )


def _of_load(sheets: Sheets) -> Iterator[str]:
    load = sheets.load
    if load is None:
        yield "No [protein] is given (study.toml): the load is not in these sheets."
        return
    if load.measured_mg is None:
        yield (
            "No protein_mg_per_ml is given (study.toml, [bench]): the volume of the load is not "
            "known, and it is not drawn in these sheets."
        )
        return
    off = load.measured_mg - load.needed_mg
    if abs(off) > _SLACK:
        yield (
            f"In whole pipette steps the wells get {load.measured_mg:.4g} mg of protein, "
            f"{abs(off):.2g} mg {'more' if off > 0 else 'less'} than planned."
        )
    whole = load.measured_mg + (load.dead_mg or 0.0)
    if whole > load.left_mg + _SLACK:
        yield (
            f"With what stays in its trough the {LOAD} takes {number(round(whole, 3))} mg; "
            f"{number(round(load.left_mg, 3))} mg are left beyond the reserve."
        )


def _by_hand(sheets: Sheets) -> Iterator[str]:
    definition, rows = sheets.study.definition, sheets.rows
    protein, load = definition.protein, sheets.load
    loaded = protein.load_factor if protein is not None and load is not None and load.steps else ""
    held = {*definition.bench.held, loaded}
    others = [f.label for f in definition.factors if f.name not in held]
    if definition.bench.held and others:
        yield f"Not set by the stocks, see to it by hand: {listed(others)}."
    given = {well for mix in sheets.mixes for well in mix.wells}
    dry = rows[rows["role"].isin(["blank", "no_resin"]) & ~rows["well"].isin(given)]
    if definition.bench.held and len(dry):
        yield (
            "No control_condition is given (study.toml, [bench]): what blanks and wells without "
            f"resin get besides the load is not in these sheets ({listed(dry['well'])})."
        )
    water = rows[rows["role"] == "water"]
    if len(water):
        yield f"Fill by hand with water: {listed(water['well'])}."
