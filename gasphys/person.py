"""A person: what is measured, what is assumed."""

from __future__ import annotations

import functools
import os
import tomllib
from collections.abc import Iterable
from dataclasses import dataclass, fields, replace
from importlib import resources
from typing import Any

from gasphys import blood, lungs
from gasphys.errors import GasphysError, InputFileError, RangeError, unknown_name
from gasphys.policy import outside_validity
from gasphys.quantities import attributes, quantity
from gasphys.toml_files import TomlFile, read_toml
from gasphys.units import convert

__all__ = ["Person"]

#: Roles a person may have in an exposure.
ROLES = ("diver", "patient", "attendant")


@functools.cache
def _defaults() -> dict[str, dict[str, Any]]:
    text = resources.files("gasphys").joinpath("person_defaults.toml").read_text(encoding="utf-8")
    return tomllib.loads(text)


@dataclass(frozen=True)
class Person:
    """A person by what is known of lungs and blood; every field is optional.

    Parameters
    ----------
    code : str
        A code, never a name.
    role : str
        "diver", "patient" or "attendant"; "" where it is not said.
    arterial_pco2 : float or str, optional
        Arterial PCO2 [kPa].
    arterial_ph : float, optional
        Arterial pH at 37 degC [1].
    respiratory_exchange_ratio : float, optional
        CO2 output over O2 uptake [1].
    hemoglobin : float, optional
        Hemoglobin [g/dL].
    arterial_alveolar_ratio : float, optional
        Arterial over alveolar PO2 [1].
    shunt_fraction : float, optional
        Shunt as a share of cardiac output [1].
    arteriovenous_difference : float, optional
        Arterial minus mixed venous O2 content [mL/dL]; where cardiac output and O2 uptake are both given
        it follows from them.
    cardiac_output : float, optional
        Cardiac output [L/min].
    o2_uptake_stpd, co2_output_stpd : float, optional
        Gas exchange at rest [L/min STPD].
    cohb_fraction : float, optional
        Carboxyhemoglobin [1].
    surface_maximum_ventilation_btps : float, optional
        Maximum voluntary ventilation in air at the surface [L/min BTPS].
    assumed : tuple of str
        Names of given fields that are assumed, not measured.

    Raises
    ------
    RangeError
        If a value is not possible.
    UnknownNameError
        If the role is unknown.

    Notes
    -----
    A field that is not given is None; :meth:`value` then returns the assumed value of
    ``person_defaults.toml``, and results name it as assumed. A field may hold several persons: a labelled
    array, which broadcasts over the scenarios of an exposure (:func:`gasphys.gas_exchange.oxygenation`), or
    a plain one, which gets the dimension ``person``.

    Examples
    --------
    >>> Person(hemoglobin=12.9).value("hemoglobin")
    12.9
    >>> Person().is_measured("hemoglobin")
    False
    """

    code: str = ""
    role: str = ""
    arterial_pco2: Any = None
    arterial_ph: Any = None
    respiratory_exchange_ratio: Any = None
    hemoglobin: Any = None
    arterial_alveolar_ratio: Any = None
    shunt_fraction: Any = None
    arteriovenous_difference: Any = None
    cardiac_output: Any = None
    o2_uptake_stpd: Any = None
    co2_output_stpd: Any = None
    cohb_fraction: Any = None
    surface_maximum_ventilation_btps: Any = None
    assumed: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        if self.role not in ("", *ROLES):
            raise unknown_name("role", self.role, ROLES)
        for name in measurable():
            value = getattr(self, name)
            if value is None:
                continue
            one = quantity(name)
            if hasattr(value, "__len__") and not isinstance(value, str):
                object.__setattr__(self, name, _of_several(name, value))
                continue
            if isinstance(value, str):
                value = one.from_text(value)
            if isinstance(value, bool) or not isinstance(value, (int, float)):
                raise TypeError(f"{name} must be a number in {one.unit} or text with a unit")
            value = float(value)
            if not one.possible[0] <= value <= one.possible[1]:
                raise one.range_error(value)
            object.__setattr__(self, name, value)
        for name in self.assumed:
            if name not in measurable():
                raise unknown_name("field of a person", name, measurable())

    def value(self, name: str) -> Any:
        """Return a field, measured or assumed.

        Parameters
        ----------
        name : str
            A field.

        Returns
        -------
        float or DataArray
            In the canonical unit; a DataArray where it was given for several persons.

        Raises
        ------
        UnknownNameError
            If there is no such field.

        Examples
        --------
        >>> Person().value("respiratory_exchange_ratio")
        0.8
        """
        if name not in measurable():
            raise unknown_name("field of a person", name, measurable())
        given = getattr(self, name)
        if given is None and name == "arteriovenous_difference" and self._has_flow():
            return blood.arteriovenous_o2_difference(self.o2_uptake_stpd, self.cardiac_output)
        return float(_defaults()[name]["value"]) if given is None else given

    def told(self, names: Iterable[str], *, measured: bool) -> str:
        """Return fields in words: those that are measured, or those that are assumed.

        Parameters
        ----------
        names : iterable of str
            Fields.
        measured : bool
            Which of them.

        Returns
        -------
        str
            Such as ``"hemoglobin = 12.9 g/dL, arterial_ph = 7.4"``; of several persons lowest and highest.

        Examples
        --------
        >>> Person(hemoglobin=[9.0, 12.9]).told(["hemoglobin", "arterial_ph"], measured=True)
        'hemoglobin = 9 to 12.9 g/dL'
        """
        words = []
        for name in names:
            if self.is_measured(name) == measured:
                value, unit = self.value(name), quantity(name).unit
                shown = "" if unit == "1" else f" {unit}"
                if isinstance(value, float):
                    words.append(f"{name} = {value:g}{shown}")
                elif value.chunks is not None:
                    words.append(f"{name} of {value.size} persons")
                else:
                    words.append(f"{name} = {float(value.min()):g} to {float(value.max()):g}{shown}")
        return ", ".join(words)

    def one(self) -> Person:
        """Return this person if it is a single one.

        Returns
        -------
        Person
            The same.

        Raises
        ------
        GasphysError
            If a field is given for several persons.

        Examples
        --------
        >>> Person(hemoglobin=12.9).one().hemoglobin
        12.9
        """
        for name in measurable():
            if getattr(self, name) is not None and not isinstance(getattr(self, name), float):
                raise GasphysError(f"{name} is given for several persons; this asks for one: pick one first")
        return self

    def is_measured(self, name: str) -> bool:
        """Tell whether a field was given and is not marked as assumed.

        Parameters
        ----------
        name : str
            A field.

        Returns
        -------
        bool
            True if measured.

        Examples
        --------
        >>> Person(hemoglobin=15, assumed=("hemoglobin",)).is_measured("hemoglobin")
        False
        """
        if name == "arteriovenous_difference" and getattr(self, name) is None:
            return self._has_flow() and not {"cardiac_output", "o2_uptake_stpd"} & set(self.assumed)
        return getattr(self, name) is not None and name not in self.assumed

    def _has_flow(self) -> bool:
        """Whether the arteriovenous difference follows from what is given."""
        return self.cardiac_output is not None and self.o2_uptake_stpd is not None

    @classmethod
    def from_sample(
        cls,
        *,
        arterial_po2: Any,
        fio2: Any,
        arterial_pco2: Any,
        barometric_pressure: Any = 101.325,
        **given: Any,
    ) -> Person:
        """Describe a person from one bedside arterial sample.

        Parameters
        ----------
        arterial_po2, arterial_pco2 : float or str
            Measured pressures [kPa].
        fio2 : float or str
            Inspired O2 fraction of the sample [1].
        barometric_pressure : float or str
            Barometric pressure at the bedside [kPa absolute].
        **given
            Further fields.

        Returns
        -------
        Person
            With ``arterial_pco2``, ``arterial_alveolar_ratio`` and ``shunt_fraction`` measured, the last
            for the arteriovenous difference and hemoglobin of the person, given or assumed.

        Raises
        ------
        RangeError
            If a value is not possible, or the arterial PO2 exceeds the alveolar one.

        Examples
        --------
        >>> p = Person.from_sample(arterial_po2=25.3, fio2=0.4, arterial_pco2=5.2, barometric_pressure=101)
        >>> round(p.arterial_alveolar_ratio, 3)
        0.793
        """
        po2, pco2 = _number("arterial_po2", arterial_po2), _number("arterial_pco2", arterial_pco2)
        fraction = _number("fio2", fio2)
        exchange = given.get("respiratory_exchange_ratio")
        r = _defaults()["respiratory_exchange_ratio"]["value"] if exchange is None else exchange
        alveolar = lungs.alveolar_po2(
            _number("barometric_pressure", barometric_pressure), fraction, pco2, float(r)
        )
        ratio = po2 / alveolar
        if not 0.0 < ratio <= 1.0:
            raise RangeError(
                f"arterial_po2 = {po2:g} kPa against an alveolar PO2 of {alveolar:.4g} kPa: a ratio of "
                f"{ratio:.3g} is not possible; check FiO2, barometric pressure and the sample"
            )
        if ratio < 0.75:
            outside_validity(
                f"arterial/alveolar ratio {ratio:.2f} is below 0.75: the ratio found at 1 atm need not "
                "carry over to pressure (Weaver & Howe 1994); a shunt is the better model there"
            )
        if fraction < 0.25:
            outside_validity(
                f"the sample was taken on FiO2 {fraction:g}: in disease a ratio or a shunt found on air is "
                "mostly uneven ventilation and does not carry over to oxygen; use a sample on oxygen"
            )
        person = cls(arterial_pco2=pco2, arterial_alveolar_ratio=ratio, **given)
        if person.shunt_fraction is not None:
            return person
        shunt = blood.shunt_at_arterial_po2(
            po2,
            alveolar,
            person.value("hemoglobin"),
            person.value("arteriovenous_difference"),
            person.value("arterial_ph"),
            person.value("cohb_fraction"),
        )
        return replace(person, shunt_fraction=shunt)

    @classmethod
    def from_toml(cls, path: str | os.PathLike[str]) -> Person:
        """Read a person from a TOML file.

        Parameters
        ----------
        path : path
            Fields of :class:`Person` at the top level; a table ``[sample]`` with
            ``arterial_po2``, ``fio2``, ``arterial_pco2`` and ``barometric_pressure`` for the
            arterial/alveolar ratio; a table ``[devices]`` is left to the chamber's worksheet. Numbers in
            canonical units or text such as ``"190 mmHg"``.

        Returns
        -------
        Person
            The person.

        Raises
        ------
        InputFileError
            With file and line, for anything that cannot be read.

        Examples
        --------
        >>> import pathlib, tempfile
        >>> file = pathlib.Path(tempfile.mkdtemp()) / "p.toml"
        >>> _ = file.write_text('code = "P-09"\\nhemoglobin = 13.1\\n')
        >>> Person.from_toml(file).hemoglobin
        13.1
        """
        file = read_toml(path, 'write TOML, such as hemoglobin = 12.9 or arterial_pco2 = "39 mmHg"')
        data = dict(file.data)
        sample = data.pop("sample", None)
        data.pop("devices", None)  # what is attached to the person: read where it matters
        known = {f.name for f in fields(cls)}
        for key in data:
            if key not in known:
                raise _unknown(file, key, "field of a person", {*known, "sample", "devices"}, "")
        if "assumed" in data:
            data["assumed"] = tuple(data["assumed"])
        wanted = ("arterial_po2", "fio2", "arterial_pco2", "barometric_pressure")
        if sample is not None:
            if not isinstance(sample, dict):
                raise file.error("sample must be a table [sample]", "begin it with [sample]", key="sample")
            for key in sample:
                if key not in wanted:
                    raise _unknown(file, key, "field of [sample]", wanted, "sample")
                if key in data:
                    raise file.error(f"{key} is given twice", "keep one of the two", key=key, table="sample")
            for key in wanted[:3]:
                if key not in sample:
                    raise file.error(f"[sample] has no {key}", f"add {key} = ...", table="sample")
        try:
            return cls(**data) if sample is None else cls.from_sample(**sample, **data)
        except (GasphysError, TypeError) as error:
            table = {**dict.fromkeys(data, ""), **dict.fromkeys(sample or {}, "sample")}
            named = next((key for key in table if key in str(error)), "")
            raise file.error(str(error), "correct the value", key=named, table=table.get(named)) from None


