"""Oxygen doses along an exposure: every published measure side by side, each with its own limit."""

from __future__ import annotations

import functools
import json
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.constants import ATMOSPHERE, FSW
from gasphys.doses.cns import (
    CNS_FIT,
    POPULATIONS,
    clinic_seizure_rates,
    cns_exposure,
    cns_symptom_risk_of_exposure,
    near_clinics,
    noaa_cns_after_interval,
    noaa_cns_ramp,
    ramp_fraction,
    usn_closed_circuit_o2_limit,
    usn_remaining_o2_time,
)
from gasphys.doses.pulmonary import (
    HARABIN_FIT,
    POWER_FIT,
    SHYKOFF_BAND,
    arieli_index_from_esot,
    arieli_pulmonary_index,
    esot,
    esot_ramp,
    harabin_vital_capacity_ramp,
    pulmonary_toxicity_incidence,
    shykoff_incidence,
    uptd_ramp,
    vital_capacity_loss,
    vital_capacity_loss_from_index,
)
from gasphys.equation import EQUATIONS
from gasphys.errors import ExposureError, ProvenanceError, unknown_name
from gasphys.exposure import Exposure, Pieces
from gasphys.limits import Limit, load
from gasphys.policy import require_provenance, weakest
from gasphys.quantities import CAUTION, quantity

