"""One number explained: the chain of equations behind it, evaluated again from recorded inputs."""

from __future__ import annotations

import itertools
import json
from collections.abc import Callable
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.breathing.loop_model import loop_again
from gasphys.constants import BODY_VAPOR_PRESSURE, FSW, MSW
from gasphys.doses import MEASURES
from gasphys.doses.course import RECOVERS, SUMS, recovering
from gasphys.doses.measures import closed_circuit, worst_day
from gasphys.doses.model import recovers, with_recovery
from gasphys.equation import EquationFunction, Working
from gasphys.errors import GasphysError, unknown_name
from gasphys.exposure import Exposure, Pieces
from gasphys.gas import FORMULAS
from gasphys.gas_exchange import breath_hold, carboxyhemoglobin
from gasphys.person import Person
from gasphys.policy import validity
from gasphys.registry import equations
from gasphys.reviews import PERSONAL, TISSUE_FACTORS
from gasphys.tissues import slip_flow, tensions
from gasphys.tissues.kinetics import serial_after

__all__ = ["Explanation", "explain"]


class Explanation:
    """The chain of workings behind one stored number.

    Parameters
    ----------
    name : str
        Variable explained.
    value : float
        Value evaluated again.
    stored : float
        Value in the Dataset.
    steps : list of Working
        Equations in the order they are needed; the last gives the value.
    given : dict
        Values taken from the Dataset as given.
    """

    def __init__(
        self, name: str, value: float, stored: float, steps: list[Working], given: dict[str, float]
    ) -> None:
        self.name, self.value, self.stored = name, value, stored
        self.steps, self.given = steps, given

    def __str__(self) -> str:
        lines = [f"{self.name} = {self.value:.7g} (stored {self.stored:.7g})"]
        if self.given:
            lines.append("as given: " + ", ".join(f"{k} = {v:.7g}" for k, v in self.given.items()))
        lines.extend(str(step) for step in self.steps)
        return "\n".join(lines)

    __repr__ = __str__


def explain(ds: xr.Dataset, name: str, time: float | None = None, **labels: Any) -> Explanation:
    """Evaluate one number of a result again, with the plain equations, and show the chain.

    Parameters
    ----------
    ds : Dataset
        A result of gasphys.
    name : str
        A variable of it.
    time : float, optional
        Instant [min], one of the Dataset's own times.
    **labels
        Labels along further dimensions, such as ``inert_gas="N2"`` or ``segment=3``.

    Returns
    -------
    Explanation
        ``str()`` prints the chain; ``value`` equals ``stored``.

    Raises
    ------
    UnknownNameError
        If there is no such variable.
    GasphysError
        If the time or a label is not in the Dataset, or a dimension is left open.

    Examples
    --------
    >>> import gasphys as gp
    >>> session = gp.Exposure.start("oxygen").travel(pressure="2.4 atm", minutes=10)
    >>> ds = gp.gas_exchange.oxygenation(session)
    >>> found = explain(ds, "alveolar_po2", time=10.0)
    >>> round(found.value, 2), found.value == found.stored
    (231.58, True)
    """
    if name not in ds.variables:
        raise unknown_name("variable", name, [str(v) for v in ds.data_vars])
    if name in ("dose", "total") and "measure" in ds.dims:
        return _explain_dose(ds, name, labels)
    if name == "course_dose" and "measure" in ds.dims:
        return _explain_course_dose(ds, labels)
    if name in _OF_A_REVIEW and "limit" in ds.dims:
        return _explain_review(ds, name, labels)
    if "integral_of" in ds[name].attrs:
        return _explain_integral(ds, name, time, labels)
    if "serial_flow" in ds[name].attrs:
        return _explain_serial(ds, name, time, labels)
    row = _select(ds, name, time, labels)
    steps: list[Working] = []
    given: dict[str, float] = {}
    value = _evaluate(row, name, steps, given, labels)
    return Explanation(name, value, float(row[name].values), steps, given)


# -- serial compartments: the last straight stretch integrated again; the flows at the instant are the chain


