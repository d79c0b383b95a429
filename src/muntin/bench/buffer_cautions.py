"""Cautions about the buffers of a whole plan: what no single recipe shows."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass

from muntin.bench.buffer.acids import Couple
from muntin.bench.buffer.liquid import forms
from muntin.bench.buffer.wanted import Wanted, wanted_of
from muntin.bench.buffer.water import HIGHEST_STRENGTH, per_charge_squared
from muntin.bench.buffers import REACH, pka_away
from muntin.bench.recipe import Condition
from muntin.record.definition import Definition
from muntin.record.faults import number

# Beside more than a tenth of the salt, what the buffer brings is as large as a wide tolerance.
_OWN_SHARE = 0.10
# So far from the pKa a buffer has less than half of its capacity at the pKa: 4 h / (1 + h)^2 of it,
# h = 10^0.8.
_WEAK = 0.8
# A form that makes up a twentieth of a buffer, and a pH that moves by 0.05 over five degrees.
_PRESENT, _PER_C = 0.05, 0.01


@dataclass(frozen=True, eq=False)
class _Mixed:
    """One liquid as it comes out: base is the share of base form, strength in mol/L."""

    wanted: Wanted
    base: float
    strength: float

    @property
    def own_mm(self) -> float:
        """Charge that the buffer's ions of one sign bring, mM; as much of the other sign."""
        titration = self.wanted.titration
        counter = titration.liquid(self.base).ions.get(1, 0.0) - titration.ions.get(1, 0.0)
        held = sum(
            m * share * max(0, z)
            for couple, m in titration.couples.items()
            for z, share in self.shares(couple)
        )
        return 1000.0 * (counter + held)

    @property
    def salt_mm(self) -> float:
        """Charge that the salt's ions of one sign bring, mM."""
        return 1000.0 * sum(z * m for z, m in self.wanted.titration.ions.items() if z > 0)

    def shares(self, couple: Couple) -> list[tuple[int, float]]:
        """Charge and share of each form of a buffer."""
        t_c = self.wanted.bench.temperature_c
        g = per_charge_squared(self.strength, t_c)
        return [*zip(couple.acid.charges, forms(couple.acid, self.wanted.ph, g, t_c), strict=True)]


def buffer_cautions(definition: Definition, conditions: Iterable[Condition]) -> tuple[str, ...]:
    """Return what is to be known of the buffers of a plan, a sentence each.

    conditions: those of the liquids that are made (raw units), as `buffer_recipe` takes them; those
    that have no recipe are passed over. Empty where there is nothing to say.
    """
    mixed = [made for condition in conditions if (made := _made(definition, condition))]
    if not mixed:
        return ()
    found = (_confounded, _weak, _salt_spent, _bound, _warm, _strong)
    return tuple(said for caution in found for said in caution(mixed))


def _made(definition: Definition, condition: Condition) -> _Mixed | None:
    wanted = wanted_of(definition, condition)
    if not isinstance(wanted, Wanted):
        return None
    base, strength = wanted.titration.base_at(wanted.ph)
    return _Mixed(wanted, base, strength) if 0 <= base <= 1 else None


def _confounded(mixed: Sequence[_Mixed]) -> Iterator[str]:
    """Buffers that change along the pH."""
    spans: dict[str, list[_Mixed]] = {}
    for made in mixed:
        spans.setdefault(made.wanted.names, []).append(made)
    if len(spans) < 2:
        return
    order = sorted(spans.values(), key=lambda group: min(made.wanted.ph for made in group))
    told = "; ".join(f"{group[0].wanted.names} at pH {_ph_span(group)}" for group in order)
    yield (
        f"the buffer changes along the pH ({told}): what it does is read as an effect of the pH. "
        "One mix of them over the whole range, without from_ph and below_ph, parts the two"
    )


def _weak(mixed: Sequence[_Mixed]) -> Iterator[str]:
    """Liquids that the load and the resin move, although the pH lies within 1 of a pKa."""
    away = [(abs(pka_away(made.wanted, made.strength)), made.wanted) for made in mixed]
    weak = [one for one in away if _WEAK < one[0] <= REACH]
    if weak:
        most, wanted = max(weak, key=lambda one: one[0])
        lie = "lies" if len(weak) == 1 else "lie"
        yield (
            f"{len(weak)} of {len(mixed)} liquids {lie} {number(_WEAK)} to {number(REACH)} from "
            f"the nearest pKa of their buffers (pH {wanted.shown}: {most:.2f}), where they hold "
            "the pH weakly: measure it in an eluate, too"
        )


