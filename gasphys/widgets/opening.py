"""Find an app, a notebook or an equation by its name, and open it."""

from __future__ import annotations

import contextlib
import difflib
import importlib.util
import inspect
import os
import subprocess
import sys
import webbrowser
from collections.abc import Callable
from pathlib import Path

import gasphys
from gasphys.errors import GasphysError, UnknownNameError
from gasphys.registry import equations
from gasphys.widgets.ascents_compared import AscentsCompared
from gasphys.widgets.base import App
from gasphys.widgets.cylinder_fill import CylinderFill
from gasphys.widgets.equation_page import EquationPage
from gasphys.widgets.nucleus_on_the_way_up import NucleusOnTheWayUp
from gasphys.widgets.oxygen_at_pressure import OxygenAtPressure
from gasphys.widgets.oxygen_course import OxygenCourse
from gasphys.widgets.page import Page, app_page, notebook_page, server
from gasphys.widgets.patient_at_pressure import PatientAtPressure
from gasphys.widgets.room_for_work import RoomForWork

__all__ = ["APPS", "listing", "notebooks", "open_name", "page_of"]

#: Apps by name; an equation's page goes by the equation's name.
APPS: dict[str, type[App]] = {
    app.name: app
    for app in (
        PatientAtPressure,
        OxygenAtPressure,
        OxygenCourse,
        AscentsCompared,
        CylinderFill,
        RoomForWork,
        NucleusOnTheWayUp,
    )
}


def notebooks() -> dict[str, Path]:
    """Return the notebooks of the source tree.

    Returns
    -------
    dict
        Name to file, from ``notebooks/`` under the working folder or beside the package; empty where
        gasphys is installed without them.

    Examples
    --------
    >>> all(path.suffix == ".ipynb" for path in notebooks().values())
    True
    """
    for folder in (Path.cwd() / "notebooks", Path(gasphys.__file__).parents[1] / "notebooks"):
        if found := sorted(folder.glob("*.ipynb")):
            return {path.stem: path for path in found}
    return {}


def listing() -> str:
    """Return what can be opened, by name.

    Returns
    -------
    str
        Apps, notebooks, and where the equations are listed.

    Examples
    --------
    >>> print(listing().splitlines()[0])
    apps, each a page in the browser:
    """
    width = max(map(len, APPS))
    lines = ["apps, each a page in the browser:"]
    lines += [
        f"  {name:<{width}}  {(inspect.getdoc(app) or '').splitlines()[0]}" for name, app in APPS.items()
    ]
    found = notebooks()
    lines.append("")
    if found:
        lines.append("notebooks, in JupyterLab, or with --page without their code:")
        lines += [f"  {name}" for name in found]
    else:
        lines.append("notebooks: none here; they are in the folder notebooks of the source tree")
    number = len(equations())
    lines += ["", f"any of the {number} equations, a page each, such as lungs.alveolar_po2;"]
    lines.append("`python -m gasphys equations` lists them")
    return "\n".join(lines)


def _whole(name: str) -> str:
    """Return the name of an app or a notebook that begins so, if there is only one."""
    fits = [whole for whole in (*APPS, *notebooks()) if whole.startswith(name)]
    return fits[0] if len(fits) == 1 else name


def _notebook(name: str) -> Path | None:
    """Return a notebook by its file or its name."""
    if name.endswith(".ipynb") and Path(name).is_file():
        return Path(name)
    return notebooks().get(name)


def page_of(name: str) -> Callable[[], Page]:
    """Return what makes the page of an app, an equation or a notebook.

    Parameters
    ----------
    name : str
        Its name, or the beginning of it where no other begins so.

    Returns
    -------
    callable
        Without arguments; each call makes a new :class:`gasphys.widgets.page.Page`.

    Raises
    ------
    UnknownNameError
        If there is nothing of that name.

    Examples
    --------
    >>> page_of("laws.boyle_volume")().title
    'laws.boyle_volume'
    """
    name = _whole(name)
    if name in APPS:
        return lambda: app_page(APPS[name]())
    if name in equations():
        return lambda: app_page(EquationPage(name))
    if (path := _notebook(name)) is not None:
        return lambda: notebook_page(path)
    near = difflib.get_close_matches(name, [*APPS, *notebooks(), *equations()], 3, 0.4)
    nearest = f"; nearest: {', '.join(map(repr, near))}" if near else ""
    raise UnknownNameError(
        f"nothing named {name!r} to open{nearest}. Without a name, open lists what there is"
    )


def open_name(name: str, *, page: bool = False, browser: bool = True, port: int = 0) -> int:
    """Open an app or an equation as a page, a notebook in JupyterLab, until Ctrl+C is pressed.

    Parameters
    ----------
    name : str
        Its name, or the beginning of it where no other begins so.
    page : bool
        A notebook as a page too.
    browser : bool
        Open the browser; else the address is printed only.
    port : int
        Port on this machine; 0 takes a free one.

    Returns
    -------
    int
        Exit status.

    Raises
    ------
    UnknownNameError
        If there is nothing of that name.
    GasphysError
        If a notebook is asked for and JupyterLab is not installed.
    """
    name = _whole(name)
    make, path = page_of(name), _notebook(name)
    if path is not None and not page:
        return _in_lab(path, browser, port)
    serving = server(make, port)
    address = f"http://127.0.0.1:{serving.server_port}/"
    print(f"{name}: {address} (this machine only; Ctrl+C ends it)", flush=True)
    if browser:
        webbrowser.open(address)
    try:
        serving.serve_forever()
    except KeyboardInterrupt:
        print()
    finally:
        serving.server_close()
    return 0


def _in_lab(path: Path, browser: bool, port: int) -> int:
    if importlib.util.find_spec("jupyterlab") is None:
        raise GasphysError(
            'JupyterLab is not installed: python -m pip install ".[notebooks]"; '
            "or add --page to see the notebook without it"
        )
    # The notebook's kernel must find the gasphys that runs here, installed or not.
    paths = [str(Path(gasphys.__file__).parents[1]), *filter(None, [os.environ.get("PYTHONPATH")])]
    command = [
        *(sys.executable, "-m", "jupyterlab"),
        f"--ServerApp.root_dir={path.resolve().parent}",
        f"--LabApp.default_url=/lab/tree/{path.name}",
        # Nothing asks the network for news or extensions.
        "--LabApp.check_for_updates_class=jupyterlab.NeverCheckForUpdate",
        "--LabApp.news_url=None",
        "--LabApp.extension_manager=readonly",
        *([] if browser else ["--no-browser"]),
        # In a container everybody is root; the server answers this machine only, and asks for its token.
        *(["--allow-root"] if getattr(os, "geteuid", lambda: 1)() == 0 else []),
        *([f"--port={port}"] if port else []),
    ]
    env = {**os.environ, "PYTHONPATH": os.pathsep.join(paths)}
    with subprocess.Popen(command, env=env) as lab:
        while True:
            # JupyterLab asks by itself whether Ctrl+C is meant.
            with contextlib.suppress(KeyboardInterrupt):
                return lab.wait()
