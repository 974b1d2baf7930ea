"""Inside attendants of a treatment: who is inside when, what each breathes, holds and owes."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from typing import Any

import numpy as np
import xarray as xr

from gasphys.constants import FSW
from gasphys.errors import ExposureError, RangeError, ValidityError
from gasphys.exposure import Exposure
from gasphys.policy import validity, weakest
from gasphys.quantities import attributes, dataset_attributes, quantity
from gasphys.schedules import surface_intervals, treatment
from gasphys.tissues import tensions, time_to_fly

__all__ = ["attendance", "attendants", "shift"]

#: Models an attendant's inert gas is followed by, unless others are asked for.
MODELS = ("buhlmann_1995_c", "us_navy_1957", "thalmann_vval18")

#: Fastest lock-in of the US Navy Diving Manual, fsw/min [read 22-5]; used rates are the caller's.
LOCK_IN_LIMIT = 75.0 * float(FSW)

#: What may come next at the surface.
NEXT = ("treatment", "no-stop dive", "dive with stops", "flying", "near the chamber")

_NO_RULE = "no rule is stated for one who leaves before the end: chamber air, judge it by the models"


def attendance(
    name: str,
    codes: Sequence[str] = ("A-1",),
    changes: Sequence[float] = (),
    *,
    lock_in_rate: float = 20.0 * float(FSW),
    lock_out_rate: float = 30.0 * float(FSW),
    **schedule: Any,
) -> dict[str, Exposure]:
    """Return the exposure of each attendant of a treatment, who may change over during it.

    Parameters
    ----------
    name : str
        A treatment table, as for :func:`gasphys.schedules.treatment`.
    codes : sequence of str
        Codes of the attendants, in turn; with more changes than codes they begin again.
    changes : sequence of float
        Times at which the next one relieves the last [min since the start].
    lock_in_rate, lock_out_rate : float
        Rates in the entry lock [kPa/min].
    **schedule
        Further arguments of :func:`gasphys.schedules.treatment`, such as ``extensions_shallow=1``.

    Returns
    -------
    dict
        Code to exposure, all as long as the treatment (those who leave late: longer by their ascent).

    Raises
    ------
    ExposureError
        If a change is outside the treatment, or they are not in order.
    RangeError
        If a rate is not possible.

    Notes
    -----
    The one inside at the end breathes the oxygen the table asks of attendants. One who leaves earlier
    breathes chamber air throughout: what oxygen is owed then is not stated in the sources.

    Examples
    --------
    >>> found = attendance("usn_6", ("A-1", "A-2"), changes=[150], extensions_shallow=1)
    >>> {code: round(e.duration, 1) for code, e in found.items()}
    {'A-1': 363.0, 'A-2': 363.0}
    """
    if not 0.0 < lock_in_rate <= LOCK_IN_LIMIT * (1.0 + 1e-9):
        raise RangeError(
            f"lock_in_rate = {lock_in_rate:g} kPa/min: above 0 to {LOCK_IN_LIMIT:.0f} (75 fsw/min, US Navy)"
        )
    if not 0.0 < lock_out_rate <= 1e4:
        raise RangeError(f"lock_out_rate = {lock_out_rate:g} kPa/min must be positive")
    whole = treatment(name, attendant=True, **schedule)
    total, surface = float(whole.duration), float(whole.surface_pressure)
    bounds = [0.0, *(float(t) for t in changes), total]
    if not all(a < b for a, b in itertools.pairwise(bounds)):
        raise ExposureError(f"changes {list(changes)} must rise within 0 to {total:g} min")
    if not codes:
        raise ExposureError("there is no attendant: give a code")
    cut = whole._split(bounds[1:-1])
    found: dict[str, Exposure] = {}
    for turn, (start, end) in enumerate(itertools.pairwise(bounds)):
        code = codes[turn % len(codes)]
        now = found.get(code) or Exposure.start("air", surface_pressure=surface, depth_unit="fsw")
        if start > 0.0:
            there = _pressure(cut, start)
            travel = (there - surface) / lock_in_rate
            wait = start - travel - float(now.duration)
            if wait < -1e-9:
                raise ExposureError(f"{code} cannot be back inside at {start:g} min")
            now = now.switch("air").name("outside").stay(max(wait, 0.0))
            now = now.name("lock in").travel(pressure=there, minutes=travel)
        last = end == total
        now = _along(now, cut, start, end, as_written=last)
        if not last:
            leave = (float(now.pressure) - surface) / lock_out_rate
            now = now.switch("air").name("lock out").travel(pressure=surface, minutes=leave)
        found[code] = now
    for code, one in found.items():
        if one.duration < total - 1e-9:
            one = one.switch("air").name("outside").stay(total - float(one.duration))
        rule = (
            whole.attrs.get("attendant_rule", "")
            if _inside_at_end(code, codes, len(bounds) - 1)
            else _NO_RULE
        )
        attrs = {**whole.attrs, "title": f"{whole.attrs['title']}, {code}", "attendant_rule": rule}
        found[code] = _with(one, attrs)
    return found


def _inside_at_end(code: str, codes: Sequence[str], turns: int) -> bool:
    return code == codes[(turns - 1) % len(codes)]


def _with(one: Exposure, attrs: dict[str, Any]) -> Exposure:
    from dataclasses import replace

    return replace(one, attrs=attrs)


def _pressure(exposure: Exposure, when: float) -> float:
    ds = exposure.to_dataset(at=[when])
    return float(ds.ambient_pressure.sel(time=when, method="nearest"))


def _along(now: Exposure, cut: Exposure, start: float, end: float, *, as_written: bool) -> Exposure:
    """Follow the chamber between two of its boundaries, on what is written or on chamber air."""
    times = cut.pieces().times
    for k in range(len(cut.part)):
        if not (start - 1e-9 <= times[k] and times[k + 1] <= end + 1e-9):
            continue
        minutes = float(cut.columns["segment_duration"][k])
        here, there = (float(cut.columns[c][k]) for c in ("start_pressure", "end_pressure"))
        gas = cut.gas_name(k) if as_written else "air"
        part = cut.part[k] if as_written else "travel on air" if here != there else "air"
        now = now.switch(gas).name(part)
        now = now.stay(minutes) if here == there else now.travel(pressure=there, minutes=minutes)
    return now


def attendants(
    name: str,
    codes: Sequence[str] = ("A-1",),
    changes: Sequence[float] = (),
    models: Sequence[Any] = MODELS,
    *,
    fly_altitude: Any = 2400.0,
    **more: Any,
) -> xr.Dataset:
    """Return what each attendant of a treatment owes and holds, and when what may come next.

    Parameters
    ----------
    name, codes, changes
        As for :func:`attendance`.
    models : sequence
        Tissue models, as for :func:`gasphys.tissues.tensions`.
    fly_altitude : float or str
        Cabin or road altitude that the models are asked about [m].
    **more
        As for :func:`attendance`.

    Returns
    -------
    Dataset
        On ``attendant``: ``minutes_at_pressure``, ``highest_pressure``, ``oxygen_minutes``,
        ``oxygen_owed`` before the ascent, ``rule``. On ``attendant`` and ``model``: the highest
        ``limit_fraction`` and its ``controlling_half_time``, ``wait_before_altitude`` from the end of the
        treatment by that model, ``reason`` where it gives none. On ``next``: ``hours`` of the manual, with
        edition and provenance.

    Raises
    ------
    ExposureError
        As :func:`attendance`.

    Notes
    -----
    The manual's intervals and the models' waits answer different questions and are not averaged. Within a
    model's limit is not without danger: attendants of routine treatments have fallen ill.

    Examples
    --------
    >>> ds = attendants("usn_6", models=["buhlmann_1995_c"])
    >>> float(ds.oxygen_owed[0]), float(ds.hours.sel(next="flying"))
    (30.0, 24.0)
    """
    one_altitude = quantity("altitude")
    altitude = one_altitude.from_text(fly_altitude) if isinstance(fly_altitude, str) else float(fly_altitude)
    found = attendance(name, codes, changes, **more)
    labels = [str(m if isinstance(m, str) else getattr(m, "name", m)) for m in models]
    shape = (len(found), len(labels))
    fraction, half_time, wait = (np.full(shape, np.nan) for _ in range(3))
    reason = np.full(shape, "", dtype=object)
    for i, one in enumerate(found.values()):
        for j, model in enumerate(models):
            with validity("ignore"):
                try:
                    ds = tensions(one, model)
                    shares = ds.limit_fraction.max("compartment")
                    worst = int(shares.argmax("time"))
                    fraction[i, j] = float(shares[worst])
                    half_time[i, j] = float(ds.controlling_half_time[worst])
                except ValidityError as error:
                    reason[i, j] = str(error)
                    continue
                try:
                    wait[i, j] = float(time_to_fly(one, model, altitude=altitude).wait)
                except ValidityError as error:
                    reason[i, j] = str(error)
    surface = float(next(iter(found.values())).surface_pressure)
    out = xr.Dataset(coords={"attendant": list(found), "model": labels, "next": list(NEXT)})
    minutes, oxygen, top = [], [], []
    for one in found.values():
        under = (one.columns["start_pressure"] > surface + 1e-9) | (
            one.columns["end_pressure"] > surface + 1e-9
        )
        minutes.append(float(one.columns["segment_duration"][under].sum()))
        oxygen.append(float(one.columns["segment_duration"][one.fractions["O2"] > 0.99].sum()))
        top.append(float(max(one.columns["start_pressure"].max(), one.columns["end_pressure"].max())))
    out["minutes_at_pressure"] = (
        "attendant",
        minutes,
        attributes("duration", long_name="time under pressure"),
    )
    out["oxygen_minutes"] = ("attendant", oxygen, attributes("duration", long_name="time on oxygen"))
    out["highest_pressure"] = ("attendant", top, attributes("ambient_pressure"))
    owed = [
        float(e.attrs.get("attendant_oxygen_owed", np.nan))
        if e.attrs["attendant_rule"] != _NO_RULE
        else np.nan
        for e in found.values()
    ]
    long_name = "oxygen owed before the ascent"
    out["oxygen_owed"] = ("attendant", owed, attributes("duration", long_name=long_name))
    rules = [str(e.attrs["attendant_rule"]) for e in found.values()]
    out["rule"] = ("attendant", rules, {"long_name": "oxygen rule, its edition and provenance"})
    where = ("attendant", "model")
    out["limit_fraction"] = (where, fraction, attributes("limit_fraction"))
    out["controlling_half_time"] = (where, half_time, attributes("half_time"))
    long_name = f"wait at the surface until the model tolerates {altitude:g} m"
    out["wait_before_altitude"] = (where, wait, attributes("duration", long_name=long_name))
    out["reason"] = (where, reason.astype(str), {"long_name": "why a model gives no number"})
    rows = {r["next"]: r for r in surface_intervals(name)}
    hours = [float(rows[n]["hours"]) if n in rows else np.nan for n in NEXT]
    out["hours"] = ("next", hours, {"units": "h", "long_name": "time at the surface before it, at least"})
    for column in ("edition", "provenance", "note"):
        words = [rows[n][column] if n in rows else "" for n in NEXT]
        out[f"interval_{column}"] = ("next", words, {"long_name": f"{column} of the interval"})
    first = next(iter(found.values()))
    known = [first.attrs.get("attendant_provenance", "read"), *(r["provenance"] for r in rows.values())]
    out.attrs = dataset_attributes(
        f"attendants of {first.attrs['schedule']}",
        "attendants",
        references=[first.attrs["references"]],
        comment="Intervals of the manual and waits of models are different things; the longer is no proof.",
        provenance=weakest(known),
        fly_altitude=altitude,
    )
    return out


def shift(
    treatments: Sequence[tuple[float, str] | tuple[float, str, dict[str, Any]]],
    codes: Sequence[str],
    models: Sequence[Any] = MODELS,
    *,
    attendant_minutes: float | None = None,
    altitude: Any = 0.0,
) -> xr.Dataset:
    """Let attendants take the treatments of a shift in turn, each with what is left from before.

    Parameters
    ----------
    treatments : sequence of tuple
        Start [min of the shift], name of the table, and its further arguments, in order of time.
    codes : sequence of str
        Codes of the attendants; the first takes the first treatment, and so on in turn.
    models : sequence
        Tissue models, as for :func:`gasphys.tissues.tensions`.
    attendant_minutes : float, optional
        The unit's own rule for tables without one: oxygen before the ascent [min].
    altitude : float or str
        Of the chamber [m].

    Returns
    -------
    Dataset
        On ``treatment``: ``attendant``, ``start``, ``surface_interval`` since the last one tended (NaN:
        first), ``interval_asked`` by the manual [h] and ``interval_status`` ("within", "beyond", "not
        judged"), ``exposed_before``, ``oxygen_owed``, ``rule``; and on ``model`` the highest
        ``limit_fraction`` of that treatment, inert gas of the earlier ones counted.

    Raises
    ------
    ExposureError
        If the treatments are not in order, or an attendant's overlap.

    Notes
    -----
    Exposed before means under pressure in the 12 h before the start: the attendant then owes more oxygen
    where the manual says so. The manual allows tables 5, 6 and 6A to be repeated sooner if that oxygen is
    breathed; the status shows the plain interval.

    Examples
    --------
    >>> ds = shift([(0, "usn_9"), (150, "usn_6"), (500, "usn_6")], ["A-1", "A-2"], ["buhlmann_1995_c"])
    >>> ds.attendant.values.tolist(), ds.exposed_before.values.tolist(), ds.oxygen_owed.values.tolist()
    (['A-1', 'A-2', 'A-1'], [0, 0, 1], [15.0, 30.0, 90.0])
    """
    if not codes:
        raise ExposureError("there is no attendant: give a code")
    entries = [(float(t[0]), str(t[1]), dict(t[2]) if len(t) > 2 else {}) for t in treatments]
    if not all(a[0] < b[0] for a, b in itertools.pairwise(entries)):
        raise ExposureError("the treatments of a shift must be in order of time")
    labels = [str(m if isinstance(m, str) else getattr(m, "name", m)) for m in models]
    done: dict[str, tuple[float, str, Exposure]] = {}
    rows: dict[str, list[Any]] = {
        n: []
        for n in ("attendant", "start", "interval", "asked", "status", "exposed", "owed", "rule", "fraction")
    }
    for n, (start, name, more) in enumerate(entries):
        code = codes[n % len(codes)]
        end, last, earlier = done.get(code, (np.nan, "", None))
        if start < end:
            raise ExposureError(f"{code} is still inside at {start:g} min, until {end:g} min")
        exposed = bool(start - end < _LATELY)
        one, rule = _tended(name, {**more, "altitude": altitude}, exposed, attendant_minutes)
        whole = one if earlier is None else Exposure.join([earlier.then(start - end), one])
        asked = next((float(r["hours"]) for r in surface_intervals(last) if r["next"] == "treatment"), np.nan)
        hours = (start - end) / 60.0
        known = not (np.isnan(asked) or np.isnan(hours))
        rows["attendant"].append(code)
        rows["start"].append(start)
        rows["interval"].append(start - end)
        rows["asked"].append(asked)
        rows["status"].append(("within" if hours >= asked else "beyond") if known else "not judged")
        rows["exposed"].append(int(exposed))
        rows["owed"].append(float(one.attrs.get("attendant_oxygen_owed", np.nan)))
        rows["rule"].append(rule)
        rows["fraction"].append([_highest(whole, model, float(one.duration)) for model in models])
        done[code] = (start + float(one.duration), name, whole)
    out = xr.Dataset(
        coords={"treatment": [f"{k + 1} {e[1]}" for k, e in enumerate(entries)], "model": labels}
    )
    out["attendant"] = ("treatment", rows["attendant"], {"long_name": "who is inside"})
    out["start"] = ("treatment", rows["start"], attributes("time", long_name="start, minutes of the shift"))
    out["surface_interval"] = ("treatment", rows["interval"], attributes("surface_interval"))
    out["interval_asked"] = ("treatment", rows["asked"], {"units": "h", "long_name": "asked by the manual"})
    out["interval_status"] = ("treatment", rows["status"], {"long_name": "against the plain interval"})
    exposed_before = np.array(rows["exposed"], dtype=np.int8)
    out["exposed_before"] = (
        "treatment",
        exposed_before,
        {"long_name": "1: under pressure in the previous 12 h"},
    )
    long_name = "oxygen owed before the ascent"
    out["oxygen_owed"] = ("treatment", rows["owed"], attributes("duration", long_name=long_name))
    out["rule"] = ("treatment", rows["rule"], {"long_name": "oxygen rule, its edition and provenance"})
    out["limit_fraction"] = (("treatment", "model"), np.array(rows["fraction"]), attributes("limit_fraction"))
    out.attrs = dataset_attributes(
        "attendants of a shift",
        "attendants",
        references=["usn_rev4"],
        comment="Limits of models are no proof.",
    )
    return out


#: How far back an exposure counts for the oxygen an attendant owes, 12 h [min]: US Navy Revision 4 [read].
_LATELY = 12.0 * 60.0


def _tended(name: str, more: dict[str, Any], exposed: bool, own: float | None) -> tuple[Exposure, str]:
    """What an attendant breathes through a whole treatment, and the rule for it."""
    try:
        one = treatment(name, attendant=True, exposed_before=exposed, **more)
    except RangeError as error:
        if own is None:
            patient = treatment(name, **{k: v for k, v in more.items() if k != "altitude"})
            cut = patient._split([])
            start = Exposure.start("air", surface_pressure=float(patient.surface_pressure))
            return _along(start, cut, 0.0, float(patient.duration), as_written=False), f"{error}: chamber air"
        one = treatment(name, attendant=True, attendant_minutes=own, **more)
    return one, str(one.attrs["attendant_rule"])


def _highest(whole: Exposure, model: Any, last: float) -> float:
    """Highest share of a model's limit in the last minutes of an exposure, NaN where it refuses."""
    with validity("ignore"):
        try:
            ds = tensions(whole, model)
        except ValidityError:
            return float("nan")
    times = ds["time"].values
    inside = times >= float(whole.duration) - last - 1e-9
    return float(ds.limit_fraction.max("compartment").values[inside].max())
