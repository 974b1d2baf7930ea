"""Sample inputs for every equation, chosen from the usual ranges of its quantities."""

from __future__ import annotations

import functools
from collections.abc import Callable, Iterable
from typing import Any

import numpy as np
import pytest

import gasphys as gp
from gasphys.errors import GasphysError
from gasphys.gas import FORMULAS
from gasphys.shell import Argument
from gasphys.units import UNITS, Unit, unit

REGISTRY = gp.equations()


#: What a choice spreads into several arguments, by the name of its argument.
SPREAD = {"gas": gp.Gas(oxygen=0.18, helium=0.4, argon=0.01), "pair": "O2-He"}


def _once(kinds: tuple[str, ...]) -> dict[str, Any]:
    """Return the equations of these kinds, each under its first name."""
    found: dict[int, tuple[str, Any]] = {}
    for name, f in REGISTRY.items():
        if f.kind in kinds:
            found.setdefault(id(f), (name, f))
    return dict(found.values())


#: Every equation that computes; a choice only passes on.
LEAVES = _once(("formula", "inverse", "table"))
FORMULAS_ONLY = _once(("formula",))
CHOICES = _once(("choice",))


def quiet_range(argument: Argument) -> tuple[float, float]:
    """Return the usual range of an argument as far as the equation takes it without a word."""
    low, high = argument.quantity.usual
    low, high = max(low, argument.low), min(high, argument.high)
    return (low, high) if low < high else (argument.low, argument.high)


def _draw(arguments: tuple[Argument, ...], k: int) -> dict[str, float]:
    # Additive recurrence on powers of the generalized golden ratio: spread out, no two alike, and
    # irrational, so that no sample falls on a node or a kink.
    ratio = 2.0
    for _ in range(60):
        ratio = (1.0 + ratio) ** (1.0 / (len(arguments) + 1))
    values = {}
    for n, argument in enumerate(arguments, start=1):
        low, high = quiet_range(argument)
        values[argument.name] = low + (0.5 + k * ratio**-n) % 1.0 * (high - low)
    gases = [a.name for a in arguments if a.name in FORMULAS.values()]
    if len(gases) > 2:
        total = sum(values[g] for g in gases)
        values |= {g: values[g] / total for g in gases}
    return values


@functools.cache
def _samples(name: str, count: int) -> tuple[tuple[tuple[str, float], ...], ...]:
    f = LEAVES[name]
    found: list[tuple[tuple[str, float], ...]] = []
    for k in range(1, 400):
        if f.kind == "inverse":
            # A value that the forward equation reaches.
            values = _draw(f.forward.arguments, k)
            given = f.arguments[0].name
            values[given] = float(np.asarray(f.forward.raw(*values.values())))
            values = {a.name: values[a.name] for a in f.arguments}
        else:
            values = _draw(f.arguments, k)
        try:
            with gp.validity("raise"):
                result = f(**values)
        except GasphysError:
            continue
        if np.isfinite(result):
            found.append(tuple(values.items()))
        if len(found) == count:
            return tuple(found)
    raise AssertionError(f"{name}: no {count} samples in the usual ranges stay within validity")


def samples(name: str, count: int = 3) -> list[dict[str, float]]:
    """Return inputs of an equation that it takes without a word."""
    return [dict(s) for s in _samples(name, count)]


def columns(name: str, count: int = 3) -> dict[str, np.ndarray]:
    """Return the samples as one array an argument."""
    rows = samples(name, count)
    return {a: np.array([row[a] for row in rows]) for a in rows[0]}


def _atom(like: Unit, avoid: str) -> str:
    for other in UNITS.values():
        same_kind = other.is_like(like) and other.gauge == like.gauge
        if same_kind and not other.offset and other.factor != like.factor and other.name != avoid:
            return other.name
    raise AssertionError(f"no second unit of the kind of {avoid}")


def other_unit(name: str) -> str:
    """Return another unit of the same kind."""
    if name == "degrees_north":
        return name
    if name in UNITS:
        return "K" if name == "degC" else _atom(UNITS[name], name)
    first = next(part for part in sorted(UNITS, key=len, reverse=True) if name.startswith(part))
    return _atom(UNITS[first], first) + name[len(first) :]


def wrong_units(name: str) -> list[str]:
    """Return units of another kind, a depth for a pressure among them."""
    own = unit(name)
    found = ["kPa" if own.gauge or not own.is_like(unit("kPa")) else "min"]
    if own.is_like(unit("kPa")) and not own.gauge:
        found += ["msw", "fsw"]
    if name == "degC":
        found.append("delta_degC")
    return found


each = pytest.mark.parametrize("name", LEAVES)


def each_argument(test: Callable[[str, str], None]) -> Callable[[str], None]:
    """Run a test for every argument of every equation; one item an equation keeps the run short."""

    def over_all(name: str) -> None:
        for argument in LEAVES[name].arguments:
            try:
                test(name, argument.name)
            except BaseException as error:
                error.add_note(f"{name}, argument {argument.name}")
                raise

    over_all.__name__, over_all.__doc__ = test.__name__, test.__doc__
    return each(over_all)


def for_all(names: Iterable[str]) -> Callable[[Callable[[str], None]], Callable[[], None]]:
    """Run a quick test for every name as one item, and report every name that fails."""

    def decorate(test: Callable[[str], None]) -> Callable[[], None]:
        def over_all() -> None:
            failed = {}
            for name in names:
                try:
                    test(name)
                except Exception as error:
                    failed[name] = f"{type(error).__name__}: {error}"
            assert not failed, "\n".join(f"{name}: {text}" for name, text in failed.items())

        over_all.__name__, over_all.__doc__ = test.__name__, test.__doc__
        return over_all

    return decorate
