"""The page as HTML: one file that needs no other."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import datetime
from importlib.resources import files

from markupsafe import Markup

from muntin.report.page.answer import answer, standing_word
from muntin.report.page.basis import Basis
from muntin.report.page.blocks import Section, Table
from muntin.report.page.pointing import pointed_at

_DOUBTS = ("Not supported by the data", "Provisional")
_HASH, _LONG, _BRIEF = "SHA-256", 32, 16


def page_html(basis: Basis, sections: Sequence[Section]) -> str:
    """Return the page; everything that comes from the study is escaped."""
    from jinja2 import Environment, PackageLoader, StrictUndefined

    environment = Environment(
        loader=PackageLoader("muntin.report", "page"),
        autoescape=True,
        undefined=StrictUndefined,
        keep_trailing_newline=True,
        finalize=_unbroken,
    )
    maps = basis.figures("map")
    standing = standing_word(basis)
    return environment.get_template("page.html").render(
        title=basis.definition.title,
        version=basis.facts["versions"]["muntin"],
        written_at=_day_and_time(basis.facts["written_at"]),
        style=_own("page.css"),
        script=_own("pointing.js"),
        standing=standing,
        doubt=standing in _DOUBTS,
        answer=answer(basis),
        sections=sections,
        pointing=pointed_at(basis.definition, basis.standing, maps[0]) if maps else {},
        cell_class=_cell_class,
    )


def _day_and_time(written_at: str) -> str:
    return f"{datetime.fromisoformat(written_at):%Y-%m-%d, %H:%M} UTC"


def _unbroken(value: object) -> object:
    """Text in which no line ends between a number and its per cent; markup as it is."""
    return value.replace(" %", "\u00a0%") if type(value) is str else value


def _own(name: str) -> Markup:
    """A file of this package, which needs no escaping: nothing of a study is in it."""
    text = files("muntin.report.page").joinpath(name).read_text(encoding="utf-8")
    return Markup(text.rstrip())


def _cell_class(table: Table, column: int, cell: str) -> str:
    heading = table.head[column]
    if heading == "verdict":
        return cell
    if heading == _HASH:
        return "hash"
    if column in table.numbers:
        return "figure"
    return "long" if len(cell) > _LONG else "brief" if len(cell) <= _BRIEF else "text"
