"""Breathing gases as dry mole fractions."""

from __future__ import annotations

import functools
import re
import tomllib
from dataclasses import dataclass, fields
from importlib import resources
from typing import Any

import numpy as np

from gasphys.constants import (
    MOLAR_MASS_AR,
    MOLAR_MASS_CO2,
    MOLAR_MASS_H2,
    MOLAR_MASS_HE,
    MOLAR_MASS_N2,
    MOLAR_MASS_NE,
    MOLAR_MASS_O2,
)
from gasphys.errors import RangeError, UnitError, unknown_name
from gasphys.policy import outside_validity
from gasphys.units import convert, parse_quantity

__all__ = ["FORMULAS", "INERT", "Gas", "gas_fractions"]

#: Chemical formula to the field of :class:`Gas`.
FORMULAS = {
    "O2": "oxygen",
    "N2": "nitrogen",
    "He": "helium",
    "Ar": "argon",
    "H2": "hydrogen",
    "Ne": "neon",
    "CO2": "carbon_dioxide",
}

#: Formulas of the gases the body neither uses nor makes.
INERT = ("N2", "He", "Ar", "H2", "Ne")

_MOLAR_MASS = {
    "O2": MOLAR_MASS_O2,
    "N2": MOLAR_MASS_N2,
    "He": MOLAR_MASS_HE,
    "Ar": MOLAR_MASS_AR,
    "H2": MOLAR_MASS_H2,
    "Ne": MOLAR_MASS_NE,
    "CO2": MOLAR_MASS_CO2,
}


