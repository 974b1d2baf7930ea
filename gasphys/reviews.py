"""The review: which limit is crossed, when, by how much, and whose limit it is.

Crossings are roots inside the linear pieces, not samples.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Iterable
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.constants import ATMOSPHERE, MSW
from gasphys.doses.carbon_dioxide import surface_equivalent
from gasphys.doses.measures import MEASURES, closed_circuit, outside_fit, piece_doses
from gasphys.errors import ExposureError, unknown_name
from gasphys.exposure import Exposure, Pieces
from gasphys.gas import FORMULAS, Gas
from gasphys.limits import Limit, load
from gasphys.maths import find_root
from gasphys.person import Person
from gasphys.policy import require_provenance, weakest
from gasphys.quantities import CAUTION, attributes, quantity
from gasphys.real_gas import ideal_density

__all__ = ["Lever", "levers", "rests_on_memory", "review"]

Array = NDArray[np.float64]

#: Beyond means beyond by more than rounding.
_ROUNDING = 1e-9


@dataclass(frozen=True)
class Trace:
    """A reviewed quantity along the pieces, ``(..., segment)``.

    Parameters
    ----------
    start, end : array
        Value at the ends of each piece, linear between them; for a dose the value reached.
    within : callable or None
        For a dose: ``(share of the piece) -> value``; None where the quantity is linear.
    reason : str
        Why it cannot be judged; "" where it can.
    status : str
        Status that goes with the reason.
    undefined : array of bool
        Scenarios for which the quantity is not defined, and `why` not.
    why : str
        Reason that goes with them.
    """

    start: Array
    end: Array
    within: Callable[[Array], Array] | None = None
    reason: str = ""
    status: str = "not judged"
    undefined: NDArray[np.bool_] | bool = False
    why: str = ""


def _breathing_gas_po2(exposure: Exposure, pieces: Pieces) -> Trace:
    return Trace(pieces.start_po2, pieces.end_po2)


def _gas_density(exposure: Exposure, pieces: Pieces) -> Trace:
    ends = []
    loop = ~np.isnan(pieces.setpoint)
    for pressure, po2 in ((pieces.start_pressure, pieces.start_po2), (pieces.end_pressure, pieces.end_po2)):
        share = po2 / pressure
        mix = {}
        for formula, field in FORMULAS.items():
            given = pieces.fractions.get(formula, np.zeros_like(share))
            if formula == "O2":
                mix[field] = share
            else:
                rest = 1.0 - pieces.fractions["O2"]
                part = np.where(rest > 0.0, given / np.where(rest > 0.0, rest, 1.0), 0.0)
                mix[field] = np.where(loop, (1.0 - share) * part, given)
        ends.append(
            np.asarray(
                ideal_density.raw(
                    pressure,
                    *(mix[a.name] for a in ideal_density.arguments[1:-1]),
                    0.0,
                )
            )
        )
    # Linear in pressure at a fixed mix, and on a loop at a fixed PO2: both ends tell all.
    return Trace(ends[0], ends[1])


def _compression_rate(exposure: Exposure, pieces: Pieces) -> Trace:
    minutes = np.where(pieces.duration > 0.0, pieces.duration, 1.0)
    rate = np.maximum(pieces.end_pressure - pieces.start_pressure, 0.0) / minutes
    return Trace(rate, rate)


def _dose(measure: str) -> Callable[[Exposure, Pieces], Trace]:
    def trace(exposure: Exposure, pieces: Pieces) -> Trace:
        dose = MEASURES[measure].dose
        each = piece_doses(measure, pieces)
        reached = np.cumsum(each, axis=-1)
        before = reached - each
        if np.isnan(each).any():
            highest = float(np.nanmax(np.maximum(pieces.start_po2, pieces.end_po2)))
            return Trace(
                before,
                reached,
                reason=(
                    f"breathing gas PO2 reaches {highest:.1f} kPa ({highest / ATMOSPHERE:.2f} atm) and the "
                    "table ends at 162.1 kPa (1.60 atm); it is not extrapolated"
                ),
                status="not applicable",
            )
        if measure in _OF_A_DAY and np.max(pieces.times) > 24.0 * 60.0:
            return Trace(before, reached, reason="the exposure lasts longer than the 24 h of this total")
        outside = outside_fit(measure, pieces, np.ones(each.shape[-1], dtype=bool)) >= 1.0 - _ROUNDING
        low = MEASURES[measure].fit[0] / ATMOSPHERE
        why = (
            f"breathing gas PO2 stays below {low:.2g} atm, where the model was fitted"
            if np.any(outside)
            else ""
        )

        def within(share: Array) -> Array:
            partial = replace(
                pieces,
                duration=pieces.duration * share,
                end_po2=pieces.start_po2 + (pieces.end_po2 - pieces.start_po2) * share,
            )
            return dose(before + piece_doses(measure, partial))

        return Trace(dose(before), dose(reached), within, undefined=outside, why=why)

    return trace


def _closed_circuit_o2(exposure: Exposure, pieces: Pieces) -> Trace:
    found = closed_circuit(pieces, np.ones(pieces.duration.shape[-1], dtype=bool))
    duration = np.broadcast_to(pieces.duration, found.on.shape)
    nothing = np.zeros(found.on.shape)
    if found.reason:
        return Trace(nothing, nothing, reason=found.reason, status="not applicable")
    start, end = found.used(nothing, duration), found.used(nothing + 1.0, duration)
    return Trace(start, end, lambda share: found.used(share, duration))


def _co2(exposure: Exposure, pieces: Pieces) -> Trace:
    nothing = np.zeros_like(pieces.duration)
    fraction = pieces.fractions.get("CO2", nothing)
    if not np.any(fraction > 0.0):
        return Trace(nothing, nothing, reason="the CO2 of the breathing gas is not given")
    ends = [surface_equivalent.raw(fraction, p) for p in (pieces.start_pressure, pieces.end_pressure)]
    return Trace(np.asarray(ends[0]), np.asarray(ends[1]))


def _depth_on_helium(exposure: Exposure, pieces: Pieces) -> Trace:
    nothing = np.zeros_like(pieces.duration)
    helium = pieces.fractions.get("He", nothing) > 0.0
    if not np.any(helium & (pieces.duration > 0.0)):
        return Trace(nothing, nothing, reason="no helium is breathed", status="not applicable")
    surface = np.asarray(exposure.surface_pressure, dtype=float)
    surface = surface[..., None] if surface.ndim else surface
    ends = (pieces.start_pressure, pieces.end_pressure)
    start, end = (np.where(helium, np.maximum(p - surface, 0.0) / MSW, 0.0) for p in ends)
    return Trace(start, end)


def _without(what: str) -> Callable[[Exposure, Pieces], Trace]:
    def trace(exposure: Exposure, pieces: Pieces) -> Trace:
        nothing = np.full_like(pieces.duration, np.nan)
        return Trace(nothing, nothing, reason=what)

    return trace


#: How each reviewed quantity follows from an exposure.
TRACES: dict[str, Callable[[Exposure, Pieces], Trace]] = {
    "breathing_gas_po2": _breathing_gas_po2,
    "gas_density": _gas_density,
    "compression_rate": _compression_rate,
    "noaa_cns_single_fraction": _dose("noaa_cns"),
    "noaa_cns_day_fraction": _dose("noaa_cns_day"),
    "uptd": _dose("uptd"),
    "arieli_pulmonary_index": _dose("arieli_pulmonary_index"),
    "usn_closed_circuit_o2_fraction": _closed_circuit_o2,
    "breathing_gas_co2_surface_equivalent": _co2,
    "depth_on_helium": _depth_on_helium,
    "chamber_o2_fraction": _without("no chamber atmosphere is part of the exposure; measure it"),
    "chamber_co2_surface_equivalent": _without("no chamber atmosphere is part of the exposure; measure it"),
}

#: Doses only grow: these traces have one crossing.
_CUMULATIVE = ("noaa_cns_single_fraction", "noaa_cns_day_fraction", "uptd", "arieli_pulmonary_index")

#: Measures whose limits are for a day.
_OF_A_DAY = ("noaa_cns_day", "arieli_pulmonary_index")


def review(
    exposure: Exposure,
    person: Person | None = None,
    role: str = "diver",
    limits: str | os.PathLike[str] | Iterable[Any] = "default",
) -> xr.Dataset:
    """Compare an exposure with published limits.

    Parameters
    ----------
    exposure : Exposure
        Pressure and breathing gas against time.
    person : Person, optional
        Its role is used where `role` is not given otherwise.
    role : {"diver", "patient", "attendant"}
        Whose exposure it is: limits made for others are "not applicable".
    limits : str, path or sequence
        As for :func:`gasphys.limits.load`.

    Returns
    -------
    Dataset
        On dimension ``limit``: ``worst``, ``limit_value``, ``margin`` (positive inside),
        ``time_of_worst``, ``first_crossing`` (NaN never) and ``time_beyond`` in the limit's canonical
        unit and minutes; ``status`` ("beyond", "within", "not applicable", "not judged"),
        ``reason``, ``quantity``, ``comparison``, ``authority``, ``edition``, ``for_whom``,
        ``conditions``, ``provenance``, ``unit``, ``title``. Scenario dimensions follow ``limit``.

    Raises
    ------
    ExposureError
        If the exposure has no piece.
    UnknownNameError
        If the role is unknown.

    Notes
    -----
    Within a limit is not safe: a limit is a convention for the people and conditions it names.
    Crossings are exact for what is linear in a piece, and bracketed roots of the exact ramp
    integral for doses.

    Examples
    --------
    >>> dive = Exposure.start("nitrox 48").travel(depth=25, minutes=2).stay(5)
    >>> found = review(dive)
    >>> str(found.status.sel(limit="po2_training_1995").values)
    'beyond'
    """
    if role not in ("diver", "patient", "attendant"):
        raise unknown_name("role", role, ("diver", "patient", "attendant"))
    if not exposure.part:
        raise ExposureError("the exposure has no piece yet")
    chosen = load(limits)
    for limit in chosen:
        require_provenance(limit.provenance, f"limit {limit.id}")
    pieces = exposure.pieces()
    shape = tuple(len(exposure.coords[d]) for d in exposure.dims)
    traces: dict[str, Trace] = {}
    columns: dict[str, list[Any]] = {name: [] for name in (*_NUMBERS, "status", "reason")}
    for limit in chosen:
        trace = None
        if limit.quantity in TRACES:
            if limit.quantity not in traces:
                traces[limit.quantity] = TRACES[limit.quantity](exposure, pieces)
            trace = traces[limit.quantity]
        found = _judge(limit, trace, pieces, role)
        for name in _NUMBERS:
            columns[name].append(np.broadcast_to(found[name], shape))
        status = np.broadcast_to(np.asarray(found["status"], dtype=object), shape)
        columns["status"].append(status)
        columns["reason"].append(found["reason"])
    return _dataset(exposure, chosen, columns, role, person)


_NUMBERS = ("worst", "limit_value", "margin", "time_of_worst", "first_crossing", "time_beyond")


def _judge(limit: Limit, trace: Trace | None, pieces: Pieces, role: str) -> dict[str, Any]:
    nan = np.full(pieces.duration.shape[:-1], np.nan)
    nothing = dict.fromkeys(_NUMBERS, nan) | {"limit_value": limit.value}
    if trace is None:
        return nothing | {
            "status": "not judged",
            "reason": f"{limit.quantity} does not follow from an exposure",
        }
    if role not in limit.roles:
        reason = f"made for {_listed(limit.roles)}, not for {_with_article(role)}"
        if trace.status == "not applicable" and trace.reason:
            reason = f"{reason}; {trace.reason}"
        shown = nothing if trace.reason or np.any(trace.undefined) else _measured(limit, trace, pieces)
        return shown | {"status": "not applicable", "reason": reason}
    if trace.reason:
        return nothing | {"status": trace.status, "reason": trace.reason}
    found = _measured(limit, trace, pieces)
    beyond = ~np.isnan(found["first_crossing"])
    status = np.where(trace.undefined, "not applicable", np.where(beyond, "beyond", "within"))
    if np.any(trace.undefined):
        kept = {k: v for k, v in found.items() if k != "limit_value"}
        found |= {k: np.where(trace.undefined, np.nan, v) for k, v in kept.items()}
    return found | {"status": status.astype(object), "reason": trace.why}


def _listed(words: tuple[str, ...]) -> str:
    plural = [f"{w}s" for w in words]
    return plural[0] if len(plural) == 1 else f"{', '.join(plural[:-1])} and {plural[-1]}"


def _with_article(word: str) -> str:
    return f"an {word}" if word[0] in "aeiou" else f"a {word}"


def _measured(limit: Limit, trace: Trace, pieces: Pieces) -> dict[str, Any]:
    sign = 1.0 if limit.comparison == "<=" else -1.0
    start, end = np.broadcast_arrays(sign * trace.start, sign * trace.end)
    bound = sign * limit.value
    edge = bound + abs(limit.value) * _ROUNDING
    real = np.broadcast_to(pieces.duration > 0.0, start.shape)
    start, end = np.where(real, start, -np.inf), np.where(real, end, -np.inf)
    times = np.broadcast_to(pieces.times, (*start.shape[:-1], start.shape[-1] + 1))
    # Values in order of time: start, end, start, end, ...; the first largest one is the worst.
    ordered = np.stack([start, end], axis=-1).reshape(*start.shape[:-1], -1)
    moments = np.stack([times[..., :-1], times[..., 1:]], axis=-1).reshape(ordered.shape)
    top = ordered.max(axis=-1, keepdims=True)
    at = np.argmax(ordered >= top - np.abs(top) * _ROUNDING, axis=-1)[..., None]
    worst = top[..., 0]
    time_of_worst = np.take_along_axis(moments, at, axis=-1)[..., 0]
    share = _crossing_share(trace, start, end, edge, bound)
    length = np.broadcast_to(pieces.duration, start.shape)
    rising = (start <= edge) & (end > edge)
    falling = (start > edge) & (end <= edge)
    above = (start > edge) & (end > edge)
    beyond = np.where(above, length, 0.0)
    beyond = np.where(rising, length * (1.0 - share), beyond)
    beyond = np.where(falling, length * share, beyond)
    begins = np.where(
        rising, times[..., :-1] + share * length, np.where(above | falling, times[..., :-1], np.inf)
    )
    first = begins.min(axis=-1)
    return {
        "worst": sign * worst,
        "limit_value": limit.value,
        "margin": bound - worst,
        "time_of_worst": time_of_worst,
        "first_crossing": np.where(np.isinf(first), np.nan, first),
        "time_beyond": beyond.sum(axis=-1),
    }


def _crossing_share(trace: Trace, start: Array, end: Array, edge: float, bound: float) -> Array:
    """Share of each piece at which the limit is met; 0 where the piece does not cross it."""
    crosses = (start <= edge) != (end <= edge)
    with np.errstate(invalid="ignore", divide="ignore"):
        linear = np.where(crosses, (bound - start) / (end - start), 0.0)
    linear = np.clip(linear, 0.0, 1.0)
    if trace.within is None or not crosses.any():
        return linear
    within = trace.within

    def difference(share: Array) -> Array:
        return np.where(crosses, within(share) - bound, share - 0.5)

    root = find_root(difference, np.zeros(start.shape), np.ones(start.shape))
    return np.where(crosses & ~np.isnan(root), root, linear)


def _dataset(
    exposure: Exposure,
    chosen: tuple[Limit, ...],
    columns: dict[str, list[Any]],
    role: str,
    person: Person | None,
) -> xr.Dataset:
    from gasphys import __version__

    dims = ("limit", *exposure.dims)
    texts = {
        "reason": (columns["reason"], "why the limit is not applicable or not judged"),
        "quantity": ([x.quantity for x in chosen], "quantity compared"),
        "comparison": ([x.comparison for x in chosen], "inside means value <= or >= the limit"),
        "authority": ([x.authority for x in chosen], "whose limit it is"),
        "edition": ([x.edition for x in chosen], "edition of the limit"),
        "for_whom": ([", ".join(x.roles) for x in chosen], "whom the limit was made for"),
        "conditions": ([x.conditions for x in chosen], "when the limit holds"),
        "provenance": ([x.provenance for x in chosen], "how the number is known"),
        "unit": ([quantity(x.quantity).unit for x in chosen], "unit of worst, limit_value and margin"),
        "published": ([f"{x.published_value:g} {x.unit}" for x in chosen], "limit as published"),
        "title": ([x.title for x in chosen], "what is limited"),
        "source": ([x.source for x in chosen], "reference"),
    }
    ds = xr.Dataset(
        coords={"limit": np.array([x.id for x in chosen], dtype=str), **exposure.coords},
    )
    long_names = {
        "worst": "value farthest towards or beyond the limit, in the unit of the variable unit",
        "limit_value": "the limit, in the unit of the variable unit",
        "margin": "distance to the limit, positive inside, in the unit of the variable unit",
        "time_of_worst": "time of the worst value since the start",
        "first_crossing": "time the limit is first crossed; not a number: never",
        "time_beyond": "total time beyond the limit",
    }
    for name in _NUMBERS:
        values = np.stack([np.asarray(v, dtype=float) for v in columns[name]])
        attrs: dict[str, Any] = {"long_name": long_names[name]}
        attrs["units"] = "min" if name in ("time_of_worst", "first_crossing", "time_beyond") else "1"
        if attrs["units"] == "1":
            attrs["unit_variable"] = "unit"
        ds[name] = (dims, values, attrs)
    ds["status"] = (
        dims,
        np.stack(columns["status"]).astype(str),
        {"long_name": "beyond, within, not applicable or not judged"},
    )
    for name, (words, meaning) in texts.items():
        ds[name] = ("limit", np.array(words, dtype=str), {"long_name": meaning})
    shape = tuple(len(exposure.coords[d]) for d in exposure.dims)
    minutes = np.broadcast_to(np.asarray(exposure.duration), shape)
    ds["duration"] = (exposure.dims, minutes.copy(), attributes("duration"))
    view = exposure.segment_view()
    ds = ds.merge(view, combine_attrs="override")
    ds.attrs = {
        **view.attrs,
        "Conventions": "CF-1.11",
        "title": f"review of {exposure.attrs.get('title', 'an exposure')}",
        "source": f"gasphys {__version__}, review",
        "history": "\n".join(exposure.history) or "as given",
        "references": "; ".join(dict.fromkeys(x.source for x in chosen)),
        "comment": CAUTION,
        "role": role,
        "person": "" if person is None else person.code,
        "provenance": weakest([x.provenance for x in chosen]),
        "from_memory": ", ".join(x.id for x in chosen if x.provenance.startswith("memory")),
    }
    return ds


# -- levers ----------------------------------------------------------------------------------------


@dataclass(frozen=True)
class Lever:
    """Smallest single changes that bring one gas of an exposure back under a limit.

    Parameters
    ----------
    of : str
        The gas (or loop) that is beyond; "" for a dose, where every piece counts.
    pressure : float or None
        Change of the extreme pressure on that gas [kPa]; None where it does not reach.
    gas : str or None
        What to breathe instead.
    time : float or None
        Minutes less of the stay with the highest dose rate.
    """

    of: str
    pressure: float | None
    gas: str | None
    time: float | None


def levers(exposure: Exposure, limit: Limit) -> list[Lever]:
    """Find the smallest single change of pressure, gas or time that meets a limit.

    Parameters
    ----------
    exposure : Exposure
        One scenario that is beyond the limit.
    limit : Limit
        The limit to come back under.

    Returns
    -------
    list of Lever
        One for each gas that is beyond, in order of time; one for a dose. Empty where nothing is
        beyond.

    Raises
    ------
    ExposureError
        If the exposure holds several scenarios.

    Notes
    -----
    Arithmetic, not advice: nothing else about the exposure is judged when one thing is changed.

    Examples
    --------
    >>> from gasphys.limits import load
    >>> po2 = next(x for x in load() if x.id == "po2_recreational_common")
    >>> dive = Exposure.start("nitrox 48").travel(depth=20, minutes=2)
    >>> lever = levers(dive, po2)[0]
    >>> round(lever.pressure, 2), lever.gas
    (-9.66, 'nitrox 46.4')
    """
    if exposure.dims:
        raise ExposureError("levers need one scenario; pick one first")
    if limit.quantity not in TRACES or not _excess(exposure, limit) > _ROUNDING * abs(limit.value):
        return []
    if limit.quantity in _CUMULATIVE:
        pieces = exposure.pieces()
        trace = TRACES[limit.quantity](exposure, pieces)
        index = int(np.nanargmax(trace.end - trace.start))
        return [_lever(exposure, limit, index, "")]
    found = []
    left = np.ones(len(exposure.part), dtype=bool)
    for index in range(len(exposure.part)):
        if not left[index]:
            continue
        same = _same_gas(exposure, index)
        left &= ~same
        only = _shortened(exposure, same)
        if _excess(only, limit) > _ROUNDING * abs(limit.value):
            found.append(_lever(only, limit, index, exposure.gas_name(index)))
    return found


def _lever(exposure: Exposure, limit: Limit, index: int, of: str) -> Lever:
    same = _same_gas(exposure, index)
    return Lever(
        of,
        _pressure_lever(exposure, limit, same),
        _gas_lever(exposure, limit, index, same),
        _time_lever(exposure, limit),
    )


def _shortened(exposure: Exposure, keep: NDArray[np.bool_]) -> Exposure:
    """Blank out pieces: a piece of no duration is not judged."""
    duration = np.where(keep, exposure.columns["segment_duration"], 0.0)
    return replace(exposure, columns={**exposure.columns, "segment_duration": duration})


def _excess(exposure: Exposure, limit: Limit) -> float:
    """How far beyond the limit; negative inside."""
    pieces = exposure.pieces()
    trace = TRACES[limit.quantity](exposure, pieces)
    if trace.reason:
        return float("nan")
    return -float(np.asarray(_measured(limit, trace, pieces)["margin"]))


def _same_gas(exposure: Exposure, index: int) -> NDArray[np.bool_]:
    same = np.ones(len(exposure.part), dtype=bool)
    for values in exposure.fractions.values():
        same &= np.isclose(values, values[index], rtol=0.0, atol=1e-12)
    setpoint = exposure.columns["setpoint"]
    same &= (setpoint == setpoint[index]) | (np.isnan(setpoint) & np.isnan(setpoint[index]))
    return same


def _solve(change: Callable[[float], Exposure], limit: Limit, most: float) -> float | None:
    """Return the smallest change between 0 and `most` that brings the excess to zero."""

    def excess(x: float) -> float:
        value = _excess(change(x), limit)
        return 1.0 if np.isnan(value) else value

    if not most > 0.0 or excess(most) > 0.0:
        return None
    from scipy.optimize import brentq

    return float(brentq(excess, 0.0, most, xtol=1e-9))


def _lower(pressure: Array, bound: float) -> Array:
    return np.minimum(pressure, bound)


def _higher(pressure: Array, bound: float) -> Array:
    return np.maximum(pressure, bound)


def _pressure_lever(exposure: Exposure, limit: Limit, same: NDArray[np.bool_]) -> float | None:
    if limit.quantity == "compression_rate":
        return None
    c = exposure.columns
    real = same & (c["segment_duration"] > 0.0)
    start, end = c["start_pressure"], c["end_pressure"]
    surface = float(exposure.surface_pressure)
    if limit.comparison == "<=":
        extreme, sign = float(np.where(real, np.maximum(start, end), -np.inf).max()), -1.0
        most, bring = extreme - surface, _lower
    else:
        extreme, sign = float(np.where(real, np.minimum(start, end), np.inf).min()), 1.0
        most, bring = 10.0 * surface, _higher

    def change(x: float) -> Exposure:
        bound = extreme + sign * x
        ends = {
            "start_pressure": np.where(real, bring(start, bound), start),
            "end_pressure": np.where(real, bring(end, bound), end),
        }
        return replace(exposure, columns={**c, **ends})

    found = _solve(change, limit, most)
    return None if found is None else sign * found


def _gas_lever(exposure: Exposure, limit: Limit, index: int, same: NDArray[np.bool_]) -> str | None:
    if not np.isnan(exposure.columns["setpoint"][index]) or limit.quantity == "compression_rate":
        return None
    zero = np.zeros(len(exposure.part))
    mix = {k: exposure.fractions.get(k, zero) for k in ("O2", "N2", "He")}
    # Density: helium for nitrogen, the oxygen stays. Oxygen: nitrogen takes its place or gives it.
    if limit.quantity == "gas_density":
        takes, gives = "He", "N2"
    elif limit.comparison == "<=":
        takes, gives = "N2", "O2"
    else:
        takes, gives = "O2", "N2"

    def change(x: float) -> Exposure:
        moved = {
            takes: np.where(same, mix[takes] + x, mix[takes]),
            gives: np.where(same, mix[gives] - x, mix[gives]),
        }
        return replace(exposure, fractions={**exposure.fractions, **moved})

    found = _solve(change, limit, float(mix[gives][index]))
    if found is None:
        return None
    new = change(found).fractions
    # Rounded to a tenth of a percent on the side of the limit.
    exact = 1000.0 * float(new[takes][index])
    rounded = np.ceil(exact - 1e-6) / 1000.0
    shares = {k: float(v[index]) for k, v in exposure.fractions.items()}
    shares[gives] = shares.get(gives, 0.0) - (rounded - shares.get(takes, 0.0))
    shares[takes] = rounded
    if shares[gives] < 0.0:
        return None
    fields = {FORMULAS[k]: round(v, 9) for k, v in shares.items() if k != "N2"}
    return str(Gas(**fields))


def _time_lever(exposure: Exposure, limit: Limit) -> float | None:
    if limit.quantity not in _CUMULATIVE:
        return None
    pieces = exposure.pieces()
    trace = TRACES[limit.quantity](exposure, pieces)
    each = trace.end - trace.start
    flat = (pieces.start_pressure == pieces.end_pressure) & (each > 0.0)
    if not flat.any():
        return None
    # The stay with the highest dose rate gives most for a minute less.
    rate = np.where(flat, each / np.where(flat, pieces.duration, 1.0), -np.inf)
    candidates = np.flatnonzero(rate >= rate.max() * (1.0 - 1e-9))
    duration = exposure.columns["segment_duration"]

    def change(x: float) -> Exposure:
        left, shorter = x, duration.copy()
        for k in candidates[::-1]:
            cut = min(left, shorter[k])
            shorter[k] -= cut
            left -= cut
        return replace(exposure, columns={**exposure.columns, "segment_duration": shorter})

    return _solve(change, limit, float(duration[candidates].sum()))


def rests_on_memory(found: xr.Dataset) -> list[str]:
    """Return the limits of a review whose numbers are from memory.

    Parameters
    ----------
    found : Dataset
        A review.

    Returns
    -------
    list of str
        A line a limit, for those that were judged.

    Examples
    --------
    >>> dive = Exposure.start("air").stay(1)
    >>> any("Mitchell" in line for line in rests_on_memory(review(dive)))
    True
    """
    lines = []
    for name in found["limit"].values:
        row = found.sel(limit=name)
        status = set(np.ravel(row["status"].values))
        if str(row["provenance"].values).startswith("memory") and status & {"beyond", "within"}:
            lines.append(f"{row['published'].values} ({row['authority'].values}, {row['provenance'].values})")
    return lines
