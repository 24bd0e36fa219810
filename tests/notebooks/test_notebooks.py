"""Every notebook runs from top to bottom in a fresh kernel, and its outputs hold no error."""

from __future__ import annotations

from pathlib import Path

import nbformat
import pytest

FOLDER = Path(__file__).parents[2] / "notebooks"
NOTEBOOKS = sorted(FOLDER.glob("*.ipynb"))
BAD_WORDS = ("Traceback", "Error:", "Warning")


def test_there_is_a_notebook():
    assert [p.name for p in NOTEBOOKS] == ["explore-duty.ipynb"]


@pytest.mark.slow
@pytest.mark.parametrize("path", NOTEBOOKS, ids=lambda p: p.stem)
def test_runs_and_says_no_error(path):
    from nbclient import NotebookClient

    notebook = nbformat.read(path, as_version=4)
    nbformat.validate(notebook)
    NotebookClient(notebook, timeout=600, kernel_name="python3", resources={"metadata": {"path": str(FOLDER)}}).execute()
    pictures = 0
    for number, cell in enumerate(notebook.cells):
        for output in cell.get("outputs", []):
            assert output.output_type != "error", f"cell {number}"
            text = output.get("text", "") or "".join(str(v) for k, v in output.get("data", {}).items() if k.startswith("text/"))
            assert output.get("name") != "stderr", f"cell {number} wrote to the error stream: {text[:300]}"
            for word in BAD_WORDS:
                assert word not in text, f"cell {number}: {text[:300]}"
            pictures += "image/png" in output.get("data", {})
    assert pictures >= 5


@pytest.mark.parametrize("path", NOTEBOOKS, ids=lambda p: p.stem)
def test_is_kept_without_outputs(path):
    """Outputs are made by running; kept ones would age unseen."""
    notebook = nbformat.read(path, as_version=4)
    assert not any(cell.get("outputs") for cell in notebook.cells)