def _explain_serial(ds: xr.Dataset, name: str, time: float | None, labels: dict[str, Any]) -> Explanation:
    stored = float(_select(ds, name, time, labels)[name].values)
    row = ds.isel(time=int(np.argmin(np.abs(ds["time"].values - (time or 0.0)))))
    flow = json.loads(ds[name].attrs["serial_flow"])
    begin = row["start_tissue_pressure"].values.tolist()
    numbers = [float(row[f"stretch_{k}"].values) for k in ("duration", "start_pressure", "end_pressure")]
    after = serial_after(begin, *numbers, **flow)
    place = ds["compartment"].values.tolist().index(str(labels["compartment"]))
    chain = [numbers[2], *after]
    steps = [
        slip_flow.working(upstream_pressure=one, downstream_pressure=other, **flow)
        for one, other in itertools.pairwise(chain[place : place + 3])
    ]
    given = {"length of the last straight stretch, integrated again": numbers[0]}
    names = ds["compartment"].values
    given |= {f"compartment {c} at its start": v for c, v in zip(names, begin, strict=True)}
    return Explanation(name, after[place], stored, steps, given)


def _labelled(ds: xr.Dataset, name: str, dim: str, labels: dict[str, Any]) -> tuple[xr.Dataset, str]:
    """Select one measure or limit and one scenario."""
    if dim not in labels:
        raise GasphysError(f"{name} has the dimension {dim}; give {dim}=")
    row = _select(ds, name, None, labels)
    return row, str(labels[dim])


# -- integrals: run again from what the result recorded; the rates at the instant are the chain -------

_RUNS: dict[str, Callable[..., xr.Dataset]] = {
    "carboxyhemoglobin": carboxyhemoglobin,
    "breath_hold": breath_hold,
    "loop_oxygen": lambda exposure, _, **run: loop_again(exposure, **run),
}


def _explain_integral(ds: xr.Dataset, name: str, time: float | None, labels: dict[str, Any]) -> Explanation:
    stored = float(_select(ds, name, time, labels)[name].values)
    if np.isnan(stored):
        return Explanation(name, stored, stored, [], {"never": stored})
    scenario = {k: v for k, v in labels.items() if k in Exposure.from_dataset(ds).dims}
    one = ds.sel(scenario)
    run = json.loads(ds.attrs["run"])
    model, person = _RUNS[run.pop("model")], run.pop("person")
    exposure, person = Exposure.from_dataset(one), Person(**{**person, "assumed": tuple(person["assumed"])})
    rest = {k: v for k, v in labels.items() if k not in scenario}
    again = model(exposure, person, **run, at=one["time"].values)
    value = float(_select(again, name, time, rest)[name].values)
    instant = stored if time is None else time
    at_instant = again if time is not None else model(exposure, person, **run, at=[instant])
    instant = float(at_instant["time"].sel(time=instant, method="nearest"))
    steps: list[Working] = []
    given = {"integrated again from the start [min]": instant}
    for rate in str(ds[name].attrs["integral_of"]).split():
        row = _select(at_instant, rate, instant, {})
        given[f"{rate} there"] = _evaluate(row, rate, steps, given, {})
    return Explanation(name, value, stored, steps, given)


# -- doses: the ramp equation of every piece that counts, what intervals take off, what the sum means --

_DAY = 24.0 * 60.0


def _explain_dose(ds: xr.Dataset, name: str, labels: dict[str, Any]) -> Explanation:
    row, measure = _labelled(ds, name, "measure", labels)
    one = MEASURES[measure]
    stored = float(row[name].values)
    if np.isnan(stored):
        return Explanation(name, stored, stored, [], {str(row["reason"].values): stored})
    exposure = Exposure.from_dataset(row)
    pieces, counts = exposure.pieces(), row["counted"].values.astype(bool)
    if one.whole is not None:
        told = _explain_closed_circuit if measure == "usn_closed_circuit_o2" else _explain_worst_day
        value, steps, given = told(measure, pieces, counts)
        return Explanation(name, value, stored, steps, given)
    each, steps = _dose_of_pieces(measure, pieces, counts)
    total, given = float(each.sum()), {}
    if recovers(measure, str(ds.attrs["recovery"])):
        sums, intervals = with_recovery(each, exposure, pieces, str(ds.attrs["recovery"]))
        total = float(sums)
        f = equations()["doses.noaa_cns_after_interval"]
        for before, minutes in intervals:
            taken = {"fraction": float(before), "surface_interval": float(minutes)}
            steps.append(f.working(**taken, rule=str(ds.attrs["recovery"])))
    if "carried_total" in row:
        carried = float(row["carried_total"].values)
        given["carried on from the exposure before"] = carried
        total += carried
    given["sum over the pieces"] = total
    if one.is_symptom_risk:
        for word in ("low", "high"):
            rate = float(row[f"seizure_rate_{word}"].values)
            given[f"{word}est seizure rate of clinics near this PO2, per treatment"] = rate
    value = _linked(measure, total, steps) if name == "dose" else total
    return Explanation(name, value, stored, steps, given)


