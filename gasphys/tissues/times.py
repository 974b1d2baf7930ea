"""Times that follow from a limit: at a depth without stops, before flying, and what a residue stands for."""

from __future__ import annotations

import itertools
import os
from collections.abc import Callable
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.constants import ATMOSPHERE
from gasphys.errors import ExposureError, RangeError, UnitError, ValidityError, unknown_name
from gasphys.exposure import Exposure
from gasphys.policy import outside_validity, require_provenance
from gasphys.quantities import CAUTION, attributes, quantity
from gasphys.surroundings import WATERS, standard_atmosphere_pressure
from gasphys.tissues.equations import time_to_tissue_pressure, uptake_share
from gasphys.tissues.kinetics import Breath, advance, breath_of, inert_pressure
from gasphys.tissues.model import check_gases, initial_state, tensions
from gasphys.tissues.sets import TissueSet, load
from gasphys.tissues.tolerance import ROUNDING, m_values
from gasphys.units import parse_quantity

__all__ = ["no_stop_time", "residual_time", "time_to_fly"]

Array = NDArray[np.float64]

#: Ratio of the instants a search looks at where two gases move apart, and where one rises steadily.
_FINE, _COARSE = 1.04, 2.0


def no_stop_time(
    depth: Any,
    gas: Any,
    model: str | os.PathLike[str] | TissueSet = "buhlmann_1995_c",
    depth_unit: str = "msw",
    surface_pressure: Any = float(ATMOSPHERE),
    descent_rate: float | None = None,
    ascent_rate: float | None = None,
    *,
    initial: Any = None,
    setpoint: Any = None,
    water: str = "en13319",
) -> Any:
    """Longest time at a depth after which a model allows the ascent to the surface without a stop.

    Parameters
    ----------
    depth : float, str, array_like or DataArray
        Depth [depth unit]; text with a unit such as ``"60 fsw"``.
    gas : Gas or str
        Breathing gas, with `setpoint` the diluent of a loop.
    model : str, path or TissueSet
        As for :func:`tensions`.
    depth_unit : {"msw", "fsw", "m"}
        Unit of depths and rates.
    surface_pressure : float or str
        Pressure at the surface [kPa absolute].
    descent_rate, ascent_rate : float, optional
        Positive [depth unit/min]; None: instantaneous.
    initial : Dataset, DataArray, float or str, optional
        Tissues at the start, as for :func:`tensions`.
    setpoint : float or str, optional
        PO2 of a loop [kPa].
    water : str
        Water that gives "m" its meaning.

    Returns
    -------
    float, array or DataArray
        Minutes, descent included; infinite where the model sets no limit, 0 where there is none left.

    Raises
    ------
    RangeError
        If a depth or rate is not possible.
    ValidityError
        If the model refuses the gas, or (one depth) the short deep range.

    Warns
    -----
    ValidityWarning
        Where the model's limits are refused (in an array: NaN) or doubtful, or its depth is exceeded.

    Notes
    -----
    With an ascent rate the model's own rule decides: limits met on arrival take the gas exchange of the
    ascent into account; where the set also tests before leaving, the shorter of both times counts. Closed
    form for exponential compartments with one inert gas; otherwise the instant is a bracketed root.
    The bare model, not the published table that may go by its name.

    Examples
    --------
    >>> round(no_stop_time(18, "air", "buhlmann_1995_a", surface_pressure=100.0), 1)
    64.2
    >>> round(no_stop_time(60, "air", "us_navy_1957", depth_unit="fsw", descent_rate=75, ascent_rate=60), 1)
    65.6
    >>> no_stop_time(5, "air", "buhlmann_1995_a")
    inf
    """
    chosen = load(model)
    if not chosen.limited:
        raise ValidityError(f"{chosen.name} has no limits, hence no no-stop time")
    depths, depth_unit, water, rebuild, one = _read_depths(depth, depth_unit, water)
    for name, rate in (("descent_rate", descent_rate), ("ascent_rate", ascent_rate)):
        if rate is not None and not float(rate) > 0.0:
            raise RangeError(f"{name} = {float(rate):g} {depth_unit}/min must be positive")
    begin = Exposure.start(gas, surface_pressure=surface_pressure, depth_unit=depth_unit, water=water)
    if begin.dims:
        raise UnitError("surface_pressure and gas must be one each; give several depths instead")
    begin = begin if setpoint is None else begin.loop(setpoint, gas)
    surface = float(begin.surface_pressure)
    there = begin.stay(1.0).pieces()
    check_gases(chosen, there, ())
    whole = breath_of(chosen, there)
    breath = Breath(whole.oxygen[..., 0], whole.inert[..., 0, :], whole.setpoint[..., 0])
    bottom = np.asarray(_to_pressure(depths, depth_unit, water, surface), dtype=float)
    _judge_depths(chosen, depths, bottom, surface, depth_unit, one)
    state = np.broadcast_to(initial_state(chosen, initial, begin), (*depths.shape, *chosen.half_time.shape))
    down = depths / descent_rate if descent_rate is not None else np.zeros_like(depths)
    if descent_rate is not None:
        state = advance(chosen, state, down, np.full_like(bottom, surface), bottom, breath)
    tests = [0.0 * depths] if ascent_rate is None else []
    if ascent_rate is not None:
        up = depths / ascent_rate
        tests += [0.0 * depths] if "before_leaving" in chosen.tested else []
        tests += [up] if "on_arrival" in chosen.tested else []
    hold = np.full(depths.shape, np.inf)
    for up in tests:
        hold = np.minimum(hold, _hold(chosen, state, bottom, surface, up, breath))
    result = np.where(hold > 0.0, down + hold, 0.0)
    rule = chosen.short_deep
    if rule is not None and rule.action == "refuse":
        result = np.where(bottom - surface >= rule.depth * (1.0 - ROUNDING), np.nan, result)
    result = np.where(np.isnan(bottom), np.nan, result)
    return rebuild(result)


