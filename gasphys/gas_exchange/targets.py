"""Inverse questions: the pressure or the O2 fraction for a wanted arterial oxygen."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys import blood, lungs
from gasphys.constants import BODY_VAPOR_PRESSURE
from gasphys.errors import GasphysError, NotReachableError, RangeError, unknown_name
from gasphys.gas_exchange.equations import arterial_po2_from_ratio
from gasphys.gas_exchange.model import MODELS
from gasphys.maths import find_root
from gasphys.person import Person
from gasphys.quantities import CAUTION, attributes, quantity
from gasphys.shell import Argument, number

__all__ = ["fio2_for", "pressure_for"]

Array = NDArray[np.float64]

#: Highest pressure that is looked at unless told otherwise: 3 atm, the highest at which the treatment
#: tables give pure oxygen.
_HIGHEST = "3 atm"


def pressure_for(
    person: Person | None = None,
    *,
    arterial_po2: Any = None,
    dissolved_o2: Any = None,
    fio2: Any = 1.0,
    model: str = "ratio",
    highest: Any = _HIGHEST,
) -> Any:
    """Find the ambient pressure at which a person has an arterial PO2 or an amount of dissolved O2.

    Parameters
    ----------
    person : Person, optional
        What is measured; the rest is assumed.
    arterial_po2, dissolved_o2 : float or str
        What is wanted, one of the two [kPa], [mL/dL].
    fio2 : float or str
        O2 fraction breathed [1].
    model : {"ratio", "shunt", "both"}
        How arterial follows alveolar PO2.
    highest : float or str
        Highest pressure looked at [kPa absolute].

    Returns
    -------
    float or DataArray
        Ambient pressure [kPa absolute]; for "both" one on each ``model``, NaN and ``flags`` where one
        does not reach it.

    Raises
    ------
    NotReachableError
        If it is not reached; the message gives the range that is.
    RangeError
        If a value is not possible.
    GasphysError
        If not one of the two is given.
    UnknownNameError
        For another model.

    Notes
    -----
    The arithmetic of the model, not a dose: what the pressure does to lungs and brain is another question.

    Examples
    --------
    >>> round(pressure_for(Person(arterial_alveolar_ratio=0.8), dissolved_o2=5.0) / 101.325, 2)
    2.77
    """
    fraction = _value("fio2", fio2)
    top = _value("ambient_pressure", highest)
    return _search(
        person,
        _wanted(arterial_po2, dissolved_o2),
        model,
        lambda pressure: (pressure, fraction),
        "ambient_pressure",
        (quantity("ambient_pressure").possible[0], top),
        f"on FIO2 {fraction:g}",
    )


def fio2_for(
    person: Person | None = None,
    *,
    ambient_pressure: Any,
    arterial_po2: Any = None,
    dissolved_o2: Any = None,
    model: str = "ratio",
) -> Any:
    """Find the O2 fraction on which a person has an arterial PO2 or an amount of dissolved O2.

    Parameters
    ----------
    person : Person, optional
        What is measured; the rest is assumed.
    ambient_pressure : float or str
        Ambient pressure [kPa absolute].
    arterial_po2, dissolved_o2 : float or str
        What is wanted, one of the two [kPa], [mL/dL].
    model : {"ratio", "shunt", "both"}
        How arterial follows alveolar PO2.

    Returns
    -------
    float or DataArray
        O2 fraction [1]; for "both" one on each ``model``, NaN and ``flags`` where one does not reach it.

    Raises
    ------
    NotReachableError
        If it is not reached; the message gives the range that is.
    RangeError
        If a value is not possible.
    GasphysError
        If not one of the two is given.
    UnknownNameError
        For another model.

    Examples
    --------
    >>> round(fio2_for(Person(arterial_alveolar_ratio=0.8), ambient_pressure="2 atm", arterial_po2=100.0), 3)
    0.666
    """
    pressure = _value("ambient_pressure", ambient_pressure)
    return _search(
        person,
        _wanted(arterial_po2, dissolved_o2),
        model,
        lambda fraction: (pressure, fraction),
        "fio2",
        (0.0, 1.0),
        f"at {pressure:g} kPa",
    )


def _value(name: str, value: Any) -> float:
    argument = Argument(name, quantity(name))
    found = number(value, argument)
    low, high = argument.possible
    if not low <= found <= high:
        raise argument.range_error(found)
    return found


def _wanted(arterial_po2: Any, dissolved_o2: Any) -> float:
    if (arterial_po2 is None) == (dissolved_o2 is None):
        raise GasphysError("give one of arterial_po2 and dissolved_o2")
    if dissolved_o2 is None:
        return _value("arterial_po2", arterial_po2)
    return float(blood.po2_for_dissolved_o2(_value("dissolved_o2", dissolved_o2)))


def _search(
    person: Person | None,
    wanted: float,
    model: str,
    breathed: Callable[[Any], tuple[Any, Any]],
    name: str,
    span: tuple[float, float],
    where: str,
) -> Any:
    if model not in (*MODELS, "both"):
        raise unknown_name("gas exchange model", model, (*MODELS, "both"))
    if not span[0] < span[1]:
        raise RangeError(f"{name}: highest = {span[1]:g} must be above {span[0]:g}")
    person = Person() if person is None else person.one()
    found, misses = [], []
    for one in MODELS if model == "both" else (model,):
        try:
            found.append(_root(person, wanted, one, breathed, name, span, where))
        except NotReachableError as error:
            found.append(np.nan)
            misses.append(str(error))
    if len(misses) == len(found):
        raise NotReachableError("; ".join(misses))
    if model != "both":
        return found[0]
    result = xr.DataArray(found, dims="model", coords={"model": list(MODELS)}, attrs=attributes(name))
    result.attrs["comment"] = CAUTION
    if misses:
        result.attrs["flags"] = misses[0]
    return result


def _root(
    person: Person,
    wanted: float,
    model: str,
    breathed: Callable[[Any], tuple[Any, Any]],
    name: str,
    span: tuple[float, float],
    where: str,
) -> float:
    arterial = _arterial(person, model)

    def short(x: Array) -> Array:
        return arterial(*breathed(x)) - wanted

    with np.errstate(all="ignore"):
        (root,) = find_root(short, np.array([span[0]]), np.array([span[1]]))
        low, high = arterial(*breathed(np.array(span)))
    if np.isnan(root):
        unit = "" if quantity(name).unit == "1" else f" {quantity(name).unit}"
        raise NotReachableError(
            f"no {name} from {span[0]:g} to {span[1]:g}{unit} gives arterial_po2 = {wanted:.4g} kPa "
            f"(dissolved {blood.dissolved_o2.raw(wanted):.3g} mL/dL) {where} by the {model} model; "
            f"reachable: {max(low, 0.0):.4g} to {high:.4g} kPa ({blood.dissolved_o2.raw(high):.3g} mL/dL)"
        )
    return float(root)


def _arterial(person: Person, model: str) -> Callable[[Any, Any], Array]:
    """Return arterial PO2 of pressure and fraction; where a shunt takes all O2 it is nothing."""
    pco2, exchange = person.value("arterial_pco2"), person.value("respiratory_exchange_ratio")

    def of(pressure: Any, fraction: Any) -> Array:
        alveolar = lungs.alveolar_po2.raw(pressure, fraction, pco2, exchange, 0.0, float(BODY_VAPOR_PRESSURE))
        if model == "ratio":
            return np.asarray(arterial_po2_from_ratio.raw(alveolar, person.value("arterial_alveolar_ratio")))
        found = blood.arterial_po2_from_shunt.raw(
            np.maximum(alveolar, 0.0),
            person.value("shunt_fraction"),
            person.value("hemoglobin"),
            person.value("arteriovenous_difference"),
            person.value("arterial_ph"),
            person.value("cohb_fraction"),
        )
        return np.where(np.isnan(found), 0.0, found)

    return of
