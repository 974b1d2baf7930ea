"""Nuclei and bubbles: what a descent crushes, what an ascent asks of it, and how bubbles grow."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import xarray as xr

from gasphys.errors import ExposureError
from gasphys.plots.style import ACCENT, INK, PALE, caution_line, new_figure, tidy

__all__ = ["NucleusPicture", "bubble_figure", "nuclei_figure", "nucleus_figure"]

#: Dashes of several compartments or bubbles, and their widths.
_DASHES: tuple[Any, ...] = ("-", (0, (6, 2)), (0, (3, 1.5)), (0, (1, 1.4)), (0, (8, 2, 1, 2)))
_WIDTHS = (2.6, 2.1, 1.7, 1.4, 1.1)


class NucleusPicture:
    """One nucleus on one figure; later calls of :meth:`update` move its artists.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        An empty figure.
    below : float
        Room under the axes for the caution [share of the height].

    Examples
    --------
    >>> len(NucleusPicture(new_figure()).figure.axes)
    2
    """

    def __init__(self, figure: Any, below: float = 0.0) -> None:
        self.figure = figure
        figure.set_layout_engine("none")
        place = {"left": 0.1, "right": 0.8, "top": 0.94, "bottom": 0.12 + below, "hspace": 0.14}
        self.upper, self.lower = figure.subplots(
            2, 1, sharex=True, gridspec_kw={"height_ratios": [1.0, 1.6], **place}
        )
        for axes, label in (
            (self.upper, "critical radius, um"),
            (self.lower, "gas tension over\nambient pressure, kPa"),
        ):
            tidy(axes)
            axes.set_ylabel(label, fontsize=9)
            axes.yaxis.set_label_coords(-0.075, 0.5)
        self.lower.set_xlabel("minutes since the start", fontsize=9)
        self.lower.xaxis.set_label_coords(0.5, -0.14)
        (self.radius,) = self.upper.plot([], [], color=ACCENT, linewidth=2.6)
        (self.initial,) = self.upper.plot([], [], color=INK, linewidth=0.9, linestyle=(0, (1, 1.6)))
        (self.least,) = self.lower.plot([], [], color=INK, linewidth=1.6, linestyle=(0, (6, 2)))
        (self.over,) = self.lower.plot([], [], color=ACCENT, linewidth=2.6)
        self.zero = self.lower.axhline(0.0, color=INK, linewidth=0.6)
        self.leaving = [axes.axvline(0.0, color=INK, linewidth=0.8) for axes in (self.upper, self.lower)]
        self.words = {
            name: axes.text(
                1.015, 0.0, "", transform=axes.get_yaxis_transform(), fontsize=9, color=color, va="center"
            )
            for name, axes, color in (
                ("radius", self.upper, ACCENT),
                ("initial", self.upper, INK),
                ("least", self.lower, INK),
                ("over", self.lower, ACCENT),
            )
        }
        self.at = self.upper.text(
            0.0, 1.03, "", transform=self.upper.get_xaxis_transform(), fontsize=9, color=INK, ha="center"
        )

    def update(self, ds: xr.Dataset) -> None:
        """Show another dataset.

        Parameters
        ----------
        ds : Dataset
            One compartment and one gas of :func:`gasphys.bubbles.nuclei`.

        Examples
        --------
        >>> from gasphys import Exposure, bubbles
        >>> ds = bubbles.nuclei(Exposure.start("air").travel(depth=30, rate=20).stay(20))
        >>> NucleusPicture(new_figure()).update(ds.isel(compartment=0, inert_gas=0))
        """
        time = ds["time"].values
        radius, least, over = (
            ds[n].values for n in ("nucleus_radius", "minimum_gradient", "supersaturation")
        )
        begin = float(ds["initial_radius"])
        pressure = ds["ambient_pressure"].values
        left = float(time[np.flatnonzero(pressure >= pressure.max() * (1.0 - 1e-9))[-1]])
        self.radius.set_data(time, radius)
        self.initial.set_data(time[[0, -1]], [begin, begin])
        self.least.set_data(time, least)
        self.over.set_data(time, over)
        for line in self.leaving:
            line.set_xdata([left, left])
        self.at.set_position((left, 1.03))
        self.at.set_text("leaving the bottom")
        self.upper.set_xlim(time[0], time[-1])
        room = max(begin - radius.min(), 0.05)
        self.upper.set_ylim(radius.min() - 0.25 * room, begin + 0.3 * room)
        low, high = min(over.min(), -10.0), max(over.max(), least.max())
        self.lower.set_ylim(low - 0.06 * (high - low), high + 0.12 * (high - low))
        ends = {
            "radius": (radius[-1], "nucleus"),
            "initial": (begin, "uncrushed"),
            "least": (least[-1], "least that makes\na bubble of it"),
            "over": (over[-1], "what the tissue\nholds"),
        }
        for pair, gap in ((("radius", "initial"), 0.16), (("over", "least"), 0.2)):
            axes = self.upper if pair[0] == "radius" else self.lower
            span = axes.get_ylim()[1] - axes.get_ylim()[0]
            one, two = (float(ends[n][0]) for n in pair)
            near = gap * span - abs(two - one)
            if near > 0.0:  # words that would lie on each other move apart
                sign = 1.0 if two >= one else -1.0
                one, two = one - sign * near / 2.0, two + sign * near / 2.0
            for name, y in zip(pair, (one, two), strict=True):
                self.words[name].set_text(ends[name][1])
                self.words[name].set_y(y)


def nucleus_figure(ds: xr.Dataset) -> Any:
    """Draw one nucleus along an exposure: its radius, and whether the tissue makes a bubble of it.

    Parameters
    ----------
    ds : Dataset
        One compartment and one gas of :func:`gasphys.bubbles.nuclei`.

    Returns
    -------
    matplotlib.figure.Figure
        The figure, with the caution.

    Raises
    ------
    ExposureError
        If it is another Dataset.

    Examples
    --------
    >>> from gasphys import Exposure, bubbles
    >>> ds = bubbles.nuclei(Exposure.start("air").travel(depth=30, rate=20).stay(20))
    >>> len(nucleus_figure(ds.isel(compartment=0, inert_gas=0)).axes)
    2
    """
    if "nucleus_radius" not in ds or ds["nucleus_radius"].ndim != 1:
        raise ExposureError(
            "a nucleus needs the Dataset of bubbles.nuclei, one compartment and one gas of it"
        )
    figure = new_figure(8.0, 5.2)
    NucleusPicture(figure, below=0.05).update(ds)
    caution_line(figure)
    return figure


def nuclei_figure(ds: xr.Dataset, compartments: Sequence[str] | None = None, inert_gas: str = "N2") -> Any:
    """Draw nuclei of several compartments along an ascent: radius above, supersaturation below.

    Parameters
    ----------
    ds : Dataset
        From :func:`gasphys.bubbles.nuclei`, one scenario.
    compartments : sequence of str, optional
        Names; default: four from the fastest to the slowest.
    inert_gas : str
        Family of nuclei.

    Returns
    -------
    matplotlib.figure.Figure
        The figure, with the evidence and the caution.

    Raises
    ------
    ExposureError
        If it is another Dataset.

    Notes
    -----
    Each compartment has one dash and width, named at the line by its half-time. Supersaturation is drawn
    where it is above zero, over the least gradient of the same nuclei, thin: where a thick line passes its
    thin one, the model counts on bubbles and holds their volume below the critical one.

    Examples
    --------
    >>> from gasphys import Exposure, ascent, bubbles
    >>> bottom = Exposure.start("air").travel(depth=40, rate=20).stay(20)
    >>> found = ascent.plan(bottom, model="yount_hoffman_1986")
    >>> len(nuclei_figure(bubbles.nuclei(found.exposure)).axes)
    2
    """
    if "nucleus_radius" not in ds or ds["nucleus_radius"].ndim != 3:
        raise ExposureError("nuclei need the Dataset of bubbles.nuclei, one scenario of it")
    names = [str(c) for c in ds["compartment"].values]
    if compartments is None:
        places = np.unique(np.linspace(min(2, len(names) - 1), len(names) - 1, 4).round().astype(int))
        compartments = [names[k] for k in places]
    figure = new_figure(8.2, 6.2)
    upper, lower = figure.subplots(2, 1, sharex=True, gridspec_kw={"height_ratios": [1.0, 1.5]})
    time = ds["time"].values
    ends: list[tuple[float, str]] = []
    tops: list[tuple[float, float, str]] = []
    for k, name in enumerate(compartments):
        row = ds.sel(compartment=name)
        hue = ACCENT if k == 0 else INK
        style = {"color": hue, "linestyle": _DASHES[k % len(_DASHES)]}
        radius = row["nucleus_radius"].sel(inert_gas=inert_gas).values
        over = np.where(row["supersaturation"].values > 0.0, row["supersaturation"].values, np.nan)
        least = row["minimum_gradient"].sel(inert_gas=inert_gas).values
        upper.plot(time, radius, linewidth=_WIDTHS[k % len(_WIDTHS)], **style)
        lower.plot(time, over, linewidth=_WIDTHS[k % len(_WIDTHS)], **style)
        shown = np.isfinite(over)
        lower.plot(time, np.where(shown, least, np.nan), linewidth=0.7, **style)
        half = float(row["half_time"].sel(inert_gas=inert_gas))
        ends.append((float(radius[-1]), f"{half:g}"))
        if shown.any():
            at = int(np.nanargmax(over))
            tops.append((float(time[at]), float(over[at]), f"{half:g}"))
    bottom, top = upper.get_ylim()
    for y, word in _grouped(ends, 0.12 * (top - bottom)):
        text = f"{word} min"
        upper.text(1.012, y, text, transform=upper.get_yaxis_transform(), fontsize=8, color=INK, va="center")
    for x, y, word in tops:
        lower.annotate(
            word, (x, y), xytext=(0, 4), textcoords="offset points", fontsize=8, color=INK, ha="center"
        )
    word = {"N2": "nitrogen", "He": "helium"}.get(inert_gas, inert_gas)
    upper.set_ylabel(f"critical radius ({word}), um", fontsize=9)
    lower.set_ylabel("supersaturation, kPa\n(thin: least that makes bubbles)", fontsize=9)
    lower.set_xlabel("minutes since the start", fontsize=9)
    lower.set_xlim(time[0], time[-1])
    lower.set_ylim(bottom=0.0, top=1.12 * lower.get_ylim()[1])
    upper.set_title(
        "Nuclei along an exposure, a model: none was ever seen in a person", fontsize=10, loc="left"
    )
    for axes in (upper, lower):
        tidy(axes)
    caution_line(figure)
    evidence = (
        "Evidence: with stops moved deeper by a bubble model 11 of 198 dives ended in decompression "
        "sickness, with shallower ones 3 of 192."
    )
    lower.text(0.0, -0.24, evidence, transform=lower.transAxes, fontsize=7, color=INK, va="top")
    return figure


def _grouped(ends: Sequence[tuple[float, str]], gap: float) -> list[tuple[float, str]]:
    """Return one place and one word for ends that lie closer than a gap."""
    groups: list[list[tuple[float, str]]] = []
    for end in sorted(ends):
        if groups and end[0] - groups[-1][0][0] < gap:
            groups[-1].append(end)
        else:
            groups.append([end])
    return [(sum(y for y, _ in g) / len(g), ", ".join(w for _, w in reversed(g))) for g in groups]


def bubble_figure(ds: xr.Dataset) -> Any:
    """Draw the radius of free bubbles along an exposure.

    Parameters
    ----------
    ds : Dataset
        From :func:`gasphys.bubbles.growth`.

    Returns
    -------
    matplotlib.figure.Figure
        The figure, with the caution.

    Raises
    ------
    ExposureError
        If it is another Dataset.

    Notes
    -----
    The axis of radii is logarithmic; a cross is where a bubble is gone, a dot where it appears. Below, the
    ambient pressure as an area, upward.

    Examples
    --------
    >>> from gasphys import Exposure, bubbles
    >>> dive = Exposure.start("air").travel(depth=30, rate=20).stay(30).travel(depth=0, rate=9).stay(60)
    >>> len(bubble_figure(bubbles.growth(dive, [2.0, 5.0], bubbles_per_ml=1000.0)).axes)
    2
    """
    if "bubble_radius" not in ds or "bubble" not in ds.dims:
        raise ExposureError("bubbles need the Dataset of bubbles.growth")
    figure = new_figure(8.2, 5.6)
    upper, lower = figure.subplots(2, 1, sharex=True, gridspec_kw={"height_ratios": [2.6, 1.0]})
    time = ds["time"].values
    held = []
    for k in range(ds.sizes["bubble"]):
        row = ds.isel(bubble=k)
        start, born, gone = (float(row[n]) for n in ("initial_radius", "appearance_time", "vanishing_time"))
        if np.isnan(born):
            held.append(f"{start:g}")
            continue
        hue = ACCENT if k == len(held) else INK
        radius = row["bubble_radius"].values.astype(float)
        later = (time > born) & (radius > 0.0)
        x, y = np.append(max(born, time[0]), time[later]), np.append(start, radius[later])
        upper.plot(x, y, color=hue, linewidth=_WIDTHS[k % 5], linestyle=_DASHES[k % 5])
        upper.plot(x[:1], y[:1], "o", color=hue, markersize=4)
        upper.annotate(
            f"{start:g} um", (x[0], start), xytext=(-6, 0), textcoords="offset points", fontsize=8, color=hue,
            ha="right", va="center",
        )  # fmt: skip
        if np.isfinite(gone):
            upper.plot([gone], y[-1:], "x", color=hue, markersize=7)
    upper.set_yscale("log")
    upper.yaxis.set_major_formatter("{x:g}")
    if held:
        upper.text(
            0.99, 0.02, f"never exceeded by the tissue: {', '.join(held)} um", transform=upper.transAxes,
            fontsize=8, color=INK, ha="right",
        )  # fmt: skip
    pressure = ds["ambient_pressure"].values
    lower.fill_between(time, 0.0, pressure, facecolor=PALE, edgecolor=INK, linewidth=0.8)
    lower.set_ylim(0.0, 1.15 * pressure.max())
    upper.set_ylabel("radius of the bubble, um", fontsize=9)
    lower.set_ylabel("pressure, kPa", fontsize=9)
    lower.set_xlabel("minutes since the start", fontsize=9)
    lower.set_xlim(time[0], time[-1])
    upper.set_title(
        "Bubbles in tissue: dot appears, cross is gone; parameters are assumed", fontsize=10, loc="left"
    )
    for axes in (upper, lower):
        tidy(axes)
    caution_line(figure)
    return figure
