"""Titration: what share of the base form gives a pH."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Mapping
from dataclasses import dataclass

from muntin.bench.buffer.acids import Acid, Couple
from muntin.bench.buffer.liquid import Liquid, State, moments, own_strength, state_of, waters
from muntin.bench.buffer.water import per_charge_squared


@dataclass(frozen=True, eq=False)
class Titration:
    """Buffers that are brought to a pH by one share of base form, the same for all of them.

    couples: mol/kg by buffer. ions: mol/kg of the salt's ions by charge. t_c: °C.
    """

    couples: Mapping[Couple, float]
    ions: Mapping[int, float]
    t_c: float

    def liquid(self, base: float) -> Liquid:
        """The liquid with a share `base` (0 to 1) of each buffer from its base form."""
        ions: dict[int, float] = defaultdict(float, self.ions)
        acids: dict[Acid, float] = defaultdict(float)
        for couple, m in self.couples.items():
            acids[couple.acid] += m
            for charge, share in ((couple.acid_charge, 1 - base), (couple.base_charge, base)):
                if charge:
                    ions[-1 if charge > 0 else 1] += abs(charge) * share * m
        return Liquid(acids, ions)

    def state(self, base: float) -> State:
        """PH and ionic strength at a share of base form."""
        return state_of(self.liquid(base), self.t_c)

    def base_at(self, ph: float) -> tuple[float, float]:
        """Return the share of base form that gives a pH, and the ionic strength (mol/kg).

        The share lies outside 0 to 1 where the two forms do not reach the pH, and the ionic
        strength is then that of the nearer form.
        """

        def excess(strength: float) -> float:
            return self._strength(ph, per_charge_squared(strength, self.t_c)) - strength

        strength = own_strength(excess)
        return self._balanced(ph, per_charge_squared(strength, self.t_c)), strength

    def _balanced(self, ph: float, g: float) -> float:
        """The share that balances the charges. Counter-ions balance the charges of the buffers as
        they are in the stocks, so these charges must equal those at the pH, and water's own.
        """
        hydrogen, hydroxide = waters(ph, g, self.t_c)
        at_ph = sum(m * moments(c.acid, ph, g, self.t_c)[0] for c, m in self.couples.items())
        acid = sum(m * c.acid_charge for c, m in self.couples.items())
        lost = sum(m * (c.acid_charge - c.base_charge) for c, m in self.couples.items())
        return (acid - at_ph - hydrogen + hydroxide) / lost

    def _strength(self, ph: float, g: float) -> float:
        liquid = self.liquid(min(1.0, max(0.0, self._balanced(ph, g))))
        squares = sum(m * moments(a, ph, g, self.t_c)[1] for a, m in liquid.acids.items())
        fixed = sum(m * z * z for z, m in liquid.ions.items())
        return 0.5 * (fixed + squares + sum(waters(ph, g, self.t_c)))
