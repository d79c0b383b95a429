"""What a condition asks of its buffers."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from muntin.bench.buffer.acids import Couple
from muntin.bench.buffer.stocks import couple_of, salt_ions, salt_unit_mm
from muntin.bench.buffer.titration import Titration
from muntin.bench.recipe import Condition, Refusal
from muntin.record.bench import Bench
from muntin.record.buffers import Buffer
from muntin.record.definition import Definition
from muntin.record.faults import listed, number


@dataclass(frozen=True, kw_only=True, eq=False)
class Wanted:
    """What one liquid is to be.

    ph: target. shown: the target as the bench writes it. salt_mm: mM of the salt. buffers: those
    used at this pH, with what they are made of. others: what else it holds, by factor.
    """

    ph: float
    shown: str
    salt_mm: float
    buffers: Mapping[Buffer, Couple]
    others: tuple[str, ...]
    bench: Bench

    @property
    def names(self) -> str:
        """The buffers in words."""
        return " and ".join(buffer.name for buffer in self.buffers)

    @property
    def titration(self) -> Titration:
        """The buffers with their salt, in mol/L."""
        amounts = {couple: buffer.mm / 1000.0 for buffer, couple in self.buffers.items()}
        ions = salt_ions(self.bench, self.salt_mm)
        return Titration(amounts, ions, self.bench.temperature_c)


def wanted_of(definition: Definition, condition: Condition) -> Wanted | Refusal | None:
    """Return what a condition (the factors that a liquid holds, raw units) asks of its buffers.

    A refusal where no buffer is used at its pH; None where the study declares no buffers, or the
    condition has no pH. A condition without salt holds none.
    """
    bench = definition.bench
    if not bench.buffers or bench.ph_factor is None or bench.ph_factor not in condition:
        return None
    ph = float(condition[bench.ph_factor])
    used = {buffer: couple_of(buffer) for buffer in bench.buffers if buffer.used_at(ph)}
    if not used:
        spans = listed(f"{buffer.name} {_span(buffer)}" for buffer in bench.buffers)
        return Refusal(reason=f"lies where no buffer is used: {spans}")
    salt = float(condition.get(bench.salt_factor, 0.0)) if bench.salt_factor else 0.0
    set_here = (bench.ph_factor, bench.salt_factor)
    return Wanted(
        ph=ph,
        shown=shown_ph(definition, ph),
        salt_mm=salt * salt_unit_mm(definition),
        buffers=used,
        others=tuple(n for n, v in condition.items() if v != 0 and n not in set_here),
        bench=bench,
    )


def shown_ph(definition: Definition, ph: float) -> str:
    """A pH as the bench writes it."""
    factors = (f for f in definition.factors if f.name == definition.bench.ph_factor)
    return next(factors).shown(ph)


def _span(buffer: Buffer) -> str:
    low = "" if buffer.from_ph is None else f"from pH {number(buffer.from_ph)}"
    high = "" if buffer.below_ph is None else f"below pH {number(buffer.below_ph)}"
    return f"{low} {high}".strip()
