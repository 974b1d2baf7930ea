"""The examples on handwritten pages: run at every build, and pictures of what they compute."""

from __future__ import annotations

import doctest
import os
from pathlib import Path
from typing import Any

import numpy as np
from sphinx.util import logging

import gasphys as gp
from _generate.markdown import svg
from gasphys.plots import (
    ascents_figure,
    atmosphere_figure,
    bubble_figure,
    control_path_figure,
    exposure_figure,
    fill_figure,
    limit_chance_figure,
    loss_table_figure,
    nuclei_figure,
    sensitivity_figure,
    worksheet_figure,
)

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
    drawn = {}
    if "ascent.md" in spaces:
        compared = spaces["ascent.md"]["both"]
        drawn = {
            "ascents.svg": svg(ascents_figure(compared.to_dataset(judged=False))),
            "control_path.svg": svg(control_path_figure(compared.control())),
        }
    if "gas_supply.md" in spaces:
        supply = spaces["gas_supply.md"]
        drawn["fill.svg"] = svg(fill_figure(supply["fill"]))
        drawn["losses.svg"] = svg(loss_table_figure(supply["losses"]))
    if "bubbles.md" in spaces:
        shown = spaces["bubbles.md"]
        whole = shown["plan"].exposure.then(60.0)
        times = np.linspace(0.0, float(whole.duration), 400)
        drawn["nuclei.svg"] = svg(nuclei_figure(gp.bubbles.nuclei(whole, at=times)))
        grown = gp.bubbles.growth(
            shown["up"], [1.0, 2.0, 5.0, 20.0], bubbles_per_ml=1000.0, at=np.linspace(0.0, 94.0, 189)
        )
        drawn["bubbles.svg"] = svg(bubble_figure(grown))
    if "chamber.md" in spaces:
        drawn["worksheet.svg"] = svg(worksheet_figure(spaces["chamber.md"]["before"]))
        drawn["atmosphere.svg"] = svg(atmosphere_figure(spaces["chamber.md"]["run"]))
    if "what_if.md" in spaces:
        asked = spaces["what_if.md"]
        drawn["limit_chance.svg"] = svg(limit_chance_figure(asked["chance"]))
        drawn["sensitivity.svg"] = svg(sensitivity_figure(asked["indices"]))
    dive, table = spaces["diver.md"], spaces["schedules.md"]["table"]
    return {
        "dive.svg": svg(exposure_figure(dive["dive"], dive["found"])),
        "usn_6.svg": svg(exposure_figure(table, gp.review(table, role="patient"))),
        **drawn,
    }