def _linked(measure: str, total: float, steps: list[Working]) -> float:
    """Follow the equations from the sum to the dose; return the dose."""
    number = total
    for link in MEASURES[measure].links:
        with validity("ignore"):
            steps.append(link.equation.working(**{**link.given, link.argument: number}))
        number = float(steps[-1].result)
    return number


def _explain_worst_day(
    measure: str, pieces: Pieces, counts: NDArray[np.bool_]
) -> tuple[float, list[Working], dict[str, float]]:
    """Add up the pieces of the 24 h with the largest share."""
    _, end = worst_day(pieces, counts, str(MEASURES[measure].options["rule"]))
    begin = max(float(end) - _DAY, 0.0)
    each, steps = _dose_of_pieces(measure, pieces, counts, begin, float(end))
    total = float(each.sum())
    given = {"from minute": begin, "to minute": float(end), "sum over the pieces between": total}
    return total, steps, given


def _explain_closed_circuit(
    measure: str, pieces: Pieces, counts: NDArray[np.bool_]
) -> tuple[float, list[Working], dict[str, float]]:
    """Take the piece at whose end most of the permitted time is used."""
    found = closed_circuit(pieces, counts)
    used = found.used(np.ones(found.on.shape), pieces.duration)
    k = int(np.argmax(used))
    minutes = float(found.before[k] + pieces.duration[k])
    depth = float(max(found.deepest[k], found.depths[0][k], found.depths[1][k]))
    f = equations()["doses.usn_closed_circuit_o2_limit"]
    step = f.working(depth=depth, **MEASURES[measure].options)
    given = {
        f"greatest depth, fsw of {float(FSW):.6g} kPa": depth,
        "minutes on oxygen, with those of dives less than 2 h before": minutes,
    }
    return minutes / float(step.result), [step], given


def _explain_course_dose(ds: xr.Dataset, labels: dict[str, Any]) -> Explanation:
    """Follow a course from its sessions' sums, recovery between them by its equation."""
    row, measure = _labelled(ds, "course_dose", "measure", labels)
    stored, rule = float(row["course_dose"].values), str(row["course_rule"].values)
    if np.isnan(stored):
        reason = str(row["course_reason"].values) or f"the course rule is: {rule}"
        return Explanation("course_dose", stored, stored, [], {reason: stored})
    last = int(row["session"].values) + 1
    so_far = ds.sel(measure=measure).isel(session=slice(0, last))
    totals = so_far["session_total"].values
    given = {f"sum over the pieces of session {n}": float(v) for n, v in enumerate(totals, 1)}
    steps: list[Working] = []
    if rule == SUMS:
        total = float(totals.sum())
    elif rule == RECOVERS:
        intervals, po2 = so_far["interval_before"].values[1:], so_far["recovery_po2"].values
        after = recovering(totals, intervals, po2)
        f = equations()["doses.vital_capacity_after_recovery"]
        for n, minutes in enumerate(intervals):
            loss = MEASURES["vital_capacity_loss"].dose(np.asarray(after[n]))
            with validity("ignore"):
                steps.append(f.working(loss=float(loss), exposure_po2=float(po2[n]), duration=float(minutes)))
        total = float(after[-1])
    given["sum of the course"] = total
    value = _linked(measure, total, steps)
    return Explanation("course_dose", value, stored, steps, given)


