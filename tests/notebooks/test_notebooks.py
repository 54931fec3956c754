"""Every demo notebook runs from top to bottom, and what is stored of it was made by running."""

import os
from pathlib import Path

import nbformat
import pytest
from nbclient import NotebookClient

import lfptools

ROOT = Path(lfptools.__file__).parent.parent
FOLDER = Path(__file__).parents[2] / "demo_notebooks"
NOTEBOOKS = sorted(FOLDER.glob("*.ipynb"))


@pytest.fixture(autouse=True)
def importable(monkeypatch, tmp_path):
    """The kernel finds the package installed or not, and keeps its caches to itself."""
    paths = [str(ROOT), str(ROOT / "widgets"), os.environ.get("PYTHONPATH", "")]
    monkeypatch.setenv("PYTHONPATH", os.pathsep.join(filter(None, paths)))
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "cache"))


def test_there_are_notebooks():
    assert NOTEBOOKS


@pytest.mark.parametrize("path", NOTEBOOKS, ids=lambda path: path.stem)
@pytest.mark.filterwarnings("default")
def test_the_notebook_runs(path, tmp_path):
    notebook = nbformat.read(path, as_version=4)
    resources = {"metadata": {"path": str(tmp_path)}}
    NotebookClient(notebook, timeout=300, kernel_name="python3", resources=resources).execute()
    outputs = [output for cell in notebook.cells for output in cell.get("outputs", [])]
    assert any("image/png" in output.get("data", {}) for output in outputs)


@pytest.mark.parametrize("path", NOTEBOOKS, ids=lambda path: path.stem)
def test_the_stored_notebook_was_run_in_order_and_holds_its_pictures(path):
    notebook = nbformat.read(path, as_version=4)
    code = [cell for cell in notebook.cells if cell.cell_type == "code"]
    assert [cell.execution_count for cell in code] == list(range(1, len(code) + 1))
    outputs = [output for cell in code for output in cell.outputs]
    assert not [output for output in outputs if output.output_type == "error"]
    assert any("image/png" in output.get("data", {}) for output in outputs)
    assert notebook.metadata.kernelspec.name == "python3"
