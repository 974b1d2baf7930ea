"""Chance that a limit has been crossed, and whether parameters or models decide it."""

from __future__ import annotations

from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.errors import GasphysError
from gasphys.plots.style import ACCENT, INK, PALE, caution_line, new_figure, tidy

__all__ = ["limit_chance_figure"]

Array = NDArray[np.float64]
#: Dashes of the models, in order.
_DASHES = ((), (5, 2), (1.5, 1.5), (7, 2, 1.5, 2), (3, 1, 1, 1, 1, 1))
#: Share of variance, its words, hatch and fill, from the ground up.
_SHARES = (
    ("parameter_share", "parameters", "", PALE),
    ("joint_share", "both together", "....", "white"),
    ("model_share", "choice of the model", "////", "white"),
)


def limit_chance_figure(ds: xr.Dataset) -> Any:
    """Draw the chance that a limit has been crossed as a rising curve, with the shares it rests on under it.

    Parameters
    ----------
    ds : Dataset
        Of :func:`gasphys.scenarios.crossing_chance`, of one limit.

    Returns
    -------
    matplotlib.figure.Figure
        Above, the chance with its counting band, and each model's own where there are several; under it, what
        share of the variance of crossed or not is the parameters' and what the models'.

    Raises
    ------
    GasphysError
        If there is no chance along time, or there is more than one limit.

    Examples
    --------
    >>> import gasphys as gp
    >>> depth = gp.scenarios.sample({"depth": gp.scenarios.Normal(40.0, 2.0)}, 200, rng=1).depth
    >>> dive = gp.Exposure.start("nitrox 32").travel(depth=depth, rate=10)
    >>> found = gp.review(dive).sel(limit="po2_training_1995")
    >>> len(limit_chance_figure(gp.scenarios.crossing_chance(found)).axes)
    1
    """
    if "chance" not in ds or ds["chance"].dims != ("time",):
        raise GasphysError("the picture needs scenarios.crossing_chance of one limit; pick one first")
    split = "model_share" in ds
    figure = new_figure(7.4, 5.4 if split else 3.8)
    rows = figure.subplots(2 if split else 1, 1, sharex=True, height_ratios=[2, 1] if split else None)
    top = rows[0] if split else rows
    time = ds["time"].values
    tidy(top)
    low, high, chance = (100.0 * ds[n].values for n in ("chance_low", "chance_high", "chance"))
    top.fill_between(time, low, high, color=PALE, linewidth=0)
    top.plot(time, chance, color=ACCENT, linewidth=2.4)
    ends = [("all models" if split else "chance", chance[-1], ACCENT)]
    if split:
        names = [str(n) for n in ds["model"].values] if "model" in ds.coords else None
        each = ds["chance_by_model"]
        dim = next(d for d in each.dims if d != "time")
        names = names or [str(n) for n in each[dim].values]
        for k, name in enumerate(names):
            values = 100.0 * each.isel({dim: k}).values
            dashes = _DASHES[k % len(_DASHES)]
            top.plot(time, values, color=INK, linewidth=1.0, dashes=dashes or (None, None))
            ends.append((name.replace("_", " "), values[-1], INK))
    _labels(top, float(time[-1]), ends)
    median = float(ds["crossing_time"].sel(quantile=0.5))
    if np.isfinite(median):
        top.plot([median, median], [0.0, 50.0], color=INK, linewidth=0.6)
        top.annotate(
            f"half have crossed\nby {median:.1f} min",
            (median, 50.0),
            xytext=(-8, 4),
            textcoords="offset points",
            fontsize=8,
            color=INK,
            ha="right",
            va="bottom",
        )
    top.set_ylim(0.0, 105.0)
    top.set_xlim(float(time[0]), float(time[-1]))
    top.set_ylabel("limit crossed, % of draws", fontsize=9)
    top.set_title(_title(ds), fontsize=9, loc="left", color=INK)
    last = top
    if split:
        last = rows[1]
        _shares(last, time, ds)
    last.set_xlabel("elapsed time, min", fontsize=9)
    caution_line(figure)
    return figure


def _title(ds: xr.Dataset) -> str:
    draws = f"{ds.attrs['draws']} draws"
    judged = float(ds["judged_share"].mean())
    if judged < 1.0:
        draws += f", {100.0 * judged:.3g} % of them judged"
    what = str(ds.attrs.get("limit_title", "")) or str(ds.attrs.get("question", "Chance of crossing"))
    limit = str(ds.attrs.get("limit_published", "")).removesuffix(" 1")
    who = ", ".join(str(ds.attrs[k]) for k in ("limit_authority", "limit_edition") if ds.attrs.get(k))
    second = "; ".join(
        x for x in (f"{limit} ({who})" if limit and who else f"limit {limit}" if limit else "", draws) if x
    )
    return f"{what}\n{second}"


def _labels(axes: Any, end: float, labels: list[tuple[str, float, str]]) -> None:
    """Write words at the ends of lines, apart from one another."""
    placed: list[float] = []
    for text, value, color in sorted(labels, key=lambda x: x[1]):
        at = max(value, placed[-1] + 7.0) if placed else value
        placed.append(at)
        axes.annotate(
            text,
            (end, value),
            xytext=(end + 0.02 * abs(end), at),
            textcoords="data",
            fontsize=8,
            color=color,
            va="center",
            annotation_clip=False,
            arrowprops={"arrowstyle": "-", "color": INK, "linewidth": 0.4} if at != value else None,
        )


def _shares(axes: Any, time: Array, ds: xr.Dataset) -> None:
    tidy(axes)
    ground = np.zeros(len(time))
    known = ~np.isnan(ds["model_share"].values)
    for name, words, hatch, fill in _SHARES:
        share = np.where(known, 100.0 * ds[name].values, 0.0)
        axes.fill_between(
            time,
            ground,
            ground + share,
            where=known,
            facecolor=fill,
            hatch=hatch,
            edgecolor=INK,
            linewidth=0.5,
        )
        wide = np.flatnonzero(share >= 0.8 * share.max())
        widest = int(wide[len(wide) // 2])
        if share[widest] > 12.0:
            box = {"boxstyle": "square,pad=0.15", "facecolor": "white", "edgecolor": "none"}
            middle = ground[widest] + 0.5 * share[widest]
            # Words stay inside the part of the time that has shares.
            begin, end, room = time[known][0], time[known][-1], 0.12 * np.ptp(time)
            inside = end - begin > 2.0 * room
            place = np.clip(time[widest], begin + room, end - room) if inside else 0.5 * (begin + end)
            axes.text(place, middle, words, fontsize=8, color=INK, ha="center", va="center", bbox=box)
        ground = ground + share
    if not known.any():
        axes.text(0.5, 0.5, "nothing varies", transform=axes.transAxes, fontsize=8, ha="center")
    axes.set_ylim(0.0, 100.0)
    axes.set_ylabel("share of the\nvariance, %", fontsize=9)
