"""What a person's blood carries at pressure: alveolar to dissolved O2."""

from __future__ import annotations

import json
from dataclasses import fields, replace
from typing import Any, ClassVar
from weakref import WeakKeyDictionary

import numpy as np
import xarray as xr

from gasphys.equation import EQUATIONS
from gasphys.explanation import explain
from gasphys.exposure import Exposure
from gasphys.gas import Gas
from gasphys.gas_exchange import oxygenation
from gasphys.person import Person
from gasphys.plots.oxygen_cascade import OxygenCascade, oxygen_cascade_figure
from gasphys.quantities import attributes, quantity
from gasphys.units import convert, parse_quantity
from gasphys.widgets.base import App, Name, Number, shown, start_values

__all__ = ["OxygenAtPressure"]

_START = start_values()["oxygen_at_pressure"]
_BY_SHUNT = ("arterial_po2", "arterial_o2_content", "arterial_dissolved_o2")
_SHUNT_LINES = 'other = gp.gas_exchange.oxygenation(session, person, "shunt").isel(time=0)\n' + "".join(
    f'ds["{name}_by_shunt"] = other["{name}"]\n' for name in _BY_SHUNT
)


class OxygenAtPressure(App):
    """Alveolar, arterial and dissolved O2 of a person against ambient pressure.

    Parameters
    ----------
    person : Person, optional
        Whose lungs and blood; what is not measured is assumed and named.
    **start
        Start values of blanks, in place of the person's and the usual ones: ``hemoglobin`` [g/dL],
        ``arterial_pco2`` [kPa], ``arterial_alveolar_ratio`` [1], ``gas``, ``ambient_pressure``
        [kPa absolute].

    Raises
    ------
    GasphysError
        If a start value is not possible.

    Notes
    -----
    Steady state at each pressure; the arterial/alveolar ratio is taken as it was found at 1 atm
    (:func:`gasphys.gas_exchange.oxygenation`). Where a person's sample tells a shunt too, the answer gives
    what that would make: between the two lies what is not known.

    Examples
    --------
    >>> app = OxygenAtPressure(Person(hemoglobin=12.9), gas="oxygen", ambient_pressure="2.4 atm")
    >>> app.answer(app.compute())[:52]
    'Alveolar PO2 is 231.6 kPa and arterial PO2 189.9 kPa'
    """

    sentence = (
        "A person with hemoglobin {hemoglobin}, arterial PCO2 {arterial_pco2} and an arterial/alveolar "
        "ratio of {arterial_alveolar_ratio} breathes {gas} at {ambient_pressure} absolute."
    )
    blanks: ClassVar = {
        "hemoglobin": Number("hemoglobin"),
        "arterial_pco2": Number("arterial_pco2", ("kPa", "mmHg")),
        "arterial_alveolar_ratio": Number("arterial_alveolar_ratio"),
        "gas": Name(lambda text: str(Gas.parse(text)), tuple(start_values()["gases"])),
        "ambient_pressure": Number("ambient_pressure", ("atm", "kPa", "bar")),
    }
    name = "oxygen_at_pressure"
    explained: ClassVar = {
        "alveolar_po2": "alveolar PO2",
        "arterial_po2": "arterial PO2",
        "arterial_dissolved_o2": "dissolved O2",
        "arterial_o2_content": "O2 content",
    }
    #: Blank whose unit PO2 is shown in.
    po2_like: ClassVar = "arterial_pco2"
    #: Blanks that describe the person.
    personal: ClassVar[tuple[str, ...]] = ("hemoglobin", "arterial_pco2", "arterial_alveolar_ratio")

    def __init__(self, person: Person | None = None, **start: Any) -> None:
        self.person = Person() if person is None else person
        given = {name: self.person.value(name) for name in self.personal}
        super().__init__(
            **{**given, "gas": _START["gas"], "ambient_pressure": _START["ambient_pressure"], **start}
        )
        self._pictures: WeakKeyDictionary[Any, OxygenCascade] = WeakKeyDictionary()

    def described(self) -> Person:
        """Return the person as the sentence describes it; a changed blank counts as measured.

        Returns
        -------
        Person
            What was assumed and not changed stays assumed.

        Examples
        --------
        >>> OxygenAtPressure(hemoglobin=11.0).described().is_measured("arterial_pco2")
        False
        """
        changed = {
            name: self.params[name] for name in self.personal if self.params[name] != self.person.value(name)
        }
        assumed = tuple(name for name in self.person.assumed if name not in changed)
        return replace(self.person, **changed, assumed=assumed)

    def pressures(self) -> Any:
        """Return the pressures drawn, the chosen one among them.

        Returns
        -------
        array
            Rising [kPa absolute].

        Examples
        --------
        >>> OxygenAtPressure().pressures()[[0, -1]]
        array([101.325, 303.975])
        """
        chosen = self.params["ambient_pressure"]
        low, high = (convert(*parse_quantity(end), "kPa") for end in _START["span"])
        while chosen > high:
            high *= 2.0
        while chosen < low:
            low /= 2.0
        high = min(high, quantity("ambient_pressure").possible[1])
        return np.union1d(np.linspace(low, high, 81), [chosen])

    def compute(self) -> xr.Dataset:
        """Return oxygen from inspired gas to arterial blood along ambient pressure.

        Returns
        -------
        Dataset
            Along ``ambient_pressure``; attribute ``chosen_pressure`` [kPa absolute].

        Raises
        ------
        GasphysError
            If a value of :attr:`params` is not possible.

        Examples
        --------
        >>> ds = OxygenAtPressure().compute()
        >>> float(ds.alveolar_po2.sel(ambient_pressure=ds.attrs["chosen_pressure"]).round(1))
        231.6
        """
        pressure = xr.DataArray(
            self.pressures(), dims="pressure", attrs=attributes("ambient_pressure"), name="ambient_pressure"
        )
        session = Exposure.start(self.params["gas"], pressure=pressure).stay(1)
        person = self.described()
        if self._has_shunt():
            both = oxygenation(session, person, "both").isel(time=0, segment=0, drop=True)
            ds, other = (_by_model(both, model) for model in ("ratio", "shunt"))
            for name in _BY_SHUNT:
                ds[f"{name}_by_shunt"] = other[name]
        else:
            ds = oxygenation(session, person).isel(time=0, segment=0, drop=True)
        ds = ds.swap_dims(pressure="ambient_pressure").set_coords("ambient_pressure").drop_vars("pressure")
        ds["ambient_pressure"].attrs = attributes("ambient_pressure")  # given, not computed from a piece
        kept = [
            n for n in ds.data_vars if "equation" in ds[n].attrs or n in ("gas_fraction", "setpoint", "fico2")
        ]
        ds = ds[kept]
        ds["arterial_po2_valid"] = _valid(ds, "arterial_po2")
        ds.attrs["chosen_pressure"] = self.params["ambient_pressure"]
        ds.attrs["gas"] = self.params["gas"]
        return ds

    def draw(self, figure: Any, ds: xr.Dataset) -> None:
        """Draw the dataset; on a figure drawn before, move its artists.

        Parameters
        ----------
        figure : matplotlib.figure.Figure
            Empty at first.
        ds : Dataset
            As :meth:`compute` returns it.

        Examples
        --------
        >>> from gasphys.plots.style import new_figure
        >>> app, figure = OxygenAtPressure(), new_figure()
        >>> app.draw(figure, app.compute())
        """
        if figure not in self._pictures:
            self._pictures[figure] = OxygenCascade(figure)
        self._pictures[figure].update(ds, ds.attrs["chosen_pressure"], **self._axes())

    def figure(self) -> Any:
        """Return the picture on a figure of its own, with the caution.

        Returns
        -------
        matplotlib.figure.Figure
            The figure.

        Examples
        --------
        >>> len(OxygenAtPressure().figure().axes)
        2
        """
        return oxygen_cascade_figure(self.compute(), self.params["ambient_pressure"], **self._axes())

    def _axes(self) -> dict[str, str]:
        return {"pressure_unit": self.units["ambient_pressure"], "po2_unit": self.units[self.po2_like]}

    def answer(self, ds: xr.Dataset) -> str:
        """Return the answer in one sentence.

        Parameters
        ----------
        ds : Dataset
            As :meth:`compute` returns it.

        Returns
        -------
        str
            With units; PO2 in the unit chosen for PCO2.

        Examples
        --------
        >>> app = OxygenAtPressure(gas="trimix 1/48", ambient_pressure="1 atm")
        >>> app.answer(app.compute())
        'No alveolar oxygen is left: this gas cannot sustain life at this pressure.'
        """
        row = ds.sel(ambient_pressure=ds.attrs["chosen_pressure"])
        if not float(row["alveolar_po2"]) > 0.0:
            return "No alveolar oxygen is left: this gas cannot sustain life at this pressure."
        unit = self.units[self.po2_like]
        alveolar, arterial = (
            shown(float(convert(float(row[name]), "kPa", unit))) for name in ("alveolar_po2", "arterial_po2")
        )
        content, dissolved = (
            shown(float(row[n]), 3) for n in ("arterial_o2_content", "arterial_dissolved_o2")
        )
        text = (
            f"Alveolar PO2 is {alveolar} {unit} and arterial PO2 {arterial} {unit}; arterial blood then "
            f"carries {content} mL/dL of O2, {dissolved} mL/dL of it dissolved."
        )
        if "arterial_po2_by_shunt" not in row or np.isnan(float(row["arterial_po2_by_shunt"])):
            return text
        other = shown(float(convert(float(row["arterial_po2_by_shunt"]), "kPa", unit)))
        shunt = shown(self.person.shunt_fraction, 2)
        more = shown(float(row["arterial_dissolved_o2_by_shunt"]), 3)
        return (
            f"{text} The same sample read as a constant shunt of {shunt} gives "
            f"{other} {unit} and {more} mL/dL dissolved."
        )

    def _has_shunt(self) -> bool:
        """Whether a sample tells the shunt too, and the sentence still says what it found."""
        same = all(self.params[name] == self.person.value(name) for name in self.personal)
        return same and self.person.is_measured("shunt_fraction")

    def notes(self, ds: xr.Dataset) -> list[str]:
        """Return where the model is beyond its evidence, what is assumed, and how numbers are known.

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
        >>> app = OxygenAtPressure(arterial_alveolar_ratio=0.52)
        >>> "0.75 to 1" in app.notes(app.compute())[0]
        True
        """
        row = ds.sel(ambient_pressure=ds.attrs["chosen_pressure"])
        notes = [f"Beyond the evidence (dotted): {text}." for text in _beyond(row, "arterial_po2")]
        assumed = str(ds.attrs["assumed"]).replace("_", " ")
        notes.append(f"Assumed, not measured: {assumed}." if assumed else "Nothing is assumed.")
        known = str(ds.attrs["provenance"]).replace("_", ", ")
        notes.append(f"Steady state. Weakest provenance of the numbers used: {known}.")
        return notes

    def explain(self, ds: xr.Dataset, name: str) -> str:
        """Return the working of one number at the chosen pressure.

        Parameters
        ----------
        ds : Dataset
            As :meth:`compute` returns it.
        name : str
            A variable of it.

        Returns
        -------
        str
            Equations, inputs, constants, sources.

        Raises
        ------
        UnknownNameError
            If there is no such variable.

        Examples
        --------
        >>> app = OxygenAtPressure()
        >>> app.explain(app.compute(), "alveolar_po2").splitlines()[0][:22]
        'alveolar_po2 = 231.581'
        """
        return str(explain(ds, name, ambient_pressure=ds.attrs["chosen_pressure"]))

    def lines(self) -> str:
        """Return the Python lines that reproduce ``ds`` and ``figure``.

        Returns
        -------
        str
            To paste into a cell or a script.

        Examples
        --------
        >>> print(OxygenAtPressure(hemoglobin=12.9).lines().splitlines()[4])
        person = gp.Person(hemoglobin=12.9)
        """
        low, high = (float(end) for end in self.pressures()[[0, -1]])
        chosen = self.params["ambient_pressure"]
        axes = ", ".join(f"{name}={unit!r}" for name, unit in self._axes().items())
        return (
            "import numpy as np\n"
            "import xarray as xr\n"
            "import gasphys as gp\n"
            "\n"
            f"person = {self._person_line()}\n"
            f"pressures = np.union1d(np.linspace({low!r}, {high!r}, 81), [{chosen!r}])\n"
            'pressures = xr.DataArray(pressures, dims="pressure", attrs={"units": "kPa"})\n'
            f"session = gp.Exposure.start({self.params['gas']!r}, pressure=pressures).stay(1)\n"
            "ds = gp.gas_exchange.oxygenation(session, person).isel(time=0)\n"
            f"{_SHUNT_LINES if self._has_shunt() else ''}"
            f"figure = gp.plots.oxygen_cascade_figure(ds, at={chosen!r}, {axes})\n"
        )

    def _person_line(self) -> str:
        person = self.described()
        given = [
            f"{one.name}={getattr(person, one.name)!r}"
            for one in fields(person)
            if getattr(person, one.name) != one.default
        ]
        return f"gp.Person({', '.join(given)})"


