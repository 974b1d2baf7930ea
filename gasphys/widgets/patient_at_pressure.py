"""What this patient's arterial PO2 will be at pressure, from one sample at the bedside."""

from __future__ import annotations

import warnings
from typing import Any, ClassVar

import xarray as xr

from gasphys.person import Person
from gasphys.policy import validity
from gasphys.units import convert
from gasphys.widgets.base import Number, shown, start_values
from gasphys.widgets.oxygen_at_pressure import OxygenAtPressure

__all__ = ["PatientAtPressure"]

_START = start_values()["patient_at_pressure"]


class PatientAtPressure(OxygenAtPressure):
    """The range of a patient's arterial PO2 at pressure, from the numbers of an arterial sample.

    Parameters
    ----------
    **start
        Start values of blanks: ``hemoglobin`` [g/dL], ``fio2`` [1], ``barometric_pressure`` [kPa absolute],
        ``sample_po2`` and ``arterial_pco2`` [kPa], ``gas``, ``ambient_pressure`` [kPa absolute].

    Raises
    ------
    GasphysError
        If a start value is not possible.

    Notes
    -----
    The sample is read twice, as a constant arterial/alveolar ratio and as a constant shunt
    (:meth:`gasphys.person.Person.from_sample`); between the two lies what is not known.

    Examples
    --------
    >>> app = PatientAtPressure()
    >>> app.answer(app.compute())[:54]
    'Arterial PO2 is expected from 183.7 kPa (arterial/alve'
    """

    sentence = (
        "A person with hemoglobin {hemoglobin}, whose arterial sample on an O2 fraction of {fio2} at a "
        "barometric pressure of {barometric_pressure} showed a PO2 of {sample_po2} and a PCO2 of "
        "{arterial_pco2}, breathes {gas} at {ambient_pressure} absolute."
    )
    blanks: ClassVar = {
        "hemoglobin": Number("hemoglobin"),
        "fio2": Number("fio2"),
        "barometric_pressure": Number("barometric_pressure", ("kPa", "mmHg")),
        "sample_po2": Number("sample_po2", ("kPa", "mmHg")),
        "arterial_pco2": Number("arterial_pco2", ("kPa", "mmHg")),
        "gas": OxygenAtPressure.blanks["gas"],
        "ambient_pressure": OxygenAtPressure.blanks["ambient_pressure"],
    }
    name = "patient_at_pressure"
    explained: ClassVar = {
        "alveolar_po2": "alveolar PO2",
        "arterial_po2": "arterial PO2 by ratio",
        "arterial_po2_by_shunt": "arterial PO2 by shunt",
        "arterial_dissolved_o2": "dissolved O2 by ratio",
        "arterial_o2_content": "O2 content by ratio",
    }
    po2_like: ClassVar = "sample_po2"
    personal: ClassVar[tuple[str, ...]] = ()

    def __init__(self, **start: Any) -> None:
        super().__init__(**{**_START, **start})

    def _sample(self) -> dict[str, float]:
        p = self.params
        return {
            "arterial_po2": p["sample_po2"],
            **{name: p[name] for name in ("fio2", "arterial_pco2", "barometric_pressure", "hemoglobin")},
        }

    def described(self) -> Person:
        """Return the person that the sample tells of.

        Returns
        -------
        Person
            With ratio and shunt.

        Raises
        ------
        RangeError
            If the sample is not possible.

        Examples
        --------
        >>> round(PatientAtPressure().described().arterial_alveolar_ratio, 3)
        0.793
        """
        with validity("ignore"):
            return Person.from_sample(**self._sample())

    def _has_shunt(self) -> bool:
        return True

    def answer(self, ds: xr.Dataset) -> str:
        """Return the answer in one sentence.

        Parameters
        ----------
        ds : Dataset
            As :meth:`compute` returns it.

        Returns
        -------
        str
            The range, with units.

        Examples
        --------
        >>> app = PatientAtPressure(gas="air", ambient_pressure="1 atm")
        >>> app.answer(app.compute())[:30]
        'Arterial PO2 is expected from '
        """
        row = ds.sel(ambient_pressure=ds.attrs["chosen_pressure"])
        if not float(row["alveolar_po2"]) > 0.0 or not float(row["arterial_po2_by_shunt"]) > 0.0:
            return super().answer(ds)
        unit, person = self.units[self.po2_like], self.described()
        alveolar, *both = (
            shown(float(convert(float(row[name]), "kPa", unit)))
            for name in ("alveolar_po2", "arterial_po2", "arterial_po2_by_shunt")
        )
        ends = [
            (
                float(row["arterial_po2"]),
                both[0],
                f"arterial/alveolar ratio {shown(person.value('arterial_alveolar_ratio'), 3)} held",
            ),
            (
                float(row["arterial_po2_by_shunt"]),
                both[1],
                f"shunt {shown(person.value('shunt_fraction'), 2)} held",
            ),
        ]
        (_, low, why), (_, high, because) = sorted(ends)
        content, dissolved = (
            " to ".join(shown(v, 3) for v in sorted(float(row[f"{name}{end}"]) for end in ("", "_by_shunt")))
            for name in ("arterial_o2_content", "arterial_dissolved_o2")
        )
        return (
            f"Arterial PO2 is expected from {low} {unit} ({why}) to {high} {unit} ({because}); alveolar PO2 "
            f"is {alveolar} {unit}. Arterial blood then carries {content} mL/dL of O2, {dissolved} mL/dL of "
            "it dissolved."
        )

    def notes(self, ds: xr.Dataset) -> list[str]:
        """Return what speaks against the sample and the models, and what is assumed.

        Parameters
        ----------
        ds : Dataset
            As :meth:`compute` returns it.

        Returns
        -------
        list of str
            One sentence each.

        Examples
        --------
        >>> app = PatientAtPressure(fio2=0.21, sample_po2=11.0)
        >>> app.notes(app.compute())[0][:39]
        'The sample: the sample was taken on FiO'
        """
        with warnings.catch_warnings(record=True) as told:
            warnings.simplefilter("always")
            Person.from_sample(**self._sample())
        return [*(f"The sample: {w.message}." for w in told), *super().notes(ds)]

    def _person_line(self) -> str:
        return f"gp.Person.from_sample({', '.join(f'{k}={v!r}' for k, v in self._sample().items())})"
