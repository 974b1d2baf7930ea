"""Run a notebook from clean and find every error in it, also those a green run would hide."""

from __future__ import annotations

import os
import re
from pathlib import Path
from typing import Any

import nbformat
from nbclient import NotebookClient

ROOT = Path(__file__).resolve().parents[2]
NOTEBOOKS = ROOT / "notebooks"
PATHS = sorted(NOTEBOOKS.glob("*.ipynb"))
STATE = "application/vnd.jupyter.widget-state+json"


def run(notebook: nbformat.NotebookNode, folder: Path = NOTEBOOKS) -> nbformat.NotebookNode:
    """Run all cells in a new kernel that imports this checkout; cells that raise do not stop it."""
    client = NotebookClient(
        notebook,
        timeout=180,
        startup_timeout=120,
        kernel_name="python3",
        allow_errors=True,
        resources={"metadata": {"path": str(folder)}},
    )
    paths = [str(ROOT), *filter(None, [os.environ.get("PYTHONPATH")])]
    client.execute(env={**os.environ, "PYTHONPATH": os.pathsep.join(paths)})
    return notebook


def models(notebook: nbformat.NotebookNode) -> list[dict[str, Any]]:
    """Return the state of every widget that the notebook made."""
    saved = notebook.metadata.get("widgets", {}).get(STATE, {}).get("state", {})
    return [model["state"] for model in saved.values()]


def errors(notebook: nbformat.NotebookNode) -> list[str]:
    """Return every error: raised in a cell, printed, or shown by a widget."""
    found = []
    for number, cell in enumerate(notebook.cells):
        for output in cell.get("outputs", []):
            found += [f"cell {number}: {text}" for text in _of_output(output)]
    for state in models(notebook):
        for output in state.get("outputs", ()):
            found += [f"output widget: {text}" for text in _of_output(output)]
        value = state.get("value")
        if not isinstance(value, str):
            continue
        if "gasphys-message" in state.get("_dom_classes", ()) and value:
            found.append(f"message of an app: {value}")
        if "Traceback (most recent call last)" in value:
            found.append(f"widget: {value}")
    return found


def _of_output(output: Any) -> list[str]:
    if output["output_type"] == "error":
        return [f"{output['ename']}: {output['evalue']}"]
    if output["output_type"] == "stream":
        text = str(output["text"])
        if output["name"] == "stderr" or re.search(r"Traceback \(most recent call last\)", text):
            return [text]
    return []
