"""The sheets of a plan: what its wells are mixed from, what is drawn, and what it comes to."""

from __future__ import annotations

import hashlib
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pandas as pd

from muntin.bench.buffer.stocks import named_stocks, stock_names
from muntin.bench.buffer_blends import Blend, blend_cautions, blend_of, thinned_caution
from muntin.bench.buffer_cautions import buffer_cautions
from muntin.bench.fed import fed_lines, line_of
from muntin.bench.load import Load, load_of
from muntin.bench.mixing import Mix, Mixer
from muntin.bench.plan import next_plate
from muntin.bench.recipe import Recipe, Refusal
from muntin.bench.refused import Refused, faults_of
from muntin.bench.transfers import Total, Transfer, totals_of, transfers_of
from muntin.bench.wells import well_index
from muntin.record.bench import LOAD
from muntin.record.bottles import Bottle, Value
from muntin.record.definition import Definition
from muntin.record.faults import Fault, Findings, StudyFaults, counted
from muntin.record.plan_choice import chosen_plan
from muntin.record.plan_table import read_plan
from muntin.record.readings import INFORMING
from muntin.record.stocks import planned_stocks
from muntin.record.study import Study
from muntin.record.volumes import Pipette

_LIQUID_CONTROLS = ("blank", "no_resin")


@dataclass(frozen=True, eq=False)
class WellsMix:
    """One liquid and the wells that are given it, in plate order."""

    mix: Mix
    wells: tuple[str, ...]


@dataclass(frozen=True, kw_only=True, eq=False)
class Sheets:
    """What a plan needs at the bench.

    plate and file: the plan. digest: SHA-256 of its file. rows: well, role and the factors (targets
    in raw units, empty for controls), in plate order. mixes: the distinct liquids. bottles: those
    they are mixed from, in the order of work. makings: what is in a bottle, by its name, as far as
    the study tells. transfers: every draw, the load first. totals: one a stock, in that order.
    load: None where the study has no [protein].
    """

    study: Study
    plate: str
    file: str
    digest: str
    rows: pd.DataFrame
    pipette: Pipette
    mixes: tuple[WellsMix, ...]
    bottles: tuple[Bottle, ...]
    makings: Mapping[str, Recipe]
    transfers: tuple[Transfer, ...]
    totals: tuple[Total, ...]
    load: Load | None

    @property
    def buffers(self) -> tuple[str, ...]:
        """What is to be known of the buffers of the whole plan, in sentences."""
        definition = self.study.definition
        liquids = [bottle.holds for bottle in self.bottles if bottle.name in self.makings]
        if not definition.bench.stocks:
            liquids = [of.mix.condition for of in self.mixes]
        said = [*buffer_cautions(definition, liquids), *blend_cautions(definition, self._blends())]
        if thinned := thinned_caution(definition, [_by_stock(of.mix) for of in self.mixes]):
            said.append(thinned)
        own = named_stocks(definition.bench) if liquids else ()
        return (*(f"{s[:1].upper()}{s[1:]}." for s in said), *(f"{held}." for held in own))

    def _blends(self) -> list[Blend]:
        """The wells as blends of bottles whose recipes are known."""
        name = self.study.definition.bench.ph_factor or ""
        blends = [
            blend_of(float(of.mix.condition[name]), of.mix.recipe.parts, self.makings)
            for of in self.mixes
            if name in of.mix.condition
        ]
        return [blend for blend in blends if blend is not None]


def _by_stock(mix: Mix) -> dict[str, float]:
    """The shares of a mix by stock of study.toml."""
    return {b.stock: mix.recipe.parts.get(b.name, 0.0) for b in mix.bottles}


def prepare(study: Study, plan: str | Path | None = None) -> Sheets:
    """Return the sheets of a plan as it stands: a file, the name of one in plans/, or without a
    name the last one of the next plate.

    Raises StudyFaults where the plan cannot be read, where one of its wells cannot be mixed or
    loaded from the stocks (with the nearest condition that can), or where the protein falls short.
    """
    plate = next_plate(study)
    path = chosen_plan(study.folder, plate, plan)
    file, rows = _read(study, plate, path)
    mixer = Mixer(study.definition)
    load, faults = load_of(study, rows, mixer.pipette, file)
    mixes, refused = _mixes(study.definition, mixer, rows, file)
    if faults or refused:
        raise StudyFaults([*refused, *faults])
    bottles = _in_order(study.definition, mixes)
    transfers = _transfers(rows, mixes, bottles, load)
    return Sheets(
        study=study,
        plate=plate,
        file=file,
        digest=hashlib.sha256(path.read_bytes()).hexdigest(),
        rows=rows,
        pipette=mixer.pipette,
        mixes=mixes,
        bottles=bottles,
        makings={b.name: r for b in bottles if isinstance(r := mixer.making(b), Recipe)},
        transfers=transfers,
        totals=totals_of(transfers, mixer.pipette, study.definition.bench.dead_volume_ul),
        load=load,
    )


