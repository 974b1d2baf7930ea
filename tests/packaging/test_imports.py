"""What an import costs, in which direction files import, and what is missing without the extras."""

from __future__ import annotations

import ast
import functools
import json
import re
import subprocess
import sys
import tomllib
from importlib import resources
from pathlib import Path

import pytest

import gasphys as gp

PACKAGE = Path(str(resources.files("gasphys")))
ROOT = PACKAGE.parent

#: Libraries that no file imports before they are needed.
LATE = (
    "scipy.stats",
    "scipy.optimize",
    "scipy.integrate",
    "matplotlib",
    "sympy",
    "ipywidgets",
    "dask",
    "gsw",
)

#: Files and packages from the ground up: each imports only from what stands before it.
FLOORS = """
    errors toml_files units constants quantities sources
    maths policy shell equation registry
    gas vapor breathing_gas laws surroundings real_gas
    lungs blood
    person limits
    records exposure schedules
    gas_exchange breathing tissues doses
    bubbles risk
    ascent supply
    reviews comparison explanation report
    scenarios strategies chamber
    plots widgets __main__
"""
ORDER = FLOORS.split()
#: The first four lines: equations stand on nothing above them.
GROUND = " ".join(FLOORS.strip().splitlines()[:4]).split()

FILES = sorted(PACKAGE.rglob("*.py"))


def _module(path: Path) -> str:
    parts = path.relative_to(PACKAGE).with_suffix("").parts
    return ".".join(parts[:-1] if parts[-1] == "__init__" else parts)


def _floor(module: str) -> int:
    name = module.partition(".")[0]
    assert name in ORDER, f"{name} has no place in the order; add it to FLOORS"
    return ORDER.index(name)


def _imports(path: Path, *, top_only: bool = False) -> set[str]:
    """Return the modules a file imports, at the top only or anywhere."""
    found: set[str] = set()

    def walk(node: ast.AST) -> None:
        if isinstance(node, ast.Import):
            found.update(a.name for a in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path}: write the whole name of a module"
            found.update({f"{node.module}.{a.name}" for a in node.names} | {str(node.module)})
        elif (isinstance(node, ast.If) and "TYPE_CHECKING" in ast.dump(node.test)) or (
            top_only and isinstance(node, (ast.FunctionDef, ast.AsyncFunctionDef, ast.Lambda))
        ):
            return
        for child in ast.iter_child_nodes(node):
            walk(child)

    walk(ast.parse(path.read_text(encoding="utf-8")))
    return found


def _own(names: set[str]) -> set[str]:
    """Return the modules of the package among imported names; a name of the top level by its home."""
    found = set()
    for name in names:
        if not name.startswith("gasphys."):
            continue
        rest = name.removeprefix("gasphys.")
        first = rest.partition(".")[0]
        if first in ORDER:
            found.add(rest)
        elif first in gp._NAMES:
            found.add(gp._NAMES[first])
    return found


@pytest.mark.parametrize("path", FILES, ids=_module)
def test_imports_go_downward_only(path: Path) -> None:
    module = _module(path)
    if not module:
        assert not _own(_imports(path)), "the top of the package imports on first use"
        return
    for other in _own(_imports(path)):
        same_package = other.partition(".")[0] == module.partition(".")[0]
        assert same_package or _floor(other) < _floor(module), (
            f"{module} imports {other}, which stands above it"
        )


def test_equations_stand_on_the_ground() -> None:
    """A file that defines equations imports from the first four floors and its own package only."""
    homes = {f.__module__ for f in gp.equations().values()}
    for home in sorted(homes):
        path = Path(str(sys.modules[home].__file__))
        package = home.split(".")[1]
        for other in _own(_imports(path)):
            first = other.partition(".")[0]
            assert first in GROUND or first == package, f"{home} imports {other}"


@pytest.mark.parametrize("path", FILES, ids=_module)
def test_heavy_libraries_are_imported_late(path: Path) -> None:
    for name in _imports(path, top_only=True):
        assert not any(name == late or name.startswith(f"{late}.") for late in LATE), name


def test_order_names_what_there_is() -> None:
    assert len(ORDER) == len(set(ORDER))
    there = {_module(p).partition(".")[0] for p in FILES} - {""}
    assert there <= set(ORDER)


