"""Simulation-based calibration of both engines, judged with simultaneous bands.

Talts, Betancourt, Simpson, Vehtari & Gelman 2018; bands of Sailynoja, Burkner & Vehtari 2022, Stat.
Comput. 32:32. Truth and readings are drawn from the model, 18 wells on 12 conditions and three
plates; the place of the truth in its posterior must be uniform. A quantity of a sound engine leaves
its 95 % band once in twenty.

Run: python -m tests.benchmarks.calibration --figure tests/benchmarks/calibration.png
"""

from __future__ import annotations

import argparse
import sys
from collections.abc import Callable
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from tests.benchmarks.bands import Bands, bands, counts_below
from tests.benchmarks.ranks import NEW, Places, fast_places, nuts_places
from tests.benchmarks.simulated import Setup

if TYPE_CHECKING:
    from matplotlib.axes import Axes

Array = NDArray[np.float64]
POINTS = 20
SURROGATES = ("gp", "quadratic")
SOURCES: dict[str, Callable[..., Places]] = {"fast": fast_places, "nuts": nuts_places}
# Okabe & Ito 2008: blue and vermilion are told apart in every kind of colour vision.
COLOURS = {"gp": "#0072b2", "quadratic": "#d55e00"}
DASHES = {"gp": "-", "quadratic": "--"}
INK, QUIET = "#1f2a30", "#66727a"
SHADES = {0.01: "#e9edf0", 0.05: "#cfd7dc"}
PANELS = (*NEW, "hyperparameters")
HEADINGS = (
    "latent value\nat a new condition",
    "process mean\nat a new condition",
    "reading of a well\non a new plate",
    "hyperparameters\n(a line each)",
)


@dataclass(frozen=True)
class Run:
    """Places of one surrogate under one engine."""

    engine: str
    surrogate: str
    places: Places

    @property
    def size(self) -> int:
        """Number of data sets."""
        return len(self.places.values)


@cache
def bands_of(size: int, alpha: float) -> Bands:
    """Bands for so many data sets."""
    return bands(size, POINTS, alpha)


def away(u: Array) -> Array:
    """Empirical distribution less z at the points of the bands (POINTS,)."""
    z = bands_of(len(u), 0.05).z
    return counts_below(u, z) / len(u) - z


def line(run: Run, name: str) -> str:
    """One quantity as a line of the table."""
    u = run.places.of(name)
    apart = away(u)
    at = int(np.abs(apart).argmax())
    z = bands_of(len(u), 0.05).z[at]
    out = f"{run.engine:<6}{run.surrogate:<11}{name:<18}{len(u):>5}{apart[at]:+9.3f} at {z:.2f}"
    held = ("inside" if bands_of(len(u), alpha).hold(u) else "OUTSIDE" for alpha in (0.05, 0.01))
    return out + "".join(f"{word:>10}" for word in held)


def table(runs: list[Run]) -> None:
    """Print every quantity, and how many leave their bands."""
    print(f"{'engine':<6} {'surrogate':<10}{'quantity':<18}{'sets':>5}{'largest':>17}", end="")
    print(f"{'95 % band':>10}{'99 % band':>10}")
    for run in runs:
        for name in run.places.names:
            print(line(run, name))
    for engine in dict.fromkeys(run.engine for run in runs):
        every = [run.places.of(n) for run in runs if run.engine == engine for n in run.places.names]
        out = [sum(not bands_of(len(u), a).hold(u) for u in every) for a in (0.05, 0.01)]
        print(
            f"{engine}: {out[0]} of {len(every)} quantities leave the 95 % band, {out[1]} the 99 %"
        )


