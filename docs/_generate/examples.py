"""The examples on handwritten pages: run at every build, and pictures of what they compute."""

from __future__ import annotations

import doctest
import os
from pathlib import Path
from typing import Any

from sphinx.util import logging

import gasphys as gp
from _generate.markdown import svg
from gasphys.plots import exposure_figure

logger = logging.getLogger(__name__)

DOCS = Path(__file__).resolve().parents[1]
OPTIONS = doctest.ELLIPSIS | doctest.NORMALIZE_WHITESPACE


def handwritten() -> list[Path]:
    """Return every page that is not generated."""
    return sorted(
        p for p in DOCS.rglob("*.md") if p.relative_to(DOCS).parts[0] not in ("generated", "_build")
    )


def run(path: Path) -> dict[str, Any]:
    """Run the ``python`` blocks of a page in one namespace and return it.

    A line that prints something else than the page says, or a block without ``>>>``, is an error that
    names page and line.
    """
    lines, inside = [], False
    for number, line in enumerate(path.read_text(encoding="utf-8").split("\n"), start=1):
        if line.startswith("```"):
            inside, begins = line.strip() == "```python", True
            lines.append("")
            continue
        if inside and begins and not line.startswith(">>>"):
            raise RuntimeError(
                f"{path.name}, line {number}: a python block begins with >>>, or it is not checked"
            )
        begins = False
        # Everything but code is blanked, so that a failure names the line of the page.
        lines.append(line if inside else "")
    test = doctest.DocTestParser().get_doctest("\n".join(lines), {}, path.name, str(path), 0)
    space = test.globs
    said: list[str] = []
    runner = doctest.DocTestRunner(optionflags=OPTIONS, verbose=False)
    before = Path.cwd()
    os.chdir(DOCS.parent)
    try:
        runner.run(test, out=said.append, clear_globs=False)
    finally:
        os.chdir(before)
    if runner.failures:
        raise RuntimeError(f"an example of {path.name} does not give what the page says\n{''.join(said)}")
    return space


def pages() -> dict[str, str | bytes]:
    """Run every page; return the pictures that pages show of their own examples."""
    spaces: dict[str, dict[str, Any]] = {}
    for path in handwritten():
        try:
            spaces[path.name] = run(path)
        except RuntimeError as error:
            logger.warning("%s", error)
    if not {"diver.md", "schedules.md"} <= set(spaces):
        return {}
    dive, table = spaces["diver.md"], spaces["schedules.md"]["table"]
    return {
        "dive.svg": svg(exposure_figure(dive["dive"], dive["found"])),
        "usn_6.svg": svg(exposure_figure(table, gp.review(table, role="patient"))),
    }
