"""Plate reads of examples/fab-elution, made to reduce to the recoveries of its plate tables.

Every well is given flow-through, washes, eluates and strip about the balance of its protein, with
errors of reading; the first eluate is then set so that the well comes to the recovery that its
table holds. Nothing is drawn that the tables rest on: the recoveries stay what they are.
"""

import csv
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path

import numpy as np

SEED = 51
COLUMNS = ("plate", "well", "fraction", "stage", "wavelength", "absorbance", "dilution")
STAGES = {
    "ft": "load",
    "w1": "wash",
    "w2": "wash",
    "e1": "elution",
    "e2": "elution",
    "strip": "strip",
}

LOAD, EXTINCTION = 1.25, 1.40  # mg/mL, mL/mg/cm
VOLUME, HOLD_UP = 200.0, 39.0  # µL, all stages and as entered in study.toml
PATH, BAND = 0.60, 0.18  # cm of 200 µL, AU of 1 cm of water
BACKGROUND = {"ft": 0.046, "w1": 0.046, "w2": 0.046, "e1": 0.052, "e2": 0.052, "strip": 0.058}
DIGITS = 4

Row = Mapping[str, str]


def reads(name: str, rows: Sequence[Row], rng: np.random.Generator) -> Iterator[tuple[str, ...]]:
    """Yield the reads of one plate, a row of the tidy table each; `rows` are its plate table."""
    plate = _Plate(name, rng)
    for row in rows:
        role = row["role"]
        if role == "load":
            yield from plate.load(row["well"])
        elif role == "blank":
            for fraction in STAGES:
                yield from plate.sample(row["well"], fraction, 0.0)
    for row in rows:
        if row["role"] == "no_resin":
            yield from plate.well(row["well"], _passing())
        elif row["role"] in ("test", "bridge"):
            yield from plate.bound(row["well"], float(row["recovery"]), bool(row.get("exclude")))


def _passing() -> dict[str, float]:
    """Concentrations of a well without resin: hold-up washed out step by step, mg/mL."""
    left, liquid = VOLUME * LOAD, {}
    for fraction in STAGES:
        liquid[fraction] = left / (VOLUME + HOLD_UP)
        left = liquid[fraction] * HOLD_UP
    return liquid


