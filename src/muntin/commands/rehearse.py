"""`muntin rehearse`: is another plate worth it?"""

from __future__ import annotations

import re
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import asdict
from enum import StrEnum
from pathlib import Path
from typing import Annotated

import typer

from muntin.commands.shared import (
    Aim,
    AimOption,
    By,
    Folder,
    Output,
    Surrogate,
    SurrogateOption,
    Tell,
    command,
)


class Truths(StrEnum):
    """Where truths are drawn from."""

    posterior = "posterior"
    lab = "lab"
    prior = "prior"


Plates = Annotated[
    str, typer.Option(metavar="WELLS,...", help="test wells of each plate to come, in order")
]
Series = Annotated[int, typer.Option(min=1, help="plate series to play, each on its own truth")]
TruthsOption = Annotated[
    Truths | None,
    typer.Option(help="draw truths from here; before any reading lab or prior, else posterior"),
]
Workers = Annotated[
    int | None,
    typer.Option(
        min=1, help="processes to play series on without --cluster; one a core if not given"
    ),
]
Cluster = Annotated[
    str | None,
    typer.Option(metavar="ADDRESS", help="play on the Dask cluster whose scheduler is there"),
]


@command
def rehearse(
    folder: Folder,
    seed: int,
    tell: Tell,
    plates: Plates = "12,12",
    series: Series = 20,
    aim: AimOption = Aim.edge,
    surrogate: SurrogateOption = Surrogate.stacked,
    truths: TruthsOption = None,
    workers: Workers = None,
    cluster: Cluster = None,
    by: By = None,
) -> Output:
    """Play the plates to come on drawn truths, beside rival designs: what they take to stop.

    Finished series are kept in rehearsals/; the same command takes them up again.
    """
    from muntin.record import open_study
    from muntin.record.entries import entry_for
    from muntin.record.writing import writing
    from muntin.rehearsal.rehearse import rehearse as play
    from muntin.rehearsal.store import FOLDER
    from muntin.report.facts import plain
    from muntin.report.rehearse_text import rehearse_facts, rehearse_screen

    sizes = plate_sizes(plates)
    tell("reading the study")
    study = open_study(folder)
    store = study.folder / FOLDER
    tell("fitting the readings and planning the first plates")
    with _counting(tell, store) as heard:
        told = play(
            study,
            sizes,
            series,
            aim=aim.value,
            surrogate=surrogate.value,
            truths=None if truths is None else truths.value,
            seed=seed,
            workers=workers,
            cluster=cluster,
            store=store,
            heard=heard,
        )
    asked = asdict(told.settings)
    entry = entry_for(study, "rehearse", plain(asked), seed=seed, by=by, results=told.kept)
    with writing(study.folder) as pen:
        pen.commit({}, entry)
    return Output(rehearse_facts(told), rehearse_screen(told), remarks=pen.remarks)


def plate_sizes(text: str) -> tuple[int, ...]:
    """Return the test wells of each plate from "12,12". Raises StudyFaults for anything else."""
    from muntin.record.faults import Fault, StudyFaults, quoted

    parts = [part.strip() for part in re.split(r"[,+]", text)]
    if not all(re.fullmatch(r"[0-9]{1,4}", part) for part in parts):
        problem = "is not a list of whole numbers of test wells"
        fault = Fault(
            file="plates", value=quoted(text), problem=problem, hint="write for example 12,12"
        )
        raise StudyFaults([fault])
    return tuple(map(int, parts))


def time_left(played: int, left: int, seconds: float) -> str:
    """Return how long the series that are left take, at the mean pace of those played in so many
    seconds; "" before one is.
    """
    if not played or not left:
        return ""
    minutes = seconds / played * left / 60.0
    return (
        f"about {minutes:.0f} min left" if minutes >= 1.5 else f"about {60.0 * minutes:.0f} s left"
    )


@contextmanager
def _counting(tell: Tell, store: Path) -> Iterator[Callable[[int, int], None]]:
    """Give a function that shows how many series are done, on stderr where that is a terminal; an
    interrupt says what was kept and ends with exit code 1.
    """
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeElapsedColumn

    columns = (
        TextColumn("playing series"),
        BarColumn(),
        MofNCompleteColumn(),
        TimeElapsedColumn(),
        TextColumn("{task.fields[left]}"),
    )
    bar = Progress(*columns, console=Console(stderr=True), disable=not tell.bar, transient=True)
    task, counts = bar.add_task("", total=None, left=""), [0, 0]
    began: list[tuple[int, float]] = []

    def heard(done: int, of: int) -> None:
        if not began:
            tell("")
            bar.start()
            began.append((done, time.monotonic()))
        counts[:] = done, of
        before, when = began[0]
        left = time_left(done - before, of - done, time.monotonic() - when)
        bar.update(task, completed=done, total=of, left=left)

    try:
        yield heard
    except KeyboardInterrupt:
        bar.stop()
        kept = f"{counts[0]} of {counts[1]} series are kept in {store}; the same command goes on"
        told = f"{kept} from there" if counts[0] else "no series was finished yet"
        typer.echo(f"interrupted: {told}", err=True)
        raise typer.Exit(1) from None
    finally:
        bar.stop()
