"""The ascents that three models ask for, side by side, from one sentence."""

from __future__ import annotations

import warnings
from typing import Any, ClassVar
from weakref import WeakKeyDictionary

import numpy as np
import xarray as xr

from gasphys.ascent import compare_ascents
from gasphys.bubbles import bubble_model
from gasphys.bubbles import models as bubble_models
from gasphys.errors import GasphysError, RangeError
from gasphys.explanation import explain
from gasphys.exposure import Exposure
from gasphys.gas import Gas
from gasphys.plots.ascents import AscentsPicture, ascents_figure
from gasphys.tissues import TissueSet, load, models
from gasphys.widgets.base import App, Name, Number, shown, start_values

__all__ = ["AscentsCompared"]

_START = start_values()["ascents_compared"]
_GASES = tuple(start_values()["gases"])
#: Models offered: those that take helium first.
_MODELS = (
    *_START["models"],
    *bubble_models(),
    *(m for m in models() if m not in _START["models"] and not load(m).surfacing_only),
)


def _gas() -> Name:
    return Name(lambda text: str(Gas.parse(text)), _GASES)


def _model() -> Name:
    return Name(lambda text: _set(text).name, _MODELS)


class AscentsCompared(App):
    """How long three models take from one bottom to the surface, and where they part.

    Parameters
    ----------
    **start
        Start values of blanks: ``gas``, ``depth``, ``bottom_time``, ``second_gas`` and ``third_gas`` with
        the depths ``second_from`` and ``third_from`` [msw], ``first_model``, ``second_model``,
        ``third_model``.

    Raises
    ------
    GasphysError
        If a start value is not possible.

    Notes
    -----
    Descent at 20, ascent at 9 msw/min; stops every 3 msw in whole minutes; each model as published
    (:func:`gasphys.ascent.compare_ascents`). A model named twice counts once.

    Examples
    --------
    >>> air = dict.fromkeys(("gas", "second_gas", "third_gas"), "air")
    >>> app = AscentsCompared(first_model="us_navy_1957", depth=40.0, **air)
    >>> app.answer(app.compute())[:75]
    'From 40 msw on air, left at 22 min, the surface is reached after 9.4 min by'
    """

    sentence = (
        "Breathe {gas} to {depth}, leave the bottom at {bottom_time}, then breathe {second_gas} from "
        "{second_from} and {third_gas} from {third_from}; compare {first_model}, {second_model} and "
        "{third_model}."
    )
    blanks: ClassVar = {
        "gas": _gas(),
        "depth": Number("depth_msw"),
        "bottom_time": Number("bottom_time"),
        "second_gas": _gas(),
        "second_from": Number("deepest_use_msw"),
        "third_gas": _gas(),
        "third_from": Number("deepest_use_msw"),
        "first_model": _model(),
        "second_model": _model(),
        "third_model": _model(),
    }
    name = "ascents_compared"
    rows = "band"
    explained: ClassVar = {"limit_fraction": "first model's share of its limit on surfacing"}

    def __init__(self, **start: Any) -> None:
        given = {k: v for k, v in _START.items() if k in self.blanks}
        given |= dict(zip(("first_model", "second_model", "third_model"), _START["models"], strict=False))
        super().__init__(**{**given, **start})
        self._pictures: WeakKeyDictionary[Any, AscentsPicture] = WeakKeyDictionary()

    def bottom(self) -> Exposure:
        """Return the way to the bottom and the time there.

        Returns
        -------
        Exposure
            Ends when the bottom is left.

        Raises
        ------
        RangeError
            If the descent alone takes longer.

        Examples
        --------
        >>> AscentsCompared().bottom().duration
        22.0
        """
        p = self.params
        descent = p["depth"] / _START["descent_rate"]
        if not p["bottom_time"] > descent:
            raise RangeError(
                f"bottom_time = {shown(p['bottom_time'])} min is not more than the descent, "
                f"{shown(descent)} min"
            )
        start = Exposure.start(p["gas"]).travel(depth=p["depth"], rate=_START["descent_rate"])
        return start.stay(p["bottom_time"] - descent)

    def gases(self) -> list[tuple[str, float]]:
        """Return the gases of the way up with their deepest depth of use.

        Returns
        -------
        list of tuple
            As :func:`gasphys.ascent.plan` takes them.

        Examples
        --------
        >>> AscentsCompared().gases()
        [('nitrox 48', 20.0), ('oxygen', 6.0)]
        """
        p = self.params
        return [(p["second_gas"], p["second_from"]), (p["third_gas"], p["third_from"])]

    def chosen(self) -> list[str]:
        """Return the models, each once.

        Returns
        -------
        list of str
            In the order of the sentence.

        Examples
        --------
        >>> AscentsCompared().chosen()[0]
        'buhlmann_1995_c'
        """
        return list(dict.fromkeys(self.params[k] for k in ("first_model", "second_model", "third_model")))

    def compute(self) -> xr.Dataset:
        """Return the ascents compared, and what the first model's tissues hold on surfacing.

        Returns
        -------
        Dataset
            As :meth:`gasphys.ascent.Comparison.to_dataset`, without the cross-judgment; attribute ``flags``.

        Raises
        ------
        GasphysError
            If the values cannot stand together or every model refuses.

        Examples
        --------
        >>> AscentsCompared().compute().ascent_time.values.round(1).tolist()
        [28.2, 26.2, 26.2]
        """
        with warnings.catch_warnings(record=True) as told:
            warnings.simplefilter("always")
            found = compare_ascents(self.bottom(), self.gases(), self.chosen())
            ds = found.to_dataset(judged=False, worked=True)
        ds.attrs["flags"] = "; ".join(dict.fromkeys(str(w.message) for w in told))
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
        >>> app, figure = AscentsCompared(), new_figure()
        >>> app.draw(figure, app.compute())
        """
        if figure not in self._pictures:
            self._pictures[figure] = AscentsPicture(figure, 3)
        self._pictures[figure].update(ds)

    def figure(self) -> Any:
        """Return the picture on a figure of its own, with the caution.

        Returns
        -------
        matplotlib.figure.Figure
            The figure.

        Examples
        --------
        >>> len(AscentsCompared().figure().axes)
        1
        """
        return ascents_figure(self.compute())

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
        >>> app = AscentsCompared()
        >>> app.answer(app.compute()).rpartition(";")[2]
        ' PO2 is 144.6 kPa on nitrox 48 at 20 msw and 161.3 kPa on oxygen at 6 msw.'
        """
        p = self.params
        times = [
            f"{t:.1f} min by {m}" for m, t in zip(ds["model"].values, ds["ascent_time"].values, strict=True)
        ]
        text = f"From {shown(p['depth'])} msw on {p['gas']}, left at {shown(p['bottom_time'])} min, "
        text += f"the surface is reached after {_listed(times)}"
        gap = ds["more_minutes"].values
        if len(times) > 1 and gap.max() > 0.05:
            widest = int(np.argmax(gap))
            depth = float(ds["to_depth"].values[widest])
            where = f"{depth:g} msw" if depth else "the surface"
            text += f"; they part most at {where}, by {gap[widest]:.1f} min"
        surface = float(self.bottom().surface_pressure)
        po2 = [
            f"{Gas.parse(gas).oxygen * (surface + 10.0 * depth):.1f} kPa on {gas} at {shown(depth)} msw"
            for gas, depth in self.gases()
        ]
        return f"{text}; PO2 is {_listed(po2)}."

    def notes(self, ds: xr.Dataset) -> list[str]:
        """Return who refuses, what is not considered, and what speaks against the models.

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
        >>> app = AscentsCompared(second_model="us_navy_1957")
        >>> app.notes(app.compute())[0][:36]
        'No ascent: us_navy_1957 refuses this'
        """
        notes = [f"No ascent: {reason}." for reason in str(ds.attrs["refused"]).split("; ") if reason]
        notes += [f"Beyond the evidence: {text}." for text in str(ds.attrs["flags"]).split("; ") if text]
        sets = [_set(str(m)) for m in ds["model"].values]
        notes += dict.fromkeys(f"{one.name}: {one.evidence}." for one in sets if one.evidence)
        notes.append(
            "Not considered: bubbles, work, cold, the person. No table, and not tested in the water."
        )
        return notes

    def explain(self, ds: xr.Dataset, name: str) -> str:
        """Return the working of one number.

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
        GasphysError
            If the first model has no M-values.

        Examples
        --------
        >>> app = AscentsCompared()
        >>> app.explain(app.compute(), "limit_fraction").splitlines()[0][:14]
        'limit_fraction'
        """
        if name not in ds:
            raise GasphysError(f"{ds['model'].values[0]} has no M-values to work out")
        return str(explain(ds, name))

    def lines(self) -> str:
        """Return the Python lines that reproduce ``ds`` and ``figure``.

        Returns
        -------
        str
            To paste into a cell or a script.

        Examples
        --------
        >>> print(AscentsCompared().lines().splitlines()[2])
        bottom = gp.Exposure.start('trimix 17/48').travel(depth=56.0, rate=20.0).stay(19.2)
        """
        p = self.params
        stay = p["bottom_time"] - p["depth"] / _START["descent_rate"]
        return (
            "import gasphys as gp\n"
            "\n"
            f"bottom = gp.Exposure.start({p['gas']!r}).travel(depth={p['depth']!r}, "
            f"rate={_START['descent_rate']!r}).stay({stay!r})\n"
            f"gases = {self.gases()!r}\n"
            "with gp.validity('ignore'):\n"
            f"    found = gp.ascent.compare_ascents(bottom, gases, {self.chosen()!r})\n"
            "    ds = found.to_dataset(judged=False, worked=True)\n"
            "figure = gp.plots.ascents_figure(ds)\n"
            "print(found)\n"
        )


def _set(name: str) -> TissueSet:
    bubbles = bubble_model(name)
    return load(name) if bubbles is None else bubbles.tissues


def _listed(words: list[str]) -> str:
    return words[0] if len(words) == 1 else f"{', '.join(words[:-1])} and {words[-1]}"