def _loaded(code: str) -> set[str]:
    """Return the modules a fresh interpreter has loaded after some code."""
    text = f"import sys, json\n{code}\nprint(json.dumps(sorted(sys.modules)))"
    run = subprocess.run(
        [sys.executable, "-W", "error", "-c", text], capture_output=True, text=True, cwd=ROOT, check=False
    )
    assert run.returncode == 0, run.stderr
    return set(json.loads(run.stdout.splitlines()[-1]))


@functools.cache
def _with_xarray() -> frozenset[str]:
    """Return what xarray alone loads of dask: its older versions bring it along where it is there."""
    return frozenset(m for m in _loaded("import xarray") if m.partition(".")[0] == "dask")


def _heavy(modules: set[str]) -> list[str]:
    ours = modules - _with_xarray()
    return sorted(m for m in ours if any(m == late or m.startswith(f"{late}.") for late in LATE))


def test_import_loads_next_to_nothing() -> None:
    loaded = _loaded("import gasphys")
    assert not _heavy(loaded)
    assert not loaded & {"numpy", "xarray", "pandas", "scipy"}
    assert not {m for m in loaded if m.startswith("gasphys.")}


def test_calls_load_no_heavy_library() -> None:
    code = (
        "import gasphys as gp, numpy as np\n"
        "gp.lungs.alveolar_po2(243.18, 1.0, 5.33)\n"
        "gp.blood.o2_content(np.array([13.3, 80.0]), hemoglobin=15.0)\n"
        "gp.surroundings.depth_at_pressure(281.325, water='unesco_1983')\n"
        "gp.doses.uptd_ramp(100.0, 200.0, 10.0)\n"
        "gp.equations()\n"
    )
    assert not _heavy(_loaded(code))


def test_every_module_loads_without_heavy_libraries() -> None:
    modules = [f"gasphys.{_module(p)}" for p in FILES if _module(p) not in ("", "__main__")]
    assert not _heavy(_loaded("\n".join(f"import {m}" for m in modules)))


_BLOCK = """
from importlib.machinery import PathFinder
find = PathFinder.find_spec
def hidden(name, path=None, target=None):
    return None if name.partition(".")[0] in {blocked!r} else find(name, path, target)
PathFinder.find_spec = staticmethod(hidden)
import gasphys as gp
"""


def _without(blocked: list[str], code: str) -> str:
    text = _BLOCK.format(blocked=blocked) + code
    run = subprocess.run([sys.executable, "-c", text], capture_output=True, text=True, cwd=ROOT, check=False)
    assert run.returncode == 0, run.stderr
    return run.stdout


def test_without_any_extra_the_rest_works() -> None:
    extras = ["gsw", "dask", "distributed", "zarr", "h5netcdf", "netCDF4", "jupyterlab", "pint", "cf_units"]
    modules = [f"gasphys.{_module(p)}" for p in FILES if _module(p) not in ("", "__main__")]
    code = "\n".join(f"import {m}" for m in modules) + (
        "\nimport xarray as xr"
        "\nx = xr.DataArray([1.0, 1.6], dims='x', attrs={'units': 'atm'})"
        "\nprint(gp.lungs.alveolar_po2(x, 1.0, 5.33).units, gp.laws.boyle_volume.latex()[:3])"
    )
    assert _without(extras, code).split() == ["kPa", "V_2"]


def test_missing_extra_is_named_with_the_remedy() -> None:
    code = (
        "try:\n"
        "    gp.surroundings.pressure_at_depth(18.0, water='teos10')\n"
        "except gp.GasphysError as error:\n"
        "    print(error)\n"
    )
    printed = _without(["gsw"], code)
    assert "gsw" in printed
    assert "pip install 'gasphys[ocean]'" in printed


@pytest.mark.skipif(not (ROOT / "pyproject.toml").exists(), reason="an installed copy has no pyproject.toml")
def test_extras_named_in_messages_exist() -> None:
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    extras = project["optional-dependencies"]
    for path in FILES:
        for name in re.findall(r"gasphys\[(\w+)\]", path.read_text(encoding="utf-8")):
            assert name in extras, f"{path.name} names the extra {name}"
