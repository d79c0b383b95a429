"""Series played in this process, on processes of this machine, or on a Dask cluster."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from typing import TYPE_CHECKING

from muntin.record.faults import Fault, StudyFaults
from muntin.rehearsal.played import Series
from muntin.rehearsal.series import Setup, play
from muntin.rehearsal.truth import Recipe

if TYPE_CHECKING:
    from distributed import Client

_PATIENCE = "10s"


def every_core() -> int:
    """The cores that this process may use."""
    from joblib import cpu_count

    return int(cpu_count())


def on_this_machine(setup: Setup, recipes: Sequence[Recipe], workers: int) -> Iterator[Series]:
    """Play series on so many processes, in this one where that is one; in the order of completion.

    Each process is started anew (spawn), with one thread of linear algebra.
    """
    if workers == 1 or len(recipes) < 2:
        for recipe in recipes:
            yield play(setup, recipe)
        return
    from joblib import Parallel, delayed, parallel_config

    with parallel_config(backend="loky", inner_max_num_threads=1):
        pool = Parallel(
            n_jobs=min(workers, len(recipes)), return_as="generator_unordered", batch_size=1
        )
        yield from pool(delayed(play)(setup, recipe) for recipe in recipes)


def on_cluster(setup: Setup, recipes: Sequence[Recipe], address: str) -> Iterator[Series]:
    """Play series on the Dask cluster whose scheduler has this address; in order of completion.

    Raises StudyFaults where the extra is not installed or no scheduler answers.
    """
    with _client(address) as client:
        from distributed import as_completed

        shared = client.scatter(setup, broadcast=True)
        futures = [client.submit(play, shared, recipe, pure=False) for recipe in recipes]
        try:
            for future in as_completed(futures, loop=client.loop):
                yield future.result()
        finally:
            client.cancel(futures)


@contextmanager
def _client(address: str) -> Iterator[Client]:
    try:
        from distributed import Client
    except ImportError:
        problem = "needs Dask, which is not installed"
        hint = "pip install 'muntin[cluster]'"
        raise StudyFaults([Fault(file="cluster", problem=problem, hint=hint)]) from None
    try:
        client = Client(address, timeout=_PATIENCE, set_as_default=False)
    except (OSError, ValueError) as error:
        problem, hint = "no Dask scheduler answers there", str(error).partition("\n")[0]
        fault = Fault(file="cluster", value=address, problem=problem, hint=hint)
        raise StudyFaults([fault]) from None
    try:
        yield client
    finally:
        client.close()
