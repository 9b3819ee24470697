"""Run the notebooks and keep what they show, for viewers that run nothing.

    python .ci/fill_notebooks.py

Live state and times are left out, so that the same kit fills in the same outputs.
"""

from __future__ import annotations

import copy
import tempfile
from pathlib import Path

import nbformat
from nbclient import NotebookClient

NOTEBOOKS = Path(__file__).parents[1] / "notebooks"
LIVE = "application/vnd.jupyter.widget-view+json"


def filled(notebook: nbformat.NotebookNode) -> nbformat.NotebookNode:
    """Run a notebook in a folder of its own and keep its static outputs."""
    metadata = copy.deepcopy(notebook.metadata)
    with tempfile.TemporaryDirectory() as folder:
        resources = {"metadata": {"path": folder}}
        NotebookClient(notebook, resources=resources, store_widget_state=False).execute()
    notebook.metadata = metadata
    for cell in notebook.cells:
        cell.metadata = nbformat.NotebookNode()
        if cell.cell_type == "code":
            cell.outputs = [_static(output, folder) for output in cell.outputs]
    return notebook


def _static(output: nbformat.NotebookNode, folder: str) -> nbformat.NotebookNode:
    """What a viewer can show of an output, without the folder it was made in."""
    data = output.get("data", {})
    data.pop(LIVE, None)
    data.update({kind: text.replace(f"{folder}/", "") for kind, text in data.items()})
    output.pop("transient", None)
    return output


def main() -> None:
    """Fill every notebook in its place."""
    for path in sorted(NOTEBOOKS.glob("*.ipynb")):
        notebook = filled(nbformat.read(path, as_version=4))
        nbformat.write(notebook, path)
        print(f"{path.name}: {path.stat().st_size / 1e3:.0f} kB")


if __name__ == "__main__":
    main()
