"""Density and work: ambient pressure against the O2 uptake that a gas still leaves room for."""

from __future__ import annotations

from typing import Any

import numpy as np
import xarray as xr

from gasphys.errors import GasphysError
from gasphys.limits import load
from gasphys.lungs.exercise import exercise_o2_uptake
from gasphys.plots.style import ACCENT, INK, PALE, caution_line, new_figure, tidy
from gasphys.quantities import quantity
from gasphys.units import convert

__all__ = ["RoomForWork", "room_for_work_figure"]

#: Published O2 uptakes that stand as lines, and their words.
_TASKS = {
    "resting in water": "resting in water",
    "combat swimmers at own pace": "swimmers at their own pace",
    "swim 1.2 kn": "1.2 kn (from memory)",
}
#: Limits of density that stand as marks.
_DENSITIES = ("density_recommended", "density_maximum")


class RoomForWork:
    """The picture on one figure; later calls of :meth:`update` move its artists.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        An empty figure.
    below : float
        Room under the axes for a line of text [share of the height].

    Examples
    --------
    >>> len(RoomForWork(new_figure()).figure.axes)
    2
    """

    def __init__(self, figure: Any, below: float = 0.0) -> None:
        self.figure = figure
        # Fixed margins: nothing but the data moves between two pictures.
        figure.set_layout_engine("none")
        upper, lower = figure.subplots(
            2,
            1,
            sharex=True,
            gridspec_kw={
                "height_ratios": [2.2, 1.0],
                "left": 0.1,
                "right": 0.83,
                "top": 0.93,
                "bottom": 0.12 + below,
                "hspace": 0.14,
            },
        )
        self.upper, self.lower = upper, lower
        lower.xaxis.set_label_coords(0.5, -0.22)
        for axes in (upper, lower):
            tidy(axes)
            axes.yaxis.set_label_coords(-0.083, 0.5)
        self.bands = [
            axes.fill([], [], facecolor=PALE, edgecolor="none", zorder=1)[0] for axes in (upper, lower)
        ]
        self.air = upper.plot([], [], color=INK, linewidth=1.1, linestyle=(0, (6, 3)), zorder=3)[0]
        self.gas = upper.plot([], [], color=ACCENT, linewidth=3.0, zorder=4)[0]
        self.work = lower.plot([], [], color=ACCENT, linewidth=3.0, zorder=4)[0]
        self.labels = {
            name: axes.text(
                1.015, 0.0, "", transform=axes.get_yaxis_transform(), fontsize=9, color=color, va="center"
            )
            for name, axes, color in (("gas", upper, ACCENT), ("air", upper, INK), ("work", lower, ACCENT))
        }
        known = exercise_o2_uptake()["o2_uptake_stpd"]
        self.tasks = {}
        for task, words in _TASKS.items():
            level = float(known.sel(task=task))
            upper.axhline(level, color=INK, linewidth=0.6, linestyle=":", zorder=2)
            self.tasks[task] = upper.text(
                0.01,
                level,
                f"{words}, {level:g}",
                transform=upper.get_yaxis_transform(),
                fontsize=7,
                color=INK,
                ha="left",
                va="bottom",
                zorder=5,
            )
        self.densities = {}
        for limit in (x for x in load() if x.id in _DENSITIES):
            line = lower.axvline(0.0, color=INK, linewidth=0.8, linestyle=(0, (2, 2)), zorder=2)
            text = lower.text(
                0.0,
                0.97,
                f"{limit.value:g} g/L ",
                transform=lower.get_xaxis_transform(),
                fontsize=7,
                color=INK,
                ha="right",
                va="top",
                rotation=90,
            )
            self.densities[limit.value] = (line, text)
        self.marks = [axes.axvline(0.0, color=INK, linewidth=0.8) for axes in (upper, lower)]
        self.asked = upper.plot([], [], "o", color=INK, markersize=6, zorder=6, clip_on=False)[0]
        self.word = upper.annotate(
            "",
            (0.0, 0.0),
            xytext=(7, 0),
            textcoords="offset points",
            fontsize=9,
            color=INK,
            va="center",
            bbox={"facecolor": "white", "edgecolor": "none", "pad": 0.5},
            zorder=6,
        )
        self.at = upper.text(
            0.0, 1.02, "", transform=upper.get_xaxis_transform(), fontsize=9, color=INK, ha="center"
        )

    def update(self, ds: xr.Dataset, at: float, *, pressure_unit: str = "atm") -> None:
        """Show another dataset.

        Parameters
        ----------
        ds : Dataset
            Along ``ambient_pressure``, as :func:`gasphys.breathing.gas_effort` names its variables; with
            ``sustainable_o2_uptake_in_air`` a line for air stands beside the gas, with
            ``o2_uptake_stpd`` a point where it is asked for.
        at : float
            Ambient pressure marked, one of the dataset's own [kPa absolute].
        pressure_unit : str
            Unit of the axis.

        Raises
        ------
        GasphysError
            If `at` is not among the pressures.

        Examples
        --------
        >>> import gasphys as gp
        >>> ds = gp.breathing.gas_effort("air", [101.325, 405.3], ventilation_btps=40.0)
        >>> picture = RoomForWork(new_figure())
        >>> picture.update(ds, 405.3)
        >>> picture.at.get_text()
        '4 atm'
        """
        pressures = ds["ambient_pressure"].values
        found = np.flatnonzero(np.isclose(pressures, at, rtol=1e-9))
        if not found.size:
            raise GasphysError(f"at = {at:g} kPa is not among the pressures of the dataset")
        index = int(found[0])
        x = convert(pressures, "kPa", pressure_unit)
        left = ds["sustainable_o2_uptake"].values
        low, high = (ds[f"sustainable_o2_uptake_{end}"].values for end in ("low", "high"))
        work, most = ds["resistive_work"].values, ds["resistive_work_high"].values
        self.gas.set_data(x, left)
        self.work.set_data(x, work)
        for band, one, other in ((self.bands[0], low, high), (self.bands[1], work, most)):
            band.set_xy(np.column_stack([np.append(x, x[::-1]), np.append(one, other[::-1])]))
        air = ds["sustainable_o2_uptake_in_air"].values if "sustainable_o2_uptake_in_air" in ds else None
        self.air.set_data(([], []) if air is None else (x, air))
        self.labels["air"].set_text("" if air is None else "air")
        self.labels["gas"].set_text(_wrapped(str(ds.attrs.get("gas", "this gas"))))
        self.labels["work"].set_text("K2 0.03;\nshade: to 0.06")
        top = max(float(np.nanmax(high)), 2.8)
        self.upper.set_ylim(0.0, 1.05 * top)
        self.lower.set_ylim(0.0, 1.06 * float(np.nanmax(most)))
        ends = {"gas": float(left[-1])} | ({} if air is None else {"air": float(air[-1])})
        self._place(ends, 0.09 * top)
        self.labels["work"].set_y(float(work[-1]))
        self.upper.set_xlim(float(x[0]), float(x[-1]))
        for value, (line, text) in self.densities.items():
            there = _pressure_at(x, ds["gas_density"].values, value)
            for artist in (line, text):
                artist.set_visible(np.isfinite(there))
            line.set_xdata([there, there])
            text.set_x(there - 0.006 * (x[-1] - x[0]))
        late = x[index] > x[0] + 0.75 * (x[-1] - x[0])
        for mark in self.marks:
            mark.set_xdata([x[index], x[index]])
        self.at.set_x(x[index])
        self.at.set_text(f"{_short(float(x[index]))} {pressure_unit}")
        asked = float(ds["o2_uptake_stpd"].values.flat[index]) if "o2_uptake_stpd" in ds else np.nan
        self.asked.set_data([x[index]], [asked])
        self.word.set_text(
            "" if np.isnan(asked) else f"asked: {_short(asked)}; left: {_short(float(left[index]))}"
        )
        self.word.xy = (x[index], 0.0 if np.isnan(asked) else asked)
        self.word.set_ha("right" if late else "left")
        self.word.set_position((-8 if late else 8, 0))
        uptake = quantity("sustainable_o2_uptake")
        self.upper.set_ylabel(f"O2 uptake left, {uptake.unit} STPD", fontsize=9)
        self.lower.set_ylabel("work, J/L", fontsize=9)
        self.lower.set_xlabel(f"{quantity('ambient_pressure').long_name}, {pressure_unit}", fontsize=9)

    def _place(self, ends: dict[str, float], gap: float) -> None:
        """Set labels at the ends of their lines, apart enough to be read."""
        below = -np.inf
        for name in sorted(ends, key=ends.__getitem__):
            place = max(ends[name], below + gap)
            self.labels[name].set_y(place)
            below = place


