"""The control path: the half-time in control along one ascent, by several models, and the wait."""

from __future__ import annotations

from typing import Any

import numpy as np
import xarray as xr

from gasphys.errors import ExposureError
from gasphys.plots.ascents import STROKES
from gasphys.plots.style import INK, caution_line, new_figure, tidy
from gasphys.units import convert

__all__ = ["control_path_figure"]

#: Width of a line [point] at no use and at full use of a limit.
_THIN, _THICK = 0.5, 6.0
#: Half-times written on the axis [min].
_TICKS = (1, 2, 5, 10, 20, 40, 80, 160, 320, 640)


def control_path_figure(ds: xr.Dataset) -> Any:
    """Draw the half-time in control against elapsed time, and under it the wait before one step up.

    Parameters
    ----------
    ds : Dataset
        From :func:`gasphys.ascent.control_path`.

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
    The stroke is as wide as the share of that model's tolerated supersaturation in use; it is dotted while
    nothing is supersaturated. Whiskers span the half-times whose share is within 10 % of the largest. Shares
    of different models are not comparable in risk.

    Examples
    --------
    >>> from gasphys import Exposure, ascent
    >>> bottom = Exposure.start("air").travel(depth=40, rate=20).stay(20)
    >>> found = ascent.compare_ascents(bottom, models=["buhlmann_1995_c", "us_navy_1957"])
    >>> len(control_path_figure(found.control()).axes)
    2
    """
    if "controlling_half_time" not in ds or "wait" not in ds:
        raise ExposureError("a control path is drawn from the Dataset of ascent.control_path")
    figure = new_figure(8.2, 6.4)
    top, below = figure.subplots(2, 1, sharex=True, height_ratios=[2.4, 1.0])
    time = ds["time"].values
    names = [str(n) for n in ds["model"].values]
    halves = ds["controlling_half_time"].values
    top.set_yscale("log")
    span = np.concatenate([ds[n].values.ravel() for n in ("near_low", "near_high")])
    low, high = (np.nanmin(span), np.nanmax(span)) if np.isfinite(span).any() else (5.0, 80.0)
    low, high = low / 1.6, high * 1.6
    top.set_ylim(low, high)
    ticks = [t for t in _TICKS if low <= t <= high]
    top.set_yticks(ticks, [str(t) for t in ticks])
    top.set_yticks([], minor=True)
    end = float(time[-1])
    room = 0.24 * (end - float(time[0]))
    top.set_xlim(float(time[0]), end + room)
    ends, starts = [], []
    for k, name in enumerate(names):
        hue, _, dashes = STROKES[k % len(STROKES)]
        # A hair apart, so that models that agree are both seen.
        shift = 1.035 ** (k - 0.5 * (len(names) - 1))
        _path(top, time, halves[k] * shift, ds["gradient_fraction"].values[k], hue, dashes)
        _whiskers(
            top, time, ds["near_low"].values[k] * shift, ds["near_high"].values[k] * shift, hue, k, len(names)
        )
        wait = ds["wait"].values[k]
        below.plot(time, np.where(np.isinf(wait), np.nan, wait), color=hue, linestyle=dashes, linewidth=1.5)
        known = np.flatnonzero(np.isfinite(halves[k]))
        ends.append(halves[k][known[-1]] * shift if known.size else np.sqrt(low * high))
        starts.append(name)
    for place, value, name, k in _labels(np.log(np.array(ends)), starts, 0.05 * np.log(high / low)):
        hue = STROKES[k % len(STROKES)][0]
        top.plot([end, end + 0.06 * room], np.exp([value, place]), color=hue, linewidth=0.6)
        top.text(end + 0.08 * room, np.exp(place), name, fontsize=8, color=hue, va="center", ha="left")
    _stops(top, ds)
    top.set_ylabel("half-time in control, min", fontsize=9)
    title = "Half-time in control" + (
        f", following the ascent of {ds.attrs['followed']}" if "followed" in ds.attrs else ""
    )
    top.set_title(title, fontsize=10, loc="left", color=INK, pad=18)
    below.set_ylabel("wait before one\nstep up, min", fontsize=9)
    below.set_ylim(bottom=0.0)
    if not below.get_ylim()[1] > 1.0:
        below.set_ylim(0.0, 1.0)
    words = "Width: share of that model's tolerated supersaturation in use; dotted: nothing supersaturated. "
    below.set_xlabel(
        "time since the start, min\n" + words + "Whiskers: half-times within 10 %.\n"
        "Shares of different models are not comparable in risk."
        + (f" Not shown: {ds.attrs['not_shown']}." if ds.attrs.get("not_shown") else ""),
        fontsize=7.5,
        wrap=True,
    )
    for axes in (top, below):
        tidy(axes)
    below.set_xticks([t for t in below.get_xticks() if float(time[0]) <= t <= end])
    caution_line(figure)
    return figure


