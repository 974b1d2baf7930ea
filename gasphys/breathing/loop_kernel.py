"""One breathing loop along one exposure: amounts of each gas, exact between events.

Every regime has a closed form, also while pressure changes: amounts that grow or shrink at a constant
rate, or fractions that decay in an overflowing loop whose amount is linear in time. Events (full, down to
the least volume, at the set-point) are linear in time or bracketed roots.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gasphys.breathing.loops import flushed_fraction
from gasphys.maths import find_root, mean_log

__all__ = ["Conditions", "State", "march"]

Array = NDArray[np.float64]

#: Share of an amount that is rounding.
_ROUNDING = 1e-12

#: Events in one step of time; more means that two regimes alternate without end.
_MOST_EVENTS = 200


@dataclass(frozen=True)
class Conditions:
    """What holds during one step of time.

    Parameters
    ----------
    full, growth : float
        Gas that fills the loop at the start [L STPD], and its rate [L/min]: proportional to pressure.
    least, least_growth : float
        The same for the volume at which a valve adds gas.
    uptake : float
        O2 uptake [L/min STPD].
    flow : float
        Supply that flows all the time [L/min STPD].
    supply : array
        Its fractions.
    valve : array or None
        Fractions of the gas a valve adds when the loop is down to its least volume; None: no valve.
    keyed : float or None
        Share of the loop's gas that a breath-keyed set discharges in a minute [1/min].
    held : float or None
        O2 amount at the set-point of a closed circuit [L STPD].
    """

    full: float
    growth: float
    least: float
    least_growth: float
    uptake: float
    flow: float
    supply: Array
    valve: Array | None
    keyed: float | None = None
    held: float | None = None

    def later(self, minutes: float) -> Conditions:
        """Return the conditions of a later start."""
        return replace(
            self,
            full=self.full + self.growth * minutes,
            least=self.least + self.least_growth * minutes,
        )


@dataclass(frozen=True)
class State:
    """Amounts by species, oxygen first [L STPD], and what was supplied so far."""

    amount: Array
    supplied: Array


@dataclass(frozen=True)
class _Regime:
    """A law of motion: amounts and supply after some minutes, and when it ends."""

    amount: Callable[[float], Array]
    supplied: Callable[[float], Array]
    until: float


def march(
    state: State, conditions: Conditions, minutes: float, watch: Callable[[State, float], float]
) -> tuple[State, float | None, float | None]:
    """Follow a loop through one step of time.

    Parameters
    ----------
    state : State
        At its start.
    conditions : Conditions
        Constant in the step but for the linear growth.
    minutes : float
        Its length.
    watch : callable
        Function of the state and the minutes passed; the first time it turns negative is returned.

    Returns
    -------
    tuple of State, float or None and float or None
        State at the end, NaN from the time the oxygen is used up; minutes until `watch` turned negative;
        minutes until the oxygen was used up.
    """
    state = _fitted(state, conditions)
    passed, crossed = 0.0, None
    for _ in range(_MOST_EVENTS):
        left = minutes - passed
        if left <= minutes * _ROUNDING or np.isnan(state.amount[0]):
            return state, crossed, None
        now = conditions.later(passed)
        regime = _regime(state, now, left)
        step = min(left, regime.until)

        def at(t: float, regime: _Regime = regime, state: State = state) -> State:
            return State(regime.amount(t), state.supplied + regime.supplied(t))

        if crossed is None:
            crossed = _first_negative(lambda t, at=at, passed=passed: watch(at(t), passed + t), step)  # type: ignore[misc]
            crossed = None if crossed is None else passed + crossed
        empty = _first_negative(lambda t, at=at: float(at(t).amount[0]), step)  # type: ignore[misc]
        if empty is not None:
            end = at(empty)
            return State(np.full_like(end.amount, np.nan), end.supplied), crossed, passed + empty
        state = at(step)
        passed += step
    raise AssertionError("a breathing loop alternates between two regimes")


def _fitted(state: State, c: Conditions) -> State:
    """Vent or add at once what a sudden change of pressure, as between two dives, leaves over or short."""
    total = float(state.amount.sum())
    if total > c.full * (1.0 + 1e-9):
        return State(state.amount * (c.full / total), state.supplied)
    if total < c.least * (1.0 - 1e-9) and c.valve is not None:
        added = (c.least - total) * c.valve
        return State(state.amount + added, state.supplied + added)
    return state


def _first_negative(value: Callable[[float], float], minutes: float) -> float | None:
    """Return the first time a function is negative; looked for between a few nodes."""
    nodes = np.linspace(0.0, minutes, 9)
    values = [value(float(t)) for t in nodes]
    if values[0] < 0.0:
        return 0.0
    for low, high, end in zip(nodes, nodes[1:], values[1:], strict=False):
        if end < 0.0:
            root = find_root(lambda x: np.vectorize(lambda t: value(float(t)))(x), low, high)
            return float(root)
    return None


def _regime(state: State, c: Conditions, left: float) -> _Regime:
    if c.keyed is not None:
        return _breath_keyed(state, c)
    if c.held is None:
        return _fixed(state, c, c.flow)
    return _closed(state, c, left)


# -- a supply that flows at one rate, a valve, an overflow -------------------------------------------


def _fixed(state: State, c: Conditions, flow: float) -> _Regime:
    total = float(state.amount.sum())
    net = flow - c.uptake
    slack = c.full * _ROUNDING
    full, low = total >= c.full - slack, total <= c.least + slack
    if full and net >= c.growth:
        return _overflow(state, c, flow)
    if low and net < c.least_growth and c.valve is not None:
        return _topped_up(state, c, flow)
    # Between: amounts change at a constant rate, until the loop is full or down to its least volume.
    until = np.inf
    if net > c.growth:
        until = max(0.0, (c.full - total) / (net - c.growth))
    if net < c.least_growth and c.valve is not None:
        until = min(until, max(0.0, (total - c.least) / (c.least_growth - net)))
    return _steady(state, c, flow * c.supply, until)


def _uptake(c: Conditions) -> Array:
    taken = np.zeros_like(c.supply)
    taken[0] = c.uptake
    return taken


def _steady(state: State, c: Conditions, inflow: Array, until: float = np.inf) -> _Regime:
    rate = inflow - _uptake(c)
    return _Regime(lambda t: state.amount + rate * t, lambda t: inflow * t, until)


def _topped_up(state: State, c: Conditions, flow: float) -> _Regime:
    assert c.valve is not None
    added = c.least_growth - (flow - c.uptake)
    return _steady(state, c, flow * c.supply + added * c.valve)


def _overflow(state: State, c: Conditions, flow: float) -> _Regime:
    fraction = state.amount / state.amount.sum()
    inflow = flow * c.supply

    def amount(t: float) -> Array:
        end = c.full + c.growth * t
        # Minutes over amount, integrated: what counts is how often the loop is turned over.
        turned = t * float(mean_log(c.full, end))
        found = flushed_fraction.raw(turned, fraction, inflow - _uptake(c), flow - c.uptake, 1.0)
        return np.asarray(end * found)

    return _Regime(amount, lambda t: inflow * t, np.inf)


# -- a set that discharges a share of each breath ----------------------------------------------------


def _breath_keyed(state: State, c: Conditions) -> _Regime:
    keyed = float(c.keyed or 0.0)
    inflow = keyed * c.full + c.uptake + c.growth
    slack = c.full * _ROUNDING
    if inflow < -slack or (inflow <= slack and c.growth < 0.0):
        # A fast ascent vents more than is discharged: nothing flows in.
        return _overflow(state, c, 0.0)
    excess = state.amount - c.supply * c.full
    net = c.uptake * c.supply - _uptake(c)

    def amount(t: float) -> Array:
        rest = flushed_fraction.raw(t, excess, net, keyed, 1.0)
        return np.asarray(c.supply * (c.full + c.growth * t) + rest)

    def supplied(t: float) -> Array:
        through = c.full * t + c.growth * t * t / 2.0
        return np.asarray(c.supply * (keyed * through + (c.uptake + c.growth) * t))

    until = np.inf if not (c.growth < 0.0 and keyed > 0.0) else inflow / (keyed * -c.growth)
    return _Regime(amount, supplied, until)


# -- a closed circuit: oxygen on demand of the set-point ---------------------------------------------


def _closed(state: State, c: Conditions, left: float) -> _Regime:
    assert c.held is not None
    oxygen = float(state.amount[0])
    off = oxygen - c.held
    slack = c.held * 1e-11
    if off > slack:
        return _until_held(_fixed(state, c, 0.0), c, left, -1.0)
    if off < -slack:
        return _until_held(_fixed(state, c, c.flow), c, left, 1.0)
    return _holding(state, c) or _drifting(state, c, left)


def _until_held(regime: _Regime, c: Conditions, left: float, sign: float) -> _Regime:
    """End a regime where the oxygen comes to the set-point."""
    step = min(left, regime.until)
    held = float(c.held or 0.0)
    met = _first_negative(lambda t: sign * (held - float(regime.amount(t)[0])), step)
    if met is None or met == 0.0:
        return regime
    # A little more than the root, which may lie on either side of the set-point by its last bit.
    return _Regime(regime.amount, regime.supplied, min(regime.until, met * (1.0 + 1e-14)))


def _drifting(state: State, c: Conditions, left: float) -> _Regime:
    """At the set-point, but it cannot be held: too little oxygen flow, or a diluent too rich."""
    short = _fixed(state, c, c.flow)
    if short.amount(1e-6)[0] < state.amount[0]:
        return short
    return _fixed(state, c, 0.0)


def _holding(state: State, c: Conditions) -> _Regime | None:
    """Oxygen stays at the set-point: what flows in is what is used and what is vented."""
    held = float(c.held or 0.0)
    total = float(state.amount.sum())
    inert = state.amount.copy()
    inert[0] = 0.0
    oxygen = np.zeros_like(inert)
    oxygen[0] = 1.0
    if abs(total - c.full) > c.full * 1e-9 or not total > held * (1.0 + 1e-12):
        return None
    if c.growth >= 0.0:
        if c.valve is None:
            return None
        rich = float(c.valve[0])
        added = c.growth / (1.0 - rich) if c.growth > 0.0 and rich < 1.0 else 0.0
        flow = c.uptake - added * rich
        if not 0.0 <= flow <= c.flow or (c.growth > 0.0 and rich >= 1.0):
            return None
        inflow = flow * oxygen + added * c.valve
        return _steady(state, c, inflow)
    # Ascent: mixed gas is vented; the flow that makes up for its oxygen grows until the valve is wide open.
    room = c.flow - c.uptake
    if not room > 0.0 or -c.growth * held / (total - held) > room:
        return None
    last = held * (room - c.growth) / room  # amount at which the flow needed is the largest one
    if total - last <= c.full * _ROUNDING:
        return None
    until = (total - last) / -c.growth

    def amount(t: float) -> Array:
        found = inert * ((total + c.growth * t - held) / (total - held))
        found[0] = held
        return found

    def supplied(t: float) -> Array:
        # Oxygen used, and the oxygen vented with the inert gas: the integral of held/(amount - held).
        rest = total - held
        vented = held * -c.growth * t * float(mean_log(rest, rest + c.growth * t)) if t else 0.0
        return oxygen * (c.uptake * t + vented)

    return _Regime(amount, supplied, until)
