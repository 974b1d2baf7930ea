"""The review: which limit is crossed, when, by how much, and whose limit it is.

Crossings are roots inside the linear pieces, not samples.
"""

from __future__ import annotations

import json
import os
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.breathing import (
    density_ratio,
    maximum_ventilation,
    ventilation_for_o2_uptake,
    ventilatory_reserve,
)
from gasphys.breathing_gas import fraction_breathed, linear_in_piece
from gasphys.constants import ATMOSPHERE, BODY_VAPOR_PRESSURE, MSW
from gasphys.doses.carbon_dioxide import surface_equivalent
from gasphys.doses.measures import MEASURES, closed_circuit, outside_fit, piece_doses
from gasphys.errors import ExposureError, RangeError, ValidityError, unknown_name
from gasphys.exposure import Exposure, Pieces
from gasphys.gas import FORMULAS, Gas
from gasphys.limits import Limit, load
from gasphys.lungs import alveolar_po2
from gasphys.maths import find_root
from gasphys.person import Person
from gasphys.policy import require_provenance, validity, weakest
from gasphys.quantities import attributes, dataset_attributes, quantity
from gasphys.real_gas import humid_density, reference_density
from gasphys.tissues.kinetics import Breath, advance, along, breath_of, stretches
from gasphys.tissues.model import check_gases, initial_state
from gasphys.tissues.sets import TissueSet
from gasphys.tissues.sets import load as tissue_set
from gasphys.tissues.tolerance import m_values, short_deep

__all__ = ["Lever", "highest", "levers", "rests_on_memory", "review"]

Array = NDArray[np.float64]

#: Ventilation for each liter of O2 uptake, where only that is given, and the exponent of density: the
#: defaults of their equations.
_VENTILATION_PER_O2 = float(ventilation_for_o2_uptake.arguments[1].default or 0.0)
_DENSITY_EXPONENT = float(maximum_ventilation.arguments[2].default or 0.0)

#: Beyond means beyond by more than rounding.
_ROUNDING = 1e-9
_DAY = 24.0 * 60.0


@dataclass(frozen=True)
class Trace:
    """A reviewed quantity along the pieces, ``(..., segment)``.

    Parameters
    ----------
    start, end : array
        Value at the ends of each piece, linear between them; for a dose the value reached.
    within : callable or None
        For a dose: ``(share of the piece) -> value``; None where the quantity is linear.
    some : callable or None
        ``(mask of pieces) -> within`` of these alone, in a row: where `within` is much work.
    reason : str
        Why it cannot be judged; "" where it can.
    status : str or array of str
        Status that goes with the reason, or with each scenario.
    undefined : array of bool
        Scenarios for which the quantity is not defined, and `why` not; `status` holds for them too.
    why : str
        Reason that goes with them.
    """

    start: Array
    end: Array
    within: Callable[[Array], Array] | None = None
    some: Callable[[NDArray[np.bool_]], Callable[[Array], Array]] | None = None
    reason: str = ""
    status: Any = "not judged"
    undefined: NDArray[np.bool_] | bool = False
    why: str = ""


def _breathing_gas_po2(exposure: Exposure, pieces: Pieces) -> Trace:
    return Trace(pieces.start_po2, pieces.end_po2)


def _o2_fraction(exposure: Exposure, pieces: Pieces) -> Trace:
    def within(share: Array) -> Array:
        po2 = pieces.start_po2 + (pieces.end_po2 - pieces.start_po2) * share
        pressure = pieces.start_pressure + (pieces.end_pressure - pieces.start_pressure) * share
        return np.asarray(po2 / pressure)

    nothing = np.zeros(np.broadcast_shapes(pieces.start_po2.shape, pieces.start_pressure.shape))
    return Trace(within(nothing), within(nothing + 1.0), within)


def _n2_pressure(exposure: Exposure, pieces: Pieces) -> Trace:
    """Nitrogen, argon with it: of the gas itself, or on a loop its share of what is not oxygen."""
    loop = ~np.isnan(pieces.setpoint)
    rest = 1.0 - pieces.fractions["O2"]
    given = pieces.fractions["N2"] + pieces.fractions.get("Ar", np.zeros_like(rest))
    part = np.where(rest > 0.0, given / np.where(rest > 0.0, rest, 1.0), 0.0)
    start, end = (
        np.where(loop, (pressure - po2) * part, pressure * given)
        for pressure, po2 in (
            (pieces.start_pressure, pieces.start_po2),
            (pieces.end_pressure, pieces.end_po2),
        )
    )
    return Trace(start, end)


