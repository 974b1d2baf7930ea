"""A breathing loop along an exposure: what is in it, what went through it, when it turns hypoxic."""

from __future__ import annotations

import itertools
import json
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys import lungs
from gasphys.breathing.loop_kernel import Conditions, State, march
from gasphys.breathing.loops import semi_closed_o2_fraction
from gasphys.constants import ATMOSPHERE
from gasphys.errors import ExposureError, RangeError
from gasphys.exposure import Exposure
from gasphys.gas import FORMULAS, Gas
from gasphys.laws import convert_gas_volume
from gasphys.policy import validity
from gasphys.quantities import attributes, dataset_attributes, quantity

__all__ = [
    "BreathKeyed",
    "ClosedCircuit",
    "ConstantFlow",
    "ConstantRatio",
    "breathed_from",
    "loop_again",
    "loop_oxygen",
]

Array = NDArray[np.float64]

#: PO2 below which a loop is called hypoxic unless another is given, 0.16 atm: the limit of the review.
_HYPOXIA = 0.16 * float(ATMOSPHERE)

_CHECKED = {
    "flow": "supply_flow_stpd",
    "ratio": "injection_ratio",
    "share": "discharged_share",
    "setpoint": "setpoint",
    "largest_o2_flow": "o2_flow_stpd",
}


@dataclass(frozen=True)
class _Set:
    def __post_init__(self) -> None:
        for name, value in vars(self).items():
            if name in ("gas", "diluent"):
                object.__setattr__(self, name, None if value is None else Gas.parse(value))
            elif value is not None:
                object.__setattr__(self, name, _number(value, _CHECKED[name]))


@dataclass(frozen=True)
class ConstantFlow(_Set):
    """Semi-closed set with constant mass flow.

    Parameters
    ----------
    flow : float or str
        Flow of supply gas [L/min STPD].
    gas : Gas or str
        The supply gas.

    Raises
    ------
    RangeError
        If the flow is not possible.

    Examples
    --------
    >>> ConstantFlow(10.0, "nitrox 40").flow
    10.0
    """

    flow: Any
    gas: Any


@dataclass(frozen=True)
class ConstantRatio(_Set):
    """Semi-closed set whose supply is in proportion to ventilation by mass.

    Parameters
    ----------
    ratio : float
        Supply gas for each liter breathed [L STPD for each L BTPS].
    gas : Gas or str
        The supply gas.

    Examples
    --------
    >>> ConstantRatio(0.12, "nitrox 60").ratio
    0.12
    """

    ratio: Any
    gas: Any


@dataclass(frozen=True)
class BreathKeyed(_Set):
    """Semi-closed set that discharges a share of each breath.

    Parameters
    ----------
    share : float
        Share of each breath that is discharged [1].
    gas : Gas or str
        The supply gas.

    Examples
    --------
    >>> BreathKeyed(0.1, "nitrox 40").share
    0.1
    """

    share: Any
    gas: Any


@dataclass(frozen=True)
class ClosedCircuit(_Set):
    """Closed circuit held at a set-point.

    Parameters
    ----------
    setpoint : float or str, optional
        PO2 it is held at [kPa]; without one those of the exposure's own loop.
    diluent : Gas or str, optional
        Gas that keeps it full; without one those of the exposure's own loop.
    largest_o2_flow : float
        Flow of the oxygen valve when it is open [L/min STPD]; an assumption unless it was measured.

    Examples
    --------
    >>> ClosedCircuit("1.3 bar", "trimix 17/48").setpoint
    130.0
    """

    setpoint: Any = None
    diluent: Any = None
    largest_o2_flow: Any = 10.0


def _number(value: Any, name: str) -> float:
    one = quantity(name)
    number = one.from_text(value) if isinstance(value, str) else float(value)
    if not one.possible[0] <= number <= one.possible[1]:
        raise one.range_error(number)
    return number


