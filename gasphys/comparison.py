"""Was what was done what was prescribed: a recorded exposure against a prescribed one."""

from __future__ import annotations

import itertools
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.doses.model import piece_doses
from gasphys.errors import ExposureError
from gasphys.exposure import Exposure
from gasphys.quantities import CAUTION, dataset_attributes

__all__ = ["compare"]

Array = NDArray[np.float64]

#: What is compared for each segment: unit, meaning, and the deviation worth a line.
_MEASURES: dict[str, tuple[str, str, float]] = {
    "minutes": ("min", "duration", 1.0),
    "mean_pressure": ("kPa", "mean ambient pressure, absolute", 2.0),
    "highest_pressure": ("kPa", "highest ambient pressure, absolute", 3.0),
    "rate": ("kPa/min", "rate of change of pressure, positive upward in pressure", 5.0),
    "o2_minutes": ("min", "time on gas with at least the prescribed O2, where oxygen is prescribed", 1.0),
    "mean_po2": ("kPa", "mean PO2 of the breathing gas, dry", 5.0),
    "uptd": ("1", "unit pulmonary toxic dose", 5.0),
}

#: Cost of a minute that does not fit, in the division of the record: another gas; a pressure far off
#: (half of it at the distance below); standing still in a travel; moving in a stay.
_GAS_COST = 3.0
_FAR_COST, _FAR_KPA = 3.0, 30.0
_STILL_COST, _MOVING_COST = 2.5, 2.5
_KPA_PER_MIN = 5.0

#: Minutes below which a travel is short, and how well its ends are placed [min].
_SHORT, _BLUR = 2.5, 0.35


def compare(recorded: Exposure, prescribed: Exposure) -> xr.Dataset:
    """Compare a recorded exposure with a prescribed one, segment by segment.

    Parameters
    ----------
    recorded : Exposure
        What was done, for example :meth:`Exposure.from_csv`.
    prescribed : Exposure
        What was ordered, for example :func:`gasphys.schedules.treatment`.

    Returns
    -------
    Dataset
        On ``segment`` (of the prescription) and ``measure``: ``prescribed``, ``delivered``,
        ``difference``; ``start``, ``end`` of what was delivered [min]; ``part``; totals with the suffix
        ``_total``; attribute ``deviations``, a line each.

    Raises
    ------
    ExposureError
        If either holds several scenarios or no piece.

    Notes
    -----
    The record is divided among the prescribed segments, in order, so that gas, pressure and travel fit
    best in all (dynamic programming over the record's own instants); a segment may be missing, nothing
    is left out. The division is an estimate: where a record follows no prescription it tells little.

    Examples
    --------
    >>> from gasphys.schedules import treatment
    >>> table = treatment("usn_5")
    >>> found = compare(table.delay(4, at=50), table)
    >>> float(found.difference.sel(measure="minutes").sum().round(6))
    4.0
    """
    for exposure in (recorded, prescribed):
        if exposure.dims:
            raise ExposureError("compare needs one scenario each; pick one first")
        if not exposure.part:
            raise ExposureError("the exposure has no piece yet")
    parts = _merge_parts(prescribed)
    bounds = _divide(recorded, parts)
    cut = recorded._split(np.unique(bounds[1:-1]))
    want = [_measure_window(prescribed, a, b, p) for p, (a, b) in zip(parts, _windows(parts), strict=True)]
    got = [_measure_window(cut, a, b, p) for p, (a, b) in zip(parts, itertools.pairwise(bounds), strict=True)]
    return _dataset(recorded, prescribed, parts, bounds, np.array(want), np.array(got))


