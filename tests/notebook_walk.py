"""Runs the notebook of the demo in a kernel of its own.

python tests/notebook_walk.py            # run it, and store the outputs in it
python tests/notebook_walk.py FILE       # run it, and write the result to FILE
"""

from __future__ import annotations

import os
import sys
import tempfile
from pathlib import Path

import nbformat
from nbclient import NotebookClient

ROOT = Path(__file__).resolve().parents[1]
NOTEBOOK = ROOT / "demo" / "walk.ipynb"


def run_notebook(output: Path) -> None:
    """Run every cell where a reader opens the notebook, beside it; keep what it answers."""
    os.environ.update(PYTHONPATH=str(ROOT), OMP_NUM_THREADS="1", MPLBACKEND="Agg")
    with tempfile.TemporaryDirectory() as folder:
        os.environ["JUPYTER_RUNTIME_DIR"] = folder
        _execute(output)


def _execute(output: Path) -> None:
    notebook = nbformat.read(NOTEBOOK, as_version=4)
    place = {"metadata": {"path": ROOT / "demo"}}
    client = NotebookClient(
        notebook, timeout=120, kernel_name="python3", resources=place, record_timing=False
    )
    client.execute()
    notebook.metadata = {
        "kernelspec": {"display_name": "Python 3", "language": "python", "name": "python3"},
        "language_info": {"name": "python"},
    }
    nbformat.write(notebook, output)


if __name__ == "__main__":
    run_notebook(Path(sys.argv[1]) if sys.argv[1:] else NOTEBOOK)