def loop_oxygen(
    exposure: Exposure,
    loop: ConstantFlow | ConstantRatio | BreathKeyed | ClosedCircuit,
    *,
    volume: Any = 7.0,
    least_volume: Any = None,
    initial: Any = None,
    o2_uptake_stpd: Any = None,
    ventilation_btps: Any = None,
    temperature: Any = 37.0,
    water_vapor_pressure: Any = 0.0,
    fails_at: Any = None,
    valve_after_failure: bool = True,
    lowest_po2: Any = _HYPOXIA,
    at: Any = None,
) -> xr.Dataset:
    """Gas of a breathing loop along an exposure, by species.

    Parameters
    ----------
    exposure : Exposure
        Pressure and workload against time; its gas is used only where a closed circuit takes its set-point
        or diluent from it.
    loop : ConstantFlow, ConstantRatio, BreathKeyed or ClosedCircuit
        The set.
    volume : float or str
        Gas volume of loop and lungs when full [L].
    least_volume : float or str, optional
        Volume at which a valve adds gas [L]; default the full volume: the loop is kept full. Less than that
        only for constant flow.
    initial : Gas or str, optional
        Gas in the loop at the start; default the supply gas or diluent.
    o2_uptake_stpd, ventilation_btps : float, optional
        Workload [L/min], where the exposure does not hold it.
    temperature : float or str
        Temperature of the loop [degC].
    water_vapor_pressure : float or str
        Vapor pressure in the loop [kPa]; 0 counts it dry, as exposures count a loop.
    fails_at : float or str, optional
        Time at which the supply fails (of a closed circuit: the oxygen) [min].
    valve_after_failure : bool
        Whether the valve that keeps the loop full still adds gas then; if not the loop shrinks.
    lowest_po2 : float or str
        PO2 whose first crossing is sought [kPa].
    at : array_like, optional
        Times to add to the exposure's own [min].

    Returns
    -------
    Dataset
        On the exposure's ``time``: ``loop_o2_fraction``, ``loop_fraction(loop_gas)``, ``loop_gas_stpd``,
        ``loop_po2``, ``steady_o2_fraction`` (constant flow and ratio; NaN where there is none),
        ``gas_supplied(loop_gas)``, ``gas_discharged(loop_gas)``, ``o2_taken_up``;
        ``time_below_lowest_po2`` and ``time_oxygen_used_up`` [min], NaN never. After the oxygen is used up
        everything is NaN.

    Raises
    ------
    ExposureError
        If O2 uptake, or ventilation where the set needs it, is not known, or the loop cannot be followed.
    RangeError
        If a value is not possible.

    Notes
    -----
    Well mixed, CO2 absorbed, no uptake of inert gas, ideal gas, overpressure vented as mixed gas. In
    compression the surplus flow fills the loop first; only what is missing comes through the valve. Exact:
    every regime has a closed form.

    A closed circuit adds oxygen with its valve wide open below the set-point, none above it, and what is used
    and vented at it. Its diluent keeps it full.

    Nothing is said of the time a diver has: a hypoxic loop gives no warning.

    Examples
    --------
    >>> dive = Exposure.start("air", pressure=401.3, o2_uptake_stpd=1.2).stay(5)
    >>> ds = loop_oxygen(dive, ConstantFlow(10.0, "nitrox 40"), initial="air", at=[2.0])
    >>> ds.loop_o2_fraction.values.round(4)
    array([0.21  , 0.2656, 0.3003])
    """
    values = {
        "loop_volume": _number(volume, "loop_volume"),
        "least_volume": _number(volume if least_volume is None else least_volume, "loop_volume"),
        "temperature": _number(temperature, "temperature"),
        "water_vapor_pressure": _number(water_vapor_pressure, "water_vapor_pressure"),
        "lowest_po2": _number(lowest_po2, "loop_po2"),
    }
    if values["least_volume"] > values["loop_volume"]:
        raise RangeError("least_volume must not be above volume")
    if values["least_volume"] < values["loop_volume"] and not isinstance(loop, ConstantFlow):
        raise ExposureError("a least_volume below the full one is modeled for constant flow only")
    if fails_at is not None:
        if isinstance(loop, BreathKeyed):
            raise ExposureError(
                "fails_at: a breath-keyed set goes on discharging breaths when its supply fails; not modeled"
            )
        fails_at = _number(fails_at, "time")
        at = np.append(np.ravel([] if at is None else at), min(fails_at, exposure.duration))
    out = exposure.to_dataset(at=at)
    exposure = _with_workload(exposure, loop, o2_uptake_stpd, ventilation_btps)
    species = _species(exposure, loop, initial)
    plan = _Plan(exposure, loop, species, values, fails_at, valve_after_failure)
    shape = tuple(len(exposure.coords[d]) for d in exposure.dims)
    rows = [plan.follow(index, out, initial) for index in np.ndindex(shape)]
    run = {
        "loop": {"kind": type(loop).__name__, **{k: _plain(v) for k, v in vars(loop).items()}},
        "volume": values["loop_volume"],
        **{k: values[k] for k in ("least_volume", "temperature", "water_vapor_pressure", "lowest_po2")},
        "initial": None if initial is None else str(Gas.parse(initial)),
        "fails_at": fails_at,
        "valve_after_failure": valve_after_failure,
    }
    return _dataset(exposure, loop, out, rows, shape, species, values, run)