class _Part:
    """A prescribed segment as the division sees it."""

    def __init__(self, exposure: Exposure, index: int, start: float) -> None:
        c = exposure.columns
        self.name = exposure.part[index] or exposure.gas_name(index)
        self.gas = exposure.gas_name(index)
        self.low = float(min(c["start_pressure"][index], c["end_pressure"][index]))
        self.high = float(max(c["start_pressure"][index], c["end_pressure"][index]))
        self.minutes = float(c["segment_duration"][index])
        change = float(c["end_pressure"][index] - c["start_pressure"][index])
        self.slope = float(np.sign(change))
        self.rate = abs(change) / self.minutes if self.minutes > 0.0 else 0.0
        self.o2 = float(exposure.fractions["O2"][index])
        self.start = start

    def key(self) -> tuple[Any, ...]:
        return (self.gas, self.slope, self.low if self.slope == 0.0 else None)


def _merge_parts(prescribed: Exposure) -> list[_Part]:
    """Neighboring pieces that cannot be told apart in a record are one segment."""
    parts: list[_Part] = []
    times = prescribed.pieces().times
    for index in range(len(prescribed.part)):
        if prescribed.columns["segment_duration"][index] == 0.0:
            continue
        one = _Part(prescribed, index, float(times[index]))
        if parts and parts[-1].key() == one.key():
            last = parts[-1]
            last.minutes += one.minutes
            last.low, last.high = min(last.low, one.low), max(last.high, one.high)
        else:
            parts.append(one)
    return parts


def _windows(parts: list[_Part]) -> list[tuple[float, float]]:
    return [(p.start, p.start + p.minutes) for p in parts]


def _divide(recorded: Exposure, parts: list[_Part]) -> Array:
    """Return the times that divide the record among the parts, first 0 and last its end."""
    total = float(recorded.duration)
    grid = np.linspace(0.0, total, int(np.clip(total * 6.0, 200, 6000)) + 1)
    times, _index, _share = recorded.sample(grid)
    middle = 0.5 * (times[:-1] + times[1:])
    step = np.diff(times)
    pieces = recorded.pieces()
    at = np.clip(np.searchsorted(pieces.times, middle, side="right") - 1, 0, len(recorded.part) - 1)
    length = np.where(pieces.duration[at] > 0.0, pieces.duration[at], 1.0)
    place = (middle - pieces.times[at]) / length
    start, end = pieces.start_pressure[at], pieces.end_pressure[at]
    pressure = start + (end - start) * place
    # A slope over two minutes, so that a recorder's noise is not taken for travel.
    ahead = np.interp(np.minimum(middle + 1.0, total), times, _pressures(recorded, times))
    behind = np.interp(np.maximum(middle - 1.0, 0.0), times, _pressures(recorded, times))
    window = np.minimum(middle + 1.0, total) - np.maximum(middle - 1.0, 0.0)
    slope = (ahead - behind) / np.where(window > 0.0, window, 1.0)
    names = [recorded.gas_name(i) for i in range(len(recorded.part))]
    cost = np.empty((len(parts), len(middle)))
    for k, part in enumerate(parts):
        off = np.maximum(part.low - pressure, 0.0) + np.maximum(pressure - part.high, 0.0)
        wrong = np.array([names[i] != part.gas for i in at])
        # Half the prescribed rate divides staying from travelling, so a smoothed corner stays where it is.
        if part.slope == 0.0:
            near = parts[max(0, k - 1) : k + 2]
            up = next((p.rate for p in near if p.slope > 0.0), _KPA_PER_MIN)
            down = next((p.rate for p in near if p.slope < 0.0), _KPA_PER_MIN)
            moves = np.minimum(np.maximum(slope / up, -slope / down), 1.0)
        else:
            moves = 1.0 - np.clip(part.slope * slope / part.rate, 0.0, 1.0)
        weight = _STILL_COST if part.slope else _MOVING_COST
        far = _FAR_COST * off / (off + _FAR_KPA)
        cost[k] = (far + _GAS_COST * wrong + weight * moves) * step
    return _cheapest(cost, times)


def _pressures(recorded: Exposure, times: Array) -> Array:
    ds_times, index, share = recorded.sample(times)
    pieces = recorded.pieces()
    values = pieces.start_pressure[index] * (1.0 - share) + pieces.end_pressure[index] * share
    return np.asarray(np.interp(times, ds_times, values))


