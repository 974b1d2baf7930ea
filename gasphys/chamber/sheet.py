"""The worksheet of a treatment: expected, measured, then; phase by phase for patient, attendant, chamber."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys import blood, lungs
from gasphys.chamber.bedside import Devices, Reading
from gasphys.chamber.equations import (
    compressor_flow,
    cuff_volume,
    cylinders_needed,
    filling_temperature,
    humidity_after,
    isentropic_temperature,
    mask_oxygen,
    middle_ear_difference,
    time_to_co2,
    time_to_o2,
    trapped_gas_volume,
    trapped_volume_loss,
    travel_rate_for,
    ventilator_volume,
)
from gasphys.chamber.model import atmosphere, mean_fraction
from gasphys.chamber.room import Chamber
from gasphys.chamber.tending import MODELS
from gasphys.constants import ATMOSPHERE, GAS_CONSTANT, ZERO_CELSIUS
from gasphys.doses import Course, course_doses, oxygen
from gasphys.errors import ExposureError, NotReachableError, RangeError, ValidityError
from gasphys.exposure import Exposure
from gasphys.gas_exchange import oxygenation
from gasphys.person import Person
from gasphys.policy import validity
from gasphys.quantities import attributes, dataset_attributes
from gasphys.real_gas import cylinder_content, cylinder_pressure
from gasphys.schedules import read_protocol, surface_intervals, treatment
from gasphys.schedules.data import read_rows
from gasphys.tissues import tensions
from gasphys.units import convert

__all__ = ["worksheet"]

Array = NDArray[np.float64]

LANES = ("patient", "attendant", "chamber")

#: Most phases a page of the run holds; stays and cycles of longer tables are put together.
PHASES = 17

#: Powers of density a ventilator's volume may follow: none (pressure modes) to the square root.
_DENSITY_POWER = (0.0, 0.5)

NOT_CONSIDERED = (
    "whether and how to treat; which table; extensions; what to do in an oxygen seizure, on loss of oxygen, "
    "in fire",
    "pneumothorax not drained, an absolute contraindication; all other contraindications",
    "carbon dioxide retention: arterial PCO2 is taken as given at every pressure",
    "blood glucose: meters err in either direction under oxygen and no correction is made",
    "ratings of implants, pumps and ventilators for pressure; drug effects; temperature of the patient",
    "wash-in and wash-out of nitrogen in lungs and trapped gas; gas a pocket takes up at pressure",
    "leaks near a face, where oxygen is higher than in the mixed chamber; ignition",
)

CAUTIONS = (
    "PaO2/FIO2 is not comparable between pressures: at 2.4 atm the same lung has 2.5 times the number. Use "
    "the arterial/alveolar ratio.",
    "Transcutaneous PO2: published cuts disagree (in-chamber 100, 200, 250, 400 mmHg; on air below 40 is "
    "hypoxic). One cut is right in about three of four limbs. State pressure, gas and site.",
    "Shunt and constant ratio part when the ratio is below 0.75; the shunt is then the better model.",
    "Oxygen limits of the atmosphere: 23.5 % (NFPA 99), 23 % (EN 14931, from memory), 25 % (US Navy). None "
    "is without danger; risk rises with PO2 too. No ignition source, grease, static or unrated device.",
    "US Navy ventilation: 12.5 actual ft3/min a resting oxygen breather without overboard dump, 2 for one on "
    "air; interrupted at most 5 min in 30, then doubled for the time lost.",
)


@dataclass(frozen=True)
class _Phase:
    """A part of the run with one line of the page."""

    start: float
    end: float
    first_pressure: float
    last_pressure: float
    part: str
    gas: str
    oxygen: float

    @property
    def travel(self) -> int:
        """1 on the way down, -1 on the way up, 0 in a stay."""
        return int(np.sign(round(self.last_pressure - self.first_pressure, 6)))


def worksheet(
    schedule: str | os.PathLike[str] | Exposure,
    person: Person | None = None,
    chamber: Chamber | None = None,
    devices: Devices | None = None,
    readings: Iterable[Reading] = (),
    *,
    course: Course | None = None,
    limits: Any = "default",
    **table: Any,
) -> xr.Dataset:
    """Work out a treatment before it is given: what to expect, phase by phase, and what a deviation means.

    Parameters
    ----------
    schedule : str, path or Exposure
        A treatment table by name, a unit's own protocol as a text file, or an exposure.
    person : Person, optional
        What is measured of the patient.
    chamber : Chamber, optional
        The chamber, its gas and people.
    devices : Devices, optional
        Trapped gas, cuff, ventilator, drip chamber.
    readings : iterable of Reading
        What was read so far: ranges are narrowed to what agrees with it.
    course : Course, optional
        Sessions planned, for the dose of the course.
    limits : str, path or sequence
        As for :func:`gasphys.limits.load`: a site's own limits of the atmosphere beside the published ones.
    **table
        Further arguments of :func:`gasphys.schedules.treatment`, such as ``extensions_shallow=1``.

    Returns
    -------
    Dataset
        On ``phase``: times, pressures, part and gas, and with ``end`` ("low", "high") ``arterial_po2``,
        ``arterial_o2_content``, ``chamber_o2_fraction``, ``chamber_pco2``, ``oxygen_pressure`` of the
        bank, ``tidal_volume``; ``uptd`` so far; ``trapped_ratio_humid`` and ``_dry`` on surfacing from
        there, ``cuff_factor``, ``middle_ear_difference``. On ``line``: what the page prints, by phase and
        lane: ``label``, ``expected``, ``measured``, ``outside``. On ``note``: what stands on the last
        page. :func:`gasphys.chamber.worksheet_page` makes the page.

    Raises
    ------
    ExposureError
        If the exposure holds several scenarios.
    RangeError
        If a reading lies outside the run, or agrees with no leak, output or flow that is possible.

    Notes
    -----
    Expected ranges: arterial PO2 between a constant ratio and a constant shunt; chamber O2, CO2 and stock
    between the lowest and highest leak, output and mask flow of the chamber's description. A reading
    replaces what it determines: an arterial sample at pressure both ratio and shunt, chamber O2 the leak,
    chamber PCO2 the output, the bank's pressure the mask flow, an exhaled volume the power of density; of
    several readings of one kind the last.

    Examples
    --------
    >>> ds = worksheet("clinical_2_4_atm", Person(arterial_alveolar_ratio=0.79, shunt_fraction=0.036))
    >>> ds.arterial_po2.isel(phase=1).values.round().tolist()
    [183.0, 224.0]
    """
    room = Chamber() if chamber is None else chamber
    who = Person() if person is None else person
    what = Devices() if devices is None else devices
    read = tuple(readings)
    exposure, tender, rule = _exposures(schedule, room, table)
    if exposure.dims:
        raise ExposureError("a worksheet needs one scenario; pick one first")
    for one in read:
        if not one.time <= float(exposure.duration):
            raise RangeError(
                f"{one.name} read at {one.time:g} min: the treatment ends at {exposure.duration:g} min"
            )
    phases = _phases(exposure)
    work = _Work(exposure, tender, rule, phases, who, room, what, read, limits)
    out = _numbers(work)
    lines = _lines(work, out)
    for column in ("lane", "label", "expected", "measured", "outside"):
        out[column] = ("line", [getattr(x, column) for x in lines], {"long_name": column})
    boxes = np.array([x.box for x in lines], dtype=np.int8)
    out["box"] = ("line", boxes, {"long_name": "1 where something is to be measured or signed"})
    out["line_phase"] = (
        "line",
        np.array([x.phase for x in lines], dtype=np.int32),
        {"long_name": "its phase"},
    )
    notes = _notes(work, out, course, schedule)
    out["note"] = ("notes", [text for _, text in notes], {"long_name": "what stands on the last page"})
    out["note_heading"] = ("notes", [head for head, _ in notes], {"long_name": "its heading"})
    out.attrs = dataset_attributes(
        f"Worksheet: {str(exposure.attrs.get('title', 'treatment')).replace(', patient', '')}",
        "worksheet",
        history=exposure.history,
        references=[
            *str(exposure.attrs.get("references", "")).split("; "),
            *("chamber_balance", "cuff_arithmetic", "ear_texts", "ventilator_reports"),
        ],
        person=who.code or "not named",
        chamber=room.code,
        edition=str(exposure.attrs.get("edition", "as given")),
        provenance=str(exposure.attrs.get("provenance", "read")),
        table_note=str(exposure.attrs.get("note", "")),
        flag=str(exposure.attrs.get("flag", "")),
        readings=len(read),
        attendant=room.attendant_code or "not named",
        attendant_rule=rule,
    )
    return out


@dataclass(frozen=True)
class _Work:
    """All that goes into one worksheet."""

    exposure: Exposure
    tender: Exposure
    rule: str
    phases: list[_Phase]
    person: Person
    room: Chamber
    devices: Devices
    readings: tuple[Reading, ...]
    limits: Any = "default"

    def read(self, name: str) -> list[Reading]:
        """Readings of one quantity."""
        return [r for r in self.readings if r.name == name]


def _exposures(
    schedule: str | os.PathLike[str] | Exposure, room: Chamber, table: dict[str, Any]
) -> tuple[Exposure, Exposure, str]:
    """Return what the patient breathes, what the attendant breathes, and the rule for that."""
    surface = room.surface_pressure
    if isinstance(schedule, Exposure):
        exposure, named = schedule, False
    elif Path(schedule).suffix.lower() in (".txt", ".protocol"):
        exposure, named = read_protocol(schedule, surface_pressure=surface), False
    else:
        exposure, named = treatment(str(schedule), surface_pressure=surface, **table), True
    if named:
        options = {
            "surface_pressure": surface,
            "exposed_before": room.exposed_before,
            "altitude": room.altitude,
            "attendant_minutes": room.attendant_minutes,
            **{k: v for k, v in table.items() if k != "descent"},
        }
        try:
            tender = treatment(str(schedule), attendant=True, **options)
        except RangeError as error:
            return exposure, _on_chamber_air(exposure, None), f"{error}: chamber air is assumed"
        return exposure, tender, str(tender.attrs["attendant_rule"])
    own = room.attendant_minutes
    rule = (
        "no oxygen rule is known for a unit's own protocol: chamber air is assumed; ask the unit's rule"
        if own is None
        else f"the unit's own: oxygen for the last {own:g} min before the ascent and on it"
    )
    return exposure, _on_chamber_air(exposure, own), rule


def _on_chamber_air(exposure: Exposure, own: float | None) -> Exposure:
    """The same pressures on air, with oxygen for the unit's own minutes before the last ascent and on it."""
    starts, ends = exposure.columns["start_pressure"], exposure.columns["end_pressure"]
    times = exposure.pieces().times
    last = max((k for k in range(len(starts)) if ends[k] < starts[k]), default=len(starts))
    begin = times[last] - own if own is not None else np.inf
    cut = exposure._split([begin]) if np.isfinite(begin) and begin > 0.0 else exposure
    now = Exposure.start("air", pressure=float(starts[0]), surface_pressure=float(exposure.surface_pressure))
    for k, minutes in enumerate(cut.columns["segment_duration"]):
        on = cut.pieces().times[k] >= begin - 1e-9
        now = now.switch("oxygen" if on else "air").name("oxygen" if on else "air")
        there = float(cut.columns["end_pressure"][k])
        still = there == float(cut.columns["start_pressure"][k])
        now = now.stay(minutes) if still else now.travel(pressure=there, minutes=minutes)
    return now


