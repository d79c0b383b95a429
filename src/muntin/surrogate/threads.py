"""How many threads linear algebra may take."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager

# Below so many latent values a matrix is done before a second thread has woken up.
_SMALL = 100


@contextmanager
def threads_for(latents: int) -> Iterator[None]:
    """One thread while a model of few latent values is fitted, else as many as there are."""
    if latents > _SMALL:
        yield
        return
    # A library that is loaded later would not be held to it, and the first fit would round
    # otherwise than those after it.
    import scipy.linalg  # noqa: F401
    from threadpoolctl import threadpool_limits

    with threadpool_limits(limits=1, user_api="blas"):
        yield
