"""Processes that die, and disks that fill up, at a chosen step of writing."""

from __future__ import annotations

import errno
import io
import os
import warnings
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from unittest.mock import patch

STEPS = ("os.mkdir", "os.fsync", "os.replace", "os.unlink", "os.rmdir", "io.open")
# What needs room on the disk.
TAKES_ROOM = ("os.mkdir", "os.fsync", "io.open")


@contextmanager
def counting(names: tuple[str, ...], then: Callable[[int], None]) -> Iterator[None]:
    """Call `then` with the running number before every call of these functions; reading a file is
    no such call.
    """
    count = 0

    def watched(work: Callable[..., object]) -> Callable[..., object]:
        def step(*args: object, **named: object) -> object:
            nonlocal count
            mode = args[1] if len(args) > 1 else named.get("mode", "r")
            if work is not io_open or "r" not in str(mode):
                count += 1
                then(count)
            # What a process has written outlives it; only the power's going needs a flush.
            return None if work is fsync else work(*args, **named)

        return step

    io_open, fsync = io.open, os.fsync
    modules = {"os": os, "io": io}
    patches = []
    for name in names:
        module, of = name.split(".")
        patches.append(patch.object(modules[module], of, watched(getattr(modules[module], of))))
    for one in patches:
        one.start()
    try:
        yield
    finally:
        for one in patches:
            one.stop()


def dies_at(step: int, work: Callable[[], object]) -> bool:
    """Run `work` in a process of its own that dies at the given step; whether it came so far."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)
        child = os.fork()
    if child == 0:

        def die(count: int) -> None:
            if count == step:
                os._exit(7)

        try:
            with counting(STEPS, die):
                work()
            os._exit(0)
        except BaseException:
            os._exit(9)
    code = os.waitstatus_to_exitcode(os.waitpid(child, 0)[1])
    assert code in (0, 7)
    return code == 7


@contextmanager
def full_from(step: int) -> Iterator[list[int]]:
    """A disk with no room left from this step on; gives a list that holds the steps refused."""
    refused: list[int] = []

    def refuse(count: int) -> None:
        if count >= step:
            refused.append(count)
            raise OSError(errno.ENOSPC, "No space left on device")

    with counting(TAKES_ROOM, refuse):
        yield refused
