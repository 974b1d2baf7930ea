"""Oxygen from the breathing gas to arterial blood along an exposure."""

from __future__ import annotations

import json
from typing import Any

import numpy as np
import xarray as xr

from gasphys import blood, lungs
from gasphys.breathing_gas import fraction_breathed
from gasphys.constants import BODY_VAPOR_PRESSURE
from gasphys.errors import unknown_name
from gasphys.exposure import Exposure
from gasphys.gas_exchange.equations import arterial_po2_from_ratio
from gasphys.person import Person
from gasphys.policy import validity, weakest
from gasphys.quantities import CAUTION, attributes

__all__ = ["calibrate", "oxygenation"]


def calibrate(
    *,
    arterial_po2: Any,
    fio2: Any,
    arterial_pco2: Any,
    hemoglobin: float = 15.0,
    barometric_pressure: Any = 101.325,
) -> Person:
    """Describe a person's lungs from one bedside blood gas.

    Parameters
    ----------
    arterial_po2 : float or str
        Measured arterial PO2 [kPa].
    fio2 : float or str
        Inspired O2 fraction the sample was taken on [1].
    arterial_pco2 : float or str
        Measured arterial PCO2 [kPa].
    hemoglobin : float
        Hemoglobin [g/dL].
    barometric_pressure : float or str
        Barometric pressure at the bedside [kPa absolute].

    Returns
    -------
    Person
        With the measured values and ``arterial_alveolar_ratio``.

    Raises
    ------
    RangeError
        If a value is not possible, or the arterial PO2 exceeds the alveolar one.

    Warns
    -----
    ValidityWarning
        If the ratio is below 0.75, where it need not carry over to pressure, or the sample was
        taken on air.

    Examples
    --------
    >>> person = calibrate(arterial_po2=25.3, fio2=0.40, arterial_pco2=5.2, barometric_pressure=101.0)
    >>> round(person.arterial_alveolar_ratio, 2)
    0.79
    """
    return Person.from_sample(
        arterial_po2=arterial_po2,
        fio2=fio2,
        arterial_pco2=arterial_pco2,
        hemoglobin=hemoglobin,
        barometric_pressure=barometric_pressure,
    )


def oxygenation(
    exposure: Exposure, person: Person | None = None, model: str = "ratio", *, at: Any = None
) -> xr.Dataset:
    """Alveolar and arterial oxygen of a person along an exposure.

    Parameters
    ----------
    exposure : Exposure
        Pressure and breathing gas against time.
    person : Person, optional
        What is measured; what is not is assumed and named in the Dataset.
    model : {"ratio"}
        How arterial follows alveolar PO2.
    at : array_like, optional
        Times to add to the exposure's own [min].

    Returns
    -------
    Dataset
        On the exposure's ``time``: ``inspired_po2``, ``alveolar_po2``, ``arterial_po2``,
        ``arterial_o2_saturation``, ``arterial_dissolved_o2``, ``arterial_o2_content``.

    Raises
    ------
    UnknownNameError
        For another model.

    Notes
    -----
    Steady state at each instant: not during the wash-in or wash-out of inert gas. Arterial PCO2 is an
    input and stays as given.

    Examples
    --------
    >>> session = Exposure.start("oxygen").travel(pressure="2.4 atm", minutes=10)
    >>> float(oxygenation(session).alveolar_po2[-1].round(1))
    231.6
    """
    if model not in ("ratio",):
        raise unknown_name("gas exchange model", model, ("ratio",))
    person = Person() if person is None else person
    ds = exposure.to_dataset(at=at)
    values = {name: person.value(name) for name in _USED}
    po2, pressure = ds["breathing_gas_po2"], ds["ambient_pressure"]
    # The fraction of what is breathed, on a loop too: dry PO2 over ambient pressure.
    fraction = fraction_breathed(po2, pressure)
    out = ds.copy()
    out["fio2"] = fraction
    with validity("ignore"):
        out["inspired_po2"] = lungs.inspired_po2(pressure, fraction)
        out["alveolar_po2"] = lungs.alveolar_po2(
            pressure,
            fraction,
            values["arterial_pco2"],
            values["respiratory_exchange_ratio"],
        )
        out["arterial_po2"] = arterial_po2_from_ratio(
            out["alveolar_po2"], values["arterial_alveolar_ratio"]
        )
        arterial = out["arterial_po2"].where(out["arterial_po2"] >= 0.0).assign_attrs(units="kPa")
        out["arterial_o2_saturation"] = blood.o2_saturation(arterial)
        out["arterial_dissolved_o2"] = blood.dissolved_o2(arterial)
        out["arterial_o2_content"] = blood.o2_content(arterial, values["hemoglobin"])
    inputs: dict[str, dict[str, Any]] = {
        "fio2": {"breathing_gas_po2": "@breathing_gas_po2", "ambient_pressure": "@ambient_pressure"},
        "inspired_po2": {
            "ambient_pressure": "@ambient_pressure",
            "fio2": "@fio2",
            "water_vapor_pressure": float(BODY_VAPOR_PRESSURE),
        },
        "alveolar_po2": {
            "ambient_pressure": "@ambient_pressure",
            "fio2": "@fio2",
            "alveolar_pco2": values["arterial_pco2"],
            "respiratory_exchange_ratio": values["respiratory_exchange_ratio"],
            "fico2": 0.0,
            "water_vapor_pressure": float(BODY_VAPOR_PRESSURE),
        },
        "arterial_po2": {
            "alveolar_po2": "@alveolar_po2",
            "ratio": values["arterial_alveolar_ratio"],
        },
        "arterial_o2_saturation": {"po2": "@arterial_po2", "model": "severinghaus_1979"},
        "arterial_dissolved_o2": {"po2": "@arterial_po2"},
        "arterial_o2_content": {
            "po2": "@arterial_po2",
            "hemoglobin": values["hemoglobin"],
            "model": "severinghaus_1979",
        },
    }
    equations = {
        "fio2": "breathing_gas.fraction_breathed",
        "inspired_po2": "lungs.inspired_po2",
        "alveolar_po2": "lungs.alveolar_po2",
        "arterial_po2": "gas_exchange.arterial_po2_from_ratio",
        "arterial_o2_saturation": "blood.o2_saturation",
        "arterial_dissolved_o2": "blood.dissolved_o2",
        "arterial_o2_content": "blood.o2_content",
    }
    for name, equation in equations.items():
        kept = {k: v for k, v in out[name].attrs.items() if k in ("references", "provenance")}
        out[name].attrs = {
            **attributes(name),
            **kept,
            "equation": equation,
            "inputs": json.dumps(inputs[name]),
        }
    low = int(np.count_nonzero(out["alveolar_po2"].values < 0.0))
    out.attrs = {
        **ds.attrs,
        "title": "oxygen from breathing gas to arterial blood",
        "source": ds.attrs["source"].replace(", exposure", f", gas exchange model {model}"),
        "references": "fenn_rahn_otis_1946; gilbert_keighley_1974; severinghaus_1979; o2_capacity_texts",
        "assumed": ", ".join(f"{n} = {values[n]:g}" for n in _USED if not person.is_measured(n)),
        "measured": ", ".join(f"{n} = {values[n]:g}" for n in _USED if person.is_measured(n)),
        "provenance": weakest([out[n].attrs["provenance"] for n in equations]),
        "comment": CAUTION,
    }
    if low:
        out.attrs["flags"] = f"{low} instants with a negative alveolar PO2: this gas cannot sustain life there"
    return out


_USED = ("arterial_pco2", "respiratory_exchange_ratio", "arterial_alveolar_ratio", "hemoglobin")