def _breathed(pieces: Pieces, pressure: Array, po2: Array) -> dict[str, Array]:
    """Dry fractions breathed, by field: of the gas itself, on a loop what set-point and diluent make."""
    loop = ~np.isnan(pieces.setpoint)
    share = po2 / pressure
    rest = 1.0 - pieces.fractions["O2"]
    mix = {}
    for formula, field in FORMULAS.items():
        given = pieces.fractions.get(formula, np.zeros_like(share))
        part = np.where(rest > 0.0, given / np.where(rest > 0.0, rest, 1.0), 0.0)
        mix[field] = share if formula == "O2" else np.where(loop, (1.0 - share) * part, given)
    return mix


#: Density as published limits count it: handbook densities at 0 degC and 1 atm, scaled with pressure. The
#: ideal gas at 0 degC is 0.1 % less for air. The limits are quoted as air at depths that belong to this
#: rule; one function then serves review, plots and apps, and it is the stricter of the two for air.
_LIMIT_DENSITY = reference_density.pick(rule="scaled_1_atm")  # type: ignore[attr-defined]


def _gas_density(exposure: Exposure, pieces: Pieces) -> Trace:
    ends = []
    for pressure, po2 in ((pieces.start_pressure, pieces.start_po2), (pieces.end_pressure, pieces.end_po2)):
        mix = _breathed(pieces, pressure, po2)
        fractions = (mix[a.name] for a in _LIMIT_DENSITY.arguments[1:])
        ends.append(np.asarray(_LIMIT_DENSITY.raw(pressure, *fractions)))
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
        above = np.isnan(each).any(axis=-1)
        whys = []
        if above.any():
            highest = float(np.nanmax(np.maximum(pieces.start_po2, pieces.end_po2)))
            whys.append(
                f"breathing gas PO2 reaches {highest:.1f} kPa ({highest / ATMOSPHERE:.2f} atm) and the "
                "table ends at 162.1 kPa (1.60 atm); it is not extrapolated"
            )
            if above.all():
                return Trace(before, reached, reason=whys[0], status="not applicable")
        outside = outside_fit(measure, pieces, np.ones(each.shape[-1], dtype=bool)) >= 1.0 - _ROUNDING
        if np.any(outside & ~above):
            low = MEASURES[measure].fit[0] / ATMOSPHERE
            whys.append(f"breathing gas PO2 stays below {low:.2g} atm, where the model was fitted")

        def within(share: Array) -> Array:
            partial = replace(
                pieces,
                duration=pieces.duration * share,
                end_po2=pieces.start_po2 + (pieces.end_po2 - pieces.start_po2) * share,
            )
            return dose(before + piece_doses(measure, partial))

        return Trace(
            dose(before),
            dose(reached),
            within,
            status="not applicable",
            undefined=outside | above,
            why="; ".join(whys),
        )

    return trace


def _closed_circuit_o2(exposure: Exposure, pieces: Pieces) -> Trace:
    found = closed_circuit(pieces, np.ones(pieces.duration.shape[-1], dtype=bool))
    duration = np.broadcast_to(pieces.duration, found.on.shape)
    nothing = np.zeros(found.on.shape)
    if found.refused.all():
        return Trace(nothing, nothing, reason=found.reason, status="not applicable")
    start, end = found.used(nothing, duration), found.used(nothing + 1.0, duration)

    def within(share: Array) -> Array:
        return found.used(share, duration)

    return Trace(start, end, within, status="not applicable", undefined=found.refused, why=found.reason)


def _co2(exposure: Exposure, pieces: Pieces) -> Trace:
    nothing = np.zeros_like(pieces.duration)
    fraction = pieces.fractions.get("CO2", nothing)
    unknown, why = ~np.any(fraction > 0.0, axis=-1), "the CO2 of the breathing gas is not given"
    if unknown.all():
        return Trace(nothing, nothing, reason=why)
    ends = [surface_equivalent.raw(fraction, p) for p in (pieces.start_pressure, pieces.end_pressure)]
    return Trace(
        np.asarray(ends[0]), np.asarray(ends[1]), undefined=unknown, why=why if unknown.any() else ""
    )