def _phases(exposure: Exposure) -> list[_Phase]:
    """Cut the run into phases: as written, then with cycles put together, then bands of stops."""
    pieces = exposure.pieces()
    found: list[_Phase] = []
    for k in range(len(exposure.part)):
        if not pieces.duration[k] > 0.0:
            continue
        ends = (float(pieces.start_pressure[k]), float(pieces.end_pressure[k]))
        oxygen = float(pieces.fractions["O2"][k])
        one = _Phase(
            float(pieces.times[k]),
            float(pieces.times[k + 1]),
            *ends,
            exposure.part[k] or exposure.gas_name(k),
            exposure.gas_name(k),
            oxygen,
        )
        if found and _same_travel(found[-1], one):
            found[-1] = replace(found[-1], end=one.end, last_pressure=one.last_pressure)
        else:
            found.append(one)
    if len(found) > PHASES:
        found = _joined(
            found, lambda a, b: a.travel == 0 == b.travel and a.first_pressure == b.first_pressure
        )
    return _bands(found) if len(found) > 3 * PHASES else found


def _bands(phases: list[_Phase]) -> list[_Phase]:
    """Put together steps up whose travel and stop take equally long."""
    found: list[_Phase] = []
    minutes = 0.0
    k = 0
    while k < len(phases):
        one = phases[k]
        after = phases[k + 1] if k + 1 < len(phases) else None
        if one.travel < 0 and after is not None and after.travel == 0:
            length = after.end - one.start
            if found and abs(length - minutes) < 1e-9:
                found[-1] = replace(found[-1], end=after.end, last_pressure=after.last_pressure)
            else:
                part = f"stops of {length:g} min, {after.gas}"
                found.append(replace(one, end=after.end, last_pressure=after.last_pressure, part=part))
            minutes = length
            k += 2
            continue
        minutes = 0.0
        found.append(one)
        k += 1
    return found


