"""What all commands share: their common options, how they print and how they end."""

from __future__ import annotations

import inspect
import json
import os
import sys
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from enum import StrEnum
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

if TYPE_CHECKING:
    from rich.console import RenderableType
    from rich.status import Status

_WIDTH, _NARROWEST = 100, 40

Folder = Annotated[Path, typer.Argument(metavar="DIR", help="the study's folder")]
Wells = Annotated[int, typer.Option(min=1, help="test wells of the next plate; others come on top")]


By = Annotated[
    str | None, typer.Option(metavar="NAME", help="who does this, for the ledger; not guessed")
]


class Aim(StrEnum):
    """What the next plate is for."""

    edge = "edge"
    best = "best"
    both = "both"


class Engine(StrEnum):
    """What fits the surrogates."""

    fast = "fast"
    nuts = "nuts"


class Noise(StrEnum):
    """The law of the readings' noise."""

    normal = "normal"
    student = "student"


class Surrogate(StrEnum):
    """Which surrogate is fitted."""

    stacked = "stacked"
    gp = "gp"
    quadratic = "quadratic"


AimOption = Annotated[
    Aim, typer.Option(help="find the window's edge, the best condition, or take turns")
]
SurrogateOption = Annotated[
    Surrogate, typer.Option(help="Gaussian process, quadratic polynomial, or both stacked")
]
EngineOption = Annotated[
    Engine, typer.Option(help="approximate and fast, or the reference that samples (minutes)")
]
NoiseOption = Annotated[
    Noise, typer.Option(help="with --engine nuts: student lets wild wells pull less")
]
_COMMON: dict[str, Any] = {
    "seed": Annotated[int, typer.Option(min=0, help="same seed and input, same numbers")],
    "as_json": Annotated[bool, typer.Option("--json", help="print one JSON document")],
    "quiet": Annotated[bool, typer.Option("--quiet", help="print nothing but faults")],
}
_DEFAULTS = {"seed": 1, "as_json": False, "quiet": False}


class Tell:
    """Shows the step at work; `bar` where a library's own progress bar may be shown in its place.

    An empty step clears the line for such a bar.
    """

    def __init__(self, status: Status | None = None) -> None:
        self._status, self.bar = status, status is not None

    def __call__(self, step: str) -> None:
        """Show a step."""
        if self._status is None:
            return
        if step:
            self._status.update(step)
            self._status.start()
        else:
            self._status.stop()

    def fitting(self, engine: Engine) -> bool:
        """Show that the readings are fitted; whether the engine shows a bar of its own."""
        own = self.bar and engine is Engine.nuts
        self("" if own else "fitting the readings")
        return own


def sampler(engine: Engine, noise: Noise) -> Any:
    """Return what `muntin.assess` takes as its engine."""
    if noise is Noise.normal:
        return engine.value
    from muntin.surrogate.nuts import Nuts

    return Nuts(noise="student")


@dataclass(frozen=True)
class Output:
    """What a command found: plain values for --json, the screen, the exit code, and remarks of
    the ledger, below both.
    """

    facts: dict[str, Any]
    screen: RenderableType
    code: int = 0
    remarks: Sequence[str] = ()


def command(work: Callable[..., Output]) -> Callable[..., None]:
    """Give a command --seed, --json and --quiet, print its output, and turn faults into exit 2.

    `work` takes `seed` where it needs one, and `tell` where it reports its steps.
    """
    own = inspect.signature(work, eval_str=True).parameters

    def run(**given: Any) -> None:
        common = {name: given.pop(name, _DEFAULTS[name]) for name in _COMMON}
        if "seed" in own:
            given["seed"] = common["seed"]
        try:
            with _progress(silent=common["quiet"]) as tell:
                if "tell" in own:
                    given["tell"] = tell
                output = work(**given)
        except Exception as error:
            # Imported here, since `muntin help` would otherwise wait for it.
            from muntin.record.faults import StudyFaults

            if not isinstance(error, StudyFaults):
                raise
            _print_faults(error, common["as_json"])
            raise typer.Exit(2) from None
        _print(output, common["as_json"], common["quiet"])
        if output.code:
            raise typer.Exit(output.code)

    keyword = inspect.Parameter.KEYWORD_ONLY
    shown = [p for name, p in own.items() if name not in ("seed", "tell")]
    common = [
        inspect.Parameter(name, keyword, default=_DEFAULTS[name], annotation=kind)
        for name, kind in _COMMON.items()
    ]
    parameters = [*(p.replace(kind=keyword) for p in shown), *common]
    run.__signature__ = inspect.Signature(parameters)  # type: ignore[attr-defined]
    run.__annotations__ = {p.name: p.annotation for p in parameters}
    run.__name__, run.__doc__ = work.__name__, work.__doc__
    return run


def _print(output: Output, as_json: bool, quiet: bool) -> None:
    if as_json:
        from muntin.report.advice_files import json_text

        more = {"remarks": [*output.remarks]} if output.remarks else {}
        sys.stdout.write(json_text({**output.facts, **more}))
    elif not quiet:
        sys.stdout.write(_shown(output.screen))
        sys.stdout.write("".join(f"{remark}\n" for remark in output.remarks))


def _shown(screen: RenderableType) -> str:
    """Return a screen as text, as wide as the terminal or COLUMNS but at most 100 columns, without
    blanks at the ends of lines.
    """
    from rich.console import Console

    console = Console(highlight=False, markup=False, emoji=False)
    told = console.is_terminal or os.environ.get("COLUMNS", "").isdigit()
    console.width = min(_WIDTH, max(_NARROWEST, console.width)) if told else _WIDTH
    with console.capture() as capture:
        console.print(screen)
    return "".join(f"{line.rstrip()}\n" for line in capture.get().splitlines())


def _print_faults(faults: Any, as_json: bool) -> None:
    for line in faults.lines():
        typer.echo(line, err=True)
    if as_json:
        lines = [
            {name: getattr(fault, name) for name in (*fault.__slots__, "text")}
            for fault in faults.faults
        ]
        sys.stdout.write(json.dumps({"faults": lines}, ensure_ascii=False, indent=2) + "\n")


@contextmanager
def _progress(silent: bool) -> Iterator[Tell]:
    """Give a function that shows the step at work on stderr, where that is a terminal."""
    if silent or not sys.stderr.isatty():
        yield Tell()
        return
    from rich.console import Console

    with Console(stderr=True).status("") as status:
        yield Tell(status)