def _plain(value: Any) -> Any:
    return str(value) if isinstance(value, Gas) else value


def loop_again(exposure: Exposure, loop: dict[str, Any], **run: Any) -> xr.Dataset:
    """Run :func:`loop_oxygen` again from what a result recorded in its attribute ``run``.

    Parameters
    ----------
    exposure : Exposure
        The result's own.
    loop : dict
        Kind and fields of the set.
    **run
        As for :func:`loop_oxygen`.

    Returns
    -------
    Dataset
        As before.

    Examples
    --------
    >>> dive = Exposure.start("air", o2_uptake_stpd=1.2).stay(5)
    >>> ds = loop_again(dive, {"kind": "ConstantFlow", "flow": 10.0, "gas": "nitrox 40"}, volume=7.0)
    >>> ds.attrs["loop"]
    'ConstantFlow(flow=10.0, gas=nitrox 40)'
    """
    kinds = {one.__name__: one for one in (ConstantFlow, ConstantRatio, BreathKeyed, ClosedCircuit)}
    given = dict(loop)
    return loop_oxygen(exposure, kinds[given.pop("kind")](**given), **run)


def _with_workload(exposure: Exposure, loop: _Set, uptake: Any, ventilation: Any) -> Exposure:
    columns = dict(exposure.columns)
    given = {"o2_uptake_stpd": uptake, "ventilation_btps": ventilation}
    needed = ["o2_uptake_stpd"]
    if isinstance(loop, (ConstantRatio, BreathKeyed)):
        needed.append("ventilation_btps")
    for name in given:
        if given[name] is not None:
            number = _number(given[name], name)
            columns[name] = np.where(np.isnan(columns[name]), number, columns[name])
        if name in needed and np.isnan(columns[name]).any():
            raise ExposureError(f"{name} is not known in every piece; give it here or with Exposure.work")
    return replace(exposure, columns=columns)


def _species(exposure: Exposure, loop: Any, initial: Any) -> list[str]:
    mixes = [m for m in (getattr(loop, "gas", None), getattr(loop, "diluent", None)) if m is not None]
    if initial is not None:
        mixes.append(Gas.parse(initial))
    found = {f for f in FORMULAS if any(m.fraction(f) > 0.0 for m in mixes)}
    if isinstance(loop, ClosedCircuit) and loop.diluent is None:
        found |= {f for f, v in exposure.fractions.items() if np.any(v > 0.0)}
    return [f for f in FORMULAS if f in found | {"O2"}]


