"""Files of a study: read as text whatever its encoding, written whole or not at all."""

from __future__ import annotations

import os
import secrets
from collections.abc import Iterator, Mapping
from contextlib import contextmanager, suppress
from pathlib import Path

from muntin.record.faults import Fault, StudyFaults

_MARKS = (
    (b"\xef\xbb\xbf", "utf-8-sig"),
    (b"\xff\xfe", "utf-16"),
    (b"\xfe\xff", "utf-16"),
)


class NotTextError(ValueError):
    """The file holds bytes that are not text."""


def decoded(raw: bytes) -> str:
    """Decode a text file: byte-order mark, else UTF-8, else Windows-1252.

    Raises NotTextError where the bytes are no text at all.
    """
    encoding = next((name for mark, name in _MARKS if raw.startswith(mark)), None)
    for name in (encoding,) if encoding else ("utf-8", "cp1252"):
        with suppress(UnicodeDecodeError):
            text = raw.decode(name)
            if any(ord(sign) < 32 and sign not in "\t\n\r\f" for sign in text):
                break
            return text
    raise NotTextError


def write_atomic(path: Path, content: str | bytes) -> None:
    """Write a whole file at once: a temporary file beside it is flushed and takes its name.

    Folders on the way are made. Raises StudyFaults where the place cannot be written; the earlier
    file, if there was one, is then untouched.
    """
    data = content.encode("utf-8") if isinstance(content, str) else content
    part = path.with_name(f".{path.name}.{secrets.token_hex(4)}.part")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        try:
            with part.open("xb") as stream:
                stream.write(data)
                stream.flush()
                os.fsync(stream.fileno())
            part.replace(path)
        finally:
            part.unlink(missing_ok=True)
    except OSError as error:
        why = error.strerror or str(error)
        fault = Fault(file=str(path), problem="cannot be written", hint=why)
        raise StudyFaults([fault]) from None


def write_together(files: Mapping[Path, str | bytes] | Mapping[Path, str]) -> None:
    """Write files, all of them or, with StudyFaults, none: what was there is put back."""
    with written_together(files):
        pass


@contextmanager
def written_together(files: Mapping[Path, str | bytes] | Mapping[Path, str]) -> Iterator[None]:
    """Write files before the block; what was there is put back where either ends in StudyFaults."""
    before: dict[Path, bytes | None] = {}
    try:
        for file, content in files.items():
            there = file.read_bytes() if file.is_file() else None
            write_atomic(file, content)
            before[file] = there
        yield
    except StudyFaults:
        for file, there in before.items():
            if there is None:
                file.unlink(missing_ok=True)
            else:
                write_atomic(file, there)
        raise