@functools.cache
def measurable() -> tuple[str, ...]:
    """Return the names of the fields that are quantities.

    Returns
    -------
    tuple of str
        Field names.

    Examples
    --------
    >>> "hemoglobin" in measurable()
    True
    """
    return tuple(f.name for f in fields(Person) if f.name not in ("code", "role", "assumed"))


def _of_several(name: str, value: Any) -> Any:
    """Return values of several persons as a labelled array in the canonical unit."""
    import numpy as np
    import xarray as xr

    one = quantity(name)
    if isinstance(value, xr.DataArray):
        if value.attrs.get("units", "1") != one.unit:
            bare = xr.DataArray(value.data, dims=value.dims, coords=value.coords)
            value = convert(bare, value.attrs.get("units", "1"), one.unit)
    else:
        plain = np.asarray(value, dtype=float)
        if plain.ndim != 1:
            raise TypeError(f"{name}: give a DataArray with named dimensions, or a row of numbers")
        value = xr.DataArray(plain, dims="person")
    if value.chunks is None:
        wrong = ~((value >= one.possible[0]) & (value <= one.possible[1]))
        if bool(wrong.any()):
            raise one.range_error(float(value.values[wrong.values].flat[0]))
        value = value.astype(float)
    value = value.copy(deep=False)
    value.attrs = attributes(name)
    return value


def _number(name: str, value: Any) -> float:
    one = quantity(name)
    if isinstance(value, str):
        value = one.from_text(value)
    if isinstance(value, bool) or not isinstance(value, (int, float)):
        raise TypeError(f"{name} must be a number in {one.unit} or text with a unit")
    if not one.possible[0] <= value <= one.possible[1]:
        raise one.range_error(float(value))
    return float(value)


def _unknown(file: TomlFile, key: str, what: str, valid: Iterable[str], table: str) -> InputFileError:
    return file.error(str(unknown_name(what, key, valid)), "correct or remove the line", key=key, table=table)
