"""Which equations have a property test: each test says so itself with :func:`covers`."""

from __future__ import annotations

from collections.abc import Callable
from typing import TypeVar

import gasphys as gp

_Test = TypeVar("_Test", bound=Callable[..., object])

#: Registry name to the tests that cover it, filled when test modules are imported.
COVERED: dict[str, list[str]] = {}


def covers(*names: str) -> Callable[[_Test], _Test]:
    """Mark a property test with the registry names of the equations whose behavior it checks.

    A member of a choice is named in full, ``"blood.o2_content[severinghaus_1979]"``; a choice is
    covered when all its members are. Use :func:`members` in a test that runs over all of them.
    """
    unknown = set(names) - set(gp.equations())
    if unknown or not names:
        raise ValueError(f"covers() needs names of the registry, not {sorted(unknown)}")

    def mark(test: _Test) -> _Test:
        for name in names:
            COVERED.setdefault(name, []).append(f"{test.__module__}.{test.__qualname__}")
        return test

    return mark


def members(choice: str) -> list[str]:
    """Return the registry names of every member of a choice."""
    found = [name for name in gp.equations() if name.startswith(f"{choice}[")]
    if not found:
        raise ValueError(f"{choice} is not a choice")
    return found
