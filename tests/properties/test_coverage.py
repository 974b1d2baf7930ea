"""Every equation has a property test; each such test declares what it covers."""

from __future__ import annotations

import importlib
from pathlib import Path

import gasphys as gp

from . import coverage

#: Equations without a property worth testing, and why. Empty is what it should be.
WITHOUT_PROPERTY: dict[str, str] = {}

FOLDER = Path(__file__).parent


def _covered() -> set[str]:
    for path in sorted(FOLDER.rglob("test_*.py")):
        parts = path.relative_to(FOLDER).with_suffix("").parts
        importlib.import_module(".".join([__package__, *parts]))
    # One formula may stand under several names (an identity, a shared member).
    registry = gp.equations()
    reached = {id(registry[name]) for name in coverage.COVERED}
    found = {name for name, f in registry.items() if id(f) in reached}
    for name, f in registry.items():
        if f.kind == "choice" and set(coverage.members(name)) <= found:
            found.add(name)
    return found


def test_every_equation_has_a_property_test() -> None:
    missing = set(gp.equations()) - _covered() - set(WITHOUT_PROPERTY)
    assert not missing, f"no property test covers {sorted(missing)}; see tests/properties/coverage.py"


def test_exceptions_are_still_exceptions() -> None:
    assert not set(WITHOUT_PROPERTY) & _covered()
    assert set(WITHOUT_PROPERTY) <= set(gp.equations())
