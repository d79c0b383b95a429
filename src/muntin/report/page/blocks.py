"""What a page is made of: sections of sentences, figures and tables, all as plain text."""

from __future__ import annotations

from dataclasses import dataclass

from muntin.report.drawn import Drawn


@dataclass(frozen=True, kw_only=True)
class Table:
    """A table: what it shows, its column headings, and its rows of text.

    The first cell of a row names it. `numbers` are the columns, counted from 0, that are set as
    figures, to the right.
    """

    caption: str
    head: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    numbers: tuple[int, ...] = ()

    @property
    def full(self) -> Table:
        """The table without the columns that are empty in every row."""
        kept = [i for i in range(len(self.head)) if not i or any(row[i] for row in self.rows)]
        return Table(
            caption=self.caption,
            head=tuple(self.head[i] for i in kept),
            rows=tuple(tuple(row[i] for i in kept) for row in self.rows),
            numbers=tuple(new for new, old in enumerate(kept) if old in self.numbers),
        )


@dataclass(frozen=True, kw_only=True)
class Section:
    """One part of the page, in the order in which it is read: its name in the address, heading,
    sentences, figures, tables, a list, and notes in smaller letters.
    """

    name: str
    title: str
    says: tuple[str, ...] = ()
    figures: tuple[Drawn, ...] = ()
    tables: tuple[Table, ...] = ()
    items: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()

    @property
    def empty(self) -> bool:
        """Whether there is nothing in it."""
        return not (self.says or self.figures or self.tables or self.items or self.notes)
