"""Every notebook runs from clean, without an error anywhere, and is what a notebook here must be."""

from __future__ import annotations

import ast
from pathlib import Path

import nbformat
import pytest

from gasphys.quantities import CAUTION
from tests.notebooks.running import PATHS, ROOT, errors, models, run

INVENTED = (
    "Invented scenario. Places, people, measurements and events do not exist; "
    "they were made to show the software."
)

each = pytest.mark.parametrize("path", PATHS, ids=lambda path: path.stem)


#: Titles that are no questions.
TOLD = ("One breath, down and back", "Take the functions home", "Any equation, worked")


def test_there_is_a_notebook() -> None:
    assert len(PATHS) >= 10


def test_the_engineers_notebook_has_no_app() -> None:
    text = (ROOT / "notebooks" / "take_the_functions_home.ipynb").read_text(encoding="utf-8")
    assert "widgets" not in text


@each
def test_runs_from_clean_without_an_error(path: Path) -> None:
    done = run(nbformat.read(path, as_version=4))
    assert errors(done) == []
    assert all(cell.execution_count for cell in done.cells if cell.cell_type == "code")
    shown = [
        state["value"]
        for state in models(done)
        if "gasphys-answer" in state.get("_dom_classes", ()) and state["value"]
    ]
    apps = sum(cell.source.count("gp.widgets.") for cell in done.cells if cell.cell_type == "code")
    assert len(shown) == apps
    assert not any(text.startswith("No answer") for text in shown)


@each
def test_outputs_are_stripped(path: Path) -> None:
    notebook = nbformat.read(path, as_version=4)
    nbformat.validate(notebook)
    code = [cell for cell in notebook.cells if cell.cell_type == "code"]
    assert all(cell.outputs == [] and cell.execution_count is None for cell in code)
    assert "widgets" not in notebook.metadata


@each
def test_asks_a_question_and_warns(path: Path) -> None:
    notebook = nbformat.read(path, as_version=4)
    text = "\n".join(cell.source for cell in notebook.cells if cell.cell_type == "markdown")
    title = text.splitlines()[0]
    assert title.startswith("# ")
    assert title.endswith("?") or title.removeprefix("# ") in TOLD
    words = "".join(c if c.isalnum() else " " for c in title.replace("'", "").lower()).split()
    assert path.stem == "_".join(words)
    assert INVENTED in text
    assert CAUTION in text


@each
def test_holds_no_logic(path: Path) -> None:
    logic = (
        ast.FunctionDef,
        ast.ClassDef,
        ast.For,
        ast.While,
        ast.If,
        ast.Try,
        ast.Lambda,
        ast.comprehension,
    )
    for cell in nbformat.read(path, as_version=4).cells:
        if cell.cell_type == "code":
            assert not [node for node in ast.walk(ast.parse(cell.source)) if isinstance(node, logic)]


# -- the scan itself: what it must find ------------------------------------------------------------

_APP = "import gasphys as gp\napp = gp.widgets.OxygenAtPressure()\napp.view\n"


@pytest.mark.parametrize(
    ("source", "expected"),
    [
        ("1 / 0", "ZeroDivisionError"),
        ("import warnings; warnings.warn('beware')", "beware"),
        (
            "import ipywidgets\nout = ipywidgets.Output()\nwith out:\n    1 / 0\nout",
            "ZeroDivisionError",
        ),
        (_APP + "app._shown.entries['hemoglobin'].value = '45'", "possible range 0 to 30 g/dL"),
        (
            _APP + "app.answer = None\napp._shown.sliders['ambient_pressure'].value = 2.0\n"
            "import asyncio; await asyncio.sleep(1)",
            "Unexpected error",
        ),
    ],
    ids=["cell", "warning", "output widget", "message", "callback"],
)
def test_the_scan_finds(source: str, expected: str, tmp_path: Path) -> None:
    notebook = nbformat.v4.new_notebook(cells=[nbformat.v4.new_code_cell(source)])
    found = errors(run(notebook, tmp_path))
    assert any(expected in text for text in found), found


def test_the_scan_is_silent_on_a_good_app(tmp_path: Path) -> None:
    source = _APP + "app._shown.entries['hemoglobin'].value = '11'"
    assert errors(run(nbformat.v4.new_notebook(cells=[nbformat.v4.new_code_cell(source)]), tmp_path)) == []


def test_a_figure_is_shown_as_a_picture(tmp_path: Path) -> None:
    source = "from gasphys.plots.style import new_figure\nnew_figure()"
    done = run(nbformat.v4.new_notebook(cells=[nbformat.v4.new_code_cell(source)]), tmp_path)
    (output,) = done.cells[0].outputs
    assert "image/png" in output.data