def _cheapest(cost: Array, times: Array) -> Array:
    """Divide instants among parts in order at least cost; a part may get none."""
    parts, instants = cost.shape
    running = np.concatenate([np.zeros((parts, 1)), np.cumsum(cost, axis=1)], axis=1)
    # best[j]: least cost of giving the first j instants to the parts so far; cut[k, j]: where part k begins.
    best = running[0].copy()
    cuts = np.zeros((parts, instants + 1), dtype=int)
    for k in range(1, parts):
        gap = best - running[k]
        index = np.arange(instants + 1)
        lowest = np.minimum.accumulate(gap)
        new = np.concatenate([[True], gap[1:] < lowest[:-1]])
        cuts[k] = np.maximum.accumulate(np.where(new, index, 0))
        best = lowest + running[k]
    bounds = np.empty(parts + 1, dtype=int)
    bounds[parts], bounds[0] = instants, 0
    for k in range(parts - 1, 0, -1):
        bounds[k] = cuts[k, bounds[k + 1]]
    return times[bounds]


def _measure_window(exposure: Exposure, start: float, end: float, part: _Part) -> list[float]:
    """Measures of one exposure between two of its boundaries."""
    pieces = exposure.pieces()
    middle = 0.5 * (pieces.times[:-1] + pieces.times[1:])
    inside = (middle > start) & (middle < end) & (pieces.duration > 0.0)
    minutes = float(pieces.duration[inside].sum())
    if minutes <= 0.0:
        return [0.0, np.nan, np.nan, np.nan, 0.0, np.nan, 0.0]
    weight = pieces.duration[inside] / minutes
    mean = float((weight * 0.5 * (pieces.start_pressure + pieces.end_pressure)[inside]).sum())
    highest = float(np.maximum(pieces.start_pressure, pieces.end_pressure)[inside].max())
    first, last = np.flatnonzero(inside)[[0, -1]]
    rate = float(pieces.end_pressure[last] - pieces.start_pressure[first]) / minutes
    rich = exposure.fractions["O2"][inside] >= part.o2 - 1e-6
    o2_minutes = float(pieces.duration[inside][rich].sum()) if part.o2 > 0.5 else 0.0
    po2 = float((weight * 0.5 * (pieces.start_po2 + pieces.end_po2)[inside]).sum())
    uptd = float(piece_doses("uptd", pieces)[inside].sum())
    return [minutes, mean, highest, rate, o2_minutes, po2, uptd]


def _dataset(
    recorded: Exposure,
    prescribed: Exposure,
    parts: list[_Part],
    bounds: Array,
    want: Array,
    got: Array,
) -> xr.Dataset:

    names = list(_MEASURES)
    difference = got - want
    deviations = []
    for k, part in enumerate(parts):
        if got[k, 0] <= 0.0:
            deviations.append(f"segment {k} ({part.name}, {part.minutes:g} min): not found in the record")
            continue
        for j, name in enumerate(names):
            unit, meaning, worth = _MEASURES[name]
            # A short quick travel is placed no better than the division's step at either end.
            if part.slope and part.minutes < _SHORT and name.endswith("_pressure"):
                worth += part.rate * _BLUR
            if abs(difference[k, j]) >= worth:
                shown = "" if unit == "1" else f" {unit}"
                deviations.append(
                    f"segment {k} ({part.name}): {meaning} {got[k, j]:.1f}{shown} "
                    f"instead of {want[k, j]:.1f}{shown}"
                )
    totals = {
        "minutes": (float(prescribed.duration), float(recorded.duration)),
        "o2_minutes": (float(want[:, 4].sum()), float(got[:, 4].sum())),
        "uptd": (
            float(piece_doses("uptd", prescribed.pieces()).sum()),
            float(piece_doses("uptd", recorded.pieces()).sum()),
        ),
    }
    unit_attrs = {"long_name": "unit of each measure"}
    ds = xr.Dataset(
        {
            "prescribed": (("segment", "measure"), want, {"units": "1", "unit_variable": "unit"}),
            "delivered": (("segment", "measure"), got, {"units": "1", "unit_variable": "unit"}),
            "difference": (("segment", "measure"), difference, {"units": "1", "unit_variable": "unit"}),
            "unit": ("measure", [_MEASURES[n][0] for n in names], unit_attrs),
            "meaning": ("measure", [_MEASURES[n][1] for n in names], {"long_name": "what is compared"}),
            "part": ("segment", [p.name for p in parts], {"long_name": "prescribed part"}),
            "gas": ("segment", [p.gas for p in parts], {"long_name": "prescribed gas"}),
            "start": ("segment", bounds[:-1], {"units": "min", "long_name": "start of what was delivered"}),
            "end": ("segment", bounds[1:], {"units": "min", "long_name": "end of what was delivered"}),
        },
        coords={"segment": np.arange(len(parts)), "measure": names},
    )
    for name, (ordered, done) in totals.items():
        unit = _MEASURES[name][0]
        ds[f"{name}_total"] = (
            "run",
            [ordered, done],
            {"units": unit, "long_name": f"{_MEASURES[name][1]} in all"},
        )
    ds = ds.assign_coords(run=["prescribed", "delivered"])
    ds.attrs = dataset_attributes(
        f"recorded against prescribed: {prescribed.attrs.get('title', 'an exposure')}",
        "comparison",
        history=recorded.history,
        references=[str(prescribed.attrs.get("references", ""))],
        deviations="\n".join(deviations),
    )
    return ds