def _by_model(both: xr.Dataset, model: str) -> xr.Dataset:
    """Return what one model of two says, with its own equation only."""
    one = both.sel(model=model, drop=True)
    attrs = one["arterial_po2"].attrs
    (mine,) = (f for f in attrs["equation"].split(" | ") if f.endswith(f"_from_{model}"))
    one["arterial_po2"].attrs = {**attrs, "equation": mine}
    return one


def _inputs(ds: xr.Dataset, name: str) -> list[tuple[Any, Any]]:
    """Return the arguments of a variable's equation that have a range of validity, and their values."""
    given = json.loads(ds[name].attrs["inputs"])
    found = []
    for argument in EQUATIONS[ds[name].attrs["equation"]].arguments:
        if argument.valid:
            value = given[argument.name]
            found.append((argument, ds[value[1:]] if isinstance(value, str) else value))
    return found


def _valid(ds: xr.Dataset, name: str) -> xr.DataArray:
    """Return 1 where the equation of a variable is within the range it was made for."""
    good = xr.ones_like(ds[name], dtype=bool)
    for argument, value in _inputs(ds, name):
        good = good & (argument.low <= value) & (value <= argument.high)
    meaning = f"1 where {quantity(name).long_name} is within the range its equation was made for"
    flag = good.astype(np.int8)
    flag.attrs = {"units": "1", "long_name": meaning}
    return flag


def _beyond(row: xr.Dataset, name: str) -> list[str]:
    """Return, for one pressure, a text for each argument outside its range."""
    out = []
    for argument, value in _inputs(row, name):
        if not argument.low <= float(value) <= argument.high:
            unit = "" if argument.quantity.unit == "1" else f" {argument.quantity.unit}"
            reason = f": {argument.valid[2]}" if len(argument.valid) == 3 else ""
            out.append(
                f"{argument.quantity.long_name} {shown(float(value))}{unit} is outside "
                f"{argument.low:g} to {argument.high:g}{unit}, the range its use was tested in{reason}"
            )
    return out
