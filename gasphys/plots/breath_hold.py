"""One breath held: alveolar pressures, and what passes between lung and blood."""

from __future__ import annotations

from typing import Any

import numpy as np
import xarray as xr

from gasphys.exposure import Exposure
from gasphys.plots.style import ACCENT, INK, caution_line, new_figure, tidy

__all__ = ["breath_hold_figure"]

_DASHES: tuple[Any, ...] = ("-", (0, (5, 2)), (0, (1, 1.5)))
_PANELS = (
    (("alveolar_po2", "O2"), ("alveolar_pco2", "CO2")),
    (("o2_transfer_stpd", "O2"), ("co2_transfer_stpd", "CO2")),
)


def breath_hold_figure(ds: xr.Dataset) -> Any:
    """Draw alveolar O2 and CO2 pressure and their transfer to the blood along a breath-hold.

    Parameters
    ----------
    ds : Dataset
        As :func:`gasphys.gas_exchange.breath_hold` returns it; with many times, or the lines are straight
        between changes of the exposure.

    Returns
    -------
    matplotlib.figure.Figure
        The figure, with the caution.

    Notes
    -----
    Above, alveolar pressures; below, what passes from lung to blood: under zero it goes the other way. Dotted
    lines stand where descent or ascent begins or ends. Dashes and words tell the gases.

    Examples
    --------
    >>> import gasphys as gp
    >>> dive = gp.Exposure.start("air").travel(depth=20, rate=40).travel(depth=0, rate=40)
    >>> len(breath_hold_figure(gp.gas_exchange.breath_hold(dive)).axes)
    2
    """
    figure = new_figure(7.4, 5.0)
    upper, lower = figure.subplots(2, 1, sharex=True)
    x = ds["time"].values
    for axes, lines in zip((upper, lower), _PANELS, strict=True):
        ends = [float(ds[name].values[-1]) for name, _ in lines]
        # Apart where both lines end at nearly the same height.
        shifts = (6, -6) if ends[0] >= ends[1] else (-6, 6)
        for (name, words), hue, dash, shift in zip(lines, (ACCENT, INK), _DASHES[:2], shifts, strict=True):
            y = ds[name].values
            axes.plot(x, y, color=hue, linestyle=dash, linewidth=1.8)
            axes.annotate(
                words,
                (x[-1], y[-1]),
                xytext=(5, shift),
                textcoords="offset points",
                fontsize=8,
                va="center",
                color=hue,
            )
        tidy(axes)
    pieces = Exposure.from_dataset(ds).pieces()
    times, change = pieces.times, np.sign(pieces.end_pressure - pieces.start_pressure)
    for begin, end, way in zip(times[:-1], times[1:], change, strict=True):
        for axes in (upper, lower):
            axes.axvline(end, color=INK, linewidth=0.5, linestyle=_DASHES[2])
        words = {1.0: "descent", -1.0: "ascent"}.get(float(way), "stay")
        place = upper.get_xaxis_transform()
        upper.text(0.5 * (begin + end), 1.02, words, transform=place, ha="center", fontsize=8)
    upper.set_ylim(bottom=0.0)
    lower.axhline(0.0, color=INK, linewidth=0.6)
    upper.set_ylabel("alveolar pressure, kPa", fontsize=9)
    lower.set_ylabel("lung to blood, L/min STPD", fontsize=9)
    lower.set_xlabel("time, min", fontsize=9)
    lower.set_xlim(float(x[0]), float(x[-1]))
    figure.align_ylabels()
    caution_line(figure)
    return figure
