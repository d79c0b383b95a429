"""`muntin reduce`: what did the wells do?"""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from muntin.commands.shared import By, Folder, Output, Tell, command

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
def reduce(
    folder: Folder, reads: _Reads, seed: int, tell: Tell, draws: _Draws = 0, by: By = None
) -> Output:
    """Reduce plate reads to masses, recoveries and their uncertainties; write them to results/."""
    from muntin.assay.given import given
    from muntin.assay.reduction import reduce_reads
    from muntin.record import open_study
    from muntin.record.entries import entry_for
    from muntin.record.inputs import hashes, read_inputs
    from muntin.record.writing import writing
    from muntin.report.reduce_files import hashes_of_reads, reduction_files
    from muntin.report.reduce_text import reduce_facts, reduce_screen

    tell("reading the study and its reads")
    study = open_study(folder, reducing=True)
    if not reads.exists() and (folder / reads).exists():
        reads = folder / reads
    reduction = reduce_reads(study, reads, draws=draws, seed=seed)
    found = given(reduction)
    files = reduction_files(reduction, found, reads)
    read = {f"reads: {name}": of for name, of in hashes_of_reads(reads).items()}
    inputs = hashes(read_inputs(study.folder)) | read
    settings = {"reads": str(reads), "monte_carlo": draws}
    entry = entry_for(study, "reduce", settings, seed=seed, by=by, inputs=inputs, judges=False)
    with writing(study.folder) as pen:
        pen.commit(files, entry)
    paths = [*files]
    screen = reduce_screen(reduction, found, paths)
    return Output(reduce_facts(reduction, found, paths), screen, remarks=pen.remarks)
