"""Fields of JSON documents that belong together."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass


@dataclass(frozen=True)
class Part:
    """Fields and the documents they stand in: commands with --json, or files.

    A field is named by its path: window.share lies in window, checks[].name in each entry of
    checks; <response> and so on stand for names. Lists in lists are one.
    """

    documents: tuple[str, ...]
    fields: Mapping[str, str]


def under(path: str, fields: Mapping[str, str]) -> dict[str, str]:
    """The same fields further down, at a path."""
    return {f"{path}.{name}": says for name, says in fields.items()}
