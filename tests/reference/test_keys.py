"""Keys, commands and options are told as they are declared."""

from __future__ import annotations

from typing import Annotated

import pytest
import typer

from muntin.commands.shared import Output, command
from muntin.record.keys import AmountKey, Keys, Number, Text, Whole, key
from muntin.record.template import study_text
from muntin.reference import keys
from muntin.reference.commands import command_entries
from muntin.reference.keys import key_entries, rules_words, type_words


class Jar(Keys):
    """An invented table."""

    depth: Number | None = key(None, says="how deep", unit="cm", gt=0, le=30, example=4.0)
    label: Text = key("plain", says="what stands on it")
    count: Whole = key(says="how many")
    widths: tuple[Number, Number] = key((1.0, 2.0), says="at foot and rim")
    names: tuple[Text, ...] = key((), says="on the lid")
    slack: AmountKey | None = key(None, says="how far it may be off")
    parts: dict[str, Number] = key({}, says="of what")


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("depth", "number"),
        ("label", "text"),
        ("count", "whole number"),
        ("widths", "list of 2 numbers"),
        ("names", "list of texts"),
        ("slack", 'number, or a share such as "5 %"'),
        ("parts", "table of names, a number each"),
    ],
)
def test_types_in_words(name: str, words: str) -> None:
    assert type_words(Jar.model_fields[name].annotation) == words


def test_a_key_is_told_whole() -> None:
    told = {entry.name: entry.more for entry in keys._keys(Jar, "[jar]")}
    assert told["depth"] == {
        "type": "number",
        "range": "above 0 and at most 30",
        "unit": "cm",
        "example": "4.0",
    }
    assert told["label"] == {"type": "text", "default": '"plain"'}
    assert told["count"] == {"type": "whole number", "required": "yes"}
    assert rules_words(Jar.model_fields["count"]) == ""


def test_a_key_without_help_is_refused() -> None:
    class Bare(Keys):
        depth: Number = 1.0

    with pytest.raises(ValueError, match=r"^\[bare\] depth has no help$"):
        [*keys._keys(Bare, "[bare]")]


def test_sections_and_keys_are_those_of_a_new_study() -> None:
    others = ("plates/", "plans/", "columns/")
    told = [e for e in key_entries() if not f"{e.of} {e.name}".strip().startswith(others)]
    headings = {entry.name for entry in told if entry.kind == "section"}
    section, found = "", set()
    for line in study_text().splitlines():
        bare = line.lstrip("#").strip()
        if bare.startswith("["):
            section = bare
            assert section in headings
        elif "=" in bare and not line.startswith("# "):
            found.add((section, bare.split(" =")[0]))
    known = {(entry.of, entry.name) for entry in told if entry.kind == "key"}
    assert found - known == set()
    # Priors are written as one line in the study.
    assert {pair for pair in known - found if not pair[0].startswith("[responses")} == set()


def test_a_command_is_told_as_it_is_declared() -> None:
    @command
    def bake(
        jar: Annotated[str, typer.Argument(metavar="JAR", help="which jar")],
        lid: Annotated[str | None, typer.Argument(metavar="[LID]", help="which lid")] = None,
        hours: Annotated[int, typer.Option("--for", min=1, metavar="H", help="how long")] = 2,
        open_lid: Annotated[bool, typer.Option(help="without its lid")] = False,
    ) -> Output:
        """Bake a jar."""
        raise AssertionError(jar, lid, hours, open_lid)

    own, *parameters = command_entries({bake: "is it warm?"})
    assert own.says == "Bake a jar."
    assert own.more == {"usage": "muntin bake JAR [LID] [options]", "asks": "is it warm?"}
    told = {entry.name: (entry.kind, entry.more) for entry in parameters}
    assert told["JAR"] == ("argument", {})
    assert told["LID"] == ("argument", {})
    assert told["--for"] == ("option", {"takes": "H", "range": "1 or more", "default": "2"})
    assert told["--open-lid"] == ("option", {})
    assert {"--json", "--seed", "--quiet"} < set(told)


def test_an_option_without_help_is_refused() -> None:
    @command
    def bake(hours: Annotated[int, typer.Option()] = 2) -> Output:
        """Bake a jar."""
        raise AssertionError(hours)

    with pytest.raises(ValueError, match=r"^--hours of bake has no help$"):
        [*command_entries({bake: "is it warm?"})]
