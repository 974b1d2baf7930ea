"""The atmosphere of a chamber along a run: O2 and CO2 by mass balance."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.chamber.equations import (
    actual_flow,
    air_flow_for_co2,
    air_flow_for_o2,
    co2_surface_equivalent,
    o2_fraction,
    pressurization_gas,
    standard_flow,
)
from gasphys.chamber.room import Chamber
from gasphys.constants import ATMOSPHERE
from gasphys.errors import ExposureError
from gasphys.exposure import Exposure
from gasphys.limits import load
from gasphys.quantities import attributes, dataset_attributes

__all__ = ["atmosphere"]

Array = NDArray[np.float64]

#: Ends of a range: all inputs at their lowest, all at their highest.
ENDS = ("low", "high")

#: O2 fraction of air from outside, and how near a gas must be to air not to need a mask.
AIR_O2 = 0.2095
_NEAR_AIR = 0.006

#: Points of Gauss a step of travel is integrated with; a step is so short that they are exact to rounding.
_POINTS, _WEIGHTS = np.polynomial.legendre.leggauss(16)
_STEP = 0.25

#: Instants of a run at which crossings of limits are looked for; between them the course is a line.
_FINE = 4001


@dataclass(frozen=True)
class _Stretch:
    """A stretch of time with one slope of pressure and constant flows, in kPa L/min at chamber temperature.

    A flow is ``fixed + per_pressure * P``: what people produce is fixed, what a mask lets out goes with P.
    """

    minutes: float
    start: float
    end: float
    supply: tuple[Array, float]
    gas: tuple[Array, Array]
    all: tuple[Array, Array]

    @property
    def slope(self) -> float:
        return (self.end - self.start) / self.minutes if self.minutes > 0.0 else 0.0


def atmosphere(
    exposure: Exposure,
    chamber: Chamber | None = None,
    attendant: Exposure | None = None,
    *,
    at: Any = None,
    initial_o2: float = AIR_O2,
    initial_pco2: float | None = None,
    limits: Any = "default",
) -> xr.Dataset:
    """O2 and CO2 of the chamber atmosphere along a run, by mass balance.

    Parameters
    ----------
    exposure : Exposure
        What the patients breathe; its pressure is the chamber's.
    chamber : Chamber, optional
        Volume, ventilation, masks and people.
    attendant : Exposure, optional
        What the attendants breathe; default chamber air throughout.
    at : array_like, optional
        Times to add to the exposure's own [min].
    initial_o2 : float
        O2 fraction at the start [1].
    initial_pco2 : float, optional
        PCO2 at the start [kPa]; default that of the air supplied.
    limits : str, path or sequence
        As for :func:`gasphys.limits.load`: a site's own beside the published ones.

    Returns
    -------
    Dataset
        On ``time`` and ``end`` ("low", "high": leak and output at their lowest and highest):
        ``chamber_o2_fraction``, ``chamber_pco2``, ``chamber_co2_surface_equivalent``,
        ``chamber_po2``; ``air_flow_for_o2`` and ``air_flow_for_co2``, the ventilation that would keep the
        chosen limits for ever at the largest inflow; ``air_used`` [L free air]; on ``limit`` when each
        published limit of the atmosphere is crossed.

    Raises
    ------
    ExposureError
        If the exposure holds several scenarios, or the attendant's has another duration.

    Notes
    -----
    V P df/dt = F_s A + g - f (A + G): A the air let in (for compression, ventilation), g the gas in
    question and G all gas that people and masks add, f the fraction; well mixed, one temperature. Stays are
    exact; travel is integrated to rounding. People on chamber air take up O2 and give off CO2; on a mask
    with overboard dump only the leak counts, without it all they breathe out. Compression is by air. Well
    mixed is an assumption: near a leaking mask O2 is higher, and a limit on the mean is no protection from
    fire there.

    Examples
    --------
    >>> from gasphys.schedules import treatment
    >>> ds = atmosphere(treatment("clinical_2_4_atm"), Chamber(volume="18 m3", air_flow="200 L/min"))
    >>> ds.chamber_o2_fraction.sel(end="high").max().round(3).item()
    0.222
    """
    room = Chamber() if chamber is None else chamber
    if exposure.dims or (attendant is not None and attendant.dims):
        raise ExposureError("the atmosphere needs one scenario; pick one first")
    if attendant is not None and abs(attendant.duration - exposure.duration) > 1e-9:
        raise ExposureError(
            f"the attendant's exposure lasts {attendant.duration:g} min, the patient's {exposure.duration:g}"
        )
    ds = exposure.to_dataset(at=at)
    times = ds["time"].values
    pressure = ds["ambient_pressure"].values
    start_co2 = room.supply_co2 * pressure[0] if initial_pco2 is None else float(initial_pco2)
    people = [(exposure, room.patients, 1.0), (attendant, room.attendants, float(room.working))]
    grid = np.linspace(times[0], times[-1], _FINE)
    every = np.union1d(times, grid)
    o2 = _run(_stretches(exposure, people, room, "O2"), room, AIR_O2, initial_o2, every)
    carbon = _stretches(exposure, people, room, "CO2")
    co2 = _run(carbon, room, room.supply_co2, start_co2 / pressure[0], every)
    fine = np.interp(every, times, pressure)
    crossed = {
        "chamber_o2_fraction": (every, o2),
        "chamber_co2_surface_equivalent": (every, co2_surface_equivalent.raw(co2 * fine)),
    }
    o2, co2 = (x[:, np.searchsorted(every, times)] for x in (o2, co2))
    out = ds[["ambient_pressure", "segment_of_time"]].assign_coords(end=list(ENDS))
    found = {
        "chamber_o2_fraction": o2,
        "chamber_po2": o2 * pressure,
        "chamber_pco2": co2 * pressure,
        "chamber_co2_surface_equivalent": co2_surface_equivalent.raw(co2 * pressure),
    }
    for name, values in found.items():
        out[name] = (("end", "time"), values, attributes(name))
    out["chamber_co2_surface_equivalent"].attrs |= {
        "equation": "chamber.co2_surface_equivalent",
        "inputs": '{"chamber_pco2": "@chamber_pco2"}',
    }
    _needed(out, exposure, people, room)
    _crossings(out, crossed, limits)
    out["air_used"] = ((), _air_used(exposure, room), attributes("free_gas_volume"))
    out.attrs = dataset_attributes(
        f"chamber atmosphere, {exposure.attrs.get('title', 'an exposure')}",
        "chamber atmosphere",
        history=exposure.history,
        references=["chamber_balance"],
        comment="Well mixed: near a leaking mask the O2 fraction is higher.",
        chamber=room.code,
        volume=room.volume,
        air_flow=room.air_flow,
        mask_leak=list(room.mask_leak),
        co2_output_stpd=list(room.co2_output_stpd),
        o2_uptake_stpd=list(room.o2_uptake_stpd),
        overboard_dump="yes" if room.overboard_dump else "no",
        o2_limit=room.o2_limit,
        co2_limit=room.co2_limit,
    )
    return out


def mean_fraction(
    exposure: Exposure, chamber: Chamber, attendant: Exposure | None, gas: str, when: float
) -> float:
    """Return the fraction of one gas of the atmosphere at a time, mean of the ends of its range.

    Parameters
    ----------
    exposure, chamber, attendant
        As for :func:`atmosphere`.
    gas : {"O2", "CO2"}
        Which.
    when : float
        Time [min].

    Returns
    -------
    float
        Fraction [1].

    Examples
    --------
    >>> session = Exposure.start("oxygen", pressure=243.18).stay(60)
    >>> round(mean_fraction(session, Chamber(attendants=0), None, "O2", 30.0), 4)
    0.2134
    """
    people = [(exposure, chamber.patients, 1.0), (attendant, chamber.attendants, float(chamber.working))]
    supplied = AIR_O2 if gas == "O2" else chamber.supply_co2
    stretches = _stretches(exposure, people, chamber, gas)
    return float(_run(stretches, chamber, supplied, supplied, np.array([when])).mean())


def _stretches(
    exposure: Exposure, people: Sequence[tuple[Exposure | None, int, float]], room: Chamber, gas: str
) -> list[_Stretch]:
    """Cut the run where pressure or anyone's gas changes, and add up what people and masks let in."""
    times = np.unique(np.concatenate([e.pieces().times for e, _, _ in people if e is not None]))
    times = times[np.append(True, np.diff(times) > 1e-9)]
    values = exposure.to_dataset(at=times).ambient_pressure.sel(time=times, method="nearest").values
    zero = np.zeros(2)
    found = []
    for (t1, t2), (p1, p2) in zip(itertools.pairwise(times), itertools.pairwise(values), strict=True):
        fixed, rising, all_fixed, all_rising = zero.copy(), zero.copy(), zero.copy(), zero.copy()
        for one, count, work in people:
            share = _on_mask(one, 0.5 * (t1 + t2))
            # The lowest O2 goes with the lowest leak and the highest uptake.
            used = count * work * _flows(room.o2_uptake_stpd, room)[::-1]
            made = count * work * _flows(room.co2_output_stpd, room)
            if share is None:
                own = -used if gas == "O2" else made
                fixed, all_fixed = fixed + own, all_fixed + made - used
                continue
            fraction = share if gas == "O2" else 0.0
            leak = count * np.asarray(room.mask_leak)
            if not room.overboard_dump:
                # Everything breathed out enters the chamber, the leak with it.
                leak = count * np.maximum(np.asarray(room.mask_flow), room.mask_leak)
                own = -used if gas == "O2" else made
                fixed, all_fixed = fixed + own, all_fixed + made - used
            rising, all_rising = rising + fraction * leak, all_rising + leak
        found.append(
            _Stretch(
                float(t2 - t1),
                float(p1),
                float(p2),
                _supply(float(t2 - t1), float(p1), float(p2), room, all_fixed, all_rising),
                (fixed, rising),
                (all_fixed, all_rising),
            )
        )
    return found


