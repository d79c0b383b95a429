"""The bench: what wells are mixed from, and what the pipette can do."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from decimal import Decimal
from typing import Literal

from muntin.record.buffers import Buffer, SaltKind, bench_fault, buffer_faults
from muntin.record.factors import Factor
from muntin.record.faults import Fault, did_you_mean, listed, number, quoted
from muntin.record.keys import Keys, Number, NumberOrText, Text, key

_FILE = "study.toml"
LOAD = "load"


class BenchStock(Keys):
    """A bottle that wells are mixed from, or one bottle for each level of a factor."""

    name: Text = key(says="what stands on the bottle", example="high salt")
    per: Text | None = key(
        None,
        says="factor of which each level on the plate has a bottle of its own, such as the pH",
        example="elution_ph",
    )
    holds: dict[str, NumberOrText] = key(
        {},
        says="what it holds of which factor, in the factor's unit; of one not named, nothing",
        example={"salt": 500},
    )


class Bench(Keys):
    """What wells are mixed from, and what the pipette can do."""

    well_ul: Number | None = key(
        None,
        says="liquid mixed for one well from the stocks, all stages together",
        unit="µL",
        example=450.0,
        gt=0,
    )
    ph_factor: Text | None = key(
        None,
        says="factor that is a pH: bottles of two pH are never mixed",
        example="elution_ph",
    )
    every_mix: dict[str, Number] = key(
        {},
        says="what every mix holds besides the factors, such as the buffer in mM; stocks name it "
        "in holds",
        example={"buffer": 20.0},
    )
    stocks: tuple[BenchStock, ...] = key((), says="bottles that wells are mixed from")
    buffers: tuple[Buffer, ...] = key((), says="buffers that set the pH of each liquid")
    salt_factor: Text | None = key(None, says="factor that is the salt, in mM or M", example="salt")
    salt_kind: SaltKind = key("NaCl", says='the salt: "NaCl", "KCl" or "Na2SO4"', example="NaCl")
    salt_stock_mm: Number | None = key(
        None, says="salt in its stock, for recipes of buffers", unit="mM", example=2000.0, gt=0
    )
    salt_stock: Text | None = key(
        None, says="what stands on the stock of the salt", example="NaCl 2 M"
    )
    temperature_c: Number = key(
        22.0, says="temperature at which the pH is meant", unit="°C", example=22.0, ge=0, le=50
    )
    exchanger: Literal["cation", "anion"] | None = key(
        None,
        says='what the charges of the resin bind: "cation" (negative ligands) or "anion"',
        example="cation",
    )
    protein_mg_per_ml: Number | None = key(
        None, says="protein in the load", unit="mg/mL", example=2.0, gt=0
    )
    control_condition: dict[str, NumberOrText] | None = key(
        None,
        says="condition whose liquid blanks and wells without resin are given",
        example={"elution_ph": 6.0, "salt": 250},
    )
    pipette_floor_ul: Number | None = key(
        None, says="smallest volume the pipette draws", unit="µL", example=5.0, gt=0
    )
    pipette_step_ul: Number | None = key(
        None, says="volumes are whole steps of this", unit="µL", example=0.5, gt=0
    )
    dead_volume_ul: Number | None = key(
        None, says="what stays in each bottle or trough", unit="µL", example=1000.0, ge=0
    )

    @property
    def held(self) -> frozenset[str]:
        """Factors that the stocks set, or without any the buffers; others are set otherwise."""
        if not self.stocks and self.buffers:
            own = (self.ph_factor, self.salt_factor)
            return frozenset(name for name in own if name is not None)
        named = {
            name for stock in self.stocks for name in stock.holds if name not in self.every_mix
        }
        return frozenset(named | {stock.per for stock in self.stocks if stock.per is not None})

    def matched(self, factors: Sequence[Factor]) -> frozenset[str]:
        """Factors of which bottles of two values are never mixed: the pH, choices, those that
        bottles are made by.
        """
        by_level = {stock.per for stock in self.stocks}
        alone = [f.name for f in factors if not f.continuous or f.name in by_level]
        return frozenset([*alone, *([] if self.ph_factor is None else [self.ph_factor])])


def whole_steps(volume: float, step: float) -> int | None:
    """How many whole steps a volume is (both in the same unit), None where it is none."""
    steps = Decimal(str(volume)) / Decimal(str(step))
    return int(steps) if steps == steps.to_integral_value() else None


def bench_faults(bench: Bench, factors: Sequence[Factor]) -> Iterator[Fault]:
    """Yield what is wrong between the keys of [bench], and between them and the factors."""
    by_name = {factor.name: factor for factor in factors}
    yield from _volume_faults(bench)
    if bench.ph_factor is not None:
        ranged = [f.name for f in factors if f.continuous]
        yield from _factor_faults("ph_factor", bench.ph_factor, ranged)
    yield from _stock_faults(bench, by_name)
    yield from _every_mix_faults(bench, by_name)
    yield from buffer_faults(bench, factors)
    if bench.control_condition is not None:
        where = "control_condition"
        yield from _held_faults(where, bench.control_condition, by_name)
        lacking = sorted((bench.held & {*by_name}) - {*bench.control_condition})
        if lacking:
            problem = "lacks what the stocks set:"
            yield bench_fault(where, "", problem, allowed=listed(lacking))


def _stock_faults(bench: Bench, by_name: Mapping[str, Factor]) -> Iterator[Fault]:
    seen: set[str] = set()
    for stock in bench.stocks:
        where = f"stocks, {stock.name}"
        yield from _name_faults(stock.name, seen)
        seen.add(stock.name.strip().casefold())
        if stock.per is not None:
            yield from _factor_faults(f"{where}, per", stock.per, [*by_name])
            if stock.per in stock.holds:
                problem = "is set by per already, a bottle for each level"
                yield bench_fault(f"{where}, holds", quoted(stock.per), problem)
        yield from _held_faults(f"{where}, holds", stock.holds, by_name, bench.every_mix)


def _name_faults(name: str, seen: set[str]) -> Iterator[Fault]:
    plain, where = name.strip().casefold(), f"stocks, {name}, name"
    if not plain:
        yield bench_fault(where, quoted(name), "is empty")
    elif plain == LOAD:
        yield bench_fault(where, quoted(name), "is the name of the protein's solution")
    elif plain in seen:
        yield bench_fault(where, quoted(name), "is there twice")


def _volume_faults(bench: Bench) -> Iterator[Fault]:
    volume, floor, step = bench.well_ul, bench.pipette_floor_ul, bench.pipette_step_ul
    if floor is not None and volume is not None and floor > volume:
        problem = "lies above well_ul, which is"
        yield bench_fault("pipette_floor_ul", number(floor), problem, allowed=number(volume))
    if step is None:
        return
    for name, given in (("well_ul", volume), ("pipette_floor_ul", floor)):
        if given is not None and whole_steps(given, step) is None:
            close = Decimal(str(step)) * max(1, round(given / step))
            problem = f"is not a whole number of steps of {number(step)} µL; nearest is"
            yield bench_fault(
                name, number(given), problem, hint="pipette_step_ul", allowed=number(float(close))
            )


def _every_mix_faults(bench: Bench, factors: Mapping[str, Factor]) -> Iterator[Fault]:
    for name, value in bench.every_mix.items():
        where = f"every_mix, {name}"
        if name in factors:
            yield bench_fault(where, quoted(name), "is a factor; each mix holds its own")
        elif value < 0:
            yield bench_fault(where, number(value), "must be 0 or above")


def _factor_faults(where: str, name: str, known: Sequence[str]) -> Iterator[Fault]:
    if known and name not in known:
        problem = "is not a factor" + (" with a range" if where == "ph_factor" else "")
        yield bench_fault(where, quoted(name), problem, hint=did_you_mean(name, known))


def _held_faults(
    where: str,
    holds: Mapping[str, float | str],
    factors: Mapping[str, Factor],
    more: Iterable[str] = (),
) -> Iterator[Fault]:
    for name, value in holds.items():
        factor = factors.get(name)
        if factor is None and name not in more:
            yield from _factor_faults(where, name, [*factors, *more])
        elif factor is not None and factor.choices is not None and value not in factor.choices:
            hint = did_you_mean(str(value), factor.choices)
            yield bench_fault(f"{where}, {name}", quoted(value), "is not a choice", hint=hint)
        elif (factor is None or factor.continuous) and (isinstance(value, str) or value < 0):
            yield bench_fault(f"{where}, {name}", quoted(value), "is not a number of 0 or above")
