"""Oxygen doses of a constant PO2 and of a linear ramp.

PO2 is that of the dry breathing gas (fraction times ambient pressure), not the humid inspired one.
"""

from __future__ import annotations

import csv
import functools
from collections.abc import Callable
from importlib import resources
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gasphys.constants import ATMOSPHERE, UPTD_THRESHOLD
from gasphys.equation import EquationFunction, Value, choice, formula, table
from gasphys.errors import NotTraceable
from gasphys.maths import maximum, mean_log, mean_power
from gasphys.policy import weakest

__all__ = ["noaa_cns_fraction", "noaa_cns_ramp", "uptd", "uptd_ramp"]

Array = NDArray[np.float64]

_UPTD = {"source": "clark_lambertsen_1971", "provenance": "memory_high"}


@formula(
    result="uptd",
    quantities={"po2": "breathing_gas_po2"},
    valid={"po2": (5.0, 405.3)},
    **_UPTD,  # type: ignore[arg-type]
)
def uptd(po2: Value, duration: Value, exponent: Value = 5.0 / 6.0) -> Value:
    """Unit pulmonary toxic dose of a constant PO2.

    Notes
    -----
    UPTD = t ((P - 0.5)/0.5)^(5/6), P in atm and t in min, above 0.5 atm; nothing below. One unit is
    one minute of oxygen at 1 atm. The exponent 0.83 is a rounding in use (0.4 % low at 2 atm). There
    is no recovery term, and vital capacity does not follow the dose well at high PO2: 10 h at 2.0 atm
    and 18 h at 1.5 atm did similar harm (Clark 1987).

    Examples
    --------
    Ninety minutes of oxygen at 2.4 atm:

    >>> round(uptd("2.4 atm", 90.0), 1)
    273.8
    """
    x = maximum(po2 - UPTD_THRESHOLD, 0.0) / UPTD_THRESHOLD
    return duration * x**exponent


@formula(
    result="uptd",
    valid={"start_po2": (5.0, 405.3), "end_po2": (5.0, 405.3)},
    **_UPTD,  # type: ignore[arg-type]
)
def uptd_ramp(
    start_po2: Value, end_po2: Value, duration: Value, exponent: Value = 5.0 / 6.0
) -> Value:
    """Unit pulmonary toxic dose while PO2 changes linearly in time.

    Notes
    -----
    The exact integral of :func:`uptd`; the time spent below 0.5 atm counts in the slope and not in
    the dose.

    Examples
    --------
    Oxygen from 60 to 30 fsw in 30 min:

    >>> round(uptd_ramp("2.81818 atm", "1.90909 atm", 30.0), 3)
    89.676
    """
    first = (start_po2 - UPTD_THRESHOLD) / UPTD_THRESHOLD
    last = (end_po2 - UPTD_THRESHOLD) / UPTD_THRESHOLD
    return duration * mean_power(first, last, exponent)


# -- NOAA ----------------------------------------------------------------------------------------


@functools.cache
def noaa_table() -> dict[str, Any]:
    """Return the NOAA oxygen limits: nodes [kPa], permitted times [min], provenance.

    Returns
    -------
    dict
        ``po2``, ``single``, ``day`` (arrays) and ``provenance`` by column.

    Examples
    --------
    >>> float(noaa_table()["single"][-1])
    45.0
    """
    text = resources.files("gasphys.doses").joinpath("noaa_oxygen_limits.csv").read_text("utf-8")
    rows = list(csv.DictReader(line for line in text.splitlines() if not line.startswith("#")))
    return {
        "po2": np.array([float(r["po2_atm"]) for r in rows]) * float(ATMOSPHERE),
        "single": np.array([float(r["single_min"]) for r in rows]),
        "day": np.array([float(r["day_min"]) for r in rows]),
        "provenance": {
            "single": weakest([r["single_provenance"] for r in rows]),
            "day": weakest([r["day_provenance"] for r in rows]),
        },
    }


#: A PO2 at a node up to rounding belongs to that node.
_ROUNDING = 1e-9


def _nodes(total: str) -> tuple[Array, Array]:
    rows = noaa_table()
    return rows["po2"], rows[total]