def _flows(stpd: tuple[float, float], room: Chamber) -> Array:
    """Flows at STPD as pressure times volume a minute at chamber temperature [kPa L/min]."""
    p = float(ATMOSPHERE)
    return p * np.asarray([float(actual_flow.raw(v, p, room.temperature, 0.0)) for v in stpd])


def _on_mask(one: Exposure | None, when: float) -> float | None:
    """Return the O2 fraction of the gas breathed by mask, None on chamber air."""
    if one is None:
        return None
    pieces = one.pieces()
    k = int(np.clip(np.searchsorted(pieces.times, when, side="right") - 1, 0, len(one.part) - 1))
    share = float(pieces.fractions["O2"][k])
    return None if abs(share - AIR_O2) < _NEAR_AIR else share


def _supply(
    minutes: float, p1: float, p2: float, room: Chamber, fixed: Array, rising: Array
) -> tuple[Array, float]:
    """Air let in: for compression, for ventilation, and to make up for what people take."""
    compression = room.volume * max(p2 - p1, 0.0) / minutes
    short = np.maximum(*(-(fixed + (rising + room.air_flow) * p) for p in (p1, p2)))
    return np.asarray(compression + np.maximum(short, 0.0)), float(room.air_flow)


def _run(stretches: list[_Stretch], room: Chamber, supplied: float, start: float, times: Array) -> Array:
    """Return the fraction at the times asked for, ``(end, time)``."""
    out = np.empty((2, len(times)))
    now, clock = np.full(2, float(start)), 0.0
    out[:, times <= 1e-12] = now[:, None]
    for one in stretches:
        inside = (times > clock + 1e-12) & (times <= clock + one.minutes + 1e-9)
        for k in np.flatnonzero(inside):
            out[:, k] = _after(one, room, supplied, now, min(times[k] - clock, one.minutes))
        now = _after(one, room, supplied, now, one.minutes)
        clock += one.minutes
    return out


