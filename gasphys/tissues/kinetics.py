"""Kernels: how compartments take up and give off inert gas along straight stretches.

States are arrays ``(..., compartment, inert_gas)`` in kPa, the leading dimensions any batch of
scenarios. Pressure and alveolar inert gas are linear in time on a stretch; nothing is stepped with a fixed
step. Every scenario is computed as if it were alone.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from operator import mul
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gasphys.constants import LN2
from gasphys.exposure import Pieces
from gasphys.maths import find_root, ramp_gain_from
from gasphys.tissues.equations import (
    alveolar_inert_pressure,
    arterial_inert_pressure,
    linear_tissue_pressure,
    linear_washout_time,
    loop_alveolar_inert_pressure,
    slip_flow,
    tissue_pressure,
    uptake_share,
    washout_threshold,
)
from gasphys.tissues.sets import TissueSet

__all__ = [
    "Breath",
    "LastBranch",
    "Passage",
    "Stretches",
    "advance",
    "along",
    "equilibrium",
    "inert_pressure",
    "last_branch",
    "serial_after",
    "stay",
    "stretches",
]

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Breath:
    """What is breathed, ``(...)`` or ``(..., stretch)``.

    Parameters
    ----------
    oxygen : array
        O2 fraction of the gas, on a loop of the diluent [1].
    inert : array
        Fraction of each tracked inert gas ``(..., inert_gas)`` [1], likewise.
    setpoint : array
        Loop set-point [kPa]; NaN on open circuit.
    """

    oxygen: Array
    inert: Array
    setpoint: Array


@dataclass(frozen=True)
class Stretches:
    """Straight stretches ``(..., stretch)``, cut where the alveolar inert gas reaches zero.

    Parameters
    ----------
    duration : array
        Length [min].
    start_pressure, end_pressure : array
        Ambient pressure [kPa].
    start_inert, end_inert : array
        Alveolar pressure of each tracked gas [kPa], ``(..., stretch, inert_gas)``.
    """

    duration: Array
    start_pressure: Array
    end_pressure: Array
    start_inert: Array
    end_inert: Array

    def at(self, index: int) -> tuple[Array, Array, Array, Array, Array]:
        """Return one stretch of every scenario.

        Parameters
        ----------
        index : int
            Number of the stretch.

        Returns
        -------
        tuple of array
            Duration, pressures and inert pressures at its ends.

        Examples
        --------
        >>> import numpy as np
        >>> one = Stretches(*(np.ones(1),) * 3, *(np.ones((1, 1)),) * 2)
        >>> float(one.at(0)[0])
        1.0
        """
        return (
            self.duration[..., index],
            self.start_pressure[..., index],
            self.end_pressure[..., index],
            self.start_inert[..., index, :],
            self.end_inert[..., index, :],
        )


# -- What reaches the tissues ---------------------------------------------------------------------


def inert_pressure(model: TissueSet, pressure: Any, breath: Breath) -> Array:
    """Return the alveolar pressure of each tracked gas by the set's convention.

    Parameters
    ----------
    model : TissueSet
        The set.
    pressure : array
        Ambient pressure [kPa], ``(...)``.
    breath : Breath
        What is breathed there.

    Returns
    -------
    array
        ``(..., inert_gas)`` [kPa].

    Examples
    --------
    >>> import numpy as np
    >>> from gasphys.tissues.sets import load
    >>> air = Breath(np.array(0.21), np.array([0.79, 0.0]), np.array(np.nan))
    >>> inert_pressure(load("buhlmann_1995_a"), 100.0, air).round(4)
    array([74.0467,  0.    ])
    """
    pressure = np.asarray(pressure, dtype=float)
    c = model.convention
    vapor = c["water_vapor_pressure"]
    loop = ~np.isnan(breath.setpoint)
    if model.alveolar == "ambient":
        shape = np.broadcast_shapes(pressure.shape, np.shape(breath.oxygen))
        return np.broadcast_to(pressure, shape)[..., None].copy()
    with np.errstate(invalid="ignore"):
        held = np.minimum(breath.setpoint, pressure)
        if model.alveolar == "thalmann":
            po2 = np.where(loop, held, breath.oxygen * pressure)
            whole = arterial_inert_pressure.raw(pressure, po2, c["arterial_pco2"], vapor)
            return np.asarray(whole, dtype=float)[..., None]
        open_circuit = alveolar_inert_pressure.raw(
            pressure[..., None],
            breath.inert,
            vapor,
            c["respiratory_exchange_ratio"],
            c["arterial_pco2"],
        )
        if not loop.any():
            return np.asarray(open_circuit, dtype=float)
        rest = (1.0 - breath.oxygen)[..., None]
        share = np.where(rest > 0.0, breath.inert / np.where(rest > 0.0, rest, 1.0), 0.0)
        on_loop = loop_alveolar_inert_pressure.raw(pressure[..., None], held[..., None], share, vapor)
    return np.asarray(np.where(loop[..., None], on_loop, open_circuit))


def _zero_pressure(model: TissueSet, breath: Breath) -> Array:
    """Ambient pressure at or below which nothing inert reaches the tissues: where the line meets zero."""
    c = model.convention
    vapor = c["water_vapor_pressure"]
    loop = ~np.isnan(breath.setpoint)
    if model.alveolar == "ambient":
        return np.zeros_like(breath.oxygen)
    with np.errstate(divide="ignore", invalid="ignore"):
        if model.alveolar == "thalmann":
            lost = c["arterial_pco2"] + vapor
            rest = 1.0 - breath.oxygen
            on_open = np.where(rest > 0.0, lost / np.where(rest > 0.0, rest, 1.0), np.inf)
            return np.where(loop, breath.setpoint + lost, on_open)
        r = c["respiratory_exchange_ratio"]
        on_open = np.full_like(breath.oxygen, vapor - (1.0 - r) / r * c["arterial_pco2"])
        return np.where(loop, breath.setpoint + vapor, on_open)


def breath_of(model: TissueSet, pieces: Pieces) -> Breath:
    """Return what is breathed in the pieces of an exposure, argon and others counted as the set says.

    Parameters
    ----------
    model : TissueSet
        The set.
    pieces : Pieces
        From :meth:`gasphys.Exposure.pieces`.

    Returns
    -------
    Breath
        ``(..., piece)``.

    Examples
    --------
    >>> from gasphys.exposure import Exposure
    >>> from gasphys.tissues.sets import load
    >>> breath_of(load("workman_1965"), Exposure.start("trimix 17/48").stay(1).pieces()).inert.round(2)
    array([[0.35, 0.48]])
    """
    nothing = np.zeros_like(pieces.fractions["O2"])
    if model.alveolar == "ambient":
        inert = [1.0 - pieces.fractions["O2"]]
    else:
        inert = [
            sum((pieces.fractions.get(f, nothing) for f in model.formulas_of(g)), nothing)
            for g in model.inert_gases
        ]
    return Breath(pieces.fractions["O2"], np.stack(np.broadcast_arrays(*inert), axis=-1), pieces.setpoint)


def _pick(values: Array, index: NDArray[np.int64]) -> Array:
    return values[..., index] if values.shape[-1] > 1 else values[..., np.zeros_like(index)]


def stretches(
    model: TissueSet, pieces: Pieces, index: NDArray[np.int64] | None = None, share: Array | None = None
) -> tuple[Stretches, NDArray[np.int64]]:
    """Cut the pieces of an exposure at wanted instants and where the inert gas reaches zero.

    Parameters
    ----------
    model : TissueSet
        The set whose convention says what reaches the tissues.
    pieces : Pieces
        From :meth:`gasphys.Exposure.pieces`.
    index, share : array, optional
        Wanted instants: piece and how far into it [1], as :meth:`gasphys.Exposure.sample` gives them.

    Returns
    -------
    tuple
        The stretches, and for each wanted instant the number of stretches before it (default: one for
        every boundary of the pieces).

    Examples
    --------
    >>> from gasphys.exposure import Exposure
    >>> from gasphys.tissues.sets import load
    >>> dive = Exposure.start("air").travel(depth=18, minutes=2).stay(30)
    >>> stretches(load("buhlmann_1995_a"), dive.pieces())[1]
    array([0, 1, 2])
    """
    n = pieces.duration.shape[-1]
    if index is None or share is None:
        index, share = np.append(np.arange(n), n - 1), np.append(np.zeros(n), 1.0)
    inside = (share > 0.0) & (share < 1.0)
    where = np.concatenate([np.arange(n), index[inside]])
    low = np.concatenate([np.zeros(n), share[inside]])
    order = np.lexsort((low, where))
    where, low = where[order], low[order]
    last = np.append(where[1:] != where[:-1], True)
    high = np.where(last, 1.0, np.append(low[1:], 1.0))
    place = np.empty_like(order)
    place[order] = np.arange(len(order))
    before = np.where(share >= 1.0, np.searchsorted(where, index, side="right"), place[index])
    before[inside] = place[n:]

    def line(start: Array, end: Array, at: Array) -> Array:
        first, second = _pick(start, where), _pick(end, where)
        return np.where(at == 1.0, second, first + (second - first) * at)

    duration = _pick(pieces.duration, where) * (high - low)
    start = line(pieces.start_pressure, pieces.end_pressure, low)
    end = line(pieces.start_pressure, pieces.end_pressure, high)
    whole = breath_of(model, pieces)
    breath = Breath(
        _pick(whole.oxygen, where),
        np.moveaxis(_pick(np.moveaxis(whole.inert, -1, 0), where), 0, -1),
        _pick(whole.setpoint, where),
    )
    zero = _zero_pressure(model, breath)
    crosses = (start - zero) * (end - zero) < 0.0
    cut = crosses.reshape(-1, len(where)).any(axis=0)
    if cut.any():
        copies = np.repeat(np.arange(len(where)), np.where(cut, 2, 1))
        second = np.append(False, copies[1:] == copies[:-1])
        first = np.append(second[1:], False)
        with np.errstate(divide="ignore", invalid="ignore"):
            part = np.where(crosses, (zero - start) / (end - start), 1.0)[..., copies]
        meets = np.where(crosses, zero, end)[..., copies]
        full = duration[..., copies]
        start_there, end_there = start[..., copies], end[..., copies]
        duration = np.where(first, full * part, np.where(second, full - full * part, full))
        start = np.where(second, meets, start_there)
        end = np.where(first, meets, end_there)
        breath = Breath(
            breath.oxygen[..., copies], breath.inert[..., copies, :], breath.setpoint[..., copies]
        )
        before = before + np.append(0, np.cumsum(cut))[np.minimum(before, len(where))]
    made = Stretches(
        duration, start, end, inert_pressure(model, start, breath), inert_pressure(model, end, breath)
    )
    return made, before


def equilibrium(model: TissueSet, pressure: Any) -> Array:
    """Return the tissues of someone who has long breathed air at a pressure.

    Parameters
    ----------
    model : TissueSet
        The set.
    pressure : float or array
        Ambient pressure [kPa].

    Returns
    -------
    array
        ``(..., compartment, inert_gas)`` [kPa].

    Examples
    --------
    >>> from gasphys.tissues.sets import load
    >>> equilibrium(load("us_navy_1957"), 101.325)[0].round(3)
    array([80.047])
    """
    pressure = np.asarray(pressure, dtype=float)
    nitrogen = model.convention["air_nitrogen"]
    inert = np.array([nitrogen if g in ("N2", "total") else 0.0 for g in model.inert_gases])
    air = Breath(np.array(1.0 - nitrogen), inert, np.array(np.nan))
    held = inert_pressure(model, pressure, air)[..., None, :]
    return np.broadcast_to(held, (*held.shape[:-2], *model.half_time.shape)).copy()


# -- One stretch ----------------------------------------------------------------------------------


def _exponential(
    model: TissueSet, state: Array, duration: Array, start: Array, end: Array, first: Array, last: Array
) -> Array:
    return np.asarray(
        tissue_pressure.raw(
            state, first[..., None, :], last[..., None, :], duration[..., None, None], model.half_time
        )
    )


def _exponential_linear(
    model: TissueSet, state: Array, duration: Array, start: Array, end: Array, first: Array, last: Array
) -> Array:
    """Exponential below the threshold, linear above it, with the instants of crossing located exactly.

    Where p meets L the rate of p - L is the same on both branches, w = k (Pa - L) - dL/dt, and w is linear
    on a stretch. So a compartment crosses upward only while w > 0 and downward only while w < 0: cut where w
    changes sign, and at most one crossing remains in each part.
    """
    t, first, last = duration[..., None, None], first[..., None, :], last[..., None, :]
    low, high = (_threshold(model, p)[..., None, None] for p in (start, end))
    begins, ends = _relative_rates(t, first, last, low, high, model.half_time)
    plain = np.asarray(tissue_pressure.raw(state, first, last, t, model.half_time))
    simple = (state <= low) & (plain <= high) & ~((begins > 0.0) & (ends < 0.0))
    if simple.all():
        return plain
    shape = plain.shape
    todo = ~simple

    def lanes(values: Any) -> Array:
        return np.asarray(np.broadcast_to(values, shape)[todo])

    result = plain.copy()
    lane = map(lanes, (state, t, first, last, low, high, model.half_time, begins, ends))
    result[todo] = _crossings(*lane)[0]
    return result


def _threshold(model: TissueSet, pressure: Array) -> Array:
    c = model.convention
    own = (c["venous_po2"], c["venous_pco2"], c["gas_phase_overpressure"], c["water_vapor_pressure"])
    return np.asarray(washout_threshold.raw(pressure, *own))


def _relative_rates(
    t: Array, first: Array, last: Array, low: Array, high: Array, half_time: Array
) -> tuple[Array, Array]:
    """Return what p - L changes by over the stretch if it went on as at its ends, at p = L [kPa]."""
    x = float(LN2) * t / half_time
    return x * (first - low) - (high - low), x * (last - high) - (high - low)


def _crossings(
    p: Array,
    t: Array,
    first: Array,
    last: Array,
    low: Array,
    high: Array,
    half_time: Array,
    begins: Array,
    ends: Array,
) -> tuple[Array, Array, Array, NDArray[np.bool_]]:
    """Advance lanes that may cross the threshold, once or twice.

    Returns pressures at the end; where the branch they end on begins, as a share of the stretch, and the
    pressures there; and whether that branch is the linear one.
    """
    with np.errstate(divide="ignore", invalid="ignore"):
        turns = begins * ends < 0.0
        share = np.where(turns, begins / (begins - ends), 1.0)
    middle_first = np.where(turns, first + (last - first) * share, last)
    middle_low = np.where(turns, low + (high - low) * share, high)
    p, within, begin, linear = _one_crossing(
        p,
        t * share,
        first,
        middle_first,
        low,
        middle_low,
        half_time,
        np.where(turns, begins, begins + ends) > 0.0,
    )
    begun = share * within
    if turns.any():
        rest = 1.0 - share
        p, within, later, linear_later = _one_crossing(
            p, t * rest, middle_first, last, middle_low, high, half_time, ends > 0.0
        )
        begun = np.where(turns, share + rest * within, begun)
        begin, linear = np.where(turns, later, begin), np.where(turns, linear_later, linear)
    return p, begun, begin, linear


def _one_crossing(
    p: Array,
    t: Array,
    first: Array,
    last: Array,
    low: Array,
    high: Array,
    half_time: Array,
    rising: NDArray[np.bool_],
) -> tuple[Array, Array, Array, NDArray[np.bool_]]:
    """As :func:`_crossings`, over a part in which p - L can change sign at most once, upward if `rising`."""
    linear = (p > low) | ((p == low) & rising)
    begun, begin = np.zeros_like(p), p.copy()
    above = linear_tissue_pressure.raw(p, first, last, low, high, t, half_time)
    below = tissue_pressure.raw(p, first, last, t, half_time)
    result = np.where(linear, above, below)
    down = linear & ~rising & (above < high) & (t > 0.0)
    if down.any():
        lane = (v[down] for v in (p, first, last, low, high, t, half_time))
        q, a, b, l0, l1, time, half = lane
        with np.errstate(divide="ignore", invalid="ignore"):
            when = np.minimum(linear_washout_time.raw(q, a, b, l0, l1, time, half), time)
        when = np.where(np.isnan(when), 0.0, when)
        share = when / time
        at = l0 + (l1 - l0) * share
        result[down] = tissue_pressure.raw(at, a + (b - a) * share, b, time - when, half)
        begun[down], begin[down] = share, at
    up = ~linear & rising & (below > high) & (t > 0.0)
    if up.any():
        q, a, b, l0, l1, time, half = (v[up] for v in (p, first, last, low, high, t, half_time))

        def over(share: Array) -> Array:
            there = tissue_pressure.raw(q, a, a + (b - a) * share, time * share, half)
            return np.asarray(there - (l0 + (l1 - l0) * share))

        share = find_root(over, np.zeros_like(q), np.ones_like(q))
        share = np.where(np.isnan(share), 0.0, share)
        at = l0 + (l1 - l0) * share
        result[up] = linear_tissue_pressure.raw(
            at, a + (b - a) * share, b, at, l1, time * (1.0 - share), half
        )
        begun[up], begin[up] = share, at
    return np.asarray(result), begun, begin, (linear & ~down) | up


@dataclass(frozen=True)
class LastBranch:
    """The branch on which exponential-linear compartments end a stretch; ``(compartment, stretch)``.

    Parameters
    ----------
    linear : array of bool
        Whether it is the linear one.
    duration : array
        How long it has lasted within the stretch [min].
    state : array
        Tissue pressure where it begins [kPa].
    start_pressure, start_inert : array
        Ambient pressure and arterial inert gas there [kPa].
    """

    linear: NDArray[np.bool_]
    duration: Array
    state: Array
    start_pressure: Array
    start_inert: Array


def last_branch(
    model: TissueSet, state: Array, duration: Array, start: Array, end: Array, first: Array, last: Array
) -> LastBranch:
    """Return on which branch exponential-linear compartments end stretches, and where it begins.

    Parameters
    ----------
    model : TissueSet
        The set.
    state : array
        Tissue pressure at the start of each stretch ``(compartment, stretch)`` [kPa].
    duration, start, end, first, last : array
        ``(stretch,)``: length [min], ambient pressure and arterial inert gas at its ends [kPa].

    Returns
    -------
    LastBranch
        The equation of that branch gives the pressure at the end.

    Examples
    --------
    >>> import numpy as np
    >>> from gasphys.tissues.sets import load
    >>> fsw = 101.325 / 33.0
    >>> one = np.array([1.0]) * fsw
    >>> model = load("thalmann_vval18", compartments=["40"])
    >>> held = np.array([[50.0 * fsw]])
    >>> found = last_branch(model, held, np.array([150.0]), 43 * one, 43 * one, 32.47 * one, 32.47 * one)
    >>> bool(found.linear[0, 0]), round(150.0 - float(found.duration[0, 0]), 3)
    (False, 104.671)
    """
    low, high = (_threshold(model, p) for p in (start, end))
    half_time = model.half_time
    begins, ends = _relative_rates(duration, first, last, low, high, half_time)
    shape = state.shape
    columns = (state, duration, first, last, low, high, half_time, begins, ends)
    _, begun, begin, linear = _crossings(*(np.broadcast_to(v, shape) for v in columns))
    return LastBranch(
        linear,
        duration * (1.0 - begun),
        begin,
        start + (end - start) * begun,
        first + (last - first) * begun,
    )


#: Dormand and Prince 1980, orders 5 and 4: stages, weights, and the difference of the two orders.
_STAGES = (
    (),
    (1 / 5,),
    (3 / 40, 9 / 40),
    (44 / 45, -56 / 15, 32 / 9),
    (19372 / 6561, -25360 / 2187, 64448 / 6561, -212 / 729),
    (9017 / 3168, -355 / 33, 46732 / 5247, 49 / 176, -5103 / 18656),
    (35 / 384, 0.0, 500 / 1113, 125 / 192, -2187 / 6784, 11 / 84),
)
_NODES = (0.0, 1 / 5, 3 / 10, 4 / 5, 8 / 9, 1.0, 1.0)
_ERROR = (71 / 57600, 0.0, -71 / 16695, 71 / 1920, -17253 / 339200, 22 / 525, -1 / 40)
#: Relative error allowed in a step of the serial compartments.
_TOLERANCE = 1e-12


def _serial(
    model: TissueSet, state: Array, duration: Array, start: Array, end: Array, first: Array, last: Array
) -> Array:
    """Slip flow through compartments in series: embedded Runge-Kutta, each scenario with its own steps."""
    lead = np.broadcast_shapes(state.shape[:-2], duration.shape, start.shape)
    count = state.shape[-2]
    flow = model.convention["flow_coefficient"], model.convention["flow_offset"]
    chain = np.broadcast_to(state[..., 0], (*lead, count)).reshape(-1, count)
    minutes, low, high = (np.broadcast_to(v, lead).reshape(-1) for v in (duration, start, end))
    if len(minutes) == 1:
        # One scenario in plain numbers: the same operations, without the overhead of arrays.
        one = serial_after(chain[0].tolist(), float(minutes[0]), float(low[0]), float(high[0]), *flow)
        return np.array(one).reshape(*lead, count, 1)
    p = [chain[:, k].copy() for k in range(count)]
    done = np.where(minutes > 0.0, 0.0, 1.0)
    highest = np.maximum(np.maximum(low, high), chain.max(axis=-1))
    step = np.minimum(1.0, _first_step(minutes, highest, *flow))
    while True:
        lane = np.flatnonzero(done < 1.0)
        if not lane.size:
            return np.stack(p, axis=-1).reshape(*lead, count, 1)
        h = np.minimum(step[lane], 1.0 - done[lane])
        here = [v[lane] for v in p]
        trial, errors = _runge_kutta(here, h, done[lane], minutes[lane], low[lane], high[lane], *flow)
        worst = np.max([e / np.maximum(np.abs(v), 1.0) for e, v in zip(errors, trial, strict=True)], axis=0)
        worst = worst / _TOLERANCE
        accepted = worst <= 1.0
        for k, v in enumerate(trial):
            p[k][lane[accepted]] = v[accepted]
        reached = done[lane] + h
        done[lane[accepted]] = np.where(reached >= 1.0 - 1e-15, 1.0, reached)[accepted]
        step[lane] = h * np.clip(0.9 / np.sqrt(np.sqrt(np.maximum(worst, 1e-10))), 0.2, 5.0)


def serial_after(
    state: Sequence[float],
    minutes: float,
    low: float,
    high: float,
    flow_coefficient: float,
    flow_offset: float,
) -> list[float]:
    """Return the pressures of serial compartments after one stretch of one scenario.

    Parameters
    ----------
    state : sequence of float
        Pressures at its start, in order [kPa].
    minutes, low, high : float
        Length [min], ambient pressure at its start and end [kPa].
    flow_coefficient, flow_offset : float
        Of :func:`gasphys.tissues.slip_flow` [1/min/kPa, kPa].

    Returns
    -------
    list of float
        Pressures at its end [kPa].

    Examples
    --------
    >>> after = serial_after([100.6] * 4, 30.0, 400.6, 400.6, 2.596e-5, 836.7)
    >>> [round(p, 4) for p in after]
    [256.509, 154.1801, 113.3815, 103.2667]
    """
    flow = flow_coefficient, flow_offset
    p, done = list(state), 0.0 if minutes > 0.0 else 1.0
    step = min(1.0, _first_step(minutes, max(low, high, *p), *flow))
    while done < 1.0:
        h = min(step, 1.0 - done)
        trial, errors = _runge_kutta(p, h, done, minutes, low, high, *flow)
        worst = max(e / max(abs(v), 1.0) for e, v in zip(errors, trial, strict=True)) / _TOLERANCE
        if worst <= 1.0:
            p, done = trial, done + h
            done = 1.0 if done >= 1.0 - 1e-15 else done
        step = h * min(max(0.9 / math.sqrt(math.sqrt(max(worst, 1e-10))), 0.2), 5.0)
    return p


def _first_step(minutes: Any, highest: Any, a: float, b: float) -> Any:
    """Return a tenth of the fastest time constant as a share of the stretch."""
    fastest = 4.0 * a * (b + 2.0 * highest)
    return 0.1 / (fastest * minutes + 1e-300)


def _runge_kutta(
    p: list[Any], h: Any, done: Any, minutes: Any, low: Any, high: Any, a: float, b: float
) -> tuple[list[Any], list[Any]]:
    """Take one step ``h`` of the stretch, numbers or arrays: pressures after it, and their errors."""
    rates: list[list[Any]] = [[] for _ in p]
    trial = p
    for weights, node in zip(_STAGES, _NODES, strict=True):
        if weights:
            trial = [v + h * sum(map(mul, weights, own)) for v, own in zip(p, rates, strict=True)]
        above = low + (high - low) * (done + node * h)
        inflow = slip_flow.raw(above, trial[0], a, b)
        for k, own in enumerate(rates):
            outflow = slip_flow.raw(trial[k], trial[k + 1], a, b) if k + 1 < len(p) else 0.0
            own.append(minutes * (inflow - outflow))
            inflow = outflow
    errors = [abs(h * sum(map(mul, _ERROR, own))) for own in rates]
    return trial, errors


#: Kind of kinetics to the kernel of one stretch.
KERNELS: dict[str, Callable[..., Array]] = {
    "exponential": _exponential,
    "exponential_linear": _exponential_linear,
    "serial": _serial,
}


def advance(
    model: TissueSet, state: Array, duration: Any, start_pressure: Any, end_pressure: Any, breath: Breath
) -> Array:
    """Return the tissues after one stretch linear in pressure on one gas.

    Parameters
    ----------
    model : TissueSet
        The set.
    state : array
        ``(..., compartment, inert_gas)`` [kPa].
    duration : array
        ``(...)`` [min].
    start_pressure, end_pressure : array
        ``(...)`` [kPa].
    breath : Breath
        What is breathed, ``(...)``.

    Returns
    -------
    array
        The state after it; the leading dimensions broadcast.

    Notes
    -----
    For planners: one call a step for any number of scenarios. Exact, whatever the length.

    Examples
    --------
    >>> import numpy as np
    >>> from gasphys.tissues.sets import load
    >>> model = load("us_navy_1957")
    >>> air = Breath(np.array(0.21), np.array([0.79]), np.array(np.nan))
    >>> at_ten = advance(model, equilibrium(model, 101.325), 10.0, 408.3705, 408.3705, air)
    >>> round(float(at_ten[1, 0]) * 33 / 101.325, 2)
    65.57
    """
    duration, start, end = (np.asarray(v, dtype=float) for v in (duration, start_pressure, end_pressure))
    zero = _zero_pressure(model, breath)
    crosses = (start - zero) * (end - zero) < 0.0
    kernel = KERNELS[model.kinetics]
    first = inert_pressure(model, start, breath)
    last = inert_pressure(model, end, breath)
    if not crosses.any():
        return kernel(model, state, duration, start, end, first, last)
    with np.errstate(divide="ignore", invalid="ignore"):
        share = np.where(crosses, (zero - start) / (end - start), 1.0)
    meets = np.where(crosses, zero, end)
    middle = inert_pressure(model, meets, breath)
    state = kernel(model, state, duration * share, start, meets, first, middle)
    return kernel(model, state, duration - duration * share, meets, end, middle, last)


def stay(model: TissueSet, state: Array, minutes: Array, pressure: Array, breath: Breath) -> Array:
    """Return the tissues of each scenario after stays at its pressure.

    Parameters
    ----------
    model : TissueSet
        The set.
    state : array
        ``(scenario, compartment, inert_gas)`` [kPa].
    minutes : array
        One stay each, ``(scenario,)``, or several, ``(scenario, stay)`` or ``(1, stay)`` [min].
    pressure : array
        ``(scenario,)`` [kPa].
    breath : Breath
        What is breathed, ``(scenario,)``.

    Returns
    -------
    array
        ``(scenario, [stay,] compartment, inert_gas)`` [kPa].

    Notes
    -----
    As :func:`advance` with equal ends; what the stays have in common is computed once.

    Examples
    --------
    >>> import numpy as np
    >>> from gasphys.tissues.sets import load
    >>> model = load("us_navy_1957", compartments=["10"])
    >>> air = Breath(np.array([0.21]), np.array([[0.79]]), np.array([np.nan]))
    >>> start = equilibrium(model, np.array([101.325]))
    >>> at_100_fsw = stay(model, start, np.array([[10.0, 20.0]]), np.array([408.3705]), air)
    >>> (at_100_fsw[0, :, 0, 0] * 33 / 101.325).round(2)
    array([65.57, 85.32])
    """
    wide = minutes.ndim > 1
    if model.kinetics != "exponential":
        if wide:
            state, pressure = state[:, None], pressure[:, None]
            breath = Breath(breath.oxygen[:, None], breath.inert[:, None], breath.setpoint[:, None])
        return advance(model, state, minutes, pressure, pressure, breath)
    # The constant-depth form of tissue_pressure.
    share = np.asarray(uptake_share.raw(minutes[..., None, None], model.half_time))
    gap = inert_pressure(model, pressure, breath)[:, None, :] - state
    if wide:
        state, gap = state[:, None], gap[:, None]
    out = np.asarray(gap * share)
    out += state
    return out


@dataclass(frozen=True)
class Passage:
    """One stretch of each scenario, worked out once for any number of states; made by :meth:`of`.

    Parameters
    ----------
    model : TissueSet
        The set.
    duration, start_pressure, end_pressure : array
        ``(scenario,)`` [min, kPa].
    breath : Breath
        What is breathed, ``(scenario,)``.
    inert, share, gain : array or None
        Of exponential compartments: alveolar pressure at the start, share taken up, and what the change on
        the way adds [kPa, 1, kPa].
    """

    model: TissueSet
    duration: Array
    start_pressure: Array
    end_pressure: Array
    breath: Breath
    inert: Array | None = None
    share: Array | None = None
    gain: Array | None = None

    @classmethod
    def of(cls, model: TissueSet, duration: Array, start: Array, end: Array, breath: Breath) -> Passage:
        """Work out a stretch.

        Parameters
        ----------
        model : TissueSet
            The set.
        duration, start, end : array
            ``(scenario,)`` [min, kPa].
        breath : Breath
            What is breathed, ``(scenario,)``.

        Returns
        -------
        Passage
            Called with states, it returns them after the stretch.

        Examples
        --------
        >>> import numpy as np
        >>> from gasphys.tissues.sets import load
        >>> model = load("us_navy_1957", compartments=["10"])
        >>> air = Breath(np.array([0.21]), np.array([[0.79]]), np.array([np.nan]))
        >>> held = equilibrium(model, np.array([101.325]))
        >>> ten = Passage.of(model, np.array([10.0]), np.array([408.3705]), np.array([408.3705]), air)
        >>> round(float(ten(held)[0, 0, 0]) * 33 / 101.325, 2)
        65.57
        """
        zero = _zero_pressure(model, breath)
        if model.kinetics != "exponential" or ((start - zero) * (end - zero) < 0.0).any():
            return cls(model, duration, start, end, breath)
        first, last = (inert_pressure(model, p, breath)[:, None, :] for p in (start, end))
        # tissue_pressure without its state; equal lengths, as steps of a grid have, are computed once.
        length, back = np.unique(duration, return_inverse=True)
        x = -float(LN2) * length[:, None, None] / model.half_time
        lost = np.expm1(x)
        with np.errstate(divide="ignore", invalid="ignore"):
            gain = ramp_gain_from(x, lost)[back]
        gain *= last - first
        return cls(model, duration, start, end, breath, first, -lost[back], gain)

    def take(self, lanes: NDArray[np.int64]) -> Passage:
        """Return the passage of some of the scenarios.

        Parameters
        ----------
        lanes : array of int
            Their numbers.

        Returns
        -------
        Passage
            In that order.

        Examples
        --------
        >>> import numpy as np
        >>> from gasphys.tissues.sets import load
        >>> two = np.array([1.0, 2.0])
        >>> air = Breath(0.21 + 0.0 * two, 0.79 + 0.0 * two[:, None], np.nan * two)
        >>> whole = Passage.of(load("us_navy_1957"), two, 100.0 * two, 100.0 * two, air)
        >>> whole.take(np.array([1])).duration
        array([2.])
        """
        breath = Breath(self.breath.oxygen[lanes], self.breath.inert[lanes], self.breath.setpoint[lanes])
        inert, share, gain = (None if v is None else v[lanes] for v in (self.inert, self.share, self.gain))
        minutes, start, end = (v[lanes] for v in (self.duration, self.start_pressure, self.end_pressure))
        return Passage(self.model, minutes, start, end, breath, inert, share, gain)

    def __call__(self, state: Array) -> Array:
        """Return states ``(scenario, ..., compartment, inert_gas)`` after the stretch."""
        extra = (1,) * (state.ndim - 3)

        def wide(values: Array) -> Array:
            return values.reshape(values.shape[0], *extra, *values.shape[1:]) if extra else values

        if self.inert is None or self.share is None or self.gain is None:
            breath = Breath(*map(wide, (self.breath.oxygen, self.breath.inert, self.breath.setpoint)))
            minutes, start, end = map(wide, (self.duration, self.start_pressure, self.end_pressure))
            return advance(self.model, state, minutes, start, end, breath)
        out = wide(self.inert) - state
        out *= wide(self.share)
        out += wide(self.gain)
        out += state
        return np.asarray(out)


# -- Many stretches -------------------------------------------------------------------------------

#: Stretches in a block of the scan; most numbers of one kind held in a scan of branches.
_BLOCK, _HELD = 64, 2**20


def along(model: TissueSet, state: Array, row: Stretches) -> Array:
    """Return the tissues at every boundary of a row of stretches.

    Parameters
    ----------
    model : TissueSet
        The set.
    state : array
        ``(..., compartment, inert_gas)`` [kPa] at the start.
    row : Stretches
        The stretches.

    Returns
    -------
    array
        ``(..., compartment, inert_gas, boundary)`` [kPa], one more boundary than stretches.

    Examples
    --------
    >>> from gasphys.exposure import Exposure
    >>> from gasphys.tissues.sets import load
    >>> model = load("buhlmann_1983")
    >>> row, _ = stretches(model, Exposure.start("air").stay(10).pieces())
    >>> along(model, equilibrium(model, 101.325), row).shape
    (16, 1, 2)
    """
    if model.kinetics == "exponential":
        return _scan(model, state, row)
    if model.kinetics == "exponential_linear":
        return _scan_linear(model, state, row)
    kernel = KERNELS[model.kinetics]
    states = [state]
    for k in range(row.duration.shape[-1]):
        states.append(kernel(model, states[-1], *row.at(k)))
    return np.stack(np.broadcast_arrays(*states), axis=-1)


def _scan(model: TissueSet, state: Array, row: Stretches) -> Array:
    """Exponential compartments: p' = p - share p + gain is affine, so blocks of stretches run side by side.

    Each block of 64 is summed from an empty tissue, all blocks in one vector, and the blocks are joined in
    turn. What is lost is summed, not what is kept: a hundred thousand tiny steps add no more than rounding,
    and nothing is divided by what is left, which may underflow.
    """
    lead = np.broadcast_shapes(state.shape[:-2], row.duration.shape[:-1])
    n = row.duration.shape[-1]
    block = min(_BLOCK, max(n, 1))
    count = -(-n // block)
    pad = count * block - n

    def blocks(values: Array) -> Array:
        """``(..., stretch)`` to ``(place in block, ..., block)``; what is added has no length."""
        if pad:
            values = np.concatenate([values, np.zeros((*values.shape[:-1], pad))], axis=-1)
        return np.ascontiguousarray(np.moveaxis(values.reshape(*values.shape[:-1], count, block), -1, 0))

    t = blocks(row.duration)[..., None, None, :]
    first = blocks(np.swapaxes(row.start_inert, -1, -2))[..., None, :, :]
    change = blocks(np.swapaxes(row.end_inert - row.start_inert, -1, -2))[..., None, :, :]
    rate = (-float(LN2) / model.half_time)[..., None]
    shape = (*lead, *model.half_time.shape, count)
    total = np.empty((block, *shape))
    with np.errstate(divide="ignore", invalid="ignore"):
        for k in range(block):
            x = rate * t[k]
            share = np.expm1(x)  # what is lost, negative
            followed = change[k] * ramp_gain_from(x, share)
            if k:
                np.subtract(total[k - 1], first[k], out=total[k])
                total[k] *= share
                total[k] += total[k - 1]
            else:
                np.multiply(-first[k], share, out=total[k])
            total[k] += followed
    elapsed = np.cumsum(t, axis=0)
    ends = (np.expm1(rate * elapsed[-1]), total[-1])
    lost, added = (np.ascontiguousarray(np.moveaxis(v, -1, 0)) for v in ends)
    carry = np.empty((count, *shape[:-1]))
    carry[0] = state
    for j in range(1, count):
        np.multiply(lost[j - 1], carry[j - 1], out=carry[j])
        carry[j] += added[j - 1]
        carry[j] += carry[j - 1]
    begin = np.ascontiguousarray(np.moveaxis(carry, 0, -1))
    for k in range(block):
        total[k] += begin
        total[k] += begin * np.expm1(rate * elapsed[k])
    out = np.empty((*shape[:-1], count * block + 1))
    out[..., 0] = state
    out[..., 1:].reshape(*shape[:-1], count, block)[...] = np.moveaxis(total, 0, -1)
    return out[..., : n + 1]


def _scan_linear(model: TissueSet, state: Array, row: Stretches) -> Array:
    """Exponential-linear compartments: on either branch a stretch is affine, and branches change seldom.

    Scenarios in groups, so that memory is bounded whatever their number.
    """
    lead = np.broadcast_shapes(state.shape[:-2], row.duration.shape[:-1], row.start_pressure.shape[:-1])
    n, count = row.duration.shape[-1], state.shape[-2]
    size = math.prod(lead)
    held = np.broadcast_to(state[..., 0], (*lead, count)).reshape(size, count)
    first, last = row.start_inert[..., 0], row.end_inert[..., 0]
    columns = [
        np.broadcast_to(v, (*lead, n)).reshape(size, n)
        for v in (row.duration, first, last, row.start_pressure, row.end_pressure)
    ]
    out = np.empty((size, count, n + 1))
    group = max(1, _HELD // max(1, n * count))
    for k in range(0, size, group):
        part = slice(k, k + group)
        out[part] = _branches(model, held[part], *(v[part] for v in columns))
    return out.reshape(*lead, count, 1, n + 1)


def _branches(
    model: TissueSet, p: Array, duration: Array, first: Array, last: Array, start: Array, end: Array
) -> Array:
    """Advance scenarios along their stretches, a block at a time on the branch a compartment is on.

    Where a compartment leaves its branch within the block, its stretches are taken one by one; only those in
    which it meets the threshold are solved for the instant.
    """
    n, block = duration.shape[-1], _BLOCK
    half_time = model.half_time[:, 0]
    t, first, last, start, end = (v.T[:, :, None] for v in (duration, first, last, start, end))
    low, high = (_threshold(model, v) for v in (start, end))
    begins, ends = _relative_rates(t, first, last, low, high, half_time)
    share = np.asarray(uptake_share.raw(t, half_time))
    gain = np.asarray(tissue_pressure.raw(0.0, first, last, t, half_time))
    slope = np.asarray(linear_tissue_pressure.raw(0.0, first, last, low, high, t, half_time))
    dips, bumps = (begins < 0.0) & (ends > 0.0), (begins > 0.0) & (ends < 0.0)
    turns = dips | bumps
    # Exponential branch from an empty tissue since the start of each block, all blocks in one vector.
    empty = gain.copy()
    for j in range(1, min(block, n)):
        summed = empty[j::block]
        before = empty[j - 1 :: block][: len(summed)]
        summed += before - share[j::block] * before
    out = np.empty((n + 1, *p.shape))
    out[0] = p
    for k in range(0, n, block):
        here = slice(k, min(k + block, n))
        linear = p > low[k]
        # From the state at the block's start, as if the branch were kept.
        straight = p + np.cumsum(slope[here], axis=0)
        lost = np.expm1(-float(LN2) * np.cumsum(t[here], axis=0) / half_time)
        bent = empty[here] + p + p * lost
        after = np.where(linear, straight, bent)
        before = np.concatenate([p[None], after[:-1]])
        kept = np.where(
            linear,
            (before > low[here]) & (after >= high[here]) & ~dips[here],
            (before <= low[here]) & (after <= high[here]) & ~bumps[here],
        ).all(axis=0)
        out[1:][here] = after
        if not kept.all():
            scenario, compartment = np.nonzero(~kept)
            wide = (v[here][:, scenario, 0] for v in (t, first, last, low, high))
            own = (begins, ends, share, gain, slope, turns)
            columns = (*wide, *(v[here][:, scenario, compartment] for v in own))
            q = p[scenario, compartment]
            for j in range(len(after)):
                q = _one_by_one(q, half_time[compartment], *(v[j] for v in columns))
                out[k + j + 1, scenario, compartment] = q
        p = out[here.stop]
    return np.moveaxis(out, 0, -1)


def _one_by_one(
    p: Array,
    half_time: Array,
    t: Array,
    first: Array,
    last: Array,
    low: Array,
    high: Array,
    begins: Array,
    ends: Array,
    share: Array,
    gain: Array,
    slope: Array,
    turns: NDArray[np.bool_],
) -> Array:
    """Advance lanes by one stretch: on their branch, or across the threshold where they meet it."""
    straight, bent = p + slope, p - share * p + gain
    linear = p > low
    result = np.where(linear, straight, bent)
    kept = np.where(linear, straight >= high, bent <= high) & ~turns
    if not kept.all():
        some = ~kept
        args = (v[some] for v in (p, t, first, last, low, high, half_time, begins, ends))
        result[some] = _crossings(*args)[0]
    return result