def _wrapped(words: str) -> str:
    return words.replace(" ", "\n", 1) if len(words) > 12 else words


def _pressure_at(x: Any, density: Any, value: float) -> float:
    """Place on the axis where the density reaches a value; not a number where it does not."""
    if not density[0] <= value <= density[-1]:
        return float("nan")
    return float(np.interp(value, density, x))


def _short(value: float) -> str:
    return np.format_float_positional(value, precision=3, fractional=False, trim="-")


def room_for_work_figure(ds: xr.Dataset, at: float, *, pressure_unit: str = "atm") -> Any:
    """Draw the O2 uptake a gas leaves room for, and the work of breathing it, against ambient pressure.

    Parameters
    ----------
    ds : Dataset
        As :meth:`RoomForWork.update` takes it.
    at : float
        Ambient pressure marked, one of the dataset's own [kPa absolute].
    pressure_unit : str
        Unit of the axis.

    Returns
    -------
    matplotlib.figure.Figure
        The figure, with the caution.

    Raises
    ------
    GasphysError
        If `at` is not among the pressures.

    Notes
    -----
    Upper: heavy line and shade, what sustainable ventilation leaves room for (exponent of density 0.45, 0.40
    to 0.50; 70 %, 60 to 80 %, of maximum ventilation); dashed, the same in air; dotted, what tasks took.
    Lower: resistive work of the lungs for a liter. Short dashes: where the gas, at 0 degC, has the density of
    a published advisory limit. Nothing depends on color.

    Examples
    --------
    >>> import gasphys as gp
    >>> ds = gp.breathing.gas_effort("air", [101.325, 405.3], ventilation_btps=40.0)
    >>> len(room_for_work_figure(ds, 405.3).axes)
    2
    """
    figure = new_figure(7.4, 4.8)
    RoomForWork(figure, below=0.05).update(ds, at, pressure_unit=pressure_unit)
    caution_line(figure)
    return figure
