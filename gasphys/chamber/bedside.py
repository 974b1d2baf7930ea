"""What is attached to a patient, and what was read during a treatment."""

from __future__ import annotations

import os
from dataclasses import dataclass, fields
from decimal import Decimal
from typing import Any

from gasphys.errors import GasphysError, RangeError, unknown_name
from gasphys.quantities import Quantity, quantity
from gasphys.toml_files import read_toml
from gasphys.units import parse_quantity

__all__ = ["Devices", "Reading", "read_readings"]


@dataclass(frozen=True)
class Devices:
    """Gas spaces and machines that pressure acts on; what is not given is not there.

    Parameters
    ----------
    trapped_gas : float or str, optional
        Gas that cannot leave, as seen at the surface [L].
    cuff_volume, cuff_pressure : float or str, optional
        Air in a tube cuff [L] and its pressure above ambient [kPa].
    tidal_volume : float or str, optional
        Of a ventilator, set at the surface [L].
    drip_chamber : float or str, optional
        Air in a drip chamber at pressure [L].

    Raises
    ------
    RangeError
        If a value is not possible.

    Examples
    --------
    >>> Devices(trapped_gas="60 mL").trapped_gas
    0.06
    """

    trapped_gas: Any = None
    cuff_volume: Any = None
    cuff_pressure: Any = None
    tidal_volume: Any = None
    drip_chamber: Any = None

    def __post_init__(self) -> None:
        for name, one in _DEVICES.items():
            value = getattr(self, name)
            if value is not None:
                object.__setattr__(self, name, checked(name, one, value))

    @classmethod
    def from_toml(cls, path: str | os.PathLike[str]) -> Devices:
        """Read the table ``[devices]`` of a person's file.

        Parameters
        ----------
        path : path
            TOML file; without the table nothing is attached.

        Returns
        -------
        Devices
            What the table says.

        Raises
        ------
        InputFileError
            With file, line and column, for anything that cannot be read.

        Examples
        --------
        >>> import pathlib, tempfile
        >>> file = pathlib.Path(tempfile.mkdtemp()) / "p.toml"
        >>> _ = file.write_text('[devices]\\ncuff_volume = "7 mL"\\n')
        >>> Devices.from_toml(file).cuff_volume
        0.007
        """
        file = read_toml(path, "write TOML")
        table = file.data.get("devices", {})
        if not isinstance(table, dict):
            raise file.error("devices must be a table [devices]", "begin it with [devices]", key="devices")
        known = [f.name for f in fields(cls)]
        for key, value in table.items():
            try:
                if key not in known:
                    raise unknown_name("field of [devices]", key, known)
                cls(**{key: value})
            except (GasphysError, TypeError) as error:
                raise file.error(str(error), "correct the value", key=key, table="devices") from None
        return cls(**table)


@dataclass(frozen=True)
class Reading:
    """One value read during a treatment, as far as its digits tell.

    Parameters
    ----------
    name : str
        Quantity read.
    time : float
        When [min since the start].
    low, high : float
        Half a unit of the last digit below and above, in the canonical unit.
    text : str
        As written.

    Examples
    --------
    >>> Reading.parse("chamber_o2_fraction", "60 min", "22.4 %").high
    0.2245
    """

    name: str
    time: float
    low: float
    high: float
    text: str

    @classmethod
    def parse(cls, name: str, time: Any, value: Any) -> Reading:
        """Read a name, a time and a value with its unit.

        Parameters
        ----------
        name : str
            One of :data:`READABLE`.
        time : float or str
            Minutes, or text such as ``"1 h"``.
        value : str
            Text with a unit.

        Returns
        -------
        Reading
            The reading.

        Raises
        ------
        UnknownNameError
            If the quantity is none that a worksheet takes.
        RangeError
            If a value is not possible.

        Examples
        --------
        >>> Reading.parse("oxygen_pressure", 40, "150 bar").low
        14950.0
        """
        if name not in READABLE:
            raise unknown_name("reading", name, READABLE)
        one = READABLE[name]
        when = checked("time", quantity("time"), time)
        if not isinstance(value, str):
            raise TypeError(f"value of {name} must be text with a unit, such as '{_SAMPLES[name]}'")
        number, unit_name = parse_quantity(value)
        if not unit_name and one.unit != "1":
            raise RangeError(f"value of {name} needs a unit, such as '{_SAMPLES[name]}'")
        digits = value.strip()[: len(value.strip()) - len(unit_name)].strip()
        half = 0.5 * 10.0 ** int(Decimal(digits).as_tuple().exponent)
        checked(name, one, value)
        low, high = (float(one.from_unit(number + s * half, unit_name or "1")) for s in (-1.0, 1.0))
        return cls(name, when, max(low, one.possible[0]), min(high, one.possible[1]), value)


