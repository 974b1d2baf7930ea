"""A course of treatments: a "sessions left" ladder for each limit."""

from __future__ import annotations

import math
from typing import Any

import xarray as xr

from gasphys.doses.ladder import plain
from gasphys.errors import ExposureError
from gasphys.plots.style import ACCENT, INK, PALE, caution_line, new_figure, tidy

__all__ = ["course_figure"]

#: Rungs drawn where there is no end.
_ENDLESS = 6


def course_figure(ds: xr.Dataset) -> Any:
    """Draw how many sessions each limit leaves: a rung for each, filled when it is done.

    Parameters
    ----------
    ds : Dataset
        From :func:`gasphys.doses.sessions_left`.

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
    A ladder lies along the sessions: solid rails and filled rungs are done, dotted rails and open
    rungs are left, the heavy bar is the limit. Rungs beyond the bar stay as thin lines. A ladder made
    for others than this role is drawn pale and called not applicable.

    Examples
    --------
    >>> import datetime
    >>> from gasphys.doses import Course, Session, sessions_left
    >>> from gasphys.schedules import treatment
    >>> noon = datetime.datetime(2042, 3, 3, 12)
    >>> ds = sessions_left(Course((Session(noon, treatment("usn_9")),)), count="oxygen")
    >>> len(course_figure(ds).axes)
    1
    """
    if "sessions_left" not in ds or "ladder" not in ds.dims:
        raise ExposureError("a ladder needs the Dataset of doses.sessions_left")
    names = [str(n) for n in ds["ladder"].values]
    figure = new_figure(8.2, 1.5 + 0.95 * len(names))
    axes = figure.subplots()
    end = 1.0
    for k, name in enumerate(names):
        end = max(end, _ladder(axes, ds.sel(ladder=name), len(names) - k))
    axes.set_xlim(0.4, end + 0.6)
    axes.set_ylim(0.35, len(names) + 0.85)
    axes.set_yticks([])
    axes.xaxis.get_major_locator().set_params(integer=True)
    axes.set_xlabel("session (days in a row for the pulmonary index)", fontsize=9)
    done, person = int(ds.attrs["sessions_done"]), str(ds.attrs.get("person", ""))
    title = (
        f"Sessions left after {done}" + (f", {person}" if person else "") + f", as for a {ds.attrs['role']}"
    )
    axes.set_title(title, fontsize=10, loc="left", color=INK)
    tidy(axes)
    axes.spines["left"].set_visible(False)
    caution_line(figure)
    return figure


def _ladder(axes: Any, row: xr.Dataset, level: int) -> float:
    """Draw one ladder and its words; return how far it reaches."""
    left, passed = float(row["sessions_left"].values), float(row["passed_with"].values)
    unit, status = str(row["unit"].values), str(row["status"].values)
    pale = status == "not applicable"
    hue = INK if pale else ACCENT
    label = f"{row['title'].values}, {unit}"
    used, limit_value = (plain(float(row[v].values)) for v in ("used", "limit_value"))
    below = f"{row['authority'].values}; used {used} of {limit_value}"
    axes.text(0.5, level + 0.34, label, fontsize=8, color=INK, va="bottom", ha="left")
    if math.isnan(left):
        reason = str(row["reason"].values)
        axes.text(0.5, level, f"not applicable: {reason}", fontsize=7, color=INK, va="center", wrap=True)
        return 1.0
    climbed = int(row["rungs_done"].values)
    more = _ENDLESS if math.isinf(left) else int(left)
    low, high = level - 0.16, level + 0.16
    width = 0.7 if pale else 1.3
    end = climbed + more
    within = climbed if math.isnan(passed) else int(passed) - 1
    for y in (low, high):
        axes.plot([0.5, climbed + 0.5], [y, y], color=hue, linewidth=width)
        axes.plot([climbed + 0.5, end + 0.5], [y, y], color=hue, linewidth=width, linestyle=":")
    for n in range(1, end + 1):
        if n <= within:
            face = "white" if pale else PALE
            axes.fill_between([n - 0.3, n + 0.3], low, high, facecolor=face, edgecolor=hue, linewidth=width)
        elif n <= climbed:
            axes.plot([n, n], [low, high], color=hue, linewidth=0.6)
        else:
            axes.plot([n, n], [low, high], color=hue, linewidth=0.8, linestyle=":")
    if not (math.isinf(left) and math.isnan(passed)):
        limit = (within if not math.isnan(passed) else end) + 0.5
        axes.plot([limit, limit], [low - 0.03, high + 0.1], color=INK, linewidth=3.0 if not pale else 1.5)
    words = "no end at this rhythm" if math.isinf(left) else f"{left:.0f} left"
    if pale:
        words = f"not applicable, context only ({words})"
    axes.annotate(
        f"{words}   {below}",
        (0.5, level - 0.2),
        fontsize=7,
        color=INK,
        va="top",
        ha="left",
        annotation_clip=False,
    )
    return float(end)
