"""Predicted against observed events, bin by bin."""

from __future__ import annotations

from typing import Any

import numpy as np
import xarray as xr

from gasphys.errors import GasphysError
from gasphys.plots.style import ACCENT, INK, PALE, caution_line, new_figure, tidy

__all__ = ["risk_bins_figure"]


def risk_bins_figure(ds: xr.Dataset) -> Any:
    """Draw the share of events a fitted model predicts, and the share that was seen, in bins of risk.

    Parameters
    ----------
    ds : Dataset
        Of :func:`gasphys.risk.goodness_of_fit`.

    Returns
    -------
    matplotlib.figure.Figure
        A bin each: a band of the counts that chance alone would give in 95 of 100 sets of outcomes, the
        prediction as a bar across it, the observation as a filled mark; exposures and events in words.

    Raises
    ------
    GasphysError
        If the dataset holds no bins.

    Notes
    -----
    The band is the binomial's with the predicted probability, on whole events: a bin of few exposures is
    wide. Mean predicted probability of each bin under it.

    Examples
    --------
    >>> import gasphys as gp
    >>> dives = [gp.Exposure.start("air").travel(depth=d, minutes=2).stay(60) for d in (18, 24, 30)]
    >>> dives = [x.travel(depth=0, minutes=3) for x in dives]
    >>> seen = [gp.risk.Outcome(x, "none", count=50 - k) for x, k in zip(dives, (1, 2, 4))]
    >>> seen += [gp.risk.Outcome(x, "event", count=k) for x, k in zip(dives, (1, 2, 4))]
    >>> fitted = gp.risk.fit(seen, gp.risk.HazardModel([gp.risk.Compartment(240.0, 1e-3)]))
    >>> len(risk_bins_figure(gp.risk.goodness_of_fit(fitted, bins=3)).axes)
    1
    """
    from scipy.stats import binom

    if "bin" not in ds.dims:
        raise GasphysError("the picture needs the bins of risk.goodness_of_fit")
    figure = new_figure(7.4, 4.2)
    axes = figure.subplots()
    tidy(axes)
    x = np.arange(ds.sizes["bin"])
    exposures, chance = ds["exposures"].values, ds["mean_probability"].values
    low, high = (binom.ppf(q, np.round(exposures), chance) / exposures for q in (0.025, 0.975))
    seen = ds["observed"].values / exposures
    axes.bar(x, 100 * (high - low), 0.5, 100 * low, color=PALE, edgecolor=INK, linewidth=0.5)
    for k in x:
        axes.plot([k - 0.25, k + 0.25], [100 * chance[k]] * 2, color=INK, linewidth=1.6)
    axes.plot(x, 100 * seen, "o", color=ACCENT, markersize=7)
    last = int(x[-1])
    words = sorted([(seen[last], "seen"), (chance[last], "predicted"), (high[last], "by chance,\n95 of 100")])
    least, height = -np.inf, -np.inf
    for y, word in words:  # moved up where they would cover each other
        height = max(y, height + least)
        least = (0.09 if "\n" in word else 0.06) * float(high.max())
        axes.annotate(
            word,
            (last + 0.26, 100 * y),
            xytext=(last + 0.42, 100 * height),
            fontsize=8,
            color=INK,
            va="center",
            arrowprops={"arrowstyle": "-", "color": INK, "linewidth": 0.5},
        )
    axes.set_xticks(
        x,
        [
            f"{100 * p:.2g} %\n{o:g} of {n:g}"
            for p, o, n in zip(chance, ds["observed"].values, exposures, strict=True)
        ],
        fontsize=8,
    )
    axes.set_xlim(-0.6, last + 1.2)
    axes.set_ylim(bottom=0.0)
    axes.set_xlabel("bins of predicted probability: its mean, and events seen of exposures", fontsize=9)
    axes.set_ylabel("events, % of exposures", fontsize=9)
    axes.set_title(
        f"chi-square {ds.attrs['chi_square']:.3g} with {ds.attrs['degrees_of_freedom']} degrees of freedom, "
        f"P = {ds.attrs['p_value']:.2g}",
        fontsize=9,
        loc="left",
        color=INK,
    )
    caution_line(figure)
    return figure
