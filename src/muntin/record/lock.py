"""One writer at a time: a lock on a study that other processes keep to."""

from __future__ import annotations

import errno
import os
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

from muntin.record.faults import Fault, StudyFaults

LOCK = ".ledger.lock"
HELD = ".ledger.lock.held"
_PAUSE = 0.05
# What a file system says that knows no locks.
_NO_LOCKS = {errno.ENOLCK, errno.ENOSYS, errno.EOPNOTSUPP, errno.ENOTSUP}

if sys.platform == "win32":
    import msvcrt

    def _taken(descriptor: int) -> bool:
        try:
            msvcrt.locking(descriptor, msvcrt.LK_NBLCK, 1)
        except PermissionError:
            return False
        return True
else:
    import fcntl

    def _taken(descriptor: int) -> bool:
        try:
            fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            return False
        return True


@contextmanager
def locked(folder: Path, seconds: float = 60.0) -> Iterator[None]:
    """Hold the lock of a study while the block runs; a killed process gives it up by itself.

    Where the file system knows no locks, a file that is there stands for one. Raises StudyFaults
    where another process has held it for so many seconds, or the folder cannot be written.
    """
    until = time.monotonic() + seconds
    try:
        release = _wait_for(folder, until)
    except OSError as error:
        why = error.strerror or str(error)
        raise StudyFaults(
            [Fault(file=str(folder), problem="cannot be written", hint=why)]
        ) from None
    try:
        yield
    finally:
        release()


class _Release:
    """Gives a lock up: closes what was opened and takes the file away."""

    def __init__(self, path: Path, descriptor: int) -> None:
        self._path, self._descriptor = path, descriptor

    def __call__(self) -> None:
        # Where an open file may be taken away, it goes while it is held, so that whoever waits
        # for it sees that it is another one now.
        with suppress(OSError):
            self._path.unlink()
        os.close(self._descriptor)
        if sys.platform == "win32":
            with suppress(OSError):
                self._path.unlink()


def _wait_for(folder: Path, until: float) -> _Release:
    while True:
        try:
            release = _by_lock(folder / LOCK)
        except OSError as error:
            if error.errno not in _NO_LOCKS:
                raise
            release = _by_file(folder / HELD)
        if release is not None:
            return release
        if time.monotonic() > until:
            raise _busy(folder)
        time.sleep(_PAUSE)


def _by_lock(path: Path) -> _Release | None:
    """Take the lock of the operating system, or return None where another has it."""
    descriptor = os.open(path, os.O_RDWR | os.O_CREAT, 0o666)
    try:
        if _taken(descriptor) and _is_still(path, descriptor):
            return _Release(path, descriptor)
    except OSError:
        os.close(descriptor)
        with suppress(OSError):
            path.unlink()
        raise
    os.close(descriptor)
    return None


def _is_still(path: Path, descriptor: int) -> bool:
    """Whether the file that was locked is still the one of that name."""
    if sys.platform == "win32":
        return True
    try:
        return os.path.samestat(path.stat(), os.fstat(descriptor))
    except FileNotFoundError:
        return False


def _by_file(path: Path) -> _Release | None:
    """Make the file that stands for a lock, or return None where it is there."""
    try:
        return _Release(path, os.open(path, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o666))
    except FileExistsError:
        return None


def _busy(folder: Path) -> StudyFaults:
    held = folder / HELD
    hint = "wait until it is done"
    if held.exists():
        hint = f"or one was killed: if no muntin is at work, remove {held}"
    return StudyFaults([Fault(file=str(folder), problem="is being written by another", hint=hint)])
