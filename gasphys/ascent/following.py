"""One ascent followed: what a model's tissues hold at any instant, and when it lets one go up."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.ascent.equations import gradient_at_depth
from gasphys.ascent.planner import Array, Plan, _Planner
from gasphys.ascent.rules import Rules
from gasphys.errors import ExposureError, ValidityError
from gasphys.exposure import Exposure
from gasphys.quantities import attributes, dataset_attributes
from gasphys.tissues.kinetics import along, stretches
from gasphys.tissues.model import check_gases, initial_state
from gasphys.tissues.sets import TissueSet, load
from gasphys.tissues.tolerance import m_values, short_deep

__all__ = ["Followed", "allowed_from", "control_path", "follow", "limits_of"]

#: Share of the largest from which a compartment counts as nearly in control [1].
_NEAR = 0.9
#: Most instants of a control path.
_INSTANTS = 600


@dataclass(frozen=True)
class Followed:
    """Tissues of one model at instants of one exposure.

    Parameters
    ----------
    time, pressure : array
        Instants [min] and ambient pressure there [kPa].
    piece : array of int
        Piece each belongs to.
    state : array
        ``(compartment, inert_gas, time)`` [kPa].
    """

    time: Array
    pressure: Array
    piece: NDArray[np.int64]
    state: Array


def follow(exposure: Exposure, model: TissueSet, initial: Any = None, at: Any = None) -> Followed:
    """Return the tissues of a model along one exposure, without judging them.

    Parameters
    ----------
    exposure : Exposure
        One scenario.
    model : TissueSet
        The set.
    initial : Dataset, DataArray, float or str, optional
        As for :func:`gasphys.tissues.tensions`.
    at : array_like, optional
        Times to add to the exposure's own [min].

    Returns
    -------
    Followed
        At the boundaries and the times asked for.

    Raises
    ------
    ValidityError
        If the set refuses a gas or the short deep range.
    ExposureError
        If the exposure holds several scenarios.

    Examples
    --------
    >>> dive = Exposure.start("air").travel(depth=30, rate=20).stay(20)
    >>> follow(dive, load("us_navy_1957")).time.tolist()
    [0.0, 1.5, 21.5]
    """
    if exposure.dims:
        raise ExposureError("an ascent is followed in one scenario; pick one first")
    pieces = exposure.pieces()
    check_gases(model, pieces, ())
    rule = model.short_deep
    if rule is not None and rule.action == "refuse" and short_deep(model, pieces, exposure.surface_pressure):
        raise ValidityError(f"{model.name} refuses this short deep exposure: {rule.reason}")
    time, piece, share = exposure.sample(at)
    row, before = stretches(model, pieces, piece, share)
    states = along(model, initial_state(model, initial, exposure), row)
    start, end = pieces.start_pressure[piece], pieces.end_pressure[piece]
    pressure = np.where(share == 1.0, end, start + (end - start) * share)
    return Followed(time, pressure, piece, states[..., before])


def limits_of(plan: Plan) -> TissueSet:
    """Return the set whose M-values are the limits a plan was made with.

    Parameters
    ----------
    plan : Plan
        One scenario.

    Returns
    -------
    TissueSet
        The plan's own; of a bubble model its compartments with the gradients allowed by the last pass, M =
        ambient pressure + gradient - other gases.

    Raises
    ------
    ValidityError
        If a bubble model's gradients change on the way, or are not weighted by tension.

    Examples
    --------
    >>> from gasphys import ascent
    >>> bottom = Exposure.start("air").travel(depth=40, rate=20).stay(20)
    >>> limits_of(ascent.plan(bottom, model="us_navy_1957")).name
    'us_navy_1957'
    """
    if "allowed_gradient" not in plan.stops:
        return plan.model
    choices = dict(text.split(" ", 1) for text in str(plan.stops.attrs["choices"]).split(", "))
    if choices["boyle_expansion"] != "False" or choices["mixing"] != "tension":
        raise ValidityError(f"{plan.model.name}: with these choices its gradients are no M-values")
    allowed = plan.stops["allowed_gradient"].values
    return replace(plan.model, a=allowed - float(choices["other_gases"]), b=np.ones(allowed.shape))


def _instants(exposure: Exposure, model: TissueSet, rules: Rules, seen: Followed, pick: Any) -> _Planner:
    """Return a planner with one lane an instant: the gas and the tissues of that instant."""
    chosen = seen.piece[pick]
    count = len(chosen)
    last = replace(
        exposure,
        dims=("instant",),
        coords={"instant": np.arange(count)},
        gas={g: v[chosen] for g, v in exposure.fractions.items()},
        pressure=seen.pressure[pick],
        setpoint_now=exposure.columns["setpoint"][chosen],
    )
    planner = _Planner(last, (), model, rules)
    planner.surface = planner._flat(exposure.surface_pressure)
    planner.pressure = seen.pressure[pick].copy()
    planner.depth = planner._depth(planner.pressure)
    planner.state = np.moveaxis(seen.state[..., pick], -1, 0).copy()
    planner._breaths()
    planner.failed, planner.off = {}, np.zeros(count, dtype=bool)
    planner.gas = np.zeros(count, dtype=np.int64)
    return planner


def allowed_from(plan: Plan) -> NDArray[np.float64]:
    """Return when each stop of a plan allows one step up, to less than a second.

    Parameters
    ----------
    plan : Plan
        One scenario.

    Returns
    -------
    array
        Minutes since the start, one a stop: the instant in the stop from which the model's limit for the next
        depth is met, with the plan's own gradients, while the plan is followed.

    Examples
    --------
    >>> from gasphys import ascent
    >>> found = ascent.plan(Exposure.start("air").travel(depth=40, rate=20).stay(20))
    >>> ascent.allowed_from(found).round(1).tolist()
    [27.7, 35.8]
    """
    stops, rules, model = plan.stops, plan.rules, limits_of(plan)
    depths = stops["depth"].values.astype(float)
    waited = stops["controlling_compartment"].values != ""
    leave, length = stops["leave_time"].values, stops["duration"].values
    first = float(np.nan_to_num(stops["first_stop_depth"].values))
    low, high = leave - length, leave.copy()
    found = np.where(waited, leave, leave - length)
    for _ in range(3):
        rounds = [np.linspace(low[k], high[k], 17) for k in range(len(depths))]
        every = np.concatenate(rounds) if rounds else np.empty(0)
        seen = follow(plan.exposure, model, plan.initial, np.minimum(every, plan.total_time))
        for k in np.flatnonzero(waited):
            pick = np.clip(np.searchsorted(seen.time, rounds[k] - 1e-9), 0, len(seen.time) - 1)
            over = _excess(plan.exposure, model, rules, seen, pick, first, depths[k])
            good = np.flatnonzero(over <= 0.0)
            at = int(good[0]) if good.size else len(over) - 1
            found[k] = rounds[k][at]
            low[k], high[k] = rounds[k][max(at - 1, 0)], rounds[k][at]
    return np.asarray(found)


def _above(depth: float, rules: Rules) -> float:
    """Return the next depth of the grid above a depth, 0 above the last stop."""
    last, spacing = float(rules.last_stop or 0.0), float(rules.stop_spacing or 0.0)
    steps = np.ceil((depth - last) / spacing - 1e-6) - 1.0
    return float(last + steps * spacing) if steps >= 0.0 else 0.0


def _excess(
    exposure: Exposure, model: TissueSet, rules: Rules, seen: Followed, pick: Any, first: float, depth: float
) -> Array:
    """Return by how much the step up is over its limit at instants of one stop [kPa]."""
    planner = _instants(exposure, model, rules, seen, pick)
    count, target = len(planner.depth), _above(depth, rules)
    there = planner._pressure(np.full(count, target))
    share = gradient_at_depth.raw(target, first, rules.gradient_low, rules.gradient_high)
    lanes = np.arange(count)
    over, _ = planner._step_excess(lanes, planner.state, target, there, np.full(count, float(share)))
    return over


def control_path(
    exposure: Exposure,
    models: Any,
    rules: Rules | None = None,
    *,
    initial: Any = None,
    since: float = 0.0,
) -> xr.Dataset:
    """Half-time in control along one ascent by several models, the share of each limit in use, the wait.

    Parameters
    ----------
    exposure : Exposure
        One scenario, the whole of it.
    models : sequence of str, path or TissueSet
        Who judges.
    rules : Rules, optional
        Grid of stops and rates for the wait.
    initial : optional
        As for :func:`gasphys.tissues.tensions`.
    since : float
        Time from which on it is shown [min], such as leaving the bottom.

    Returns
    -------
    Dataset
        On ``model`` and ``time``: ``controlling_half_time`` (NaN while nothing is supersaturated),
        ``gradient_fraction`` (share of the tolerated supersaturation in use by that compartment),
        ``near_low`` and ``near_high`` (half-times whose share is within 10 % of it), ``wait`` (until one may
        move up one step, by the published limit; infinite where never), and on ``time``
        ``ambient_pressure``. Models that cannot be shown are in the attribute ``not_shown``.

    Raises
    ------
    ExposureError
        If the exposure holds several scenarios.

    Notes
    -----
    A compartment with two gases goes by its half-time for the set's first gas. Shares of different models
    are not comparable in risk.

    Examples
    --------
    >>> dive = Exposure.start("air").travel(depth=40, rate=20).stay(20).travel(depth=6, rate=9).stay(4)
    >>> ds = control_path(dive, ["buhlmann_1995_c"], since=22.0)
    >>> float(ds.controlling_half_time[0, -1]), float(ds.wait[0, -1].round(1))
    (12.5, 0.0)
    """
    used = replace((Rules() if rules is None else rules).filled(exposure.depth_unit), whole_minutes=False)
    chosen = [load(m) for m in models]
    end = float(exposure.duration)
    step = max(0.25, np.ceil((end - since) / _INSTANTS * 4.0) / 4.0)
    at = np.append(np.arange(since, end, step), end)
    shown, reasons, columns = [], [], []
    for model in chosen:
        if model.kinetics == "serial":
            reasons.append(f"{model.name}: compartments in series have no half-times")
        elif model.surfacing_only or not model.limited:
            reasons.append(f"{model.name}: it has no limit below the surface")
        else:
            try:
                seen = follow(exposure, model, initial, at)
            except ValidityError as error:
                reasons.append(str(error))
                continue
            shown.append(model)
            columns.append(
                _controlled(exposure, model, used, seen, np.flatnonzero(seen.time >= since - 1e-9))
            )
    time = exposure.sample(at)[0]
    time = time[time >= since - 1e-9]
    names = ("controlling_half_time", "gradient_fraction", "near_low", "near_high", "wait")
    words = {
        "controlling_half_time": "half-time in control; not a number: nothing is supersaturated",
        "gradient_fraction": "share of the tolerated supersaturation in use",
        "near_low": "shortest half-time whose share is within 10 % of the largest",
        "near_high": "longest half-time whose share is within 10 % of the largest",
        "wait": "wait until one step up is allowed; inf: never",
    }
    kinds = ("half_time", "gradient_fraction", "half_time", "half_time", "duration")
    ds = xr.Dataset(coords={"model": np.array([m.name for m in shown], dtype=str)})
    ds = ds.assign_coords(time=("time", time, attributes("time")))
    for k, (name, kind) in enumerate(zip(names, kinds, strict=True)):
        values = np.array([c[k] for c in columns]).reshape(len(shown), len(time))
        ds[name] = (("model", "time"), values, attributes(kind) | {"long_name": words[name]})
    view = exposure.to_dataset(at=at)["ambient_pressure"]
    ds["ambient_pressure"] = ("time", view.values[view["time"].values >= since - 1e-9], view.attrs)
    ds.attrs = dataset_attributes(
        "half-time in control along an ascent, by several models",
        "ascent, control path",
        history=exposure.history,
        references=[m.source for m in shown],
        comment="Shares of different models are not comparable in risk.",
        models="; ".join(f"{m.name}, {m.edition}, parameters {m.digest}" for m in shown),
        not_shown="; ".join(reasons),
        depth_unit=exposure.depth_unit,
        surface_pressure=float(exposure.surface_pressure),
    )
    return ds


def _controlled(exposure: Exposure, model: TissueSet, rules: Rules, seen: Followed, pick: Any) -> list[Array]:
    state, pressure = seen.state[..., pick], seen.pressure[pick]
    total, limit = m_values(model, state, pressure, time=True)
    with np.errstate(invalid="ignore", divide="ignore"):
        share = (total - pressure) / (limit - pressure)
    share = np.where(np.isnan(share), -np.inf, share)
    worst = np.argmax(share, axis=0)
    top = share.max(axis=0)
    some = top > 0.0
    half = model.half_time[:, 0]
    near = share >= _NEAR * np.where(some, top, np.inf)
    low = np.where(near, half[:, None], np.inf).min(axis=0)
    high = np.where(near, half[:, None], -np.inf).max(axis=0)
    return [
        np.where(some, half[worst], np.nan),
        np.where(some, top, np.nan),
        np.where(some, low, np.nan),
        np.where(some, high, np.nan),
        _waits(exposure, model, rules, seen, pick),
    ]


def _waits(exposure: Exposure, model: TissueSet, rules: Rules, seen: Followed, pick: Any) -> Array:
    planner = _instants(exposure, model, rules, seen, pick)
    wait = np.zeros(len(planner.depth))
    up = np.array([_above(d, rules) for d in planner.depth])
    full = np.ones(len(up))
    below = planner.depth > 1e-6
    for target in np.unique(up[below]):
        lanes = np.flatnonzero(below & (up == target))
        there = planner._pressure(np.full(len(up), target))
        over, _ = planner._step_excess(lanes, planner.state[lanes], float(target), there, full)
        held = lanes[over > 0.0]
        if held.size:
            found = planner._search(held, float(target), there, full)
            wait[held] = np.where(np.isnan(found), np.inf, found)
    return wait