def _depth_on_helium(exposure: Exposure, pieces: Pieces) -> Trace:
    nothing = np.zeros_like(pieces.duration)
    helium = pieces.fractions.get("He", nothing) > 0.0
    none, why = ~np.any(helium & (pieces.duration > 0.0), axis=-1), "no helium is breathed"
    if none.all():
        return Trace(nothing, nothing, reason=why, status="not applicable")
    surface = np.asarray(exposure.surface_pressure, dtype=float)
    surface = surface[..., None] if surface.ndim else surface
    ends = (pieces.start_pressure, pieces.end_pressure)
    start, end = (np.where(helium, np.maximum(p - surface, 0.0) / MSW, 0.0) for p in ends)
    why = why if none.any() else ""
    return Trace(start, end, status="not applicable", undefined=none, why=why)


def _without(what: str) -> Callable[[Exposure, Pieces], Trace]:
    def trace(exposure: Exposure, pieces: Pieces) -> Trace:
        nothing = np.full_like(pieces.duration, np.nan)
        return Trace(nothing, nothing, reason=what)

    return trace


def _limit_fraction(
    model: str, exposure: Exposure, pieces: Pieces, factors: Mapping[str, Any] | None = None
) -> Trace:
    """Largest share of a tissue model's M-value, at both ends of each piece; the surface is the last.

    In a stay every compartment is monotone, so its ends tell all; on a way up the end does: M is lowest.
    """
    chosen = tissue_set(model)
    varied = _scaled(chosen, factors or {}, exposure)
    by_piece = _scaled(chosen, factors or {}, exposure, pieces=True)
    shape = tuple(len(exposure.coords[d]) for d in exposure.dims)
    lead = (*shape, pieces.duration.shape[-1])
    nothing = np.zeros(lead)
    try:
        with validity("ignore"):
            refused = check_gases(chosen, pieces, shape)
            blank = np.broadcast_to(short_deep(chosen, pieces, exposure.surface_pressure), shape)
    except ValidityError:
        return Trace(
            nothing, nothing, reason=f"{chosen.name} refuses a gas of the exposure: {chosen.refuses}"
        )
    rule = chosen.short_deep
    # As of one scenario: a gas the set does not take is not judged.
    status = np.where(np.broadcast_to(refused, shape), "not judged", "not applicable")
    if rule is not None and rule.action == "refuse":
        refused = refused | blank
    begin = np.broadcast_to(initial_state(chosen, None, exposure), (*shape, *chosen.half_time.shape))
    columns = (pieces.duration, pieces.start_pressure, pieces.end_pressure)
    minutes, low, high = (np.broadcast_to(v, lead) for v in columns)
    whole = breath_of(chosen, pieces)
    oxygen, setpoint = (np.broadcast_to(v, lead) for v in (whole.oxygen, whole.setpoint))
    inert = np.broadcast_to(whole.inert, (*lead, whole.inert.shape[-1]))
    breath = Breath(oxygen, inert, setpoint)
    surface = np.broadcast_to(np.asarray(exposure.surface_pressure, dtype=float), shape)[..., None]

    def share_of(state: Array, pressure: Array, level: Array = surface, model: TissueSet = by_piece) -> Array:
        total, limit = m_values(model, state, pressure)
        top = np.where(np.isnan(limit), 0.0, total / limit).max(axis=-1)
        if chosen.surfacing_only:
            return np.where(pressure <= level * (1.0 + _ROUNDING), top, 0.0)
        return np.asarray(top)

    if shape:
        states = [begin]
        for k in range(lead[-1]):
            one = Breath(oxygen[..., k], inert[..., k, :], setpoint[..., k])
            states.append(advance(varied, states[-1], minutes[..., k], low[..., k], high[..., k], one))
        held = np.stack(states, axis=len(shape))
    else:  # a log may have ten thousand pieces
        row, before = stretches(chosen, pieces)
        held = np.moveaxis(along(varied, begin, row)[..., before], -1, 0)

    def within(share: Array) -> Array:
        there = low + (high - low) * share
        return share_of(advance(by_piece, held[..., :-1, :, :], minutes * share, low, there, breath), there)

    def some(mask: NDArray[np.bool_]) -> Callable[[Array], Array]:
        begins, time, first, last = held[..., :-1, :, :][mask], minutes[mask], low[mask], high[mask]
        breathed = Breath(oxygen[mask], inert[mask], setpoint[mask])
        level = np.broadcast_to(surface, lead)[mask]
        cells = (*lead, *chosen.half_time.shape)
        columns = {c: getattr(by_piece, c) for c in TISSUE_FACTORS.values()}
        wide: dict[str, Any] = {c: np.broadcast_to(v, cells)[mask] for c, v in columns.items() if v.ndim > 2}
        own = replace(by_piece, **wide)

        def one(share: Array) -> Array:
            there = first + (last - first) * share
            return share_of(advance(own, begins, time * share, first, there, breathed), there, level, own)

        return one

    start, end = (
        share_of(held[..., part, :, :], p) for part, p in ((slice(None, -1), low), (slice(1, None), high))
    )
    why = f"{chosen.name} refuses it" if refused.any() else ""
    return Trace(start, end, within, some, status=status, undefined=refused, why=why)