@dataclass(frozen=True)
class _Plan:
    """What one scenario needs to be followed."""

    exposure: Exposure
    loop: Any
    species: list[str]
    values: Mapping[str, float]
    fails_at: float | None
    valve_after_failure: bool

    def stpd(self, volume: float, pressure: float) -> float:
        """Dry gas of a volume at a pressure, as an amount."""
        humid = pressure - self.values["water_vapor_pressure"]
        if not humid > 0.0:
            raise RangeError(f"ambient_pressure = {pressure:g} kPa is below the vapor pressure of the loop")
        dry = convert_gas_volume.pick(source="atps", target="stpd").raw  # type: ignore[attr-defined]
        return float(dry(volume, humid, self.values["temperature"], 0.0))

    def mix(self, gas: Gas) -> Array:
        """Fractions of a gas by species."""
        return np.array([gas.fraction(f) for f in self.species])

    def piece(self, index: tuple[int, ...], k: int) -> dict[str, Any]:
        """Columns of one piece of one scenario."""

        def one(values: Array) -> float:
            lead = tuple(i if n > 1 else 0 for i, n in zip(index, values.shape[:-1], strict=True))
            return float(values[(*lead, k)])

        found: dict[str, Any] = {name: one(v) for name, v in self.exposure.columns.items()}
        found["gas"] = np.array(
            [one(self.exposure.fractions[f]) if f in self.exposure.fractions else 0.0 for f in self.species]
        )
        return found

    def begin(self, index: tuple[int, ...], initial: Any) -> State:
        """State at the start: a full loop."""
        piece = self.piece(index, 0)
        if initial is not None:
            gas = self.mix(Gas.parse(initial))
        elif isinstance(self.loop, ClosedCircuit):
            gas = piece["gas"] if self.loop.diluent is None else self.mix(self.loop.diluent)
        else:
            gas = self.mix(self.loop.gas)
        full = self.stpd(self.values["loop_volume"], piece["start_pressure"])
        return State(gas * full, np.zeros_like(gas))

    def conditions(self, piece: Mapping[str, Any], start: float, end: float, failed: bool) -> Conditions:
        """What holds in one step, which begins `start` and ends `end` minutes after the piece began."""
        length = piece["segment_duration"]
        rate = (piece["end_pressure"] - piece["start_pressure"]) / length
        pressure = piece["start_pressure"] + rate * start
        later = piece["start_pressure"] + rate * end
        full, least = (self.stpd(self.values[v], pressure) for v in ("loop_volume", "least_volume"))
        growth, least_growth = (
            (self.stpd(self.values[v], later) - now) / (end - start)
            for v, now in (("loop_volume", full), ("least_volume", least))
        )
        keyed = held = None
        loop = self.loop
        if isinstance(loop, ClosedCircuit):
            supply = np.array([1.0, *[0.0] * (len(self.species) - 1)])
            valve = piece["gas"] if loop.diluent is None else self.mix(loop.diluent)
            flow = loop.largest_o2_flow
            setpoint = piece["setpoint"] if loop.setpoint is None else loop.setpoint
            if np.isnan(setpoint):
                raise ExposureError(
                    "ClosedCircuit() without a set-point needs an exposure on a loop throughout"
                )
            # The amount that has this pressure in the full loop, whatever the ambient pressure.
            held = full * setpoint / (pressure - self.values["water_vapor_pressure"])
        else:
            supply = valve = self.mix(loop.gas)
            flow = 0.0
            if isinstance(loop, ConstantFlow):
                flow = loop.flow
            elif isinstance(loop, ConstantRatio):
                flow = loop.ratio * piece["ventilation_btps"]
            else:
                keyed = loop.share * piece["ventilation_btps"] / self.values["loop_volume"]
        if failed:
            flow, held = 0.0, None
            valve = valve if self.valve_after_failure else None
        return Conditions(
            full=full,
            growth=growth,
            least=least,
            least_growth=least_growth,
            uptake=piece["o2_uptake_stpd"],
            flow=flow,
            supply=supply,
            valve=valve,
            keyed=keyed,
            held=held,
        )

    def follow(self, index: tuple[int, ...], out: xr.Dataset, initial: Any) -> dict[str, Any]:
        """Follow one scenario through all times."""
        if "time" not in out.dims:
            raise ExposureError("a loop needs one time axis: the boundaries differ between scenarios")
        times = out["time"].values
        starts = self.exposure.pieces().times.reshape(-1, len(self.exposure.part) + 1)[0]
        segment = out["segment_of_time"].values
        state = self.begin(index, initial)
        amounts, supplied, taken = [state.amount], [state.supplied], [0.0]
        below = used_up = np.nan
        vapor, lowest = self.values["water_vapor_pressure"], self.values["lowest_po2"]
        for i, (start, end) in enumerate(itertools.pairwise(times)):
            piece = self.piece(index, int(segment[i]))
            begun = starts[segment[i]]
            failed = self.fails_at is not None and start >= self.fails_at * (1.0 - 1e-12)
            given = self.conditions(piece, start - begun, end - begun, failed)
            rate = (piece["end_pressure"] - piece["start_pressure"]) / piece["segment_duration"]
            pressure = piece["start_pressure"] + rate * (start - begun)

            def above(one: State, minutes: float, pressure: float = pressure, rate: float = rate) -> float:
                fraction = float(one.amount[0]) / float(one.amount.sum())
                return fraction * (pressure + rate * minutes - vapor) - lowest

            state, crossed, empty = march(state, given, end - start, above)
            if crossed is not None and np.isnan(below):
                below = start + crossed
            if empty is not None:
                used_up = start + empty
            amounts.append(state.amount)
            supplied.append(state.supplied)
            taken.append(taken[-1] + given.uptake * (end - start))
        return {
            "amount": np.array(amounts),
            "supplied": np.array(supplied),
            "taken": np.array(taken),
            "below": below,
            "used_up": used_up,
        }


