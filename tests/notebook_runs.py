"""Runs the notebooks, and writes their outputs anew.

python -m tests.notebook_runs                   # all of them
python -m tests.notebook_runs own-tables        # one

Each runs from top to bottom in a process of its own, from a copy of notebooks/ and examples/.
Pictures are kept with 64 colours, which is enough for figures and keeps the files small.
"""

from __future__ import annotations

import base64
import io
import os
import re
import shutil
import sys
import tempfile
import warnings
from collections.abc import Iterator
from pathlib import Path
from typing import Any

ROOT = Path(__file__).parents[1]
NOTEBOOKS = sorted((ROOT / "notebooks").glob("*.ipynb"))
_COLOURS = 64
_PICTURE = "image/png"
# Bold letters of a screen; what matplotlib says where it runs for the first time.
_BESIDE = re.compile(r"\x1b\[[0-9;]*m|^Matplotlib is building the font cache.*\n?", re.MULTILINE)


def run(path: Path, folder: Path, timeout: int = 600) -> Any:
    """Execute a notebook in `folder`, an empty one, and return it with its new outputs.

    Raises nbclient's CellExecutionError where a cell fails.
    """
    for name in ("notebooks", "examples"):
        shutil.copytree(ROOT / name, folder / name)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # what the kernel machinery says of itself
        import nbformat
        from nbclient import NotebookClient

        notebook = nbformat.read(path, as_version=4)
        for cell in notebook.cells:
            if cell.cell_type == "code":
                cell.outputs, cell.execution_count = [], None
        where = {"metadata": {"path": str(folder / "notebooks")}}
        client = NotebookClient(
            notebook, timeout=timeout, resources=where, record_timing=False, coalesce_streams=True
        )
        client.execute(env=_environment())
    return notebook


def _environment() -> dict[str, str]:
    """That of this process; the commands installed beside its Python are found first."""
    beside = str(Path(sys.executable).parent)
    return {**os.environ, "PATH": os.pathsep.join([beside, os.environ.get("PATH", "")])}


def codes(notebook: Any) -> list[Any]:
    """The code cells of a notebook, in order."""
    return [cell for cell in notebook.cells if cell.cell_type == "code"]


def texts(cell: Any) -> Iterator[str]:
    """What a code cell prints and shows in plain text, with nothing beside it."""
    for stream in ("stdout", "stderr"):
        yield _BESIDE.sub("", "".join(o.text for o in cell.outputs if o.get("name") == stream))
    for output in cell.outputs:
        data = output.get("data", {})
        if _PICTURE not in data:
            yield data.get("text/plain", "")


def small(png: str) -> str:
    """A picture (base64) with few colours."""
    from PIL import Image

    picture = Image.open(io.BytesIO(base64.b64decode(png))).convert("RGB")
    stream = io.BytesIO()
    few = picture.quantize(_COLOURS, dither=Image.Dither.NONE)
    few.save(stream, format="png", optimize=True)
    return base64.b64encode(stream.getvalue()).decode("ascii")


def write(path: Path) -> None:
    """Run a notebook and keep its outputs in it."""
    import nbformat

    with tempfile.TemporaryDirectory() as folder:
        notebook = run(path, Path(folder))
    notebook.metadata = {
        "kernelspec": {"display_name": "Python 3", "language": "python", "name": "python3"},
        "language_info": {"name": "python"},
    }
    for number, cell in enumerate(notebook.cells):
        cell["id"] = f"cell-{number:02d}"
        cell.metadata = {}
        for output in cell.get("outputs", []):
            data = output.get("data", {})
            if _PICTURE in data:
                data[_PICTURE] = small(data[_PICTURE])
    nbformat.validate(notebook)
    nbformat.write(notebook, path)


def main(names: list[str]) -> None:
    """Write the notebooks named, or all of them."""
    for path in NOTEBOOKS:
        if not names or path.stem in names:
            write(path)
            print(f"{path.name}: {path.stat().st_size / 1024:.0f} KB")


if __name__ == "__main__":
    main(sys.argv[1:])