def _one_stay(a: _Phase, b: _Phase) -> bool:
    return a.travel == 0 == b.travel and a.first_pressure == b.first_pressure


def _same_travel(a: _Phase, b: _Phase) -> bool:
    return (
        a.travel == b.travel != 0
        and a.gas == b.gas
        and a.part == b.part
        and abs(a.last_pressure - b.first_pressure) < 1e-9
    )


def _joined(phases: list[_Phase], together: Callable[[_Phase, _Phase], bool]) -> list[_Phase]:
    found: list[_Phase] = []
    for one in phases:
        if found and together(found[-1], one):
            last = found[-1]
            gases = list(dict.fromkeys([*last.gas.split(" and "), one.gas]))
            gas = " and ".join(gases)
            part = last.part if last.part == one.part else f"{gas} in turn" if len(gases) > 1 else gas
            found[-1] = replace(
                last,
                end=one.end,
                last_pressure=one.last_pressure,
                gas=gas,
                part=part,
                oxygen=max(last.oxygen, one.oxygen),
            )
        else:
            found.append(one)
    return found


# -- Numbers ----------------------------------------------------------------------------------------


def _numbers(work: _Work) -> xr.Dataset:
    phases, exposure = work.phases, work.exposure
    surface = float(exposure.surface_pressure)
    highest = [max(p.first_pressure, p.last_pressure) for p in phases]
    ends = np.array([p.end for p in phases])
    out = xr.Dataset(coords={"phase": np.arange(len(phases)), "end": ["low", "high"]})

    def put(name: str, dims: tuple[str, ...], values: Any, of: str = "", **more: str) -> None:
        out[name] = (dims, np.asarray(values, dtype=float), attributes(of or name, **more))

    put("phase_start", ("phase",), [p.start for p in phases], "time", long_name="start of the phase")
    put("phase_end", ("phase",), ends, "time", long_name="end of the phase")
    put("start_pressure", ("phase",), [p.first_pressure for p in phases])
    put("end_pressure", ("phase",), [p.last_pressure for p in phases])
    out["part"] = ("phase", [p.part for p in phases], {"long_name": "what is done"})
    out["gas"] = ("phase", [p.gas for p in phases], {"long_name": "gas of the patient"})
    out["attendant_gas"] = ("phase", _tender_gases(work), {"long_name": "gas of the attendant"})
    blood_gas, content = _blood(work)
    put("arterial_po2", ("end", "phase"), blood_gas)
    put("arterial_o2_content", ("end", "phase"), content)
    dose = [float(oxygen(_until(exposure, t), ["uptd"]).dose[0]) for t in ends]
    put("uptd", ("phase",), dose)
    room, flows = _narrowed(work)
    air = atmosphere(exposure, room, work.tender, at=ends, limits=work.limits)
    at = air.sel(time=ends, method="nearest")
    put("chamber_o2_fraction", ("end", "phase"), at.chamber_o2_fraction.values)
    put("chamber_pco2", ("end", "phase"), at.chamber_pco2.values)
    put("air_flow_for_o2", ("end",), air.air_flow_for_o2.values, "air_flow")
    put("air_flow_for_co2", ("end",), air.air_flow_for_co2.values, "air_flow")
    put("air_used", (), float(air.air_used), "free_gas_volume")
    for name in ("limit_value", "authority", "provenance", "first_crossing"):
        out[f"atmosphere_{name}"] = air[name]
    used = [[_oxygen_used(work, flow, t) for t in ends] for flow in flows]
    put("oxygen_used", ("end", "phase"), used, "free_gas_volume")
    put("oxygen_pressure", ("end", "phase"), _bank(work, np.array(used)[::-1]), "cylinder_pressure")
    put("mask_leak", ("end",), room.mask_leak, "o2_inflow")
    put("mask_flow", ("end",), flows, "gas_flow")
    put("co2_output_stpd", ("end",), room.co2_output_stpd)
    high = np.array(highest)
    ratio = {"humid": True, "dry": False}
    for word, humid in ratio.items():
        values = [float(trapped_gas_volume(1.0, p, surface, humid=humid)) for p in high]
        put(
            f"trapped_ratio_{word}",
            ("phase",),
            values,
            "amount_ratio",
            long_name=f"volume on surfacing, {word}",
        )
    pressure = work.devices.cuff_pressure or 0.0
    cuff = [float(cuff_volume(1.0, surface, p, pressure)) for p in high]
    put("cuff_factor", ("phase",), cuff, "amount_ratio", long_name="cuff volume over that at the surface")
    rate = np.array([max(p.last_pressure - p.first_pressure, 0.0) / (p.end - p.start) for p in phases])
    put("middle_ear_difference", ("phase",), middle_ear_difference.raw(rate, room.ear_interval))
    put("travel_rate", (), float(travel_rate_for(room.ear_limit, room.ear_interval)), "compression_rate")
    volume = work.devices.tidal_volume
    powers = _powers(work)
    breaths = np.full((2, len(phases)), np.nan)
    if volume is not None:
        for e, power in enumerate(powers[::-1]):
            breaths[e] = ventilator_volume.raw(volume, (high / surface) ** (2.0 * power))
    put("tidal_volume", ("end", "phase"), breaths)
    return out