#: How each reviewed quantity follows from an exposure.
TRACES: dict[str, Callable[[Exposure, Pieces], Trace]] = {
    "breathing_gas_po2": _breathing_gas_po2,
    "breathing_gas_o2_fraction": _o2_fraction,
    "breathing_gas_n2_pressure": _n2_pressure,
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
    "external_work_share": _without(
        "the work of an apparatus is measured on a machine; breathing.compare_apparatus compares it"
    ),
    "cylinder_pressure": _without("no cylinder is part of the exposure; supply.stock_review judges them"),
}


def _in_order(value: Any, exposure: Exposure, *behind: str) -> Any:
    """Return a number, or an array over scenarios in the order of the exposure's dimensions.

    Behind them stands an axis for the pieces, or the dimensions named.
    """
    if not isinstance(value, xr.DataArray):
        return value
    order = [d for d in (*exposure.dims, *behind) if d in value.dims]
    plain = value.transpose(*order).values.astype(float)
    plain = plain.reshape([value.sizes.get(d, 1) for d in (*exposure.dims, *behind)])
    return plain if behind else plain[..., None]


def _alveolar_po2(exposure: Exposure, pieces: Pieces, person: Person) -> Trace:
    """Alveolar PO2 of steady breathing, for the arterial PCO2 and R of a person."""
    pco2 = _in_order(person.value("arterial_pco2"), exposure)
    exchange = _in_order(person.value("respiratory_exchange_ratio"), exposure)
    nothing = np.zeros(np.broadcast_shapes(pieces.start_po2.shape, pieces.start_pressure.shape))
    co2 = np.where(np.isnan(pieces.setpoint), pieces.fractions.get("CO2", nothing), 0.0)

    def within(share: Array) -> Array:
        pressure = linear_in_piece.raw(pieces.start_pressure, pieces.end_pressure, share)
        po2 = linear_in_piece.raw(pieces.start_po2, pieces.end_po2, share)
        fio2 = fraction_breathed.raw(po2, pressure)
        return np.asarray(alveolar_po2.raw(pressure, fio2, pco2, exchange, co2, float(BODY_VAPOR_PRESSURE)))

    return Trace(within(nothing), within(nothing + 1.0), within)