@dataclass(frozen=True)
class Gas:
    """A breathing gas; nitrogen is the remainder.

    Parameters
    ----------
    oxygen : float or str
        Mole fraction of O2 in dry gas [1], or text such as ``"32 %"``.
    helium, argon, hydrogen, neon, carbon_dioxide : float or str, default 0
        Mole fractions of dry gas [1].

    Raises
    ------
    RangeError
        If a fraction is outside 0 to 1 or they sum to more than 1 + 1e-6.

    Notes
    -----
    The trade's air is O2 0.21, N2 0.79, argon counted as nitrogen; for atmospheric air with its
    argon use :meth:`dry_air`.

    Examples
    --------
    >>> trimix = Gas(oxygen=0.18, helium=0.45)
    >>> round(trimix.nitrogen, 2)
    0.37
    >>> str(trimix)
    'trimix 18/45'
    """

    oxygen: float
    helium: float = 0.0
    argon: float = 0.0
    hydrogen: float = 0.0
    neon: float = 0.0
    carbon_dioxide: float = 0.0

    def __post_init__(self) -> None:
        total = 0.0
        for one in fields(self):
            value = _fraction(getattr(self, one.name), one.name)
            object.__setattr__(self, one.name, value)
            total += value
        if not total <= 1.0 + 1e-6:
            raise RangeError(f"the fractions of {self!r} sum to {total:.6g}, more than 1")

    @property
    def nitrogen(self) -> float:
        """Mole fraction of N2: what the other gases leave."""
        rest = 1.0 - sum(getattr(self, one.name) for one in fields(self))
        return 0.0 if abs(rest) <= 1e-6 and rest != 0.0 and abs(rest) < 1e-9 else max(rest, 0.0)

    @classmethod
    def parse(cls, text: str) -> Gas:
        """Read a gas from its name.

        Parameters
        ----------
        text : str
            ``"air"``, ``"oxygen"``, ``"nitrox 32"`` or ``"EAN 32"``, ``"trimix 18/45"`` (O2/He),
            ``"heliox 16/84"``, or ``"mix O2=0.2 Ar=0.01"`` (nitrogen the remainder).

        Returns
        -------
        Gas
            The gas.

        Raises
        ------
        UnknownNameError
            If the text is none of these.
        RangeError
            If the numbers do not make a gas.

        Examples
        --------
        >>> Gas.parse("nitrox 32").oxygen
        0.32
        """
        if isinstance(text, Gas):
            return text
        if not isinstance(text, str):
            raise UnitError(f"a gas is a name such as 'air' or a Gas, not {type(text).__name__}")
        words = " ".join(text.strip().split()).lower()
        if words in _NAMED:
            return cls(**_NAMED[words])
        number = r"([0-9]+(?:\.[0-9]*)?|\.[0-9]+)"
        match = re.fullmatch(rf"(?:nitrox|ean) ?{number} ?%?", words)
        if match:
            return cls(oxygen=_percent(match[1], text))
        match = re.fullmatch(rf"(trimix|heliox)? ?{number} ?/ ?{number}", words)
        if match:
            oxygen, helium = _percent(match[2], text), _percent(match[3], text)
            if match[1] == "heliox" and abs(oxygen + helium - 1.0) > 1e-6:
                raise RangeError(
                    f"gas {text!r}: heliox is oxygen/helium and must sum to 100; write trimix for a "
                    "gas with nitrogen"
                )
            return cls(oxygen=oxygen, helium=helium)
        if words.startswith("mix "):
            given: dict[str, Any] = {}
            names = {k.lower(): v for k, v in FORMULAS.items() if k != "N2"}
            for part in words[4:].split(" "):
                key, _, value = part.partition("=")
                if key not in names:
                    raise unknown_name("gas in a mix", key, [k for k in FORMULAS if k != "N2"])
                if names[key] in given:
                    raise RangeError(f"gas {text!r}: {key} is given twice")
                if not re.fullmatch(rf"{number}(?:e[+-]?[0-9]+)?", value):
                    raise UnitError(f"gas {text!r}: {value!r} is not a fraction")
                given[names[key]] = float(value)
            given.setdefault("oxygen", 0.0)
            return cls(**given)
        raise unknown_name(
            "gas", text, ["air", "oxygen", "nitrox 32", "EAN 32", "trimix 18/45", "heliox 16/84"]
        )

    @classmethod
    def dry_air(cls, standard: str = "cipm_2007") -> Gas:
        """Return atmospheric dry air with argon as its own gas.

        Parameters
        ----------
        standard : str
            A key of ``dry_air.toml``.

        Returns
        -------
        Gas
            Nitrogen is the remainder.

        Raises
        ------
        UnknownNameError
            If there is no such standard.

        Examples
        --------
        >>> Gas.dry_air("cipm_2007").argon
        0.009332
        """
        table = dry_air_standards()
        if standard not in table:
            raise unknown_name("air standard", standard, table)
        row = table[standard]
        return cls(**{k: v for k, v in row.items() if k not in ("provenance", "source")})

    def fraction(self, gas: str) -> float:
        """Return the mole fraction of one gas.

        Parameters
        ----------
        gas : str
            ``"O2"``, ``"N2"``, ``"He"``, ``"Ar"``, ``"H2"``, ``"Ne"`` or ``"CO2"``.

        Returns
        -------
        float
            Fraction of dry gas [1].

        Raises
        ------
        UnknownNameError
            For another name.

        Examples
        --------
        >>> Gas.parse("air").fraction("N2")
        0.79
        """
        if gas not in FORMULAS:
            raise unknown_name("gas", gas, FORMULAS)
        return float(getattr(self, FORMULAS[gas]))

    @property
    def fractions(self) -> dict[str, float]:
        """Mole fraction by formula, all seven gases."""
        return {formula: self.fraction(formula) for formula in FORMULAS}

    @property
    def molar_mass(self) -> float:
        """Molar mass of the dry gas [g/mol]."""
        return sum(self.fraction(k) * float(m) for k, m in _MOLAR_MASS.items())

    def __str__(self) -> str:
        others = {k: self.fraction(k) for k in ("Ar", "H2", "Ne", "CO2") if self.fraction(k)}
        if not others:
            for name in ("air", "oxygen"):
                if self == Gas(**_NAMED[name]):
                    return name
            o2, he = _as_percent(self.oxygen), _as_percent(self.helium)
            if not self.helium:
                name = f"nitrox {o2}"
            elif abs(self.oxygen + self.helium - 1.0) <= 1e-9:
                name = f"heliox {o2}/{he}"
            else:
                name = f"trimix {o2}/{he}"
            if Gas.parse(name) == self:
                return name
        parts = [f"{k}={v!r}" for k, v in self.fractions.items() if v and k != "N2"]
        return "mix " + " ".join(parts or ["O2=0.0"])