def _read_depths(
    depth: Any, depth_unit: str, water: str
) -> tuple[Array, str, str, Callable[[Array], Any], bool]:
    """Return depths as a flat array, unit, water, what restores the caller's kind, and whether it is one."""
    if depth_unit not in ("msw", "fsw", "m"):
        raise unknown_name("depth unit", depth_unit, ("msw", "fsw", "m"))
    if water not in WATERS:
        raise unknown_name("water", water, WATERS)
    if isinstance(depth, str):
        depth, given = parse_quantity(depth)
        depth_unit = given or depth_unit
        if depth_unit not in ("msw", "fsw", "m"):
            raise unknown_name("depth unit", depth_unit, ("msw", "fsw", "m"))
    if isinstance(depth, bool):
        raise TypeError("depth must be a number, not a truth value")
    if isinstance(depth, xr.DataArray):
        values = depth.values.astype(float)

        def rebuild(result: Array) -> Any:
            attrs = attributes("duration") | {
                "long_name": "no-stop time, descent included",
                "comment": CAUTION,
            }
            return xr.DataArray(
                result.reshape(values.shape), dims=depth.dims, coords=depth.coords, attrs=attrs
            )
    else:
        values = np.asarray(depth, dtype=float)

        def rebuild(result: Array) -> Any:
            return float(result[0]) if values.ndim == 0 else result.reshape(values.shape)

    flat = values.ravel()
    single = values.ndim == 0
    wrong = ~(flat >= 0.0)
    if single and wrong[0]:
        raise RangeError(f"depth = {flat[0]:g} {depth_unit} must not be negative")
    if (flat < 0.0).any():
        outside_validity(
            f"no_stop_time: {int((flat < 0.0).sum())} depths are negative; those results are nan"
        )
    return np.where(wrong, np.nan, flat), depth_unit, water, rebuild, single