def _ventilatory_reserve(exposure: Exposure, pieces: Pieces, person: Person) -> Trace:
    """Share of maximum ventilation in the gas breathed that the workload leaves."""
    nothing = np.full(np.broadcast_shapes(pieces.start_po2.shape, pieces.start_pressure.shape), np.nan)
    name = "surface_maximum_ventilation_btps"
    if not person.is_measured(name):
        return Trace(nothing, nothing, reason=f"{name} of the person is not measured")
    given, uptake = (exposure.columns[c] for c in ("ventilation_btps", "o2_uptake_stpd"))
    ventilation = np.where(np.isnan(given), ventilation_for_o2_uptake.raw(uptake, _VENTILATION_PER_O2), given)
    if np.isnan(np.where(pieces.duration > 0.0, ventilation, 0.0)).any():
        return Trace(nothing, nothing, reason="ventilation or O2 uptake is not given in every piece")
    most = _in_order(person.value(name), exposure)
    humid = humid_density.pick(model="virial").raw  # type: ignore[attr-defined]

    def within(share: Array) -> Array:
        pressure = linear_in_piece.raw(pieces.start_pressure, pieces.end_pressure, share)
        po2 = linear_in_piece.raw(pieces.start_po2, pieces.end_po2, share)
        mix = _breathed(pieces, pressure, po2)
        density = humid(pressure, *(mix[f] for f in FORMULAS.values()), 37.0, float(BODY_VAPOR_PRESSURE))
        ceiling = maximum_ventilation.raw(most, density_ratio.raw(density), _DENSITY_EXPONENT)
        return np.asarray(ventilatory_reserve.raw(ventilation, ceiling))

    return Trace(within(np.zeros_like(nothing)), within(np.ones_like(nothing)), within)


#: Reviewed quantities that follow from an exposure and a person.
PERSON_TRACES: dict[str, Callable[[Exposure, Pieces, Person], Trace]] = {
    "alveolar_po2": _alveolar_po2,
    "ventilatory_reserve": _ventilatory_reserve,
}

#: Factors on the numbers of tissue models, and the column of a set each belongs to.
TISSUE_FACTORS = {"half_time_factor": "half_time", "m_value_a_factor": "a", "m_value_b_factor": "b"}

#: Of the person, what these need.
PERSONAL = ("arterial_pco2", "respiratory_exchange_ratio", "surface_maximum_ventilation_btps")

#: Doses only grow: these traces have one crossing.
_CUMULATIVE = ("noaa_cns_single_fraction", "noaa_cns_day_fraction", "uptd", "arieli_pulmonary_index")


