"""Ascents by the varying-permeability model: the planner with the gradients of nuclei, pass after pass."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.ascent.breaks import BreakingPlanner
from gasphys.ascent.planner import Array, Mask, Plan, _Planner
from gasphys.ascent.rules import Rules, Source
from gasphys.bubbles.equations import (
    adjusted_crushing_pressure,
    critical_volume_gradient,
    expanded_gradient,
    minimum_gradient,
    mixed_gradient,
    surface_excess_time,
)
from gasphys.bubbles.gas_nuclei import begin, crush, supersaturation_start
from gasphys.bubbles.model_choices import VaryingPermeability
from gasphys.constants import LN2
from gasphys.exposure import Exposure
from gasphys.policy import outside_validity
from gasphys.quantities import attributes
from gasphys.tissues.kinetics import along, equilibrium, stretches
from gasphys.tissues.tolerance import ROUNDING

__all__ = ["NucleiPlanner", "nuclei_planner"]

#: Most passes; what has not settled by then goes round in a circle.
_PASSES = 60
#: Passes agree where every stop does [min]; whole minutes do exactly.
_SETTLED = 1e-6
#: Shortest time for which the gas phase is said to inflate [min].
_SHORTEST = 1e-6


@dataclass
class NucleiPlanner(_Planner):
    """Planner whose limit is a supersaturation for every compartment, gas and scenario.

    Parameters
    ----------
    nuclei : VaryingPermeability
        The model; its compartments are the planner's model.

    Examples
    --------
    >>> from gasphys import Exposure, ascent
    >>> bottom = Exposure.start("air").travel(depth=40, rate=20).stay(20)
    >>> ascent.plan(bottom, model="yount_hoffman_1986").stops.depth.values.tolist()
    [18.0, 15.0, 12.0, 9.0, 6.0, 3.0]
    """

    nuclei: VaryingPermeability

    def run(self, initial: Any) -> Plan:
        if self.rules.gradient_low != 1.0 or self.rules.gradient_high != 1.0:
            outside_validity(f"{self.model.name} has no M-values: the gradients of the rules are not used")
            self.rules = replace(self.rules, gradient_low=1.0, gradient_high=1.0)
        self.before = initial
        return super().run(initial)

    # -- The limit ---------------------------------------------------------------------------------

    def _over(self, lanes: NDArray[np.int64], state: Array, pressure: Array, gradient: Array) -> Array:
        """Return by how much each compartment is over the supersaturation allowed it [kPa]."""
        allowed = self._expanded(lanes, pressure) if self.expanding else self.allowed[lanes]
        allowed = allowed.reshape(len(lanes), *(1,) * (state.ndim - 3), *allowed.shape[1:])
        total = state[..., 0] if state.shape[-1] == 1 else state[..., 0] + state[..., 1]
        limit = pressure[..., None] + self._mixed(state, allowed)
        return np.asarray(total + self.nuclei.other_gases - limit * (1.0 + ROUNDING))

    def _mixed(self, state: Array, allowed: Array) -> Array:
        """Return the gradient of compartments that may hold two gases."""
        if state.shape[-1] == 1:
            return np.asarray(allowed[..., 0])
        n2, he = (self.model.inert_gases.index(g) for g in ("N2", "He"))
        pressures, gradients = (state[..., n2], state[..., he]), (allowed[..., n2], allowed[..., he])
        if self.nuclei.mixing == "tension":
            return np.asarray(mixed_gradient.raw(*pressures, *gradients))
        nitrogen, helium = (np.where(p > 0.0, g, np.inf) for p, g in zip(pressures, gradients, strict=True))
        smaller = np.minimum(helium, nitrogen)
        return np.where(np.isinf(smaller), gradients[0], smaller)

    def _expanded(self, lanes: NDArray[np.int64], pressure: Array) -> Array:
        """Return the gradients left at a pressure to bubbles that have expanded since the first stop."""
        own = self.allowed[lanes]
        begun = ~np.isnan(self.first[lanes])
        if not begun.any():
            return own
        at = self._pressure(np.nan_to_num(self.first))[lanes]
        there = np.broadcast_to(pressure.reshape(len(lanes), -1)[:, 0], at.shape)
        shape = own.shape
        first, now = (np.broadcast_to(v[:, None, None], shape) for v in (at, there))
        left = expanded_gradient.raw(np.minimum(now, first), own, first)
        return np.where(begun[:, None, None], left, own)

    # -- Passes ------------------------------------------------------------------------------------

    def _crushed(self) -> None:
        """Work out the nuclei on leaving the bottom, and the least gradients."""
        model, exposure = self.nuclei, self.exposure
        state, first = begin(model, self.before, exposure)
        row, _ = stretches(model.tissues, exposure.pieces())
        cells = (*self.shape, *self.model.half_time.shape)
        held = along(model.tissues, np.broadcast_to(state, cells), row)
        last, _ = crush(model, first, held, row, exposure.surface_pressure)
        self.radius = np.broadcast_to(last.radius(model), cells).reshape(-1, *cells[len(self.shape) :])
        self.least = np.asarray(minimum_gradient.raw(self.radius, *model.skin))
        self.crushing = np.asarray(adjusted_crushing_pressure.raw(self.radius, model.radii, *model.skin))

    def _zone(self) -> tuple[Array, Array]:
        """Return depth and time of a continuous ascent where it first leaves something supersaturated."""
        depth, after = np.zeros(len(self.depth)), np.full(len(self.depth), np.nan)
        state, gone = self.state, np.zeros(len(self.depth))
        top = np.zeros(len(self.depth), dtype=bool)
        here = self.depth
        for (minutes, start, end, rows), there, passage in self._route(0.0):
            breath = self._breath(rows, np.arange(len(here)))
            share = supersaturation_start(self.nuclei, state, minutes, start, end, breath)
            new = np.isnan(after) & ~np.isnan(share) & (minutes > 0.0)
            part = np.nan_to_num(share)
            after = np.where(new, gone + minutes * part, after)
            depth = np.where(new, self._depth(start + (end - start) * part), depth)
            state, gone, here = passage(state), gone + minutes, there
            top |= new
        self._known = None
        return depth, np.where(top, after, gone)

    def _climb(self) -> None:
        model = self.nuclei
        self._crushed()
        kept = self.state.copy(), self.depth.copy(), self.pressure.copy()
        self.zone, zone_time = self._zone()
        self.expanding = model.boyle_expansion == "every_pass"
        self.allowed = self.least.copy()
        lost = self.off.copy()
        settled = lost.copy()
        seen: list[dict[tuple[tuple[float, float], ...], tuple[Array, float]]] = [{} for _ in self.depth]
        last: list[tuple[tuple[float, float], ...]] = [() for _ in self.depth]
        self.passes = np.zeros(len(self.depth), dtype=np.int64)
        circling = np.zeros(len(self.depth), dtype=bool)
        complete = False
        for k in range(_PASSES):
            self._again(kept)
            self.off = settled | lost
            self._pass()
            lost |= self.off & ~settled
            self.passes[~(settled | lost)] += 1
            time = (
                self.clock - zone_time
                if model.decompression_time == "first_supersaturated_depth"
                else self.clock
            )
            complete = not settled.any() or bool((settled <= lost).all())
            for lane in np.flatnonzero(~(settled | lost)):
                now = self._signature(int(lane))
                if k and _agree(now, last[lane]):
                    settled[lane] = True
                elif now in seen[lane] and self.rules.whole_minutes:
                    # A circle: the longest of its passes.
                    row = list(seen[lane])
                    circle = row[row.index(now) :]
                    best = max(circle, key=lambda one, lane=lane: seen[lane][one][1])  # type: ignore[misc]
                    self.allowed[lane] = seen[lane][best][0]
                    settled[lane] = circling[lane] = True
                    complete = False
                seen[lane][now] = (self.allowed[lane].copy(), float(self.clock[lane]))
                last[lane] = now
            going = ~(settled | lost)
            if not going.any():
                break
            self.decompression_time = np.where(going, time, getattr(self, "decompression_time", time))
            self._renew(going, time)
        else:
            for lane in np.flatnonzero(going):
                best = max(seen[lane], key=lambda one, lane=lane: seen[lane][one][1])  # type: ignore[misc]
                self.allowed[lane] = seen[lane][best][0]
            circling |= going
            complete = False
        self.off = lost
        if model.boyle_expansion is True:
            self.expanding, complete = True, False
        if not complete:
            self._again(kept)
            self._pass()
        self.settled = ~circling
        if circling.any():
            outside_validity(
                f"{self.model.name}: {int(circling.sum())} of {len(self.depth)} ascents never settle; the "
                "longest of the passes that follow each other is given"
            )

    def _again(self, kept: tuple[Array, Array, Array]) -> None:
        self.state, self.depth, self.pressure = (v.copy() for v in kept)
        self._known = None

    def _pass(self) -> None:
        super()._climb()

    def _signature(self, lane: int) -> tuple[tuple[float, float], ...]:
        """Return the stops of a lane."""
        rows = [(float(r["depth"][lane]), float(r["duration"][lane])) for r in self.rows]
        return tuple(row for row in rows if row[1] > 0.0)

    def _renew(self, going: Mask, time: Array) -> None:
        """Work out the gradients of the next pass, from the decompression time and what surfaces."""
        model, own = self.nuclei, self.model
        gases = own.inert_gases
        half = {g: own.half_time[:, j] for j, g in enumerate(gases)}
        slow = half["N2"] if "N2" in half else half["He"]
        if model.surface_time == "half_time":
            after = np.broadcast_to(slow / float(LN2), self.state.shape[:-1])
        else:
            rest = equilibrium(own, self.surface)
            held = {g: self.state[..., j] for j, g in enumerate(gases)}
            nothing = np.zeros(self.state.shape[:-1])
            inspired = rest[..., gases.index("N2")] if "N2" in gases else nothing
            after = surface_excess_time.raw(
                held.get("He", nothing),
                held.get("N2", nothing),
                inspired,
                half.get("He", slow),
                half.get("N2", slow),
            )
        whole = np.maximum(np.asarray(after) + np.maximum(time, 0.0)[:, None], _SHORTEST)
        new = critical_volume_gradient.raw(
            model.radii, self.crushing, whole[..., None], model.critical_volume, *model.skin
        )
        self.allowed = np.where(going[:, None, None], new, self.allowed)

    # -- The result --------------------------------------------------------------------------------

    def _stops(self, whole: Any, bottom_time: Array) -> xr.Dataset:
        ds = super()._stops(whole, bottom_time)
        dims, model = self.exposure.dims, self.nuclei
        both = ("compartment", "inert_gas")
        ds = ds.assign_coords(
            compartment=np.array(self.model.compartments, dtype=str),
            inert_gas=np.array(self.model.inert_gases, dtype=str),
        )
        unit = {"m": "depth", "msw": "depth_msw", "fsw": "depth_fsw"}[self.exposure.depth_unit]
        cells = (*self.shape, *self.model.half_time.shape)
        gradient = attributes("bubble_gradient")
        where = "where a continuous ascent first leaves something supersaturated"
        for name, here, values, attrs, meaning in (
            ("nucleus_radius", both, self.radius, attributes("nucleus_radius"), "on leaving the bottom"),
            ("minimum_gradient", both, self.least, gradient, "least gradient of the nuclei"),
            ("allowed_gradient", both, self.allowed, gradient, "supersaturation allowed by the last pass"),
            ("first_supersaturated_depth", (), self.zone, attributes(unit), where),
            ("passes", (), self.passes, {"units": "1"}, "passes until the stops repeat"),
            ("settled", (), self.settled.astype(np.int8), {"units": "1"}, "1: the stops repeat, 0: a circle"),
        ):
            shape = cells if here else self.shape
            full = np.asarray(values).reshape(shape)
            if full.dtype.kind == "f":
                full = np.where(self.off.reshape((*self.shape, *(1,) * len(here))), np.nan, full)
            ds[name] = ((*dims, *here), full, attrs | {"long_name": meaning})
        ds.attrs["choices"] = ", ".join(f"{k} {v}" for k, v in model.choices().items())
        ds.attrs["references"] = "; ".join(self.model.references)
        ds.attrs["comment"] += f" Evidence: {self.model.evidence}."
        return ds


def _agree(one: tuple[tuple[float, float], ...], other: tuple[tuple[float, float], ...]) -> bool:
    return len(one) == len(other) and all(
        a[0] == b[0] and abs(a[1] - b[1]) <= _SETTLED for a, b in zip(one, other, strict=True)
    )


def nuclei_planner(
    exposure: Exposure, sources: tuple[Source, ...], model: VaryingPermeability, rules: Rules
) -> NucleiPlanner:
    """Return the planner of a bubble model, with breaks where the rules have them.

    Parameters
    ----------
    exposure : Exposure
        Ends at the bottom.
    sources : tuple of Source
        Gases of the way.
    model : VaryingPermeability
        The model.
    rules : Rules
        Filled in.

    Returns
    -------
    NucleiPlanner
        Ready to run.

    Examples
    --------
    >>> from gasphys.bubbles import varying_permeability
    >>> bottom = Exposure.start("air").travel(depth=40, rate=20).stay(20)
    >>> planner = nuclei_planner(bottom, (), varying_permeability(), Rules().filled("msw"))
    >>> planner.run(None).stops.sizes["stop"]
    6
    """
    if rules.breaks is None:
        return NucleiPlanner(exposure, sources, model.tissues, rules, model)
    return _WithBreaks(exposure, (*sources, rules.breaks.source()), model.tissues, rules, model)


class _WithBreaks(NucleiPlanner, BreakingPlanner):
    """Both: gradients of nuclei, and breaks on another gas."""