def _dose_of_pieces(
    measure: str, pieces: Pieces, counts: NDArray[np.bool_], begin: float = 0.0, end: float = np.inf
) -> tuple[NDArray[np.float64], list[Working]]:
    """Return what each piece adds between two instants, and the workings of those that add something."""
    one = MEASURES[measure]
    f = equations()[one.equation]
    each, steps = np.zeros(len(counts)), []
    for k in range(len(counts)):
        length, begun = float(pieces.duration[k]), float(pieces.times[k])
        if not counts[k] or length == 0.0:
            continue
        from_share, to_share = (float(np.clip((t - begun) / length, 0.0, 1.0)) for t in (begin, end))
        rise = float(pieces.end_po2[k]) - float(pieces.start_po2[k])
        first, last = (float(pieces.start_po2[k]) + rise * share for share in (from_share, to_share))
        minutes = length * (to_share - from_share)
        if not minutes > 0.0:
            continue
        each[k] = float(np.asarray(one.kernel(np.asarray(first), np.asarray(last), np.asarray(minutes))))
        if each[k] == 0.0 or np.isnan(each[k]):
            continue
        ends = {"start_po2": first, "end_po2": last}
        if "po2" in {a.name for a in f.arguments}:
            ends = {"po2": max(first, last)}
        with validity("ignore"):
            steps.append(f.working(duration=minutes, **ends, **one.options))
    return each, steps


# -- reviews: the reviewed quantity evaluated again at the instant named --------------------------

_OF_A_REVIEW = ("worst", "limit_value", "margin", "time_of_worst", "first_crossing", "time_beyond")


def _explain_review(ds: xr.Dataset, name: str, labels: dict[str, Any]) -> Explanation:
    row, identifier = _labelled(ds, name, "limit", labels)
    stored = float(row[name].values)
    limit, what = float(row["limit_value"].values), str(row["quantity"].values)
    given = {f"limit {identifier}, {row['published'].values} ({row['authority'].values})": limit}
    if name == "limit_value" or np.isnan(stored):
        reason = str(row["reason"].values)
        return Explanation(name, stored, stored, [], given if not reason else {reason: stored})
    exposure = Exposure.from_dataset(row)
    sign = 1.0 if str(row["comparison"].values) == "<=" else -1.0
    model = str(row["model"].values)
    known = json.loads(ds.attrs.get("person_values", "{}"))
    known |= {n: float(row[n].values) for n in PERSONAL if n in row}
    changed = [n for n in TISSUE_FACTORS if n in row or n in ds.attrs]
    if model and changed:
        raise GasphysError(
            f"{identifier}: the numbers of {model} were multiplied ({', '.join(changed)}); only a review "
            "with the published ones is explained"
        )
    if name == "first_crossing":
        at = [stored]
        value, steps = _reviewed(exposure, what, stored, sign, after=True, model=model, known=known)
        given[f"{what} at {stored:.7g} min"] = value
        return Explanation(name, at[0], stored, steps, given)
    if name == "time_beyond":
        first = float(row["first_crossing"].values)
        given["first crossing"] = first
        return Explanation(name, stored, stored, [], given)
    when = float(row["time_of_worst"].values)
    worst, steps = _reviewed(exposure, what, when, sign, after=False, model=model, known=known)
    if name == "time_of_worst":
        given[f"{what} there"] = worst
        return Explanation(name, when, stored, steps, given)
    value = worst if name == "worst" else sign * (limit - worst)
    return Explanation(name, value, stored, steps, given)


def _reviewed(
    exposure: Exposure,
    what: str,
    when: float,
    sign: float,
    after: bool,
    model: str,
    known: dict[str, float],
) -> tuple[float, list[Working]]:
    """Evaluate a reviewed quantity at an instant: of the pieces that meet there, the farther one."""
    if model:
        with validity("ignore"):
            held = tensions(exposure, model, at=[when])
        held = held.isel(time=int(np.argmin(np.abs(held["time"].values - when))))
        worst = str(held["compartment"].values[int(np.nanargmax(held["limit_fraction"].values))])
        told = explain(held, "limit_fraction", compartment=worst)
        return told.value, told.steps
    pieces = exposure.pieces()
    measure = next((m for m, q in _DOSE_QUANTITIES.items() if q == what), "")
    times = pieces.times
    if measure:
        every = np.ones(len(pieces.duration), dtype=bool)
        each, steps = _dose_of_pieces(measure, pieces, every, end=when)
        return _linked(measure, float(each.sum()), steps), steps
    found: list[tuple[float, list[Working]]] = []
    for k in range(len(pieces.duration)):
        if pieces.duration[k] > 0.0 and times[k] - 1e-9 <= when <= times[k + 1] + 1e-9:
            share = float(np.clip((when - times[k]) / pieces.duration[k], 0.0, 1.0))
            if after and share > 1.0 - 1e-12 and k + 1 < len(pieces.duration):
                continue
            found.append(_at_piece(exposure, what, k, share, known))
    return max(found, key=lambda pair: sign * pair[0])


