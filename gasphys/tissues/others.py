"""Besides the limits: counterdiffusion at switches, the oxygen window, the tissue of prebreathe."""

from __future__ import annotations

import json
import os
from typing import Any

import numpy as np
import xarray as xr

from gasphys.constants import BODY_VAPOR_PRESSURE, LN2, MMHG
from gasphys.errors import ExposureError, RangeError, ValidityError
from gasphys.exposure import Exposure
from gasphys.policy import weakest
from gasphys.quantities import CAUTION, attributes, dataset_attributes, quantity
from gasphys.tissues.equations import (
    RESTING_HALF_TIME,
    exercise_half_time,
    oxygen_window,
    supersaturation_ratio,
    tissue_pressure,
)
from gasphys.tissues.kinetics import along, breath_of, stretches
from gasphys.tissues.model import check_gases, initial_state
from gasphys.tissues.sets import TissueSet, load

__all__ = ["counterdiffusion", "prebreathe", "window"]


def counterdiffusion(
    exposure: Exposure,
    model: str | os.PathLike[str] | TissueSet = "buhlmann_1995_c",
    initial: Any = None,
) -> xr.Dataset:
    """What a switch between inert gases does to the sum of their pressures in each compartment.

    Parameters
    ----------
    exposure : Exposure
        Pressure and breathing gas against time, one scenario.
    model : str, path or TissueSet
        A set of exponential compartments with two inert gases.
    initial : Dataset, DataArray, float or str, optional
        Tissues at the start.

    Returns
    -------
    Dataset
        On dimension ``switch``: ``switch_time``, ``ambient_pressure``, ``inert_pressure_change(inert_gas)``
        (jump of the alveolar pressure), ``total_tissue_pressure(compartment)`` at the switch,
        ``total_rate(compartment)`` just after it at constant pressure, and ``rise(compartment)``: how far the
        sum would still rise if one stayed, reached after ``rise_time(compartment)``.

    Raises
    ------
    ExposureError
        If the exposure has no piece or several scenarios.
    ValidityError
        If the set does not hold two inert gases.

    Notes
    -----
    A gas with short half-times that enters faster than another leaves raises the sum at constant pressure.
    The rise is exact for exponential compartments. No published rule of thumb is applied: the numbers are a
    description, not a limit.

    Examples
    --------
    >>> dive = Exposure.start("air").travel(depth=30, rate=20).stay(60).switch("heliox 21/79").stay(1)
    >>> found = counterdiffusion(dive)
    >>> float(found.rise.sel(compartment="5").isel(switch=0).round(1))
    131.0
    """
    chosen = load(model)
    if chosen.kinetics != "exponential" or len(chosen.inert_gases) != 2:
        raise ValidityError(
            f"{chosen.name}: counterdiffusion needs exponential compartments with two inert gases"
        )
    if exposure.dims:
        raise ExposureError("counterdiffusion takes one scenario; pick one first")
    if not exposure.part:
        raise ExposureError("the exposure has no piece yet")
    pieces = exposure.pieces()
    check_gases(chosen, pieces, ())
    row, before = stretches(chosen, pieces)
    states = along(chosen, initial_state(chosen, initial, exposure), row)
    breath = breath_of(chosen, pieces)
    here = np.concatenate(
        [breath.oxygen[:, None], breath.inert, np.nan_to_num(breath.setpoint, nan=-1.0)[:, None]], axis=1
    )
    switches = np.flatnonzero((here[1:] != here[:-1]).any(axis=1)) + 1
    ends = before[switches]
    after, previous = row.start_inert[ends], row.end_inert[ends - 1]
    state = np.moveaxis(states[..., ends], -1, 0)
    gap = state - after[:, None, :]  # (switch, compartment, gas)
    rate = float(LN2) / chosen.half_time
    one, other = gap[..., 0] * rate[:, 0], gap[..., 1] * rate[:, 1]
    total_rate = -(one + other)
    # The sum is stationary where the two rates cancel; they are exponentials, so at most once.
    with np.errstate(divide="ignore", invalid="ignore"):
        when = np.log(-one / other) / (rate[:, 0] - rate[:, 1])
    rising = (total_rate > 0.0) & np.isfinite(when) & (when > 0.0)
    never = (total_rate > 0.0) & ~rising
    at = np.where(rising, when, 0.0)[..., None]
    there = tissue_pressure.raw(state, after[:, None, :], after[:, None, :], at, chosen.half_time)
    rise = np.where(rising, (there - state).sum(axis=-1), 0.0)
    rise = np.where(never, -gap.sum(axis=-1), rise)
    cells = ("switch", "compartment")
    provenance = weakest(list(chosen.provenance_of.values()))

    return xr.Dataset(
        {
            "switch_time": ("switch", pieces.times[switches], attributes("time")),
            "ambient_pressure": ("switch", pieces.start_pressure[switches], attributes("ambient_pressure")),
            "inert_pressure_change": (
                ("switch", "inert_gas"),
                after - previous,
                {"units": "kPa", "long_name": "change of the alveolar inert gas pressure at the switch"},
            ),
            "total_tissue_pressure": (
                cells,
                state.sum(axis=-1),
                attributes("tissue_pressure")
                | {"long_name": "inert gas pressure in a compartment, both gases"},
            ),
            "total_rate": (
                cells,
                total_rate,
                attributes("pressure_rate") | {"long_name": "rate of the sum just after the switch"},
            ),
            "rise": (
                cells,
                rise,
                {"units": "kPa", "long_name": "further rise of the sum at constant pressure"},
            ),
            "rise_time": (
                cells,
                np.where(never, np.inf, np.where(rising, when, 0.0)),
                attributes("duration")
                | {"long_name": "time until the sum is highest; infinite: it only rises"},
            ),
        },
        coords={
            "switch": np.arange(len(switches)),
            "compartment": np.array(chosen.compartments, dtype=str),
            "inert_gas": np.array(chosen.inert_gases, dtype=str),
        },
        attrs=dataset_attributes(
            f"switches between inert gases, model {chosen.name}",
            f"tissues, model {chosen.name}, parameters {chosen.digest}",
            history=exposure.history,
            references=[chosen.source],
            provenance=provenance,
        ),
    )


