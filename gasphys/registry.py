"""The registry of every equation, filled by importing the modules that define them."""

from __future__ import annotations

import importlib
import inspect
from typing import Any

from gasphys.equation import EQUATIONS, EquationFunction
from gasphys.sources import cite

__all__ = ["as_records", "equations"]

#: Modules that hold equations, in reading order.
MODULES = (
    "laws",
    "surroundings",
    "real_gas",
    "breathing_gas",
    "lungs",
    "blood",
    "gas_exchange.equations",
    "breathing.equations",
    "doses.equations",
    "tissues.equations",
    "bubbles.equations",
    "risk.equations",
    "ascent.equations",
    "supply.equations",
    "chamber.equations",
)


def equations() -> dict[str, EquationFunction]:
    """Return every equation by its dotted name.

    Returns
    -------
    dict
        ``"lungs.alveolar_po2"`` to the function, and so on; formulas of a choice stand as
        ``"blood.o2_saturation[severinghaus_1979]"``.

    Examples
    --------
    >>> "lungs.alveolar_po2" in equations()
    True
    """
    for module in MODULES:
        importlib.import_module(f"gasphys.{module}")
    order = {name: place for place, name in enumerate(["vapor", *(m.split(".")[0] for m in MODULES)])}
    return dict(sorted(EQUATIONS.items(), key=lambda item: order.get(item[0].split(".")[0], -1)))


def as_records() -> list[dict[str, Any]]:
    """Return every equation as plain data, for JSON.

    Returns
    -------
    list of dict
        Name, kind, result, unit, meaning, arguments (unit, default, possible and valid range),
        LaTeX where it can be traced, constants, sources, provenance.

    Examples
    --------
    >>> next(r["unit"] for r in as_records() if r["name"] == "lungs.alveolar_po2")
    'kPa'
    """
    records = []
    for name, f in equations().items():
        records.append(
            {
                "name": name,
                "kind": f.kind,
                "meaning": (inspect.getdoc(f) or "").split("\n")[0],
                "result": f.result.name,
                "unit": f.result.unit,
                "latex": f.latex() if f.kind == "formula" else "",
                "choices": [list(k) if isinstance(k, tuple) else k for k in getattr(f, "registry", {})],
                "arguments": [
                    {
                        "name": a.name,
                        "quantity": a.quantity.name,
                        "unit": a.quantity.unit,
                        "default": a.default,
                        "possible": list(a.possible),
                        "valid": list(a.valid) if a.valid else None,
                    }
                    for a in f.arguments
                ],
                "constants": [
                    {"name": c.name, "value": float(c), "unit": c.unit, "provenance": c.provenance}
                    for c in f.constants.values()
                ],
                "sources": [cite(key) for key in f.sources],
                "provenance": f.provenance,
            }
        )
    return records