def draw_panel(axes: Axes, runs: list[Run], panel: str) -> None:
    """Lines of every run over the bands of its number of data sets."""
    size = runs[0].size
    z = np.append(0.0, bands_of(size, 0.05).z)
    for alpha, shade in SHADES.items():
        band = bands_of(size, alpha)
        least, most = (np.append(0.0, edge / size) - z for edge in (band.least, band.most))
        axes.fill_between(z, least, most, color=shade, linewidth=0.0)
    axes.axhline(0.0, color=QUIET, linewidth=0.7)
    for run in runs:
        names = (panel,) if panel in NEW else run.places.names[: -len(NEW)]
        style: dict[str, Any] = {
            "color": COLOURS[run.surrogate],
            "linestyle": DASHES[run.surrogate],
        }
        for name in names:
            width = 1.8 if panel in NEW else 0.9
            axes.plot(z, np.append(0.0, away(run.places.of(name))), linewidth=width, **style)
    axes.spines[["top", "right"]].set_visible(False)
    axes.tick_params(labelsize=8, colors=QUIET, labelcolor=INK)
    axes.set_xlim(0.0, 1.0)
    axes.set_xticks([0.0, 0.5, 1.0], ["0", "0.5", "1"])


def draw(runs: list[Run], path: Path) -> None:
    """One row of panels for each engine: empirical distribution of the places less the diagonal."""
    from matplotlib.figure import Figure
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch

    engines = list(dict.fromkeys(run.engine for run in runs))
    figure = Figure(figsize=(8.0, 1.3 + 2.0 * len(engines)), dpi=150, layout="constrained")
    figure.suptitle(
        "Place z of the truth in its posterior, over simulated data sets", fontsize=11, color=INK
    )
    every = figure.subplots(len(engines), len(PANELS), sharex=True, sharey="row", squeeze=False)
    for number, (row, engine) in enumerate(zip(every, engines, strict=True)):
        mine = [run for run in runs if run.engine == engine]
        for axes, panel, heading in zip(row, PANELS, HEADINGS, strict=True):
            draw_panel(axes, mine, panel)
            if number == 0:
                axes.set_title(heading, fontsize=9, color=INK)
            if number == len(engines) - 1:
                axes.set_xlabel("z", fontsize=9, color=INK)
        label = f"engine {engine}, {mine[0].size} sets\nshare of sets below z, less z"
        row[0].set_ylabel(label, fontsize=8.5, color=INK)
    shown = dict.fromkeys(run.surrogate for run in runs)
    keys: list[Any] = [
        Line2D([], [], color=COLOURS[s], linestyle=DASHES[s], linewidth=1.8, label=s) for s in shown
    ]
    keys += [
        Patch(color=SHADES[a], label=f"{100 * (1 - a):.0f} % of sound engines")
        for a in (0.05, 0.01)
    ]
    figure.legend(handles=keys, loc="outside lower center", ncols=4, fontsize=8.5, frameon=False)
    figure.savefig(path)


def progress(engine: str, surrogate: str, sets: int) -> Callable[[int], None]:
    """Shows how far a run is, on a terminal only."""

    def report(done: int) -> None:
        if sys.stderr.isatty():
            print(f"\r{engine} {surrogate}: {done} of {sets}", end="", file=sys.stderr, flush=True)

    return report


def main() -> None:
    """Print the table and draw the figure."""
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("--sets", type=int, default=200, help="data sets of the fast engine")
    parser.add_argument("--nuts-sets", type=int, default=80, help="data sets of NUTS")
    parser.add_argument("--engines", nargs="+", choices=tuple(SOURCES), default=tuple(SOURCES))
    parser.add_argument("--surrogates", nargs="+", choices=SURROGATES, default=SURROGATES)
    parser.add_argument("--kind", choices=("fraction", "real", "positive"), default="fraction")
    parser.add_argument("--setting", type=float, default=0.0, help="sd of setting, coded units")
    parser.add_argument("--censor", nargs=2, type=float, default=(-np.inf, np.inf))
    parser.add_argument("--figure", type=Path)
    given = parser.parse_args()
    changed = given.setting > 0.0 or np.isfinite(given.censor).any()
    if changed and "nuts" in given.engines:
        parser.error("setting errors and censored readings need --engines fast")
    runs = []
    for engine in given.engines:
        sets = given.sets if engine == "fast" else given.nuts_sets
        for name in given.surrogates:
            setup = Setup(
                name=name, kind=given.kind, setting=given.setting, limits=tuple(given.censor)
            )
            places = SOURCES[engine](setup, sets, progress(engine, name, sets))
            runs.append(Run(engine, name, places))
    table(runs)
    if given.figure is not None:
        draw(runs, given.figure)


if __name__ == "__main__":
    main()
