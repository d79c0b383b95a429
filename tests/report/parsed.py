"""A page as a browser would read it: its elements in order, with attributes and text."""

from __future__ import annotations

from dataclasses import dataclass, field
from html.parser import HTMLParser

_VOID = {"meta", "link", "br", "hr", "img", "input"}


@dataclass
class Element:
    """One element: its tag, its attributes, the text in it and the elements in it."""

    tag: str
    attributes: dict[str, str]
    parts: list[str] = field(default_factory=list)
    children: list[Element] = field(default_factory=list)

    @property
    def text(self) -> str:
        """The text in it, blanks made one."""
        return " ".join("".join(self.parts).split())

    def every(self, *tags: str) -> list[Element]:
        """The elements below it with these tags, all without any, in the order of the page."""
        found = []
        for child in self.children:
            found += [child] if not tags or child.tag in tags else []
            found += child.every(*tags)
        return found

    def one(self, tag: str, **attributes: str) -> Element:
        """The one element below it with this tag and these attributes."""
        (found,) = [
            e
            for e in self.every(tag)
            if all(e.attributes.get(k.rstrip("_")) == v for k, v in attributes.items())
        ]
        return found


class _Reader(HTMLParser):
    def __init__(self) -> None:
        super().__init__(convert_charrefs=True)
        self.root = Element("", {})
        self.open = [self.root]

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        element = Element(tag, {name: value or "" for name, value in attrs})
        self.open[-1].children.append(element)
        if tag not in _VOID:
            self.open.append(element)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        element = Element(tag, {name: value or "" for name, value in attrs})
        self.open[-1].children.append(element)

    def handle_endtag(self, tag: str) -> None:
        assert self.open[-1].tag == tag, f"</{tag}> closes <{self.open[-1].tag}>"
        self.open.pop()

    def handle_data(self, data: str) -> None:
        for element in self.open:
            element.parts.append(data)


def parsed(html: str) -> Element:
    """The page; every element must be closed in its turn."""
    reader = _Reader()
    reader.feed(html)
    reader.close()
    assert reader.open == [reader.root], "an element is not closed"
    return reader.root


def table_of(page: Element, caption: str) -> list[dict[str, str]]:
    """The rows of the table whose caption begins so, a mapping of heading to cell each."""
    (table,) = [t for t in page.every("table") if t.one("caption").text.startswith(caption)]
    head = [cell.text for cell in table.one("thead").every("th")]
    rows = [[c.text for c in row.every("th", "td")] for row in table.one("tbody").every("tr")]
    return [dict(zip(head, row, strict=True)) for row in rows]