_NAMED: dict[str, dict[str, float]] = {
    "air": {"oxygen": 0.21},
    "oxygen": {"oxygen": 1.0},
    "o2": {"oxygen": 1.0},
    "nitrogen": {"oxygen": 0.0},
    "helium": {"oxygen": 0.0, "helium": 1.0},
}


def _fraction(value: Any, name: str) -> float:
    if isinstance(value, str):
        number, unit = parse_quantity(value)
        value = convert(number, unit, "1") if unit else number
    if isinstance(value, bool) or not isinstance(value, (int, float, np.floating, np.integer)):
        raise UnitError(f"{name} must be a fraction between 0 and 1, not {type(value).__name__}")
    fraction = float(value)
    if not 0.0 <= fraction <= 1.0:
        hint = f"; did you mean '{fraction:g} %'?" if 1.0 < fraction <= 100.0 else ""
        raise RangeError(f"{name} = {fraction:g} is not a fraction between 0 and 1{hint}")
    return fraction


def _percent(text: str, whole: str) -> float:
    # Through the decimal text, so that 32.5 % is the double nearest to 0.325.
    value = float(f"{text}e-2")
    if not value <= 1.0:
        raise RangeError(f"gas {whole!r}: {text} % is more than 100 %")
    return value


def _as_percent(fraction: float) -> str:
    return f"{fraction * 100.0:.10f}".rstrip("0").rstrip(".")


@functools.cache
def dry_air_standards() -> dict[str, dict[str, Any]]:
    """Return the compositions of dry air by standard, with source and provenance.

    Returns
    -------
    dict
        Standard to its row.

    Examples
    --------
    >>> sorted(dry_air_standards())
    ['cipm_2007', 'co2_412_ppm', 'crc_83']
    """
    text = resources.files("gasphys").joinpath("dry_air.toml").read_text(encoding="utf-8")
    return tomllib.loads(text)


def _summed(gas: Any) -> Any:
    """Refuse fractions that do not sum to 1: one mixture raises, elements of an array become nan."""
    if gas.dtype.kind not in "fiu":
        return gas
    total = gas.sum("gas", skipna=False) * convert(1.0, gas.attrs.get("units", "1"), "1")
    wrong = abs(total - 1.0) > 1e-6
    if gas.chunks is not None:  # not looked at before it is computed: nan there, without a warning
        return gas.where(~wrong).assign_attrs(gas.attrs)
    if not wrong.any():
        return gas
    first = float(total.values[wrong.values].flat[0])
    text = f"the fractions along dimension gas sum to {first:.6g}, not 1"
    if not wrong.ndim:
        raise RangeError(text)
    outside_validity(f"{int(wrong.sum())} of {wrong.size} mixtures: {text}; those results are nan")
    return gas.where(~wrong).assign_attrs(gas.attrs)


def gas_fractions(gas: Any) -> dict[str, Any]:
    """Spread a gas into mole fractions by field name.

    Parameters
    ----------
    gas : Gas, str or DataArray
        A gas, its name, or fractions along a dimension ``gas`` labelled by formula.

    Returns
    -------
    dict
        Field of :class:`Gas` (with ``nitrogen``) to a number or DataArray.

    Raises
    ------
    UnitError
        If it is none of these.
    RangeError
        If the fractions of one mixture do not sum to 1 within 1e-6; in arrays they become NaN.

    Examples
    --------
    >>> gas_fractions("air")["oxygen"]
    0.21
    """
    if isinstance(gas, str):
        gas = Gas.parse(gas)
    if isinstance(gas, Gas):
        return {field: gas.fraction(formula) for formula, field in FORMULAS.items()}
    if type(gas).__name__ == "DataArray" and "gas" in gas.dims:
        present = [str(g) for g in gas["gas"].values]
        unknown = [g for g in present if g not in FORMULAS]
        if unknown:
            raise unknown_name("gas", unknown[0], FORMULAS)
        gas = _summed(gas)
        spread: dict[str, Any] = {}
        for formula, field in FORMULAS.items():
            if formula in present:
                one = gas.sel(gas=formula, drop=True)
                spread[field] = one.assign_attrs(units=gas.attrs.get("units", "1"), quantity=field)
            else:
                spread[field] = 0.0
        return spread
    raise UnitError(
        f"a gas is a Gas, a name such as 'nitrox 32', or a DataArray with dimension gas; got "
        f"{type(gas).__name__}"
    )