def _path(axes: Any, time: Any, half: Any, share: Any, hue: str, dashes: Any) -> None:
    """Draw one step line; its width is the share in steps of a tenth."""
    grade = np.where(np.isnan(share), -1, np.ceil(np.clip(np.nan_to_num(share), 0.0, 1.2) * 10.0))
    last = 0
    level = np.nan
    for i in range(1, len(time) + 1):
        if i < len(time) and half[i] == half[last] and grade[i] == grade[last]:
            continue
        if i < len(time) and np.isnan(half[i]) and np.isnan(half[last]):
            continue
        x = [time[last], time[min(i, len(time) - 1)]]
        if np.isnan(half[last]):
            known = half[~np.isnan(half)]
            ahead = half[i:][~np.isnan(half[i:])]
            y = (
                level
                if np.isfinite(level)
                else (ahead[0] if ahead.size else (known[0] if known.size else np.nan))
            )
            axes.plot(x, [y, y], color=hue, linewidth=0.8, linestyle=":")
        else:
            width = _THIN + (_THICK - _THIN) * grade[last] / 10.0
            style = (
                dashes
                if isinstance(dashes, str)
                else (0, tuple(max(d * 1.6 / width, 0.35) for d in dashes[1]))
            )
            axes.plot(x, [half[last]] * 2, color=hue, linewidth=width, linestyle=style, solid_capstyle="butt")
            if np.isfinite(level) and level != half[last]:
                axes.plot([x[0]] * 2, [level, half[last]], color=hue, linewidth=0.5)
            level = half[last]
        last = i
        if i >= len(time):
            break


def _whiskers(axes: Any, time: Any, low: Any, high: Any, hue: str, k: int, count: int) -> None:
    """Draw whiskers here and there, those of different models beside each other."""
    step = max(1.5, (time[-1] - time[0]) / 28.0)
    for wanted in np.arange(time[0] + step * (k + 0.5) / count, time[-1], step):
        i = int(np.searchsorted(time, wanted))
        if i < len(time) and np.isfinite(low[i]) and high[i] > low[i]:
            axes.plot([time[i]] * 2, [low[i], high[i]], color=hue, linewidth=0.7, marker="_", markersize=4)


def _labels(ends: Any, names: list[str], least: float) -> list[tuple[float, float, str, int]]:
    """Return places of the names at the right, none upon another."""
    out: list[tuple[float, float, str, int]] = []
    place = -np.inf
    for k in np.argsort(ends, kind="stable"):
        place = max(float(ends[k]), place + least)
        out.append((place, float(ends[k]), names[k], int(k)))
    return out


def _stops(axes: Any, ds: xr.Dataset) -> None:
    """Write the depth of every longer stop of the followed ascent above the picture."""
    time, pressure = ds["time"].values, ds["ambient_pressure"].values
    unit = str(ds.attrs["depth_unit"])
    shown = "msw" if unit == "m" else unit
    begin = 0
    for i in range(1, len(time) + 1):
        if i < len(time) and abs(pressure[i] - pressure[begin]) < 1e-6:
            continue
        if time[i - 1] - time[begin] > 0.02 * (time[-1] - time[0]):
            depth = float(convert(float(pressure[begin]) - float(ds.attrs["surface_pressure"]), "kPa", shown))
            middle = 0.5 * (time[begin] + time[i - 1])
            axes.axvspan(time[begin], time[i - 1], color="#f3f3f3", zorder=0, linewidth=0)
            axes.annotate(
                f"{depth:.3g}",
                (middle, 1.0),
                xycoords=axes.get_xaxis_transform(),
                xytext=(0, 3),
                textcoords="offset points",
                fontsize=7,
                color=INK,
                ha="center",
            )
        begin = i
    axes.annotate(
        f"waits at, {shown}",
        (1.0, 1.0),
        xycoords="axes fraction",
        xytext=(0, 3),
        textcoords="offset points",
        fontsize=7,
        color=INK,
        ha="right",
    )
