"""What a set tolerates: M-values and ceilings of states, for any batch.

States are ``(..., compartment, inert_gas)``, or ``(..., compartment, inert_gas, time)`` with
``time=True``; pressures then end in ``time``.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gasphys.constants import FSW
from gasphys.exposure import Pieces
from gasphys.tissues.equations import ceiling_pressure, m_value, mixed_m_value_a, mixed_m_value_b
from gasphys.tissues.sets import TissueSet

__all__ = ["Judged", "ceilings", "coefficients", "judge", "m_values", "short_deep"]

Array = NDArray[np.float64]

#: A compartment is at its limit up to this share of rounding.
ROUNDING = 1e-9


def _gases(model: TissueSet, state: Array, time: bool) -> list[tuple[Array, Array, Array]]:
    """Return pressure, a and b of each gas, ``(..., compartment)`` or ``(..., compartment, time)``."""
    rows = []
    for g in range(len(model.inert_gases)):
        a, b = model.a[..., g], model.b[..., g]
        if time:
            rows.append((state[..., g, :], a[..., None], b[..., None]))
        else:
            rows.append((state[..., g], a, b))
    return rows


def coefficients(model: TissueSet, state: Array, *, time: bool = False) -> tuple[Array, Array, Array]:
    """Return the summed pressure and the coefficients a and b of states.

    Parameters
    ----------
    model : TissueSet
        A set that weighs a and b by tension, or one of a single gas.
    state : array
        States [kPa].
    time : bool
        Whether a time axis stands last.

    Returns
    -------
    tuple of array
        Summed pressure and a [kPa], b [1], without the gas axis.

    Examples
    --------
    >>> from gasphys.tissues.sets import load
    >>> state = np.array([[120.0, 80.0]])
    >>> coefficients(load("buhlmann_1995_a", compartments=["4"]), state)[1].round(3)
    array([87.204])
    """
    total, a, b = _weighed(model, state, time)
    return total, np.broadcast_to(a, total.shape), np.broadcast_to(b, total.shape)


def _weighed(model: TissueSet, state: Array, time: bool) -> tuple[Array, Array, Array]:
    """Return summed pressure with a and b, these of their own shape."""
    (total, a, b), *others = _gases(model, state, time)
    for pressure, own_a, own_b in others:
        a = mixed_m_value_a.raw(total, pressure, a, own_a)
        b = mixed_m_value_b.raw(total, pressure, b, own_b)
        total = total + pressure
    return total, a, b


def _single(model: TissueSet, state: Array, time: bool) -> list[tuple[Array, Array, Array]]:
    """Return summed pressure with the a and b of each gas that is present; NaN where it is not."""
    rows = _gases(model, state, time)
    total = sum((p for p, _, _ in rows[1:]), rows[0][0])
    found = []
    for g, (pressure, a, b) in enumerate(rows):
        present = pressure > 0.0 if g else (pressure > 0.0) | (total <= 0.0)
        found.append((total, np.where(present, a, np.nan), np.broadcast_to(b, total.shape)))
    return found


def m_values(model: TissueSet, state: Array, pressure: Any, *, time: bool = False) -> tuple[Array, Array]:
    """Return the summed inert gas pressure of each compartment and its M-value.

    Parameters
    ----------
    model : TissueSet
        The set.
    state : array
        States [kPa].
    pressure : array
        Ambient pressure [kPa], ``(...)`` or ``(..., time)``.
    time : bool
        Whether a time axis stands last.

    Returns
    -------
    tuple of array
        ``(..., compartment)`` or ``(..., compartment, time)`` [kPa]; M is NaN without a limit.

    Examples
    --------
    >>> from gasphys.tissues.sets import load
    >>> model = load("workman_1965", compartments=["40"])
    >>> m_values(model, np.array([[100.0, 0.0]]), 101.325)[1].round(2)
    array([171.95])
    """
    ambient = np.asarray(pressure, dtype=float)
    ambient = ambient[..., None, :] if time else ambient[..., None]
    if model.mixed_gas == "smallest" and len(model.inert_gases) > 1:
        rows = _single(model, state, time)
        values = [m_value.raw(ambient, a, b) for _, a, b in rows]
        smallest = values[0]
        for one in values[1:]:
            smallest = np.fmin(smallest, one)
        return rows[0][0], np.asarray(smallest)
    total, a, b = _weighed(model, state, time)
    return total, np.asarray(m_value.raw(ambient, a, b))


def ceilings(model: TissueSet, state: Array, gradient: Any = 1.0, *, time: bool = False) -> Array:
    """Return the lowest ambient pressure each compartment tolerates.

    Parameters
    ----------
    model : TissueSet
        The set.
    state : array
        States [kPa].
    gradient : float or array
        Share of the tolerated supersaturation that is used [1].
    time : bool
        Whether a time axis stands last.

    Returns
    -------
    array
        ``(..., compartment)`` or ``(..., compartment, time)`` [kPa]; NaN without a limit, and for sets of
        surfacing values only.

    Examples
    --------
    >>> from gasphys.tissues.sets import load
    >>> model = load("buhlmann_1995_a", compartments=["4"])
    >>> ceilings(model, np.array([[120.0, 80.0]])).round(4)
    array([85.5467])
    """
    if model.surfacing_only:
        return np.full(np.delete(state.shape, -2 if time else -1), np.nan)
    if model.mixed_gas == "smallest" and len(model.inert_gases) > 1:
        highest = np.nan
        for total, a, b in _single(model, state, time):
            highest = np.fmax(highest, ceiling_pressure.raw(total, a, b, gradient))
        return np.asarray(highest)
    return np.asarray(ceiling_pressure.raw(*coefficients(model, state, time=time), gradient))


@dataclass(frozen=True)
class Judged:
    """A row of states against their limits.

    Parameters
    ----------
    total, limit : array
        Summed pressure and M-value ``(..., compartment, time)`` [kPa].
    ceiling : array
        ``(..., time)`` [kPa].
    controlling : array of int
        Compartment that sets the ceiling, ``(..., time)``; -1 where there is none.
    """

    total: Array
    limit: Array
    ceiling: Array
    controlling: NDArray[np.int64]


def judge(model: TissueSet, states: Array, pressure: Array, surface: Any, gradient: Any = 1.0) -> Judged:
    """Judge a row of states.

    Parameters
    ----------
    model : TissueSet
        The set.
    states : array
        ``(..., compartment, inert_gas, time)`` [kPa].
    pressure : array
        Ambient pressure ``(..., time)`` [kPa].
    surface : float or array
        Pressure at the surface ``(...)`` [kPa].
    gradient : float
        Share of the tolerated supersaturation used for the ceiling [1].

    Returns
    -------
    Judged
        For a set of surfacing values the ceiling is the surface where every compartment may surface and
        NaN where not: the model does not say how deep to stop.

    Examples
    --------
    >>> from gasphys.tissues.sets import load
    >>> model = load("us_navy_1957")
    >>> judge(model, np.full((6, 1, 1), 80.0), np.array([101.325]), 101.325).controlling.tolist()
    [4]
    """
    total, limit = m_values(model, states, pressure, time=True)
    if model.surfacing_only:
        share = total / limit
        controlling = _largest(share)
        top = np.max(np.where(np.isnan(share), -np.inf, share), axis=-2)
        surface = np.asarray(surface, dtype=float)[..., None]
        ceiling = np.where(top <= 1.0 + ROUNDING, surface, np.nan)
        return Judged(total, limit, ceiling, controlling)
    each = ceilings(model, states, gradient, time=True)
    controlling = _largest(each)
    known = np.where(np.isnan(each), -np.inf, each)
    highest = known.max(axis=-2)
    return Judged(total, limit, np.where(np.isinf(highest), np.nan, highest), controlling)


def _largest(values: Array) -> NDArray[np.int64]:
    known = np.where(np.isnan(values), -np.inf, values)
    index = np.argmax(known, axis=-2)
    return np.where(np.isinf(known.max(axis=-2)), -1, index).astype(np.int64)


def short_deep(model: TissueSet, pieces: Pieces, surface: Any) -> NDArray[np.bool_]:
    """Return which scenarios fall into the short deep range in which the set has no trustworthy limit.

    Parameters
    ----------
    model : TissueSet
        The set.
    pieces : Pieces
        From :meth:`gasphys.Exposure.pieces`.
    surface : float or array
        Pressure at the surface [kPa].

    Returns
    -------
    array of bool
        ``(...)``.

    Notes
    -----
    Each excursion from the surface counts on its own. Bottom time runs from leaving the surface to the last
    instant within 1 fsw of its deepest point, a choice of this library.

    Examples
    --------
    >>> from gasphys.exposure import Exposure
    >>> from gasphys.tissues.sets import load
    >>> dive = Exposure.start("air", depth_unit="fsw").travel(depth=120, rate=75).stay(10)
    >>> bool(short_deep(load("thalmann_vval18"), dive.pieces(), 101.325))
    True
    """
    rule = model.short_deep
    lead = np.broadcast_shapes(pieces.times.shape[:-1], pieces.start_pressure.shape[:-1], np.shape(surface))
    found = np.zeros(lead, dtype=bool)
    if rule is None:
        return found
    surface = np.broadcast_to(np.asarray(surface, dtype=float), lead)
    n = pieces.duration.shape[-1]
    start, end = (np.broadcast_to(v, (*lead, n)) for v in (pieces.start_pressure, pieces.end_pressure))
    times = np.broadcast_to(pieces.times, (*lead, n + 1))
    edge, slack = rule.depth * (1.0 - ROUNDING), float(FSW)
    deep = (np.maximum(start, end) - surface[..., None] >= edge).any(axis=-1)
    for i in np.ndindex(lead):
        if deep[i]:
            found[i] = any(
                depth >= edge and minutes <= rule.bottom_time * (1.0 + ROUNDING)
                for depth, minutes in _excursions(start[i] - surface[i], end[i] - surface[i], times[i], slack)
            )
    return found


def _excursions(start: Array, end: Array, times: Array, slack: float) -> list[tuple[float, float]]:
    """Return the greatest depth [kPa] and the bottom time [min] of each excursion from the surface."""
    found: list[tuple[float, float]] = []
    first: int | None = None
    for k in range(len(start)):
        if first is None and max(start[k], end[k]) > slack:
            first = k
        if first is not None and (end[k] <= slack or k == len(start) - 1):
            begins, ends = start[first : k + 1], end[first : k + 1]
            deepest = max(begins.max(), ends.max())
            # The ascent begins where the last piece that is still within the slack ends.
            at = max(
                np.flatnonzero(ends >= deepest - slack).max(initial=-1) + 1,
                np.flatnonzero(begins >= deepest - slack).max(initial=0),
            )
            found.append((float(deepest), float(times[first + at] - times[first])))
            first = None
    return found
