"""The notebooks run from top to bottom."""

import warnings
from pathlib import Path

import pytest

NOTEBOOKS = sorted((Path(__file__).parents[1] / "notebooks").glob("*.ipynb"))


@pytest.mark.parametrize("path", NOTEBOOKS, ids=lambda path: path.name)
@pytest.mark.filterwarnings("default")
def test_every_cell_runs(path):
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # what the kernel machinery says of itself
        import nbformat
        from nbclient import NotebookClient

        notebook = nbformat.read(path, as_version=4)
        client = NotebookClient(
            notebook, timeout=300, resources={"metadata": {"path": str(path.parent)}}
        )
        client.execute()
    code = [cell for cell in notebook.cells if cell.cell_type == "code"]
    assert code
    assert all(cell.execution_count is not None for cell in code)


def test_there_is_a_notebook():
    assert NOTEBOOKS
