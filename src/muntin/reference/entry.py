"""One entry of the reference: what a name means, and where it stands."""

from __future__ import annotations

import json
import re
from collections.abc import Iterable
from dataclasses import asdict, dataclass, field
from typing import Literal

Kind = Literal["command", "argument", "option", "section", "key", "table", "column", "field"]
KINDS: tuple[Kind, ...] = (
    "command",
    "argument",
    "option",
    "section",
    "key",
    "table",
    "column",
    "field",
)
_PLACE = re.compile(r"<[a-z ]+>")


@dataclass(frozen=True, kw_only=True, slots=True)
class Entry:
    """One thing that has a name.

    of: what it belongs to, "" for what stands by itself: a command of an option, a section of a
    key, a table of a column, the JSON documents of a field. more: type, unit, default and so on, as
    shown, by label.
    """

    kind: Kind
    name: str
    says: str
    of: str = ""
    more: dict[str, str] = field(default_factory=dict)

    def names(self) -> set[str]:
        """All names under which it is found, in small letters."""
        name = self.name.casefold()
        bare = name.strip("[]") if self.kind == "section" else name.replace("[]", "")
        found = {name, bare, bare.lstrip("-")}
        if self.kind == "key":
            found.add(f"{self.of.strip('[]').casefold()}.{name}")
        if self.kind == "table":
            folder, _, file = name.rpartition("/")
            found |= {file} | ({folder} if folder and "/" not in folder else set())
        if self.kind == "field":
            steps = bare.split(".")
            found |= {".".join(steps[start:]) for start in range(len(steps))}
        return found

    def fits(self, name: str) -> bool:
        """Whether a name is one of a pattern such as <response>_sd; a bare <response> fits none."""
        return any(
            bool(_PLACE.sub("", own).strip("._")) and re.fullmatch(_pattern(own), name) is not None
            for own in self.names()
            if _PLACE.search(own)
        )


def _pattern(name: str) -> str:
    fixed = _PLACE.split(name)
    return "[a-z0-9_-]+".join(map(re.escape, fixed))


def entries_text(entries: Iterable[Entry]) -> str:
    """Return entries as JSON, a line an entry."""
    return "".join(json.dumps(asdict(entry), ensure_ascii=False) + "\n" for entry in entries)


def read_entries(text: str) -> tuple[Entry, ...]:
    """Return the entries of such a text."""
    return tuple(Entry(**json.loads(line)) for line in text.splitlines())