def comparison_text(found: xr.Dataset) -> str:
    """Return a comparison in words.

    Parameters
    ----------
    found : Dataset
        From :func:`compare`.

    Returns
    -------
    str
        Totals, a line a segment, deviations, the caution.

    Examples
    --------
    >>> from gasphys.schedules import treatment
    >>> table = treatment("usn_9")
    >>> print(comparison_text(compare(table, table)).splitlines()[1].strip())
    in all: 104.5 min (prescribed 104.5), oxygen 92.2 min (92.2), 274.0 UPTD (274.0)
    """

    def total(name: str) -> tuple[float, float]:
        values = found[f"{name}_total"].values
        return float(values[1]), float(values[0])

    minutes, o2, uptd = total("minutes"), total("o2_minutes"), total("uptd")
    lines = [
        str(found.attrs["title"]),
        f"  in all: {minutes[0]:.1f} min (prescribed {minutes[1]:.1f}), "
        f"oxygen {o2[0]:.1f} min ({o2[1]:.1f}), "
        f"{uptd[0]:.1f} UPTD ({uptd[1]:.1f})",
        "",
        f"  {'delivered (prescribed)':<26}{'from':>9}  {'minutes':>15} {'mean kPa abs':>15} "
        f"{'kPa/min':>12} {'mean PO2 kPa':>15} {'UPTD':>13}",
    ]
    for k in found["segment"].values:
        row = found.sel(segment=k)

        def both(name: str, digits: int, row: xr.Dataset = row) -> str:
            cell = row.sel(measure=name)
            done, ordered = float(cell["delivered"].values), float(cell["prescribed"].values)
            text = "-" if np.isnan(done) else f"{done:.{digits}f}"
            return f"{text} ({ordered:.{digits}f})"

        name = f"{k} {row['part'].values}"
        lines.append(
            f"  {name:<26}{float(row['start'].values):>9.1f}  "
            f"{both('minutes', 1):>15} {both('mean_pressure', 1):>15} "
            f"{both('rate', 1):>12} {both('mean_po2', 1):>15} {both('uptd', 1):>13}"
        )
    deviations = str(found.attrs["deviations"])
    lines += ["", "DEVIATIONS", ""]
    lines += [f"  {line}" for line in deviations.splitlines()] or ["  none of note"]
    if str(found.attrs["history"]) != "as given":
        lines += ["", "ABOUT THE RECORD", "", *(f"  {h}" for h in str(found.attrs["history"]).split("\n"))]
    import textwrap

    return "\n".join([*lines, "", *textwrap.wrap(CAUTION, 100)])