def _rate(po2: Any, rule: str, total: str) -> Array:
    """Reciprocal of the permitted time [1/min]; zero below the table, NaN above it."""
    nodes, times = _nodes(total)
    po2 = np.asarray(po2, dtype=float)
    inside = (po2 >= nodes[0] * (1.0 - _ROUNDING)) & (po2 <= nodes[-1] * (1.0 + _ROUNDING))
    clipped = np.clip(np.where(np.isnan(po2), nodes[0], po2), nodes[0], nodes[-1])
    if rule == "step":
        row = np.searchsorted(nodes * (1.0 + _ROUNDING), clipped, side="left")
        permitted = times[np.minimum(row, len(nodes) - 1)]
    else:
        permitted = np.interp(clipped, nodes, times)
    rate = np.where(inside, 1.0 / permitted, 0.0)
    return np.where((po2 > nodes[-1] * (1.0 + _ROUNDING)) | np.isnan(po2), np.nan, rate)


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
    nodes, times = _nodes(total)
    start, end, duration = (np.asarray(v, dtype=float) for v in (start, end, duration))
    start, end, duration = np.broadcast_arrays(start, end, duration)
    low, high = np.minimum(start, end), np.maximum(start, end)
    flat = high - low <= _ROUNDING * high
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
    return np.where(high > nodes[-1] * (1.0 + _ROUNDING), np.nan, result)


def _ramp(rule: str, total: str) -> Callable[..., Any]:
    def evaluate(start_po2: Any, end_po2: Any, duration: Any) -> Any:
        return ramp_fraction(start_po2, end_po2, duration, rule, total)

    return evaluate


def _slope(rule: str, total: str) -> Callable[[str], Callable[..., Any]]:
    nodes, times = _nodes(total)

    def of(name: str) -> Callable[..., Any]:
        def by_duration(po2: Any, duration: Any) -> Any:
            return _rate(po2, rule, total) + 0.0 * np.asarray(duration)

        def by_po2(po2: Any, duration: Any) -> Any:
            po2 = np.asarray(po2, dtype=float)
            at_node = np.isclose(po2[..., None], nodes, rtol=1e-12, atol=0.0)
            jumps = np.append(np.diff(times) != 0.0, True) if rule == "step" else np.ones(len(nodes), bool)
            hit = (at_node & jumps).any(axis=tuple(range(po2.ndim)))
            if hit.any():
                node = nodes[hit][0]
                raise NotTraceable(
                    f"NOAA oxygen limits: no derivative at the node {node:g} kPa ({node / ATMOSPHERE:.1f} atm), "
                    f"where the permitted time {'jumps' if rule == 'step' else 'has a kink'}"
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
        nodes, times = _nodes(total)
        shown = []
        for name in ("po2", "start_po2", "end_po2"):
            if name in inputs:
                rate = float(_rate(inputs[name], rule, total))
                atm = inputs[name] / ATMOSPHERE
                limit = "no limit" if rate == 0.0 else f"{1.0 / rate:.4g} min"
                shown.append(f"{atm:.4g} atm permits {limit}")
        column = "single exposure" if total == "single" else "24-h total"
        return f"noaa_cns_fraction = minutes / permitted minutes; {column}, {rule} rule: {'; '.join(shown)}"

    return text


_PO2_MAX = 1.6 * float(ATMOSPHERE) * (1.0 + _ROUNDING)

_RULES = ("step", "linear")
_TOTALS = ("single", "day")


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
        for total in _TOTALS:
            found[rule, total] = table(
                result="noaa_cns_fraction",
                quantities={} if ramp else {"po2": "breathing_gas_po2"},
                refuse={n: (0.0, _PO2_MAX) for n in names},
                source="noaa_manual",
                provenance=noaa_table()["provenance"][total],
                array=_ramp(rule, total) if ramp else _constant(rule, total),
                slope=_ramp_slope(rule, total) if ramp else _slope(rule, total),
                explain=_explain(rule, total),
                register=False,
                name=f"doses.{name}[{rule},{total}]",
            )(ramp_body if ramp else constant_body)
    return found


@choice(option=("rule", "total"), registry=_members(ramp=False))
def noaa_cns_fraction(
    po2: Value, duration: Value, rule: str = "step", total: str = "single"
) -> Value:
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
    start_po2: Value,
    end_po2: Value,
    duration: Value,
    rule: str = "step",
    total: str = "single",
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