def review(
    exposure: Exposure,
    person: Person | None = None,
    role: str = "diver",
    limits: str | os.PathLike[str] | Iterable[Any] = "default",
    *,
    tissue_factors: Mapping[Any, Any] | None = None,
) -> xr.Dataset:
    """Compare an exposure with published limits.

    Parameters
    ----------
    exposure : Exposure
        Pressure and breathing gas against time.
    person : Person, optional
        Whose lungs; fields that hold several values broadcast over the scenarios.
    role : {"diver", "patient", "attendant"}
        Whose exposure it is: limits made for others are "not applicable".
    limits : str, path or sequence
        As for :func:`gasphys.limits.load`.
    tissue_factors : mapping or Dataset, optional
        What the numbers of the tissue models are multiplied by, to learn how much a limit rests on them:
        ``half_time_factor``, ``m_value_a_factor``, ``m_value_b_factor`` [1], each a number or a labelled
        array over scenarios and, where compartments differ, ``compartment``.

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
    factors = _factors(tissue_factors)
    for one in (*_of_person(person).values(), *factors.values()):
        if isinstance(one, xr.DataArray):
            for dim in one.dims:
                if dim != "compartment":
                    labels = one[dim].values if dim in one.coords else np.arange(one.sizes[dim])
                    exposure = exposure._adopt(str(dim), labels)
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
        elif limit.quantity in PERSON_TRACES:
            if limit.quantity not in traces:
                whose = Person() if person is None else person
                traces[limit.quantity] = PERSON_TRACES[limit.quantity](exposure, pieces, whose)
            trace = traces[limit.quantity]
        elif limit.model:
            if limit.model not in traces:
                traces[limit.model] = _limit_fraction(limit.model, exposure, pieces, factors)
            trace = traces[limit.model]
        found = _judge(limit, trace, pieces, role)
        for name in _NUMBERS:
            columns[name].append(np.broadcast_to(found[name], shape))
        status = np.broadcast_to(np.asarray(found["status"], dtype=object), shape)
        columns["status"].append(status)
        columns["reason"].append(found["reason"])
    return _dataset(exposure, chosen, columns, role, person, factors)


_NUMBERS = ("worst", "limit_value", "margin", "time_of_worst", "first_crossing", "time_beyond")


def highest(exposure: Exposure, name: str, person: Person | None = None) -> Array:
    """Return the highest value of a reviewed quantity along each scenario.

    Parameters
    ----------
    exposure : Exposure
        Pressure and breathing gas against time.
    name : str
        A quantity that reviews judge.
    person : Person, optional
        Whose, for quantities of a person.

    Returns
    -------
    array
        ``(...)``; NaN where the quantity is not defined.

    Raises
    ------
    UnknownNameError
        If reviews do not judge the quantity.

    Examples
    --------
    >>> float(highest(Exposure.start("air").travel(depth=30, minutes=2), "gas_density").round(2))
    5.1
    """
    pieces = exposure.pieces()
    if name in TRACES:
        trace = TRACES[name](exposure, pieces)
    elif name in PERSON_TRACES:
        trace = PERSON_TRACES[name](exposure, pieces, person or Person())
    else:
        raise unknown_name("reviewed quantity", name, [*TRACES, *PERSON_TRACES])
    shape = tuple(len(exposure.coords[d]) for d in exposure.dims)
    if trace.reason:
        return np.full(shape, np.nan)
    real = pieces.duration > 0.0
    found = np.where(real, np.maximum(trace.start, trace.end), -np.inf).max(axis=-1)
    return np.where(trace.undefined, np.nan, np.broadcast_to(found, shape))


def _of_person(person: Person | None) -> dict[str, Any]:
    """Return what of a person a review needs."""
    return {n: (Person() if person is None else person).value(n) for n in PERSONAL}


def _factors(given: Mapping[Any, Any] | None) -> dict[str, Any]:
    """Return the factors on tissue models, checked; other variables of a Dataset are left aside."""
    found = {n: given[n] for n in TISSUE_FACTORS if given is not None and n in given}
    if given is not None and not found:
        raise ExposureError(f"tissue_factors holds none of {', '.join(TISSUE_FACTORS)}")
    for name, value in found.items():
        if not np.all(np.asarray(value) > 0.0):
            raise RangeError(f"tissue_factors: {name} = {float(np.min(value)):g} must be positive")
        found[name] = value if isinstance(value, xr.DataArray) else float(value)
    return found


def _scaled(
    chosen: TissueSet, factors: Mapping[str, Any], exposure: Exposure, *, pieces: bool = False
) -> TissueSet:
    """Return a set whose numbers carry the scenario dimensions, and an axis of pieces, where factors do."""
    if not factors:
        return chosen
    if chosen.kinetics == "serial":
        raise ExposureError(f"{chosen.name} has no half-times to multiply; leave it out with limits=")
    new = {}
    for name, column in TISSUE_FACTORS.items():
        factor = factors.get(name, 1.0)
        if isinstance(factor, xr.DataArray):
            if "compartment" in factor.dims:
                factor = factor.sel(compartment=list(chosen.compartments))
            factor = _in_order(factor, exposure, "compartment")[..., None]
            factor = factor[..., None, :, :] if pieces else factor
        new[column] = getattr(chosen, column) * factor
    return replace(chosen, **new)


def _judge(limit: Limit, trace: Trace | None, pieces: Pieces, role: str) -> dict[str, Any]:
    nan = np.full(pieces.duration.shape[:-1], np.nan)
    nothing = dict.fromkeys(_NUMBERS, nan) | {"limit_value": limit.value}
    if trace is None:
        return nothing | {
            "status": "not judged",
            "reason": f"{limit.quantity} does not follow from an exposure",
        }
    if limit.per_day and not trace.reason:
        longer = pieces.times[..., -1] > _DAY * (1.0 + _ROUNDING)
        why = "the limit is for a day and the exposure is longer"
        if longer.all():
            trace = replace(trace, reason=why, status="not judged")
        elif longer.any():
            status = np.where(longer, "not judged", trace.status)
            why = f"{trace.why}; {why}" if trace.why else why
            trace = replace(trace, status=status, undefined=trace.undefined | longer, why=why)
    if role not in limit.roles:
        reason = f"made for {_listed(limit.roles)}, not for {_with_article(role)}"
        if trace.reason and trace.status == "not applicable":
            reason = f"{reason}; {trace.reason}"
        shown = nothing if trace.reason else _blanked(_measured(limit, trace, pieces), trace)
        return shown | {"status": "not applicable", "reason": reason}
    if trace.reason:
        return nothing | {"status": trace.status, "reason": trace.reason}
    found = _blanked(_measured(limit, trace, pieces), trace)
    beyond = ~np.isnan(found["first_crossing"])
    status = np.where(trace.undefined, trace.status, np.where(beyond, "beyond", "within"))
    return found | {"status": status.astype(object), "reason": trace.why}


def _blanked(found: dict[str, Any], trace: Trace) -> dict[str, Any]:
    """Return the numbers of a limit without those of scenarios for which the quantity is not defined."""
    if not np.any(trace.undefined):
        return found
    blank = {k: np.where(trace.undefined, np.nan, v) for k, v in found.items() if k != "limit_value"}
    return found | blank


def _listed(words: tuple[str, ...]) -> str:
    plural = [f"{w}s" for w in words]
    return plural[0] if len(plural) == 1 else f"{', '.join(plural[:-1])} and {plural[-1]}"


def _with_article(word: str) -> str:
    return f"an {word}" if word[0] in "aeiou" else f"a {word}"


def _measured(limit: Limit, trace: Trace, pieces: Pieces) -> dict[str, Any]:
    sign = 1.0 if limit.comparison == "<=" else -1.0
    start, end, _ = np.broadcast_arrays(sign * trace.start, sign * trace.end, pieces.duration)
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
    share = _crossing_share(trace, start, end, edge, bound, sign)
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


def _crossing_share(trace: Trace, start: Array, end: Array, edge: float, bound: float, sign: float) -> Array:
    """Share of each piece at which the limit is met; 0 where the piece does not cross it."""
    crosses = (start <= edge) != (end <= edge)
    with np.errstate(invalid="ignore", divide="ignore"):
        linear = np.where(crosses, (bound - start) / (end - start), 0.0)
    linear = np.clip(linear, 0.0, 1.0)
    if trace.within is None or not crosses.any():
        return linear
    if trace.some is not None:
        some = trace.some(crosses)
        ends = np.zeros(int(crosses.sum())), np.ones(int(crosses.sum()))
        root = find_root(lambda share: sign * some(share) - bound, *ends)
        linear[crosses] = np.where(np.isnan(root), linear[crosses], root)
        return linear
    within = trace.within

    def difference(share: Array) -> Array:
        return np.where(crosses, sign * within(share) - bound, share - 0.5)

    root = find_root(difference, np.zeros(start.shape), np.ones(start.shape))
    return np.where(crosses & ~np.isnan(root), root, linear)


def _dataset(
    exposure: Exposure,
    chosen: tuple[Limit, ...],
    columns: dict[str, list[Any]],
    role: str,
    person: Person | None,
    factors: Mapping[str, Any],
) -> xr.Dataset:

    dims = ("limit", *exposure.dims)
    texts = {
        "reason": (columns["reason"], "why the limit is not applicable or not judged"),
        "quantity": ([x.quantity for x in chosen], "quantity compared"),
        "model": ([x.model for x in chosen], "tissue model whose limit it is; empty: none"),
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
    for name, value in {**_of_person(person), **factors}.items():
        if isinstance(value, xr.DataArray):
            ds[name] = value
    ds.attrs = view.attrs | dataset_attributes(
        f"review of {exposure.attrs.get('title', 'an exposure')}",
        "review",
        history=exposure.history,
        references=(x.source for x in chosen),
        role=role,
        person="" if person is None else person.code,
        person_values=json.dumps(
            {n: v for n, v in _of_person(person).items() if not isinstance(v, xr.DataArray)}
        ),
        provenance=weakest([x.provenance for x in chosen]),
        from_memory=", ".join(x.id for x in chosen if x.provenance.startswith("memory")),
        **{n: v for n, v in factors.items() if not isinstance(v, xr.DataArray)},
    )
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
    # Density, narcosis: helium for nitrogen, the oxygen stays. Oxygen: nitrogen takes its place or gives it.
    if limit.quantity in ("gas_density", "breathing_gas_n2_pressure"):
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