def _read(study: Study, plate: str, path: Path) -> tuple[str, pd.DataFrame]:
    """The rows of a plan in plate order, every one with its well."""
    found = Findings()
    stocks = planned_stocks(study.folder, study.definition, plate, found)
    kept = read_plan(path, study, plate, stocks, found)
    if kept is not None and not found.faults:
        homeless = int((kept.rows["well"] == "").sum())
        if homeless:
            problem = f"has {counted(homeless, 'row')} without a well"
            hint = f"muntin propose {study.folder} --keep {path} finds wells for them"
            found.faults.append(Fault(file=kept.file, problem=problem, hint=hint))
        elif kept.rows.empty:
            found.faults.append(Fault(file=kept.file, problem="holds no well to run"))
    if kept is None or found.faults:
        raise StudyFaults(found.faults)
    size = study.definition.plate
    order = sorted(kept.rows.index, key=lambda row: well_index(kept.rows["well"][row], size))
    names = ["well", "role", *study.definition.factor_names]
    return kept.file, kept.rows.loc[order, names].reset_index(drop=True)


def _mixes(
    definition: Definition, mixer: Mixer, rows: pd.DataFrame, file: str
) -> tuple[tuple[WellsMix, ...], list[Fault]]:
    """The distinct liquids with their wells, and faults of what cannot be mixed."""
    bench, names = definition.bench, definition.factor_names
    if not bench.held:
        return (), []
    fed = fed_lines(definition, rows)
    mixes: dict[int, tuple[Mix, list[str]]] = {}
    refused: dict[tuple[Value, ...], tuple[Refusal, list[str]]] = {}
    for row in rows.to_dict("records"):
        condition = _liquid_of(definition, row, fed)
        if condition is None:
            continue
        mix = mixer.mix(condition)
        if isinstance(mix, Refusal):
            key = tuple(condition.get(name, "") for name in names)
            refused.setdefault(key, (mix, []))[1].append(row["well"])
        else:
            mixes.setdefault(id(mix), (mix, []))[1].append(row["well"])
    failed = [
        Refused(condition=dict(zip(names, key, strict=True)), why=why, wells=wells)
        for key, (why, wells) in refused.items()
    ]
    found = tuple(WellsMix(mix, tuple(wells)) for mix, wells in mixes.values())
    return found, faults_of(mixer, failed, file)


def _liquid_of(
    definition: Definition, row: Mapping[Any, Any], fed: Mapping[int, Mapping[str, Value]]
) -> Mapping[str, Value] | None:
    """The condition whose liquid a well is given, None where the study does not say.

    A control on a line that a stock feeds is given the liquid of that stock.
    """
    if row["role"] in INFORMING:
        return {name: row[name] for name in definition.factor_names}
    usual = definition.bench.control_condition
    if usual is None or row["role"] not in _LIQUID_CONTROLS:
        return None
    line = line_of(definition, str(row["well"]))
    return usual if line is None else {**usual, **fed.get(line, {})}


def _in_order(definition: Definition, mixes: Iterable[WellsMix]) -> tuple[Bottle, ...]:
    """The bottles that are used, in the order of work: all of one level, then those of the next."""
    names = [stock.name for stock in definition.bench.stocks]
    names += stock_names(definition.bench)
    per = {stock.name: stock.per for stock in definition.bench.stocks}
    used = {bottle.name: bottle for of in mixes for bottle in of.mix.bottles}
    by_name = {factor.name: factor for factor in definition.factors}

    def place(bottle: Bottle) -> tuple[float, int]:
        number = names.index(bottle.stock)
        level = bottle.holds.get(per.get(bottle.stock) or "", 0.0)
        if isinstance(level, str):
            level = (by_name[str(per[bottle.stock])].choices or ()).index(level)
        return (level if bottle.by_level else float("-inf")), number

    return tuple(sorted(used.values(), key=place))


def _transfers(
    rows: pd.DataFrame, mixes: Iterable[WellsMix], bottles: Iterable[Bottle], load: Load | None
) -> tuple[Transfer, ...]:
    """Every draw, the load first, then bottle by bottle; wells in plate order."""
    by_well = {well: dict(of.mix.steps or {}) for of in mixes for well in of.wells}
    drawn: dict[str, dict[str, int]] = {}
    for well in rows["well"]:
        drawn[well] = dict(by_well.get(well, {}))
        if load is not None and well in load.steps:
            drawn[well][LOAD] = load.steps[well]
    return transfers_of(drawn, [LOAD, *(bottle.name for bottle in bottles)])
