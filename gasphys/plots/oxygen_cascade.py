"""Oxygen from inspired gas to arterial blood against ambient pressure."""

from __future__ import annotations

import itertools
from typing import Any

import numpy as np
import xarray as xr

from gasphys.errors import GasphysError
from gasphys.plots.style import ACCENT, INK, PALE, caution_line, new_figure, tidy
from gasphys.quantities import quantity
from gasphys.units import convert

__all__ = ["OxygenCascade", "oxygen_cascade_figure"]

#: Variable to word, color, width and dashes of its line: upper axes, lower axes.
_LINES: tuple[dict[str, tuple[str, str, float, Any]], ...] = (
    {
        "inspired_po2": ("inspired, moist", INK, 0.9, (0, (6, 3))),
        "alveolar_po2": ("alveolar", INK, 1.5, "-"),
        "arterial_po2": ("arterial", ACCENT, 3.0, "-"),
    },
    {
        "arterial_o2_content": ("carried in all", INK, 1.5, "-"),
        "arterial_dissolved_o2": ("dissolved", ACCENT, 3.0, "-"),
    },
)
#: Where the equation is outside the range it was made for.
_DOTS: Any = (0, (1, 1.6))
#: Where the value at the mark stands, from its point [points].
_UNDER, _OVER = -13, 5


class OxygenCascade:
    """The picture on one figure; later calls of :meth:`update` move its artists.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        An empty figure.
    below : float
        Room under the axes for a line of text [share of the height].

    Examples
    --------
    >>> picture = OxygenCascade(new_figure())
    >>> len(picture.figure.axes)
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
                "height_ratios": [1.9, 1.0],
                "left": 0.1,
                "right": 0.83,
                "top": 0.93,
                "bottom": 0.12 + below,
                "hspace": 0.12,
            },
        )
        self.upper, self.lower = upper, lower
        lower.xaxis.set_label_coords(0.5, -0.2)
        self.lines: dict[str, tuple[Any, Any]] = {}
        self.labels: dict[str, Any] = {}
        for axes, lines in zip((upper, lower), _LINES, strict=True):
            tidy(axes)
            # A place of their own: found from the tick labels, it costs a third of the drawing.
            axes.yaxis.set_label_coords(-0.083, 0.5)
            for name, (word, color, width, dash) in lines.items():
                self.lines[name] = _pair(axes, color, width, dash)
                self.labels[name] = axes.text(
                    1.015,
                    0.0,
                    word,
                    transform=axes.get_yaxis_transform(),
                    fontsize=9,
                    color=color,
                    va="center",
                )
        self.marks = [axes.axvline(0.0, color=INK, linewidth=0.8) for axes in (upper, lower)]
        self.dots = {
            name: line[0].axes.plot(
                [], [], "o", color=line[0].get_color(), markersize=5, zorder=5, clip_on=False
            )[0]
            for name, line in self.lines.items()
        }
        # From a constant ratio, the line, to a constant shunt, the edge: what is not known.
        self.bands = {
            name: self.lines[name][0].axes.fill([], [], facecolor=PALE, edgecolor=ACCENT, linewidth=0.6)[0]
            for name in ("arterial_po2", "arterial_dissolved_o2")
        }
        self.at = upper.text(
            0.0, 1.02, "", transform=upper.get_xaxis_transform(), fontsize=9, color=INK, ha="center"
        )
        self.values = {
            name: self.lines[name][0].axes.annotate(
                "",
                (0.0, 0.0),
                xytext=(5, 0),
                textcoords="offset points",
                fontsize=9,
                color=ACCENT,
                va=side,
                bbox={"facecolor": "white", "edgecolor": "none", "pad": 0.5},
            )
            # Where no other line runs: under the lowest one, or over the one near the axis.
            for name, side in (("arterial_po2", "top"), ("arterial_dissolved_o2", "bottom"))
        }

    def update(self, ds: xr.Dataset, at: float, *, pressure_unit: str = "atm", po2_unit: str = "kPa") -> None:
        """Show another dataset.

        Parameters
        ----------
        ds : Dataset
            Along one dimension, as :func:`gasphys.gas_exchange.oxygenation` names them:
            ``ambient_pressure``, ``inspired_po2``, ``alveolar_po2``, ``arterial_po2``,
            ``arterial_o2_content``, ``arterial_dissolved_o2``. Where it holds
            ``arterial_po2_valid``, arterial lines are dotted where that is 0; where it holds
            ``arterial_po2_by_shunt`` and ``arterial_dissolved_o2_by_shunt``, a band reaches there.
        at : float
            Ambient pressure marked, one of the dataset's own [kPa absolute].
        pressure_unit, po2_unit : str
            Units of the axes.

        Raises
        ------
        GasphysError
            If `at` is not among the pressures.

        Examples
        --------
        >>> import gasphys as gp
        >>> pressure = xr.DataArray([101.325, 243.18], dims="pressure", attrs={"units": "kPa"})
        >>> session = gp.Exposure.start("oxygen", pressure=pressure).stay(1)
        >>> picture = OxygenCascade(new_figure())
        >>> picture.update(gp.gas_exchange.oxygenation(session).isel(time=0), at=243.18)
        >>> picture.at.get_text()
        '2.4 atm'
        """
        pressures = ds["ambient_pressure"].values
        found = np.flatnonzero(np.isclose(pressures, at, rtol=1e-9))
        if not found.size:
            raise GasphysError(f"at = {at:g} kPa is not among the pressures of the dataset")
        index = int(found[0])
        x = convert(pressures, "kPa", pressure_unit)
        valid = ds["arterial_po2_valid"].values == 1 if "arterial_po2_valid" in ds else np.full(x.shape, True)
        highest = {}
        late = x[index] > x[0] + 0.88 * (x[-1] - x[0])
        for name, (solid, dotted) in self.lines.items():
            y = ds[name].values
            if quantity(name).is_pressure:
                y = convert(y, "kPa", po2_unit)
            beyond = ~valid if name.startswith("arterial") else np.full(x.shape, False)
            solid.set_data(x, np.where(beyond, np.nan, y))
            dotted.set_data(x, np.where(_touching(beyond), y, np.nan))
            self.dots[name].set_data([x[index]], [y[index]])
            highest[name] = float(np.nanmax(y, initial=0.0))
            self.labels[name].set_y(float(y[-1]))
            if name in self.values:
                other = (
                    ds[f"{name}_by_shunt"].values if f"{name}_by_shunt" in ds else np.full(x.shape, np.nan)
                )
                if quantity(name).is_pressure:
                    other = convert(other, "kPa", po2_unit)
                here, there_too = float(y[index]), float(other[index])
                words = _short(here)
                if not np.isnan(there_too):
                    words = f"{words} to {_short(there_too)}"
                    here = min(here, there_too) if name == "arterial_po2" else max(here, there_too)
                self.values[name].set_text(words)
                self.values[name].xy = (x[index], here)
                known = ~np.isnan(other) & ~np.isnan(y)
                around = [np.append(x[known], x[known][::-1]), np.append(y[known], other[known][::-1])]
                self.bands[name].set_xy(np.column_stack(around))
                highest[name] = max(highest[name], float(np.nanmax(other, initial=0.0)))
                self.values[name].set_ha("right" if late else "left")
                self.values[name].set_position(
                    (-5 if late else 5, _UNDER if name == "arterial_po2" else _OVER)
                )
        for axes, lines, gap in zip((self.upper, self.lower), _LINES, (0.08, 0.15), strict=True):
            top = max(highest[name] for name in lines) or 1.0
            axes.set_ylim(0.0, 1.06 * top)
            self._spread(list(lines), gap * top)
        self.upper.set_xlim(float(x[0]), float(x[-1]))
        for mark in self.marks:
            mark.set_xdata([x[index], x[index]])
        self.at.set_x(x[index])
        self.at.set_ha("right" if late else "center")
        self.at.set_text(f"{_short(float(x[index]))} {pressure_unit}")
        self.upper.set_ylabel(f"PO2, {po2_unit}", fontsize=9)
        self.lower.set_ylabel(f"O2 in blood, {quantity('arterial_o2_content').unit}", fontsize=9)
        self.lower.set_xlabel(f"{quantity('ambient_pressure').long_name}, {pressure_unit}", fontsize=9)

    def _spread(self, names: list[str], gap: float) -> None:
        """Move labels apart that would cover each other, the lowest line's label staying lowest."""
        names = sorted(names, key=lambda name: float(self.labels[name].get_position()[1]))
        for below, above in itertools.pairwise(names):
            floor = float(self.labels[below].get_position()[1]) + gap
            self.labels[above].set_y(max(float(self.labels[above].get_position()[1]), floor))


