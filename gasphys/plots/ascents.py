"""Ascents compared: minutes by the time one passes each depth, a rising line a model."""

from __future__ import annotations

import itertools
from typing import Any

import numpy as np
import xarray as xr

from gasphys.errors import ExposureError
from gasphys.plots.style import ACCENT, INK, PALE, caution_line, new_figure, tidy

__all__ = ["AscentsPicture", "ascents_figure"]

#: Line of each model in turn: hue, width, dashes.
STROKES = (
    (ACCENT, 2.6, "-"),
    (INK, 1.4, "-"),
    (INK, 1.6, (0, (6, 2))),
    (ACCENT, 1.6, (0, (2, 1.5))),
    (INK, 1.4, (0, (1, 1.5))),
    (ACCENT, 1.2, "-"),
    (INK, 1.4, (0, (8, 2, 1, 2))),
    (ACCENT, 1.4, (0, (8, 2, 1, 2))),
)


class AscentsPicture:
    """The lines of ascents on one figure, moved when the numbers change.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        Empty.
    count : int
        Most lines it will hold.
    """

    def __init__(self, figure: Any, count: int) -> None:
        self.axes = figure.subplots()
        tidy(self.axes)
        (self.between,) = self.axes.fill([0, 0, 0], [0, 0, 0], facecolor=PALE, edgecolor="none", zorder=1)
        self.lines, self.labels, self.leaders = [], [], []
        for k in range(count):
            hue, width, dashes = STROKES[k % len(STROKES)]
            (line,) = self.axes.plot([], [], color=hue, linewidth=width, linestyle=dashes, zorder=3)
            (leader,) = self.axes.plot([], [], color=hue, linewidth=0.6, clip_on=False, zorder=2)
            label = self.axes.text(0, 0, "", fontsize=8, color=hue, va="center", ha="left", clip_on=False)
            self.lines.append(line)
            self.leaders.append(leader)
            self.labels.append(label)
        self.axes.set_ylabel("minutes since leaving the bottom", fontsize=9)
        self.axes.set_title("", fontsize=9, loc="left", color=INK)
        self.axes.grid(axis="x", color="#dddddd", linewidth=0.6)
        self.axes.set_axisbelow(True)

    def update(self, ds: xr.Dataset) -> None:
        """Show a dataset.

        Parameters
        ----------
        ds : Dataset
            With the variables of :attr:`gasphys.ascent.Comparison.tracks` and ``depth_edge``.
        """
        depth, minutes = ds["track_depth"].values, ds["track_minutes"].values
        names = [str(n) for n in ds["model"].values]
        bottom, longest = float(np.nanmax(depth)), max(float(np.nanmax(minutes)), 1.0)
        # Room at the right for the names: 0.06 inch a letter.
        letters = max(len(name) for name in names) + 8
        part = min((0.06 * letters + 0.3) / (self.axes.figure.get_size_inches()[0] - 0.6), 0.6)
        self.axes.set_xlim(bottom * 1.01, -1.01 * part / (1.0 - part) * bottom)
        self.axes.set_ylim(0.0, 1.06 * longest)
        ticks = _ticks(ds["depth_edge"].values, bottom)
        self.axes.set_xticks(ticks, ["surface" if t == 0.0 else f"{t:.4g}" for t in ticks])
        self.axes.set_xlabel(f"depth, {ds.attrs['depth_unit']}, from the bottom to the surface", fontsize=9)
        ends = np.array([np.nanmax(row) for row in minutes])
        places = _apart(ends, 0.052 * 1.06 * longest)
        for k, (line, leader, label) in enumerate(zip(self.lines, self.leaders, self.labels, strict=True)):
            there = k < len(names)
            for artist in (line, leader, label):
                artist.set_visible(there)
            if not there:
                continue
            line.set_data(depth[k], minutes[k])
            leader.set_data([0.0, -0.03 * bottom], [ends[k], places[k]])
            label.set_position((-0.035 * bottom, places[k]))
            label.set_text(f"{names[k]}, {ends[k]:.0f} min")
        self.between.set_xy(_between(depth, minutes))
        gap = ds["more_minutes"].values
        widest = int(np.argmax(gap)) if gap.size else 0
        text = (
            f"They part most at {_place(ds, widest)}: {gap[widest]:.1f} min between "
            f"{ds['earliest_model'].values[widest]} and {ds['latest_model'].values[widest]}"
            if gap.size and gap[widest] > 0.05
            else "They do not part"
        )
        self.axes.set_title(text if len(names) > 1 else names[0], fontsize=9, loc="left", color=INK)