def _salt_spent(mixed: Sequence[_Mixed]) -> Iterator[str]:
    """Ions of the buffer beside the salt."""
    heavy = [made for made in mixed if made.own_mm > _OWN_SHARE * made.salt_mm]
    if not heavy:
        return
    low, high = (f"{end(made.own_mm for made in mixed):.0f}" for end in (min, max))
    brought = low if low == high else f"{low} to {high}"
    salted = [made for made in heavy if made.salt_mm > 0]
    beside = ", in liquids without salt"
    if salted:
        most = max(salted, key=lambda made: made.own_mm / made.salt_mm)
        more = f"{100 * most.own_mm / most.salt_mm:.0f} %"
        salt = f"{number(most.wanted.salt_mm)} mM"
        beside = f": at pH {most.wanted.shown} and {salt} of salt they are {more} more"
    moving = "" if low == high else " and change with the pH"
    yield (
        f"the buffer brings {brought} mM of ions of its own, which are not counted as salt{moving}"
        f"{beside}"
    )


def _bound(mixed: Sequence[_Mixed]) -> Iterator[str]:
    """Forms of the buffers that a resin binds, and forms of several charges."""
    exchanger = mixed[0].wanted.bench.exchanger
    charges: dict[str, set[int]] = {}
    for made in mixed:
        for buffer, couple in made.wanted.buffers.items():
            present = {z for z, share in made.shares(couple) if share > _PRESENT}
            charges.setdefault(buffer.name, set()).update(present)
    for name, present in charges.items():
        against = {z for z in present if (z > 0 if exchanger == "cation" else z < 0)}
        most = max(map(abs, against), default=0)
        if exchanger is None and most > 1:
            yield (
                f"{name} has ions of {_signed(min(against))} here: an anion exchanger binds them "
                "more strongly than the salt's (say which in [bench] exchanger)"
            )
        elif exchanger is not None and most:
            stronger = ", more strongly than the salt's" if most > 1 else ""
            instead = "negative ions only" if exchanger == "cation" else "positive ions (Tris)"
            yield (
                f"{name} has ions of {_signed(max(against, key=abs))} here, which a resin of "
                f"{exchanger} exchange binds{stronger}: they take the place of protein, and the pH "
                f"at the resin lags behind; a buffer of {instead} does not"
            )


def _warm(mixed: Sequence[_Mixed]) -> Iterator[str]:
    """Buffers whose pH moves with the temperature."""
    moves: dict[str, tuple[float, float]] = {}
    for made in mixed:
        if made.strength > HIGHEST_STRENGTH:
            continue
        titration = made.wanted.titration
        warmer = type(titration)(titration.couples, titration.ions, titration.t_c + 1.0)
        move = warmer.state(made.base).ph - made.wanted.ph
        if abs(move) > abs(moves.get(made.wanted.names, (0.0, 0.0))[0]):
            moves[made.wanted.names] = (move, titration.t_c)
    for names, (move, t_c) in moves.items():
        if abs(move) > _PER_C:
            way = "falls" if move < 0 else "rises"
            yield (
                f"the pH of {names} {way} by {abs(move):.3f} per °C: measure it at the temperature "
                f"of the plate (meant for {number(t_c)} °C)"
            )


def _strong(mixed: Sequence[_Mixed]) -> Iterator[str]:
    """Liquids of which no pH is predicted."""
    strong = sum(made.strength > HIGHEST_STRENGTH for made in mixed)
    if strong:
        lie, them = ("lies", "it") if strong == 1 else ("lie", "them")
        yield (
            f"{strong} of {len(mixed)} liquids {lie} above an ionic strength of 0.5, where no pH "
            f"is predicted: titrate {them}"
        )


def _ph_span(group: Sequence[_Mixed]) -> str:
    by_ph = sorted((made.wanted for made in group), key=lambda wanted: wanted.ph)
    low, high = by_ph[0].shown, by_ph[-1].shown
    return low if low == high else f"{low} to {high}"


def _signed(charge: int) -> str:
    return f"charge {charge:+d}".replace("-", "−")