def _after(one: _Stretch, room: Chamber, supplied: float, start: Array, minutes: float) -> Array:
    """Return the fraction some minutes into a stretch, at both ends of the range."""
    volume, k = room.volume, one.slope
    # df/dt = (in_fixed/P + in_rising)/V - f (out_fixed/P + out_rising)/V
    in_fixed = supplied * one.supply[0] + one.gas[0]
    in_rising = supplied * one.supply[1] + one.gas[1]
    out_fixed = one.supply[0] + one.all[0]
    out_rising = one.supply[1] + one.all[1]
    if k == 0.0:
        gain, loss = in_fixed / one.start + in_rising, out_fixed / one.start + out_rising
        return np.asarray(o2_fraction.raw(minutes, volume, gain, loss - gain, start, 0.0))
    end = one.start + k * minutes
    passed = np.abs(out_fixed / (volume * k) * np.log(end / one.start)) + out_rising * minutes / volume
    steps = int(np.ceil(max(abs(np.log(end / one.start)), float(passed.max())) / _STEP)) or 1
    now, clock, step = start, 0.0, minutes / steps
    for _ in range(steps):
        t = 0.5 * step * (_POINTS + 1.0)
        p0, p, p1 = one.start + k * clock, one.start + k * (clock + t), one.start + k * (clock + step)

        def decay(later: Any, earlier: Any, apart: Any) -> Array:
            power = out_fixed[:, None] / (volume * k) * np.log(np.atleast_1d(later / earlier))
            return np.asarray(np.exp(-power - out_rising[:, None] * np.atleast_1d(apart) / volume))

        entering = (in_fixed[:, None] / p + in_rising[:, None]) / volume
        added = 0.5 * step * (_WEIGHTS * entering * decay(p1, p, step - t)).sum(axis=-1)
        now = now * decay(p1, p0, step)[:, 0] + added
        clock += step
    return now


