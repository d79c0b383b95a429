"""The notebooks run from top to bottom, and say what is kept in them."""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any

import pytest

from tests.notebook_runs import NOTEBOOKS, codes, run, texts

NAMES = ["first-plates", "own-tables", "surrogates", "trust"]
SLOW = {"surrogates"}  # the sampler is compiled first
LARGEST = 300 * 1024
BY_NAME = {path.stem: path for path in NOTEBOOKS}
_NUMBER = re.compile(r"(?<![A-Za-z0-9-])-?\d+(?:[.,]\d+)?")
_ABSOLUTE = re.compile(r"(?:^|[\s\"'(=:])/(?!/)[\w.-]+/[\w.-]+|[A-Z]:\\", re.MULTILINE)


def kept(name: str) -> Any:
    import nbformat

    return nbformat.read(BY_NAME[name], as_version=4)


def every_text(notebook: Any) -> str:
    """All that the outputs hold in letters, HTML too."""
    found = []
    for cell in codes(notebook):
        for output in cell.outputs:
            found.append(output.get("text", ""))
            found += [t for kind, t in output.get("data", {}).items() if kind.startswith("text/")]
    return "\n".join(found)


def same(told: str, now: str) -> bool:
    """Whether two texts differ in no word, and in no number by more than its last digits."""
    words = [_NUMBER.sub("#", text).split() for text in (told, now)]
    if [re.sub("-+", "-", word) for word in words[0]] != [re.sub("-+", "-", w) for w in words[1]]:
        return False
    before, after = ([_value(n) for n in _NUMBER.findall(text)] for text in (told, now))
    return before == pytest.approx(after, rel=0.02, abs=0.011)


def _value(number: str) -> float:
    return float(number.replace(",", "."))


def test_there_are_four_notebooks() -> None:
    assert sorted(BY_NAME) == NAMES


@pytest.mark.parametrize(
    "name", [pytest.param(n, marks=[pytest.mark.slow] if n in SLOW else []) for n in NAMES]
)
@pytest.mark.filterwarnings("default")
def test_every_cell_runs_and_says_what_is_kept(name: str, tmp_path: Path) -> None:
    before, after = codes(kept(name)), codes(run(BY_NAME[name], tmp_path))
    assert len(before) == len(after) > 4
    assert [cell.execution_count for cell in after] == [*range(1, len(after) + 1)]
    for told, now in zip(before, after, strict=True):
        assert told.source == now.source
        says, said = list(texts(now)), list(texts(told))
        assert len(says) == len(said), f"run python -m tests.notebook_runs {name}:\n{told.source}"
        for old, new in zip(said, says, strict=True):
            assert same(old, new), f"{told.source}\n\nkept:\n{old}\n\nnow:\n{new}"
        kinds = [[sorted(o.get("data", {})) for o in cell.outputs] for cell in (told, now)]
        assert kinds[0] == kinds[1]


@pytest.mark.parametrize("name", NAMES)
def test_outputs_are_kept_and_clean(name: str) -> None:
    notebook = kept(name)
    cells = codes(notebook)
    assert [cell.execution_count for cell in cells] == [*range(1, len(cells) + 1)]
    kinds = {output.output_type for cell in cells for output in cell.outputs}
    assert kinds <= {"stream", "display_data", "execute_result"}
    text = every_text(notebook)
    assert len(text) > 500
    assert not _ABSOLUTE.findall(text)
    assert not re.findall("Traceback|Warning|Error:", text)
    assert BY_NAME[name].stat().st_size < LARGEST


@pytest.mark.parametrize("name", NAMES)
def test_invented_data_are_called_so(name: str) -> None:
    first = next(cell.source for cell in kept(name).cells if cell.cell_type == "markdown")
    assert first.startswith("# ")
    assert re.search(r"\*\*[^*]*\binvented\b[^*]*\*\*", first)


def test_texts_of_other_words_or_numbers_are_not_the_same() -> None:
    assert same("share 0.302  wells 12", "share  0.304 wells 12")
    assert not same("share 0.302 wells 12", "share 0.352 wells 12")
    assert not same("share 0.302 wells 12", "share 0.302 wells 13")
    assert not same("set point pH 6.9", "best so far pH 6.9")
    assert not same("plate-01 read", "plate-02 read")
