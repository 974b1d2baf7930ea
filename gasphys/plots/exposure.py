"""The exposure: pressure upward, its area shared by the gases breathed."""

from __future__ import annotations

from typing import Any

import numpy as np
import xarray as xr

from gasphys.errors import ExposureError
from gasphys.exposure import Exposure
from gasphys.plots.style import ACCENT, HATCH, INK, WORDS, caution_line, new_figure, tidy
from gasphys.report import Units, minutes_text
from gasphys.units import convert

__all__ = ["exposure_figure"]


def exposure_figure(exposure: Exposure, found: xr.Dataset | None = None, units: Units | None = None) -> Any:
    """Draw pressure against time, filled by the partial pressures of the gases breathed.

    Parameters
    ----------
    exposure : Exposure
        One scenario.
    found : Dataset, optional
        Its review: a lane under the picture shows when each limit is exceeded.
    units : Units, optional
        Unit of the pressure axis.

    Returns
    -------
    matplotlib.figure.Figure
        The figure.

    Raises
    ------
    ExposureError
        If the exposure holds several scenarios.

    Notes
    -----
    A switch is a re-partition of the area, a loop a constant oxygen layer. Hatches and words tell
    the gases; nothing depends on color.

    Examples
    --------
    >>> figure = exposure_figure(Exposure.start("air").travel(depth=18, minutes=2))
    >>> len(figure.axes)
    1
    """
    if exposure.dims:
        raise ExposureError("a figure shows one scenario; pick one first")
    units = units or Units()
    lanes = _lanes(found)
    figure = new_figure(8.2, 4.6 + 0.24 * len(lanes))
    if lanes:
        axes, below = figure.subplots(2, 1, sharex=True, height_ratios=[4.0, 0.36 + 0.24 * len(lanes)])
    else:
        axes, below = figure.subplots(), None
    _draw_gases(axes, exposure, units)
    axes.set_ylabel(f"ambient pressure, {units.pressure} absolute", fontsize=9)
    axes.set_title(str(exposure.attrs.get("title", "Exposure")), fontsize=10, loc="left", color=INK)
    tidy(axes)
    axes.set_xlim(0.0, float(exposure.duration))
    if below is not None:
        _draw_lanes(below, lanes)
    (below or axes).set_xlabel("time since the start, min", fontsize=9)
    axes.set_ylim(bottom=0.0)
    caution_line(figure)
    return figure


def _draw_gases(axes: Any, exposure: Exposure, units: Units) -> None:
    pieces = exposure.pieces()
    n = len(exposure.part)
    # Both ends of every piece: a switch stands upright.
    times = np.stack([pieces.times[:-1], pieces.times[1:]], axis=-1).ravel()

    def ends(start: Any, end: Any) -> Any:
        return convert(np.stack([start, end], axis=-1).ravel(), "kPa", units.pressure)

    layers = {"O2": ends(pieces.start_po2, pieces.end_po2)}
    for gas in exposure.fractions:
        if gas == "O2":
            continue
        if gas == "CO2":
            values = ends(
                pieces.fractions["CO2"] * pieces.start_pressure, pieces.fractions["CO2"] * pieces.end_pressure
            )
        else:
            values = ends(*pieces.inert_pressure(gas))
        if np.any(values > 0.0):
            layers[gas] = values
    floor = np.zeros(2 * n)
    top = sum(layers.values())
    for gas, values in layers.items():
        hatch, fill = HATCH[gas]
        axes.fill_between(
            times, floor, floor + values, facecolor=fill, hatch=hatch, edgecolor=ACCENT, linewidth=0.4
        )
        _label(axes, WORDS[gas], times, floor, values, float(np.max(top)))
        floor = floor + values
    axes.plot(times, top, color=INK, linewidth=1.4)


def _label(axes: Any, word: str, times: Any, floor: Any, values: Any, height: float) -> None:
    """Write a gas's name where its layer is thick and long enough to hold it."""
    length = np.maximum(times[1::2] - times[::2], 0.0)
    thickness = np.minimum(values[::2], values[1::2])
    share = length / max(float(times[-1]), 1e-9) * np.minimum(thickness / height, 0.3)
    best = int(np.argmax(share))
    if share[best] <= 0.0:
        return
    middle = 0.5 * (times[2 * best] + times[2 * best + 1])
    bottom = 0.5 * (floor[2 * best] + floor[2 * best + 1])
    thick = 0.5 * (values[2 * best] + values[2 * best + 1])
    narrow = length[best] < 0.12 * float(times[-1])
    axes.text(
        middle,
        bottom + 0.5 * thick,
        word,
        fontsize=8,
        color=INK,
        ha="center",
        va="center",
        rotation=90 if narrow and thick > 0.3 * height else 0,
        bbox={"facecolor": "white", "edgecolor": "none", "pad": 1.0, "alpha": 0.9},
        clip_on=True,
    )


def _lanes(found: xr.Dataset | None) -> list[tuple[str, float, float]]:
    if found is None:
        return []
    rows = []
    for name in found["limit"].values:
        row = found.sel(limit=name)
        if str(row["status"].values) == "beyond":
            label = f"{row['authority'].values}: {row['published'].values}".removesuffix(" 1")
            rows.append((label, float(row["first_crossing"].values), float(row["time_beyond"].values)))
    return sorted(rows, key=lambda row: row[1])


def _draw_lanes(axes: Any, lanes: list[tuple[str, float, float]]) -> None:
    end = axes.get_xlim()[1]
    for k, (label, first, minutes) in enumerate(lanes):
        level = len(lanes) - k
        left = first < 0.36 * end
        axes.plot([first], [level], marker="|", markersize=9, color=INK, markeredgewidth=2)
        text = axes.annotate(
            f"{label}: beyond from {first:.1f} min, {minutes_text(minutes)} in all",
            (first, level),
            xytext=(6 if left else -6, 0),
            textcoords="offset points",
            fontsize=7,
            ha="left" if left else "right",
            va="center",
            color=INK,
            annotation_clip=False,
        )
        text.set_in_layout(False)
    axes.set_ylim(0.3, len(lanes) + 0.7)
    axes.set_yticks([])
    for side in ("top", "right", "left"):
        axes.spines[side].set_visible(False)
    axes.tick_params(labelsize=8, colors=INK)
