"""Units with exact definitions, and conversion between them.

Canonical units inside and out: pressure kPa absolute, time min, temperature degC,
volume L, flow L/min, blood gas content mL/dL, density g/L, length m, fractions 1.

``msw`` and ``fsw`` are *pressure differences* here (18 msw = 180 kPa); the absolute pressure
at a depth comes from :func:`gasphys.surroundings.pressure_at_depth`.
"""

from __future__ import annotations

import functools
import re
from dataclasses import dataclass
from typing import Any

from gasphys.errors import UnitError

__all__ = ["UNITS", "Unit", "convert", "parse_quantity", "unit"]

# Exponents of kilogram, meter, second, kelvin, mole.
_Dimension = tuple[int, int, int, int, int]
_NONE: _Dimension = (0, 0, 0, 0, 0)


@dataclass(frozen=True)
class Unit:
    """One unit: its value in SI base units, and a zero point for temperature scales."""

    name: str
    factor: float
    dimension: _Dimension
    offset: float = 0.0
    gauge: bool = False
    definition: str = ""

    def is_like(self, other: Unit) -> bool:
        """Whether values can be converted between the two units."""
        return self.dimension == other.dimension


_PRESSURE: _Dimension = (1, -1, -2, 0, 0)
_LENGTH: _Dimension = (0, 1, 0, 0, 0)
_VOLUME: _Dimension = (0, 3, 0, 0, 0)
_TIME: _Dimension = (0, 0, 1, 0, 0)
_MASS: _Dimension = (1, 0, 0, 0, 0)
_KELVIN: _Dimension = (0, 0, 0, 1, 0)
_ENERGY: _Dimension = (1, 2, -2, 0, 0)
_POUND = 0.45359237
_GRAVITY = 9.80665
_FOOT = 0.3048
_ATM = 101325.0


def _u(name: str, factor: float, dimension: _Dimension, definition: str, **more: Any) -> Unit:
    return Unit(name, factor, dimension, definition=definition, **more)


#: Every unit that may be written, by name. All factors are exact by definition unless said.
UNITS: dict[str, Unit] = {
    u.name: u
    for u in [
        _u("1", 1.0, _NONE, "a fraction"),
        _u("%", 1e-2, _NONE, "one hundredth"),
        _u("ppm", 1e-6, _NONE, "one millionth"),
        _u("Pa", 1.0, _PRESSURE, "SI"),
        _u("uPa", 1e-6, _PRESSURE, "1e-6 Pa"),
        _u("hPa", 1e2, _PRESSURE, "100 Pa"),
        _u("kPa", 1e3, _PRESSURE, "1000 Pa"),
        _u("MPa", 1e6, _PRESSURE, "1e6 Pa"),
        _u("bar", 1e5, _PRESSURE, "100 kPa"),
        _u("mbar", 1e2, _PRESSURE, "100 Pa"),
        _u("dbar", 1e4, _PRESSURE, "10 kPa"),
        _u("atm", _ATM, _PRESSURE, "101.325 kPa (10th CGPM 1954)"),
        _u("ata", _ATM, _PRESSURE, "trade word for standard atmospheres absolute"),
        _u("mmHg", 133.322387415, _PRESSURE, "conventional millimeter of mercury"),
        _u("cmH2O", 98.0665, _PRESSURE, "conventional centimeter of water"),
        _u("psi", _POUND * _GRAVITY / (_FOOT / 12.0) ** 2, _PRESSURE, "lbf per square inch"),
        _u("msw", 1e4, _PRESSURE, "meter of sea water, 10 kPa", gauge=True),
        _u("fsw", _ATM / 33.0, _PRESSURE, "foot of sea water, 33 per atm", gauge=True),
        _u(
            "fsw_64_lb_ft3",
            64.0 * _POUND / _FOOT**3 * _GRAVITY * _FOOT,
            _PRESSURE,
            "foot of water of 64 lb/ft3 at standard gravity",
            gauge=True,
        ),
        _u("fsw_33_08_per_atm", _ATM / 33.08, _PRESSURE, "33.08 per atm", gauge=True),
        _u("fsw_32_646_per_bar", 1e5 / 32.646, _PRESSURE, "32.646 per bar", gauge=True),
        _u("mfw", 1000.0 * _GRAVITY, _PRESSURE, "meter of water of 1000 kg/m3", gauge=True),
        _u("s", 1.0, _TIME, "SI"),
        _u("min", 60.0, _TIME, "60 s"),
        _u("h", 3600.0, _TIME, "60 min"),
        _u("d", 86400.0, _TIME, "24 h"),
        _u("m", 1.0, _LENGTH, "SI"),
        _u("mm", 1e-3, _LENGTH, "1e-3 m"),
        _u("cm", 1e-2, _LENGTH, "1e-2 m"),
        _u("km", 1e3, _LENGTH, "1000 m"),
        _u("um", 1e-6, _LENGTH, "micrometer"),
        _u("ft", _FOOT, _LENGTH, "0.3048 m"),
        _u("m2", 1.0, (0, 2, 0, 0, 0), "SI"),
        _u("cm2", 1e-4, (0, 2, 0, 0, 0), "1e-4 m2"),
        _u("m3", 1.0, _VOLUME, "SI"),
        _u("L", 1e-3, _VOLUME, "1e-3 m3"),
        _u("dL", 1e-4, _VOLUME, "0.1 L"),
        _u("mL", 1e-6, _VOLUME, "1e-3 L"),
        _u("cm3", 1e-6, _VOLUME, "1 mL"),
        _u("ft3", _FOOT**3, _VOLUME, "cubic foot"),
        _u("kg", 1.0, _MASS, "SI"),
        _u("g", 1e-3, _MASS, "1e-3 kg"),
        _u("mg", 1e-6, _MASS, "1e-6 kg"),
        _u("lb", _POUND, _MASS, "avoirdupois pound"),
        _u("K", 1.0, _KELVIN, "SI"),
        _u("degC", 1.0, _KELVIN, "Celsius scale", offset=273.15),
        _u("degF", 5.0 / 9.0, _KELVIN, "Fahrenheit scale", offset=459.67 * 5.0 / 9.0),
        _u("delta_degC", 1.0, _KELVIN, "Celsius difference"),
        _u("delta_degF", 5.0 / 9.0, _KELVIN, "Fahrenheit difference"),
        _u("mol", 1.0, (0, 0, 0, 0, 1), "SI"),
        _u("mmol", 1e-3, (0, 0, 0, 0, 1), "1e-3 mol"),
        _u("J", 1.0, _ENERGY, "SI"),
        _u("kJ", 1e3, _ENERGY, "1000 J"),
        _u("W", 1.0, (1, 2, -3, 0, 0), "SI"),
        _u("mW", 1e-3, (1, 2, -3, 0, 0), "1e-3 W"),
        _u("N", 1.0, (1, 1, -2, 0, 0), "SI"),
        _u("mN", 1e-3, (1, 1, -2, 0, 0), "1e-3 N"),
        _u("kgf", _GRAVITY, (1, 1, -2, 0, 0), "kilogram-force, 9.80665 N"),
        _u("degrees_north", 1.0, _NONE, "latitude"),
    ]
}

