"""The stocks of a study's buffers: what they are made of, and what stands on them."""

from __future__ import annotations

from functools import lru_cache

from muntin.bench.buffer.acids import COUPLES, Acid, Couple, Step
from muntin.record.bench import Bench
from muntin.record.buffers import SALT_UNITS, WATER, Buffer
from muntin.record.definition import Definition
from muntin.record.faults import number

_SALT_IONS: dict[str, dict[int, int]] = {
    "NaCl": {1: 1, -1: 1},
    "KCl": {1: 1, -1: 1},
    "Na2SO4": {1: 2, -2: 1},
}


@lru_cache
def couple_of(buffer: Buffer) -> Couple:
    """What a buffer is made of: a known one, or that of its own pKa and charges."""
    if buffer.known is not None:
        return COUPLES[buffer.known]
    pka = buffer.pka or ()
    slopes = buffer.pka_per_c or (0.0,) * len(pka)
    acid = Acid(buffer.top_charge, tuple(map(Step.sloping, pka, slopes)))
    top, bottom = buffer.stock_charges or (acid.charges[0], acid.charges[-1])
    return Couple(acid, top, bottom, f"{buffer.name} acid form", f"{buffer.name} base form")


def form_names(buffer: Buffer) -> tuple[str, str]:
    """What stands on the stocks of its acid form and of its base form."""
    couple, strength = couple_of(buffer), f"{number(buffer.stock_mm)} mM"
    acid = buffer.acid_stock or f"{couple.acid_form} {strength}"
    return acid, buffer.base_stock or f"{couple.base_form} {strength}"


def salt_name(bench: Bench) -> str:
    """What stands on the stock of the salt."""
    return bench.salt_stock or f"{bench.salt_kind} {number(bench.salt_stock_mm or 0.0)} mM"


def stock_names(bench: Bench) -> tuple[str, ...]:
    """What stands on the stocks that recipes are made from, in the order of work; water last."""
    forms = [name for buffer in bench.buffers for name in form_names(buffer)]
    salt = [salt_name(bench)] if bench.salt_factor is not None else []
    return tuple(dict.fromkeys([*forms, *salt, WATER]))


def salt_ions(bench: Bench, salt_mm: float) -> dict[int, float]:
    """The ions of so much salt, mol/L by charge."""
    return {z: n * salt_mm / 1000.0 for z, n in _SALT_IONS[bench.salt_kind].items()}


def salt_unit_mm(definition: Definition) -> float:
    """The mM in one unit of the factor that is the salt."""
    name = definition.bench.salt_factor
    units = (f.unit for f in definition.factors if f.name == name)
    return SALT_UNITS.get(next(units, "mM"), 1.0)


def named_stocks(bench: Bench) -> tuple[str, ...]:
    """What is in the stocks that have names of the user's own: "acid mix: MES 200 mM, ..."."""
    holds: dict[str, list[str]] = {}
    for buffer in bench.buffers:
        couple, strength = couple_of(buffer), f"{number(buffer.stock_mm)} mM"
        plain = (f"{couple.acid_form} {strength}", f"{couple.base_form} {strength}")
        for name, content in zip(form_names(buffer), plain, strict=True):
            holds.setdefault(name, []).append(content)
    if bench.salt_factor is not None:
        content = f"{bench.salt_kind} {number(bench.salt_stock_mm or 0.0)} mM"
        holds[salt_name(bench)] = [content]
    return tuple(
        f"{name}: {', '.join(dict.fromkeys(contents))}"
        for name, contents in holds.items()
        if contents != [name]
    )