def _tender_gases(work: _Work) -> list[str]:
    found = []
    times = work.tender.pieces().times
    for phase in work.phases:
        inside = [
            work.tender.gas_name(k)
            for k in range(len(work.tender.part))
            if times[k] < phase.end - 1e-9 and times[k + 1] > phase.start + 1e-9
        ]
        found.append(" then ".join(dict.fromkeys(inside)))
    return found


def _until(exposure: Exposure, when: float) -> Exposure:
    """The exposure up to a time."""
    cut = exposure._split([when]) if when < exposure.duration else exposure
    times = cut.pieces().times
    keep = int(np.sum(times[1:] <= when + 1e-9))
    return replace(
        cut,
        columns={k: v[..., :keep] for k, v in cut.columns.items()},
        fractions={k: v[..., :keep] for k, v in cut.fractions.items()},
        part=cut.part[:keep],
        session=cut.session[:keep],
    )


def _blood(work: _Work) -> tuple[Array, Array]:
    """Lowest and highest arterial PO2 and content of each phase, at its highest alveolar PO2."""
    people = _people(work)
    low_high: list[tuple[Array, Array]] = []
    for person in people:
        with validity("ignore"):
            ds = oxygenation(work.exposure, person, model="both")
        times = ds["time"].values
        po2 = ds["arterial_po2"].transpose("model", "time").values
        content = ds["arterial_o2_content"].transpose("model", "time").values
        rows = []
        for phase in work.phases:
            inside = (times >= phase.start - 1e-9) & (times < phase.end - 1e-9)
            best = int(np.argmax(np.where(inside, ds["alveolar_po2"].values, -np.inf)))
            rows.append((po2[:, best], content[:, best]))
        low_high.append((np.array([r[0] for r in rows]), np.array([r[1] for r in rows])))
    every = [np.concatenate([x[k] for x in low_high], axis=1) for k in range(2)]
    with np.errstate(invalid="ignore"):
        po2, content = (np.stack([np.nanmin(v, axis=1), np.nanmax(v, axis=1)]) for v in every)
    return po2, content


def _people(work: _Work) -> list[Person]:
    """The person as described, or as each end of the last sample at pressure describes them."""
    samples = work.read("arterial_po2")
    person = work.person
    carbon = work.read("arterial_pco2")
    if carbon:
        person = replace(person, arterial_pco2=0.5 * (carbon[-1].low + carbon[-1].high))
    if not samples:
        return [person]
    sample = samples[-1]
    ds = work.exposure.to_dataset(at=[sample.time]).sel(time=sample.time, method="nearest")
    pressure = float(ds.ambient_pressure)
    fio2 = float(ds.breathing_gas_po2) / pressure
    with validity("ignore"):
        alveolar = float(
            lungs.alveolar_po2(
                pressure, fio2, person.value("arterial_pco2"), person.value("respiratory_exchange_ratio")
            )
        )
        found = []
        for po2 in (sample.low, sample.high):
            if not 0.0 < po2 <= alveolar:
                raise RangeError(
                    f"arterial_po2 = {po2:g} kPa read at {sample.time:g} min against an alveolar PO2 of "
                    f"{alveolar:.4g} kPa there: not possible; check the sample, the mask and the time"
                )
            shunt = blood.shunt_at_arterial_po2(
                po2,
                alveolar,
                person.value("hemoglobin"),
                person.value("arteriovenous_difference"),
                person.value("arterial_ph"),
                person.value("cohb_fraction"),
            )
            found.append(replace(person, arterial_alveolar_ratio=po2 / alveolar, shunt_fraction=float(shunt)))
    return found


def _narrowed(work: _Work) -> tuple[Chamber, tuple[float, float]]:
    """The chamber with leak, output and mask flow as far as readings determine them."""
    room = work.room
    for name, field, most in (
        ("chamber_o2_fraction", "mask_leak", 200.0),
        ("chamber_pco2", "co2_output_stpd", 5.0),
    ):
        for one in work.read(name)[-1:]:
            gas = "O2" if name == "chamber_o2_fraction" else "CO2"
            at = work.exposure.to_dataset(at=[one.time]).sel(time=one.time, method="nearest")
            scale = 1.0 if gas == "O2" else float(at.ambient_pressure)

            def value(
                x: float,
                field: str = field,
                one: Reading = one,
                room: Chamber = room,
                gas: str = gas,
                scale: float = scale,
            ) -> float:
                varied = room.narrowed(**{field: x})
                return scale * mean_fraction(work.exposure, varied, work.tender, gas, one.time)

            room = room.narrowed(**{field: _both(value, one, most, field)})
    flows = room.mask_flow
    for one in work.read("oxygen_pressure")[-1:]:
        if not work.room.oxygen.cylinders:
            raise RangeError(f"oxygen_pressure read at {one.time:g} min: the chamber has no oxygen bank")

        def pressure(x: float, one: Reading = one) -> float:
            return float(_bank(work, np.array([[_oxygen_used(work, x, one.time)]]))[0, 0])

        flows = _both(pressure, one, 500.0, "mask_flow")
    return room, flows


