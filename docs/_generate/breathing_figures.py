"""Pictures of the pages on breathing, drawn from the models that the pages speak of."""

from __future__ import annotations

from typing import Any

import numpy as np

import gasphys as gp
from _generate.markdown import svg
from gasphys.breathing import BreathKeyed, ConstantFlow, loop_oxygen
from gasphys.plots.style import ACCENT, INK, caution_line, new_figure, tidy
from gasphys.policy import validity
from gasphys.widgets import RoomForWork


def pages() -> dict[str, str | bytes]:
    """Return the pictures."""
    with validity("ignore"):
        return {"room_for_work.svg": svg(RoomForWork().figure()), "breathing_loops.svg": svg(loops())}


def loops() -> Any:
    """Two semi-closed sets on one dive: work changes, then an ascent to the surface."""
    dive = gp.Exposure.start("air", o2_uptake_stpd=1.0, ventilation_btps=25.0).travel(depth=30, minutes=2)
    dive = dive.stay(10).work(2.0, 50.0).stay(8).work(1.0, 25.0).stay(5).travel(depth=0, minutes=5).stay(6)
    at = np.linspace(0.0, dive.duration, 361)
    sets = (
        ("constant flow 10 L/min, nitrox 40", ConstantFlow(10.0, "nitrox 40"), ACCENT, "-", 2.6),
        ("a tenth of each breath, nitrox 40", BreathKeyed(0.1, "nitrox 40"), INK, (0, (6, 3)), 1.4),
    )
    figure = new_figure(7.4, 4.8)
    upper, lower = figure.subplots(2, 1, sharex=True)
    for words, loop, color, dash, width in sets:
        ds = loop_oxygen(dive, loop, initial="air", at=at)
        upper.plot(ds.time, ds.loop_o2_fraction, color=color, linestyle=dash, linewidth=width, label=words)
        lower.plot(ds.time, ds.loop_po2, color=color, linestyle=dash, linewidth=width)
    upper.legend(frameon=False, fontsize=8, loc="lower right")
    lower.axhline(0.16 * 101.325, color=INK, linewidth=0.7, linestyle=":")
    lower.annotate("0.16 atm", (0.2, 17.5), fontsize=7, color=INK)
    for place, words in (
        (6.0, "30 msw, O2 uptake 1"),
        (16.0, "2 L/min"),
        (22.5, "1"),
        (27.5, "ascent"),
        (33.0, "surface"),
    ):
        upper.text(
            place, 1.02, words, transform=upper.get_xaxis_transform(), ha="center", fontsize=8, color=INK
        )
    for boundary in (2.0, 12.0, 20.0, 25.0, 30.0):
        for axes in (upper, lower):
            axes.axvline(boundary, color=INK, linewidth=0.5, linestyle=":")
    upper.set_ylabel("loop O2 fraction", fontsize=9)
    lower.set_ylabel("loop PO2, kPa", fontsize=9)
    lower.set_xlabel("time, min", fontsize=9)
    lower.set_xlim(0.0, dive.duration)
    upper.set_ylim(bottom=0.0)
    lower.set_ylim(bottom=0.0)
    for axes in (upper, lower):
        tidy(axes)
    figure.align_ylabels()
    caution_line(figure)
    return figure
