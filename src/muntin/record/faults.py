"""Faults of a study: what is wrong, where, and what mends it, one line each."""

from __future__ import annotations

import difflib
from collections import Counter
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

_LIKE_IT = 5


@dataclass(frozen=True, kw_only=True, slots=True)
class Fault:
    """One fault in one file.

    `file` is the path inside the study; `where` the address in it ("row 14, well C4", "factors,
    salt, low"); `column` the column of a table; `value` what stands there, as shown; `problem` the
    verb that joins it to `allowed`; `hint` how to mend it, or where the rule stands.
    """

    file: str
    problem: str
    where: str = ""
    column: str = ""
    value: str = ""
    allowed: str = ""
    hint: str = ""

    @property
    def text(self) -> str:
        """The fault in one line."""
        column = f"column {self.column}" if self.column else ""
        address = ", ".join(part for part in (self.file, self.where, column) if part)
        said = " ".join(part for part in (self.value, self.problem, self.allowed) if part)
        line = f"{address}: {said}" + (f" ({self.hint})" if self.hint else "")
        return "".join(sign if sign.isprintable() else " " for sign in line)


class StudyFaults(Exception):  # noqa: N818 - a list of the user's faults, not one error
    """Everything that is wrong with what the user gave, in one report.

    Parameters
    ----------
    faults : all faults found, in the order of the files; at least one
    """

    def __init__(self, faults: Iterable[Fault]) -> None:
        self.faults: tuple[Fault, ...] = tuple(faults)
        super().__init__(self.faults)

    def __str__(self) -> str:
        return "\n".join(self.lines())

    def lines(self) -> list[str]:
        """One line a fault; after five of a kind in one column, one line counts the others."""
        seen: Counter[tuple[str, str, str]] = Counter()
        lines = []
        for fault in self.faults:
            kind = (fault.file, fault.column, fault.problem)
            seen[kind] += 1
            if not fault.column or seen[kind] <= _LIKE_IT:
                lines.append(fault.text)
        for (file, column, problem), count in seen.items():
            if column and count > _LIKE_IT:
                lines.append(
                    f"{file}, column {column}: {count - _LIKE_IT} more cells like these ({problem})"
                )
        return lines


@dataclass(frozen=True, slots=True)
class Findings:
    """What reading a study brings up: faults that stop it, notices that do not."""

    faults: list[Fault] = field(default_factory=list)
    notices: list[str] = field(default_factory=list)


def nearest(name: str, known: Iterable[str], cutoff: float = 0.6) -> str | None:
    """Return the known name closest to `name`, or None where none is close (ratio >= cutoff)."""
    by_fold = {candidate.casefold(): candidate for candidate in known}
    close = difflib.get_close_matches(name.casefold(), by_fold, n=1, cutoff=cutoff)
    return by_fold[close[0]] if close else None


def did_you_mean(name: str, known: Sequence[str]) -> str:
    """Return the hint for an unknown name: the nearest known one, else all of them."""
    close = nearest(name, known)
    if close is not None:
        return f"did you mean {quoted(close)}?"
    return "known: " + ", ".join(known)


def quoted(value: object) -> str:
    """Show a value as it stands: text in quotes and cut at 60 signs, numbers plain."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, int | float):
        return number(float(value))
    text = str(value)
    return f'"{text[:57]}..."' if len(text) > 60 else f'"{text}"'


def number(value: float) -> str:
    """Show a number without needless digits."""
    return f"{value:.10g}"


def counted(count: int, what: str) -> str:
    """Return "1 well" or "2 wells"."""
    return f"{count} {what}" + ("" if count == 1 else "s")


def listed(names: Iterable[str], most: int = 8) -> str:
    """Join names with commas; beyond `most`, count the others."""
    shown = list(names)
    rest = f" and {len(shown) - most} more" if len(shown) > most else ""
    return ", ".join(shown[:most]) + rest