def _both(value: Callable[[float], float], one: Reading, most: float, field: str) -> tuple[float, float]:
    """Return what gives both ends of a reading, by bisection of a monotone function."""
    ends = (value(0.0), value(most))
    rising = ends[1] > ends[0]
    found = []
    for wanted in (one.low, one.high):
        if not min(ends) <= wanted <= max(ends):
            raise RangeError(
                f"{one.name} = {one.text} read at {one.time:g} min: no {field} from 0 to {most:g} gives it "
                f"(from {min(ends):.4g} to {max(ends):.4g}); check the reading and the description"
            )
        low, high = 0.0, most
        for _ in range(44):
            middle = 0.5 * (low + high)
            if (value(middle) < wanted) == rising:
                low = middle
            else:
                high = middle
        found.append(0.5 * (low + high))
    return min(found), max(found)


def _oxygen_used(work: _Work, flow: float, until: float) -> float:
    """Oxygen taken by masks of patients and attendants up to a time [L at 1 atm]."""
    total = 0.0
    for one, count in ((work.exposure, work.room.patients), (work.tender, work.room.attendants)):
        pieces = one.pieces()
        for k in range(len(one.part)):
            begin, end = float(pieces.times[k]), min(float(pieces.times[k + 1]), until)
            if pieces.fractions["O2"][k] < 0.99 or end <= begin:
                continue
            length = float(pieces.duration[k])
            first = float(pieces.start_pressure[k])
            last = first + (float(pieces.end_pressure[k]) - first) * (end - begin) / length
            total += count * float(mask_oxygen.raw(flow, end - begin, first, last))
    return total


def _bank(work: _Work, used: Array) -> Array:
    """Pressure of the oxygen bank after giving off so much; NaN where it has not so much."""
    stock = work.room.oxygen
    if not stock.cylinders:
        return np.full_like(used, np.nan)
    capacity = stock.cylinders * stock.water_capacity
    kelvin = work.room.temperature + float(ZERO_CELSIUS)
    with validity("ignore"):
        held = float(cylinder_content(stock.pressure, "oxygen", capacity, work.room.temperature))
        left = held - used * float(ATMOSPHERE) / (float(GAS_CONSTANT) * kelvin)
        enough = left > 0.0
        found = cylinder_pressure(np.where(enough, left, held), "oxygen", capacity, work.room.temperature)
    return np.where(enough, found, np.nan)


def _powers(work: _Work) -> tuple[float, float]:
    """Powers of density by which the ventilator's volume falls: a range, or what an exhaled volume tells."""
    volume = work.devices.tidal_volume
    for one in work.read("tidal_volume")[-1:]:
        if volume is None:
            raise RangeError(f"tidal_volume read at {one.time:g} min: no ventilator among the devices")
        ds = work.exposure.to_dataset(at=[one.time]).sel(time=one.time, method="nearest")
        ratio = float(ds.ambient_pressure) / float(work.exposure.surface_pressure)
        if not ratio > 1.05:
            raise RangeError(
                f"tidal_volume read at {one.time:g} min: at {ratio:.2f} times the surface pressure it tells "
                "nothing about density"
            )
        low, high = (float(np.log(volume / v) / np.log(ratio)) for v in (one.high, max(one.low, 1e-6)))
        return low, high
    return _DENSITY_POWER


# -- Lines ------------------------------------------------------------------------------------------


@dataclass(frozen=True)
class _Line:
    phase: int
    lane: str
    label: str
    expected: str
    outside: str = ""
    measured: str = ""
    box: bool = True


def _lines(work: _Work, out: xr.Dataset) -> list[_Line]:
    found: list[_Line] = []
    for k, phase in enumerate(work.phases):
        found += _patient_lines(work, out, k, phase)
        found += _attendant_lines(work, out, k, phase)
        found += _chamber_lines(work, out, k, phase)
    return found


def span(ends: Sequence[float] | Array, digits: int = 0, unit: str = "") -> str:
    """Return a range as text, one number where both ends print alike.

    Parameters
    ----------
    ends : sequence of float
        Lowest and highest.
    digits : int
        Decimals.
    unit : str
        Unit to write.

    Returns
    -------
    str
        Such as ``"20 to 22 kPa"``.

    Examples
    --------
    >>> span([20.4, 22.1], unit="kPa"), span([1.0, 1.0], 1)
    ('20 to 22 kPa', '1.0')
    """
    if np.isnan(ends).any():
        return "not known"
    texts = [f"{v:.{digits}f}" for v in ends]
    text = texts[0] if texts[0] == texts[1] else f"{texts[0]} to {texts[1]}"
    return f"{text} {unit}".rstrip()


def clock(minutes: float) -> str:
    """Return minutes of a treatment as hours and minutes, with seconds where they matter.

    Parameters
    ----------
    minutes : float
        Time [min].

    Returns
    -------
    str
        Such as ``"1:05"``.

    Examples
    --------
    >>> clock(65.0), clock(2.25)
    ('1:05', '0:02:15')
    """
    seconds = round(minutes * 60.0)
    text = f"{seconds // 3600}:{seconds // 60 % 60:02d}"
    return text if seconds % 60 == 0 else f"{text}:{seconds % 60:02d}"


