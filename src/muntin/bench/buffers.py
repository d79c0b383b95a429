"""Recipes of buffers: acid form, base form, salt and water for one liquid.

Recipes are starting points: activities by Davies and constants from tables leave some hundredths of
a pH, bottles and balances leave more. The pH has to be measured.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass

from muntin.bench.buffer.acids import Couple
from muntin.bench.buffer.liquid import Liquid, state_of
from muntin.bench.buffer.stocks import (
    couple_of,
    form_names,
    salt_ions,
    salt_name,
    salt_unit_mm,
    stock_names,
)
from muntin.bench.buffer.titration import Titration
from muntin.bench.buffer.wanted import Wanted, wanted_of
from muntin.bench.buffer.water import HIGHEST_STRENGTH, per_charge_squared
from muntin.bench.recipe import Condition, Recipe, Refusal
from muntin.record.buffers import WATER
from muntin.record.definition import Definition
from muntin.record.faults import listed, number

REACH = 1.0
_NOTHING = 1e-9


@dataclass(frozen=True)
class Made:
    """What a mix of the stocks comes out as.

    ph: predicted; None above an ionic strength of 0.5. strength: ionic strength, mol/L.
    salt: of the salt's stock, in the factor's unit; 0 where no factor is the salt.
    """

    ph: float | None
    strength: float
    salt: float


def buffer_recipe(definition: Definition, condition: Condition) -> Recipe | Refusal | None:
    """Return the recipe of one liquid, or why the stocks do not make it.

    condition: the factors that the liquid holds (raw units), the pH among them; no salt where it is
    absent. None where the study declares no buffers, or the condition has no pH.
    """
    wanted = wanted_of(definition, condition)
    if wanted is None or isinstance(wanted, Refusal):
        return wanted
    titration = wanted.titration
    base, strength = titration.base_at(wanted.ph)
    if not -_NOTHING <= base <= 1 + _NOTHING:
        return _beyond_reach(wanted, titration)
    parts = _parts(wanted, min(1.0, max(0.0, base)))
    if parts[WATER] < -_NOTHING:
        return _too_full(wanted, parts)
    kept = {name: share for name, share in parts.items() if share > _NOTHING}
    whole = sum(kept.values())
    shares = {name: share / whole for name, share in kept.items()}
    return Recipe(parts=shares, remarks=tuple(_remarks(wanted, strength)))


def buffer_made(definition: Definition, parts: Mapping[str, float]) -> Made:
    """Return what amounts by bottle (in one unit of volume) come out as.

    Raises KeyError for a bottle that is none of the stocks of buffers and salt, and not water.
    """
    bench, whole = definition.bench, sum(parts.values())
    unknown = {*parts} - {*stock_names(bench)}
    if unknown:
        raise KeyError(f"no stock of a buffer: {listed(sorted(unknown))}")
    salt_mm = parts.get(salt_name(bench), 0.0) / whole * (bench.salt_stock_mm or 0.0)
    ions = salt_ions(bench, salt_mm)
    acids = dict.fromkeys((couple_of(buffer).acid for buffer in bench.buffers), 0.0)
    for name, couple, charge, stock_mm in _forms(definition):
        m = parts.get(name, 0.0) / whole * stock_mm / 1000.0
        acids[couple.acid] += m
        if charge:
            counter = -1 if charge > 0 else 1
            ions[counter] = ions.get(counter, 0.0) + abs(charge) * m
    state = state_of(Liquid(acids, ions), bench.temperature_c)
    ph = state.ph if state.strength <= HIGHEST_STRENGTH else None
    return Made(ph, state.strength, salt_mm / salt_unit_mm(definition))


def _forms(definition: Definition) -> Iterator[tuple[str, Couple, int, float]]:
    """What is in the bottles: the bottle, a buffer in it, its charge there, and mM; each once."""
    seen = set()
    for buffer in definition.bench.buffers:
        couple = couple_of(buffer)
        charges = (couple.acid_charge, couple.base_charge)
        for name, charge in zip(form_names(buffer), charges, strict=True):
            if (name, couple) not in seen:
                seen.add((name, couple))
                yield name, couple, charge, buffer.stock_mm


def _parts(wanted: Wanted, base: float) -> dict[str, float]:
    """Shares of the volume by stock, some perhaps 0; water is what is left. Buffers that share a
    bottle are dosed alike (record/buffers.py), so that its share counts once.
    """
    parts: dict[str, float] = {}
    for buffer in wanted.buffers:
        share = buffer.mm / buffer.stock_mm
        acid_name, base_name = form_names(buffer)
        parts[acid_name], parts[base_name] = share * (1 - base), share * base
    if wanted.salt_mm:
        parts[salt_name(wanted.bench)] = wanted.salt_mm / (wanted.bench.salt_stock_mm or 1.0)
    parts[WATER] = 1.0 - sum(parts.values())
    return parts


def _beyond_reach(wanted: Wanted, titration: Titration) -> Refusal:
    low, high = (titration.state(base).ph for base in (0.0, 1.0))
    salt = f" with {number(wanted.salt_mm)} mM of salt" if wanted.salt_mm else ""
    reason = f"lies beyond what the forms of {wanted.names} reach{salt}: pH {low:.2f} to {high:.2f}"
    return Refusal(reason=reason)


def _too_full(wanted: Wanted, parts: Mapping[str, float]) -> Refusal:
    takes = listed(
        f"{1000 * share:.0f} mL of {name}" for name, share in parts.items() if share > _NOTHING
    )
    too_much = "more than 1 L of stocks for 1 L"
    salt = parts.get(salt_name(wanted.bench), 0.0)
    room = parts[WATER] + salt
    if salt <= _NOTHING or room <= _NOTHING:
        return Refusal(
            reason=f"takes {too_much}: {takes}; stronger ones would do",
            cause=f"their buffers take {too_much}; stronger stock_mm would do",
        )
    enough = 10.0 * math.ceil(wanted.salt_mm / room / 10.0 - _NOTHING)
    return Refusal(
        reason=f"takes {too_much}: {takes}; a salt stock of {number(enough)} mM would do",
        cause=f"they take {too_much}, since {salt_name(wanted.bench)} is too weak",
        salt_stock_mm=enough,
    )


def _remarks(wanted: Wanted, strength: float) -> Iterator[str]:
    if strength > HIGHEST_STRENGTH:
        yield (
            f"titrate to pH {wanted.shown} from these volumes: ionic strength {strength:.2f}, "
            "no pH predicted"
        )
    else:
        at = f"{number(wanted.bench.temperature_c)} °C"
        shown = f"{strength:.2f}" if strength >= 0.01 else f"{strength:.4f}"
        yield f"meant for pH {wanted.shown} at {at}; ionic strength {shown}"
    away = pka_away(wanted, strength)
    if abs(away) > REACH:
        side = "above" if away > 0 else "below"
        yield (
            f"pH {wanted.shown} lies {abs(away):.2f} {side} the nearest pKa of {wanted.names}, "
            f"{wanted.ph - away:.2f} in this liquid: beyond 1 it hardly holds the pH"
        )
    if wanted.others:
        yield f"{listed(wanted.others)} on top: neither in the volumes nor in the pH"


def pka_away(wanted: Wanted, strength: float) -> float:
    """How far the pH lies above (below: negative) the nearest pKa of its buffers, as that stands
    at the temperature and the ionic strength (mol/L): pKa + g (z_acid^2 - z_base^2).
    """
    t_c = wanted.bench.temperature_c
    g = per_charge_squared(strength, t_c)
    away = [
        wanted.ph - (pk + g * (z * z - (z - 1) ** 2))
        for couple in wanted.buffers.values()
        for z, pk in zip(couple.acid.charges, couple.acid.pks(t_c), strict=False)
    ]
    return min(away, key=abs)