def _to_pressure(depth: Any, depth_unit: str, water: str, surface: float) -> Any:
    f = WATERS[{"msw": "msw", "fsw": "fsw", "m": water}[depth_unit]]
    inputs = {"depth": depth, "surface_pressure": surface, "latitude": 45.0}
    return f.raw(*[np.asarray(inputs[a.name], dtype=float) for a in f.arguments])


def _judge_depths(
    model: TissueSet, depths: Array, bottom: Array, surface: float, depth_unit: str, one: bool
) -> None:
    """Refuse or flag depths the set was not made for."""
    with np.errstate(invalid="ignore"):
        gauge = bottom - surface
        deep = (gauge > model.deepest * (1.0 + ROUNDING)) | (
            bottom > model.highest_pressure * (1.0 + ROUNDING)
        )
        rule = model.short_deep
        doubtful = (
            gauge >= rule.depth * (1.0 - ROUNDING) if rule is not None else np.zeros(depths.shape, dtype=bool)
        )
    if deep.any():
        outside_validity(
            f"{model.name}: {depths[deep][0]:g} {depth_unit} is deeper than the model was made for"
        )
    if rule is None or not doubtful.any():
        return
    shown = f"{depths[doubtful][0]:g} {depth_unit}"
    if rule.action == "flag":
        outside_validity(f"{model.name}: no-stop time at {shown} is doubtful: {rule.reason}")
    elif one:
        raise ValidityError(f"{model.name} refuses the no-stop time at {shown}: {rule.reason}")
    else:
        outside_validity(
            f"{model.name} refuses {int(doubtful.sum())} of {depths.size} no-stop times ({shown}): "
            f"{rule.reason}; those results are nan"
        )


def _hold(model: TissueSet, state: Array, bottom: Array, surface: float, up: Array, breath: Breath) -> Array:
    """Return the longest stay [min] so that the limit is met after an ascent of ``up`` minutes."""
    arriving = inert_pressure(model, bottom, breath)[..., None, :]
    single = [
        g
        for g in range(len(model.inert_gases))
        if (state[..., g] > 0.0).any() or (arriving[..., g] > 0.0).any()
    ]
    if model.kinetics == "exponential" and len(single) <= 1:
        g = single[0] if single else 0
        _, limit = m_values(model, state, np.full(bottom.shape, surface))
        half_time = model.half_time[:, g]
        if up.any():
            empty = advance(model, np.zeros_like(state), up, bottom, np.full_like(bottom, surface), breath)[
                ..., g
            ]
            limit = (limit - empty) / (1.0 - uptake_share.raw(up[..., None], half_time))
        held, inert = state[..., g], arriving[..., 0, g][..., None]
        with np.errstate(divide="ignore", invalid="ignore"):
            time = time_to_tissue_pressure.raw(held, inert, limit, half_time)
        time = np.where(held >= limit, 0.0, np.where(inert <= limit, np.inf, time))
        return np.asarray(np.where(np.isnan(limit), np.inf, time).min(axis=-1))

    def over(held: Array, lane: NDArray[np.int64]) -> Array:
        if up[lane].any():
            held = advance(model, held, up[lane], bottom[lane], np.full_like(bottom[lane], surface), breath)
        return _excess(model, held, np.full(lane.shape, surface))

    return _crossing(model, state, bottom, breath, over, first=True)


def _excess(model: TissueSet, state: Array, pressure: Array, gradient: float = 1.0) -> Array:
    """Return by how much the worst compartment exceeds its limit at a pressure [kPa]."""
    total, limit = m_values(model, state, pressure)
    limit = pressure[..., None] + gradient * (limit - pressure[..., None])
    return np.asarray(np.max(np.where(np.isnan(limit), -np.inf, total - limit), axis=-1))