_DOSE_QUANTITIES = {
    "noaa_cns": "noaa_cns_single_fraction",
    "noaa_cns_day": "noaa_cns_day_fraction",
    "uptd": "uptd",
    "arieli_pulmonary_index": "arieli_pulmonary_index",
}


def _at_piece(
    exposure: Exposure, what: str, k: int, share: float, known: dict[str, float]
) -> tuple[float, list[Working]]:
    registry = equations()
    c = exposure.columns
    start, end = float(c["start_pressure"][k]), float(c["end_pressure"][k])
    if what == "compression_rate":
        return max(end - start, 0.0) / float(c["segment_duration"][k]), []
    steps = [
        registry["breathing_gas.linear_in_piece"].working(
            start_pressure=start, end_pressure=end, share_of_piece=share
        )
    ]
    pressure = float(steps[0].result)
    if what == "depth_on_helium":
        return max(pressure - float(exposure.surface_pressure), 0.0) / float(MSW), steps
    fractions = {g: float(v[k]) for g, v in exposure.fractions.items()}
    if what == "breathing_gas_co2_surface_equivalent":
        f = registry["doses.surface_equivalent"]
        steps.append(f.working(fraction=fractions.get("CO2", 0.0), ambient_pressure=pressure))
        return float(steps[-1].result), steps
    setpoint = float(c["setpoint"][k])
    if np.isnan(setpoint):
        f = registry["breathing_gas.open_circuit_po2"]
        steps.append(f.working(o2_fraction=fractions["O2"], ambient_pressure=pressure))
    else:
        f = registry["breathing_gas.loop_po2"]
        steps.append(f.working(setpoint=setpoint, ambient_pressure=pressure))
    po2 = float(steps[-1].result)
    if what == "breathing_gas_po2":
        return po2, steps
    if what == "breathing_gas_o2_fraction":
        return po2 / pressure, steps
    if what == "alveolar_po2":
        f = registry["breathing_gas.fraction_breathed"]
        steps.append(f.working(breathing_gas_po2=po2, ambient_pressure=pressure))
        co2 = fractions.get("CO2", 0.0) if np.isnan(setpoint) else 0.0
        with validity("ignore"):
            breath = {"fio2": float(steps[-1].result), "fico2": co2}
            step = registry["lungs.alveolar_po2"].working(
                ambient_pressure=pressure,
                **breath,
                alveolar_pco2=known["arterial_pco2"],
                respiratory_exchange_ratio=known["respiratory_exchange_ratio"],
            )
        return float(step.result), [*steps, step]
    rest = 1.0 - fractions["O2"]
    share_of_rest = (1.0 - po2 / pressure) / rest if rest > 0.0 else 0.0
    loop = not np.isnan(setpoint)
    if what == "breathing_gas_n2_pressure":
        given = fractions["N2"] + fractions.get("Ar", 0.0)
        return pressure * given * (share_of_rest if loop else 1.0), steps
    mix = {
        FORMULAS[g]: (po2 / pressure if g == "O2" else x * share_of_rest) if loop else x
        for g, x in {**dict.fromkeys(FORMULAS, 0.0), **fractions}.items()
    }
    with validity("ignore"):
        if what == "ventilatory_reserve":
            return _reserve(exposure, k, pressure, mix, known, steps)
        f = registry["real_gas.reference_density[scaled_1_atm]"]
        steps.append(f.working(ambient_pressure=pressure, **mix))
    return float(steps[-1].result), steps


