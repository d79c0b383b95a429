"""Buffers: acid and base forms that set the pH of each liquid, and the salt beside them."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

from muntin.record.factors import Factor
from muntin.record.faults import Fault, did_you_mean, number, quoted
from muntin.record.keys import Keys, Number, Text, Whole, key

if TYPE_CHECKING:
    from muntin.record.bench import Bench

KNOWN_BUFFERS = ("acetate", "citrate", "MES", "phosphate", "HEPES", "Tris")
WATER = "water"
SALT_UNITS = {"mM": 1.0, "mmol/L": 1.0, "M": 1000.0, "mol/L": 1000.0}
SaltKind = Literal["NaCl", "KCl", "Na2SO4"]
_FILE = "study.toml"
_MOST_PKA = 4


class Buffer(Keys):
    """A buffer, made from one stock of its acid form and one of its base form."""

    name: Text = key(
        says="acetate, citrate, MES, phosphate, HEPES or Tris; any other name needs pka",
        example="acetate",
    )
    mm: Number = key(
        says="buffer in each liquid, all its forms together", unit="mM", example=20.0, gt=0
    )
    stock_mm: Number = key(
        says="buffer in the stock of its acid form, and as much in that of its base form",
        unit="mM",
        example=200.0,
        gt=0,
    )
    from_ph: Number | None = key(
        None, says="used from this pH on; buffers used at one pH are mixed", example=3.8
    )
    below_ph: Number | None = key(None, says="used below this pH", example=9.0)
    acid_stock: Text | None = key(
        None,
        says="what stands on the stock of the acid form; buffers that share a bottle give one name",
        example="acid mix",
    )
    base_stock: Text | None = key(
        None,
        says="what stands on the stock of the base form; buffers that share a bottle give one name",
        example="base mix",
    )
    pka: tuple[Number, ...] | None = key(
        None,
        says="of a buffer of your own: its pKa at 25 °C and ionic strength 0, rising",
        example=[6.99],
    )
    pka_per_c: tuple[Number, ...] | None = key(
        None,
        says="change of each pKa with temperature; none where absent",
        unit="per °C",
        example=[-0.0215],
    )
    charge: Whole | None = key(
        None,
        says="of a buffer of your own: its charge with all protons on; 0 where absent",
        example=1,
        ge=-4,
        le=4,
    )
    stock_charges: tuple[Whole, Whole] | None = key(
        None,
        says="of a buffer of your own: its charge in the acid-form and in the base-form stock; all "
        "protons on and all off where absent",
        example=[1, 0],
    )

    @property
    def known(self) -> str | None:
        """Its name among the known buffers, whatever the capitals; None for one of the user's."""
        folded = {name.casefold(): name for name in KNOWN_BUFFERS}
        return folded.get(self.name.strip().casefold())

    @property
    def top_charge(self) -> int:
        """Charge with all protons on, of a buffer of the user's own."""
        return 0 if self.charge is None else self.charge

    @property
    def range(self) -> tuple[float, float]:
        """The pH from which on and below which it is used; infinite where there is no bound."""
        low = -math.inf if self.from_ph is None else self.from_ph
        return low, math.inf if self.below_ph is None else self.below_ph

    def used_at(self, ph: float) -> bool:
        """Whether it is used at this pH."""
        low, high = self.range
        return low - 1e-9 <= ph < high - 1e-9


def buffer_faults(bench: Bench, factors: Sequence[Factor]) -> Iterator[Fault]:
    """Yield what is wrong with the buffers of [bench] and the salt beside them."""
    yield from _salt_faults(bench, factors)
    if bench.buffers and bench.ph_factor is None:
        problem = "must name the factor that is the pH where there are [[bench.buffers]]"
        yield bench_fault("ph_factor", "", problem)
    for buffer in bench.buffers:
        where = f"buffers, {buffer.name}"
        if buffer.mm > buffer.stock_mm:
            problem = "lies above stock_mm, which is"
            yield bench_fault(f"{where}, mm", number(buffer.mm), problem, number(buffer.stock_mm))
        low, high = buffer.from_ph, buffer.below_ph
        if low is not None and high is not None and low >= high:
            problem = "must lie below below_ph, which is"
            yield bench_fault(f"{where}, from_ph", number(low), problem, number(high))
        own = [n for n in ("pka", "pka_per_c", "charge", "stock_charges") if _given(buffer, n)]
        if buffer.known is not None and own:
            problem = f"is known; {', '.join(own)} belong to a buffer of your own, by another name"
            yield bench_fault(f"{where}, name", quoted(buffer.name), problem)
        elif buffer.known is None:
            yield from _own_faults(buffer, where)
    yield from _name_faults(bench)


def _given(buffer: Buffer, name: str) -> bool:
    return getattr(buffer, name) is not None