def _told(work: _Work, name: str, phase: _Phase) -> str:
    """Last reading of a phase, as written; one at its end belongs to it."""
    inside = [r for r in work.read(name) if phase.start + 1e-9 < r.time <= phase.end + 1e-9]
    return inside[-1].text if inside else ""


def _patient_lines(work: _Work, out: xr.Dataset, k: int, phase: _Phase) -> list[_Line]:
    found: list[_Line] = []
    devices, room = work.devices, work.room
    row = out.isel(phase=k)

    def add(label: str, expected: str, outside: str = "", measured: str = "", box: bool = True) -> None:
        found.append(_Line(k, "patient", label, expected, outside, measured, box))

    if phase.travel > 0:
        rate = (phase.last_pressure - phase.first_pressure) / (phase.end - phase.start)
        most = float(out.travel_rate)
        fsw = [float(convert(v, "kPa/min", "fsw/min")) for v in (rate, most)]
        add(
            f"ears, cleared every {60.0 * room.ear_interval:.0f} s",
            f"up to {float(row.middle_ear_difference):.1f} kPa at {fsw[0]:.1f} fsw/min",
            f"slower than {fsw[1]:.1f} fsw/min keeps it under {room.ear_limit:.1f} kPa; pain: stop",
        )
        losses = [
            float(
                trapped_volume_loss(
                    min(1.0, 1.0 / (phase.end - phase.start)),
                    phase.first_pressure,
                    phase.last_pressure,
                    profile=profile,
                )
            )
            for profile in ("linear", "constant_ratio")
        ]
        add(
            "trapped volume lost in the first minute",
            f"{100 * losses[0]:.1f} % linear, {100 * losses[1]:.1f} % at constant ratio",
            "most of it early: begin slowly",
            box=False,
        )
        if devices.cuff_volume is not None:
            factor = float(row.cuff_factor)
            add(
                f"cuff of {1000 * devices.cuff_volume:.0f} mL air",
                f"{1000 * factor * devices.cuff_volume:.1f} mL on arrival",
                "leak: refill at pressure, keep 20 to 30 cmH2O; water is not pressure-free, measure",
            )
    first_oxygen = (
        phase.oxygen > 0.5
        and phase.travel == 0
        and not any(
            p.oxygen > 0.5 and p.travel == 0 and p.first_pressure == phase.first_pressure
            for p in work.phases[:k]
        )
    )
    first_of_all = first_oxygen and not any(p.oxygen > 0.5 and p.travel == 0 for p in work.phases[:k])
    if phase.oxygen > 0.5 and phase.travel == 0:
        kilopascals = row.arterial_po2.values
        add(
            "arterial PO2",
            f"{span(kilopascals, 0, 'kPa')} ({span(convert(kilopascals, 'kPa', 'mmHg'), 0, 'mmHg')})",
            "below: mask leak, more shunt than at the bedside; above: check sample and its delay"
            if first_of_all
            else "",
            _told(work, "arterial_po2", phase),
        )
        if first_oxygen:
            content = row.arterial_o2_content.values
            add("arterial O2 content", span(content, 1, "mL/dL"))
    if first_oxygen and devices.tidal_volume is not None:
        add(
            f"exhaled volume of {1000 * devices.tidal_volume:.0f} mL set",
            span(1000 * row.tidal_volume.values, 0, "mL"),
            "less: volume mode loses with density; measure at pressure, watch PCO2" if first_of_all else "",
            _told(work, "tidal_volume", phase),
        )
    if phase.travel < 0 and phase.first_pressure > phase.last_pressure + 20.0:
        last = k == max(j for j, p in enumerate(work.phases) if p.travel < 0)
        humid, dry = float(row.trapped_ratio_humid), float(row.trapped_ratio_dry)
        text = f"x {humid:.2f} humid, x {dry:.2f} dry on surfacing"
        if devices.trapped_gas is not None:
            v = 1000 * devices.trapped_gas
            text = f"{v:.0f} mL here: {v * humid:.0f} humid, {v * dry:.0f} dry at the surface"
        add("trapped gas", text, "chest pain, one-sided breath sounds: stop the ascent" if last else "")
        if devices.cuff_volume is not None and last:
            factor = float(row.cuff_factor)
            v = 1000 * devices.cuff_volume
            add(
                "cuff",
                f"{v:.0f} mL filled here grow to {v / factor:.0f} mL",
                "let air out on the way: 20 to 30 cmH2O",
            )
        if devices.drip_chamber is not None and last:
            v = 1000 * devices.drip_chamber
            add("drip chamber", f"{v:.0f} mL air to {v * dry:.0f} mL", "fill high before ascent, vent glass")
    if k == len(work.phases) - 1 or (phase.oxygen > 0.5 and phase.travel == 0):
        add("oxygen dose so far", f"{float(row.uptd):.0f} UPTD", box=False)
    return found


def _attendant_lines(work: _Work, out: xr.Dataset, k: int, phase: _Phase) -> list[_Line]:
    gases = [str(g) for g in out.attendant_gas.values]
    before = gases[k - 1].split(" then ")[-1] if k else ""
    if gases[k] == before:
        return []
    text = gases[k]
    outside = ""
    if "oxygen" in text:
        starts = _first_oxygen(work, phase)
        text = f"oxygen from {clock(starts)}" if starts > phase.start + 1e-6 else "oxygen from here"
        outside = "not begun or broken off: time is still owed"
    elif k == 0:
        text = "chamber air"
    else:
        text = f"{gases[k]} again"
    return [_Line(k, "attendant", work.room.attendant_code or "breathes", text, outside, box=k > 0)]


def _first_oxygen(work: _Work, phase: _Phase) -> float:
    times = work.tender.pieces().times
    for j in range(len(work.tender.part)):
        if work.tender.fractions["O2"][j] > 0.99 and times[j + 1] > phase.start + 1e-9:
            return float(max(times[j], phase.start))
    return phase.start