def _crossing(
    model: TissueSet,
    state: Array,
    pressure: Array,
    breath: Breath,
    over: Callable[[Array, NDArray[np.int64]], Array],
    *,
    first: bool,
) -> Array:
    """Return when a stay at constant pressure first exceeds a limit, or last does; 0 and inf at the ends.

    ``over`` takes states and the lanes they belong to and gives the excess [kPa]. Instants of geometric
    spacing bracket the crossing; a bracketed root makes it exact. Where two gases move apart the spacing is
    fine and maxima between the instants are looked at again.
    """
    from gasphys.maths import find_root

    lanes = np.arange(len(pressure))
    several = len(model.inert_gases) > 1
    slowest = float(np.nanmax(model.half_time)) if model.kinetics != "serial" else 300.0
    ratio = _FINE if several or not first else _COARSE
    start = 0.01
    count = int(np.ceil(np.log(64.0 * slowest / start) / np.log(ratio)))
    times = np.concatenate([[0.0], start * ratio ** np.arange(count + 1)])

    def stay(held: Array, minutes: Array, lane: NDArray[np.int64]) -> Array:
        return advance(model, held, minutes, pressure[lane], pressure[lane], breath)

    states, excess = [state], [over(state, lanes)]
    if first and model.kinetics == "serial":
        # It ends with the ambient pressure everywhere; where that is tolerated nothing is ever exceeded.
        uniform = np.broadcast_to(pressure[:, None, None], state.shape)
        times = times[: 1 if (over(uniform, lanes) <= 0.0).all() else None]
    for before, now in itertools.pairwise(times):
        # One after the other is as exact as from the start, and the serial model could not do otherwise.
        states.append(stay(states[-1], np.full(len(lanes), now - before), lanes))
        excess.append(over(states[-1], lanes))
        if first and not several and (np.stack(excess) > 0.0).any(axis=0).all():
            break
    row, held = np.stack(excess), np.stack(states)
    result = np.full(len(lanes), np.inf if first else 0.0)
    for lane in lanes:
        e, instants = row[:, lane].copy(), times.copy()
        here = np.array([lane])

        def at(minutes: Array, k: int, here: NDArray[np.int64] = here) -> Array:
            many = np.repeat(held[k, here], minutes.size, axis=0)
            back = np.repeat(here, minutes.size)
            return over(stay(many, minutes.ravel(), back), back).reshape(minutes.shape)

        if several:
            # Maxima hidden between the instants.
            for k in range(1, len(e) - 1):
                turn = e[k - 1] <= e[k] >= e[k + 1] and e[k] <= 0.0
                if turn and (not first or not (e[:k] > 0.0).any()):
                    inner = np.linspace(0.0, times[k + 1] - instants[k - 1], 65)
                    found = at(inner, k - 1)
                    if (found > 0.0).any():
                        j = int(np.argmax(found))
                        e[k] = found[j]
                        held[k, lane] = stay(held[k - 1, here], inner[[j]], here)[0]
                        instants[k] = instants[k - 1] + inner[j]
        above = np.flatnonzero(e > 0.0)
        if not above.size:
            continue
        k = int(above[0]) if first else int(above[-1])
        if first and k == 0:
            result[lane] = 0.0
            continue
        if not first and k == len(e) - 1:
            result[lane] = np.inf
            continue
        low = k - 1 if first else k
        span = float(instants[low + 1] - instants[low])

        def excess_after(minutes: Array, low: int = low, at: Callable[..., Array] = at) -> Array:
            return at(minutes, low)

        root = find_root(excess_after, np.zeros(1), np.full(1, span))[0]
        result[lane] = instants[low] + (root if np.isfinite(root) else span)
    return result


# -- Before flying, and what a residue stands for --------------------------------------------------


