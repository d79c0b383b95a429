"""Every JSON field and column that is emitted is explained, and every one explained is emitted."""

from __future__ import annotations

import pytest

from muntin.reference.documents import PARTS, fields_of
from muntin.reference.tables import SHEETS
from tests.reference.emitted import Document, fits
from tests.reference.sessions import Session, session

DOCUMENTS = sorted({name for part in PARTS for name in part.documents})
WRITTEN = {
    sheet.file: sheet
    for sheet in SHEETS
    if sheet.file.startswith(("sheets", "plans", "columns/<plan>", "reductions", "OUT", "READS"))
}


@pytest.fixture(scope="module")
def done(tmp_path_factory: pytest.TempPathFactory) -> Session:
    return session(tmp_path_factory.mktemp("session"))


def read(done: Session, name: str) -> Document:
    document = Document(fields_of(name))
    for facts in done.documents[name]:
        document.read(facts)
    return document


@pytest.mark.parametrize("name", DOCUMENTS)
def test_every_field_emitted_is_explained(done: Session, name: str) -> None:
    assert read(done, name).unknown == set()


def test_every_field_explained_is_emitted(done: Session) -> None:
    seen = {name: read(done, name).seen for name in DOCUMENTS}
    for part in PARTS:
        met = set().union(*(seen[name] for name in part.documents))
        assert set(part.fields) - met == set(), part.documents


def test_every_document_is_told_of(done: Session) -> None:
    assert set(done.documents) == set(DOCUMENTS)


@pytest.mark.parametrize("name", WRITTEN)
def test_columns(done: Session, name: str) -> None:
    columns, headings = WRITTEN[name].columns, {h for table in done.tables[name] for h in table}
    known = {own for own in headings if own in columns}
    known |= {own for own in headings for column in columns if fits(column, own)}
    assert headings - known == set()
    assert {c for c in columns if not any(c == h or fits(c, h) for h in headings)} == set()


def test_a_field_that_is_not_declared_is_found() -> None:
    document = Document(["plan", "plan.wells[].well", "plan.wells[].<factor>"])
    document.read({"plan": {"wells": [{"well": "A1", "ph": 5, "colour": "blue"}]}, "more": 1})
    assert document.unknown == {"plan.wells[].colour", "more"}
    assert document.missing() == set()
    document = Document(["plan", "plan.seed"])
    document.read({"plan": None})
    assert document.missing() == {"plan.seed"}