def _own_faults(buffer: Buffer, where: str) -> Iterator[Fault]:
    """What is wrong with the pKa and charges of a buffer of the user's own."""
    if buffer.pka is None:
        hint = did_you_mean(buffer.name, KNOWN_BUFFERS)
        problem = "is not a known buffer, and has no pka"
        yield bench_fault(f"{where}, name", quoted(buffer.name), problem, hint=hint)
        return
    pka, slopes = list(buffer.pka), buffer.pka_per_c
    if not 1 <= len(pka) <= _MOST_PKA or any(not -2 <= value <= 16 for value in pka):
        allowed = f"1 to {_MOST_PKA} numbers from -2 to 16"
        yield bench_fault(f"{where}, pka", _shown(pka), "must be", allowed)
    if pka != sorted(set(pka)):
        yield bench_fault(f"{where}, pka", _shown(pka), "must rise")
    if slopes is not None and (len(slopes) != len(pka) or any(abs(d) > 0.1 for d in slopes)):
        allowed = f"one number a pKa ({len(pka)}), from -0.1 to 0.1"
        yield bench_fault(f"{where}, pka_per_c", _shown(slopes), "must be", allowed)
    if buffer.stock_charges is not None:
        acid, base = buffer.stock_charges
        top, bottom = buffer.top_charge, buffer.top_charge - len(pka)
        if not top >= acid > base >= bottom:
            problem = "must be the charge of the acid form, then the lower one of the base form,"
            yield bench_fault(
                f"{where}, stock_charges", _shown((acid, base)), problem, f"from {top} to {bottom}"
            )


def _name_faults(bench: Bench) -> Iterator[Fault]:
    """Buffers and bottles that cannot be told apart."""
    for i, buffer in enumerate(bench.buffers):
        where = f"buffers, {buffer.name}"
        name = buffer.name.strip().casefold()
        for other in bench.buffers[:i]:
            if other.name.strip().casefold() == name and _overlap(other, buffer):
                problem = "is there twice, for the same pH"
                yield bench_fault(f"{where}, name", quoted(buffer.name), problem)
    yield from _bottle_faults(bench)


@dataclass(frozen=True)
class _Bottle:
    """A name on a bottle, where it stands, and which form of which buffer is in it, if any."""

    name: str
    where: str = ""
    form: str = ""
    buffer: Buffer | None = None


def _bottle_faults(bench: Bench) -> Iterator[Fault]:
    """Names of bottles that stand on other bottles, or on one that serves buffers unalike."""
    seen = {name: [_Bottle(name)] for name in (WATER, "load")}
    for bottle in _bottles(bench):
        before = seen.setdefault(bottle.name.strip().casefold(), [])
        unlike = [said for other in before if (said := _unlike(bottle, other))]
        if not bottle.name.strip():
            unlike = ["is empty"]
        before.append(bottle)
        if unlike:
            yield bench_fault(bottle.where, quoted(bottle.name), unlike[0])


def _bottles(bench: Bench) -> Iterator[_Bottle]:
    """The bottles that the user named."""
    if bench.salt_stock is not None:
        yield _Bottle(bench.salt_stock, "salt_stock")
    for buffer in bench.buffers:
        for form, name in (("acid", buffer.acid_stock), ("base", buffer.base_stock)):
            if name is not None:
                yield _Bottle(name, f"buffers, {buffer.name}, {form}_stock", form, buffer)


def _unlike(one: _Bottle, other: _Bottle) -> str:
    """Why one bottle cannot be another of like name, empty where it can."""
    if one.buffer is None or other.buffer is None or one.form != other.form:
        return "is the name of another bottle, of water or of load"
    if one.name != other.name:
        return f"is written {quoted(other.name)} elsewhere"
    mine, its = one.buffer, other.buffer
    if mine.name.strip().casefold() == its.name.strip().casefold():
        alike = mine.stock_mm == its.stock_mm
    else:
        alike = math.isclose(mine.mm / mine.stock_mm, its.mm / its.stock_mm)
        alike = alike and mine.range == its.range
    return "" if alike else "is one bottle: its buffers need one share, mm / stock_mm, and one pH"


def _salt_faults(bench: Bench, factors: Sequence[Factor]) -> Iterator[Fault]:
    name = bench.salt_factor
    if name is None:
        return
    ranged = {factor.name: factor for factor in factors if factor.continuous}
    if ranged and name not in ranged:
        problem = "is not a factor with a range"
        yield bench_fault("salt_factor", quoted(name), problem, hint=did_you_mean(name, [*ranged]))
    elif name in ranged and bench.buffers and ranged[name].unit not in SALT_UNITS:
        problem = "is no unit in which buffers count the salt; it must be one of"
        where = f"salt_factor, {name}, unit"
        yield bench_fault(where, quoted(ranged[name].unit), problem, ", ".join(SALT_UNITS))
    if name == bench.ph_factor:
        yield bench_fault("salt_factor", quoted(name), "is the pH already")
    if bench.buffers and bench.salt_stock_mm is None:
        yield bench_fault("salt_stock_mm", "", "is missing; salt_factor needs a stock of the salt")


def _overlap(one: Buffer, other: Buffer) -> bool:
    """Whether there is a pH at which both are used."""
    return max(one.range[0], other.range[0]) < min(one.range[1], other.range[1])


def _shown(values: Sequence[float]) -> str:
    return "[" + ", ".join(map(number, values)) + "]"


def bench_fault(where: str, value: str, problem: str, allowed: str = "", hint: str = "") -> Fault:
    """Return a fault of [bench]."""
    return Fault(
        file=_FILE,
        where=f"bench, {where}",
        value=value,
        problem=problem,
        allowed=allowed,
        hint=hint,
    )
