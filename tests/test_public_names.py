"""The public names of the package, imported when they are first used."""

from __future__ import annotations

from importlib import import_module

import pytest

import muntin


@pytest.mark.parametrize("name", [n for n in muntin.__all__ if n not in muntin._MODULES])
def test_every_public_name_is_that_of_its_home(name: str) -> None:
    homes = [home for home, names in muntin._HOMES.items() if name in names]
    assert len(homes) == 1
    assert getattr(muntin, name) is getattr(import_module(homes[0]), name)
    assert name in dir(muntin)


def test_modules_are_imported_when_first_used(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(muntin, "_MODULES", ("lab",))
    monkeypatch.delattr(muntin, "lab", raising=False)
    assert muntin.lab is import_module("muntin.lab")


def test_other_names_are_no_attributes() -> None:
    with pytest.raises(AttributeError, match="no attribute 'asess'"):
        muntin.asess  # noqa: B018