def _dataset(
    exposure: Exposure,
    loop: Any,
    out: xr.Dataset,
    rows: list[dict[str, Any]],
    shape: tuple[int, ...],
    species: list[str],
    values: Mapping[str, float],
    run: Mapping[str, Any],
) -> xr.Dataset:
    lead = exposure.dims
    count = out.sizes["time"]

    def stacked(name: str, *more: int) -> Array:
        return np.array([row[name] for row in rows]).reshape((*shape, *more))

    amount = stacked("amount", count, len(species))
    supplied = stacked("supplied", count, len(species))
    taken = stacked("taken", count)
    alive = ~np.isnan(amount[..., 0])
    used = np.zeros_like(amount)
    used[..., 0] = taken
    discharged = amount[..., :1, :] + supplied - used - amount
    kept = ["segment_duration", "start_pressure", "end_pressure", "ambient_pressure", "share_of_piece"]
    kept += ["segment_of_time", "part", "session", "setpoint", "gas_fraction"]
    ds = out[[name for name in kept if name in out]]
    for name in ("o2_uptake_stpd", "ventilation_btps"):
        whole = np.broadcast_to(exposure.columns[name], (*shape, len(exposure.part)))
        ds[name] = ((*lead, "segment"), whole.copy(), attributes(name))
    ds = ds.assign_coords(loop_gas=species)
    total = amount.sum(axis=-1)
    fractions = np.moveaxis(amount / total[..., None], -1, -2)

    def put(name: str, data: Array, dims: tuple[str, ...], of: str = "", **more: str) -> None:
        ds[name] = ((*lead, *dims), data, attributes(of or name, **more))

    put("loop_fraction", fractions, ("loop_gas", "time"))
    put("loop_o2_fraction", fractions[..., 0, :], ("time",))
    put("loop_gas_stpd", total, ("time",))
    put(
        "gas_supplied",
        np.moveaxis(np.where(alive[..., None], supplied, np.nan), -1, -2),
        ("loop_gas", "time"),
    )
    put("gas_discharged", np.moveaxis(discharged, -1, -2), ("loop_gas", "time"))
    put("o2_taken_up", np.where(alive, taken, np.nan), ("time",))
    inputs: dict[str, Any] = {
        "ambient_pressure": "@ambient_pressure",
        "fio2": "@loop_o2_fraction",
        "water_vapor_pressure": values["water_vapor_pressure"],
    }
    with validity("ignore"):
        ds["loop_po2"] = lungs.inspired_po2(
            ds["ambient_pressure"], ds["loop_o2_fraction"], values["water_vapor_pressure"]
        )
        ds["loop_po2"].attrs = attributes(
            "loop_po2", equation="lungs.inspired_po2", inputs=json.dumps(inputs)
        )
        _steady_state(ds, loop)
    rates = "steady_o2_fraction" if "steady_o2_fraction" in ds else "loop_po2"
    for name in ("loop_o2_fraction", "loop_fraction", "loop_gas_stpd", "gas_supplied", "gas_discharged"):
        ds[name].attrs["integral_of"] = rates
    for name, key, text in (
        (
            "time_below_lowest_po2",
            "below",
            f"first time at which the loop PO2 falls below {values['lowest_po2']:.4g} kPa",
        ),
        ("time_oxygen_used_up", "used_up", "first time at which no oxygen is left"),
    ):
        ds[name] = (lead, stacked(key), {**attributes("time"), "long_name": text})
    ds.attrs = dataset_attributes(
        f"breathing loop along an exposure: {type(loop).__name__}",
        "breathing loop, closed forms",
        history=exposure.history,
        references=("loop_mass_balance",),
        comment="A well-mixed loop with working absorbent. A hypoxic loop gives no warning.",
        provenance="computed",
        loop=_described(loop),
        **{k: v for k, v in out.attrs.items() if k in ("depth_unit", "water", "surface_pressure")},
        **values,
        **({} if run["fails_at"] is None else {"fails_at": run["fails_at"]}),
        run=json.dumps({"model": "loop_oxygen", "person": {"assumed": []}, **run}),
        **(
            {"assumed": f"largest_o2_flow = {loop.largest_o2_flow:g} L/min"}
            if isinstance(loop, ClosedCircuit)
            else {}
        ),
    )
    return ds


def _described(loop: Any) -> str:
    inside = ", ".join(f"{k}={v!s}" for k, v in vars(loop).items())
    return f"{type(loop).__name__}({inside})"


