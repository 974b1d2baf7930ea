"""Pictures of the dose pages, drawn from the equations and tables that the pages speak of."""

from __future__ import annotations

import datetime
from typing import Any

import numpy as np

import gasphys as gp
from _generate.markdown import svg
from gasphys.constants import ATMOSPHERE
from gasphys.doses import Course, Session, published, sessions_left
from gasphys.plots import course_figure
from gasphys.plots.style import ACCENT, INK, PALE, caution_line, new_figure, tidy
from gasphys.policy import validity

DASHES: tuple[Any, ...] = ("-", (0, (5, 2)), (0, (1, 1.5)), (0, (6, 2, 1, 2)))


def pages() -> dict[str, str | bytes]:
    """Return the pictures."""
    drawn = {
        "pulmonary": _pulmonary,
        "oxygen_times": _oxygen_times,
        "any_sign": _any_sign,
        "narcosis": _narcosis,
        "inspired_co2": _inspired_co2,
        "course": _course,
    }
    with validity("ignore"):
        return {f"{name}.svg": svg(draw()) for name, draw in drawn.items()}


def _axes(x: str, y: str, height: float = 3.9) -> tuple[Any, Any]:
    figure = new_figure(7.4, height)
    axes = figure.subplots()
    axes.set_xlabel(x, fontsize=9)
    axes.set_ylabel(y, fontsize=9)
    tidy(axes)
    caution_line(figure)
    return figure, axes


def _named(axes: Any, x: Any, y: Any, words: str, hue: str, dash: Any, at: int = -1) -> None:
    axes.plot(x, y, color=hue, linewidth=1.8, linestyle=dash)
    axes.annotate(
        words, (x[at], y[at]), xytext=(5, 0), textcoords="offset points", fontsize=8, color=hue, va="center"
    )


def _pulmonary() -> Any:
    """Loss of vital capacity after two hours at a constant PO2, two forms."""
    figure, axes = _axes("PO2 of the breathing gas, atm", "loss of vital capacity after 2 h, %")
    po2 = np.linspace(1.0, 2.8, 91)
    kpa = po2 * float(ATMOSPHERE)
    power = 100.0 * gp.doses.vital_capacity_loss(kpa, 120.0)
    linear = 100.0 * gp.doses.harabin_vital_capacity_loss(kpa, 120.0)
    _named(axes, po2, power, "power equation, 2002", ACCENT, DASHES[0])
    _named(axes, po2, linear, "linear form, 1987", INK, DASHES[1])
    axes.set_xlim(1.0, 3.35)
    axes.set_xticks([1.0, 1.5, 2.0, 2.5, 2.8])
    axes.set_ylim(0.0, None)
    return figure


def _oxygen_times() -> Any:
    """Permitted minutes against PO2, every table."""
    figure, axes = _axes("PO2 of the breathing gas, atm", "permitted time, min")
    noaa = published("noaa_oxygen_limits")
    x = [float(r["po2_atm"]) for r in noaa]
    for column, words, hue, dash, width in (
        ("single_min", "NOAA, one exposure", ACCENT, DASHES[0], 2.4),
        ("day_min", "NOAA, 24 hours", ACCENT, DASHES[1], 1.4),
    ):
        axes.plot(
            x,
            [float(r[column]) for r in noaa],
            color=hue,
            linestyle=dash,
            linewidth=width,
            marker="o",
            markersize=3,
            label=words,
        )
    old = published("usn_1973_oxygen_limits")
    exceptional = published("noaa_exceptional_limits")
    closed = [r for r in published("usn_closed_circuit_oxygen") if r["rule"] == "single_depth"]
    for rows, column, words, dash, mark in (
        (exceptional, "quoted_min", "NOAA, exceptional, withdrawn", DASHES[2], "s"),
        (old, "minutes", "US Navy 1973, superseded", DASHES[3], "^"),
    ):
        axes.plot(
            [float(r["po2_atm"]) for r in rows],
            [float(r[column]) for r in rows],
            color=INK,
            linestyle=dash,
            linewidth=1.0,
            marker=mark,
            markersize=3,
            label=words,
        )
    depth = np.array([float(r["depth_fsw"]) for r in closed])
    axes.plot(
        1.0 + depth / 33.0,
        [float(r["minutes"]) for r in closed],
        color=INK,
        linestyle="none",
        marker="D",
        markersize=5,
        markerfacecolor="white",
        label="US Navy, closed-circuit O2",
    )
    axes.set_yscale("log")
    axes.set_yticks([10, 30, 100, 300, 720], ["10", "30", "100", "300", "720"])
    axes.minorticks_off()
    axes.legend(fontsize=8, frameon=False)
    return figure