_ALIASES = {
    "ATA": "ata",
    "atm abs": "atm",
    "atmabs": "atm",
    "bar abs": "bar",
    "kPa abs": "kPa",
    "psia": "psi",
    "°C": "degC",
    "C": "degC",
    "°F": "degF",
    "minute": "min",
    "minutes": "min",
    "hour": "h",
    "hours": "h",
    "hr": "h",
    "day": "d",
    "days": "d",
    "sec": "s",
    "seconds": "s",
    "second": "s",
    "percent": "%",
    "l": "L",
    "liter": "L",
    "dimensionless": "1",
    "": "1",
    "metre": "m",
    "meter": "m",
    "feet": "ft",
    "foot": "ft",
    "micrometer": "um",
    "µm": "um",
    "degree_Celsius": "degC",
    "degrees_Celsius": "degC",
    "celsius": "degC",
    "kilopascal": "kPa",
    "pascal": "Pa",
    "millibar": "mbar",
    "minute^-1": "1/min",
}

_REFUSED = {
    "psig": "psi above the surface pressure; add the surface pressure and write psi",
    "barg": "bar above the surface pressure; add the surface pressure and write bar",
    "torr": "write mmHg",
    "at": "technical atmosphere: write the value in kPa",
    "scf": "a volume at a stated reference state; write ft3 and convert the state",
}


