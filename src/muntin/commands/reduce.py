"""`muntin reduce`: what did the wells do?"""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from muntin.commands.shared import Folder, Output, Tell, command

_Reads = Annotated[
    Path,
    typer.Argument(metavar="READS", help="a tidy table of reads, or a folder of tables, grids"),
]
_Draws = Annotated[
    int,
    typer.Option(
        "--monte-carlo", min=0, max=1_000_000, metavar="N", help="check uncertainties by N draws"
    ),
]


@command
def reduce(folder: Folder, reads: _Reads, seed: int, tell: Tell, draws: _Draws = 0) -> Output:
    """Reduce plate reads to masses, recoveries and their uncertainties; write them to results/."""
    from muntin.assay.given import given
    from muntin.assay.reduction import reduce_reads
    from muntin.record import open_study
    from muntin.record.files import write_together
    from muntin.report.reduce_files import reduction_files
    from muntin.report.reduce_text import reduce_facts, reduce_screen

    tell("reading the study and its reads")
    study = open_study(folder, reducing=True)
    if not reads.exists() and (folder / reads).exists():
        reads = folder / reads
    reduction = reduce_reads(study, reads, draws=draws, seed=seed)
    found = given(reduction)
    files = reduction_files(reduction, found, reads)
    write_together(files)
    paths = [*files]
    return Output(reduce_facts(reduction, found, paths), reduce_screen(reduction, found, paths))