def time_to_fly(
    exposure: Exposure,
    model: str | os.PathLike[str] | TissueSet = "buhlmann_1995_c",
    initial: Any = None,
    *,
    altitude: Any = None,
    pressure: Any = None,
    gas: Any = "air",
    gradient: float = 1.0,
) -> xr.Dataset:
    """Wait at the surface until a model tolerates a cabin, a mountain or a suit.

    Parameters
    ----------
    exposure : Exposure
        What came before; the wait begins at its end, at its surface pressure.
    model : str, path or TissueSet
        As for :func:`tensions`.
    initial : Dataset, DataArray, float or str, optional
        Tissues at the start of the exposure.
    altitude : float or str
        Altitude of the cabin or place [m].
    pressure : float or str
        Instead: its pressure [kPa absolute].
    gas : Gas or str
        Gas breathed during the wait.
    gradient : float
        Share of the tolerated supersaturation that is used [1].

    Returns
    -------
    Dataset
        ``wait`` [min] and ``wait_of_compartment(compartment)``; infinite where the model never tolerates it;
        ``controlling_compartment``, ``cabin_pressure``.

    Raises
    ------
    ExposureError
        If not exactly one of altitude and pressure is given, or the exposure holds several scenarios.
    ValidityError
        If the model has no limit there.

    Notes
    -----
    The ascent to the cabin is taken as instantaneous. Arithmetic of a decompression model, from memory and
    not tested for flying. What trials say (quoted elsewhere): 40 cases in 802, none with 11 h or more after
    one no-stop dive to 60 fsw or deeper, and after repetitive dives all below 17 h. The guideline of 2002
    asks for 12 h after one no-stop dive, 18 h after several or on several days, substantially more after
    stops.

    Examples
    --------
    >>> dive = Exposure.start("air").travel(depth=18, rate=20).stay(40).travel(depth=0, rate=9)
    >>> float(time_to_fly(dive, altitude=2400.0).wait.round(0))
    7.0
    """
    chosen = load(model)
    if chosen.surfacing_only or not chosen.limited:
        raise ValidityError(f"{chosen.name} has no limit below the surface pressure of its tables")
    if (altitude is None) == (pressure is None):
        raise ExposureError("time_to_fly needs altitude= or pressure=, one of them")
    if exposure.dims:
        raise ExposureError("time_to_fly takes one scenario; pick one first")
    if altitude is not None:
        cabin = float(standard_atmosphere_pressure(altitude))
    else:
        one = quantity("ambient_pressure")
        cabin = one.from_text(pressure) if isinstance(pressure, str) else float(pressure)
        if not one.possible[0] <= cabin <= one.possible[1]:
            raise one.range_error(cabin)
    ds = tensions(exposure, chosen, initial)
    surface = float(exposure.surface_pressure)
    begin = Exposure.start(gas, surface_pressure=surface).stay(1.0)
    check_gases(chosen, begin.pieces(), ())
    whole = breath_of(chosen, begin.pieces())
    breath = Breath(whole.oxygen[0], whole.inert[0], whole.setpoint[0])
    count = len(chosen.compartments)
    state = np.broadcast_to(ds["final"].values, (count, *chosen.half_time.shape))

    def over(held: Array, lane: NDArray[np.int64]) -> Array:
        # Lane k asks about compartment k only.
        total, limit = m_values(chosen, held, np.full(lane.shape, cabin))
        limit = cabin + gradient * (limit - cabin)
        rest = np.where(np.isnan(limit), -np.inf, total - limit)
        return np.asarray(np.take_along_axis(rest, lane[:, None], axis=-1)[:, 0])

    waits = _crossing(chosen, state, np.full(count, surface), breath, over, first=False)
    worst = int(np.argmax(waits))
    minutes = attributes("duration")
    return xr.Dataset(
        {
            "wait": ((), float(waits.max()), minutes | {"long_name": "wait at the surface"}),
            "wait_of_compartment": ("compartment", waits, minutes | {"long_name": "wait of one compartment"}),
            "controlling_compartment": (
                (),
                chosen.compartments[worst] if waits[worst] > 0.0 else "",
                {"long_name": "compartment that asks for the wait; empty: none does"},
            ),
            "cabin_pressure": (
                (),
                cabin,
                attributes("ambient_pressure") | {"long_name": "pressure to go to, absolute"},
            ),
        },
        coords={"compartment": np.array(chosen.compartments, dtype=str)},
        attrs={
            **{
                k: ds.attrs[k] for k in ("Conventions", "source", "provenance", "model", "edition", "history")
            },
            "title": f"wait before altitude by the model {chosen.name}",
            "references": f"{chosen.source}; vann_2007",
            "not_validated": "arithmetic of a decompression model; guidance asks for 12 h, 18 h or more",
            "comment": CAUTION,
        },
    )


