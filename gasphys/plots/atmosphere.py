"""The atmosphere of a chamber along a run: what is breathed around the masks, beside all limits."""

from __future__ import annotations

from typing import Any

import numpy as np
import xarray as xr

from gasphys.constants import ATMOSPHERE
from gasphys.errors import ExposureError
from gasphys.limits import load
from gasphys.plots.style import ACCENT, INK, PALE, caution_line, new_figure, tidy

__all__ = ["atmosphere_figure"]

_DASHES = ((0, (6, 2)), (0, (2, 2)), (0, (8, 2, 2, 2)), (0, (1, 2)))


def atmosphere_figure(ds: xr.Dataset) -> Any:
    """Draw O2 and CO2 of a chamber between lowest and highest leak and output, with the limits in print.

    Parameters
    ----------
    ds : Dataset
        From :func:`gasphys.chamber.atmosphere`; with ``at=`` for a smooth line.

    Returns
    -------
    matplotlib.figure.Figure
        The figure.

    Raises
    ------
    ExposureError
        If it is another Dataset.

    Notes
    -----
    The band is a range of inputs, not of chance. A limit that lies outside the picture is named at its edge.

    Examples
    --------
    >>> from gasphys.chamber import atmosphere
    >>> from gasphys.schedules import treatment
    >>> len(atmosphere_figure(atmosphere(treatment("usn_9"))).axes)
    3
    """
    if "chamber_o2_fraction" not in ds or "end" not in ds.dims:
        raise ExposureError("the figure needs the Dataset of chamber.atmosphere")
    figure = new_figure(8.2, 6.4)
    oxygen, carbon, pressure = figure.subplots(3, 1, sharex=True, height_ratios=[3.0, 2.2, 1.0])
    time = ds["time"].values
    _band(oxygen, time, ds["chamber_o2_fraction"].values, "O2 of the chamber, %", "chamber_o2_fraction")
    name = "chamber_co2_surface_equivalent"
    _band(carbon, time, ds[name].values, "CO2, surface equivalent, %", name)
    atm = ds["ambient_pressure"].values / float(ATMOSPHERE)
    pressure.fill_between(time, 0.0, atm, facecolor=PALE, linewidth=0)
    pressure.plot(time, atm, color=ACCENT, linewidth=1.2)
    pressure.set_ylim(0.0, 1.1 * atm.max())
    pressure.set_ylabel("pressure,\natm abs", fontsize=8)
    pressure.set_xlabel("time, min", fontsize=9)
    for axes in (oxygen, carbon, pressure):
        tidy(axes)
    title = str(ds.attrs.get("title", "chamber atmosphere"))
    oxygen.set_title(title[0].upper() + title[1:], fontsize=10, loc="left", color=INK)
    caution_line(figure)
    return figure


def _band(axes: Any, time: Any, values: Any, label: str, quantity: str) -> None:
    """A band between the ends of the range, direct labels, and a dashed line a limit."""
    shown = 100.0 * values
    axes.fill_between(time, shown[0], shown[1], facecolor=PALE, edgecolor=ACCENT, linewidth=0.8)
    for one, word in zip(shown, ("lowest", "highest"), strict=True):
        axes.plot(time, one, color=ACCENT, linewidth=1.6 if word == "highest" else 1.0)
    peak = int(np.argmax(shown[1]))
    axes.annotate(
        "highest leak and output", (time[peak], shown[1, peak]), (-2, 3), textcoords="offset points",
        fontsize=7, ha="right", va="bottom", color=INK,
    )  # fmt: skip
    limits = sorted((x for x in load() if x.quantity == quantity), key=lambda x: x.value)
    top = max(float(shown.max()) * 1.02, float(np.min([100.0 * x.value for x in limits])) * 1.02)
    low = float(shown.min())
    room = 0.12 * (top - low)
    upper = [100.0 * x.value for x in limits if x.comparison == "<="]
    top = max([top, *(v for v in upper if v <= 1.12 * top)]) + room
    above, below = [], []
    for k, limit in enumerate(limits):
        value = 100.0 * limit.value
        text = f"{value:g} % {limit.authority} [{limit.provenance}]"
        if value > top:
            above.append(text)
        elif value < low - room:
            below.append(text)
        else:
            axes.axhline(value, color=INK, linewidth=0.9, linestyle=_DASHES[k % len(_DASHES)])
            axes.annotate(
                text, (0.0, value), (3, 1.5), xycoords=("axes fraction", "data"),
                textcoords="offset points", fontsize=6.5, va="bottom", color=INK,
            )  # fmt: skip
    axes.set_ylim(low - room, top)
    for texts, y, va in ((above, 0.99, "top"), (below, 0.01, "bottom")):
        if texts:
            word = "above" if va == "top" else "below"
            axes.text(
                0.005, y, f"{word} the picture: {'; '.join(texts)}", transform=axes.transAxes,
                fontsize=6.5, va=va, color=INK,
            )  # fmt: skip
    axes.set_ylabel(label, fontsize=8)
