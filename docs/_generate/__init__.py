"""Pages made from the registry, the data files and the tests: nothing on them is typed by hand.

Each module here has ``pages() -> dict[str, str | bytes]``: path below ``docs/generated`` to content.
"""

from __future__ import annotations

import importlib
import os
from pathlib import Path

import gasphys

#: Generators, in the order they run.
GENERATORS = (
    "words",
    "equations",
    "provenance",
    "limits",
    "schedules",
    "tissue_sets",
    "printed_times",
    "validation",
    "api",
    "examples",
    "dose_figures",
    "gas_exchange_figures",
    "breathing_figures",
    "risk_figures",
)


def write(folder: Path) -> None:
    """Write every generated page; leave unchanged ones alone and remove what is no longer made."""
    gasphys.equations()  # imports every module that adds constants
    pages: dict[str, str | bytes] = {}
    for name in GENERATORS:
        pages |= importlib.import_module(f"_generate.{name}").pages()
    for path, content in pages.items():
        file = folder / path
        data = content.encode() if isinstance(content, str) else content
        if not file.exists() or file.read_bytes() != data:
            file.parent.mkdir(parents=True, exist_ok=True)
            # Whole or not at all: another build may be reading.
            part = file.with_name(f".{file.name}.{os.getpid()}")
            part.write_bytes(data)
            part.replace(file)
    for file in folder.rglob("[!.]*"):
        if file.is_file() and file.relative_to(folder).as_posix() not in pages:
            file.unlink(missing_ok=True)
