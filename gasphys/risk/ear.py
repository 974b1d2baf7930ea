"""Inert gases in the inner ear: perfused labyrinth beside perilymph and endolymph.

The structure is of a published model; its volumes and conductances could not be read, so they are the
caller's.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.errors import RangeError, unknown_name
from gasphys.exposure import Exposure
from gasphys.gas import FORMULAS
from gasphys.quantities import attributes, dataset_attributes

__all__ = ["InnerEar", "inner_ear"]

#: Rooms in the order of the state.
_ROOMS = ("labyrinth", "perilymph", "endolymph")


@dataclass(frozen=True)
class InnerEar:
    """Volumes and conductances of an inner ear, the caller's own.

    Parameters
    ----------
    labyrinth, perilymph, endolymph : float
        Volumes times solubility are what fills: all three in one unit [uL].
    perfusion : mapping
        Formula of an inert gas to blood flow times its solubility ratio blood/tissue [uL/min].
    perilymph_conductance, endolymph_conductance : mapping
        Formula to conductance between labyrinth and that room over the gas's solubility [uL/min].
    window_conductance : mapping
        Formula to conductance between perilymph and the gas of the middle ear over solubility [uL/min].

    Raises
    ------
    RangeError
        If a volume is not above zero or a flow is negative.
    UnknownNameError
        If a formula is not of an inert gas.

    Examples
    --------
    >>> one = {"N2": 0.4, "He": 0.4}
    >>> InnerEar(10.0, 100.0, 30.0, one, one, one, {"N2": 0.0, "He": 0.1}).labyrinth
    10.0
    """

    labyrinth: float
    perilymph: float
    endolymph: float
    perfusion: Mapping[str, float]
    perilymph_conductance: Mapping[str, float]
    endolymph_conductance: Mapping[str, float]
    window_conductance: Mapping[str, float]

    def __post_init__(self) -> None:
        inert = [g for g in FORMULAS if g not in ("O2", "CO2")]
        for one in fields(self):
            value = getattr(self, one.name)
            if one.name in _ROOMS:
                if not 0.0 < value < np.inf:
                    raise RangeError(f"{one.name} = {value!r} uL is not a volume above zero")
                continue
            for gas, flow in value.items():
                if gas not in inert:
                    raise unknown_name("inert gas", gas, inert)
                if not 0.0 <= flow < np.inf:
                    raise RangeError(f"{one.name} of {gas} = {flow!r} uL/min is not a flow of 0 or more")

    def rates(self, gas: str) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Return d(state)/dt for each unit of state, and of arterial and middle-ear pressure [1/min].

        Parameters
        ----------
        gas : str
            Formula.

        Returns
        -------
        of_state, of_drive : array
            ``(3, 3)`` and ``(3, 2)``; a gas that a mapping does not name does not pass there.

        Examples
        --------
        >>> ear = InnerEar(10.0, 100.0, 30.0, {"N2": 0.4}, {}, {}, {})
        >>> float(ear.rates("N2")[0][0, 0])
        -0.04
        """
        q, p, e, w = (
            float(m.get(gas, 0.0))
            for m in (
                self.perfusion,
                self.perilymph_conductance,
                self.endolymph_conductance,
                self.window_conductance,
            )
        )
        exchange = np.array([[-q - p - e, p, e], [p, -p - w, 0.0], [e, 0.0, -e]])
        drive = np.array([[q, 0.0], [0.0, w], [0.0, 0.0]])
        volume = np.array([self.labyrinth, self.perilymph, self.endolymph])[:, None]
        return exchange / volume, drive / volume


def inner_ear(exposure: Exposure, ear: InnerEar, water_vapor_pressure: float = 6.266) -> xr.Dataset:
    """Inert gas pressures of the inner ear along an exposure.

    Parameters
    ----------
    exposure : Exposure
        Without scenarios; starts from equilibrium with its first gas and pressure.
    ear : InnerEar
        Volumes and conductances of the caller.
    water_vapor_pressure : float, default 6.266
        Vapor taken off the ambient pressure before the dry fractions [kPa].

    Returns
    -------
    Dataset
        ``room_pressure(room, inert_gas, time)`` [kPa], ``supersaturation(room, time)``: all inert gases, less
        ambient pressure [kPa].

    Raises
    ------
    RangeError
        If the exposure has scenarios.

    Notes
    -----
    V dp/dt of the labyrinth = Q (pa - p) + Kp (pp - p) + Ke (pe - p); perilymph also exchanges with the gas
    of the middle ear, taken to hold what is breathed, humid (own reading). Linear on linear pieces and solved
    exactly by the exponential of a matrix. O2, CO2 and vapor in the tissue are not counted: supersaturation
    of inert gas alone.

    Examples
    --------
    >>> one = {"N2": 0.4, "He": 0.4}
    >>> ear = InnerEar(10.0, 100.0, 30.0, one, one, one, {})
    >>> dive = Exposure.start("air").travel(depth=30, minutes=2).stay(20)
    >>> ds = inner_ear(dive, ear)
    >>> bool(ds.room_pressure.sel(room="labyrinth", inert_gas="N2")[-1] > 100.0)
    True
    """
    from scipy.linalg import expm

    if exposure.dims:
        raise RangeError("the inner ear takes one exposure; choose a scenario first")
    pieces = exposure.pieces()
    gases = [g for g in FORMULAS if g not in ("O2", "CO2") and np.any(pieces.fractions.get(g, 0.0) > 0.0)]
    gases = gases or ["N2"]
    found = np.zeros((3, len(gases), len(exposure.part) + 1))
    for number, gas in enumerate(gases):
        dry = pieces.inert_pressure(gas)
        humid = [
            d * np.maximum(p - water_vapor_pressure, 0.0) / p
            for d, p in zip(dry, (pieces.start_pressure, pieces.end_pressure), strict=True)
        ]
        of_state, of_drive = ear.rates(gas)
        state = np.full(3, humid[0][0])
        found[:, number, 0] = state
        source = of_drive.sum(axis=1)  # arterial blood and middle ear hold the same
        for s, minutes in enumerate(pieces.duration):
            if minutes > 0.0:
                # State, drive and the drive's rate in one linear system.
                whole = np.zeros((5, 5))
                whole[:3, :3], whole[:3, 3], whole[3, 4] = of_state, source, 1.0
                rate = (humid[1][s] - humid[0][s]) / minutes
                state = (expm(whole * minutes) @ np.array([*state, humid[0][s], rate]))[:3]
            found[:, number, s + 1] = state
    view = exposure.to_dataset()
    ambient = view["ambient_pressure"]
    ds = xr.Dataset(coords={"time": view["time"], "room": list(_ROOMS), "inert_gas": gases})
    ds["ambient_pressure"] = ambient
    ds["room_pressure"] = (
        ("room", "inert_gas", "time"),
        found,
        attributes("tissue_pressure") | {"long_name": "inert gas pressure in a room of the inner ear"},
    )
    ds["supersaturation"] = (
        ("room", "time"),
        found.sum(axis=1) - ambient.values,
        {"units": "kPa", "long_name": "inert gas pressure less ambient pressure; negative: none"},
    )
    ds.attrs = dataset_attributes(
        "inert gases in the inner ear",
        "risk, inner ear",
        history=exposure.history,
        references=["doolette_mitchell_2003"],
        comment="Structure from memory; volumes and conductances are the caller's. No limit is known.",
        provenance="memory_medium",
    )
    return ds
