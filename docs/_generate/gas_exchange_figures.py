"""Pictures of the pages of lungs and blood, drawn from the models that the pages speak of."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

import gasphys as gp
from _generate.markdown import svg
from gasphys.plots import arterial_band_figure, breath_hold_figure
from gasphys.plots.style import ACCENT, INK, PALE, caution_line, new_figure, tidy
from gasphys.policy import validity

PERSONS = Path(__file__).resolve().parents[2] / "notebooks" / "data"
DASHES: tuple[Any, ...] = ("-", (0, (5, 2)), (0, (1, 1.5)), (0, (6, 2, 1, 2)))


def pages() -> dict[str, str | bytes]:
    """Return the pictures."""
    drawn = {
        "arterial_band": arterial_band,
        "saturation_models": saturation_models,
        "carboxyhemoglobin": carboxyhemoglobin,
        "breath_hold": breath_hold,
    }
    with validity("ignore"):
        return {f"{name}.svg": svg(draw()) for name, draw in drawn.items()}


def arterial_band() -> Any:
    """P-04 on oxygen: a constant ratio and a constant shunt part."""
    person = gp.Person.from_toml(PERSONS / "p04.toml")
    pressure = xr.DataArray(np.linspace(101.325, 303.975, 60), dims="pressure", attrs={"units": "kPa"})
    session = gp.Exposure.start("oxygen", pressure=pressure).stay(1)
    return arterial_band_figure(gp.gas_exchange.oxygenation(session, person, model="both").isel(time=0))


def saturation_models() -> Any:
    """Each curve less that of Severinghaus 1979, at the standard state and in acid blood."""
    figure = new_figure(7.4, 4.6)
    panels = figure.subplots(1, 2, sharey=True)
    po2 = np.geomspace(10.0, 700.0, 300)
    kpa = gp.convert(po2, "mmHg", "kPa")
    curves = (
        ("kelman_1966", "Kelman 1966", ACCENT, DASHES[0], 10.5),
        ("dash_bassingthwaighte_2016", "Dash 2016", INK, DASHES[1], 1.0),
        ("siggaard_andersen_1984", "Siggaard-Andersen 1984", INK, DASHES[2], 1.0),
    )
    for axes, ph in zip(panels, (7.4, 7.2), strict=True):
        reference = gp.blood.o2_saturation(kpa, ph=ph)
        for model, words, hue, dash, least in curves:
            away = 100.0 * (gp.blood.o2_saturation(kpa, model, ph=ph) - reference)
            # Kelman's polynomial fails below a PO2 of 10 mmHg of the standard state.
            virtual = po2 * 10.0 ** (0.4 * (ph - 7.4))
            axes.plot(po2, np.where(virtual > least, away, np.nan), color=hue, linestyle=dash, label=words)
        axes.axhline(0.0, color=INK, linewidth=0.6)
        axes.set_xscale("log")
        axes.set_xticks([10, 20, 40, 100, 200, 700], ["10", "20", "40", "100", "200", "700"])
        axes.minorticks_off()
        axes.set_xlabel("PO2, mmHg", fontsize=9)
        axes.text(0.97, 0.95, f"pH {ph:g}", transform=axes.transAxes, ha="right", va="top", fontsize=9)
        tidy(axes)
    panels[0].set_ylabel("saturation less that of\nSeveringhaus 1979, points", fontsize=9)
    panels[0].legend(fontsize=8, frameon=False, loc="center right")
    caution_line(figure)
    return figure


def carboxyhemoglobin() -> Any:
    """P-02 on oxygen at 2.8 atm: the equation, and the band that reaches what was seen."""
    figure = new_figure(7.4, 3.9)
    axes = figure.subplots()
    person = gp.Person.from_toml(PERSONS / "p02.toml")
    session = gp.Exposure.start("oxygen").travel(pressure="2.8 atm", minutes=10).stay(80)
    ds = gp.gas_exchange.carboxyhemoglobin(session, person, at=np.linspace(0.0, 90.0, 181))
    low, high = (100.0 * ds[f"cohb_fraction_{end}"].values for end in ("low", "high"))
    axes.fill_between(ds.time.values, low, high, color=PALE, linewidth=0.0)
    axes.plot(ds.time.values, high, color=ACCENT, linewidth=1.0, linestyle=DASHES[1])
    axes.plot(ds.time.values, low, color=ACCENT, linewidth=1.0, linestyle=DASHES[1])
    axes.plot(ds.time.values, 100.0 * ds.cohb_fraction.values, color=ACCENT, linewidth=2.0)
    for words, y, x in (
        ("the equation", 100.0 * ds.cohb_fraction.values, 24.0),
        ("2.1 times its half-life", high, 42.0),
    ):
        axes.annotate(words, (x, float(np.interp(x, ds.time.values, y))), xytext=(6, 6),
                      textcoords="offset points", fontsize=8, color=INK)  # fmt: skip
    axes.annotate("0.7", (12.0, float(np.interp(12.0, ds.time.values, low))), xytext=(-6, -10),
                  textcoords="offset points", fontsize=8, color=INK, ha="right")  # fmt: skip
    axes.set_xlabel("time, min", fontsize=9)
    axes.set_ylabel("carboxyhemoglobin, %", fontsize=9)
    axes.set_ylim(bottom=0.0)
    axes.set_xlim(0.0, 90.0)
    tidy(axes)
    caution_line(figure)
    return figure


def breath_hold() -> Any:
    """One breath to 24 m: alveolar pressures, and what passes to the blood."""
    dive = gp.Exposure.start("air").travel(depth=24, minutes=0.5).stay(0.4).travel(depth=0, minutes=0.5)
    return breath_hold_figure(gp.gas_exchange.breath_hold(dive, at=np.linspace(0.0, 1.4, 281)))