def _reserve(
    exposure: Exposure,
    k: int,
    pressure: float,
    mix: dict[str, float],
    known: dict[str, float],
    steps: list[Working],
) -> tuple[float, list[Working]]:
    """Evaluate the ventilatory reserve in one piece: density, maximum ventilation, what is not used."""

    def then(name: str, **inputs: Any) -> float:
        steps.append(equations()[name].working(**inputs))
        return float(steps[-1].result)

    density = then(
        "real_gas.humid_density[virial]",
        ambient_pressure=pressure,
        **mix,
        temperature=37.0,
        water_vapor_pressure=float(BODY_VAPOR_PRESSURE),
    )
    most = then(
        "breathing.maximum_ventilation",
        surface_maximum_ventilation=known["surface_maximum_ventilation_btps"],
        density_ratio=then("breathing.density_ratio", density=density),
    )
    breathed = float(exposure.columns["ventilation_btps"][k])
    if np.isnan(breathed):
        uptake = float(exposure.columns["o2_uptake_stpd"][k])
        breathed = then("breathing.ventilation_for_o2_uptake", o2_uptake_stpd=uptake)
    reserve = then("breathing.ventilatory_reserve", ventilation_btps=breathed, maximum_ventilation=most)
    return reserve, steps


def _select(ds: xr.Dataset, name: str, time: float | None, labels: dict[str, Any]) -> xr.Dataset:
    row = ds
    if "time" in ds[name].dims:
        if time is None:
            raise GasphysError(f"{name} changes with time; give time=, one of the Dataset's own times")
        times = ds["time"].values
        index = int(np.argmin(np.abs(times - time)))
        if abs(times[index] - time) > 1e-9 * max(1.0, abs(time)):
            near = ", ".join(f"{t:g}" for t in times[max(0, index - 1) : index + 2])
            raise GasphysError(
                f"time = {time:g} min is not a time of the Dataset (nearest: {near}); compute it with "
                f"at=[{time:g}]"
            )
        row = row.isel(time=index)
        if "segment" in row.dims and "segment_of_time" in row:
            row = row.isel(segment=int(row["segment_of_time"].values))
    for dim, label in labels.items():
        if dim not in row.dims:
            raise unknown_name("dimension", dim, [str(d) for d in row.dims])
        try:
            row = row.sel({dim: label})
        except KeyError:
            raise GasphysError(f"{dim} = {label!r} is not in the Dataset") from None
    open_dims = [str(d) for d in row[name].dims]
    if open_dims:
        raise GasphysError(f"{name} has the dimension {open_dims[0]}; give {open_dims[0]}=")
    return row


def _evaluate(
    row: xr.Dataset, name: str, steps: list[Working], given: dict[str, float], labels: dict[str, Any]
) -> float:
    attrs = row[name].attrs
    if "equation" not in attrs:
        value = float(row[name].values)
        meanings = str(attrs.get("flag_meanings", "")).split()
        given[f"{name}, {meanings[int(value)]}" if meanings else name] = value
        return value
    done = [step for step in steps if step.variable == name]
    if done:
        return float(done[0].result)
    f = _equation(row, str(attrs["equation"]))
    values: dict[str, Any] = {}
    for key, source in json.loads(str(attrs["inputs"])).items():
        if key not in _accepted(f):
            continue
        values[key] = _input(row, source, steps, given, labels)
    with validity("ignore"):
        step = f.working(**values)
    step.variable = name
    steps.append(step)
    return float(step.result)


def _equation(row: xr.Dataset, text: str) -> EquationFunction:
    """Return the equation; where models, or open circuit and loop, differ, the one that holds here."""
    names = [part.strip() for part in text.split("|")]
    registry = equations()
    if len(names) == 1:
        return registry[names[0]]
    if "model" in row.coords:
        of_model = [n for n in names if n.endswith(f"_from_{row['model'].values}")]
        if of_model:
            return registry[of_model[0]]
    if "branch" in row:
        linear = str(row["branch"].values) == "linear"
        return registry[next(n for n in names if (".linear_" in n) == linear)]
    loop = not np.isnan(float(row["setpoint"].values))
    return registry[next(n for n in names if (".loop_" in n) == loop)]


def _accepted(f: EquationFunction) -> set[str]:
    names = {a.name for a in f.arguments}
    return names | set(getattr(f, "options", ()))


def _input(
    row: xr.Dataset, source: Any, steps: list[Working], given: dict[str, float], labels: dict[str, Any]
) -> Any:
    if not isinstance(source, str) or not source.startswith("@"):
        return source
    if " / " in source:
        top, bottom = (_input(row, part, steps, given, labels) for part in source.split(" / "))
        return top / bottom
    name, _, label = source[1:].partition(":")
    if label:
        gas = labels.get(label, label)
        value = float(row[name].sel(gas=gas).values)
        given[f"{name} of {gas}"] = value
        return value
    return _evaluate(row, name, steps, given, labels)