def _steady_state(ds: xr.Dataset, loop: Any) -> None:
    """Where a constant flow would lead: the equation with the inputs of each piece."""
    if not isinstance(loop, (ConstantFlow, ConstantRatio)):
        return
    uptake = ds["o2_uptake_stpd"].isel(segment=ds["segment_of_time"]).drop_vars("segment")
    if isinstance(loop, ConstantFlow):
        flow, shown = xr.full_like(uptake, loop.flow), loop.flow
    else:
        ds["supply_flow_stpd"] = loop.ratio * ds["ventilation_btps"]
        ds["supply_flow_stpd"].attrs = attributes("supply_flow_stpd")
        flow = ds["supply_flow_stpd"].isel(segment=ds["segment_of_time"]).drop_vars("segment")
        shown = "@supply_flow_stpd"
    flow.attrs = attributes("supply_flow_stpd")
    oxygen = loop.gas.fraction("O2")
    found = semi_closed_o2_fraction(flow, oxygen, uptake)
    ds["steady_o2_fraction"] = found.where((flow > uptake) & (found >= 0.0))
    inputs = {"supply_flow": shown, "supply_o2": oxygen, "o2_uptake": "@o2_uptake_stpd"}
    ds["steady_o2_fraction"].attrs = {
        **attributes("loop_o2_fraction"),
        "long_name": "O2 fraction that a constant flow leads to, dry; missing: no steady state",
        "equation": "breathing.semi_closed_o2_fraction",
        "inputs": json.dumps(inputs),
    }


def breathed_from(ds: xr.Dataset) -> Exposure:
    """Make a breathing loop the breathing gas of a new exposure.

    Parameters
    ----------
    ds : Dataset
        From :func:`loop_oxygen`, of one scenario.

    Returns
    -------
    Exposure
        A piece between every two times of the dataset, on open circuit with the mean gas of the loop in it;
        ``attrs`` tell the largest error of PO2 that this makes at the ends of a piece [kPa].

    Raises
    ------
    ExposureError
        If it is another dataset, or the oxygen is used up in it.

    Notes
    -----
    Give :func:`loop_oxygen` times with ``at`` to make the pieces as short as the error asks for.

    Examples
    --------
    >>> dive = Exposure.start("air", pressure=401.3, o2_uptake_stpd=1.2).stay(30)
    >>> ds = loop_oxygen(dive, ConstantFlow(10.0, "nitrox 40"), initial="air", at=range(30))
    >>> new = breathed_from(ds)
    >>> len(new.part), round(float(new.pieces().end_po2[-1]) / 401.3, 3)
    (30, 0.318)
    """
    if "loop_fraction" not in ds or ds["loop_fraction"].ndim != 2:
        raise ExposureError("the loop as breathing gas needs a Dataset of loop_oxygen, one scenario of it")
    fraction = ds["loop_fraction"].values
    if np.isnan(fraction).any():
        raise ExposureError("the oxygen of the loop is used up: nothing can be breathed from it after that")
    times, pressure = ds["time"].values, ds["ambient_pressure"].values
    mean = (fraction[:, :-1] + fraction[:, 1:]) / 2.0
    oxygen = list(ds["loop_gas"].values).index("O2")
    change = np.abs(np.diff(fraction[oxygen])) / 2.0 * np.maximum(pressure[:-1], pressure[1:])
    segment = ds["segment_of_time"].values[:-1]
    pieces = xr.Dataset(
        {
            "segment_duration": ("segment", np.diff(times), attributes("segment_duration")),
            "start_pressure": ("segment", pressure[:-1], attributes("start_pressure")),
            "end_pressure": ("segment", pressure[1:], attributes("end_pressure")),
            "gas_fraction": (("gas", "segment"), mean, attributes("gas_fraction")),
            **{
                n: ("segment", ds[n].values[segment], ds[n].attrs)
                for n in ("o2_uptake_stpd", "ventilation_btps")
            },
            "part": ("segment", ds["part"].values[segment]),
            "session": ("segment", ds["session"].values[segment]),
        },
        coords={"gas": ds["loop_gas"].values},
        attrs={k: ds.attrs[k] for k in ("depth_unit", "water", "surface_pressure") if k in ds.attrs},
    )
    pieces.attrs["title"] = f"exposure on {ds.attrs['loop']}"
    pieces.attrs["largest_po2_error"] = float(change.max(initial=0.0))
    return Exposure.from_dataset(pieces)