def read_readings(path: str | os.PathLike[str]) -> tuple[Reading, ...]:
    """Read what was written down during a treatment.

    Parameters
    ----------
    path : path
        TOML file with a table ``[[reading]]`` for each: ``name``, ``time``, ``value``.

    Returns
    -------
    tuple of Reading
        In order of time.

    Raises
    ------
    InputFileError
        With file, line and column, for anything that cannot be read.

    Examples
    --------
    >>> import pathlib, tempfile
    >>> file = pathlib.Path(tempfile.mkdtemp()) / "r.toml"
    >>> _ = file.write_text('[[reading]]\\nname = "arterial_po2"\\ntime = "30 min"\\nvalue = "181 kPa"\\n')
    >>> read_readings(file)[0].low
    180.5
    """
    file = read_toml(path, 'write TOML tables [[reading]] with name, time and value = "181 kPa"')
    given = file.data.get("reading")
    if not isinstance(given, list) or not given or not all(isinstance(g, dict) for g in given):
        raise file.error("no [[reading]] table", "begin every reading with a line [[reading]]")
    for key in file.data:
        if key != "reading":
            raise file.error(str(unknown_name("table", key, ["reading"])), "remove it", key=key)
    found = []
    wanted = ("name", "time", "value")
    for number, row in enumerate(given):
        place: dict[str, Any] = {"table": "reading", "number": number}
        for key in row:
            if key not in wanted:
                raise file.error(str(unknown_name("field", key, wanted)), "correct it", key=key, **place)
        for key in wanted:
            if key not in row:
                raise file.error(f"a reading has no {key}", f"add {key} = ...", **place)
        key = "time"
        try:
            when = checked("time", quantity("time"), row["time"])
            key = "value" if row["name"] in READABLE else "name"
            found.append(Reading.parse(str(row["name"]), when, row["value"]))
        except (GasphysError, TypeError) as error:
            raise file.error(str(error), "correct the value", key=key, **place) from None
    return tuple(sorted(found, key=lambda r: r.time))


_DEVICES: dict[str, Quantity] = {
    "trapped_gas": quantity("volume"),
    "cuff_volume": quantity("volume"),
    "cuff_pressure": quantity("cuff_pressure"),
    "tidal_volume": quantity("tidal_volume"),
    "drip_chamber": quantity("volume"),
}

#: What a worksheet takes back.
READABLE: dict[str, Quantity] = {
    "arterial_po2": quantity("arterial_po2"),
    "arterial_pco2": quantity("arterial_pco2"),
    "chamber_o2_fraction": quantity("chamber_o2_fraction"),
    "chamber_pco2": quantity("chamber_pco2"),
    "oxygen_pressure": quantity("cylinder_pressure"),
    "tidal_volume": quantity("tidal_volume"),
}

_SAMPLES = {
    "arterial_po2": "181 kPa",
    "arterial_pco2": "5.3 kPa",
    "chamber_o2_fraction": "22.4 %",
    "chamber_pco2": "0.31 kPa",
    "oxygen_pressure": "150 bar",
    "tidal_volume": "420 mL",
}


def checked(name: str, one: Quantity, value: Any) -> float:
    """Return a number, or text with a unit, in the canonical unit of a quantity.

    Parameters
    ----------
    name : str
        What it is called, for errors.
    one : Quantity
        The quantity.
    value : float or str
        As given.

    Returns
    -------
    float
        In the canonical unit.

    Raises
    ------
    RangeError
        If it is not possible.

    Examples
    --------
    >>> checked("volume", quantity("volume"), "60 mL")
    0.06
    """
    if isinstance(value, str):
        value = one.from_text(value)
    if isinstance(value, bool) or not isinstance(value, (int, float)):
        raise TypeError(f"{name} must be a number in {one.unit} or text with a unit")
    if not one.possible[0] <= value <= one.possible[1]:
        raise RangeError(f"{name}: {one.range_error(float(value))}")
    return float(value)
