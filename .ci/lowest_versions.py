"""Print the lowest versions that pyproject.toml allows at run time, one requirement a word."""

from __future__ import annotations

import tomllib
from pathlib import Path

PROJECT = tomllib.loads((Path(__file__).parents[1] / "pyproject.toml").read_text(encoding="utf-8"))

print(*(line.replace(">=", "==") for line in PROJECT["project"]["dependencies"]))
