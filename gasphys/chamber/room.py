"""A chamber as its unit describes it: volumes, ventilation, masks, stock, people."""

from __future__ import annotations

import os
from dataclasses import dataclass, fields, replace
from typing import Any

from gasphys.chamber.bedside import checked
from gasphys.constants import ATMOSPHERE
from gasphys.errors import GasphysError, RangeError, unknown_name
from gasphys.quantities import Quantity, quantity
from gasphys.toml_files import TomlFile, read_toml

__all__ = ["Chamber", "Stock"]

Pair = tuple[float, float]


@dataclass(frozen=True)
class Stock:
    """A bank of cylinders.

    Parameters
    ----------
    cylinders : int
        How many.
    water_capacity : float
        Of one [L].
    pressure : float
        Now, absolute [kPa].
    reserve_pressure : float
        What is left in them, absolute [kPa].
    """

    cylinders: int = 0
    water_capacity: float = 50.0
    pressure: float = 20000.0
    reserve_pressure: float = 2000.0


@dataclass(frozen=True)
class Chamber:
    """A chamber, its gas and the people in it; every field has a default that results name.

    Parameters
    ----------
    code : str
        A code, never a name.
    volume, entry_lock_volume : float or str
        Gas volume of the main and the entry lock [L].
    surface_pressure : float or str
        Pressure outside [kPa absolute].
    temperature : float or str
        Temperature inside [degC].
    air_flow : float or str
        Ventilation, at chamber conditions [L/min].
    supply_co2 : float or str
        CO2 fraction of the air supplied [1].
    overboard_dump : bool
        Whether masks breathe out to the outside.
    mask_leak : pair of float or str
        Gas each mask or hood in use leaks into the chamber, lowest and highest, at chamber conditions
        [L/min].
    mask_flow : pair of float or str
        Gas each mask or hood in use takes, lowest and highest, at chamber conditions [L/min].
    patients, attendants : int
        People inside.
    co2_output_stpd, o2_uptake_stpd : pair of float or str
        Of one person at rest, lowest and highest [L/min STPD].
    working : float
        How many times more the attendants produce and use.
    o2_limit, co2_limit : float or str
        Chosen limits of the atmosphere: O2 fraction [1], surface equivalent of CO2 [1].
    oxygen, air : Stock
        Banks.
    attendant_code : str
        Code of the attendant.
    attendant_minutes : float or None
        The unit's own rule: oxygen before the ascent [min].
    exposed_before : bool
        Whether the attendant was under pressure in the previous 12 h.
    altitude : float or str
        Of the chamber [m].
    ear_limit : float or str
        Pressure across the eardrum not to be passed [kPa].
    ear_interval : float or str
        Time between two equalizations [min].

    Raises
    ------
    RangeError
        If a value is not possible.

    Notes
    -----
    The output of a person at rest, 0.20 to 0.30 L/min STPD, is remembered; light work is about four
    times that. The default O2 limit is 23.5 %, one of several that authorities print.

    Examples
    --------
    >>> Chamber(volume="18 m3").volume
    18000.0
    """

    code: str = "chamber"
    volume: Any = 18000.0
    entry_lock_volume: Any = 6000.0
    surface_pressure: Any = float(ATMOSPHERE)
    temperature: Any = 22.0
    air_flow: Any = 0.0
    supply_co2: Any = 0.00042
    overboard_dump: bool = True
    mask_leak: Any = (1.0, 5.0)
    mask_flow: Any = (8.0, 15.0)
    patients: int = 1
    attendants: int = 1
    co2_output_stpd: Any = (0.2, 0.3)
    o2_uptake_stpd: Any = (0.25, 0.35)
    working: float = 1.0
    o2_limit: Any = 0.235
    co2_limit: Any = 0.015
    oxygen: Stock = Stock()
    air: Stock = Stock()
    attendant_code: str = ""
    attendant_minutes: float | None = None
    exposed_before: bool = False
    altitude: Any = 0.0
    ear_limit: Any = 7.999343244900001
    ear_interval: Any = 0.25

    def __post_init__(self) -> None:
        for name, one in _NUMBERS.items():
            object.__setattr__(self, name, checked(name, one, getattr(self, name)))
        for name, one in _PAIRS.items():
            given = getattr(self, name)
            pair = tuple(given) if isinstance(given, (list, tuple)) else (given, given)
            if len(pair) != 2:
                raise RangeError(f"{name} needs one value or the lowest and the highest")
            low, high = (checked(name, one, v) for v in pair)
            if not low <= high:
                raise RangeError(f"{name}: the lowest, {low:g}, is above the highest, {high:g} {one.unit}")
            object.__setattr__(self, name, (low, high))
        for name in ("patients", "attendants"):
            count = getattr(self, name)
            if isinstance(count, bool) or not isinstance(count, int) or not 0 <= count <= 50:
                raise RangeError(f"{name} = {count!r} is no number of people, 0 to 50")
        if not 0.5 <= float(self.working) <= 10.0:
            raise RangeError(f"working = {self.working:g} is outside 0.5 to 10")
        for name in ("overboard_dump", "exposed_before"):
            if not isinstance(getattr(self, name), bool):
                raise TypeError(f"{name} must be true or false")

    @classmethod
    def from_toml(cls, path: str | os.PathLike[str]) -> Chamber:
        """Read a chamber from a TOML file.

        Parameters
        ----------
        path : path
            Fields of :class:`Chamber` at the top level, tables ``[oxygen]`` and ``[air]`` with the fields
            of :class:`Stock`. Numbers in canonical units or text such as ``"18 m3"``; a pair as a list.

        Returns
        -------
        Chamber
            The chamber.

        Raises
        ------
        InputFileError
            With file, line and column, for anything that cannot be read.

        Examples
        --------
        >>> import pathlib, tempfile
        >>> file = pathlib.Path(tempfile.mkdtemp()) / "chamber.toml"
        >>> _ = file.write_text('volume = "18 m3"\\n[oxygen]\\ncylinders = 8\\n')
        >>> Chamber.from_toml(file).oxygen.cylinders
        8
        """
        file = read_toml(path, 'write TOML, such as volume = "18 m3"')
        known = {f.name for f in fields(cls)}
        given: dict[str, Any] = {}
        for key, value in file.data.items():
            if key not in known:
                message = str(unknown_name("field of a chamber", key, known))
                raise file.error(message, "correct or remove the line", key=key, table=None)
            if key in ("oxygen", "air"):
                given[key] = _stock(file, key, value)
                continue
            try:
                cls(**{key: value})
            except (GasphysError, TypeError, ValueError) as error:
                raise file.error(str(error), "correct the value", key=key, table="") from None
            given[key] = value
        return cls(**given)

    def narrowed(self, **values: Any) -> Chamber:
        """Return the chamber with other values.

        Parameters
        ----------
        **values
            Fields.

        Returns
        -------
        Chamber
            A new one.

        Examples
        --------
        >>> Chamber().narrowed(mask_leak=3.0).mask_leak
        (3.0, 3.0)
        """
        return replace(self, **values)


