"""One equation: its result against one of its arguments, the chosen value marked."""

from __future__ import annotations

from typing import Any

import numpy as np
import xarray as xr

from gasphys.errors import GasphysError
from gasphys.plots.style import ACCENT, INK, caution_line, new_figure, tidy
from gasphys.units import convert

__all__ = ["EquationCurve", "equation_figure"]


class EquationCurve:
    """The picture on one figure; later calls of :meth:`update` move its artists.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        An empty figure.
    below : float
        Room under the axes for a line of text [share of the height].

    Examples
    --------
    >>> len(EquationCurve(new_figure()).figure.axes)
    1
    """

    def __init__(self, figure: Any, below: float = 0.0) -> None:
        self.figure = figure
        # Fixed margins: nothing but the data moves between two pictures.
        figure.set_layout_engine("none")
        self.axes = figure.add_axes((0.14, 0.14 + below, 0.82, 0.77 - below))
        tidy(self.axes)
        self.axes.xaxis.set_label_coords(0.5, -0.11)
        self.axes.yaxis.set_label_coords(-0.12, 0.5)
        # A number written beside the axis would have to be added by the reader.
        self.axes.ticklabel_format(useOffset=False)
        self.solid = self.axes.plot([], [], color=ACCENT, linewidth=3.0, zorder=3)[0]
        self.dotted = self.axes.plot([], [], color=ACCENT, linewidth=2.0, linestyle=(0, (1, 1.5)), zorder=3)[
            0
        ]
        self.mark = self.axes.axvline(0.0, color=INK, linewidth=0.8, zorder=2)
        self.point = self.axes.plot([], [], "o", color=INK, markersize=6, zorder=4, clip_on=False)[0]
        self.at = self.axes.text(
            0.0, 1.02, "", transform=self.axes.get_xaxis_transform(), fontsize=9, color=INK, ha="center"
        )

    def update(
        self, result: xr.DataArray, at: float, valid: Any = None, unit: str = "", x_unit: str = ""
    ) -> None:
        """Show another result.

        Parameters
        ----------
        result : DataArray
            Along one dimension whose coordinate has ``units`` and ``long_name``.
        at : float
            Value of that coordinate marked, one of its own.
        valid : array-like of bool, optional
            False where the equation is beyond what it was made for: dotted.
        unit, x_unit : str
            Units of the axes; those of the data by default.

        Raises
        ------
        GasphysError
            If `at` is not in the coordinate.

        Examples
        --------
        >>> x = xr.DataArray([1.0, 2.0], dims="x", attrs={"units": "L", "long_name": "volume"})
        >>> y = xr.DataArray([2.0, 4.0], {"x": x}, attrs={"units": "kPa", "long_name": "pressure"})
        >>> picture = EquationCurve(new_figure())
        >>> picture.update(y, 2.0)
        >>> picture.at.get_text()
        '2 L'
        """
        (dim,) = result.dims
        x, y = result[dim], result.values.astype(float)
        found = np.flatnonzero(np.isclose(x.values, at, rtol=1e-9, atol=0.0))
        if not found.size:
            raise GasphysError(f"at = {at:g} is not among the values of {dim}")
        index = int(found[0])
        xs, x_unit = _in_unit(x.values, x.attrs, x_unit)
        ys, unit = _in_unit(y, result.attrs, unit)
        good = np.ones(len(ys), dtype=bool) if valid is None else np.asarray(valid, dtype=bool)
        self.solid.set_data(xs, np.where(good, ys, np.nan))
        self.dotted.set_data(xs, np.where(good, np.nan, ys))
        self.mark.set_xdata([xs[index], xs[index]])
        self.point.set_data([xs[index]], [ys[index]])
        self.at.set_x(xs[index])
        self.at.set_text(f"{_short(float(xs[index]))} {'' if x_unit == '1' else x_unit}".rstrip())
        finite = ys[np.isfinite(ys)]
        low, high = (float(finite.min()), float(finite.max())) if finite.size else (0.0, 1.0)
        room = 0.05 * (high - low) or 0.05 * abs(high) or 1.0
        self.axes.set_ylim(low - room, high + room)
        self.axes.set_xlim(float(xs[0]), float(xs[-1]))
        self.axes.set_xlabel(_label(x.attrs, x_unit), fontsize=9)
        self.axes.set_ylabel(_label(result.attrs, unit), fontsize=9)


def _in_unit(values: Any, attrs: Any, unit: str) -> tuple[Any, str]:
    own = str(attrs.get("units", "1"))
    return (values, own) if unit in ("", own) else (convert(values, own, unit), unit)


def _label(attrs: Any, unit: str) -> str:
    words = str(attrs.get("long_name", ""))
    return words if unit in ("", "1") else f"{words}, {unit}"


def _short(value: float) -> str:
    return np.format_float_positional(value, precision=4, fractional=False, trim="-")


def equation_figure(
    result: xr.DataArray, at: float, valid: Any = None, *, unit: str = "", x_unit: str = ""
) -> Any:
    """Draw the result of an equation against one of its arguments.

    Parameters
    ----------
    result : DataArray
        Along one dimension whose coordinate has ``units`` and ``long_name``.
    at : float
        Value of that coordinate marked, one of its own.
    valid : array-like of bool, optional
        False where the equation is beyond what it was made for: dotted.
    unit, x_unit : str
        Units of the axes; those of the data by default.

    Returns
    -------
    matplotlib.figure.Figure
        The figure, with the caution.

    Raises
    ------
    GasphysError
        If `at` is not in the coordinate.

    Examples
    --------
    >>> x = xr.DataArray([1.0, 2.0], dims="x", attrs={"units": "L", "long_name": "volume"})
    >>> y = xr.DataArray([2.0, 4.0], {"x": x}, attrs={"units": "kPa", "long_name": "pressure"})
    >>> len(equation_figure(y, 2.0).axes)
    1
    """
    figure = new_figure(7.4, 4.4)
    EquationCurve(figure, below=0.06).update(result, at, valid, unit, x_unit)
    caution_line(figure)
    return figure
