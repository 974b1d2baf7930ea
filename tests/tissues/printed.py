"""Printed no-stop times and schedules beside what the sets compute: read by the tests and by the docs.

A row is judged only where the literature says that the bare model is behind it; the others are shown with the
reason. Nothing was tuned on any of them.
"""

from __future__ import annotations

import csv
import re
import warnings
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

import gasphys as gp
from gasphys import Exposure, ascent, tissues
from gasphys.errors import ValidityError, ValidityWarning

FOLDER = Path(__file__).parent / "published"


def read(name: str) -> list[dict[str, str]]:
    """Return the rows of one file."""
    with (FOLDER / f"{name}.csv").open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


@dataclass(frozen=True)
class Line:
    """One printed time beside ours; ``tolerance`` None means shown, not judged."""

    table: str
    depth: str
    printed: str
    computed: float | None
    how: str
    tolerance: float | None
    reason: str = ""
    provenance: str = ""

    @property
    def known(self) -> str:
        """How the printed number is known, in the words of the library."""
        marks = re.findall(r"\[([a-z-]+)\]", self.provenance)
        return ", ".join(dict.fromkeys(mark.replace("-", "_") for mark in marks))

    @property
    def agrees(self) -> bool:
        """Whether the computed time is within the tolerance of the printed one."""
        if self.tolerance is None or self.computed is None:
            return True
        if self.printed == "unlimited":
            return bool(np.isinf(self.computed))
        return abs(self.computed - float(self.printed)) <= self.tolerance

    @property
    def ours(self) -> str:
        """The computed time, to the digit the literature's own computations have."""
        if self.computed is None:
            return "-"
        return "unlimited" if np.isinf(self.computed) else f"{self.computed:.1f}"

    @property
    def verdict(self) -> str:
        """What is asked of the row, or why nothing is."""
        if self.tolerance is None:
            return self.reason
        return f"within {self.tolerance:g} min" if self.tolerance else "to the minute"

    def __str__(self) -> str:
        cells = f"{self.table:<34} {self.depth:>28} {self.printed:>9} {self.ours:>9}"
        return f"{cells}  {self.how:<40} {self.verdict}"


def _quiet(*args: Any, **kwargs: Any) -> Any:
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", ValidityWarning)
        return tissues.no_stop_time(*args, **kwargs)


US_NAVY_1957 = {"model": "us_navy_1957", "depth_unit": "fsw", "descent_rate": 75.0, "ascent_rate": 60.0}
VVAL18 = {"model": "thalmann_vval18", "depth_unit": "fsw", "descent_rate": 75.0, "ascent_rate": 30.0}
ROGERS_POWELL = {"model": "rogers_powell_1994", "depth_unit": "fsw", "descent_rate": 60.0}
KIDD_STUBBS = {
    "model": "kidd_stubbs_1983",
    "surface_pressure": 100.6,
    "descent_rate": 18.0,
    "ascent_rate": 18.0,
}


def us_navy_1957() -> list[Line]:
    """Within 3 min; the two others with the literature's reason."""
    why = {
        "30": "the table prints a limit where the six tissues give none (shallower than 31.56 fsw)",
        "60": "the model gives 65.6 min; the table was set shorter here",
        "160": "deeper than 120 fsw the table was set shorter than the model",
    }
    lines = []
    for row in read("no_stop_usn1957_air"):
        depth = row["depth_fsw"]
        tolerance = None if depth in why else 3.0
        ours = _quiet(float(depth), "air", **US_NAVY_1957)
        lines.append(
            Line(
                "US Navy 1957",
                f"{depth} fsw",
                row["minutes"],
                ours,
                "limit on arrival",
                tolerance,
                why.get(depth, ""),
                row["provenance"],
            )
        )
    return lines


def us_navy_later() -> list[Line]:
    """The rows that the 40-, 80- and 120-min tissues set come out within 1.1 min; deeper ones are flagged."""
    lines = []
    for row in read("no_stop_usn_rev6_rev7_air"):
        depth = row["depth_fsw"]
        ours = _quiet(float(depth), "air", **VVAL18)
        for edition in ("rev7", "rev6"):
            reason = ""
            if float(depth) >= 100.0:
                reason = "the limits of the 5- and 10-min tissues are not those of this table"
            elif row[f"{edition}_min"] != row["rev7_min"]:
                reason = "the two revisions differ here"
            tolerance = None if reason else 1.1
            lines.append(
                Line(
                    f"US Navy {edition}",
                    f"{depth} fsw",
                    row[f"{edition}_min"],
                    ours,
                    "smaller of both tests",
                    tolerance,
                    reason,
                    row["provenance"],
                )
            )
    return lines