def _chamber_lines(work: _Work, out: xr.Dataset, k: int, phase: _Phase) -> list[_Line]:
    row = out.isel(phase=k)
    first = k == 0
    o2 = 100 * row.chamber_o2_fraction.values
    limit = 100 * work.room.o2_limit
    sev = 100 * row.chamber_pco2.values / float(ATMOSPHERE)
    over = f"above {limit:g} %: ventilate, find the leak"
    found = [
        _Line(
            k,
            "chamber",
            "O2",
            span(o2, 1, "%"),
            over if first or o2[1] > limit else "",
            _told(work, "chamber_o2_fraction", phase),
        ),
        _Line(
            k,
            "chamber",
            "CO2",
            span(sev, 2, "%"),
            f"above {100 * work.room.co2_limit:g} %: ventilate" if first else "",
            _told(work, "chamber_pco2", phase),
        ),
    ]
    bank = row.oxygen_pressure.values / 100.0
    if work.room.oxygen.cylinders and (phase.oxygen > 0.5 or "oxygen" in str(row.attendant_gas.values)):
        reserve = work.room.oxygen.reserve_pressure / 100.0
        short = np.isnan(bank).any() or bank.min() < reserve
        found.append(
            _Line(
                k,
                "chamber",
                "O2 bank",
                "may be empty" if np.isnan(bank).any() else span([bank.min(), bank.max()], 0, "bar"),
                f"under the reserve of {reserve:.0f} bar" if short else "",
                _told(work, "oxygen_pressure", phase),
            )
        )
    return found


#: What a person's values and readings are called on the page.
_NAMES = {
    "arterial_alveolar_ratio": ("arterial/alveolar ratio", ""),
    "shunt_fraction": ("shunt fraction", ""),
    "arterial_pco2": ("arterial PCO2", "kPa"),
    "hemoglobin": ("hemoglobin", "g/dL"),
    "cohb_fraction": ("carboxyhemoglobin", ""),
    "arteriovenous_difference": ("arteriovenous O2 difference", "mL/dL"),
}
_READ = {
    "arterial_po2": "arterial PO2",
    "arterial_pco2": "arterial PCO2",
    "chamber_o2_fraction": "chamber O2",
    "chamber_pco2": "chamber PCO2",
    "oxygen_pressure": "oxygen bank",
    "tidal_volume": "exhaled volume",
}


# -- Notes ------------------------------------------------------------------------------------------


def _notes(work: _Work, out: xr.Dataset, course: Course | None, schedule: Any) -> list[tuple[str, str]]:
    room, person = work.room, work.person
    found: list[tuple[str, str]] = []

    def add(heading: str, *texts: str) -> None:
        found.extend((heading, t) for t in texts if t)

    told = {n: f"{word} {person.value(n):.3g} {unit}".rstrip() for n, (word, unit) in _NAMES.items()}
    measured = [text for n, text in told.items() if person.is_measured(n)]
    assumed = [text for n, text in told.items() if not person.is_measured(n)]
    add(
        "Patient",
        f"measured: {', '.join(measured) or 'nothing'}",
        f"assumed: {', '.join(assumed) or 'nothing'}",
        *(f"read at {clock(r.time)}: {_READ[r.name]} {r.text}" for r in work.readings),
    )
    add("Oxygen dose", *_dose_notes(work, out, course))
    add("Trapped gas", *_trapped_notes(work, out))
    add("Attendant", f"rule: {work.rule}", *_attendant_notes(work, schedule))
    add("Heat and humidity of compression", *_heat_notes(work))
    add(
        "Chamber",
        f"{room.code}: {room.volume / 1000:.1f} m3, ventilated with {room.air_flow:.0f} L/min (actual), "
        f"{'masks dump overboard' if room.overboard_dump else 'masks do not dump overboard'}, leak "
        f"{span(out.mask_leak.values, 1, 'L/min a mask')}",
        f"ventilation that keeps {100 * room.o2_limit:g} % O2 for ever: "
        f"{span(out.air_flow_for_o2.values, 0, 'L/min')}; {100 * room.co2_limit:g} % CO2: "
        f"{span(out.air_flow_for_co2.values, 0, 'L/min')}",
        f"free air of the run: {float(out.air_used) / 1000:.1f} m3; oxygen: "
        f"{span(out.oxygen_used.values[:, -1] / 1000, 1, 'm3 at 1 atm')}",
        *_air_notes(work, out),
        *_crossed(out),
    )
    add("Cautions", *CAUTIONS)
    add("Not considered", *NOT_CONSIDERED)
    return found


def _dose_notes(work: _Work, out: xr.Dataset, course: Course | None) -> list[str]:
    session = float(out.uptd[-1])
    found = [f"this session {session:.0f} UPTD (exponent 5/6, all segments)"]
    if course is not None:
        ds = course_doses(course, ["uptd"])
        done = ds.course_dose.sel(measure="uptd")
        found.append(
            f"course of {ds.sizes['session']} sessions: {float(done[-1]):.0f} UPTD, no recovery counted; "
            f"most on one day {float(ds.day_dose.sel(measure='uptd').max()):.0f}"
        )
    breaks = sum(p.part == "air break" for p in work.phases)
    minutes = [p.end - p.start for p in work.phases if p.oxygen > 0.5]
    found.append(f"{breaks} air breaks; longest phase on oxygen {max(minutes, default=0.0):.0f} min")
    return found


