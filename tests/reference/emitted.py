"""What JSON documents and tables hold, held against what is declared of them."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from typing import Any

# What <factor> and so on stand for in the studies of these tests; other places take any name.
NAMES = {
    "<factor>": ("ph", "salt"),
    "<response>": ("recovery", "hcp"),
    "<surrogate>": ("gp", "quadratic"),
    "<column>": ("operator",),
    "<fraction>": ("ft", "e1", "strip"),
}
# Keys of study.toml and of records stand below these, and are told of where they are declared.
WHOLE = (
    "settings.assay.<assay>",
    "plans.edits[].<key>",
    "plans[].<key>",
    "settings.<option>",
    "asked.<key>",
)
_PLACE = re.compile(r"<[a-z ]+>")


class Document:
    """The declared fields of a document; `seen` gathers those met, `unknown` what is none."""

    def __init__(self, fields: Iterable[str]) -> None:
        self.fields = {tuple(name.split(".")) for name in fields}
        self.seen: set[str] = set()
        self.unknown: set[str] = set()

    def read(self, value: Any, at: tuple[str, ...] = ()) -> None:
        """Go through a value that stands at a declared path."""
        if isinstance(value, list):
            for item in value:
                if isinstance(item, Mapping | list):
                    self.read(item, (*at[:-1], at[-1].removesuffix("[]") + "[]"))
        elif isinstance(value, Mapping):
            for name, item in value.items():
                self._step(str(name), item, at)

    def _step(self, name: str, item: Any, at: tuple[str, ...]) -> None:
        steps = {path[len(at)] for path in self.fields if path[: len(at)] == at and path[len(at) :]}
        bare = {step.removesuffix("[]"): step for step in steps}
        fitting = name if name in bare else next((s for s in bare if fits(s, name)), None)
        if fitting is None:
            self.unknown.add(".".join((*at, name)))
            return
        self.seen.add(".".join((*at, fitting)))
        if ".".join((*at, fitting)) not in WHOLE:
            self.read(item, (*at, fitting))

    def missing(self) -> set[str]:
        """Declared fields that were not met."""
        return {".".join(path) for path in self.fields} - self.seen


def fits(pattern: str, name: str) -> bool:
    """Whether a name is one of a pattern, places taken as in NAMES."""
    if not _PLACE.search(pattern):
        return pattern == name
    fixed = _PLACE.split(pattern)
    places = [
        f"(?:{'|'.join(NAMES[place])})" if place in NAMES else ".+"
        for place in _PLACE.findall(pattern)
    ]
    whole = re.escape(fixed[0])
    for place, text in zip(places, fixed[1:], strict=True):
        whole += place + re.escape(text)
    return re.fullmatch(whole, name) is not None
