"""Ascents planned with a dissolved-gas model, any number of scenarios in lockstep on one grid of stops."""

from __future__ import annotations

import os
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.ascent.equations import gradient_at_depth
from gasphys.ascent.rules import Rules, Source, as_measured, read_gases
from gasphys.bubbles.model_choices import VaryingPermeability, bubble_model
from gasphys.errors import ExposureError, NotReachableError, ValidityError
from gasphys.exposure import Exposure, Pieces
from gasphys.gas import FORMULAS, Gas
from gasphys.maths import find_root
from gasphys.policy import outside_validity, weakest
from gasphys.quantities import attributes, dataset_attributes
from gasphys.surroundings import WATERS, depth_at_pressure
from gasphys.tissues.kinetics import Breath, Passage, along, inert_pressure, stay, stretches
from gasphys.tissues.model import check_gases, initial_state, present
from gasphys.tissues.sets import TissueSet, load
from gasphys.tissues.tolerance import ROUNDING, m_values, short_deep

__all__ = ["Plan", "plan"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Minutes looked at together; after each row that fails the next is longer.
_FIRST_ROW, _LONGEST_ROW = 4, 256
#: Scenarios looked at together, and most states, scenarios times minutes: bounds the memory.
_BLOCK, _STATES = 512, 2**13
#: Longest stop looked for, in half-times of the slowest compartment: by then nothing moves any more.
_PATIENCE = 40.0


@dataclass(frozen=True, eq=False, repr=False)
class Plan:
    """An ascent: the whole exposure, and its stops with their reasons.

    Parameters
    ----------
    exposure : Exposure
        From the start to the surface.
    stops : Dataset
        On dimension ``stop``, deepest first: ``depth``, ``duration`` (at depth, travel not counted), ``gas``,
        ``leave_time`` (since the start), ``controlling_half_time``, ``controlling_compartment``, ``margin``
        [kPa]: how far the limit of the next depth lies above the tension in control on leaving. With
        several scenarios their dimensions stand first and stops not needed last 0 min.
    ascent_time : float or DataArray
        From leaving the bottom to the surface [min].
    model : TissueSet
        The set used.
    rules : Rules
        The rules used, defaults filled in.
    initial : optional
        What the tissues held at the start, as it was given.
    """

    exposure: Exposure
    stops: xr.Dataset
    ascent_time: Any
    model: TissueSet
    rules: Rules
    initial: Any = None

    @property
    def total_time(self) -> Any:
        """Duration of the whole exposure [min]; a DataArray where it differs between scenarios."""
        return self.exposure.duration

    def __repr__(self) -> str:
        return f"<Plan by {self.model.name}: {self.stops.sizes['stop']} stops>"

    def __str__(self) -> str:
        from gasphys.ascent.texts import leave_at_list

        return repr(self) if self.exposure.dims else leave_at_list(self)


def plan(
    exposure: Exposure,
    gases: Sequence[tuple[Any, Any]] = (),
    model: str | os.PathLike[str] | TissueSet | VaryingPermeability = "buhlmann_1995_c",
    rules: Rules | None = None,
    without: Any = None,
    *,
    initial: Any = None,
    measured: Mapping[str, Any] | None = None,
) -> Plan:
    """Ascent from the last instant of an exposure to the surface, by one model.

    Parameters
    ----------
    exposure : Exposure
        Ends at the bottom; several scenarios are planned in lockstep.
    gases : sequence of (gas, deepest)
        What may be breathed on the way: a Gas, its name or a :class:`Loop`, and its deepest depth of use
        [depth unit] (or text: ``"1.6 bar"`` is a PO2). Without any, the gas or loop of the bottom is kept.
    model : str, path, TissueSet or VaryingPermeability
        As for :func:`gasphys.tissues.tensions`; or a name of :func:`gasphys.bubbles.models`, or what
        :func:`gasphys.bubbles.varying_permeability` returns.
    rules : Rules, optional
        Rates, stops, gradients.
    without : Gas, str or Loop, optional
        One of the gases that is lost.
    initial : Dataset, DataArray, float or str, optional
        Tissues at the start of the exposure.
    measured : mapping, optional
        What was found by analysis, by the name of the planned mix: it is breathed instead, at the bottom
        and on the way; a depth of use given as a PO2 follows it.

    Returns
    -------
    Plan
        ``exposure``, ``stops``, ``total_time``, ``ascent_time``; ``str()`` is a list of when to leave.

    Raises
    ------
    ExposureError
        If the exposure has no piece or ends at the surface.
    ValidityError
        If the model refuses a gas, the short deep range, or has no limits for stops.
    NotReachableError
        If a stop would never end: the message says what holds it.

    Notes
    -----
    Stops stand on the grid last stop + n spacing. One goes up one step when the model's limit for that step
    is met: before leaving, or on arrival (exchange of the travel counted), as the set says. The gas at a
    depth is the listed one with the shallowest deepest depth that is not shallower than it; it is switched to
    on passing that depth, also without a stop. A dive within the no-stop time (by the high gradient) gets no
    stop. With two gradients the first stop is found with the low one and kept. In a batch an ascent that
    cannot be planned is NaN with a warning. Not a table, not tested in the water; only a bubble model knows
    bubbles, none knows work or cold. Of a bubble model ``stops`` also holds radii, gradients, passes and the
    depth where supersaturation begins; in the trial of stops moved deeper by one, the deeper ones did worse.

    Examples
    --------
    >>> bottom = Exposure.start("air").travel(depth=40, rate=20).stay(20)
    >>> found = plan(bottom)
    >>> found.stops.depth.values.tolist(), found.stops.duration.values.tolist()
    ([6.0, 3.0], [2.0, 8.0])
    """
    bubbles = bubble_model(model)
    chosen = load(model) if bubbles is None else bubbles.tissues  # type: ignore[arg-type]
    if not exposure.part:
        raise ExposureError("the exposure has no piece yet")
    used = (Rules() if rules is None else rules).filled(exposure.depth_unit)
    if measured:
        exposure, gases, without = as_measured(exposure, gases, without, measured)
    sources = read_gases(gases, without, exposure.depth_unit)
    if bubbles is not None:
        from gasphys.ascent.nuclei import nuclei_planner

        return replace(nuclei_planner(exposure, sources, bubbles, used).run(initial), initial=initial)
    if not chosen.limited:
        raise ValidityError(f"{chosen.name} has no limits to plan an ascent with")
    if used.breaks is None:
        return replace(_Planner(exposure, sources, chosen, used).run(initial), initial=initial)
    from gasphys.ascent.breaks import BreakingPlanner

    planner = BreakingPlanner(exposure, (*sources, used.breaks.source()), chosen, used)
    return replace(planner.run(initial), initial=initial)


#: One stretch of the ascent: duration, pressures at its ends, row of the gas, an array a scenario.
_Leg = tuple[Array, Array, Array, NDArray[np.int64]]


def _straightened(legs: list[_Leg]) -> list[_Leg]:
    """Join stretches that are one straight line on one gas in every scenario."""
    out: list[_Leg] = []
    for leg in legs:
        if out:
            before = out[-1]
            both = (before[0] > 0.0) & (leg[0] > 0.0)
            with np.errstate(divide="ignore", invalid="ignore"):
                one, two = ((x[2] - x[1]) / x[0] for x in (before, leg))
            same = (np.abs(one - two) <= 1e-9 * np.abs(one)) & (before[3] == leg[3])
            idle = (leg[0] == 0.0) | (before[0] == 0.0)
            if np.where(both, same, idle).all() and both.any():
                first = np.where(before[0] > 0.0, before[1], leg[1])
                last = np.where(leg[0] > 0.0, leg[2], before[2])
                gas = np.where(leg[0] > 0.0, leg[3], before[3])
                out[-1] = (before[0] + leg[0], first, last, gas)
                continue
        out.append(leg)
    return out


@dataclass
class _Planner:
    """Plans scenarios ("lanes") in lockstep on one grid; each waits as long as it must."""

    exposure: Exposure
    sources: tuple[Source, ...]
    model: TissueSet
    rules: Rules
    shape: tuple[int, ...] = field(init=False)

    def __post_init__(self) -> None:
        self.shape = tuple(len(self.exposure.coords[d]) for d in self.exposure.dims)
        #: The last route asked for, by its target.
        self._known: tuple[float, list[tuple[_Leg, Array, Passage]]] | None = None

    # -- Set up --------------------------------------------------------------------------------

    def _flat(self, value: Any) -> Array:
        return np.broadcast_to(np.asarray(value, dtype=float), self.shape).reshape(-1).copy()

    def _pressure(self, depth: Any) -> Array:
        f = WATERS[self._water()]
        inputs = {"depth": np.asarray(depth, dtype=float), "surface_pressure": self.surface, "latitude": 45.0}
        return np.asarray(f.raw(*[inputs[a.name] for a in f.arguments]), dtype=float)

    def _depth(self, pressure: Array) -> Array:
        f = depth_at_pressure.pick(water=self._water())  # type: ignore[attr-defined]
        inputs = {"ambient_pressure": pressure, "surface_pressure": self.surface, "latitude": 45.0}
        values = np.asarray(f.raw(*[np.asarray(inputs[a.name]) for a in f.arguments]), dtype=float)
        rounded = np.round(values, 9)  # 30 msw is 30, not 30.000000000000004; others stay as they are
        return np.where(np.abs(values - rounded) <= 1e-11, rounded, values)

    def _water(self) -> str:
        return {"msw": "msw", "fsw": "fsw", "m": self.exposure.water}[self.exposure.depth_unit]

    def run(self, initial: Any) -> Plan:
        exposure, model = self.exposure, self.model
        pieces = exposure.pieces()
        self.surface = self._flat(exposure.surface_pressure)
        refused = np.broadcast_to(check_gases(model, pieces, self.shape), self.shape).reshape(-1)
        self._check_sources()
        row, _ = stretches(model, pieces)
        cells = model.half_time.shape
        begin = np.broadcast_to(initial_state(model, initial, exposure), (*self.shape, *cells))
        state = np.broadcast_to(along(model, begin, row)[..., -1], (*self.shape, *cells)).reshape(-1, *cells)
        self.pressure = self._flat(exposure.pressure)
        self.depth = self._depth(self.pressure)
        if not (self.depth > 0.0).all():
            raise ExposureError("the exposure ends at or above the surface; there is no ascent to plan")
        self.state = state.copy()
        self._breaths()
        self.failed: dict[int, str] = {}
        self.off = refused.copy()
        blank = np.broadcast_to(short_deep(model, pieces, exposure.surface_pressure), self.shape).reshape(-1)
        rule = model.short_deep
        if rule is not None and blank.any():
            text = f"{model.name}: {rule.reason}"
            if rule.action == "refuse":
                self._fail(blank, f"refused for this short deep exposure: {text}", ValidityError)
            else:
                outside_validity(f"the ascent is doubtful for a short deep exposure: {text}")
        self._climb()
        return self._result()

    def _check_sources(self) -> None:
        for source in self.sources:
            one = np.ones(1)
            mix = {g: f * one for g, f in source.gas.fractions.items()}
            breathed = Pieces(one, one, one, one, one, mix, source.setpoint * one, np.array([0.0, 1.0]))
            check_gases(self.model, breathed, ())

    def _fail(self, lanes: Mask, why: str, error: type[Exception] = NotReachableError) -> None:
        """Give lanes up: an error for one scenario, a mark for some of a batch."""
        lanes = lanes & ~self.off
        if not lanes.any():
            return
        if not self.shape:
            raise error(why)
        self.off |= lanes
        for lane in np.flatnonzero(lanes):
            self.failed[int(lane)] = why

    # -- Gases ---------------------------------------------------------------------------------

    def _breaths(self) -> None:
        """Lay out what may be breathed: row 0 is what the bottom ends with, then the list."""
        model, lanes = self.model, len(self.depth)
        bottom = {g: self._flat(v) for g, v in self.exposure.gas.items()}
        rows = [(bottom, self._flat(self.exposure.setpoint_now))]
        for s in self.sources:
            mix = {g: np.full(lanes, f) for g, f in s.gas.fractions.items()}
            rows.append((mix, np.full(lanes, s.setpoint)))
        self.mixes = [mix for mix, _ in rows]
        self.setpoints = [setpoint for _, setpoint in rows]
        breaths: list[Breath] = []
        for mix, setpoint in rows:
            if model.alveolar == "ambient":
                inert = [1.0 - mix["O2"]]
            else:
                nothing = np.zeros(lanes)
                inert = [
                    sum((mix.get(f, nothing) for f in model.formulas_of(g)), nothing)
                    for g in model.inert_gases
                ]
            breaths.append(Breath(mix["O2"], np.stack(inert, axis=-1), setpoint))
        #: What may be breathed, ``(row, lane)``.
        self.breaths = Breath(
            np.stack([b.oxygen for b in breaths]),
            np.stack([b.inert for b in breaths]),
            np.stack([b.setpoint for b in breaths]),
        )
        # Deepest depth of use of every listed gas, a lane each.
        deepest = []
        for s in self.sources:
            if np.isnan(s.po2_limit):
                deepest.append(np.full(lanes, s.deepest))
            else:
                deepest.append(self._depth(s.po2_limit / np.maximum(s.gas.oxygen, 1e-12) * np.ones(lanes)))
        self.deepest = np.array(deepest).reshape(len(self.sources), lanes)

    def _gas_at(self, depth: Array) -> NDArray[np.int64]:
        """Return the row breathed at a depth: the shallowest permitted one not shallower, or the bottom's."""
        if not self.sources:
            return np.zeros(len(depth), dtype=np.int64)
        slack = 1e-9
        fits = np.where(self.deepest >= depth - slack, self.deepest, np.inf)
        best = np.argmin(fits, axis=0)
        none = np.isinf(fits.min(axis=0))
        return np.where(none, 0, best + 1).astype(np.int64)

    def _breath(self, rows: NDArray[np.int64], lanes: NDArray[np.int64]) -> Breath:
        """Return what given lanes breathe."""
        all_ = self.breaths
        return Breath(all_.oxygen[rows, lanes], all_.inert[rows, lanes], all_.setpoint[rows, lanes])

    # -- The climb -----------------------------------------------------------------------------

    def _grid(self) -> list[float]:
        """Return the targets, deepest first, the surface last."""
        spacing, last = float(self.rules.stop_spacing or 0.0), float(self.rules.last_stop or 0.0)
        deepest = float(self.depth.max())
        count = max(0, int(np.ceil((deepest - last) / spacing - 1e-9)))
        return [last + n * spacing for n in range(count - 1, -1, -1)] + ([0.0]) if deepest > last else [0.0]

    def _climb(self) -> None:
        lanes = len(self.depth)
        self.legs: list[_Leg] = []
        self.rows: list[dict[str, Any]] = []
        self.first = np.full(lanes, np.nan)
        self.clock = np.zeros(lanes)
        self.gas = np.zeros(lanes, dtype=np.int64)
        self._switch(np.ones(lanes, dtype=bool))
        self.direct = self._no_stop()
        for target in self._grid():
            moving = (self.depth > target + 1e-9) & ~self.off
            if not moving.any():
                continue
            self._wait(moving, target)
            moving &= ~self.off
            self._travel(moving, target)

    def _no_stop(self) -> Mask:
        """Return which lanes need no stop, by the high gradient: the same question as the no-stop time."""
        lanes = np.arange(len(self.depth))
        high = np.full(len(lanes), self.rules.gradient_high)
        good = np.ones(len(lanes), dtype=bool)
        if "before_leaving" in self.model.tested:
            good &= self._excess(lanes, self.state, self.surface, high)[0] <= 0.0
        if "on_arrival" in self.model.tested:
            arrived = self._arrived(lanes, self.state, 0.0)
            good &= self._excess(lanes, arrived, self.surface, high)[0] <= 0.0
        return good

    def _over(self, lanes: NDArray[np.int64], state: Array, pressure: Array, gradient: Array) -> Array:
        """Return by how much each compartment of the lanes is over its limit at a pressure [kPa]."""
        total, limit = m_values(self.model, state, pressure)
        here = pressure[..., None]
        allowed = limit - here
        allowed *= gradient[..., None]
        allowed += here
        allowed *= 1.0 + ROUNDING
        over = np.asarray(total - allowed)
        # Without a limit it is never over it.
        return np.where(np.isnan(over), -np.inf, over) if np.isnan(self.model.a).any() else over

    def _excess(
        self, lanes: NDArray[np.int64], state: Array, pressure: Array, gradient: Array
    ) -> tuple[Array, NDArray[np.int64]]:
        """Return by how much the worst compartment is over its limit at a pressure [kPa], and which it is."""
        over = self._over(lanes, state, pressure, gradient)
        return over.max(axis=-1), np.argmax(over, axis=-1)

    def _route(self, target: float) -> list[tuple[_Leg, Array, Passage]]:
        """Return the stretches from the present depths to a target: each, where it ends, what it does.

        Worked out once for a step of the grid.
        """
        if self._known is None or self._known[0] != target:
            lanes = np.arange(len(self.depth))
            found = [
                (leg, depth, Passage.of(self.model, *leg[:3], self._breath(leg[3], lanes)))
                for leg, depth in self._path(target)
            ]
            self._known = (target, found)
        return self._known[1]

    def _arrived(self, lanes: NDArray[np.int64], state: Array, target: float) -> Array:
        """Return states ``(lane, ..., compartment, inert_gas)`` after the travel to the target."""
        for _, _, passage in self._route(target):
            state = (passage if len(lanes) == len(self.depth) else passage.take(lanes))(state)
        return state

    def _path(self, target: float) -> list[tuple[_Leg, Array]]:
        """Return the stretches from the present depths to a target: cut where the rate or the gas changes."""
        bands = self.rules.bands()
        edges = {edge for edge, _ in bands} | set(self.deepest.ravel().tolist())
        top = float(self.depth.max())
        path: list[tuple[_Leg, Array]] = []
        here = self.depth
        for cut in [*sorted((e for e in edges if target < e < top), reverse=True), target]:
            there = np.minimum(here, cut)
            if not (there < here).any():
                continue
            middle = 0.5 * (here + there)
            rate: Any = bands[0][1]
            if len(bands) > 1:
                rate = np.select([middle >= edge for edge, _ in bands], [r for _, r in bands])
            # The bottom's own pressure, not its depth's: they may differ in the last bit.
            start = path[-1][0][2] if path else self.pressure
            end = np.where(there < here, self._pressure(there), start)
            # Between two cuts the gas is that of the deeper end: the shallower end is where it changes.
            path.append((((here - there) / rate, start, end, self._gas_at(middle)), there))
            here = there
        return path

    def _switch(self, moving: Mask) -> None:
        """Breathe what the present depth asks for."""
        rows = self._gas_at(self.depth)
        changed = moving & (rows != self.gas) & ~self.off
        self.gas = np.where(moving, rows, self.gas)
        minutes = np.where(changed, self.rules.switch_minutes, 0.0)
        if minutes.any():
            self._stay(moving, minutes)
            self._note(moving, minutes, np.full(len(minutes), -1), np.full(len(minutes), np.nan))

    def _stay(self, moving: Mask, minutes: Array) -> None:
        lanes = np.flatnonzero(moving & (minutes > 0.0))
        if not lanes.size:
            return
        p = self.pressure[lanes]
        breath = self._breath(self.gas[lanes], lanes)
        self.state[lanes] = stay(self.model, self.state[lanes], minutes[lanes], p, breath)
        spent = np.zeros(len(minutes))
        spent[lanes] = minutes[lanes]
        self.clock += spent
        self.legs.append((spent, self.pressure.copy(), self.pressure.copy(), self.gas.copy()))

    def _travel(self, moving: Mask, target: float) -> None:
        lanes = np.flatnonzero(moving)
        if not lanes.size:
            return
        for (minutes, start, end, rows), depth, passage in self._route(target):
            self.state[lanes] = passage.take(lanes)(self.state[lanes])
            spent = np.where(moving, minutes, 0.0)
            first, last = (np.where(moving, there, self.pressure) for there in (start, end))
            self.legs.append((spent, first, last, np.where(moving, rows, self.gas)))
            self.clock += spent
            self.pressure = last
            self.depth = np.where(moving, depth, self.depth)
            self._switch(moving & (self.depth > 0.0))
        self._known = None
        self.depth[lanes] = target
        self.pressure[lanes] = self._pressure(np.full(len(self.depth), target))[lanes]

    # -- Waiting -------------------------------------------------------------------------------

    def _wait(self, moving: Mask, target: float) -> None:
        """Stay until the step to the target is allowed."""
        lanes = np.flatnonzero(moving & ~self.direct)
        if not lanes.size:
            return
        if self.model.surfacing_only:
            why = f"{self.model.name} gives no stops: only surfacing values were published"
            self._fail(self._mask(lanes), why)
            return
        there = self._pressure(np.full(len(self.depth), target))
        free = lanes[np.isnan(self.first[lanes])]
        if free.size:
            low = np.full(len(self.depth), self.rules.gradient_low)
            new = free[~self._may_go(free, target, there, low)]
            self.first[new] = self.depth[new]
        stopped = lanes[~np.isnan(self.first[lanes])]
        if not stopped.size:
            return
        gradient = gradient_at_depth.raw(
            target, np.nan_to_num(self.first, nan=0.0), self.rules.gradient_low, self.rules.gradient_high
        )
        waiting = stopped[~self._may_go(stopped, target, there, gradient)]
        if not waiting.size:
            return
        minutes = self._search(waiting, target, there, gradient)
        lost = np.isnan(minutes)
        if lost.any():
            self._explain(waiting[lost], target, there, gradient)
        waiting, minutes = waiting[~lost], minutes[~lost]
        if not waiting.size:
            return
        spent = np.zeros(len(self.depth))
        spent[waiting] = np.maximum(minutes, self.rules.shortest_stop)
        # In control is what held it last: just before it was allowed.
        short = np.maximum(minutes - (1.0 if self.rules.whole_minutes else 1e-6), 0.0)
        held = self._held(waiting, self.state[waiting], short)
        self._stay(self._mask(waiting), spent)
        both = np.stack([held, self.state[waiting]], axis=1)
        over, worst = self._step_excess(waiting, both, target, there, gradient)
        controls, margins = np.full(len(self.depth), -1), np.full(len(self.depth), np.nan)
        controls[waiting], margins[waiting] = worst[:, 0], np.maximum(-over[:, 1], 0.0)
        self._note(self._mask(waiting), spent, controls, margins)

    def _mask(self, lanes: NDArray[np.int64]) -> Mask:
        mask = np.zeros(len(self.depth), dtype=bool)
        mask[lanes] = True
        return mask

    def _step_excess(
        self, lanes: NDArray[np.int64], state: Array, target: float, there: Array, gradient: Array
    ) -> tuple[Array, NDArray[np.int64]]:
        """Return by how much the step up is not allowed [kPa], as the set tests it, and what holds it."""
        extra = (1,) * (state.ndim - 3)
        pressure, share = (v[lanes].reshape(-1, *extra) for v in (there, gradient))
        tested = self.model.tested
        if "on_arrival" not in tested:
            return self._excess(lanes, state, pressure, share)
        over, worst = self._excess(lanes, self._arrived(lanes, state, target), pressure, share)
        if "before_leaving" in tested:
            before, which = self._excess(lanes, state, pressure, share)
            later = over > before
            over, worst = np.where(later, over, before), np.where(later, worst, which)
        return over, worst

    def _may_go(self, lanes: NDArray[np.int64], target: float, there: Array, gradient: Array) -> Mask:
        """Return which lanes may leave now."""
        first = self._first_allowed(lanes, self.state[lanes][:, None], target, there, gradient)
        return np.asarray(first == 0)

    def _first_allowed(
        self, lanes: NDArray[np.int64], state: Array, target: float, there: Array, gradient: Array
    ) -> NDArray[np.int64]:
        """Return which of the states ``(lane, stay, ...)`` is the first that is allowed; -1: none."""
        everyone = np.arange(len(lanes))
        good = np.ones(state.shape[:2], dtype=bool)
        if "before_leaving" in self.model.tested:
            pressure, share = there[lanes][:, None], gradient[lanes][:, None]
            good = self._over(lanes, state, pressure, share).max(axis=-1) <= 0.0
        if "on_arrival" in self.model.tested:
            # The travel matters only where one may leave, and mostly it forbids nothing there.
            first = good.argmax(axis=1)
            some = everyone[good[everyone, first]]
            over, _ = self._step_excess(lanes[some], state[some, first[some]], target, there, gradient)
            some = some[over > 0.0]
            if some.size:
                good[some] &= self._step_excess(lanes[some], state[some], target, there, gradient)[0] <= 0.0
        first = good.argmax(axis=1)
        return np.where(good[everyone, first], first, -1)

    def _search(self, lanes: NDArray[np.int64], target: float, there: Array, gradient: Array) -> Array:
        """Return the shortest wait [min] after which the step is allowed; NaN where it never is.

        Whole minutes are looked at in rows that get longer; the first that is allowed ends it, so the search
        ends even where a slower tissue closes the door again.
        """
        state = self.state[lanes]
        found = np.concatenate(
            [
                self._whole_minutes(lanes[k : k + _BLOCK], state[k : k + _BLOCK], target, there, gradient)
                for k in range(0, len(lanes), _BLOCK)
            ]
        )
        if not self.rules.whole_minutes:
            found = self._exact(found, lanes, state, target, there, gradient)
        return found

    def _whole_minutes(
        self, lanes: NDArray[np.int64], state: Array, target: float, there: Array, gradient: Array
    ) -> Array:
        found = np.full(len(lanes), np.nan)
        todo = np.arange(len(lanes))
        slowest = float(np.nanmax(self.model.half_time)) if self.model.kinetics != "serial" else 300.0
        patience = int(np.ceil(_PATIENCE * slowest))
        done, size, step = 0, _FIRST_ROW, 1
        while todo.size and done < patience:
            some = lanes[todo]
            size = max(_FIRST_ROW, min(size, _STATES // todo.size))
            minutes = done + step * np.arange(1.0, size + 1.0)
            later = self._held(some, state[todo], minutes[None, :])
            first = self._first_allowed(some, later, target, there, gradient)
            hit = first >= 0
            found[todo[hit]] = minutes[first[hit]]
            if step > 1 and hit.any():
                found[todo[hit]] = self._narrow(
                    todo[hit], lanes, found[todo[hit]], step, state, target, there, gradient
                )
            todo = todo[~hit]
            done = int(minutes[-1])
            size = min(2 * size, _LONGEST_ROW)
            step = 1 if done < 2000 else max(1, done // 500)
        return found

    def _after(
        self,
        index: NDArray[np.int64],
        lanes: NDArray[np.int64],
        minutes: Array,
        state: Array,
        target: float,
        there: Array,
        gradient: Array,
    ) -> Array:
        held = self._held(lanes[index], state[index], minutes)
        return self._step_excess(lanes[index], held, target, there, gradient)[0]

    def _held(self, lanes: NDArray[np.int64], state: Array, minutes: Array) -> Array:
        """Return tissues after stays at the present depth on the present gas, as :func:`stay`."""
        return stay(self.model, state, minutes, self.pressure[lanes], self._breath(self.gas[lanes], lanes))

    def _narrow(
        self,
        index: NDArray[np.int64],
        lanes: NDArray[np.int64],
        high: Array,
        step: int,
        state: Array,
        target: float,
        there: Array,
        gradient: Array,
    ) -> Array:
        """Return the first whole minute allowed, between two instants further apart."""
        low = high - step
        while ((high - low) > 1.0).any():
            middle = np.floor(0.5 * (low + high))
            good = self._after(index, lanes, middle, state, target, there, gradient) <= 0.0
            wide = (high - low) > 1.0
            high = np.where(wide & good, middle, high)
            low = np.where(wide & ~good, middle, low)
        return high

    def _exact(
        self,
        found: Array,
        lanes: NDArray[np.int64],
        state: Array,
        target: float,
        there: Array,
        gradient: Array,
    ) -> Array:
        """Return the instant within the minute before a whole one at which the step becomes allowed."""
        index = np.flatnonzero(~np.isnan(found))
        if not index.size:
            return found

        def over(minutes: Array) -> Array:
            return self._after(index, lanes, minutes, state, target, there, gradient)

        root = find_root(over, found[index] - 1.0, found[index])
        found[index] = np.where(np.isnan(root), found[index], root)
        # The root may lie a rounding short of the limit.
        short = over(found[index]) > 0.0
        found[index[short]] = np.nextafter(found[index[short]] * (1.0 + 1e-12), np.inf)
        return found

    def _explain(self, lanes: NDArray[np.int64], target: float, there: Array, gradient: Array) -> None:
        """Give up stops that never end, and say of the first of them what holds it."""
        model, unit, one = self.model, self.exposure.depth_unit, lanes[:1]
        if model.kinetics == "serial":
            inert = self.pressure[one][:, None]
        else:
            inert = inert_pressure(model, self.pressure[one], self._breath(self.gas[one], one))
        steady = np.broadcast_to(inert[:, None, :], (1, *model.half_time.shape))
        over, worst = self._step_excess(one, steady, target, there, gradient)
        name, gas = model.compartments[int(worst[0])], self._gas_name(int(one[0]), int(self.gas[one[0]]))
        self._fail(
            self._mask(lanes),
            f"{model.name}: from {self.depth[one[0]]:g} {unit} on {gas} the step to {target:g} {unit} is "
            f"never allowed: compartment {name} would end {float(over[0]):.1f} kPa over "
            "its limit. A gas with less inert gas, or a shallower last stop, would be needed",
        )

    # -- The result ----------------------------------------------------------------------------

    def _gas_name(self, lane: int, row: int) -> str:
        """Return the name of what a lane breathes in a row of the gases."""
        if row:
            return self.sources[row - 1].name
        mix = {FORMULAS[g]: float(v[lane]) for g, v in self.mixes[0].items() if g != "N2"}
        setpoint = float(self.setpoints[0][lane])
        name = str(Gas(**mix))
        return name if np.isnan(setpoint) else f"loop at {setpoint:.4g} kPa, diluent {name}"

    def _names(self) -> NDArray[np.object_]:
        """Return the names of all gases, ``(row, lane)``; equal mixes of the bottom are named once."""
        bottom = np.stack([*self.mixes[0].values(), np.nan_to_num(self.setpoints[0], nan=-1.0)], axis=-1)
        _, first, back = np.unique(bottom, axis=0, return_index=True, return_inverse=True)
        own = np.array([self._gas_name(int(k), 0) for k in first], dtype=object)[back.ravel()]
        listed = [np.full(len(own), source.name, dtype=object) for source in self.sources]
        return np.stack([own, *listed])

    def _note(self, moving: Mask, minutes: Array, control: Any, margin: Array) -> None:
        self.rows.append(
            {
                "depth": np.where(moving, self.depth, np.nan),
                "duration": np.where(moving, minutes, 0.0),
                "gas": self.gas.copy(),
                "control": np.asarray(control),
                "margin": margin,
                "leave": self.clock.copy(),
            }
        )

    def _result(self) -> Plan:
        exposure, lanes = self.exposure, len(self.depth)
        if self.off.any() and self.failed:
            why = next(iter(self.failed.values()))
            outside_validity(f"{int(self.off.sum())} of {lanes} ascents cannot be planned and are nan: {why}")
        bottom_time = self._flat(
            exposure.duration
            if not exposure.dims
            else np.asarray(exposure.columns["segment_duration"].sum(axis=-1))
        )
        whole = self._lengthened()
        ascent = np.where(self.off, np.nan, self.clock).reshape(self.shape)
        coords = dict(exposure.coords)
        minutes: Any = (
            float(ascent)
            if not exposure.dims
            else xr.DataArray(
                ascent,
                dims=exposure.dims,
                coords=coords,
                attrs=attributes("duration") | {"long_name": "time from leaving the bottom"},
            )
        )
        return Plan(whole, self._stops(whole, bottom_time), minutes, self.model, self.rules)

    def _lengthened(self) -> Exposure:
        """Return the exposure with the legs of the ascent behind it."""
        exposure = self.exposure
        keep = _straightened([leg for leg in self.legs if (leg[0] > 0.0).any()])
        if not keep:
            return exposure
        rank = len(exposure.dims)

        def column(values: list[Array]) -> Array:
            return np.stack([np.asarray(v).reshape(self.shape) for v in values], axis=-1)

        def cells(value: Any) -> Array:
            full = np.broadcast_to(np.asarray(value, dtype=float), self.shape)
            return np.broadcast_to(full[..., None], (*self.shape, len(keep)))

        breathed = np.stack([leg[3] for leg in keep], axis=-1)
        lanes = np.arange(len(self.depth))[:, None]

        def of_gas(rows: list[Array]) -> Array:
            return np.asarray(np.stack(rows)[breathed, lanes]).reshape(*self.shape, len(keep))

        added = {
            "segment_duration": column([np.where(self.off, 0.0, leg[0]) for leg in keep]),
            "start_pressure": column([leg[1] for leg in keep]),
            "end_pressure": column([leg[2] for leg in keep]),
            "setpoint": of_gas(self.setpoints),
            "o2_uptake_stpd": cells(exposure.workload[0]),
            "ventilation_btps": cells(exposure.workload[1]),
        }
        formulas = dict.fromkeys(
            [*exposure.fractions, *(g for mix in self.mixes for g, v in mix.items() if v.any())]
        )
        nothing = np.zeros(len(self.depth))
        mixes = {g: of_gas([m.get(g, nothing) for m in self.mixes]) for g in formulas}
        there = len(exposure.part)

        def joined(old: Array, new: Array) -> Array:
            lead = np.broadcast_shapes(old.shape[:-1], new.shape[:-1])
            return np.concatenate([np.broadcast_to(v, (*lead, v.shape[-1])) for v in (old, new)], axis=-1)

        zero = np.zeros((*(1,) * rank, there))
        state = {g: v[..., -1] for g, v in mixes.items()}
        setpoint = added["setpoint"][..., -1]
        new = replace(
            exposure,
            columns={k: joined(v, added[k]) for k, v in exposure.columns.items()},
            fractions={g: joined(exposure.fractions.get(g, zero), mixes[g]) for g in formulas},
            part=(*exposure.part, *("ascent",) * len(keep)),
            session=(*exposure.session, *(exposure.session[-1],) * len(keep)),
            gas=state if rank else {g: float(v) for g, v in state.items()},
            pressure=self.pressure.reshape(self.shape) if rank else float(self.pressure[0]),
            setpoint_now=setpoint if rank else float(setpoint),
            part_now="ascent",
            history=(
                *exposure.history,
                f"ascent planned by {self.model.name}, parameters {self.model.digest}",
            ),
        )
        return new._split_clamps(since=there)

    def _stops(self, whole: Exposure, bottom_time: Array) -> xr.Dataset:

        exposure, model = self.exposure, self.model
        rows = self._joined()
        names = np.array([*model.compartments, ""], dtype=str)
        halves = np.append(model.half_time[:, 0], np.nan)
        dims = (*exposure.dims, "stop")

        def stack(key: str, kind: Any = float) -> Any:
            values = [np.where(self.off, np.nan, r[key]) if kind is float else r[key] for r in rows]
            full = np.stack(values, axis=-1) if values else np.empty((len(self.depth), 0))
            return full.reshape(*self.shape, len(rows)).astype(kind)

        control = stack("control", int) if rows else np.empty((*self.shape, 0), dtype=int)
        unit = {"m": "depth", "msw": "depth_msw", "fsw": "depth_fsw"}[exposure.depth_unit]
        known = weakest([model.provenance_of[g] for g in present(model, whole.pieces())])
        row = stack("gas", int).reshape(-1, len(rows)) if rows else np.empty((len(self.depth), 0), dtype=int)
        gas = self._names()[row, np.arange(len(self.depth))[:, None]].astype(str)
        leave = stack("leave") + bottom_time.reshape(self.shape)[..., None]
        margin = "what the worst compartment had left to its limit of the next depth on leaving"
        described: tuple[tuple[str, Any, dict[str, Any], str], ...] = (
            ("depth", stack("depth"), attributes(unit), "depth of the stop"),
            ("duration", stack("duration"), attributes("duration"), "time at the stop, travel not counted"),
            ("gas", gas.reshape(control.shape), {}, "gas breathed on leaving"),
            ("leave_time", leave, attributes("time"), "time of leaving since the start"),
            ("controlling_compartment", names[control], {}, "what held the stop; empty: a switch did"),
            ("controlling_half_time", halves[control], attributes("half_time"), "half-time in control"),
            ("margin", stack("margin"), {"units": "kPa"}, margin),
        )
        attrs = dataset_attributes(
            f"stops of an ascent by the model {model.name}",
            f"ascent, model {model.name}, parameters {model.digest}",
            history=exposure.history,
            references=[model.source],
            provenance=known,
            depth_unit=exposure.depth_unit,
            rules=", ".join(f"{k} {v}" for k, v in vars(self.rules).items()),
            does_not_claim=model.does_not_claim,
        )
        first = attributes(unit) | {"long_name": "where the low gradient first asks to stop; nan: nowhere"}
        return xr.Dataset(
            {name: (dims, values, own | {"long_name": meaning}) for name, values, own, meaning in described}
            | {"first_stop_depth": (exposure.dims, self.first.reshape(self.shape), first)},
            coords={"stop": np.arange(len(rows)), **exposure.coords},
            attrs=attrs,
        )

    def _joined(self) -> list[dict[str, Any]]:
        """Merge the notes of one depth (a switch and a wait); of one scenario drop what lasts no time."""
        rows: list[dict[str, Any]] = []
        for row in self.rows:
            before = rows[-1] if rows else None
            same = before is not None and bool(
                np.all((before["depth"] == row["depth"]) | np.isnan(before["depth"]) | np.isnan(row["depth"]))
            )
            if before is None or not same:
                rows.append(dict(row))
                continue
            real = ~np.isnan(row["depth"])
            before["depth"] = np.where(real, row["depth"], before["depth"])
            before["duration"] = before["duration"] + row["duration"]
            for key in ("gas", "control", "margin", "leave"):
                before[key] = np.where(real, row[key], before[key])
        return [r for r in rows if (r["duration"] > 0.0).any()]