__all__ = ["MEASURES", "Measure", "dose_text", "oxygen", "piece_doses"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

_ROUNDING = 1e-9
_DAY = 24.0 * 60.0


def _same(total: Array) -> Array:
    return total


def _no_reason(pieces: Pieces) -> str:
    return "not defined for this exposure"


def _no_caveat(total: Array) -> str:
    return ""


@dataclass(frozen=True)
class Measure:
    """One dose measure: what a piece of an exposure adds, and what the sum means.

    Parameters
    ----------
    quantity : str
        Name in ``quantities.toml``.
    equation : str
        Dotted name of the equation of a ramp.
    kernel : callable
        ``(start_po2, end_po2, duration) -> what the piece adds to the sum`` on arrays [kPa, kPa, min].
    endpoint : str
        What the number stands for.
    population : str
        Whom it was made for.
    provenance : str
        How the numbers are known.
    options : dict
        Keyword arguments of the equation.
    dose : callable
        From the sum over the pieces to the dose: K is the square of a sum, a risk its distribution.
    fit : tuple of float
        PO2 the model was fitted to [kPa].
    limit : str
        Id of its limit among the shipped ones; "" where none is published.
    limit_as : callable
        From the limit's quantity to this one.
    per_day : bool
        Whether the limit is for a day.
    whole : callable or None
        ``(pieces, mask) -> dose`` where the measure is no sum over pieces.
    why : callable
        Says why the measure is not defined for these pieces.
    caveat : callable
        Says of the sums where they lie beyond the data; "" where they do not.
    of_one_exposure : bool
        Whether the model knows one exposure only: over several sessions no recovery is counted.
    """

    quantity: str
    equation: str
    kernel: Callable[[Array, Array, Array], Array]
    endpoint: str
    population: str
    provenance: str
    options: Mapping[str, Any] = field(default_factory=dict)
    dose: Callable[[Array], Array] = _same
    fit: tuple[float, float] = (0.0, np.inf)
    limit: str = ""
    limit_as: Callable[[float], float] = float
    per_day: bool = False
    whole: Callable[[Pieces, Mask], Array] | None = None
    why: Callable[[Pieces], str] = _no_reason
    caveat: Callable[[Array], str] = _no_caveat
    of_one_exposure: bool = False

    @property
    def is_symptom_risk(self) -> bool:
        """Whether it is a risk of any sign, beside which clinics' seizure rates must stand."""
        return self.quantity == "cns_symptom_risk"


# -- NOAA ------------------------------------------------------------------------------------------


def _noaa(rule: str, total: str) -> Callable[[Array, Array, Array], Array]:
    def kernel(start: Array, end: Array, duration: Array) -> Array:
        return ramp_fraction(start, end, duration, rule, total)

    return kernel


def _above_table(pieces: Pieces) -> str:
    highest = float(np.nanmax(np.maximum(pieces.start_po2, pieces.end_po2)))
    return (
        f"breathing gas PO2 reaches {highest:.1f} kPa ({highest / ATMOSPHERE:.2f} atm), the NOAA table ends "
        "at 162.1 kPa (1.60 atm) and is not extrapolated"
    )


def _worst_day(rule: str) -> Callable[[Pieces, Mask], Array]:
    """Largest share used in any 24 h that begin or end where a piece does."""
    kernel = _noaa(rule, "day")

    def whole(pieces: Pieces, mask: Mask) -> Array:
        each = np.where(mask & (pieces.duration > 0.0), kernel(*_ramps(pieces)), 0.0)
        total: Array = each.sum(axis=-1)
        if not np.any(pieces.times[..., -1] > _DAY * (1.0 + _ROUNDING)) or np.isnan(total).all():
            return total
        shape = each.shape[:-1]
        reached = np.concatenate([np.zeros((*shape, 1)), np.cumsum(each, axis=-1)], axis=-1)
        times = np.broadcast_to(pieces.times, reached.shape)
        ends = np.concatenate([times, np.minimum(times + _DAY, times[..., -1:])], axis=-1)

        def at(moment: Array) -> Array:
            index = (times[..., None, :] <= moment[..., :, None]).sum(axis=-1) - 1
            index = np.clip(index, 0, each.shape[-1] - 1)

            def pick(values: Array) -> Array:
                return np.take_along_axis(np.broadcast_to(values, each.shape), index, axis=-1)

            length = pick(pieces.duration)
            begun = np.take_along_axis(times, index, axis=-1)
            share = np.where(length > 0.0, (moment - begun) / np.where(length > 0.0, length, 1.0), 0.0)
            share = np.clip(share, 0.0, 1.0)
            start, end = pick(pieces.start_po2), pick(pieces.end_po2)
            part = kernel(start, start + (end - start) * share, length * share)
            counts = pick(np.asarray(mask, dtype=float)) > 0.0
            before = np.take_along_axis(reached[..., :-1], index, axis=-1)
            return np.asarray(before + np.where(counts & (length * share > 0.0), part, 0.0))

        with np.errstate(invalid="ignore"):
            window = at(ends) - at(np.maximum(ends - _DAY, 0.0))
        return np.asarray(window.max(axis=-1))

    return whole


# -- US Navy closed-circuit oxygen -----------------------------------------------------------------


@dataclass(frozen=True)
class ClosedCircuit:
    """Closed-circuit oxygen time along the pieces, ``(..., segment)``.

    Parameters
    ----------
    on : array of bool
        Pieces on pure oxygen.
    before : array
        Oxygen time counted when the piece begins [min].
    deepest : array
        Greatest depth of this dive before the piece [fsw].
    depths : tuple of array
        Depth at the start and end of the piece [fsw].
    reason : str
        Why it cannot be judged; "" where it can.
    """

    on: Mask
    before: Array
    deepest: Array
    depths: tuple[Array, Array]
    reason: str

    def used(self, share: Array, duration: Array) -> Array:
        """Return the share of the permitted time used after a share of each piece."""
        start, end = self.depths
        now = start + (end - start) * share
        deepest = np.maximum(self.deepest, np.maximum(start, now))
        permitted = usn_closed_circuit_o2_limit.raw(
            np.where(self.on, np.clip(deepest, 0.0, 50.0), 0.0), rule="single_depth"
        )
        minutes = np.where(deepest > 50.0 * (1.0 + _ROUNDING), np.nan, self.before + duration * share)
        return np.where(self.on, minutes / permitted, 0.0)


def closed_circuit(pieces: Pieces, mask: Mask) -> ClosedCircuit:
    """Follow the time on pure oxygen, earlier dives less than 2 h before included.

    Parameters
    ----------
    pieces : Pieces
        From :meth:`Exposure.pieces`.
    mask : array of bool
        Pieces that count.

    Returns
    -------
    ClosedCircuit
        Oxygen time and depth along the pieces.

    Examples
    --------
    >>> dive = Exposure.start("oxygen", depth_unit="fsw").travel(depth=25, minutes=1).stay(119)
    >>> found = closed_circuit(dive.pieces(), np.ones(2, dtype=bool))
    >>> float(found.used(np.ones(2), dive.pieces().duration)[-1])
    0.5
    """
    shape = np.broadcast_shapes(pieces.duration.shape, pieces.start_po2.shape, pieces.fractions["O2"].shape)
    duration = np.broadcast_to(pieces.duration, shape)
    pure = np.broadcast_to(pieces.fractions["O2"] >= 1.0 - 1e-6, shape)
    real = duration > 0.0
    on = pure & real & mask
    start = np.broadcast_to((pieces.start_po2 - ATMOSPHERE) / FSW, shape)
    end = np.broadcast_to((pieces.end_po2 - ATMOSPHERE) / FSW, shape)
    before, deepest = np.zeros(shape), np.zeros(shape)
    used, reached, off = (np.zeros(shape[:-1]) for _ in range(3))
    for k in range(shape[-1]):
        breathing, length = on[..., k], duration[..., k]
        again = breathing & (off > 0.0)
        # What an earlier dive takes off the limit, by the equation itself.
        carried = -np.asarray(usn_remaining_o2_time.raw(0.0, used, off))
        used = np.where(again, carried, used)
        reached = np.where(again, 0.0, reached)
        before[..., k], deepest[..., k] = used, reached
        used = np.where(breathing, used + length, used)
        reached = np.where(breathing, np.maximum(reached, np.maximum(start[..., k], end[..., k])), reached)
        off = np.where(breathing, 0.0, off + length)
    other = np.where(real & mask & ~pure, np.maximum(pieces.start_po2, pieces.end_po2), 0.0)
    if not on.any():
        reason = "no pure oxygen is breathed"
    elif np.any(other > 0.6 * ATMOSPHERE * (1.0 + _ROUNDING)):
        reason = "not for mixed gas: another gas is breathed at a PO2 above 0.6 atm"
    elif np.any(np.where(on, np.maximum(start, end), 0.0) > 50.0 * (1.0 + _ROUNDING)):
        deep = float(np.max(np.where(on, np.maximum(start, end), 0.0)))
        reason = f"pure oxygen at {deep:.1f} fsw; the table ends at 50 fsw and is not extrapolated"
    else:
        reason = ""
    return ClosedCircuit(on, before, deepest, (start, end), reason)


def _closed_circuit_dose(pieces: Pieces, mask: Mask) -> Array:
    found = closed_circuit(pieces, mask)
    whole = np.ones(found.on.shape)
    used = found.used(whole, np.broadcast_to(pieces.duration, found.on.shape))
    real = pieces.duration > 0.0
    pure = pieces.fractions["O2"] >= 1.0 - 1e-6
    mixed = np.where(real & mask & ~pure, np.maximum(pieces.start_po2, pieces.end_po2), 0.0)
    refused = (mixed > 0.6 * ATMOSPHERE * (1.0 + _ROUNDING)).any(axis=-1) | ~found.on.any(axis=-1)
    return np.where(refused, np.nan, used.max(axis=-1))


def _closed_circuit_reason(pieces: Pieces) -> str:
    mask = np.ones(pieces.duration.shape, dtype=bool)
    return closed_circuit(pieces, mask).reason or _no_reason(pieces)


# -- Shykoff ---------------------------------------------------------------------------------------


def _shykoff(start: Array, end: Array, duration: Array) -> Array:
    """Minutes in the band; NaN where PO2 goes above it."""
    _, _, inside = clipped(start, end, duration, *SHYKOFF_BAND)
    return np.where(np.maximum(start, end) > SHYKOFF_BAND[1] * (1.0 + _ROUNDING), np.nan, inside)


def _shykoff_dose(minutes: Array) -> Array:
    # No time in the band: the intercept of the formula says nothing of such an exposure.
    return np.where(minutes > 0.0, shykoff_incidence.raw(130.0, minutes), np.nan)


def _shykoff_reason(pieces: Pieces) -> str:
    highest = float(np.nanmax(np.maximum(pieces.start_po2, pieces.end_po2)))
    low, high = SHYKOFF_BAND
    return f"for a PO2 of about 130 kPa ({low:g} to {high:g}) only; here it reaches {highest:.1f} kPa"


# -- The measures ----------------------------------------------------------------------------------


def _index(minutes: Array) -> Array:
    return np.asarray(arieli_index_from_esot.raw(minutes))


def _above_250(total: Array) -> str:
    highest = float(np.nanmax(_index(total), initial=0.0))
    return f"K reaches {highest:.0f}, the data about 250; capped at 100 %" if highest > 250.0 else ""


def _esot_kernel(start: Array, end: Array, duration: Array) -> Array:
    return np.asarray(esot_ramp.raw(start, end, duration))


def _symptoms(population: str) -> Measure:
    exposure = cns_exposure.pick(population=population)  # type: ignore[attr-defined]
    risk = cns_symptom_risk_of_exposure.pick(population=population)  # type: ignore[attr-defined]

    def kernel(start: Array, end: Array, duration: Array) -> Array:
        return np.asarray(exposure.raw(start, end, duration))

    def dose(total: Array) -> Array:
        with np.errstate(divide="ignore"):
            return np.asarray(risk.raw(total))

    return Measure(
        quantity="cns_symptom_risk",
        equation="doses.cns_exposure",
        options={"population": population},
        kernel=kernel,
        dose=dose,
        endpoint="any nervous system sign, not a seizure probability; no air breaks",
        population=POPULATIONS[population].who
        + (f"; {POPULATIONS[population].remark}" if POPULATIONS[population].remark else ""),
        provenance=risk.provenance,
        fit=CNS_FIT,
        of_one_exposure=True,
    )


_POWER: dict[str, Any] = {
    "equation": "doses.esot_ramp",
    "kernel": _esot_kernel,
    "population": "divers and volunteers on oxygen from about 1 atm up",
    "fit": POWER_FIT,
    "of_one_exposure": True,
}


def _noaa_measure(rule: str, total: str) -> Measure:
    each_day = total == "day"
    return Measure(
        quantity="noaa_cns_fraction",
        equation="doses.noaa_cns_ramp",
        options={"rule": rule, "total": total},
        kernel=_noaa(rule, total),
        endpoint="share of a permitted time in 24 h, not a seizure probability"
        if each_day
        else "share of a permitted time, not a seizure probability",
        population="working divers, 24 h" if each_day else "working divers, one exposure",
        provenance=noaa_cns_ramp.registry[rule, total].provenance,  # type: ignore[attr-defined]
        limit="noaa_cns_day" if each_day else "noaa_cns_single",
        whole=_worst_day(rule) if each_day else None,
        why=_above_table,
    )


#: Every measure by name.
MEASURES: dict[str, Measure] = {
    "uptd": Measure(
        quantity="uptd",
        equation="doses.uptd_ramp",
        options={"exponent": 5.0 / 6.0},
        kernel=lambda a, b, t: np.asarray(uptd_ramp.raw(a, b, t, 5.0 / 6.0)),
        endpoint="pulmonary oxygen dose; no recovery counted",
        population="people at rest, dry and immersed",
        provenance=uptd_ramp.provenance,
        limit="uptd_day_one",
        per_day=True,
    ),
    "esot": Measure(
        quantity="esot",
        endpoint="pulmonary oxygen dose; minutes of O2 at 1 atm with the same index K",
        provenance=esot_ramp.provenance,
        limit="pulmonary_index_2_days",
        limit_as=lambda index: float(esot.raw(float(ATMOSPHERE), 60.0 * index**0.5)),
        per_day=True,
        **_POWER,
    ),
    "arieli_pulmonary_index": Measure(
        quantity="arieli_pulmonary_index",
        dose=_index,
        endpoint="pulmonary oxygen index K: square of a sum, does not add",
        provenance=arieli_pulmonary_index.provenance,
        limit="pulmonary_index_2_days",
        per_day=True,
        **_POWER,
    ),
    "vital_capacity_loss": Measure(
        quantity="vital_capacity_loss",
        dose=lambda total: np.asarray(vital_capacity_loss_from_index.raw(_index(total))),
        endpoint="mean loss of vital capacity at the end, power equation, no recovery within",
        provenance=vital_capacity_loss.provenance,
        **_POWER,
    ),
    "pulmonary_toxicity_incidence": Measure(
        quantity="pulmonary_toxicity_incidence",
        dose=lambda total: np.asarray(pulmonary_toxicity_incidence.raw(_index(total))),
        endpoint="share of people with pulmonary oxygen toxicity; 1.85 % at no exposure; one data set",
        provenance=pulmonary_toxicity_incidence.provenance,
        caveat=_above_250,
        **_POWER,
    ),
    "harabin_vital_capacity_loss": Measure(
        quantity="vital_capacity_loss",
        equation="doses.harabin_vital_capacity_ramp",
        kernel=lambda a, b, t: np.asarray(harabin_vital_capacity_ramp.raw(a, b, t)),
        endpoint="mean loss of vital capacity at the end, linear form of 1987",
        population="people on continuous oxygen, about 0.8 to 2.5 atm",
        provenance=harabin_vital_capacity_ramp.provenance,
        fit=HARABIN_FIT,
    ),
    "shykoff_incidence": Measure(
        quantity="pulmonary_symptom_incidence",
        equation="doses.shykoff_incidence",
        kernel=_shykoff,
        dose=_shykoff_dose,
        endpoint="share of dives with pulmonary changes or symptoms; 2.70 % at no time at all",
        population="divers at a PO2 of about 130 kPa, 1352 man-dives",
        provenance=shykoff_incidence.provenance,
        why=_shykoff_reason,
    ),
    "noaa_cns": _noaa_measure("step", "single"),
    "noaa_cns_day": _noaa_measure("step", "day"),
    "noaa_cns_linear": _noaa_measure("linear", "single"),
    "noaa_cns_day_linear": _noaa_measure("linear", "day"),
    "usn_closed_circuit_o2": Measure(
        quantity="usn_closed_circuit_o2_fraction",
        equation="doses.usn_closed_circuit_o2_limit",
        options={"rule": "single_depth"},
        kernel=lambda a, b, t: np.full(np.broadcast_shapes(np.shape(a), np.shape(t)), np.nan),
        endpoint="share of the time permitted at the greatest depth, not a seizure probability",
        population="divers on closed-circuit pure oxygen",
        provenance=weakest([usn_closed_circuit_o2_limit.provenance, usn_remaining_o2_time.provenance]),
        limit="usn_closed_circuit_o2",
        whole=_closed_circuit_dose,
        why=_closed_circuit_reason,
    ),
    **{f"cns_risk_{name}": _symptoms(name) for name in POPULATIONS},
}


# -- Pieces ----------------------------------------------------------------------------------------


def _ramps(pieces: Pieces) -> tuple[Array, Array, Array]:
    return pieces.start_po2, pieces.end_po2, pieces.duration


def clipped(start: Array, end: Array, duration: Array, low: float, high: float) -> tuple[Array, Array, Array]:
    """Return the part of each ramp that lies between two pressures: its ends and its length.

    Parameters
    ----------
    start, end, duration : array
        Ramps [kPa, kPa, min].
    low, high : float
        Pressures [kPa].

    Returns
    -------
    tuple of array
        Lower and higher end [kPa], length [min]; a ramp outside has no length.

    Examples
    --------
    >>> [float(v) for v in clipped(np.array(50.0), np.array(150.0), np.array(10.0), 100.0, np.inf)]
    [100.0, 150.0, 5.0]
    """
    below, above = np.minimum(start, end), np.maximum(start, end)
    a, b = np.clip(below, low, high), np.clip(above, low, high)
    span = above - below
    inside = (below >= low * (1.0 - _ROUNDING)) & (above <= high * (1.0 + _ROUNDING))
    share = np.where(span > 0.0, (b - a) / np.where(span > 0.0, span, 1.0), 0.0)
    return a, b, duration * np.where(inside, 1.0, share)


def piece_doses(measure: str, pieces: Pieces) -> Array:
    """Return what each piece adds to the sum of a measure.

    Parameters
    ----------
    measure : str
        A name of :data:`MEASURES`.
    pieces : Pieces
        From :meth:`Exposure.pieces`.

    Returns
    -------
    array
        ``(..., segment)``; NaN where the measure is not defined. The dose is the measure's ``dose``
        of the sum: of K the summand is its square root, in ESOT.

    Raises
    ------
    UnknownNameError
        If there is no such measure.

    Examples
    --------
    >>> exposure = Exposure.start("oxygen").stay(60)
    >>> piece_doses("uptd", exposure.pieces())
    array([60.])
    """
    if measure not in MEASURES:
        raise unknown_name("dose measure", measure, MEASURES)
    with np.errstate(all="ignore"):
        dose = MEASURES[measure].kernel(*_ramps(pieces))
    return np.where(pieces.duration > 0.0, dose, 0.0)


def outside_fit(measure: str, pieces: Pieces, mask: Mask) -> Array:
    """Return the share of a measure's sum that comes from a PO2 it was not fitted to.

    Parameters
    ----------
    measure : str
        A name of :data:`MEASURES`.
    pieces : Pieces
        From :meth:`Exposure.pieces`.
    mask : array of bool
        Pieces that count.

    Returns
    -------
    array
        Share [1], one a scenario; 1 means all of it.

    Examples
    --------
    >>> dive = Exposure.start("air").stay(60)
    >>> float(outside_fit("esot", dive.pieces(), np.ones(1, dtype=bool)))
    1.0
    """
    one = MEASURES[measure]
    if one.fit == (0.0, np.inf):
        return np.zeros(pieces.duration.shape[:-1])
    with np.errstate(all="ignore"):
        each = one.kernel(*_ramps(pieces))
        start, end, duration = clipped(*_ramps(pieces), *one.fit)
        inside = np.where(duration > 0.0, one.kernel(start, end, duration), 0.0)
    total = np.where(mask & (pieces.duration > 0.0), each, 0.0).sum(axis=-1)
    part = np.where(mask, inside, 0.0).sum(axis=-1)
    return np.where(total > 0.0, 1.0 - part / np.where(total > 0.0, total, 1.0), 0.0)


def _fit_reason(measure: str, outside: Array) -> str:
    """Say how much of a dose lies outside the fit; nothing up to a hundredth."""
    worst = float(np.max(outside, initial=0.0))
    low, high = (x / ATMOSPHERE for x in MEASURES[measure].fit)
    span = f"{low:.2g} to {high:.2g} atm, where it was fitted"
    if worst >= 1.0 - _ROUNDING:
        return f"the breathing gas PO2 is never within {span}"
    if worst > 0.01:
        return f"{100.0 * worst:.0f} % of it comes from a PO2 outside {span}"
    return ""


def counted(exposure: Exposure, count: str) -> Mask:
    """Return which pieces count: all, those of the table's clock, or its oxygen periods.

    Parameters
    ----------
    exposure : Exposure
        The exposure.
    count : {"all", "table", "oxygen"}
        What is counted.

    Returns
    -------
    array of bool
        ``(segment,)`` or with scenario dimensions before it.

    Raises
    ------
    UnknownNameError
        For another word.
    ExposureError
        If "table" or "oxygen" is asked of an exposure that is no schedule.

    Examples
    --------
    >>> counted(Exposure.start("air").stay(1), "all")
    array([ True])
    """
    if count not in ("all", "table", "oxygen"):
        raise unknown_name("count", count, ("all", "table", "oxygen"))
    if count == "all":
        return np.ones(len(exposure.part), dtype=bool)
    if "table_minutes" not in exposure.attrs and not any(exposure.part):
        raise ExposureError(
            f"count={count!r} needs an exposure with named parts, such as schedules.treatment() builds"
        )
    table = np.array([p not in ("descent", "interval") for p in exposure.part])
    if count == "table":
        return table
    pure = (exposure.fractions["O2"] >= 1.0 - 1e-6) & np.isnan(exposure.columns["setpoint"])
    result: Mask = table & pure
    return result


def _with_recovery(each: Array, exposure: Exposure, pieces: Pieces, rule: str) -> Array:
    """Sum the pieces, an interval taking off what a named convention says."""
    total = np.zeros(each.shape[:-1])
    rest = np.zeros(each.shape[:-1])
    for k, part in enumerate(exposure.part):
        if part == "interval":
            rest = rest + pieces.duration[..., k]
            if k + 1 < len(exposure.part) and exposure.part[k + 1] == "interval":
                continue  # one interval, however it is cut
            total = np.asarray(noaa_cns_after_interval.raw(total, rest, rule=rule))
            rest = np.zeros(each.shape[:-1])
        total = total + each[..., k]
    return total


# -- The Dataset -----------------------------------------------------------------------------------


@functools.cache
def _limits() -> dict[str, Limit]:
    return {limit.id: limit for limit in load("default")}


@dataclass(frozen=True)
class _Row:
    """One measure of one exposure."""

    total: Array
    dose: Array
    limit: float
    status: NDArray[np.object_]
    reason: str


def _row(
    name: str,
    exposure: Exposure,
    pieces: Pieces,
    mask: Mask,
    role: str,
    initial: xr.Dataset | None,
    recovery: str,
) -> _Row:
    one = MEASURES[name]
    shape = tuple(len(exposure.coords[d]) for d in exposure.dims)
    nothing = np.full(shape, np.nan)
    try:
        require_provenance(one.provenance, f"measure {name}")
    except ProvenanceError as error:
        return _Row(nothing, nothing, np.nan, np.full(shape, "not applicable", dtype=object), str(error))
    reasons: list[str] = []
    with np.errstate(all="ignore"):
        if one.whole is not None:
            total = one.whole(pieces, mask) if initial is None else nothing
            dose = total
        else:
            each = np.where(mask, piece_doses(name, pieces), 0.0)
            if recovery != "none" and one.limit == "noaa_cns_single":
                total = _with_recovery(each, exposure, pieces, recovery)
            else:
                total = each.sum(axis=-1)
            if initial is not None:
                total = total + _earlier(initial, name, exposure)
            outside = outside_fit(name, pieces, mask)
            total = np.where(outside >= 1.0 - _ROUNDING, np.nan, total)
            dose = one.dose(total)
            reasons += [_fit_reason(name, outside), one.caveat(total)]
    total, dose = (np.broadcast_to(np.asarray(v, dtype=float), shape).copy() for v in (total, dose))
    undefined = np.isnan(dose)
    if undefined.any():
        if one.whole is not None and initial is not None:
            reasons = ["it needs the earlier exposure itself: join the two"]
        elif not any(r.startswith("the breathing gas PO2 is never") for r in reasons):
            reasons = [one.why(pieces)]
    several = max(exposure.session) > min(exposure.session) or "interval" in exposure.part
    if several and one.of_one_exposure and not undefined.all():
        reasons.append("several sessions, no recovery counted between them: see course_doses")
    with np.errstate(invalid="ignore"):
        impossible = dose > quantity(one.quantity).possible[1]
    if impossible.any():
        reasons.append(
            f"the formula gives {np.nanmax(dose):.3g}, which is not possible: far outside its data"
        )
        dose = np.where(impossible, np.nan, dose)
        undefined = np.isnan(dose)
    status = np.full(shape, "not judged", dtype=object)
    limit_value = np.nan
    if not one.limit:
        if not undefined.all():
            reasons.append("no limit is published for this measure")
    else:
        limit = _limits()[one.limit]
        limit_value = one.limit_as(limit.value)
        longer = one.per_day and bool(np.any(pieces.times[..., -1] > _DAY * (1.0 + _ROUNDING)))
        if role not in limit.roles:
            status[...] = "not applicable"
            made_for = " and ".join(f"{r}s" for r in limit.roles)
            article = "an" if role[0] in "aeiou" else "a"
            reasons.append(
                f"the limit ({limit_value:.4g}, {limit.authority}) was made for {made_for}, not for "
                f"{article} {role}: not applicable, shown as context"
            )
        elif longer:
            reasons.append("the limit is for a day and the exposure is longer")
        else:
            with np.errstate(invalid="ignore"):
                beyond = dose > limit_value * (1.0 + _ROUNDING)
            status = np.where(beyond, "beyond", "within").astype(object)
    status = np.where(undefined, "not applicable", status).astype(object)
    return _Row(total, dose, limit_value, status, "; ".join(r for r in reasons if r))


def _earlier(initial: xr.Dataset, name: str, exposure: Exposure) -> Array:
    if name not in initial["measure"].values:
        raise ExposureError(f"initial= holds no measure {name}; compute it there too")
    before = initial["total"].sel(measure=name, drop=True)
    extra = [str(d) for d in before.dims if d not in exposure.dims]
    if extra:
        raise ExposureError(f"initial= has the dimension {extra[0]} that the exposure has not")
    names = [d for d in exposure.dims if d in before.dims]
    values = before.transpose(*names).values
    return np.asarray(values, dtype=float).reshape([before.sizes.get(d, 1) for d in exposure.dims])


def oxygen(
    exposure: Exposure,
    measures: Sequence[str] | str = ("uptd", "noaa_cns"),
    count: str = "all",
    *,
    role: str = "diver",
    initial: xr.Dataset | None = None,
    recovery: str = "none",
) -> xr.Dataset:
    """Oxygen doses of an exposure in several measures, each with its limit.

    Parameters
    ----------
    exposure : Exposure
        Pressure and breathing gas against time.
    measures : sequence of str
        Names of :data:`MEASURES`, or "all".
    count : {"all", "table", "oxygen"}
        The whole exposure; the table's clock (without the descent); its oxygen periods only.
    role : {"diver", "patient", "attendant"}
        Whose exposure it is: limits made for others are "not applicable", shown as context.
    initial : Dataset, optional
        Result of the exposure before: its sums are carried on.
    recovery : str
        Convention on what an interval takes off the NOAA fraction of one exposure, a rule of
        :func:`noaa_cns_after_interval`; by default nothing.

    Returns
    -------
    Dataset
        On dimension ``measure``: ``dose``, ``total`` (the sum it follows from), ``limit_value``,
        ``margin`` (positive inside), ``status`` ("beyond", "within", "not applicable", "not judged"),
        ``reason``, ``limit``, ``authority``, ``for_whom``, ``endpoint``, ``population``,
        ``provenance``, ``unit``, ``context``; beside a risk of any sign ``seizure_rate_low`` and
        ``seizure_rate_high`` of clinics, per treatment. Scenario dimensions follow ``measure``.

    Raises
    ------
    UnknownNameError
        If a measure, count, role or recovery is unknown.
    ExposureError
        If the exposure has no piece.

    Notes
    -----
    Integrals over the linear pieces are exact. A measure that is not defined for the exposure is NaN
    with a reason; the others go on. Within a limit is not thereby without danger: limits for divers
    are not for patients, and treatments of the seriously ill go beyond them.

    Examples
    --------
    >>> from gasphys.schedules import treatment
    >>> ds = oxygen(treatment("usn_6"), ["uptd", "esot", "noaa_cns"], count="oxygen", role="patient")
    >>> ds.dose.values.round(2).tolist()
    [640.79, 1458.12, nan]
    """
    names = list(MEASURES) if isinstance(measures, str) and measures == "all" else measures
    names = [names] if isinstance(names, str) else list(names)
    for name in names:
        if name not in MEASURES:
            raise unknown_name("dose measure", name, MEASURES)
    if role not in ("diver", "patient", "attendant"):
        raise unknown_name("role", role, ("diver", "patient", "attendant"))
    rules = noaa_cns_after_interval.registry  # type: ignore[attr-defined]
    if recovery != "none" and recovery not in rules:
        raise unknown_name("recovery", recovery, ["none", *rules])
    if not exposure.part:
        raise ExposureError("the exposure has no piece yet")
    pieces = exposure.pieces()
    mask = counted(exposure, count)
    rows = {name: _row(name, exposure, pieces, mask, role, initial, recovery) for name in names}
    return _dataset(
        exposure, rows, _beside(exposure, pieces, mask), {"count": count, "role": role, "recovery": recovery}
    )


@dataclass(frozen=True)
class _Beside:
    """What stands beside the risks: clinics' seizure rates, oxygen periods and air breaks."""

    low: Array
    high: Array
    near: bool
    longest: Array
    breaks: Array


def _beside(exposure: Exposure, pieces: Pieces, mask: Mask) -> _Beside:
    shape = tuple(len(exposure.coords[d]) for d in exposure.dims)
    full = (*shape, len(exposure.part))
    real = np.broadcast_to(pieces.duration > 0.0, full)
    highest = np.where(real, np.maximum(pieces.start_po2, pieces.end_po2), 0.0)
    top = np.where(mask, highest, 0.0).max(axis=-1)
    low, high = clinic_seizure_rates(top)
    on = highest >= CNS_FIT[0]
    longest, run, breaks = (np.zeros(shape) for _ in range(3))
    off, before = np.zeros(shape, dtype=bool), np.zeros(shape, dtype=bool)
    for k, part in enumerate(exposure.part):
        here, there = on[..., k], real[..., k]
        breaks = breaks + (here & off & before)
        run = np.where(here, run + pieces.duration[..., k], np.where(there, 0.0, run))
        longest = np.maximum(longest, run)
        before = before | here
        # An interval, or another session, ends what a break could interrupt.
        new = part == "interval" or (k > 0 and exposure.session[k] != exposure.session[k - 1])
        before = here if new else before
        off = np.where(there, ~here, off)
    return _Beside(np.asarray(low), np.asarray(high), bool(np.all(near_clinics(top))), longest, breaks)


def _dataset(
    exposure: Exposure, rows: dict[str, _Row], beside: _Beside, options: dict[str, str]
) -> xr.Dataset:
    from gasphys import __version__

    dims = ("measure", *exposure.dims)
    ones = {name: MEASURES[name] for name in rows}
    limits = {name: _limits().get(one.limit) for name, one in ones.items()}
    dose = np.stack([r.dose for r in rows.values()])
    limit_value = np.array([r.limit for r in rows.values()])
    edge = limit_value.reshape((-1, *(1,) * len(exposure.dims)))
    units = {n: quantity(one.quantity).dose_unit or quantity(one.quantity).unit for n, one in ones.items()}

    def words(values: Sequence[str], meaning: str) -> tuple[Any, ...]:
        return ("measure", np.array(list(values), dtype=str), {"long_name": meaning})

    ds = xr.Dataset(
        {
            "dose": (
                dims,
                dose,
                {
                    "units": "1",
                    "long_name": "oxygen dose, in the unit of the variable unit",
                    "dose_unit": "; ".join(f"{n}: {u}" for n, u in units.items()),
                },
            ),
            "total": (
                dims,
                np.stack([r.total for r in rows.values()]),
                {"units": "1", "long_name": "sum over the pieces that the dose follows from"},
            ),
            "limit_value": (
                "measure",
                limit_value,
                {"units": "1", "long_name": "the measure's limit, in the unit of the variable unit"},
            ),
            "margin": (
                dims,
                edge - dose,
                {"units": "1", "long_name": "distance to the limit, positive inside"},
            ),
            "status": (
                dims,
                np.stack([r.status for r in rows.values()]).astype(str),
                {"long_name": "beyond, within, not applicable or not judged"},
            ),
            "reason": words([r.reason for r in rows.values()], "why it is not applicable, or a flag"),
            "limit": words([one.limit for one in ones.values()], "id of the limit"),
            "authority": words([x.authority if x else "" for x in limits.values()], "whose limit it is"),
            "for_whom": words(
                [", ".join(x.roles) if x else "" for x in limits.values()], "whom the limit was made for"
            ),
            "endpoint": words([one.endpoint for one in ones.values()], "what it stands for"),
            "population": words([one.population for one in ones.values()], "made for"),
            "provenance": words([one.provenance for one in ones.values()], "how the numbers are known"),
            "unit": words(["" if u == "1" else u for u in units.values()], "unit of dose"),
            "context": words(
                [_context(ones[n], r, beside) for n, r in rows.items()],
                "what must be read beside the number",
            ),
        },
        coords={"measure": list(rows), **exposure.coords},
    )
    ds["longest_oxygen_period"] = (
        exposure.dims,
        beside.longest,
        {"units": "min", "long_name": "longest time at a PO2 of 100 kPa and more without a break"},
    )
    ds["air_breaks"] = (
        exposure.dims,
        beside.breaks.astype(np.int32),
        {"units": "1", "long_name": "breaks between times at a PO2 of 100 kPa and more"},
    )
    if any(one.is_symptom_risk for one in ones.values()):
        nothing = np.full(beside.low.shape, np.nan)
        for word, rate in (("low", beside.low), ("high", beside.high)):
            ds[f"seizure_rate_{word}"] = (
                dims,
                np.stack([rate if one.is_symptom_risk else nothing for one in ones.values()]),
                {
                    "units": "1",
                    "long_name": f"{word}est seizure rate of clinics near this PO2, per treatment",
                },
            )
    keys = [k for one in ones.values() for k in EQUATIONS[one.equation].sources]
    if any(one.is_symptom_risk for one in ones.values()):
        keys += ["heyboer_2014", "costa_2019", "yildiz_2004", "hadanny_2016"]
    ds.attrs = {
        "Conventions": "CF-1.11",
        "title": "oxygen dose of an exposure",
        "source": f"gasphys {__version__}, oxygen dose, count {options['count']}",
        "history": "; ".join(exposure.history) or "as given",
        "references": "; ".join(dict.fromkeys(keys)),
        "comment": CAUTION,
        **options,
        "equations": json.dumps({n: [one.equation, dict(one.options)] for n, one in ones.items()}),
    }
    return ds


def _context(one: Measure, row: _Row, beside: _Beside) -> str:
    """Return what must stand beside a risk of any sign: seizure rates, and breaks the fit does not know."""
    if not one.is_symptom_risk:
        return ""
    low, high = float(np.min(beside.low)), float(np.max(beside.high))
    where = "near this PO2" if beside.near else "at all treatment pressures together, none near this PO2"
    text = f"seizures in {_percent(low)} to {_percent(high)} of clinics' treatments {where}"
    risk = row.dose[~np.isnan(row.dose)]
    if beside.near and high > 0.0 and risk.size:
        top = float(risk.max())
        text += f"; the risk of any sign is {_times(top / high)}"
        text += f" to {_times(top / low)}" if low > 0.0 and low != high else ""
        text += " times that"
    breaks = int(np.max(beside.breaks, initial=0))
    if breaks:
        text += (
            f"; {breaks} air break{'s' if breaks > 1 else ''} in the exposure, which the fit does not know"
        )
    return text


def _percent(rate: float) -> str:
    return f"{100.0 * rate:.2g} %"


def _times(ratio: float) -> str:
    return f"{ratio:.2g}" if 0.001 < ratio < 100.0 else f"{float(f'{ratio:.2g}'):.6g}"


def dose_text(ds: xr.Dataset) -> str:
    """Return doses in words: each with its limit, what it stands for and what stands beside it.

    Parameters
    ----------
    ds : Dataset
        From :func:`oxygen`, of one scenario.

    Returns
    -------
    str
        A few lines a measure, then the caution.

    Raises
    ------
    ExposureError
        If it holds several scenarios.

    Examples
    --------
    >>> print(dose_text(oxygen(Exposure.start("oxygen").stay(60), ["uptd"])).splitlines()[0])
    uptd 60 UPTD, limit 850: within by 790
    """
    if ds["dose"].dims != ("measure",):
        raise ExposureError("doses of several scenarios have no one text; pick one first")
    lines = []
    for name in ds["measure"].values:
        row = ds.sel(measure=name)
        value, margin, limit = (float(row[v].values) for v in ("dose", "margin", "limit_value"))
        status, unit = str(row["status"].values), str(row["unit"].values)
        share = not unit
        shown = "-" if np.isnan(value) else f"{100.0 * value:.4g} %" if share else f"{value:.4g} {unit}"
        line = f"{name} {shown}"
        if not np.isnan(limit):
            line += f", limit {100.0 * limit:.4g} %" if share else f", limit {limit:.4g}"
        line += f": {status}"
        if status in ("beyond", "within"):
            line += f" by {100.0 * abs(margin):.4g} %" if share else f" by {abs(margin):.4g}"
        lines.append(line)
        lines.append(f"    {row['endpoint'].values}; made for {row['population'].values}")
        lines += [f"    {row[v].values}" for v in ("reason", "context") if str(row[v].values)]
    return "\n".join([*lines, CAUTION])