_NUMBERS: dict[str, Quantity] = {
    "volume": quantity("chamber_volume"),
    "entry_lock_volume": quantity("chamber_volume"),
    "surface_pressure": quantity("surface_pressure"),
    "temperature": quantity("temperature"),
    "air_flow": quantity("air_flow"),
    "supply_co2": quantity("carbon_dioxide"),
    "o2_limit": quantity("chamber_o2_fraction"),
    "co2_limit": quantity("chamber_co2_surface_equivalent"),
    "altitude": quantity("altitude"),
    "ear_limit": quantity("middle_ear_difference"),
    "ear_interval": quantity("duration"),
}
_PAIRS: dict[str, Quantity] = {
    "mask_leak": quantity("o2_inflow"),
    "mask_flow": quantity("gas_flow"),
    "co2_output_stpd": quantity("co2_output_stpd"),
    "o2_uptake_stpd": quantity("o2_uptake_stpd"),
}
_STOCK: dict[str, Quantity] = {
    "water_capacity": quantity("water_capacity"),
    "pressure": quantity("cylinder_pressure"),
    "reserve_pressure": quantity("cylinder_pressure"),
}


def _stock(file: TomlFile, table: str, given: Any) -> Stock:
    if not isinstance(given, dict):
        raise file.error(f"{table} must be a table", f"write [{table}] above its fields", key=table)
    found: dict[str, Any] = {}
    for key, value in given.items():
        try:
            if key == "cylinders":
                if isinstance(value, bool) or not isinstance(value, int) or not 0 <= value <= 1000:
                    raise RangeError(f"cylinders = {value!r} is no number of cylinders, 0 to 1000")
                found[key] = value
            elif key in _STOCK:
                found[key] = checked(key, _STOCK[key], value)
            else:
                raise unknown_name(f"field of [{table}]", key, ["cylinders", *_STOCK])
        except (GasphysError, TypeError) as error:
            raise file.error(str(error), "correct the value", key=key, table=table) from None
    stock = Stock(**found)
    if not stock.reserve_pressure < stock.pressure:
        raise file.error(
            f"the reserve, {stock.reserve_pressure:g} kPa, is not below the pressure, {stock.pressure:g} kPa",
            "correct one of them",
            key="reserve_pressure" if "reserve_pressure" in found else "pressure",
            table=table,
        )
    return stock
