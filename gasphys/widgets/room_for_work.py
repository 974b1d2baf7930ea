"""How much work a gas leaves room for at pressure."""

from __future__ import annotations

from typing import Any, ClassVar
from weakref import WeakKeyDictionary

import numpy as np
import xarray as xr

from gasphys.breathing import density_ratio, gas_effort, maximum_ventilation, sustainable_o2_uptake
from gasphys.constants import BODY_VAPOR_PRESSURE
from gasphys.explanation import explain
from gasphys.gas import Gas
from gasphys.limits import load
from gasphys.person import Person
from gasphys.plots.room_for_work import RoomForWork as Picture
from gasphys.plots.room_for_work import room_for_work_figure
from gasphys.policy import validity
from gasphys.quantities import attributes, quantity
from gasphys.real_gas import humid_density
from gasphys.units import convert, parse_quantity
from gasphys.widgets.base import App, Name, Number, shown, start_values

__all__ = ["RoomForWork"]

_START = start_values()["room_for_work"]


class RoomForWork(App):
    """The O2 uptake a gas leaves room for by ventilation, and the work of breathing it.

    Parameters
    ----------
    **start
        Start values of blanks: ``surface_maximum_ventilation_btps`` [L/min], ``gas``, ``ambient_pressure``
        [kPa absolute], ``o2_uptake_stpd`` [L/min].

    Raises
    ------
    GasphysError
        If a start value is not possible.

    Notes
    -----
    By ventilation and the work of the lungs alone (:func:`gasphys.breathing.effort`).

    Examples
    --------
    >>> app = RoomForWork(gas="air", ambient_pressure="6 atm", o2_uptake_stpd=1.5)
    >>> app.answer(app.compute())[:58]
    'Ventilation leaves room for an O2 uptake of 1.86 L/min (1.'
    """

    sentence = (
        "A person whose maximum voluntary ventilation at the surface is {surface_maximum_ventilation_btps} "
        "breathes {gas} at {ambient_pressure} absolute and works at an O2 uptake of {o2_uptake_stpd}."
    )
    blanks: ClassVar = {
        "surface_maximum_ventilation_btps": Number("surface_maximum_ventilation_btps"),
        "gas": Name(lambda text: str(Gas.parse(text)), tuple(start_values()["gases"])),
        "ambient_pressure": Number("ambient_pressure", ("atm", "kPa", "bar")),
        "o2_uptake_stpd": Number("o2_uptake_stpd"),
    }
    name = "room_for_work"
    explained: ClassVar = {
        "sustainable_o2_uptake": "O2 uptake left",
        "ventilatory_reserve": "ventilatory reserve",
        "resistive_work": "work for a liter",
        "gas_density": "density at 0 degC",
    }

    def __init__(self, **start: Any) -> None:
        super().__init__(**{**{name: _START[name] for name in self.blanks}, **start})
        self._pictures: WeakKeyDictionary[Any, Picture] = WeakKeyDictionary()

    def pressures(self) -> Any:
        """Return the pressures drawn, the chosen one among them.

        Returns
        -------
        array
            Rising [kPa absolute].

        Examples
        --------
        >>> RoomForWork(ambient_pressure="2 atm").pressures()[[0, -1]]
        array([101.325, 810.6  ])
        """
        chosen = self.params["ambient_pressure"]
        low, high = (convert(*parse_quantity(end), "kPa") for end in _START["span"])
        while chosen > high:
            high *= 2.0
        while chosen < low:
            low /= 2.0
        # Beyond it the equation of state gives no density.
        high = min(high, quantity("ambient_pressure").possible[1], 20000.0)
        return np.union1d(np.linspace(low, high, 61), [chosen])

    def _in_air(self, pressures: xr.DataArray) -> xr.DataArray:
        """Return what air would leave room for, by the equations of :func:`gasphys.breathing.effort`."""
        vapor = float(BODY_VAPOR_PRESSURE)
        surface = self.params["surface_maximum_ventilation_btps"]
        with validity("ignore"):
            ratio = density_ratio(humid_density(pressures, "air", 37.0, vapor))
            found: xr.DataArray = sustainable_o2_uptake(maximum_ventilation(surface, ratio))
        words = "O2 uptake that air leaves room for, STPD"
        found.attrs = attributes("sustainable_o2_uptake", long_name=words)
        return found

    def compute(self) -> xr.Dataset:
        """Return work and room for work along ambient pressure.

        Returns
        -------
        Dataset
            Along ``ambient_pressure``, of the gas and (what is left) of air; attribute
            ``chosen_pressure`` [kPa absolute].

        Raises
        ------
        GasphysError
            If a value of :attr:`params` is not possible.

        Examples
        --------
        >>> ds = RoomForWork().compute()
        >>> "sustainable_o2_uptake_in_air" in ds
        True
        """
        person = Person(surface_maximum_ventilation_btps=self.params["surface_maximum_ventilation_btps"])
        ds = gas_effort(
            self.params["gas"], self.pressures(), person=person, o2_uptake_stpd=self.params["o2_uptake_stpd"]
        )
        if self.params["gas"] != "air":
            ds["sustainable_o2_uptake_in_air"] = self._in_air(ds["ambient_pressure"])
        ds.attrs["chosen_pressure"] = self.params["ambient_pressure"]
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
        >>> app, figure = RoomForWork(), new_figure()
        >>> app.draw(figure, app.compute())
        """
        if figure not in self._pictures:
            self._pictures[figure] = Picture(figure)
        unit = self.units["ambient_pressure"]
        self._pictures[figure].update(ds, ds.attrs["chosen_pressure"], pressure_unit=unit)

    def figure(self) -> Any:
        """Return the picture on a figure of its own, with the caution.

        Returns
        -------
        matplotlib.figure.Figure
            The figure.

        Examples
        --------
        >>> len(RoomForWork().figure().axes)
        2
        """
        unit = self.units["ambient_pressure"]
        return room_for_work_figure(self.compute(), self.params["ambient_pressure"], pressure_unit=unit)

    def answer(self, ds: xr.Dataset) -> str:
        """Return the answer in one sentence.

        Parameters
        ----------
        ds : Dataset
            As :meth:`compute` returns it.

        Returns
        -------
        str
            With units and the range of what is left.

        Examples
        --------
        >>> app = RoomForWork(gas="air", ambient_pressure="10 atm", o2_uptake_stpd=2.5)
        >>> app.answer(app.compute())[-47:]
        'That is less than the O2 uptake asked for, 2.5.'
        """
        row = ds.sel(ambient_pressure=ds.attrs["chosen_pressure"])
        left, low, high = (float(row[f"sustainable_o2_uptake{end}"]) for end in ("", "_low", "_high"))
        asked = float(row["o2_uptake_stpd"])
        text = (
            f"Ventilation leaves room for an O2 uptake of {shown(left, 3)} L/min ({shown(low, 2)} to "
            f"{shown(high, 2)}). At {shown(asked, 3)} L/min a liter takes "
            f"{shown(float(row['resistive_work']), 3)} J of the lungs, breathing "
            f"{shown(float(row['breathing_power']), 2)} W, and "
            f"ventilation is {shown(100.0 * (1.0 - float(row['ventilatory_reserve'])), 3)} % of the maximum."
        )
        if asked > left:
            text += f" That is less than the O2 uptake asked for, {shown(asked, 3)}."
        return text

    def notes(self, ds: xr.Dataset) -> list[str]:
        """Return density against published limits, what the model leaves out, and how numbers are known.

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
        >>> app = RoomForWork(gas="air", ambient_pressure="6 atm")
        >>> app.notes(app.compute())[0][:43]
        'Density at 0 degC is 7.73 g/L: beyond 5.2 g'
        """
        row = ds.sel(ambient_pressure=ds.attrs["chosen_pressure"])
        density = float(row["gas_density"])
        told = [
            f"{'beyond' if density > x.value else 'within'} {x.value:g} g/L ({x.authority})"
            for x in load()
            if x.quantity == "gas_density"
        ]
        known = str(ds.attrs["provenance"]).replace("_", ", ")
        return [
            f"Density at 0 degC is {shown(density, 3)} g/L: {', '.join(told)}; limits for working divers, "
            "from memory.",
            "By ventilation alone: CO2 is retained sooner and by some people much sooner; heart, heat, "
            "apparatus and immersion may each end work earlier. K2 and the share sustained are weak numbers.",
            f"Weakest provenance of the numbers used: {known}.",
        ]

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
        >>> app = RoomForWork(gas="air", ambient_pressure="6 atm")
        >>> app.explain(app.compute(), "gas_density").splitlines()[0][:18]
        'gas_density = 7.73'
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
        >>> print(RoomForWork(gas="air").lines().splitlines()[5])
        ds = gp.breathing.gas_effort('air', pressures, person=person, o2_uptake_stpd=1.5)
        """
        low, high = (float(end) for end in self.pressures()[[0, -1]])
        chosen, gas = self.params["ambient_pressure"], self.params["gas"]
        uptake = self.params["o2_uptake_stpd"]
        most = self.params["surface_maximum_ventilation_btps"]
        text = (
            "import numpy as np\n"
            "import gasphys as gp\n"
            "\n"
            f"person = gp.Person(surface_maximum_ventilation_btps={most!r})\n"
            f"pressures = np.union1d(np.linspace({low!r}, {high!r}, 61), [{chosen!r}])\n"
            f"ds = gp.breathing.gas_effort({gas!r}, pressures, person=person, o2_uptake_stpd={uptake!r})\n"
        )
        if gas != "air":
            text += (
                f"air = gp.breathing.gas_effort('air', pressures, person=person, o2_uptake_stpd={uptake!r})\n"
                'ds["sustainable_o2_uptake_in_air"] = air["sustainable_o2_uptake"]\n'
            )
        unit = self.units["ambient_pressure"]
        return text + f"figure = gp.plots.room_for_work_figure(ds, at={chosen!r}, pressure_unit={unit!r})\n"
