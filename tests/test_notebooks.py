"""Every notebook runs from top to bottom, ends in a check, and is kept without outputs."""

from pathlib import Path

import nbformat
import pytest
from nbclient import NotebookClient

FOLDER = Path(__file__).parent.parent / "notebooks"
NOTEBOOKS = sorted(FOLDER.glob("*.ipynb"))


def test_three_notebooks_are_listed():
    assert len(NOTEBOOKS) == 3
    text = (FOLDER / "README.md").read_text(encoding="utf-8")
    assert all(path.name in text for path in NOTEBOOKS)


@pytest.mark.parametrize("path", NOTEBOOKS, ids=lambda p: p.stem)
def test_no_outputs_are_kept_and_the_last_cell_checks(path):
    notebook = nbformat.read(path, as_version=4)
    code = [cell for cell in notebook.cells if cell.cell_type == "code"]
    assert all(not cell.outputs and cell.execution_count is None for cell in code)
    assert "assert" in code[-1].source


@pytest.mark.slow
@pytest.mark.parametrize("path", NOTEBOOKS, ids=lambda p: p.stem)
def test_it_runs(path):
    notebook = nbformat.read(path, as_version=4)
    NotebookClient(
        notebook, timeout=300, kernel_name="python3", resources={"metadata": {"path": str(FOLDER)}}
    ).execute()
    last = [cell for cell in notebook.cells if cell.cell_type == "code"][-1]
    assert "fine:" in "".join(output.get("text", "") for output in last.outputs)
