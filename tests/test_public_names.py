"""The public names of the package, imported when they are first used."""

from __future__ import annotations

from importlib import import_module

import pytest

import muntin


@pytest.mark.parametrize("name", muntin.__all__)
def test_every_public_name_is_that_of_its_home(name: str) -> None:
    homes = [home for home, names in muntin._HOMES.items() if name in names]
    assert len(homes) == 1
    assert getattr(muntin, name) is getattr(import_module(homes[0]), name)
    assert name in dir(muntin)


def test_other_names_are_no_attributes() -> None:
    with pytest.raises(AttributeError, match="no attribute 'asess'"):
        muntin.asess  # noqa: B018