def _pair(axes: Any, color: str, width: float, dash: Any) -> tuple[Any, Any]:
    """Return the line within validity and the one beyond."""
    solid = axes.plot([], [], color=color, linewidth=width, linestyle=dash)[0]
    dotted = axes.plot([], [], color=color, linewidth=width, linestyle=_DOTS)[0]
    return solid, dotted


def _touching(mask: Any) -> Any:
    """Extend a mask by one point to each side, so that the parts of a line meet."""
    wider = mask.copy()
    wider[1:] |= mask[:-1]
    wider[:-1] |= mask[1:]
    return wider


def _short(value: float) -> str:
    return np.format_float_positional(value, precision=3, fractional=False, trim="-")


def oxygen_cascade_figure(
    ds: xr.Dataset, at: float, *, pressure_unit: str = "atm", po2_unit: str = "kPa"
) -> Any:
    """Draw inspired, alveolar and arterial PO2 and dissolved O2 against ambient pressure.

    Parameters
    ----------
    ds : Dataset
        As :meth:`OxygenCascade.update` takes it.
    at : float
        Ambient pressure marked, one of the dataset's own [kPa absolute].
    pressure_unit, po2_unit : str
        Units of the axes.

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
    Dashes, widths and words tell the lines, nothing depends on color. A dotted line is outside
    the range its equation was made for.

    Examples
    --------
    >>> import gasphys as gp
    >>> pressure = xr.DataArray([101.325, 243.18], dims="pressure", attrs={"units": "kPa"})
    >>> session = gp.Exposure.start("oxygen", pressure=pressure).stay(1)
    >>> figure = oxygen_cascade_figure(gp.gas_exchange.oxygenation(session).isel(time=0), at=243.18)
    >>> len(figure.axes)
    2
    """
    figure = new_figure(7.4, 4.8)
    OxygenCascade(figure, below=0.05).update(ds, at, pressure_unit=pressure_unit, po2_unit=po2_unit)
    caution_line(figure)
    return figure