def _needed(
    out: xr.Dataset, exposure: Exposure, people: Sequence[tuple[Exposure | None, int, float]], room: Chamber
) -> None:
    """Ventilation that keeps the chosen limits for ever, at the largest inflow of the run."""
    stretches = _stretches(exposure, people, room, "O2")
    carbon = _stretches(exposure, people, room, "CO2")
    inflow = np.max([s.gas[0] / s.start + s.gas[1] for s in stretches], axis=0)
    flows = [
        float(air_flow_for_o2.raw(room.o2_limit, max(q, 0.0), AIR_O2)) if q > 0.0 else 0.0 for q in inflow
    ]
    long_name = "ventilation that keeps the chosen O2 limit for ever"
    out["air_flow_for_o2"] = ("end", flows, attributes("air_flow", long_name=long_name))
    highest = max(max(s.start, s.end) for s in stretches)
    supplied = room.supply_co2 * highest
    allowed = room.co2_limit * float(ATMOSPHERE)
    made = np.max([s.gas[0] for s in carbon], axis=0) / float(_flows((1.0, 1.0), room)[0])
    flows = [
        float(air_flow_for_co2.raw(allowed, q, room.temperature, supplied)) if q > 0.0 else 0.0 for q in made
    ]
    long_name = "ventilation that keeps the chosen CO2 limit for ever"
    out["air_flow_for_co2"] = ("end", flows, attributes("air_flow", long_name=long_name))


def _crossings(out: xr.Dataset, traces: dict[str, tuple[Array, Array]], given: Any) -> None:
    """When each published limit of the atmosphere is first crossed, on a fine grid of the run."""
    limits = [
        x for x in load(given) if x.quantity in ("chamber_o2_fraction", "chamber_co2_surface_equivalent")
    ]
    first = np.full((2, len(limits)), np.nan)
    for j, limit in enumerate(limits):
        times, values = traces[limit.quantity]
        beyond = values > limit.value if limit.comparison == "<=" else values < limit.value
        for e in range(2):
            hits = np.flatnonzero(beyond[e])
            if hits.size:
                first[e, j] = _between(times, values[e], limit.value, int(hits[0]))
    out.coords["limit"] = [x.id for x in limits]
    out["limit_value"] = ("limit", [x.value for x in limits], {"units": "1", "long_name": "published limit"})
    out["authority"] = (
        "limit",
        [f"{x.authority}, {x.edition}" for x in limits],
        {"long_name": "whose it is"},
    )
    out["provenance"] = ("limit", [x.provenance for x in limits], {"long_name": "how the number is known"})
    out["first_crossing"] = (("end", "limit"), first, attributes("time", long_name="first time beyond it"))


def _between(times: Array, values: Array, limit: float, k: int) -> float:
    if k == 0:
        return float(times[0])
    share = (limit - values[k - 1]) / (values[k] - values[k - 1])
    return float(times[k - 1] + share * (times[k] - times[k - 1]))


def _air_used(exposure: Exposure, room: Chamber) -> float:
    """Free air of the run: compression and ventilation."""
    pieces = exposure.pieces()
    total = 0.0
    for minutes, p1, p2 in zip(pieces.duration, pieces.start_pressure, pieces.end_pressure, strict=True):
        if p2 > p1:
            total += float(pressurization_gas.raw(room.volume, p1, p2))
        flow = standard_flow.raw(room.air_flow, 0.5 * (p1 + p2), room.temperature, room.temperature)
        total += float(flow) * float(minutes)
    return total
