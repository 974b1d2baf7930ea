"""Any equation of the registry as a sentence with its arguments as blanks."""

from __future__ import annotations

import contextlib
import inspect
import json
import warnings
from collections.abc import Sequence
from typing import Any
from weakref import WeakKeyDictionary

import numpy as np
import xarray as xr

from gasphys.equation import EquationFunction
from gasphys.errors import GasphysError, unknown_name
from gasphys.explanation import explain
from gasphys.gas import gas_fractions
from gasphys.plots.equation_curve import EquationCurve, equation_figure
from gasphys.policy import validity
from gasphys.quantities import Quantity, attributes, dataset_attributes
from gasphys.registry import equations
from gasphys.shell import Argument
from gasphys.sources import cite
from gasphys.units import UNITS, convert
from gasphys.widgets.base import App, Name, Number, start_values, unit_words

__all__ = ["EquationPage"]

_START = start_values()["equation_page"]
_POINTS = 301
#: Where in its usual range an argument without a default begins: the first that gives a result.
_SHARES = (0.5, 0.25, 0.1, 0.75, 0.0, 1.0)


class EquationPage(App):
    """One equation: its result for the arguments given, and drawn against one of them.

    Parameters
    ----------
    equation : str, optional
        A name of the registry, such as ``"lungs.alveolar_po2"``.
    **start
        Start values of arguments [canonical units], and of ``against``: the argument on the horizontal axis;
        ``formula``: which one, where there is a choice; ``result_unit``.

    Raises
    ------
    UnknownNameError
        If there is no such equation, or no such blank.
    GasphysError
        If a start value is not possible.

    Notes
    -----
    An argument without a default starts in the middle of its usual range, a fraction of a gas as in dry air.
    The line is dotted where the equation is beyond the range it was made for.

    Examples
    --------
    >>> app = EquationPage("laws.boyle_volume", volume=1.0, initial_pressure=100.0, final_pressure=400.0)
    >>> app.answer(app.compute())[:50]
    'Gas volume after, at stated conditions is 0.25 L; '
    """

    def __init__(self, equation: str = _START["equation"], **start: Any) -> None:
        known = equations()
        if equation not in known:
            raise unknown_name("equation", equation, known)
        self.equation, self.key = known[equation], equation
        self.members = tuple(
            name
            for name in (f"{equation}[{_label(k)}]" for k in self._registry())
            if self._alike(known[name])
        )
        # Every equation has blanks of its own: they belong to the object, not to the class.
        result = self.equation.result
        vars(self).update(name=equation, blanks=self._blanks(), explained={result.name: result.long_name})
        vars(self)["sentence"] = self._words()
        given: dict[str, Any] = dict(self._begin_with())
        more = {
            "formula": next(iter(self.members), ""),
            "against": self.equation.arguments[0].name,
            "result_unit": unit_words(_units(self.equation.result)[0]),
        }
        given |= {name: value for name, value in more.items() if name in self.blanks}
        super().__init__(**{**given, **start})
        self._pictures: WeakKeyDictionary[Any, EquationCurve] = WeakKeyDictionary()

    def _registry(self) -> Sequence[Any]:
        return tuple(getattr(self.equation, "registry", ()))

    def _alike(self, member: EquationFunction) -> bool:
        """Whether a formula of a choice means the same quantities as its first; else it has its own page."""
        mine = {a.name: a.quantity for a in self.equation.arguments}
        same = all(mine[a.name] == a.quantity for a in member.arguments)
        return same and member.result == self.equation.result

    def _begin_with(self) -> dict[str, float]:
        """Return start values of the arguments that give a result, the middle of usual ranges first."""
        f = equations()[next(iter(self.members), self.key)]
        for share in _SHARES:
            # Not all at the same place: equal values are a special case of many equations.
            values = {
                a.name: _start_value(a, share * (1.0 - 0.03 * k))
                for k, a in enumerate(self.equation.arguments)
            }
            with validity("ignore"), contextlib.suppress(GasphysError, ArithmeticError):
                if np.isfinite(f(**{a.name: values[a.name] for a in f.arguments})):
                    return values
        return {a.name: _start_value(a, _SHARES[0]) for a in self.equation.arguments}

    def _blanks(self) -> dict[str, Number | Name]:
        f = self.equation
        blanks: dict[str, Number | Name] = {a.name: _number(a) for a in f.arguments}
        if len(self.members) > 1:
            blanks["formula"] = _name("formula", self.members)
        if len(_units(f.result)) > 1:
            blanks["result_unit"] = _name("unit", tuple(map(unit_words, _units(f.result))))
        if len(f.arguments) > 1:
            blanks["against"] = _name("argument", tuple(a.name for a in f.arguments))
        return blanks

    def _words(self) -> str:
        arguments = ", ".join(f"{a.quantity.long_name} {{{a.name}}}" for a in self.equation.arguments)
        text = f"{_capital(self.equation.result.long_name)} for {arguments}"
        for name, words in (("formula", "by"), ("result_unit", "in"), ("against", "drawn against")):
            if name in self.blanks:
                text += f", {words} {{{name}}}"
        return text + "."

    def formula(self) -> EquationFunction:
        """Return the equation evaluated: the one itself, or the formula chosen.

        Returns
        -------
        callable
            Of the registry.

        Examples
        --------
        >>> EquationPage("lungs.water_vapor_pressure").formula().kind
        'formula'
        """
        return equations()[self._name()]

    def _name(self) -> str:
        if "formula" in self.blanks:
            return str(self.params["formula"])
        return next(iter(self.members), self.key)

    def _inputs(self) -> dict[str, float]:
        return {a.name: self.params[a.name] for a in self.formula().arguments}

    def _against(self) -> Argument:
        f = self.formula()
        name = self.params.get("against", self.equation.arguments[0].name)
        found = [a for a in f.arguments if a.name == name]
        if not found:
            raise GasphysError(
                f"{self._name()} does not use {name}; draw it against one of: "
                f"{', '.join(a.name for a in f.arguments)}"
            )
        return found[0]

    def values(self) -> Any:
        """Return the values drawn of the argument on the axis, the chosen one among them.

        Returns
        -------
        array
            Rising, in the canonical unit.

        Examples
        --------
        >>> float(EquationPage("lungs.alveolar_po2", against="fio2").values()[-1])
        1.0
        """
        argument = self._against()
        chosen, (low, high) = self.params[argument.name], argument.quantity.usual
        least, most = argument.possible
        low, high = max(min(low, chosen), least), min(max(high, chosen), most)
        return np.union1d(np.linspace(low, high, _POINTS), [chosen])

    def compute(self) -> xr.Dataset:
        """Return the result along the argument on the axis.

        Returns
        -------
        Dataset
            The result, and 1 where the equation is within the range it was made for.

        Raises
        ------
        GasphysError
            If the values of :attr:`params` give no result.

        Examples
        --------
        >>> ds = EquationPage("lungs.alveolar_po2", against="fio2").compute()
        >>> list(ds.dims), str(ds.alveolar_po2.attrs["units"])
        (['fio2'], 'kPa')
        """
        f, inputs, argument = self.formula(), self._inputs(), self._against()
        axis, result, x = argument.name, f.result, self.values()
        with warnings.catch_warnings(record=True) as told:
            warnings.simplefilter("always")
            try:
                f(**inputs)
            except ArithmeticError as error:
                raise GasphysError(f"no result for these values: {error}") from None
        flags = [str(w.message) for w in told]
        along = xr.DataArray(x, dims=axis, coords={axis: x})
        along.attrs = along[axis].attrs = {**attributes(argument.quantity.name)}
        with validity("ignore"):
            try:
                y = f(**{**inputs, axis: along})
            except (GasphysError, ArithmeticError):  # not everywhere a result
                y = xr.DataArray([_or_nothing(f, {**inputs, axis: float(one)}) for one in x], {axis: along})
        stored = {n: v for n, v in inputs.items() if n != axis} | {axis: f"@{axis}"}
        recorded = {"equation": self._name(), "inputs": json.dumps(stored)}
        ds = xr.Dataset(
            {result.name: (axis, y.values, {**attributes(result.name), **recorded})},
            {axis: (axis, x, dict(along.attrs))},
        )
        good = np.ones(len(x), dtype=bool)
        for one in f.arguments:
            value = x if one.name == axis else inputs[one.name]
            good &= (one.low <= value) & (value <= one.high)
        meaning = "1 where the equation is within the range it was made for"
        ds["valid"] = (axis, good.astype(np.int8), {"units": "1", "long_name": meaning})
        ds.attrs = dataset_attributes(
            f"{result.long_name} by {self._name()}",
            self._name(),
            references=f.sources,
            provenance=f.provenance,
            flags="; ".join(dict.fromkeys(flags)),
            chosen_value=float(self.params[axis]),
        )
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
        >>> app, figure = EquationPage(), new_figure()
        >>> app.draw(figure, app.compute())
        """
        if figure not in self._pictures:
            self._pictures[figure] = EquationCurve(figure)
        result, at, valid = self._drawn(ds)
        self._pictures[figure].update(result, at, valid, **self._axes())

    def _drawn(self, ds: xr.Dataset) -> tuple[xr.DataArray, float, Any]:
        return ds[self.equation.result.name], ds.attrs["chosen_value"], ds["valid"].values

    def _axes(self) -> dict[str, str]:
        axis = self._against().name
        return {
            name: unit
            for name, unit in (("unit", self._unit()), ("x_unit", self.units[axis]))
            if unit not in ("msw", "fsw")  # a dataset has them as pressures
        }

    def _unit(self) -> str:
        own, *_ = units = _units(self.equation.result)
        return {unit_words(unit): unit for unit in units}.get(self.params.get("result_unit", ""), own)

    def figure(self) -> Any:
        """Return the picture on a figure of its own, with the caution.

        Returns
        -------
        matplotlib.figure.Figure
            The figure.

        Examples
        --------
        >>> len(EquationPage().figure().axes)
        1
        """
        result, at, valid = self._drawn(self.compute())
        return equation_figure(result, at, valid, **self._axes())

    def answer(self, ds: xr.Dataset) -> str:
        """Return the answer in one sentence.

        Parameters
        ----------
        ds : Dataset
            As :meth:`compute` returns it.

        Returns
        -------
        str
            With units.

        Examples
        --------
        >>> app = EquationPage("lungs.alveolar_po2", ambient_pressure=243.18, fio2=1.0, alveolar_pco2=5.333)
        >>> app.answer(app.compute())[:25]
        'Alveolar PO2 is 231.58 kP'
        """
        argument, result = self._against(), self.equation.result
        y, x = ds[result.name].values, ds[argument.name].values
        index = int(np.argmin(np.abs(x - ds.attrs["chosen_value"])))
        # What arithmetic leaves of nothing is nothing.
        y = np.where(np.abs(y) < 1e-12 * np.nanmax(np.abs(y), initial=0.0), 0.0, y)
        ends = [self._said(v, result, self._unit()) for v in (y[0], y[-1])]
        low, high = (self._said(v, argument.quantity, self.units[argument.name]) for v in (x[0], x[-1]))
        return (
            f"{_capital(result.long_name)} is {self._said(y[index], result, self._unit())}; over "
            f"{argument.quantity.long_name} from {low} to {high} it goes from {ends[0]} to {ends[1]}."
        )

    def _said(self, value: float, quantity: Quantity, unit: str) -> str:
        if not np.isfinite(value):
            return "no value"
        number = f"{float(convert(value, quantity.unit, unit)):.5g}"
        return number if unit == "1" else f"{number} {unit}"

    def notes(self, ds: xr.Dataset) -> list[str]:
        """Return where the equation is beyond its range, what is not used, and where it is from.

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
        >>> app = EquationPage("lungs.alveolar_po2")
        >>> app.notes(app.compute())[-1]
        'Provenance: computed.'
        """
        f = self.formula()
        notes = [(inspect.getdoc(f) or "").split("\n")[0]]
        notes += [f"Beyond the evidence: {text}." for text in str(ds.attrs["flags"]).split("; ") if text]
        unused = {a.name for a in self.equation.arguments} - {a.name for a in f.arguments}
        if unused:
            notes.append(f"Not used by this formula: {', '.join(sorted(unused))}.")
        notes += [f"Source: {cite(key)}." for key in f.sources]
        notes.append(f"Provenance: {f.provenance.replace('_', ', ')}.")
        return notes

    def explain(self, ds: xr.Dataset, name: str) -> str:
        """Return the working at the chosen values.

        Parameters
        ----------
        ds : Dataset
            As :meth:`compute` returns it.
        name : str
            The result.

        Returns
        -------
        str
            Equation, inputs, constants, sources.

        Raises
        ------
        UnknownNameError
            If there is no such variable.

        Examples
        --------
        >>> app = EquationPage("laws.boyle_volume")
        >>> app.explain(app.compute(), "final_volume").splitlines()[2]
        'laws.boyle_volume: gas volume after, at stated conditions'
        """
        return str(explain(ds, name, **{self._against().name: ds.attrs["chosen_value"]}))

    def lines(self) -> str:
        """Return the Python lines that reproduce ``ds`` and ``figure``.

        Returns
        -------
        str
            To paste into a cell or a script.

        Examples
        --------
        >>> print(EquationPage().lines().splitlines()[4])
        equation = gp.equations()['lungs.alveolar_po2']
        """
        argument, values = self._against(), self.values()
        axis, chosen = argument.name, self.params[argument.name]
        low, high = float(values[0]), float(values[-1])
        rest = {n: v for n, v in self._inputs().items() if n != axis}
        inputs = "".join(f", {n}={v!r}" for n, v in rest.items())
        attrs = {k: v for k, v in attributes(argument.quantity.name).items() if k != "quantity"}
        axes = "".join(f", {name}={unit!r}" for name, unit in self._axes().items())
        result = self.equation.result.name
        return (
            "import numpy as np\n"
            "import xarray as xr\n"
            "import gasphys as gp\n"
            "\n"
            f"equation = gp.equations()[{self._name()!r}]\n"
            f"values = np.union1d(np.linspace({low!r}, {high!r}, {_POINTS}), [{chosen!r}])\n"
            f"attrs = {attrs!r}\n"
            f"{axis} = xr.DataArray(values, dims={axis!r}, coords={{{axis!r}: values}}, attrs=attrs)\n"
            'with gp.validity("ignore"):\n'
            f"    ds = equation({axis}={axis}{inputs}).to_dataset(name={result!r})\n"
            f"ds[{axis!r}].attrs = attrs\n"
            f"figure = gp.plots.equation_figure(ds[{result!r}], {chosen!r}{axes})\n"
        )


def _label(key: Any) -> str:
    return ",".join(map(str, key if isinstance(key, tuple) else (key,)))


def _capital(words: str) -> str:
    return words[:1].upper() + words[1:]


def _units(quantity: Quantity) -> tuple[str, ...]:
    """Return the units a quantity may be shown in, its own first."""
    offered = tuple(u for u in _START["units"].get(quantity.unit, ()) if u in UNITS)
    if quantity.unit == "1" and quantity.possible[1] > 1.0:  # no share of anything
        offered = ()
    return (quantity.unit, *(u for u in offered if u != quantity.unit))


def _number(argument: Argument) -> Number:
    return Number(argument.quantity.name, _units(argument.quantity))


def _name(what: str, offered: tuple[str, ...]) -> Name:
    def read(text: str) -> str:
        if text not in offered:
            raise unknown_name(what, text, offered)
        return text

    return Name(read, offered)


def _start_value(argument: Argument, share: float) -> float:
    if argument.default is not None:
        return float(argument.default)
    air = gas_fractions("air")
    if argument.name in air:
        return float(air[argument.name])
    low, high = (
        max(argument.quantity.usual[0], argument.low),
        min(argument.quantity.usual[1], argument.high),
    )
    there = low + share * (high - low)
    rounded = Number(argument.quantity.name).place(there, argument.quantity.unit)
    return rounded if low <= rounded <= high else there


def _or_nothing(f: EquationFunction, inputs: dict[str, float]) -> float:
    try:
        return float(f(**inputs))
    except (GasphysError, ArithmeticError):
        return float("nan")
