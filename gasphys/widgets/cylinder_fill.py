"""Filling a cylinder by partial pressures: where to stop, hot and settled."""

from __future__ import annotations

from typing import Any, ClassVar
from weakref import WeakKeyDictionary

import numpy as np
import xarray as xr

from gasphys.errors import UnitError
from gasphys.explanation import explain
from gasphys.gas import Gas
from gasphys.plots.supply import FillAccount, fill_figure
from gasphys.quantities import CAUTION
from gasphys.supply import partial_pressure_fill
from gasphys.supply.texts import mixture_words
from gasphys.units import convert
from gasphys.widgets.base import App, Name, Number, shown, start_values

__all__ = ["CylinderFill"]

_START = start_values()["cylinder_fill"]


def _gas(text: str) -> str:
    return str(Gas.parse(text))


def _order(text: str) -> str:
    steps = [str(Gas.parse(part.strip())) for part in text.split(",")]
    if len(steps) != 3:
        raise UnitError(f"{text!r}: write three gases in order, such as 'helium, oxygen, air'")
    return ", ".join(_said(step) for step in steps)


def _said(gas: str) -> str:
    """Name of a gas as the trade says it."""
    plain = {str(Gas.parse(name)): name for name in ("helium", "nitrogen")}
    return plain.get(gas, gas)