def rogers_powell() -> list[Line]:
    """Both readings of every row, none tuned."""
    lines = []
    for row in read("no_stop_rogers_powell1994_air_ft"):
        for rate in (None, 60.0):
            ours = _quiet(float(row["depth_ft"]), "air", **ROGERS_POWELL, ascent_rate=rate)
            how = "limit before the ascent" if rate is None else "limit after an ascent at 60 ft/min"
            lines.append(
                Line(
                    "Rogers-Powell 1994",
                    f"{row['depth_ft']} ft",
                    row["minutes"],
                    ours,
                    how,
                    None,
                    "both readings are shown, none is tuned",
                    row["provenance"],
                )
            )
    return lines


def dciem() -> list[Line]:
    """The serial model agrees with the deep rows to a minute and not with the shallow ones."""
    lines = []
    for row in read("no_stop_dciem1992_air"):
        depth = float(row["depth_msw"])
        ours = _quiet(depth, "air", **KIDD_STUBBS)
        agrees = 36.0 <= depth <= 60.0 or row["minutes"] == "unlimited"
        reason = (
            ""
            if agrees
            else "constants provisional; the printed limits are set otherwise"
            if depth < 36
            else "printed limits stay at 5 min"
        )
        lines.append(
            Line(
                "DCIEM 1992",
                f"{row['depth_msw']} msw",
                row["minutes"],
                ours,
                "serial model, on arrival",
                1.0 if agrees else None,
                reason,
                row["provenance"],
            )
        )
    return lines


def buhlmann_1986() -> list[Line]:
    """Shown only: the table carries a surcharge and safety stops that the bare set has not."""
    reason = "the table carries a surcharge on depth and safety stops; not tested against"
    return [
        Line(
            f"Buehlmann 1986, {row['altitude_band_m']} m",
            f"{row['depth_m']} m",
            row["minutes"],
            _quiet(float(row["depth_m"]), "air", "buhlmann_1995_c", surface_pressure=100.0)
            if row["altitude_band_m"] == "0-700"
            else None,
            "bare set C",
            None,
            reason,
            row["provenance"],
        )
        for row in read("no_stop_buhlmann1986_air")
    ]


def others() -> list[Line]:
    """Tables without a model of their own here."""
    lines = [
        Line(
            "RNPL 1972",
            f"{r['depth_m']} m",
            r["minutes"],
            None,
            "-",
            None,
            "no model of this table is known here",
            r["provenance"],
        )
        for r in read("no_stop_rnpl1972_air")
    ]
    for r in read("no_stop_noaa_nitrox"):
        gas = gp.Gas(oxygen=float(r["O2_fraction"]))
        ours = _quiet(float(r["depth_fsw"]), gas, **US_NAVY_1957)
        reason = "the print reads the next deeper air row at the equivalent air depth"
        lines.append(
            Line(
                f"NOAA {r['mix']}",
                f"{r['depth_fsw']} fsw",
                r["minutes"],
                ours,
                "the 1957 model on the mix itself",
                None,
                reason,
                r["provenance"],
            )
        )
    return lines


#: The bare sets at 1.0 bar, 0.1 bar/m, air 0.79, vapor 0.0627 bar, instantaneous, without 1b [computed]:
#: depth to minutes by A, B and C, and the compartment in control of each.
BARE: dict[int, tuple[tuple[float, float, float], tuple[str, str, str]]] = {
    12: ((254.4, 233.2, 178.5), ("8", "8", "7")),
    15: ((115.5, 104.2, 89.3), ("6", "6", "6")),
    18: ((64.2, 64.2, 59.1), ("4", "4", "5")),
    21: ((40.4, 40.4, 40.4), ("4", "4", "4")),
    24: ((28.5, 28.5, 28.5), ("3", "3", "3")),
    27: ((21.3, 21.3, 21.3), ("2", "2", "2")),
    30: ((16.3, 16.3, 16.3), ("2", "2", "2")),
    33: ((13.5, 13.5, 13.5), ("2", "2", "2")),
    36: ((11.5, 11.5, 11.5), ("2", "2", "2")),
    39: ((9.6, 9.6, 9.6), ("1", "1", "1")),
    42: ((8.1, 8.1, 8.1), ("1", "1", "1")),
}


def buhlmann_bare() -> list[Line]:
    """The bare sets against the same arithmetic done elsewhere, to 0.1 min."""
    return [
        Line(
            f"Buehlmann set {'ABC'[k]}, bare",
            f"{depth} m",
            f"{minutes[k]:.1f}",
            tissues.no_stop_time(depth, "air", f"buhlmann_1995_{'abc'[k]}", surface_pressure=100.0),
            "computed elsewhere, not a published table",
            0.1,
            provenance="[computed]",
        )
        for k in range(3)
        for depth, (minutes, _) in BARE.items()
    ]