def _trapped_notes(work: _Work, out: xr.Dataset) -> list[str]:
    best = int(np.argmax(out.trapped_ratio_humid.values))
    row = out.isel(phase=best)
    pressure = max(float(row.start_pressure), float(row.end_pressure))
    atm = pressure / float(ATMOSPHERE)
    humid, dry = float(row.trapped_ratio_humid), float(row.trapped_ratio_dry)
    found = [
        f"on surfacing from {atm:.2f} atm abs gas trapped there grows {humid:.2f} times in the body "
        f"(saturated), {dry:.2f} times dry"
    ]
    gas = work.devices.trapped_gas
    if gas is not None:
        v = 1000 * gas
        found.append(
            f"{v:.0f} mL seen at the surface: {v / humid:.0f} mL at {atm:.2f} atm abs; {v:.0f} mL found "
            f"there: {v * humid:.0f} mL humid, {v * dry:.0f} mL dry at the surface"
        )
    return found


def _heat_notes(work: _Work) -> list[str]:
    down = [p for p in work.phases if p.travel > 0]
    if not down:
        return []
    first, last = down[0].first_pressure, max(p.last_pressure for p in down)
    start = work.room.temperature
    with validity("ignore"):
        bound = float(isentropic_temperature(start, first, last))
        filled = float(filling_temperature(start, first, last, start))
        moist = float(humidity_after(0.4, first, last, start, start))
    return [
        f"without loss of heat {filled - start:.0f} K by filling, at most {bound - start:.0f} K; real "
        "chambers 5 to 15 K, the walls take it up within about a minute (weakly remembered); ascent cools",
        f"air of 40 % relative humidity would come to {100 * moist:.0f} % once cooled; dry air lowers it",
        "temperature allowed (US Navy, Revision 4): under 29.4 degC without limit of time, to 34.4 degC 6 h, "
        "to 40 degC 2 h (tables 5 and 9)",
    ]


def _attendant_notes(work: _Work, schedule: Any) -> list[str]:
    found = []
    attrs = work.tender.attrs
    if "attendant_oxygen_owed" in attrs:
        owed, given = float(attrs["attendant_oxygen_owed"]), float(attrs["attendant_oxygen_given"])
        if given < owed:
            found.append(f"owed before the ascent {owed:g} min, only {given:g} min fit")
    name = str(schedule) if isinstance(schedule, str) else ""
    found += _practice(work)
    with validity("ignore"):
        for model in MODELS:
            try:
                ds = tensions(work.tender, model)
                share = float(ds.limit_fraction.max())
            except ValidityError:
                continue
            found.append(f"inert gas by {model}: at most {100 * share:.0f} % of that model's limit")
    rows = surface_intervals(name)
    if rows:
        words = ", ".join(f"{r['next']} {r['hours']} h" for r in rows if r["next"] != "near the chamber")
        found.append(f"at the surface before: {words} ({rows[0]['edition'].split(' p ')[0]}, read)")
    else:
        found.append("no interval before diving or flying is known for this schedule; the unit's own applies")
    return found


def _practice(work: _Work) -> list[str]:
    """What one center did at such pressures and bottom times; not a rule of an authority."""
    highest = max(max(p.first_pressure, p.last_pressure) for p in work.phases)
    up = [p.start for p in work.phases if p.travel < 0]
    if not up or highest > 2.41 * float(ATMOSPHERE):
        return []
    bottom = up[-1]
    rows = [r for r in read_rows("attendants.csv") if r["source"] == "witucki_2013"]
    for row in rows:
        if int(row["bottom_from"]) <= bottom < int(row["bottom_to"]) + 1:
            minutes = f"{row['minutes']} min of oxygen" if int(row["minutes"]) else "no oxygen"
            return [
                f"one center's practice, not a rule: bottom time {bottom:.0f} min at 2.4 atm abs or less, "
                f"{minutes} before the ascent (Witucki 2013, read)"
            ]
    return []


def _air_notes(work: _Work, out: xr.Dataset) -> list[str]:
    """Compressor or bank for the air, and how long the chamber may stay shut."""
    room, found = work.room, []
    down = [p for p in work.phases if p.travel > 0]
    if down:
        one = max(down, key=lambda p: (p.last_pressure - p.first_pressure) / (p.end - p.start))
        ends = (one.first_pressure, one.last_pressure)
        flow = float(compressor_flow(room.volume, *ends, one.end - one.start, room.air_flow))
        text = f"compression and ventilation ask for {flow / 1000:.1f} m3 of free air a minute"
        stock = room.air
        if stock.cylinders:
            count = float(
                cylinders_needed(
                    float(out.air_used), stock.water_capacity, stock.pressure, stock.reserve_pressure
                )
            )
            text += f"; the run takes {count:.1f} of {stock.cylinders} air cylinders, ideal gas"
        found.append(text)
    shut = [
        _unless(time_to_o2, room.o2_limit, room.volume, room.patients * room.mask_leak[1], 0.0),
        _unless(
            time_to_co2,
            room.co2_limit * float(ATMOSPHERE),
            room.volume,
            room.attendants * room.working * room.co2_output_stpd[1],
            0.0,
            temperature=room.temperature,
        ),
    ]
    found.append(
        f"shut, at the highest leak and output: {100 * room.o2_limit:g} % O2 after {shut[0]}, "
        f"{100 * room.co2_limit:g} % CO2 after {shut[1]}"
    )
    return found


def _unless(f: Any, *inputs: float, **more: float) -> str:
    try:
        return f"{float(f(*inputs, **more)):.0f} min"
    except NotReachableError:
        return "no time: it is not reached"


def _crossed(out: xr.Dataset) -> Sequence[str]:
    found = []
    for name in out.limit.values:
        row = out.sel(limit=name)
        when = row.atmosphere_first_crossing.values
        value = 100 * float(row.atmosphere_limit_value)
        whose = f"{value:g} % {'CO2' if 'co2' in str(name) else 'O2'}, {row.atmosphere_authority.values}"
        if np.isnan(when).all():
            continue
        earliest = float(np.nanmin(when))
        certain = not np.isnan(when).any()
        found.append(f"beyond {whose} from {earliest:.0f} min{'' if certain else ' at the highest leak'}")
    return found