def residual_time(
    exposure: Exposure,
    depth: float,
    model: str | os.PathLike[str] | TissueSet = "us_navy_1957",
    initial: Any = None,
    *,
    gas: Any = "air",
) -> xr.DataArray:
    """Minutes at a depth that would leave each compartment as an exposure left it.

    Parameters
    ----------
    exposure : Exposure
        What came before, surface interval included.
    depth : float
        Depth [depth unit of the exposure].
    model : str, path or TissueSet
        A set of exponential compartments with one inert gas.
    initial : Dataset, DataArray, float or str, optional
        Tissues at the start of the exposure.
    gas : Gas or str
        Gas breathed at the depth.

    Returns
    -------
    DataArray
        ``(compartment)`` [min]; 0 where nothing is left, infinite where that depth can never load as much.

    Raises
    ------
    ValidityError
        If the set has several gases or another kinetics.

    Notes
    -----
    From tissues in equilibrium with air at the surface, descent instantaneous. The residual time of printed
    repetitive tables is this figure of one slow compartment, with rounding of its own.

    Examples
    --------
    >>> dive = Exposure.start("air", depth_unit="fsw").travel(depth=60, rate=75).stay(40)
    >>> float(residual_time(dive.travel(depth=0, rate=60).then(120), 60.0).sel(compartment="120").round(1))
    19.2
    """
    chosen = load(model)
    if chosen.kinetics != "exponential" or len(chosen.inert_gases) != 1:
        raise ValidityError(
            f"{chosen.name}: a residual time needs exponential compartments with one inert gas"
        )
    require_provenance(chosen.provenance_of[chosen.inert_gases[0]], f"tissue model {chosen.name}")
    ds = tensions(exposure, chosen, initial)
    surface = exposure.surface_pressure
    start = Exposure.start(
        gas, surface_pressure=surface, depth_unit=exposure.depth_unit, water=exposure.water
    )
    there = start.travel(depth=depth, minutes=1.0) if depth > 0.0 else start.stay(1.0)
    pieces = there.pieces()
    check_gases(chosen, pieces, ())
    whole = breath_of(chosen, pieces)
    breath = Breath(whole.oxygen[..., 0], whole.inert[..., 0, :], whole.setpoint[..., 0])
    inert = inert_pressure(chosen, pieces.end_pressure[..., -1], breath)[..., None, 0]
    clean = initial_state(chosen, None, start)[..., 0]
    final = ds["final"].isel(inert_gas=0, drop=True)
    with np.errstate(divide="ignore", invalid="ignore"):
        minutes = time_to_tissue_pressure.raw(clean, inert, final.values, chosen.half_time[:, 0])
    minutes = np.where(final.values <= clean, 0.0, np.where(final.values >= inert, np.inf, minutes))
    return xr.DataArray(
        minutes,
        dims=final.dims,
        coords=final.coords,
        name="residual_time",
        attrs={
            **attributes("duration"),
            "long_name": "time at the depth that the inert gas left over stands for",
            "equation": time_to_tissue_pressure.name,
            "provenance": ds.attrs["provenance"],
            "comment": CAUTION,
        },
    )
