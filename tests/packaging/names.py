"""The public names of the package, one a line with their arguments; run as a module to write them down."""

from __future__ import annotations

import inspect
from pathlib import Path
from typing import Any

import gasphys as gp

FILE = Path(__file__).with_name("public_names.txt")


def _arguments(value: Any) -> str:
    if not callable(value):
        return ""
    try:
        parameters = inspect.signature(value).parameters.values()
    except (TypeError, ValueError):
        return ""
    shown = [f"{p.name}=" if p.default is not p.empty else p.name for p in parameters]
    return f"({', '.join(shown)})"


def public_names() -> list[str]:
    """Return every public name, methods of public classes included."""
    found = []
    for name in gp.__all__:
        value = getattr(gp, name)
        if not inspect.ismodule(value):
            found.append(name + ("" if name == "__version__" else _arguments(value)))
            found += _methods(name, value)
            continue
        for part in value.__all__:
            one = getattr(value, part)
            found.append(f"{name}.{part}{_arguments(one)}")
            found += _methods(f"{name}.{part}", one)
    return sorted(set(found))


def _methods(name: str, value: Any) -> list[str]:
    if not inspect.isclass(value):
        return []
    own = [m for m in vars(value) if not m.startswith("_")]
    return [f"{name}.{m}{_arguments(inspect.getattr_static(value, m))}" for m in own]


if __name__ == "__main__":
    FILE.write_text("\n".join(public_names()) + "\n", encoding="utf-8")