class _Plate:
    """One plate: its reader's noise, and what its blanks and loads have read so far."""

    def __init__(self, name: str, rng: np.random.Generator) -> None:
        self.name, self.rng = name, rng
        self.blanks: dict[str, list[float]] = {}
        self.loads: list[tuple[float, float]] = []

    def load(self, well: str) -> Iterator[tuple[str, ...]]:
        """A sample of the load, diluted 1:2."""
        rows, absorbance, path = self._sample(well, "load", LOAD / 2, 0.046, 2.0)
        self.loads.append((absorbance, path))
        yield from rows

    def sample(self, well: str, fraction: str, liquid: float) -> Iterator[tuple[str, ...]]:
        """A sample without protein, kept as a blank."""
        rows, absorbance, _ = self._sample(well, fraction, liquid, BACKGROUND[fraction], 1.0)
        self.blanks.setdefault(_buffer(fraction), []).append(absorbance)
        yield from rows

    def well(self, well: str, liquid: Mapping[str, float]) -> Iterator[tuple[str, ...]]:
        """All fractions of a well whose recovery nobody asks for."""
        for fraction, mg_ml in liquid.items():
            yield from self._sample(well, fraction, mg_ml, BACKGROUND[fraction], 1.0)[0]

    def bound(self, well: str, recovery: float, leaked: bool) -> Iterator[tuple[str, ...]]:
        """All fractions of a well that comes to a recovery of what it bound, collected."""
        liquid = self._liquid(recovery, leaked)
        found = {
            name: self._sample(well, name, mg_ml, BACKGROUND[name], 1.0)
            for name, mg_ml in liquid.items()
        }
        bound = self._load() * VOLUME - self._read(found, "ft") * (VOLUME + HOLD_UP)
        first = recovery * bound / VOLUME - self._read(found, "e2")
        path = found["e1"][2]
        read = round(self._blank("e1") + EXTINCTION * path * first, DIGITS)
        rows = [
            (*row[:5], f"{read:.4f}", row[6]) if row[4] == "280" else row for row in found["e1"][0]
        ]
        for name in STAGES:
            yield from rows if name == "e1" else found[name][0]

    def _liquid(self, recovery: float, leaked: bool) -> dict[str, float]:
        """Concentrations about the balance of a well, mg/mL; a leak loses what the strip lacks."""
        rng = self.rng
        through = 0.012 * LOAD * float(np.exp(0.2 * rng.standard_normal()))
        washed = [through * HOLD_UP / (VOLUME + HOLD_UP) + 0.0015 * rng.random() for _ in range(2)]
        bound = LOAD * VOLUME - through * (VOLUME + HOLD_UP) - sum(washed) * VOLUME
        share = 1.0 - np.sqrt(max(1.0 - recovery, 0.002))
        parts = np.array([share, share * (1.0 - share)])
        eluted = recovery * bound * parts / parts.sum()
        left = max(bound - eluted.sum(), 0.004 * bound)
        strip = 0.1 if leaked else 0.97 * left / (VOLUME + HOLD_UP)
        return {
            "ft": through,
            "w1": washed[0],
            "w2": washed[1],
            "e1": eluted[0] / VOLUME,
            "e2": eluted[1] / VOLUME,
            "strip": strip * float(np.exp(0.02 * rng.standard_normal())),
        }

    def _sample(
        self, well: str, fraction: str, liquid: float, background: float, dilution: float
    ) -> tuple[list[tuple[str, ...]], float, float]:
        """Rows of a sample, its A280 and its path by the water band, both as written."""
        rng = self.rng
        path = PATH * float(np.exp(0.012 * rng.standard_normal()))
        above = EXTINCTION * liquid * path
        noise = float(np.hypot(0.0015, 0.008 * above) * rng.standard_normal())
        read = round(background + above + noise, DIGITS)
        base = round(0.040 + 0.0008 * float(rng.standard_normal()), DIGITS)
        top = round(base + BAND * path, DIGITS)
        stage = STAGES.get(fraction, "load")
        given = f"{dilution:g}" if dilution > 1 else ""
        values = {"280": read, "900": base, "977": top}
        rows = [
            (self.name, well, fraction, stage, nm, f"{value:.4f}", given)
            for nm, value in values.items()
        ]
        return rows, read, (top - base) / BAND

    def _blank(self, fraction: str) -> float:
        return float(np.mean(self.blanks[_buffer(fraction)]))

    def _load(self) -> float:
        blank = self._blank("ft")
        return float(np.mean([2.0 * (a - blank) / (EXTINCTION * path) for a, path in self.loads]))

    def _read(
        self, found: Mapping[str, tuple[list[tuple[str, ...]], float, float]], name: str
    ) -> float:
        """Concentration of a fraction as its reads have it, mg/mL."""
        _, absorbance, path = found[name]
        return (absorbance - self._blank(name)) / (EXTINCTION * path)


def _buffer(fraction: str) -> str:
    return {"ft": "binding", "w1": "binding", "w2": "binding", "strip": "strip"}.get(
        fraction, "elution"
    )


def write(folder: Path, tables: Iterator[tuple[str, list[dict[str, str]]]]) -> None:
    """Write the reads of each plate into `folder`."""
    folder.mkdir(parents=True, exist_ok=True)
    rng = np.random.default_rng(SEED)
    for name, rows in tables:
        with (folder / f"{name}.csv").open("w", encoding="utf-8", newline="") as file:
            writer = csv.writer(file, lineterminator="\n")
            writer.writerow(COLUMNS)
            writer.writerows(reads(name, rows, rng))