def _place(ds: xr.Dataset, band: int) -> str:
    depth = float(ds["to_depth"].values[band])
    return f"{depth:g} {ds.attrs['depth_unit']}" if depth else "the surface"


def _ticks(edges: Any, bottom: float) -> list[float]:
    """Return the depths written on the axis: all edges that stand far enough apart."""
    kept: list[float] = []
    for one in [0.0, bottom, *sorted(float(e) for e in edges)]:
        if all(abs(one - other) >= 0.045 * bottom for other in kept):
            kept.append(one)
    return sorted(kept, reverse=True)


def _apart(values: Any, least: float) -> Any:
    """Return places for labels near their values, none closer than `least` to the next."""
    order = np.argsort(values, kind="stable")
    places = np.array(values, dtype=float)
    for before, k in itertools.pairwise(order):
        places[k] = max(places[k], places[before] + least)
    return places - max(0.0, (places.max() - values.max()) / 2.0 if len(values) else 0.0)


def _between(depth: Any, minutes: Any) -> Any:
    """Return the outline of what lies between the earliest and the latest line."""
    grid = np.unique(np.concatenate([d[~np.isnan(d)] for d in depth]))
    low, high = [], []
    for d in grid:
        at = [
            _first_last(one[~np.isnan(one)], t[~np.isnan(t)], d)
            for one, t in zip(depth, minutes, strict=True)
        ]
        low.append([min(a for a, _ in at), min(b for _, b in at)])
        high.append([max(a for a, _ in at), max(b for _, b in at)])
    # Deepest first: arriving, then leaving.
    x = np.repeat(grid[::-1], 2)
    under, over = np.array(low)[::-1].ravel(), np.array(high)[::-1].ravel()
    return np.stack([np.concatenate([x, x[::-1]]), np.concatenate([under, over[::-1]])], axis=-1)


def _first_last(depth: Any, minutes: Any, wanted: float) -> tuple[float, float]:
    """Return when a line arrives at a depth and when it leaves it."""
    same = np.flatnonzero(np.abs(depth - wanted) < 1e-9)
    if same.size:
        return float(minutes[same[0]]), float(minutes[same[-1]])
    at = float(np.interp(-wanted, -depth, minutes))
    return at, at


def ascents_figure(ds: xr.Dataset) -> Any:
    """Draw ascents as minutes by the time one passes each depth.

    Parameters
    ----------
    ds : Dataset
        From :meth:`gasphys.ascent.Comparison.to_dataset`.

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
    Left is the bottom, right the surface; a stop is an upright stroke. The vertical gap at a depth is the
    disagreement there.

    Examples
    --------
    >>> from gasphys import Exposure, ascent
    >>> bottom = Exposure.start("air").travel(depth=40, rate=20).stay(20)
    >>> found = ascent.compare_ascents(bottom, models=["buhlmann_1995_c", "us_navy_1957"])
    >>> len(ascents_figure(found.to_dataset(judged=False)).axes)
    1
    """
    if "track_minutes" not in ds or "more_minutes" not in ds:
        raise ExposureError("ascents are drawn from the Dataset of Comparison.to_dataset")
    figure = new_figure(8.0, 5.2)
    AscentsPicture(figure, ds.sizes["model"]).update(ds)
    caution_line(figure)
    return figure
