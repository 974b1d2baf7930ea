"""The built wheel and source archive hold everything and nothing else."""

from __future__ import annotations

import shutil
import subprocess
import sys
import tarfile
import zipfile
from importlib import resources
from pathlib import Path

import pytest

PACKAGE = Path(str(resources.files("gasphys")))
ROOT = PACKAGE.parent

pytestmark = pytest.mark.skipif(
    not (ROOT / "pyproject.toml").exists(), reason="an installed copy has no source tree to build from"
)

#: One interpreter, the backend's own hooks: no network, no isolation, no second environment.
_BUILD = "import sys; from setuptools import build_meta as b; print(getattr(b, sys.argv[1])(sys.argv[2]))"


@pytest.fixture(scope="module")
def source(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A copy of what the archive is made of, so that no build folder lands in the checkout."""
    copy = tmp_path_factory.mktemp("source")
    ignore = shutil.ignore_patterns("__pycache__", "*.egg-info", "build", "dist")
    shutil.copytree(PACKAGE, copy / "gasphys", ignore=ignore)
    for name in ("pyproject.toml", "LICENSE", "README.md"):
        if (ROOT / name).exists():
            shutil.copy(ROOT / name, copy / name)
    return copy


def _build(source: Path, hook: str) -> Path:
    run = subprocess.run(
        [sys.executable, "-W", "ignore", "-c", _BUILD, hook, str(source / "dist")],
        cwd=source,
        capture_output=True,
        text=True,
        check=False,
    )
    assert run.returncode == 0, run.stderr[-3000:]
    return source / "dist" / run.stdout.split()[-1]


def _needed() -> set[str]:
    suffixes = {".py", ".toml", ".csv", ".typed", ".html", ".js", ".css", ".md"}
    files = (p for p in PACKAGE.rglob("*") if p.is_file() and "__pycache__" not in p.parts)
    return {f"gasphys/{p.relative_to(PACKAGE).as_posix()}" for p in files if p.suffix in suffixes}


def test_wheel_holds_code_data_and_marker(source: Path) -> None:
    wheel = _build(source, "build_wheel")
    with zipfile.ZipFile(wheel) as archive:
        names = set(archive.namelist())
        (metadata,) = (archive.read(n).decode() for n in names if n.endswith("METADATA"))
    assert _needed() <= names
    assert "gasphys/py.typed" in names
    assert {"gasphys/quantities.toml", "gasphys/sources.toml", "gasphys/dry_air.toml"} <= names
    outside = {n for n in names if not n.startswith("gasphys/") and ".dist-info/" not in n}
    assert not outside
    assert any(n.endswith("licenses/LICENSE") for n in names)
    assert "License-Expression: BSD-3-Clause" in metadata
    for extra in ("io", "ocean", "distributed", "notebooks", "docs", "test"):
        assert f"Provides-Extra: {extra}" in metadata
    assert not [n for n in names if "__pycache__" in n or n.endswith(".pyc")]


def test_wheel_works_unpacked_in_an_empty_folder(source: Path, tmp_path: Path) -> None:
    wheel = next(iter((source / "dist").glob("*.whl")), None) or _build(source, "build_wheel")
    with zipfile.ZipFile(wheel) as archive:
        archive.extractall(tmp_path)
    code = (
        "import gasphys as gp, pathlib\n"
        "assert pathlib.Path(gp.__file__).is_relative_to(pathlib.Path.cwd()), gp.__file__\n"
        "print(len(gp.equations()), round(gp.lungs.alveolar_po2('2.4 atm', 1.0, '40 mmHg'), 2))\n"
        "[getattr(gp, n) for n in gp.__all__]\n"
    )
    run = subprocess.run(
        [sys.executable, "-c", code], cwd=tmp_path, capture_output=True, text=True, check=False
    )
    assert run.returncode == 0, run.stderr
    count, value = run.stdout.split()
    assert int(count) > 50
    assert value == "231.58"


def test_source_archive_builds_the_same(source: Path) -> None:
    archive = _build(source, "build_sdist")
    with tarfile.open(archive) as tar:
        names = {n.partition("/")[2] for n in tar.getnames()}
    assert _needed() <= names
    assert {"pyproject.toml", "LICENSE"} <= names
