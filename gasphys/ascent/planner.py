"""Ascents planned with a dissolved-gas model, any number of scenarios in lockstep on one grid of stops."""

from __future__ import annotations

import os
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.ascent.equations import gradient_at_depth
from gasphys.ascent.rules import Rules, Source, read_gases
from gasphys.errors import ExposureError, NotReachableError, ValidityError
from gasphys.exposure import Exposure
from gasphys.gas import FORMULAS, Gas
from gasphys.maths import find_root
from gasphys.policy import outside_validity, weakest
from gasphys.quantities import CAUTION, attributes
from gasphys.surroundings import WATERS, depth_at_pressure
from gasphys.tissues.kinetics import Breath, advance, along, inert_pressure, stretches
from gasphys.tissues.model import check_gases, initial_state, present
from gasphys.tissues.sets import TissueSet, load
from gasphys.tissues.tolerance import ROUNDING, m_values, short_deep

__all__ = ["Plan", "plan"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Minutes looked at together; after each row that fails the next is longer.
_FIRST_ROW, _LONGEST_ROW = 16, 256
#: Most states held at once, scenarios times minutes: bounds the memory.
_STATES = 2**15
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
    """

    exposure: Exposure
    stops: xr.Dataset
    ascent_time: Any
    model: TissueSet
    rules: Rules

    @property
    def total_time(self) -> Any:
        """Duration of the whole exposure [min]; a DataArray where it differs between scenarios."""
        return self.exposure.duration

    def __repr__(self) -> str:
        return f"<Plan by {self.model.name}: {self.stops.sizes['stop']} stops>"

    def __str__(self) -> str:
        unit = self.exposure.depth_unit
        if self.exposure.dims:
            return repr(self)
        lines = [f"ascent by {self.model.name}, {self.model.edition}"]
        for k in range(self.stops.sizes["stop"]):
            row = self.stops.isel(stop=k)
            half, name = float(row.controlling_half_time), str(row.controlling_compartment.values)
            control = f"{half:g}-min half-time" if np.isfinite(half) else f"compartment {name}"
            why = f"{control} in control" if name else "for the switch"
            lines.append(
                f"wait at {float(row.depth):g} {unit}, leave at {float(row.leave_time):.1f} min elapsed; "
                f"{float(row.duration):g} min; {why}; {row.gas.values}"
            )
        lines.append(
            f"surface at {float(self.total_time):.1f} min elapsed; ascent {float(self.ascent_time):.1f} min"
        )
        lines.append(CAUTION)
        return "\n".join(lines)


def plan(
    exposure: Exposure,
    gases: Sequence[tuple[Any, Any]] = (),
    model: str | os.PathLike[str] | TissueSet = "buhlmann_1995_c",
    rules: Rules | None = None,
    without: Any = None,
    *,
    initial: Any = None,
) -> Plan:
    """Ascent from the last instant of an exposure to the surface, by one model.

    Parameters
    ----------
    exposure : Exposure
        Ends at the bottom; several scenarios are planned in lockstep.
    gases : sequence of (gas, deepest)
        What may be breathed on the way: a Gas, its name or a :class:`Loop`, and its deepest depth of use
        [depth unit] (or text: ``"1.6 bar"`` is a PO2). Without any, the gas or loop of the bottom is kept.
    model : str, path or TissueSet
        As for :func:`gasphys.tissues.tensions`.
    rules : Rules, optional
        Rates, stops, gradients.
    without : Gas, str or Loop, optional
        One of the gases that is lost.
    initial : Dataset, DataArray, float or str, optional
        Tissues at the start of the exposure.

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
    cannot be planned is NaN with a warning. Not a table, not tested in the water; nothing here knows bubbles,
    work or cold.

    Examples
    --------
    >>> bottom = Exposure.start("air").travel(depth=40, rate=20).stay(20)
    >>> found = plan(bottom)
    >>> found.stops.depth.values.tolist(), found.stops.duration.values.tolist()
    ([6.0, 3.0], [2.0, 8.0])
    """
    chosen = load(model)
    if not exposure.part:
        raise ExposureError("the exposure has no piece yet")
    used = (Rules() if rules is None else rules).filled(exposure.depth_unit)
    sources = read_gases(gases, without, exposure.depth_unit)
    if not chosen.limited:
        raise ValidityError(f"{chosen.name} has no limits to plan an ascent with")
    return _Planner(exposure, sources, chosen, used).run(initial)


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
        return np.asarray(np.round(values, 9))  # 30 msw is 30, not 30.000000000000004

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
            start = Exposure.start(source.gas).stay(1.0)
            if not np.isnan(source.setpoint):
                start = replace(start, columns={**start.columns, "setpoint": np.array([source.setpoint])})
            check_gases(self.model, start.pieces(), ())

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
        self.breaths: list[Breath] = []
        for mix, setpoint in rows:
            if model.alveolar == "ambient":
                inert = [1.0 - mix["O2"]]
            else:
                nothing = np.zeros(lanes)
                inert = [
                    sum((mix.get(f, nothing) for f in model.formulas_of(g)), nothing)
                    for g in model.inert_gases
                ]
            self.breaths.append(Breath(mix["O2"], np.stack(inert, axis=-1), setpoint))
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
        if len(self.breaths) == 1:
            one = self.breaths[0]
            return Breath(one.oxygen[lanes], one.inert[lanes], one.setpoint[lanes])
        oxygen = np.stack([b.oxygen for b in self.breaths])
        inert = np.stack([b.inert for b in self.breaths])
        setpoint = np.stack([b.setpoint for b in self.breaths])
        return Breath(oxygen[rows, lanes], inert[rows, lanes], setpoint[rows, lanes])

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
            good &= self._excess(self.state, self.surface, high)[0] <= 0.0
        if "on_arrival" in self.model.tested:
            arrived = self.state
            for minutes, start, end, rows in self._path(lanes, self.depth, np.zeros(len(lanes))):
                arrived = advance(self.model, arrived, minutes, start, end, self._breath(rows, lanes))
            good &= self._excess(arrived, self.surface, high)[0] <= 0.0
        return good

    def _excess(self, state: Array, pressure: Array, gradient: Array) -> tuple[Array, NDArray[np.int64]]:
        """Return by how much the worst compartment is over its limit at a pressure [kPa], and which it is."""
        total, limit = m_values(self.model, state, pressure)
        limit = pressure[..., None] + gradient[..., None] * (limit - pressure[..., None])
        over = np.where(np.isnan(limit), -np.inf, total - limit * (1.0 + ROUNDING))
        worst = np.argmax(over, axis=-1)
        return np.take_along_axis(over, worst[..., None], axis=-1)[..., 0], worst

    def _path(self, lanes: NDArray[np.int64], depth: Array, target: Array) -> list[_Leg]:
        """Return the stretches from a depth up to a target: cut where the rate or the gas changes."""
        bands = self.rules.bands()
        edges = {edge for edge, _ in bands} | {float(d) for d in np.unique(self.deepest[:, lanes])}
        top, low = float(depth.max()), float(target.min())
        cuts = sorted((e for e in edges if low < e < top), reverse=True)
        path = []
        here = depth
        for cut in [*cuts, low]:
            there = np.minimum(here, np.maximum(cut, target))
            if not (there < here).any():
                continue
            middle = 0.5 * (here + there)
            rate = np.select([middle >= edge for edge, _ in bands], [r for _, r in bands])
            # Between two cuts the gas is that of the deeper end: the shallower end is where it changes.
            full = np.zeros(len(self.depth))
            full[lanes] = middle
            rows = self._gas_at(full)[lanes]
            path.append(
                (np.where(there < here, (here - there) / rate, 0.0), *self._ends(lanes, here, there), rows)
            )
            here = there
        return path

    def _ends(self, lanes: NDArray[np.int64], here: Array, there: Array) -> tuple[Array, Array]:
        full = [np.zeros(len(self.depth)) for _ in range(2)]
        for values, depth in zip(full, (here, there), strict=True):
            values[lanes] = depth
        start, end = (self._pressure(v)[lanes] for v in full)
        # The bottom's own pressure, not its depth's: they may differ in the last bit.
        start = np.where(here == self.depth[lanes], self.pressure[lanes], start)
        return start, end

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
        self.state[lanes] = advance(
            self.model, self.state[lanes], minutes[lanes], p, p, self._breath(self.gas[lanes], lanes)
        )
        spent = np.zeros(len(minutes))
        spent[lanes] = minutes[lanes]
        self.clock += spent
        self.legs.append((spent, self.pressure.copy(), self.pressure.copy(), self.gas.copy()))

    def _travel(self, moving: Mask, target: float) -> None:
        lanes = np.flatnonzero(moving)
        if not lanes.size:
            return
        for minutes, start, end, rows in self._path(lanes, self.depth[lanes], np.full(len(lanes), target)):
            self.state[lanes] = advance(
                self.model, self.state[lanes], minutes, start, end, self._breath(rows, lanes)
            )
            spent, gas = np.zeros(len(self.depth)), self.gas.copy()
            first, last = self.pressure.copy(), self.pressure.copy()
            spent[lanes], first[lanes], last[lanes], gas[lanes] = minutes, start, end, rows
            self.legs.append((spent, first, last, gas))
            self.clock += spent
            self.pressure = last
            self.depth[lanes] = np.where(minutes > 0.0, self._depth(last)[lanes], self.depth[lanes])
            self._switch(moving & (self.depth > 0.0))
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
        low = np.full(len(self.depth), self.rules.gradient_low)
        over, _ = self._step_excess(lanes, self.state[lanes], target, there, low)
        stopped = lanes[(over > 0.0) | ~np.isnan(self.first[lanes])]
        new = stopped[np.isnan(self.first[stopped])]
        self.first[new] = self.depth[new]
        if not stopped.size:
            return
        gradient = gradient_at_depth.raw(
            target, np.nan_to_num(self.first, nan=0.0), self.rules.gradient_low, self.rules.gradient_high
        )
        over, _ = self._step_excess(stopped, self.state[stopped], target, there, gradient)
        waiting = stopped[over > 0.0]
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
        before = self.state[waiting]
        self._stay(self._mask(waiting), spent)
        # In control is what held it last: just before it was allowed.
        held = advance(
            self.model, before, np.maximum(minutes - (1.0 if self.rules.whole_minutes else 1e-6), 0.0),
            self.pressure[waiting], self.pressure[waiting], self._breath(self.gas[waiting], waiting),
        )  # fmt: skip
        _, control = self._step_excess(waiting, held, target, there, gradient)
        left, _ = self._step_excess(waiting, self.state[waiting], target, there, gradient)
        controls, margins = np.full(len(self.depth), -1), np.full(len(self.depth), np.nan)
        controls[waiting], margins[waiting] = control, np.maximum(-left, 0.0)
        self._note(self._mask(waiting), spent, controls, margins)

    def _mask(self, lanes: NDArray[np.int64]) -> Mask:
        mask = np.zeros(len(self.depth), dtype=bool)
        mask[lanes] = True
        return mask

    def _step_excess(
        self, lanes: NDArray[np.int64], state: Array, target: float, there: Array, gradient: Array
    ) -> tuple[Array, NDArray[np.int64]]:
        """Return by how much the step up is not allowed [kPa], as the set tests it, and what holds it."""
        extra = state.ndim - 3
        pressure = there[lanes].reshape(-1, *(1,) * extra)
        share = gradient[lanes].reshape(-1, *(1,) * extra)
        pressure, share = (np.broadcast_to(v, state.shape[:-2]) for v in (pressure, share))
        over = np.full(state.shape[:-2], -np.inf)
        worst = np.zeros(state.shape[:-2], dtype=np.int64)
        if "before_leaving" in self.model.tested:
            over, worst = self._excess(state, pressure, share)
        if "on_arrival" in self.model.tested:
            arrived = state
            for minutes, start, end, rows in self._path(
                lanes, self.depth[lanes], np.full(len(lanes), target)
            ):
                breath = self._breath(rows, lanes)
                wide = Breath(
                    *(
                        np.expand_dims(v, tuple(range(1, 1 + extra)))
                        for v in (breath.oxygen, breath.inert, breath.setpoint)
                    )
                )
                t, a, b = (v.reshape(-1, *(1,) * extra) for v in (minutes, start, end))
                arrived = advance(self.model, arrived, t, a, b, wide)
            there_over, there_worst = self._excess(arrived, pressure, share)
            later = there_over > over
            over, worst = np.where(later, there_over, over), np.where(later, there_worst, worst)
        return over, worst

    def _search(self, lanes: NDArray[np.int64], target: float, there: Array, gradient: Array) -> Array:
        """Return the shortest wait [min] after which the step is allowed; NaN where it never is.

        Whole minutes are looked at in rows that get longer; the first that is allowed ends it, so the search
        ends even where a slower tissue closes the door again.
        """
        found = np.full(len(lanes), np.nan)
        todo = np.arange(len(lanes))
        slowest = float(np.nanmax(self.model.half_time)) if self.model.kinetics != "serial" else 300.0
        patience = int(np.ceil(_PATIENCE * slowest))
        done, size, step = 0, _FIRST_ROW, 1
        state = self.state[lanes]
        while todo.size and done < patience:
            some = lanes[todo]
            size = max(4, min(size, _STATES // todo.size))
            minutes = done + step * np.arange(1.0, size + 1.0)
            p = self.pressure[some][:, None]
            breath = self._breath(self.gas[some], some)
            wide = Breath(breath.oxygen[:, None], breath.inert[:, None], breath.setpoint[:, None])
            later = advance(self.model, state[todo][:, None], minutes[None, :], p, p, wide)
            over, _ = self._step_excess(some, later, target, there, gradient)
            good = over <= 0.0
            hit = good.any(axis=1)
            found[todo[hit]] = minutes[np.argmax(good[hit], axis=1)]
            if step > 1 and hit.any():
                found[todo[hit]] = self._narrow(
                    todo[hit], lanes, found[todo[hit]], step, state, target, there, gradient
                )
            todo = todo[~hit]
            done = int(minutes[-1])
            size = min(2 * size, _LONGEST_ROW)
            step = 1 if done < 2000 else max(1, done // 500)
        if not self.rules.whole_minutes:
            found = self._exact(found, lanes, state, target, there, gradient)
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
        some = lanes[index]
        p = self.pressure[some]
        held = advance(self.model, state[index], minutes, p, p, self._breath(self.gas[some], some))
        return self._step_excess(some, held, target, there, gradient)[0]

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

        def of_gas(rows: list[Array], leg: _Leg) -> Array:
            return np.asarray(np.stack(rows)[leg[3], np.arange(len(leg[3]))])

        added = {
            "segment_duration": column([np.where(self.off, 0.0, leg[0]) for leg in keep]),
            "start_pressure": column([leg[1] for leg in keep]),
            "end_pressure": column([leg[2] for leg in keep]),
            "setpoint": column([of_gas(self.setpoints, leg) for leg in keep]),
            "o2_uptake_stpd": cells(exposure.workload[0]),
            "ventilation_btps": cells(exposure.workload[1]),
        }
        formulas = dict.fromkeys(
            [*exposure.fractions, *(g for mix in self.mixes for g, v in mix.items() if v.any())]
        )
        nothing = np.zeros(len(self.depth))
        mixes = {
            g: column([of_gas([m.get(g, nothing) for m in self.mixes], leg) for leg in keep])
            for g in formulas
        }
        there = len(exposure.part)

        def joined(old: Array, new: Array) -> Array:
            lead = np.broadcast_shapes(old.shape[:-1], new.shape[:-1])
            return np.concatenate([np.broadcast_to(v, (*lead, v.shape[-1])) for v in (old, new)], axis=-1)

        zero = np.zeros((*(1,) * rank, there))
        last = keep[-1]
        state = {
            g: of_gas([m.get(g, nothing) for m in self.mixes], last).reshape(self.shape) for g in formulas
        }
        new = replace(
            exposure,
            columns={k: joined(v, added[k]) for k, v in exposure.columns.items()},
            fractions={g: joined(exposure.fractions.get(g, zero), mixes[g]) for g in formulas},
            part=(*exposure.part, *("ascent",) * len(keep)),
            session=(*exposure.session, *(exposure.session[-1],) * len(keep)),
            gas=state if rank else {g: float(v) for g, v in state.items()},
            pressure=self.pressure.reshape(self.shape) if rank else float(self.pressure[0]),
            setpoint_now=of_gas(self.setpoints, last).reshape(self.shape)
            if rank
            else float(of_gas(self.setpoints, last)[0]),
            part_now="ascent",
            history=(
                *exposure.history,
                f"ascent planned by {self.model.name}, parameters {self.model.digest}",
            ),
        )
        return new._split_clamps(since=there)

    def _stops(self, whole: Exposure, bottom_time: Array) -> xr.Dataset:
        from gasphys import __version__

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
        ds = xr.Dataset(coords={"stop": np.arange(len(rows)), **exposure.coords})
        for name, values, attrs, meaning in (
            ("depth", stack("depth"), attributes(unit), "depth of the stop"),
            ("duration", stack("duration"), attributes("duration"), "time at the stop, travel not counted"),
            ("gas", gas.reshape(control.shape), {}, "gas breathed on leaving"),
            ("leave_time", leave, attributes("time"), "time of leaving since the start"),
            ("controlling_compartment", names[control], {}, "what held the stop; empty: a switch did"),
            ("controlling_half_time", halves[control], attributes("half_time"), "half-time in control"),
            ("margin", stack("margin"), {"units": "kPa"}, margin),
        ):
            ds[name] = (dims, values, attrs | {"long_name": meaning})
        ds.attrs = {
            "Conventions": "CF-1.11",
            "title": f"stops of an ascent by the model {model.name}",
            "source": f"gasphys {__version__}, ascent, model {model.name}, parameters {model.digest}",
            "history": "; ".join(exposure.history) or "as given",
            "references": model.source,
            "provenance": known,
            "depth_unit": exposure.depth_unit,
            "rules": ", ".join(f"{k} {v}" for k, v in vars(self.rules).items()),
            "does_not_claim": model.does_not_claim,
            "comment": CAUTION,
        }
        return ds

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
