"""Which unknown matters most."""

from __future__ import annotations

from typing import Any

import numpy as np
import xarray as xr

from gasphys.errors import GasphysError
from gasphys.plots.style import ACCENT, INK, PALE, caution_line, new_figure, tidy
from gasphys.quantities import QUANTITIES

__all__ = ["sensitivity_figure"]


def sensitivity_figure(ds: xr.Dataset) -> Any:
    """Draw the inputs of a result by weight, each with its intervals.

    Parameters
    ----------
    ds : Dataset
        Of :func:`gasphys.scenarios.sobol` or :func:`gasphys.scenarios.elementary_effects`, of one number.

    Returns
    -------
    matplotlib.figure.Figure
        A row an input, the weightiest above: filled the share of variance it has alone, open with all its
        interactions; of elementary effects their mean size.

    Raises
    ------
    GasphysError
        If there is more than one number for an input.

    Examples
    --------
    >>> import gasphys as gp
    >>> from gasphys.scenarios import Uniform, sobol
    >>> what = {"fraction": Uniform(0.2, 0.4), "total_pressure": Uniform(200.0, 300.0)}
    >>> len(sensitivity_figure(sobol(gp.laws.dalton_partial_pressure, what, 256, rng=1)).axes)
    1
    """
    by_variance = "total" in ds
    key = "total" if by_variance else "mean_absolute_effect"
    if key not in ds or ds[key].dims != ("parameter",):
        raise GasphysError("the picture needs the indices of one number; pick one first")
    order = np.argsort(ds[key].values)
    rows = ds.isel(parameter=order)
    figure = new_figure(7.4, 1.9 + 0.42 * len(order))
    axes = figure.subplots()
    tidy(axes)
    y = np.arange(len(order), dtype=float)
    scale = 100.0 if by_variance else 1.0

    def marks(name: str, shift: float, fill: str, words: str) -> None:
        value, low, high = (scale * rows[name + end].values for end in ("", "_low", "_high"))
        axes.barh(y + shift, value, 0.3, color=fill, edgecolor=INK, linewidth=0.6)
        axes.hlines(y + shift, low, high, color=INK, linewidth=1.4)
        axes.annotate(
            words,
            (max(high[-1], value[-1]), y[-1] + shift),
            xytext=(6, 0),
            textcoords="offset points",
            fontsize=8,
            color=INK,
            va="center",
        )

    if by_variance:
        marks("total", 0.17, "white", "with all its interactions")
        marks("first_order", -0.17, ACCENT, "alone")
        axes.set_xlabel("share of the variance, %; lines: intervals of the sampling", fontsize=9)
    else:
        marks("mean_absolute_effect", 0.0, PALE, "mean size")
        axes.set_xlabel("change of the result over the range of the input; lines: intervals", fontsize=9)
    axes.set_xlim(left=0.0)
    axes.margins(x=0.25)
    axes.set_yticks(y, [_words(str(n)) for n in rows["parameter"].values], fontsize=8)
    title = str(ds.attrs["title"])
    if by_variance:
        middle, spread = float(ds["result_mean"]), float(ds["result_standard_deviation"])
        title += f"\nmean {middle:.4g}, standard deviation {spread:.3g}; {ds.attrs['evaluations']} runs"
    axes.set_title(title, fontsize=9, loc="left", color=INK)
    caution_line(figure)
    return figure


def _words(name: str) -> str:
    one = QUANTITIES.get(name)
    return one.long_name if one is not None and len(one.long_name) < 34 else name.replace("_", " ")