class CylinderFill(App):
    """Where to stop at each step of a fill by partial pressures, hot and settled.

    Parameters
    ----------
    **start
        Start values of blanks: ``water_capacity`` [L], ``target``, ``target_pressure`` and
        ``remainder_pressure`` [kPa absolute], ``remainder``, ``order``, ``filling_temperature`` [degC].

    Raises
    ------
    GasphysError
        If a start value is not possible.

    Notes
    -----
    Moles of the real gas at 20 degC (:func:`gasphys.supply.partial_pressure_fill`). The heat of compression
    is not computed: the temperature of the warm gas is what somebody measures.

    Examples
    --------
    >>> app = CylinderFill()
    >>> app.answer(app.compute())[:60]
    'Stop helium at 134 bar hot (126.2 settled), oxygen at 148.2 '
    """

    sentence = (
        "Fill {water_capacity} with {target} to {target_pressure} absolute, on a remainder of {remainder} at "
        "{remainder_pressure} absolute; add {order}; the gas is at {filling_temperature} when stopped."
    )
    blanks: ClassVar = {
        "water_capacity": Number("water_capacity"),
        "target": Name(_gas, tuple(_START["targets"])),
        "target_pressure": Number("target_pressure", ("bar", "kPa")),
        "remainder": Name(_gas, tuple(_START["remainders"])),
        "remainder_pressure": Number("remainder_pressure", ("bar", "kPa")),
        "order": Name(_order, tuple(_START["orders"])),
        "filling_temperature": Number("filling_temperature"),
    }
    name = "cylinder_fill"
    rows = "step"
    size = (8.2, 4.9)
    explained: ClassVar = {"total_amount": "amount in the finished filling"}

    def __init__(self, **start: Any) -> None:
        first = {name: _START[f"{name}s"][0] for name in ("target", "remainder", "order")}
        numbers = ("water_capacity", "target_pressure", "remainder_pressure", "filling_temperature")
        super().__init__(**{**first, **{name: _START[name] for name in numbers}, **start})
        self._pictures: WeakKeyDictionary[Any, FillAccount] = WeakKeyDictionary()

    def _steps(self) -> list[str]:
        return str(self.params["order"]).split(", ")

    def _fill(self) -> xr.Dataset:
        p = self.params
        empty = p["remainder_pressure"] == 0.0
        return partial_pressure_fill(
            p["target"],
            p["target_pressure"],
            p["water_capacity"],
            _START["temperature"],
            remainder=None if empty else p["remainder"],
            remainder_pressure=p["remainder_pressure"],
            order=self._steps(),
            filling_temperature=p["filling_temperature"],
        )

    def compute(self) -> xr.Dataset:
        """Return the recipe; its steps are counted, their gases stand in the attribute ``steps``.

        Returns
        -------
        Dataset
            As :func:`gasphys.supply.partial_pressure_fill` gives it.

        Raises
        ------
        GasphysError
            If the mix cannot be made so; then with the pressure to drain to.

        Examples
        --------
        >>> (CylinderFill().compute().pressure_after / 100.0).round(1).values.tolist()
        [126.2, 139.4, 220.0]
        """
        ds = self._fill()
        names = [str(s) for s in ds.step.values]
        ds = ds.assign_coords(step=np.arange(1, len(names) + 1))
        ds["step"].attrs = {"units": "1", "long_name": "number of the step"}
        ds.attrs["steps"] = ", ".join(names)
        ds.attrs["comment"] = CAUTION
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
        >>> app, figure = CylinderFill(), new_figure()
        >>> app.draw(figure, app.compute())
        """
        named = ds.assign_coords(step=str(ds.attrs["steps"]).split(", "))
        if figure not in self._pictures:
            self._pictures[figure] = FillAccount(figure, tuple(named.step.values))
        self._pictures[figure].pressure_unit = self.units["target_pressure"]
        self._pictures[figure].update(named)

    def figure(self) -> Any:
        """Return the picture on a figure of its own, with the caution.

        Returns
        -------
        matplotlib.figure.Figure
            The figure.

        Examples
        --------
        >>> len(CylinderFill().figure().axes)
        2
        """
        return fill_figure(self._fill(), self.units["target_pressure"])

    def answer(self, ds: xr.Dataset) -> str:
        """Return the answer in one sentence.

        Parameters
        ----------
        ds : Dataset
            As :meth:`compute` returns it.

        Returns
        -------
        str
            Where to stop, and the moles.

        Examples
        --------
        >>> app = CylinderFill(remainder_pressure=0.0)
        >>> app.answer(app.compute())[-33:]
        'They add 92.9, 14.9 and 85.7 mol.'
        """
        unit = self.units["target_pressure"]

        def pressure(value: Any) -> str:
            return shown(float(convert(float(value), "kPa", unit)))

        steps = str(ds.attrs["steps"]).split(", ")
        stops = [
            f"{name} at {pressure(row.pressure_after_hot)} {unit if k == 0 else ''} hot "
            f"({pressure(row.pressure_after)} settled)".replace("  ", " ")
            for k, (name, row) in enumerate(zip(steps, (ds.isel(step=k) for k in range(3)), strict=True))
        ]
        moles = [shown(float(v), 3) for v in ds.amount.values]
        start = f"On {shown(float(ds.remainder_amount), 3)} mol " if float(ds.remainder_amount) else "They "
        added = f"add {moles[0]}, {moles[1]} and {moles[2]} mol"
        return f"Stop {stops[0]}, {stops[1]}, {stops[2]}. {start}{added}."

    def notes(self, ds: xr.Dataset) -> list[str]:
        """Return what the ideal recipe would give, how sure the content is, and what is not modeled.

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
        >>> app = CylinderFill()
        >>> app.notes(app.compute())[0]
        'The ideal recipe, stopped at its own pressures, would give O2 16.7 %, N2 33.8 %, He 49.5 %.'
        """
        given = mixture_words(ds.ideal_recipe_fraction, ds.gas_fraction)
        sure = f"{shown(100.0 * float(ds.relative_uncertainty), 2)} %"
        doubt = ds.attrs.get("estimated_pairs", "")
        return [
            f"The ideal recipe, stopped at its own pressures, would give {given}.",
            f"Steps in order: {ds.attrs['steps']}. Settled means {shown(_START['temperature'])} degC.",
            f"Content of the target known to {sure}{f' ({doubt})' if doubt else ''}.",
            "Heat of compression and incomplete mixing are not modeled: analyze the gas, always.",
        ]

    def explain(self, ds: xr.Dataset, name: str) -> str:
        """Return the working of one number of the answer.

        Parameters
        ----------
        ds : Dataset
            As :meth:`compute` returns it.
        name : str
            A key of :attr:`explained`.

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
        >>> app = CylinderFill()
        >>> app.explain(app.compute(), "total_amount").splitlines()[0][:20]
        'total_amount = 193.5'
        """
        return str(explain(ds, name))

    def lines(self) -> str:
        """Return the Python lines that reproduce ``ds`` and ``figure``.

        Returns
        -------
        str
            To paste into a cell or a script.

        Examples
        --------
        >>> print(CylinderFill().lines().splitlines()[3])
            'trimix 17/48',
        """
        p = self.params
        given = "" if p["remainder_pressure"] == 0.0 else f"    remainder={p['remainder']!r},\n"
        return (
            "import gasphys as gp\n"
            "\n"
            "ds = gp.supply.partial_pressure_fill(\n"
            f"    {p['target']!r},\n"
            f"    {p['target_pressure']!r},\n"
            f"    {p['water_capacity']!r},\n"
            f"    {_START['temperature']!r},\n"
            f"{given}"
            f"    remainder_pressure={p['remainder_pressure']!r},\n"
            f"    order={self._steps()!r},\n"
            f"    filling_temperature={p['filling_temperature']!r},\n"
            ")\n"
            f"figure = gp.plots.fill_figure(ds, {self.units['target_pressure']!r})\n"
        )
