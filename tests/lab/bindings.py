"""Plain bindings whose stages have closed forms."""

from dataclasses import dataclass, field

import numpy as np


@dataclass(frozen=True)
class Linear:
    """q = Kp c at any pH and salt."""

    kp: float

    def settle(self, total, volume, resin, ph, salt):
        liquid = np.asarray(total) / (volume + self.kp * np.asarray(resin))
        return liquid, self.kp * liquid


@dataclass(frozen=True)
class Switch:
    """Binds all protein below 200 mM of salt and with Kp = `kp` above."""

    kp: float

    def settle(self, total, volume, resin, ph, salt):
        kp = np.where(np.asarray(salt) > 200, self.kp, 1e12)
        liquid = np.asarray(total) / (volume + kp * np.asarray(resin))
        return liquid, kp * liquid


@dataclass(frozen=True)
class Recorder:
    """Binds nothing and notes pH and salt of every stage."""

    seen: list = field(default_factory=list)

    def settle(self, total, volume, resin, ph, salt):
        self.seen.append((float(np.squeeze(ph)), float(np.squeeze(salt))))
        liquid = np.asarray(total) / volume
        return liquid, np.zeros_like(liquid)