@functools.lru_cache(maxsize=1024)
def unit(name: str) -> Unit:
    """Return the unit of this name, or of an expression such as ``"mL/dL/mmHg"``.

    Parameters
    ----------
    name : str
        A name of :data:`UNITS`, a common alias, or names joined by ``*``, ``/`` or a space,
        each with an optional exponent (``m2``, ``s^2``, ``L-1``).

    Returns
    -------
    Unit
        Factor to SI base units and dimension.

    Raises
    ------
    UnitError
        If a part of the name is not known.

    Examples
    --------
    >>> unit("L/min").factor
    1.6666666666666667e-05
    """
    text = name.strip()
    text = _ALIASES.get(text, text)
    if text in UNITS:
        return UNITS[text]
    if text in _REFUSED:
        raise UnitError(f"unit {name!r} is not accepted: {_REFUSED[text]}")
    factor = 1.0
    dimension = [0, 0, 0, 0, 0]
    parts = re.findall(r"([*/ ]?)\s*([A-Za-z%_°µ][\w%°µ]*|1)(?:\^?(-?\d+))?", text)
    if not parts or "".join(f"{a}{b}{c}" for a, b, c in parts).replace(" ", "") != re.sub(r"[\s^]", "", text):
        raise _unknown_unit(name)
    for operator, part, power in parts:
        part_name = _ALIASES.get(part, part)
        if part_name + power in UNITS:
            part_name, power = part_name + power, ""
        if part_name not in UNITS:
            match = re.fullmatch(r"([A-Za-z]+)(\d)", part_name)
            if not match or match[1] not in UNITS:
                raise _unknown_unit(name)
            part_name, power = match[1], match[2]
        one = UNITS[part_name]
        if one.offset:
            raise UnitError(f"unit {name!r} holds the scale {part_name}; write delta_{part_name} or K")
        exponent = int(power or 1) * (-1 if operator == "/" else 1)
        factor *= one.factor**exponent
        dimension = [d + exponent * e for d, e in zip(dimension, one.dimension, strict=True)]
    return Unit(text, factor, tuple(dimension))  # type: ignore[arg-type]


def _unknown_unit(name: str) -> UnitError:
    import difflib

    names = [*UNITS, *(a for a in _ALIASES if a)]
    near = difflib.get_close_matches(name, names, n=1, cutoff=0.6)
    hint = f"; nearest: {near[0]!r}" if near else ""
    return UnitError(f"unknown unit {name!r}{hint}; units: {', '.join(UNITS)}")


def convert(value: Any, source_unit: str, target_unit: str) -> Any:
    """Convert a value between two units of the same kind.

    Parameters
    ----------
    value : float or array_like
        The number or array, any shape.
    source_unit : str
        Unit of `value`.
    target_unit : str
        Unit wanted.

    Returns
    -------
    float or array
        Same kind and shape as `value`.

    Raises
    ------
    UnitError
        If a unit is unknown or the two measure different things.

    Notes
    -----
    ``msw`` and ``fsw`` convert as pressure *differences*. ``degC``, ``degF`` and ``K`` convert
    as scales; ``delta_degC`` and ``delta_degF`` as differences.

    Examples
    --------
    >>> convert(18, "msw", "kPa")
    180.0
    >>> convert(2.4, "atm", "kPa")
    243.18
    >>> convert(37, "degC", "K")
    310.15
    """
    source, target = unit(source_unit), unit(target_unit)
    if not source.is_like(target):
        raise UnitError(f"cannot convert {source_unit!r} to {target_unit!r}: different quantities")
    if (source.name, target.name) in _MIXED_TEMPERATURE:
        raise UnitError(f"{source_unit!r} to {target_unit!r} mixes a temperature scale and a difference")
    if isinstance(value, (bool, str)):
        raise UnitError(f"value must be a number or an array, not {type(value).__name__}")
    if isinstance(value, (list, tuple)):
        import numpy as np

        value = np.asarray(value, dtype=np.float64)
    elif isinstance(value, int):
        value = float(value)
    if source.name == target.name:
        return value
    factor = source.factor / target.factor
    if source.offset or target.offset:
        return value * factor + (source.offset - target.offset) / target.factor
    # Division by an exact whole number keeps printed decimals exact where multiplication does not.
    inverse = target.factor / source.factor
    if factor < 1.0 and inverse == round(inverse):
        return value / inverse
    return value * factor


_MIXED_TEMPERATURE = {
    (a, b)
    for scale in ("degC", "degF")
    for difference in ("delta_degC", "delta_degF")
    for a, b in ((scale, difference), (difference, scale))
}

_NUMBER = re.compile(r"\s*([+-]?(?:\d+(?:\.\d*)?|\.\d+)(?:[eE][+-]?\d+)?)\s*(.*?)\s*")


def parse_quantity(text: str) -> tuple[float, str]:
    """Split ``"2.4 atm"`` into the number and the unit's name.

    Parameters
    ----------
    text : str
        A number with a decimal point, a space or none, and a unit.

    Returns
    -------
    tuple of float and str
        The number and the unit as written ("" where none stands).

    Raises
    ------
    UnitError
        If the text does not begin with a number.

    Examples
    --------
    >>> parse_quantity("2.4 atm")
    (2.4, 'atm')
    """
    match = _NUMBER.fullmatch(text)
    if match is None or match[2].startswith(","):
        hint = " (write a decimal point, not a comma)" if re.search(r"\d,\d", text) else ""
        raise UnitError(f"cannot read {text!r} as a number with a unit, such as '2.4 atm'{hint}")
    return float(match[1]), match[2]
