"""A course of treatments: a "sessions left" ladder for each limit."""

from __future__ import annotations

import math
import textwrap
from typing import Any

import xarray as xr

from gasphys.doses.ladder import plain
from gasphys.errors import ExposureError
from gasphys.plots.style import ACCENT, INK, PALE, caution_line, new_figure, tidy

__all__ = ["CourseLadders", "course_figure"]

#: Rungs drawn where there is no end.
_ENDLESS = 6
#: Half the height of a ladder, of the distance between two.
_HALF = 0.16
#: Letters of the sentence on nervous system signs that fit into an inch.
_LETTERS = 17


class CourseLadders:
    """The ladders on one figure; later calls of :meth:`update` move their artists.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        An empty figure.
    ladders : int
        How many.
    below : float
        Room under the axes for the risk of any sign and the caution [inch]; none: a face that writes
        the risk beside the picture.

    Examples
    --------
    >>> CourseLadders(new_figure(), 5).axes.get_xlabel()
    'session (days in a row for the pulmonary index)'
    """

    def __init__(self, figure: Any, ladders: int, below: float = 0.0) -> None:
        from matplotlib.collections import LineCollection, PolyCollection

        self.figure, self.below = figure, below
        # Fixed margins: nothing but the data moves between two pictures.
        figure.set_layout_engine("none")
        _, height = figure.get_size_inches()
        bottom = (0.55 + below) / height
        self.axes = axes = figure.add_axes((0.03, bottom, 0.95, 1.0 - bottom - 0.4 / height))
        tidy(axes)
        axes.spines["left"].set_visible(False)
        axes.set_ylim(0.5, ladders + 0.72)
        axes.set_yticks([])
        axes.xaxis.get_major_locator().set_params(integer=True)
        axes.set_xlabel("session (days in a row for the pulmonary index)", fontsize=9)
        self.title = figure.text(0.03, 1.0 - 0.28 / height, "", fontsize=10, color=INK)
        self.signs = figure.text(
            0.03, below / height, "", fontsize=7.5, color=INK, va="top", linespacing=1.25
        )
        self.ladders = []
        for level in range(ladders, 0, -1):
            lines = {
                "done": LineCollection([]),
                "left": LineCollection([], linestyles=":"),
                "beyond": LineCollection([], linewidths=0.6),
                "filled": PolyCollection([]),
            }
            for one in lines.values():
                axes.add_collection(one, autolim=False)
            (mark,) = axes.plot([], [], color=INK)
            words = [
                axes.text(0.5, level + step, "", fontsize=size, color=INK, va=side)
                for step, size, side in ((0.26, 8, "bottom"), (-0.21, 7, "top"))
            ]
            self.ladders.append((level, lines, mark, words))

    def update(self, ds: xr.Dataset) -> None:
        """Show another dataset.

        Parameters
        ----------
        ds : Dataset
            From :func:`gasphys.doses.sessions_left`, of as many ladders.

        Examples
        --------
        >>> import datetime
        >>> from gasphys.doses import Course, Session, sessions_left
        >>> from gasphys.schedules import treatment
        >>> noon = datetime.datetime(2042, 3, 3, 12)
        >>> ds = sessions_left(Course((Session(noon, treatment("usn_9")),)), count="oxygen")
        >>> CourseLadders(new_figure(), ds.sizes["ladder"]).update(ds)
        """
        end = 1.0
        for k, (level, lines, mark, words) in enumerate(self.ladders):
            end = max(end, _ladder(ds.isel(ladder=k), level, lines, mark, words))
        self.axes.set_xlim(0.4, end + 0.6)
        done, person = int(ds.attrs["sessions_done"]), str(ds.attrs.get("person", ""))
        of = f", {person}" if person else ""
        self.title.set_text(f"Sessions left after {done}{of}, as for a {ds.attrs['role']}")
        if self.below:
            width = int(self.figure.get_size_inches()[0] * _LETTERS)
            self.signs.set_text("\n".join(textwrap.wrap(str(ds.attrs["any_sign"]), width)))


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
    for others than this role is drawn pale and called not applicable. Under them stands the risk of
    any nervous system sign in one session, with the seizure rates of clinics.

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
    ladders = ds.sizes["ladder"]
    figure = new_figure(8.2, 2.0 + 0.85 * ladders)
    CourseLadders(figure, ladders, below=1.0).update(ds)
    caution_line(figure)
    return figure


def _ladder(row: xr.Dataset, level: int, lines: dict[str, Any], mark: Any, words: list[Any]) -> float:
    """Move the artists of one ladder; return how far it reaches."""
    left, passed = float(row["sessions_left"].values), float(row["passed_with"].values)
    status, reason = str(row["status"].values), str(row["reason"].values)
    pale = status == "not applicable"
    words[0].set_text(f"{row['title'].values}, {row['unit'].values}")
    used, limit_value = (plain(float(row[v].values)) for v in ("used", "limit_value"))
    undefined = math.isnan(left)
    climbed = 0 if undefined else int(row["rungs_done"].values)
    more = 0 if undefined else _ENDLESS if math.isinf(left) else int(left)
    within = climbed if math.isnan(passed) else int(passed) - 1
    end, low, high = climbed + more, level - _HALF, level + _HALF

    def rails(first: float, last: float) -> list[Any]:
        return [[(first, y), (last, y)] for y in (low, high)] if last > first else []

    def rungs(first: int, last: int) -> list[Any]:
        return [[(n, low), (n, high)] for n in range(first, last + 1)]

    lines["done"].set_segments(rails(0.5, climbed + 0.5))
    lines["left"].set_segments(rails(climbed + 0.5, end + 0.5) + rungs(climbed + 1, end))
    lines["beyond"].set_segments(rungs(within + 1, climbed))
    box = ((-0.3, low), (0.3, low), (0.3, high), (-0.3, high))
    lines["filled"].set_verts([[(n + x, y) for x, y in box] for n in range(1, within + 1)])
    for one in lines.values():
        one.set_edgecolor(INK if pale else ACCENT)
    lines["filled"].set_facecolor("white" if pale else PALE)
    for name in ("done", "left", "filled"):
        lines[name].set_linewidth(0.7 if pale else 1.3)
    limit = (within if not math.isnan(passed) else end) + 0.5
    endless = math.isinf(left) and math.isnan(passed)
    mark.set_data(*(([], []) if undefined or endless else ([limit, limit], [low, high + 0.06])))
    mark.set_linewidth(1.5 if pale else 3.0)
    words[1].set_y(level + (0.1 if undefined else -0.21))
    if undefined:
        words[1].set_text(f"not applicable: {reason}")
        return 1.0
    text = "no end at this rhythm" if math.isinf(left) else f"{left:.0f} left"
    text = f"not applicable, context only ({text})" if pale else text
    words[1].set_text(f"{text}   {row['authority'].values}; used {used} of {limit_value}")
    return float(end)
