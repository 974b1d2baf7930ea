"""Respiratory and decompression physiology under pressure.

Model estimates for trained people. Local codes, the manual in force, the physician and the
supervisor in charge come first. Never the sole basis for a dive or a treatment.

An exposure (pressure, gas and workload against time) goes in; labelled datasets and a review come
out; every number can show its working. Everything is imported on first use.
"""

from __future__ import annotations

import importlib
from typing import Any

__version__ = "0.1.0"

#: Public name to the module that defines it; modules stand for themselves.
_NAMES = {
    "Gas": "gas",
    "Exposure": "exposure",
    "Person": "person",
    "GasphysError": "errors",
    "ValidityWarning": "errors",
    "convert": "units",
    "equations": "registry",
    "explain": "explanation",
    "validity": "policy",
    "provenance": "policy",
    "review": "reviews",
    "compare": "comparison",
}

_MODULES = (
    "ascent",
    "blood",
    "breathing",
    "breathing_gas",
    "bubbles",
    "chamber",
    "constants",
    "doses",
    "errors",
    "exposure",
    "gas",
    "gas_exchange",
    "laws",
    "limits",
    "lungs",
    "person",
    "plots",
    "policy",
    "quantities",
    "real_gas",
    "reviews",
    "risk",
    "scenarios",
    "schedules",
    "sources",
    "strategies",
    "supply",
    "surroundings",
    "tissues",
    "units",
    "vapor",
    "widgets",
)

__all__ = ["__version__", *_NAMES, *_MODULES]


def __getattr__(name: str) -> Any:
    if name in _NAMES:
        value = getattr(importlib.import_module(f"gasphys.{_NAMES[name]}"), name)
    elif name in _MODULES:
        value = importlib.import_module(f"gasphys.{name}")
    else:
        raise AttributeError(f"module 'gasphys' has no attribute {name!r}")
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted(__all__)