def _any_sign() -> Any:
    """Risk of any sign against time at 2.4 atm, beside the seizure rates of clinics."""
    figure, axes = _axes("minutes at a PO2 of 2.4 atm, no air breaks", "share of exposures, %", 4.3)
    minutes = np.linspace(10.0, 120.0, 111)
    kpa = 2.4 * float(ATMOSPHERE)
    for population, words, hue, dash in (
        ("dry_rest", "any sign, dry rest", ACCENT, DASHES[0]),
        ("immersed_rest", "any sign, immersed rest", INK, DASHES[1]),
        ("active", "any sign, immersed at work", INK, DASHES[3]),
    ):
        risk = 100.0 * gp.doses.cns_symptom_risk(kpa, minutes, population=population)
        _named(axes, minutes, risk, words, hue, dash)
    low, high = (100.0 * float(v) for v in gp.doses.clinic_seizure_rates(kpa))
    axes.fill_between([10.0, 120.0], low, high, facecolor=PALE, edgecolor=INK, linewidth=0.6, hatch="//")
    axes.text(
        122.0, (low * high) ** 0.5, "seizures of\nclinics' treatments\nnear 2.4 atm", fontsize=8, va="center"
    )
    axes.set_yscale("log")
    axes.set_ylim(1e-3, 100.0)
    axes.set_yticks([0.001, 0.01, 0.1, 1.0, 10.0, 100.0], ["0.001", "0.01", "0.1", "1", "10", "100"])
    axes.set_xlim(10.0, 165.0)
    axes.set_xticks(range(20, 121, 20))
    return figure


def _narcosis() -> Any:
    """Equivalent narcotic depth of one gas by four conventions, over the bands seen on air."""
    figure, axes = _axes("depth on trimix 17/48, msw", "depth on air of the same narcosis, msw", 4.3)
    depth = np.linspace(0.0, 100.0, 101)
    for k, row in enumerate(r for r in published("narcosis_impairment") if r["source"] == "clark_2015"):
        low, high = float(row["depth_low_msw"]), row["depth_high_msw"]
        top = 110.0 if high is None else float(high)
        if low >= 70.0:
            continue
        axes.axhspan(low, min(top, 70.0), facecolor=PALE if k % 2 else "white", linewidth=0.0)
        # Where no curve runs: at the right below, at the left above.
        x, side = (121.0, "right") if low < 30.0 else (1.0, "left")
        axes.text(x, low + 1.2, str(row["effect"]).split(",")[0], fontsize=7, color=INK, ha=side)
    gas = "trimix 17/48"
    for y, words, hue, dash in (
        (gp.doses.equivalent_narcotic_depth(depth, gas), "nitrogen only", ACCENT, DASHES[0]),
        (gp.doses.equivalent_narcotic_depth(depth, gas, o2_counted=True), "O2 counted", INK, DASHES[1]),
        (gp.doses.weighted_narcotic_depth(depth, gas), "O2 as 1.7 N2", INK, DASHES[2]),
    ):
        _named(axes, depth, y, words, hue, dash)
    axes.plot(depth, depth, color=INK, linewidth=0.8)
    axes.text(64.0, 66.5, "air", fontsize=8)
    axes.set_xlim(0.0, 122.0)
    axes.set_ylim(0.0, 70.0)
    axes.set_xticks(range(0, 101, 20))
    return figure


def _inspired_co2() -> Any:
    """Every level of inspired carbon dioxide in order."""
    rows = sorted(published("co2_levels"), key=lambda r: float(r["low_percent"]))
    figure, axes = _axes("inspired CO2, surface equivalent, %", "", 4.6)
    for k, row in enumerate(rows):
        low, high = float(row["low_percent"]), row["high_percent"]
        sign = row["level"] == "signs"
        hue = ACCENT if sign else INK
        if high is not None:
            axes.plot([low, float(high)], [k, k], color=hue, linewidth=4.0, solid_capstyle="butt")
        axes.plot([low], [k], marker="|" if sign else "o", color=hue, markersize=10 if sign else 5)
        words = row["context"] if sign else f"{row['level']}: {row['context']}"
        words = f"signs: {words}" if sign else words
        left = low > 3.0
        edge = low if left or high is None else float(high)
        axes.annotate(
            str(words),
            (edge, k),
            xytext=(-8 if left else 8, 0),
            textcoords="offset points",
            fontsize=7,
            color=hue,
            va="center",
            ha="right" if left else "left",
        )
    axes.set_xscale("log")
    axes.set_xlim(0.3, 22.0)
    axes.set_xticks([0.5, 1, 2, 4, 10, 20], ["0.5", "1", "2", "4", "10", "20"])
    axes.minorticks_off()
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    return figure


def _course() -> Any:
    """The ladders of the course of the demo scenario after three sessions."""
    session = gp.schedules.treatment("usn_9")
    start = datetime.datetime(2042, 3, 3, 8)
    days = [7 * (n // 5) + n % 5 for n in range(3)]
    course = Course(tuple(Session(start + datetime.timedelta(d), session, "usn_9") for d in days), "P-01")
    return course_figure(sessions_left(course, count="oxygen"))
