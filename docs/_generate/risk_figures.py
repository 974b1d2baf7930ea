"""The picture of the page of risk: a fit to simulated outcomes."""

from __future__ import annotations

import numpy as np

import gasphys as gp
from _generate.markdown import svg
from gasphys import risk
from gasphys.plots import risk_bins_figure


def pages() -> dict[str, str | bytes]:
    """Return the picture."""
    truth = risk.HazardModel([risk.Compartment(15.0, 4e-4), risk.Compartment(360.0, 1.5e-3)])
    dives = [
        gp.Exposure.start("air").travel(depth=depth, rate=18).stay(minutes).travel(depth=0, rate=9)
        for depth in (18, 24, 30, 36, 42)
        for minutes in (12, 25, 50, 90)
    ]
    seen = risk.simulate(dives, truth, np.random.default_rng(42), count=300)
    fitted = risk.fit(seen, truth, ["gain_1", "gain_2"])
    return {"risk_bins.svg": svg(risk_bins_figure(risk.goodness_of_fit(fitted, bins=6)))}
