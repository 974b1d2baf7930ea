"""Published values: every CSV beside this file, one row a check.

The test runner and the documentation's validation table read the rows through this module;
README.md tells how to add one.
"""

from __future__ import annotations

import csv
import importlib
import os
from collections.abc import Iterator
from dataclasses import dataclass, fields
from decimal import Decimal
from pathlib import Path
from typing import Any

import gasphys as gp
from gasphys.policy import PROVENANCE

FOLDER = Path(__file__).parent

#: Words allowed in the column ``provenance``; only the last may stand without a source.
WORDS = (*PROVENANCE, "common_practice")


@dataclass(frozen=True)
class Row:
    """One printed number and the call that should give it."""

    file: str
    id: str
    equation: str
    inputs: str
    expected: str
    unit: str
    tolerance: str
    source: str
    page_or_equation: str
    provenance: str
    note: str

    @property
    def misprint(self) -> bool:
        """Whether the printed number is wrong and must *not* be reproduced."""
        return self.file.endswith("misprints.csv")

    @property
    def allowed(self) -> float:
        """Largest deviation allowed, in :attr:`unit`: half a unit of the last printed digit."""
        if not self.tolerance:
            return 0.5 * 10.0 ** int(Decimal(self.expected).as_tuple().exponent)
        if self.tolerance.endswith("%"):
            return float(self.tolerance[:-1]) / 100.0 * abs(float(self.expected))
        return float(self.tolerance)


COLUMNS = tuple(f.name for f in fields(Row) if f.name != "file")


def rows() -> list[Row]:
    """Return every row of every file; with GASPHYS_ROWS only equations that begin with it."""
    only = tuple(os.environ.get("GASPHYS_ROWS", "").split())
    found = [row for path in sorted(FOLDER.glob("*.csv")) for row in _read(path)]
    return [row for row in found if row.equation.startswith(only)] if only else found


def _read(path: Path) -> Iterator[Row]:
    with path.open(encoding="utf-8", newline="") as file:
        reader = csv.DictReader(file, strict=True)
        if tuple(reader.fieldnames or ()) != COLUMNS:
            raise ValueError(f"{path.name}: the columns must be {', '.join(COLUMNS)}")
        for line in reader:
            if None in line or None in line.values():
                raise ValueError(f"{path.name}: row {line['id']} has too few or too many cells")
            yield Row(file=path.name, **{k: v.strip() for k, v in line.items()})


def function(row: Row) -> Any:
    """Return the equation of a row; any other public function goes by its dotted name too."""
    registry = gp.equations()
    if row.equation in registry:
        return registry[row.equation]
    module, _, name = row.equation.rpartition(".")
    return getattr(importlib.import_module(f"gasphys.{module}"), name)


def arguments(part: str) -> dict[str, Any]:
    """Read ``"a=1 kPa; b=2"``: a bare number is in the canonical unit, anything else stays text."""
    found: dict[str, Any] = {}
    for piece in filter(None, (p.strip() for p in part.split(";"))):
        name, equal, value = (p.strip() for p in piece.partition("="))
        if not equal or not value or name in found:
            raise ValueError(f"{piece!r} is not 'argument=value', each argument once")
        try:
            found[name] = (
                {"True": True, "False": False}[value] if value in ("True", "False") else float(value)
            )
        except ValueError:
            found[name] = value
    return found


def ours(row: Row) -> float:
    """Return our value in the row's unit; inputs joined by `` + `` are evaluated and added."""
    f = function(row)
    return sum(_one(f, arguments(part), row.unit) for part in row.inputs.split(" + "))


def _one(f: Any, inputs: dict[str, Any], unit: str) -> float:
    with gp.validity("raise"):
        if "solve_for" not in inputs:
            value = f(**inputs)
            if not hasattr(f, "kind"):  # not an equation: it answers in the row's unit
                return float(value)
            return float(gp.convert(value, picked(f, inputs).result.unit, unit))
        unknown = inputs.pop("solve_for")
        (value,) = f.solve_for(unknown, **inputs)
        (quantity,) = (a.quantity for a in picked(f, inputs).arguments if a.name == unknown)
        return float(gp.convert(float(value), quantity.unit, unit))


def picked(f: Any, inputs: dict[str, Any]) -> Any:
    """Return the formula that a choice picks for these inputs, or the equation itself."""
    if f.kind != "choice":
        return f
    return f.pick(**{option: inputs[option] for option in f.options if option in inputs})


def covered() -> set[str]:
    """Return the registry name of every equation with a row; a member counts for its choice."""
    registry, found = gp.equations(), set()
    for row in rows():
        if row.misprint or row.equation not in registry:
            continue
        f = registry[row.equation]
        reached = {id(f)} | {id(picked(f, arguments(p))) for p in row.inputs.split(" + ")}
        found |= {name for name, equation in registry.items() if id(equation) in reached}
    return found | {name.partition("[")[0] for name in found}


def table() -> list[dict[str, Any]]:
    """Return the rows with our value and the deviation, for the documentation."""
    found = []
    for row in rows():
        value = ours(row)
        deviation = value - float(row.expected)
        found.append(
            {
                **{name: getattr(row, name) for name in ("file", *COLUMNS)},
                "ours": value,
                "deviation": deviation,
                "allowed": row.allowed,
                "kind": "misprint" if row.misprint else "value",
                "agrees": abs(deviation) <= row.allowed * (1.0 + 1e-9),  # as the test: half a unit agrees
            }
        )
    return found