# -- Stops ------------------------------------------------------------------------------------------

STOPS = (40, 30, 20, 10)


def square(depth: float, bottom: float) -> Exposure:
    """Return a dive on air in fsw: descent at 75 fsw/min counts into the bottom time."""
    down = depth / 75.0
    return Exposure.start("air", depth_unit="fsw").travel(depth=depth, minutes=down).stay(bottom - down)


def stops_of(depth: float, bottom: float, model: Any, **rules: Any) -> dict[int, float]:
    """Return planned minutes by depth of the stop [fsw]."""
    found = ascent.plan(square(depth, bottom), model=model, rules=ascent.Rules(**rules)).stops
    return {int(d): float(m) for d, m in zip(found.depth.values, found.duration.values, strict=True)}


def schedules_1957() -> list[Line]:
    """One-stop rows within 1 min, each stop of the others within 2."""
    lines = []
    for row in read("schedules_usn1957_air"):
        depth, bottom = row["depth_fsw"], row["bottom_min"]
        ours = stops_of(float(depth), float(bottom), "us_navy_1957", ascent_rate=60.0)
        printed = {d: row[f"stop{d}_min"] for d in STOPS}
        shown = [d for d in STOPS if printed[d] != "0" or d in ours]
        for stop in shown:
            lines.append(
                Line(
                    "US Navy 1957, stops",
                    f"{depth} fsw {bottom} min, at {stop} fsw",
                    printed[stop],
                    ours.get(stop, 0.0),
                    "ascent 60 fsw/min, limit on arrival",
                    1.0 if shown == [10] else 2.0,
                    provenance=row["provenance"],
                )
            )
    return lines


def schedules_later() -> list[Line]:
    """Single stops at 20 fsw to the minute, except where the set refuses the short deep range."""
    lines = []
    for row in read("schedules_usn_rev7_air"):
        depth, bottom = row["depth_fsw"], row["bottom_min"]
        ours, reason = None, ""
        try:
            model = "thalmann_vval18m_reconstructed"
            found = stops_of(float(depth), float(bottom), model, ascent_rate=30.0, last_stop=20.0)
            ours = found.get(20, 0.0) if set(found) <= {20} else float("nan")
        except ValidityError:
            reason = "refused: the limits of the 5- and 10-min tissues are not known"
        lines.append(
            Line(
                "US Navy rev7, stops",
                f"{depth} fsw {bottom} min, at 20 fsw",
                row["stop20_air_min"],
                ours,
                "ascent 30 fsw/min, limit before leaving",
                None if reason else 0.0,
                reason,
                row["provenance"],
            )
        )
    return lines


#: Title, what to know of it, and the rows; in the order in which the docs show them.
TABLES: tuple[tuple[str, str, Callable[[], list[Line]]], ...] = (
    (
        "US Navy 1957, no stop",
        "Set `us_navy_1957`. Descent 75 and ascent 60 fsw/min, the limit tested on arrival.",
        us_navy_1957,
    ),
    (
        "US Navy revisions 6 and 7, no stop",
        "Set `thalmann_vval18`. Descent 75, ascent 30 fsw/min; the smaller time of both tests.",
        us_navy_later,
    ),
    (
        "Rogers and Powell 1994, no stop",
        "Set `rogers_powell_1994`. Descent 60 ft/min. Whether the ascent counts is not said: both readings.",
        rogers_powell,
    ),
    (
        "DCIEM 1992, no stop",
        "Set `kidd_stubbs_1983`, provisional. Surface 10.06 msw, 18 msw/min down and up.",
        dciem,
    ),
    (
        "Buehlmann, bare sets",
        "Sets `buhlmann_1995_a`, `_b`, `_c` against the same arithmetic done elsewhere, not against a print.",
        buhlmann_bare,
    ),
    (
        "Buehlmann 1986, no stop",
        "Shown, not tested: that table carries margins a bare set does not have.",
        buhlmann_1986,
    ),
    ("Other tables", "Shown without a model of their own here.", others),
    (
        "US Navy 1957, stops",
        "Set `us_navy_1957`. Whole minutes, stops every 10 fsw.",
        schedules_1957,
    ),
    (
        "US Navy revision 7, single stop on air",
        "Set `thalmann_vval18m_reconstructed`: a regression of a reconstruction. One constant of the set was "
        "chosen on these rows, so that they confirm the rest, not it.",
        schedules_later,
    ),
)