def window(exposure: Exposure, *, at: Any = None) -> xr.Dataset:
    """Oxygen window of venous blood along an exposure.

    Parameters
    ----------
    exposure : Exposure
        Pressure and breathing gas against time.
    at : array_like, optional
        Times to add to the exposure's own [min].

    Returns
    -------
    Dataset
        On the exposure's ``time``: ``oxygen_window``.

    Raises
    ------
    ExposureError
        If the exposure has no piece.

    Notes
    -----
    Steady state at each instant with venous PO2 40 and PCO2 46 mmHg; see :func:`oxygen_window` for where that
    ends.

    Examples
    --------
    >>> float(window(Exposure.start("air").stay(1)).oxygen_window[0].round(2))
    8.5
    """
    ds = exposure.to_dataset(at=at)
    out = ds.copy()
    inputs = {
        "ambient_pressure": "@ambient_pressure",
        "fio2": "@breathing_gas_po2 / @ambient_pressure",
        "venous_po2": 40.0 * float(MMHG),
        "venous_pco2": 46.0 * float(MMHG),
        "water_vapor_pressure": float(BODY_VAPOR_PRESSURE),
    }
    values = oxygen_window.raw(
        ds["ambient_pressure"].values,
        (ds["breathing_gas_po2"] / ds["ambient_pressure"]).values,
        inputs["venous_po2"],
        inputs["venous_pco2"],
        inputs["water_vapor_pressure"],
    )
    out["oxygen_window"] = (
        ds["breathing_gas_po2"].dims,
        values,
        attributes(
            "oxygen_window",
            equation=oxygen_window.name,
            inputs=json.dumps(inputs),
            provenance=oxygen_window.provenance,
        ),
    )
    out.attrs = {
        **ds.attrs,
        "title": "oxygen window along an exposure",
        "source": ds.attrs["source"].replace(", exposure", ", tissues, oxygen window"),
        "references": "kot_2015",
        "provenance": oxygen_window.provenance,
        "comment": CAUTION,
    }
    return out


