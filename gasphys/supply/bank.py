"""A cylinder, and how much is breathed: the words that every account of gas begins with."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.constants import BODY_VAPOR_PRESSURE
from gasphys.errors import ExposureError, RangeError, UnknownNameError, unknown_name
from gasphys.exposure import Exposure
from gasphys.gas import FORMULAS, Gas, gas_fractions
from gasphys.quantities import quantity
from gasphys.real_gas import cylinder_content, cylinder_pressure
from gasphys.shell import Argument, number

__all__ = ["Cylinder", "Demand"]

Array = NDArray[np.float64]

#: What a :class:`Demand` may say for each part of an exposure.
_RATES = ("surface_rate", "ventilation_btps", "o2_uptake_stpd")
#: Temperature of the gas in the lungs at which a ventilation BTPS is counted [degC].
_BODY_TEMPERATURE = 37.0

virial_content = cylinder_content.pick(model="virial").raw  # type: ignore[attr-defined]
virial_cylinder_pressure = cylinder_pressure.pick(model="virial").raw  # type: ignore[attr-defined]


def read(value: Any, name: str) -> float:
    """Return one checked number of a quantity, from a number or text with a unit.

    Parameters
    ----------
    value : float or str
        What was given.
    name : str
        Quantity.

    Returns
    -------
    float
        In the canonical unit.

    Raises
    ------
    GasphysError
        If it cannot be read or is not possible.

    Examples
    --------
    >>> read("232 bar", "cylinder_pressure")
    23200.0
    """
    one = quantity(name)
    found = number(value, Argument(name, one))
    if not one.possible[0] <= found <= one.possible[1]:
        raise one.range_error(found)
    return float(found)


def labelled(value: Any, name: str) -> xr.DataArray:
    """Return a checked input in its canonical unit as a labelled array.

    Parameters
    ----------
    value : float, str or DataArray
        What was given.
    name : str
        Quantity.

    Returns
    -------
    DataArray
        Without dimensions for one number.

    Examples
    --------
    >>> float(labelled("232 bar", "cylinder_pressure"))
    23200.0
    """
    one = quantity(name)
    if isinstance(value, xr.DataArray):
        return xr.DataArray(one.from_unit(value.astype(float), str(value.attrs["units"])))
    return xr.DataArray(number(value, Argument(name, one)))


def mole_fractions(gas: Any) -> list[float]:
    """Return the seven mole fractions of a gas, in the order the equations of state take them.

    Parameters
    ----------
    gas : Gas or str
        One gas.

    Returns
    -------
    list of float
        In the order of :data:`gasphys.gas.FORMULAS`.

    Examples
    --------
    >>> mole_fractions("air")[:2]
    [0.21, 0.79]
    """
    shares = gas_fractions(gas)
    return [float(shares[name]) for name in FORMULAS.values()]


@dataclass(frozen=True)
class Cylinder:
    """A cylinder, or several joined ones, with what is in it.

    Parameters
    ----------
    gas : Gas or str
        What it holds.
    water_capacity : float or str
        Inner volume of one [L].
    pressure : float or str
        Pressure at `temperature` [kPa absolute]; a gauge reads less by the ambient pressure.
    name : str
        What it is called; the gas where none is given.
    temperature : float or str
        Of the cylinder and its gas [degC].
    count : int
        How many of the same are joined.
    lowest_pressure : float or str
        Below this pressure nothing is taken from it [kPa absolute]; ambient pressure is a floor anyway.

    Raises
    ------
    GasphysError
        If a value is not possible.

    Examples
    --------
    >>> back = Cylinder("trimix 17/48", "12 L", "220 bar", count=2)
    >>> round(back.amount, 1), back.capacity
    (193.5, 24.0)
    """

    gas: Any
    water_capacity: Any
    pressure: Any
    name: str = ""
    temperature: Any = 20.0
    count: int = 1
    lowest_pressure: Any = 0.0

    def __post_init__(self) -> None:
        gas = Gas.parse(self.gas)
        if not (isinstance(self.count, int) and not isinstance(self.count, bool) and self.count >= 1):
            raise RangeError(f"count = {self.count!r} of a cylinder must be a whole number of at least 1")
        for key, value in (
            ("gas", gas),
            ("water_capacity", read(self.water_capacity, "water_capacity")),
            ("pressure", read(self.pressure, "cylinder_pressure")),
            ("temperature", read(self.temperature, "temperature")),
            ("lowest_pressure", read(self.lowest_pressure, "cylinder_pressure")),
            ("name", self.name or str(gas)),
        ):
            object.__setattr__(self, key, value)
        # The public equation checks the range of the equation of state, and says so.
        cylinder_content(self.pressure, gas, self.water_capacity, self.temperature)

    @property
    def capacity(self) -> float:
        """Inner volume of all joined cylinders [L]."""
        return float(self.water_capacity * self.count)

    @property
    def amount(self) -> float:
        """What it holds, by the virial series [mol]."""
        return float(self.content(self.pressure))

    def content(self, pressure: Any, temperature: float | None = None) -> Any:
        """Return what it would hold at a pressure.

        Parameters
        ----------
        pressure : float or array
            Pressure [kPa absolute].
        temperature : float, optional
            Another temperature than its own [degC].

        Returns
        -------
        float or array
            Amount [mol].

        Examples
        --------
        >>> round(Cylinder("air", 10.0, "200 bar").content(5000.0), 1)
        20.8
        """
        t = self.temperature if temperature is None else temperature
        found = virial_content(np.asarray(pressure, dtype=float), *mole_fractions(self.gas), self.capacity, t)
        return float(found) if np.ndim(found) == 0 else np.asarray(found)

    def pressure_of(self, amount: Any, temperature: float | None = None) -> Any:
        """Return its pressure with an amount in it.

        Parameters
        ----------
        amount : float or array
            Amount [mol].
        temperature : float, optional
            Another temperature than its own [degC].

        Returns
        -------
        float or array
            Pressure [kPa absolute].

        Examples
        --------
        >>> tank = Cylinder("air", 10.0, "232 bar")
        >>> round(tank.pressure_of(tank.amount, temperature=5.0) / 100.0, 1)
        214.5
        """
        t = self.temperature if temperature is None else temperature
        found = virial_cylinder_pressure(
            np.asarray(amount, dtype=float), *mole_fractions(self.gas), self.capacity, t
        )
        return float(found) if np.ndim(found) == 0 else np.asarray(found)

    def __str__(self) -> str:
        many = f"{self.count} x " if self.count > 1 else ""
        label = "" if self.name == str(self.gas) else f"{self.name}: "
        return (
            f"{label}{self.gas}, {many}{self.water_capacity:g} L at {self.pressure / 100.0:.4g} bar absolute "
            f"and {self.temperature:g} degC"
        )


def check_cylinders(cylinders: Sequence[Cylinder]) -> tuple[Cylinder, ...]:
    """Return cylinders after a check that each is one and has a name of its own.

    Parameters
    ----------
    cylinders : sequence of Cylinder
        In the order they are used.

    Returns
    -------
    tuple of Cylinder
        The same.

    Raises
    ------
    TypeError
        If one is no cylinder.
    UnknownNameError
        If two share a name.

    Examples
    --------
    >>> len(check_cylinders([Cylinder("air", 10.0, "200 bar")]))
    1
    """
    found = tuple(cylinders)
    for one in found:
        if not isinstance(one, Cylinder):
            raise TypeError(f"a Cylinder is needed, not {type(one).__name__}")
    names = [one.name for one in found]
    twice = [n for n in names if names.count(n) > 1]
    if twice:
        raise UnknownNameError(f"two cylinders are called {twice[0]!r}; give each a name= of its own")
    return found


@dataclass(frozen=True)
class Demand:
    """How much one person breathes, where the exposure does not say it.

    Parameters
    ----------
    surface_rate : float, str or mapping, optional
        Gas breathed per minute on open circuit, dry, the same volume at every pressure [L/min]: one number,
        or one for each part of the exposure, the part ``""`` for all others.
    ventilation_btps : float, str or mapping, optional
        Instead: minute ventilation BTPS [L/min]. What an exposure carries itself goes before either.
    o2_uptake_stpd : float, str or mapping, optional
        O2 uptake on a loop [L/min STPD].
    persons : float
        How many breathe like this.
    loop_volume : float or str
        Volume of loop and lungs that diluent fills [L].
    gas_temperature : float or str
        Temperature of the gas breathed, for `surface_rate` and the loop [degC].

    Raises
    ------
    GasphysError
        If a value is not possible, or both ways of counting are given.

    Notes
    -----
    A loop takes its O2 uptake from oxygen and fills its volume with diluent on the way down. Flushing, mask
    clearing and the oxygen that is vented on the way up are not counted: real loops use more.

    Examples
    --------
    >>> Demand(surface_rate={"": 18.0, "ascent": 14.0}).surface_rate["ascent"]
    14.0
    """

    surface_rate: Any = None
    ventilation_btps: Any = None
    o2_uptake_stpd: Any = None
    persons: float = 1.0
    loop_volume: Any = 6.0
    gas_temperature: Any = 20.0

    def __post_init__(self) -> None:
        if self.surface_rate is not None and self.ventilation_btps is not None:
            raise RangeError("a demand has a surface_rate or a ventilation_btps, not both")
        for name in _RATES:
            given = getattr(self, name)
            if isinstance(given, Mapping):
                object.__setattr__(self, name, {str(k): read(v, name) for k, v in given.items()})
            elif given is not None:
                object.__setattr__(self, name, read(given, name))
        if not 0.0 < float(self.persons) < math.inf:
            raise RangeError(f"persons = {self.persons} must be positive")
        object.__setattr__(self, "loop_volume", read(self.loop_volume, "volume"))
        object.__setattr__(self, "gas_temperature", read(self.gas_temperature, "temperature"))

    def of_parts(self, name: str, parts: Sequence[str]) -> Array:
        """Return one of its rates for every piece; NaN where it says nothing.

        Parameters
        ----------
        name : str
            ``"surface_rate"``, ``"ventilation_btps"`` or ``"o2_uptake_stpd"``.
        parts : sequence of str
            Part of each piece.

        Returns
        -------
        array
            A number a piece.

        Raises
        ------
        UnknownNameError
            If it names a part that the exposure does not have.

        Examples
        --------
        >>> Demand(surface_rate=20.0).of_parts("surface_rate", ["", "ascent"])
        array([20., 20.])
        """
        given = getattr(self, name)
        if given is None:
            return np.full(len(parts), np.nan)
        if not isinstance(given, Mapping):
            return np.full(len(parts), float(given))
        for part in given:
            if part and part not in parts:
                raise unknown_name("part of the exposure", part, {p for p in parts if p})
        return np.array([given.get(p, given.get("", np.nan)) for p in parts], dtype=float)

    def rates(self, exposure: Exposure) -> tuple[Array, Array, Array]:
        """Return what is breathed in every piece, and how it is counted.

        Parameters
        ----------
        exposure : Exposure
            Pieces, and what they say themselves.

        Returns
        -------
        tuple of array
            Volume per minute [L/min], temperature [degC] and vapor pressure [kPa] at which it is counted,
            ``(..., segment)``; NaN where nothing is known.

        Examples
        --------
        >>> volume, _, vapor = Demand(surface_rate=20.0).rates(Exposure.start("air").stay(5))
        >>> volume.tolist(), vapor.tolist()
        ([20.0], [0.0])
        """
        own = exposure.columns["ventilation_btps"]
        dry = self.of_parts("surface_rate", exposure.part)
        humid = self.of_parts("ventilation_btps", exposure.part)
        btps = ~np.isnan(own) | np.isnan(dry)
        volume = np.where(np.isnan(own), np.where(np.isnan(dry), humid, dry), own)
        temperature = np.where(btps, _BODY_TEMPERATURE, self.gas_temperature)
        return volume, temperature, np.where(btps, float(BODY_VAPOR_PRESSURE), 0.0)

    def uptake(self, exposure: Exposure) -> Array:
        """Return the O2 uptake of every piece.

        Parameters
        ----------
        exposure : Exposure
            Pieces, and what they say themselves.

        Returns
        -------
        array
            O2 uptake [L/min STPD]; NaN where it is not known.

        Examples
        --------
        >>> Demand(o2_uptake_stpd=1.2).uptake(Exposure.start("air").stay(5)).tolist()
        [1.2]
        """
        own = exposure.columns["o2_uptake_stpd"]
        return np.where(np.isnan(own), self.of_parts("o2_uptake_stpd", exposure.part), own)


def unknown_rate(exposure: Exposure, missing: Any, what: str) -> ExposureError:
    """Return the error for pieces whose demand is not known.

    Parameters
    ----------
    exposure : Exposure
        The exposure.
    missing : array of bool
        Pieces without a number, ``(..., segment)``.
    what : str
        What to give.

    Returns
    -------
    ExposureError
        It names the first piece.

    Examples
    --------
    >>> dive = Exposure.start("air").stay(5)
    >>> print(unknown_rate(dive, np.array([True]), "o2_uptake_stpd="))
    piece 1 (air) has no demand: give o2_uptake_stpd= in a Demand, or work() in the exposure
    """
    first = int(np.argmax(np.atleast_2d(missing).reshape(-1, len(exposure.part)).any(axis=0)))
    part = f", part {exposure.part[first]!r}" if exposure.part[first] else ""
    return ExposureError(
        f"piece {first + 1} ({exposure.gas_name(first)}{part}) has no demand: give {what} in a Demand, or "
        "work() in the exposure"
    )
