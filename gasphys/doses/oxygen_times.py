"""Permitted times on oxygen: the NOAA table, conventions on intervals, the US Navy's closed-circuit limits.

PO2 is that of the dry breathing gas. No number here is a probability of a seizure.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gasphys.constants import ATMOSPHERE
from gasphys.doses.published_tables import ROUNDING, column, next_row, no_slope, published, step
from gasphys.equation import EquationFunction, Value, choice, formula, table
from gasphys.errors import NotTraceable
from gasphys.maths import exp, log, mean_log, where
from gasphys.policy import weakest

__all__ = [
    "noaa_cns_after_interval",
    "noaa_cns_fraction",
    "noaa_cns_ramp",
    "oxygen_time_limit",
    "usn_closed_circuit_o2_limit",
    "usn_remaining_o2_time",
]

Array = NDArray[np.float64]

# -- NOAA ------------------------------------------------------------------------------------------

_NODES = column("noaa_oxygen_limits", "po2_atm") * float(ATMOSPHERE)
_TIMES = {
    "single": column("noaa_oxygen_limits", "single_min"),
    "day": column("noaa_oxygen_limits", "day_min"),
}
_KNOWN = {
    total: weakest([str(r[f"{total}_provenance"]) for r in published("noaa_oxygen_limits")])
    for total in _TIMES
}


def _rate(po2: Any, rule: str, total: str) -> Array:
    """Reciprocal of the permitted time [1/min]; zero below the table, NaN above it."""
    nodes, times = _NODES, _TIMES[total]
    po2 = np.asarray(po2, dtype=float)
    inside = (po2 >= nodes[0] * (1.0 - ROUNDING)) & (po2 <= nodes[-1] * (1.0 + ROUNDING))
    clipped = np.clip(np.where(np.isnan(po2), nodes[0], po2), nodes[0], nodes[-1])
    if rule == "step":
        permitted = times[next_row(clipped, nodes)]
    else:
        permitted = np.interp(clipped, nodes, times)
    rate = np.where(inside, 1.0 / permitted, 0.0)
    return np.where((po2 > nodes[-1] * (1.0 + ROUNDING)) | np.isnan(po2), np.nan, rate)


def _constant(rule: str, total: str) -> Callable[..., Any]:
    def evaluate(po2: Any, duration: Any) -> Any:
        return np.asarray(duration, dtype=float) * _rate(po2, rule, total)

    return evaluate


def ramp_fraction(start: Any, end: Any, duration: Any, rule: str, total: str) -> Array:
    """Integrate the reciprocal of the permitted time over linear ramps, exactly, split at nodes.

    Parameters
    ----------
    start, end : array
        PO2 at the ends [kPa].
    duration : array
        Length of the ramp [min].
    rule, total : str
        Rule between nodes, column of the table.

    Returns
    -------
    array
        Share of the permitted time used [1]; NaN where the ramp leaves the table at its top.

    Examples
    --------
    >>> round(float(ramp_fraction(162.12, 151.9875, 10.0, "linear", "single")), 6)
    0.130777
    """
    nodes, times = _NODES, _TIMES[total]
    start, end, duration = (np.asarray(v, dtype=float) for v in (start, end, duration))
    start, end, duration = np.broadcast_arrays(start, end, duration)
    low, high = np.minimum(start, end), np.maximum(start, end)
    flat = high - low <= ROUNDING * high
    minutes_per_kpa = np.where(flat, 0.0, duration / np.where(flat, 1.0, high - low))
    result = np.zeros(low.shape)
    for k in range(len(nodes) - 1):
        a, b = np.clip(low, nodes[k], nodes[k + 1]), np.clip(high, nodes[k], nodes[k + 1])
        if rule == "step":
            mean = 1.0 / times[k + 1]
        else:
            slope = (times[k + 1] - times[k]) / (nodes[k + 1] - nodes[k])
            mean = mean_log(times[k] + slope * (a - nodes[k]), times[k] + slope * (b - nodes[k]))
        result = result + minutes_per_kpa * (b - a) * mean
    result = np.where(flat, duration * _rate(high, rule, total), result)
    return np.where(high > nodes[-1] * (1.0 + ROUNDING), np.nan, result)


def _ramp(rule: str, total: str) -> Callable[..., Any]:
    def evaluate(start_po2: Any, end_po2: Any, duration: Any) -> Any:
        return ramp_fraction(start_po2, end_po2, duration, rule, total)

    return evaluate


def _slope(rule: str, total: str) -> Callable[[str], Callable[..., Any]]:
    nodes, times = _NODES, _TIMES[total]

    def of(name: str) -> Callable[..., Any]:
        def by_duration(po2: Any, duration: Any) -> Any:
            return _rate(po2, rule, total) + 0.0 * np.asarray(duration)

        def by_po2(po2: Any, duration: Any) -> Any:
            po2 = np.asarray(po2, dtype=float)
            at_node = np.isclose(po2[..., None], nodes, rtol=1e-12, atol=0.0)
            jumps = np.append(np.diff(times) != 0.0, True) if rule == "step" else np.ones(len(nodes), bool)
            hit = (at_node & jumps).any(axis=tuple(range(po2.ndim)))
            if hit.any():
                node, what = nodes[hit][0], "jumps" if rule == "step" else "has a kink"
                raise NotTraceable(
                    f"NOAA oxygen limits: no derivative at the node {node:g} kPa "
                    f"({node / ATMOSPHERE:.1f} atm), where the permitted time {what}"
                )
            if rule == "step":
                return 0.0 * po2 * np.asarray(duration)
            row = np.clip(np.searchsorted(nodes, po2) - 1, 0, len(nodes) - 2)
            slope = (times[row + 1] - times[row]) / (nodes[row + 1] - nodes[row])
            inside = (po2 > nodes[0]) & (po2 < nodes[-1])
            return np.where(inside, -np.asarray(duration) * slope * _rate(po2, rule, total) ** 2, 0.0)

        return by_po2 if name == "po2" else by_duration

    return of


def _ramp_slope(rule: str, total: str) -> Callable[[str], Callable[..., Any]]:
    def of(name: str) -> Callable[..., Any]:
        def by(start_po2: Any, end_po2: Any, duration: Any) -> Any:
            start, end, minutes = (np.asarray(v, dtype=float) for v in (start_po2, end_po2, duration))
            whole = ramp_fraction(start, end, minutes, rule, total)
            if name == "duration":
                return whole / minutes
            if np.any(start == end):
                raise NotTraceable("NOAA oxygen limits: no derivative of a ramp of equal ends by one end")
            mean = whole / minutes
            edge = _rate(end if name == "end_po2" else start, rule, total)
            sign = 1.0 if name == "end_po2" else -1.0
            return sign * minutes * (edge - mean) / (end - start)

        return by

    return of


def _explain(rule: str, total: str) -> Callable[..., str]:
    def text(**inputs: float) -> str:
        shown = []
        for name in ("po2", "start_po2", "end_po2"):
            if name in inputs:
                rate = float(_rate(inputs[name], rule, total))
                atm = inputs[name] / ATMOSPHERE
                limit = "no limit" if rate == 0.0 else f"{1.0 / rate:.4g} min"
                shown.append(f"{atm:.4g} atm permits {limit}")
        column_name = "single exposure" if total == "single" else "24-h total"
        return (
            f"noaa_cns_fraction = minutes / permitted minutes; {column_name}, {rule} rule: {'; '.join(shown)}"
        )

    return text


_PO2_MAX = 1.6 * float(ATMOSPHERE) * (1.0 + ROUNDING)

_RULES = ("step", "linear")


def _members(ramp: bool) -> dict[tuple[str, str], EquationFunction]:
    def constant_body(po2: Value, duration: Value) -> Value:
        """Share of the NOAA oxygen exposure time used at a constant PO2.

        Notes
        -----
        One column of the table and one rule between its rows.
        """

    def ramp_body(start_po2: Value, end_po2: Value, duration: Value) -> Value:
        """Share of the NOAA oxygen exposure time used on a linear ramp.

        Notes
        -----
        The exact integral, split where the ramp crosses a row of the table.
        """

    found: dict[tuple[str, str], EquationFunction] = {}
    name = "noaa_cns_ramp" if ramp else "noaa_cns_fraction"
    names = ("start_po2", "end_po2") if ramp else ("po2",)
    for rule in _RULES:
        for total in _TIMES:
            found[rule, total] = table(
                result="noaa_cns_fraction",
                quantities={} if ramp else {"po2": "breathing_gas_po2"},
                refuse=dict.fromkeys(names, (0.0, _PO2_MAX)),
                source="noaa_manual",
                provenance=_KNOWN[total],
                array=_ramp(rule, total) if ramp else _constant(rule, total),
                slope=_ramp_slope(rule, total) if ramp else _slope(rule, total),
                explain=_explain(rule, total),
                register=False,
                name=f"doses.{name}[{rule},{total}]",
            )(ramp_body if ramp else constant_body)
    return found


@choice(option=("rule", "total"), registry=_members(ramp=False))
def noaa_cns_fraction(po2: Value, duration: Value, rule: str = "step", total: str = "single") -> Value:
    """Share of the NOAA oxygen exposure time used at a constant PO2.

    Notes
    -----
    Minutes over permitted minutes. Rule "step" reads the next higher row (manual practice),
    "linear" interpolates the permitted time (common practice); total "single" is the column for one
    exposure, "day" that for 24 h. Below 0.60 atm nothing is counted. Above 1.60 atm the table ends:
    an error, never an extrapolation. Made for working divers, not for resting patients; adding
    fractions is a rule of the community, not of NOAA. The endpoint is not a seizure probability.

    Examples
    --------
    >>> round(noaa_cns_fraction("1.6 atm", 45.0) + noaa_cns_fraction("1.3 atm", 60.0), 4)
    1.3333
    """


@choice(option=("rule", "total"), registry=_members(ramp=True))
def noaa_cns_ramp(
    start_po2: Value, end_po2: Value, duration: Value, rule: str = "step", total: str = "single"
) -> Value:
    """Share of the NOAA oxygen exposure time used while PO2 changes linearly in time.

    Notes
    -----
    The exact integral of the reciprocal of the permitted time, split at the rows of the table.
    See :func:`noaa_cns_fraction` for the rules and for what the number does not mean.

    Examples
    --------
    >>> round(noaa_cns_ramp("1.6 atm", "1.5 atm", 10.0, rule="linear"), 6)
    0.130777
    """


# -- Conventions on what an interval takes off -----------------------------------------------------

_interval: dict[str, Any] = {
    "result": "noaa_cns_fraction",
    "quantities": {"fraction": "noaa_cns_fraction"},
    "source": "oxygen_clock_practice",
    "provenance": "secondary",
    "register": False,
}


@formula(**_interval)
def _half_time_90_min(fraction: Value, surface_interval: Value) -> Value:
    """Half of the fraction is gone after 90 min."""
    return fraction * exp(-log(2.0) * surface_interval / 90.0)


@formula(**_interval)
def _half_time_120_min(fraction: Value, surface_interval: Value) -> Value:
    """Half of the fraction is gone after 2 h."""
    return fraction * exp(-log(2.0) * surface_interval / 120.0)


@formula(**_interval)
def _reset_12_h(fraction: Value, surface_interval: Value) -> Value:
    """Nothing is left after 12 h; before that all of it."""
    # A missing interval leaves a missing result.
    return fraction * where(surface_interval < 720.0, 1.0, 0.0) + 0.0 * surface_interval


_WHOLE = np.append(np.arange(90.0, 720.0, 90.0), 720.0)


def _whole_periods(fraction: Any, surface_interval: Any) -> Any:
    minutes = np.asarray(surface_interval, dtype=float)
    periods = np.floor(minutes / 90.0 * (1.0 + ROUNDING))
    left = np.where(minutes >= 720.0 * (1.0 - ROUNDING), 0.0, 0.5**periods)
    return np.asarray(fraction, dtype=float) * np.where(np.isnan(minutes), np.nan, left)


def _whole_slope(name: str) -> Callable[..., Any]:
    def by(fraction: Any, surface_interval: Any) -> Any:
        if name == "fraction":
            return _whole_periods(1.0, surface_interval) + 0.0 * np.asarray(fraction)
        flat = no_slope("whole 90-min periods", _WHOLE)("surface_interval")(surface_interval)
        return flat * np.asarray(fraction)

    return by


@table(
    result="noaa_cns_fraction",
    quantities={"fraction": "noaa_cns_fraction"},
    source="oxygen_clock_practice",
    provenance="secondary",
    array=_whole_periods,
    slope=_whole_slope,
    explain=lambda **inputs: "noaa_cns_fraction halved for each whole 90 min, none left after 12 h",
    register=False,
    name="doses.noaa_cns_after_interval[whole_90_min_periods]",
)
def _whole_90_min_periods(fraction: Value, surface_interval: Value) -> Value:
    """Half of the fraction is gone after each whole period of 90 min, all of it after 12 h."""


@choice(
    option="rule",
    registry={
        "half_time_90_min": _half_time_90_min,
        "half_time_120_min": _half_time_120_min,
        "whole_90_min_periods": _whole_90_min_periods,
        "reset_12_h": _reset_12_h,
    },
)
def noaa_cns_after_interval(
    fraction: Value, surface_interval: Value, rule: str = "half_time_90_min"
) -> Value:
    """Share of the oxygen exposure time still counted after an interval, by a named convention.

    Notes
    -----
    Conventions with weak evidence: no study was found behind any of them, and no model here applies
    one unless it is asked for by name. The NOAA manual only advises at least 90 min between dives of
    the whole 45 min at 1.6 atm; the 12-h reset is its practice. ln 2/90 = 0.0077016 per min is used;
    the rounded 0.0077 differs in the fourth digit of the result.

    Examples
    --------
    >>> round(noaa_cns_after_interval(1.0, 45.0), 6)
    0.707107
    >>> noaa_cns_after_interval(1.0, 135.0, rule="whole_90_min_periods")
    0.5
    """


# -- Permitted times of the tables -----------------------------------------------------------------


def _time_limit(name: str, file: str, header: str, provenance: str, source: str) -> EquationFunction:
    nodes = column(file, "po2_atm") * float(ATMOSPHERE)
    times = column(file, header)

    def limit(po2: Value) -> Value:
        """Time permitted at a PO2, read at the next higher row of the table."""

    return table(
        result="oxygen_time_limit",
        quantities={"po2": "breathing_gas_po2"},
        refuse={"po2": (float(nodes[0]) * (1.0 - ROUNDING), float(nodes[-1]) * (1.0 + ROUNDING))},
        source=source,
        provenance=provenance,
        array=step(nodes, times),
        slope=no_slope(name, nodes),
        explain=lambda **inputs: f"oxygen_time_limit read at the next higher PO2, {name}",
        register=False,
        name=f"doses.oxygen_time_limit[{name}]",
    )(limit)


_EXCEPTIONAL = weakest([str(r["provenance"]) for r in published("noaa_exceptional_limits")])


@choice(
    option="limits",
    registry={
        "noaa_single": _time_limit(
            "noaa_single", "noaa_oxygen_limits", "single_min", _KNOWN["single"], "noaa_manual"
        ),
        "noaa_day": _time_limit("noaa_day", "noaa_oxygen_limits", "day_min", _KNOWN["day"], "noaa_manual"),
        "noaa_exceptional_quoted": _time_limit(
            "noaa_exceptional_quoted",
            "noaa_exceptional_limits",
            "quoted_min",
            "secondary",
            "noaa_exceptional",
        ),
        "noaa_exceptional_remembered": _time_limit(
            "noaa_exceptional_remembered",
            "noaa_exceptional_limits",
            "remembered_min",
            _EXCEPTIONAL,
            "noaa_exceptional",
        ),
        "usn_1973": _time_limit(
            "usn_1973", "usn_1973_oxygen_limits", "minutes", "read", "richardson_shreeves_2000"
        ),
    },
)
def oxygen_time_limit(po2: Value, limits: str = "noaa_single") -> Value:
    """Time permitted at a PO2 by a published table, read at the next higher row.

    Notes
    -----
    Outside a table there is no number: the NOAA tables go from 0.60 atm, below which by convention
    any time is permitted, to 1.60 atm. The exceptional exposures
    were withdrawn from the 4th edition and sources disagree at 1.4 atm (160 quoted, 180 remembered);
    the US Navy limits of 1973 are superseded. Both are for comparison only.

    Examples
    --------
    >>> oxygen_time_limit("1.107 atm"), oxygen_time_limit("1.51 atm")
    (210.0, 45.0)
    """


def _closed_circuit(rule: str, low: float) -> EquationFunction:
    rows = [r for r in published("usn_closed_circuit_oxygen") if r["rule"] == rule]
    nodes = np.array([r["depth_fsw"] for r in rows], dtype=float)
    times = np.array([r["minutes"] for r in rows], dtype=float)

    def limit(depth: Value) -> Value:
        """Time permitted on pure oxygen at a depth, read at the next deeper row."""

    return table(
        result="oxygen_time_limit",
        quantities={"depth": "depth_fsw"},
        refuse={"depth": (low, float(nodes[-1]) * (1.0 + ROUNDING))},
        source="usn_rev4_oxygen",
        provenance=weakest([str(r["provenance"]) for r in rows]),
        array=step(nodes, times),
        slope=no_slope("US Navy closed-circuit oxygen limits", nodes),
        explain=lambda **inputs: f"oxygen_time_limit read at the next deeper row, {rule}",
        register=False,
        name=f"doses.usn_closed_circuit_o2_limit[{rule}]",
    )(limit)


@choice(
    option="rule",
    registry={
        "single_depth": _closed_circuit("single_depth", 0.0),
        "one_excursion": _closed_circuit("one_excursion", 20.0),
    },
)
def usn_closed_circuit_o2_limit(depth: Value, rule: str = "single_depth") -> Value:
    """Time permitted on pure closed-circuit oxygen at the greatest depth reached, US Navy.

    Notes
    -----
    The greatest depth sets the limit, rounded to the next deeper row; beyond 50 fsw there is none.
    Rule "one_excursion": minutes of a single excursion from a transit at 20 fsw or less, 240 min in
    all. Pure oxygen only. CO2 retention, immersion, exercise and cold make it worse.

    Examples
    --------
    >>> usn_closed_circuit_o2_limit("27 fsw"), usn_closed_circuit_o2_limit("33 fsw")
    (80.0, 25.0)
    """


@formula(
    result="oxygen_time_limit",
    quantities={"time_limit": "oxygen_time_limit"},
    source="usn_successive_oxygen",
    provenance="memory_high",
)
def usn_remaining_o2_time(time_limit: Value, earlier_o2_time: Value, surface_interval: Value) -> Value:
    """Time left on closed-circuit oxygen in a successive dive, US Navy.

    Notes
    -----
    Off oxygen for less than 2 h: the earlier oxygen time is taken off the limit; 2 h and longer:
    nothing is. Negative: more has been used than this depth permits.

    Examples
    --------
    >>> usn_remaining_o2_time(80.0, 30.0, 60.0), usn_remaining_o2_time(80.0, 30.0, 120.0)
    (50.0, 80.0)
    """
    # A missing interval leaves a missing result.
    return time_limit - earlier_o2_time * where(surface_interval < 120.0, 1.0, 0.0) + 0.0 * surface_interval
