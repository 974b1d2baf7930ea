"""What a nucleus does on the way down and up: crushed, healing, and whether it becomes a bubble."""

from __future__ import annotations

from typing import Any, ClassVar
from weakref import WeakKeyDictionary

import numpy as np
import xarray as xr

from gasphys.bubbles import EVIDENCE, nuclei, varying_permeability
from gasphys.explanation import explain
from gasphys.exposure import Exposure
from gasphys.gas import Gas
from gasphys.plots.bubbles import NucleusPicture, nucleus_figure
from gasphys.policy import validity
from gasphys.quantities import CAUTION
from gasphys.widgets.base import App, Name, Number, shown, start_values

__all__ = ["NucleusOnTheWayUp"]

_START = start_values()["nucleus_on_the_way_up"]

#: Rates of the way down and up [msw/min], and the time looked at after surfacing [min].
_DOWN, _UP, _AFTER = 20.0, 9.0, 60.0


class NucleusOnTheWayUp(App):
    """One nucleus in one tissue on a dive without stops.

    Parameters
    ----------
    **start
        Start values of blanks: ``gas``, ``depth`` [msw], ``bottom_time`` [min], ``half_time`` [min],
        ``initial_radius`` [um].

    Raises
    ------
    GasphysError
        If a start value is not possible.

    Notes
    -----
    The nucleus of :func:`gasphys.bubbles.nuclei`, nitrogen's family; helium's half-time is nitrogen's over
    2.6455. Down at 20, straight up at 9 msw/min, then an hour at the surface.

    Examples
    --------
    >>> app = NucleusOnTheWayUp(depth=30.0)
    >>> app.answer(app.compute())[:48]
    'Crushed from 0.8 to 0.5349 um, the nucleus needs'
    """

    sentence = (
        "A diver breathes {gas} on the way to {depth}, leaves the bottom at {bottom_time} and comes straight "
        "up; a tissue with a half-time of {half_time} holds a nucleus of {initial_radius}."
    )
    blanks: ClassVar = {
        "gas": Name(lambda text: str(Gas.parse(text)), tuple(start_values()["gases"])),
        "depth": Number("depth_msw"),
        "bottom_time": Number("bottom_time"),
        "half_time": Number("half_time"),
        "initial_radius": Number("initial_nucleus_radius"),
    }
    name = "nucleus_on_the_way_up"
    explained: ClassVar = {
        "minimum_gradient": "least supersaturation that makes a bubble",
        "crushing_pressure": "crushing pressure left",
    }

    def __init__(self, **start: Any) -> None:
        super().__init__(**{**_START, **start})
        self._pictures: WeakKeyDictionary[Any, NucleusPicture] = WeakKeyDictionary()

    def dive(self) -> tuple[Exposure, float]:
        """Return the dive, and when the bottom is left [min].

        Returns
        -------
        tuple
            Exposure and time.

        Examples
        --------
        >>> NucleusOnTheWayUp(depth=30.0, bottom_time=20.0).dive()[1]
        20.0
        """
        depth, left = self.params["depth"], self.params["bottom_time"]
        dive = Exposure.start(self.params["gas"])
        if depth <= 0.0:
            return dive.stay(left + _AFTER), left
        down = min(depth / _DOWN, left) if left > 0.0 else depth / _DOWN
        dive = dive.travel(depth=depth, minutes=down)
        if left > down:
            dive = dive.stay(left - down)
        return dive.travel(depth=0.0, rate=_UP).stay(_AFTER), max(left, down)

    def instants(self) -> Any:
        """Return the times drawn beside those of the dive itself [min].

        Returns
        -------
        array
            Rising.

        Examples
        --------
        >>> len(NucleusOnTheWayUp().instants())
        121
        """
        dive, left = self.dive()
        return np.linspace(left, float(dive.duration), 121)

    def compute(self) -> xr.Dataset:
        """Return the nucleus along the dive.

        Returns
        -------
        Dataset
            On ``time``: ``nucleus_radius``, ``crushing_pressure``, ``minimum_gradient``, ``supersaturation``.

        Raises
        ------
        GasphysError
            If a value of :attr:`params` is not possible.

        Examples
        --------
        >>> float(NucleusOnTheWayUp().compute().nucleus_radius[0])
        0.8
        """
        dive, left = self.dive()
        model = varying_permeability(
            half_times=[self.params["half_time"]], nitrogen_radius=self.params["initial_radius"]
        )
        with validity("ignore"):
            ds = nuclei(dive, model, at=self.instants()).isel(compartment=0, inert_gas=0, drop=True)
        kept = (
            "ambient_pressure",
            "initial_radius",
            "nucleus_radius",
            "crushing_pressure",
            "minimum_gradient",
        )
        ds = ds[[*kept, "tissue_pressure", "supersaturation"]]
        ds.attrs["comment"] = CAUTION
        ds.attrs["evidence"] = EVIDENCE
        ds.attrs["leaving_time"] = float(left)
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
        >>> app, figure = NucleusOnTheWayUp(), new_figure()
        >>> app.draw(figure, app.compute())
        """
        if figure not in self._pictures:
            self._pictures[figure] = NucleusPicture(figure)
        self._pictures[figure].update(ds)

    def figure(self) -> Any:
        """Return the picture on a figure of its own, with the caution.

        Returns
        -------
        matplotlib.figure.Figure
            The figure.

        Examples
        --------
        >>> len(NucleusOnTheWayUp().figure().axes)
        2
        """
        return nucleus_figure(self.compute())

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
        >>> app = NucleusOnTheWayUp(depth=6.0, bottom_time=10.0)
        >>> app.answer(app.compute())[-35:]
        ': by this model it stays a nucleus.'
        """
        left = int(np.argmin(np.abs(ds["time"].values - ds.attrs["leaving_time"])))
        radius, least = (float(ds[n][left]) for n in ("nucleus_radius", "minimum_gradient"))
        after = ds["supersaturation"].values[left:]
        top = int(np.argmax(after))
        wait = float(ds["time"][left + top]) - ds.attrs["leaving_time"]
        most = float(after[top])
        holds = (
            f"the tissue holds at most {shown(most)} kPa more than the ambient pressure, {shown(wait, 3)} "
            "min after leaving the bottom"
        )
        if most <= 0.0:
            holds = (
                f"the tissue is never supersaturated: it stays {shown(-most)} kPa below the ambient pressure"
            )
        end = "by this model it becomes a bubble" if most > least else "by this model it stays a nucleus"
        return (
            f"Crushed from {shown(float(ds['initial_radius']))} to {shown(radius)} um, the nucleus needs "
            f"{shown(least)} kPa of supersaturation to become a bubble; {holds}: {end}."
        )

    def notes(self, ds: xr.Dataset) -> list[str]:
        """Return what speaks against the answer, and what it assumes.

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
        >>> app = NucleusOnTheWayUp()
        >>> "11 of 198" in app.notes(app.compute())[0]
        True
        """
        known = str(ds.attrs["provenance"]).replace("_", ", ")
        return [
            f"Evidence: {ds.attrs['evidence']}.",
            "No nucleus was ever seen in a person: radius, skin and healing are parameters of a model.",
            f"Down at {_DOWN:g}, straight up at {_UP:g} msw/min. Weakest provenance of the numbers used: "
            f"{known}.",
        ]

    def explain(self, ds: xr.Dataset, name: str) -> str:
        """Return the working of one number on leaving the bottom.

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
        >>> app = NucleusOnTheWayUp(depth=0.0)
        >>> app.explain(app.compute(), "minimum_gradient").splitlines()[0][:25]
        'minimum_gradient = 41.633'
        """
        left = int(np.argmin(np.abs(ds["time"].values - ds.attrs["leaving_time"])))
        return str(explain(ds, name, time=float(ds["time"][left])))

    def lines(self) -> str:
        """Return the Python lines that reproduce ``ds`` and ``figure``.

        Returns
        -------
        str
            To paste into a cell or a script.

        Examples
        --------
        >>> NucleusOnTheWayUp().lines().splitlines()[1]
        'import gasphys as gp'
        """
        depth, left = self.params["depth"], self.params["bottom_time"]
        dive, leaving = self.dive()
        steps = [f"gp.Exposure.start({self.params['gas']!r})"]
        if depth <= 0.0:
            steps.append(f".stay({left + _AFTER!r})")
        else:
            down = min(depth / _DOWN, left) if left > 0.0 else depth / _DOWN
            steps.append(f".travel(depth={depth!r}, minutes={down!r})")
            if left > down:
                steps.append(f".stay({left - down!r})")
            steps.append(f".travel(depth=0.0, rate={_UP!r}).stay({_AFTER!r})")
        return (
            "import numpy as np\n"
            "import gasphys as gp\n"
            "\n"
            f"dive = {''.join(steps)}\n"
            "model = gp.bubbles.varying_permeability(\n"
            f"    half_times=[{self.params['half_time']!r}],\n"
            f"    nitrogen_radius={self.params['initial_radius']!r},\n"
            ")\n"
            f"times = np.linspace({leaving!r}, {float(dive.duration)!r}, 121)\n"
            'with gp.validity("ignore"):\n'
            "    ds = gp.bubbles.nuclei(dive, model, at=times).isel(compartment=0, inert_gas=0)\n"
            "figure = gp.plots.nucleus_figure(ds)\n"
        )