def prebreathe(
    exposure: Exposure,
    suit_pressure: Any = None,
    *,
    initial: Any = None,
    body_mass: float | None = None,
    half_time: float = RESTING_HALF_TIME,
    at: Any = None,
) -> xr.Dataset:
    """Nitrogen in the one slow tissue of prebreathe before a space suit or high flight.

    Parameters
    ----------
    exposure : Exposure
        Pressure and breathing gas against time, one scenario; its workload matters with `body_mass`.
    suit_pressure : float or str, optional
        Final pressure [kPa absolute], such as ``"4.3 psi"``; gives the ratio.
    initial : float or str, optional
        Nitrogen pressure of the tissue at the start [kPa], such as ``"11.6 psi"``; default 0.79 of the
        surface pressure.
    body_mass : float, optional
        Body mass [kg]: the half-time of each piece then follows its O2 uptake.
    half_time : float
        Half-time at rest [min]: without `body_mass`, and in pieces without a known uptake.
    at : array_like, optional
        Times to add to the exposure's own [min].

    Returns
    -------
    Dataset
        On the exposure's ``time``: ``tissue_pressure`` and, with `suit_pressure`, ``supersaturation_ratio``.

    Raises
    ------
    ExposureError
        If the exposure has no piece or several scenarios.
    RangeError
        If a value is not possible.

    Notes
    -----
    Dry inspired nitrogen, one half-time of 360 min (from memory). Any limit on the ratio is the caller's: in
    the trials of 1984 with the shuttle's prebreathes 55 % had bubbles and 26 % symptoms. The exercise model
    is from memory too; the washout constant is summed over the pieces, not averaged.

    Examples
    --------
    >>> suit = prebreathe(Exposure.start("oxygen").stay(240), "4.3 psi", initial="11.6 psi")
    >>> float(suit.supersaturation_ratio[-1].round(2))
    1.7
    """
    if exposure.dims:
        raise ExposureError("prebreathe takes one scenario; pick one first")
    for gas, fraction in exposure.fractions.items():
        if gas not in ("O2", "N2", "Ar", "CO2") and (fraction > 0.0).any():
            raise ValidityError(f"prebreathe is a model of nitrogen; the exposure holds {gas}")
    ds = exposure.to_dataset(at=at)
    _, index, share = exposure.sample(at)
    pieces = exposure.pieces()
    minutes = np.full(pieces.duration.shape, _number(half_time, "half_time"))
    if body_mass is not None:
        if not float(body_mass) > 0.0:
            raise RangeError(f"body_mass = {float(body_mass):g} kg must be positive")
        uptake = exposure.columns["o2_uptake_stpd"] * 1000.0 / float(body_mass)
        known = ~np.isnan(uptake)
        for value in uptake[known]:
            _number(value, "o2_uptake_per_mass")
        minutes = np.where(known, exercise_half_time.raw(np.where(known, uptake, 3.5)), minutes)
    first, last = (
        a + b for a, b in zip(pieces.inert_pressure("N2"), pieces.inert_pressure("Ar"), strict=True)
    )
    if initial is None:
        held = 0.79 * float(exposure.surface_pressure)
    else:
        held = _number(initial, "tissue_pressure")
    boundary = [held]
    for k in range(len(pieces.duration)):
        boundary.append(
            float(tissue_pressure.raw(boundary[-1], first[k], last[k], pieces.duration[k], minutes[k]))
        )
    start = np.array(boundary)[index]
    there = first[index] + (last - first)[index] * share
    values = tissue_pressure.raw(start, first[index], there, pieces.duration[index] * share, minutes[index])
    out = xr.Dataset(
        {"ambient_pressure": ("time", ds["ambient_pressure"].values, attributes("ambient_pressure"))}
    )
    out = out.assign_coords(time=ds["time"])
    known_as = weakest(
        [
            tissue_pressure.provenance,
            exercise_half_time.provenance if body_mass is not None else "memory_high",
        ]
    )
    out["tissue_pressure"] = (
        "time",
        np.asarray(values),
        attributes("tissue_pressure", provenance=known_as)
        | {"long_name": "N2 pressure in the slow tissue, absolute"},
    )
    if suit_pressure is not None:
        suit = _number(suit_pressure, "suit_pressure")
        inputs = json.dumps({"tissue_pressure": "@tissue_pressure", "suit_pressure": suit})
        out["supersaturation_ratio"] = (
            "time",
            np.asarray(supersaturation_ratio.raw(np.asarray(values), suit)),
            attributes(
                "supersaturation_ratio",
                equation=supersaturation_ratio.name,
                inputs=inputs,
                provenance=known_as,
            ),
        )
    out["half_time"] = ("segment", minutes, attributes("half_time", provenance=known_as))
    out.attrs = {
        **ds.attrs,
        "title": "nitrogen in the slow tissue of prebreathe",
        "source": ds.attrs["source"].replace(", exposure", ", tissues, prebreathe"),
        "references": "waligora_1984" + ("; conkin_2004" if body_mass is not None else ""),
        "provenance": known_as,
        "does_not_claim": "the ratio is an index; in trials more than half had bubbles at accepted values",
        "comment": CAUTION,
    }
    return out


def _number(value: Any, name: str) -> float:
    one = quantity(name)
    number = one.from_text(value) if isinstance(value, str) else float(value)
    if not one.possible[0] <= number <= one.possible[1]:
        raise one.range_error(number)
    return number
