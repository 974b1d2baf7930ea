"""One page for each public module, from its docstrings."""

from __future__ import annotations

import importlib
from typing import Any

from sphinx.pycode import ModuleAnalyzer
from sphinx.util import logging

import gasphys
from _generate.markdown import page

logger = logging.getLogger(__name__)


def modules() -> dict[str, Any]:
    """Return every public module by name; one that is listed but missing is a warning."""
    found = {}
    extra = {m for m in gasphys._NAMES.values() if m not in gasphys._MODULES}
    for name in sorted({*gasphys._MODULES, *extra}):
        try:
            module = importlib.import_module(f"gasphys.{name}")
        except ModuleNotFoundError as error:
            logger.warning("gasphys.%s is listed as public but cannot be imported: %s", name, error)
            continue
        if not module.__doc__:
            logger.warning("gasphys.%s has no docstring", name)
            continue
        found[name] = module
    return found


def _data(module: Any) -> list[str]:
    """Return entries for public data that a package takes over from an inner module."""
    own = ModuleAnalyzer.for_module(module.__name__).find_attr_docs()
    names = [n for n in module.__all__ if not callable(getattr(module, n)) and ("", n) not in own]
    return [f"\n.. autodata:: {module.__name__}.{n}\n   :no-value:" for n in names]


def pages() -> dict[str, str | bytes]:
    """Return a page a module, and the index with the names at the top level."""
    out: dict[str, str | bytes] = {}
    found = modules()
    for name, module in found.items():
        lines = [f".. automodule:: gasphys.{name}", *_data(module)]
        out[f"api/{name}.md"] = page(
            f"gasphys.{name}", "```{eval-rst}\n" + "\n".join(lines) + "\n```", anchor=f"api-{name}"
        )
    top = [".. currentmodule:: gasphys", ""]
    for name, module in gasphys._NAMES.items():
        if not hasattr(found.get(module), name):
            logger.warning("gasphys.%s is listed as public but gasphys.%s does not have it", name, module)
        else:
            kind = "class" if isinstance(getattr(gasphys, name), type) else "function"
            role = "class" if kind == "class" else "func"
            top += [f".. py:{kind}:: {name}", "", f"   :py:{role}:`gasphys.{module}.{name}`", ""]
    lines = []
    for name, module in found.items():
        lines.append(f"{{py:mod}}`gasphys.{name}`\n: {(module.__doc__ or '').strip().splitlines()[0]}")
    toctree = "\n".join(found)
    out["api/index.md"] = page(
        "Functions and classes",
        "Everything public, module by module. Nothing is imported before it is used: `import gasphys as "
        "gp`, then `gp.lungs.alveolar_po2(...)`.",
        "## At the top level",
        "```{eval-rst}\n" + "\n".join(top) + "\n```",
        "## Modules",
        "\n\n".join(lines),
        f"```{{toctree}}\n:maxdepth: 1\n:hidden:\n\n{toctree}\n```",
        anchor="api-page",
    )
    return out
