"""Kernels: how compartments take up and give off inert gas along straight stretches.

States are arrays ``(..., compartment, inert_gas)`` in kPa, the leading dimensions any batch of
scenarios. Pressure and alveolar inert gas are linear in time on a stretch; nothing is stepped with a fixed
step. Every scenario is computed as if it were alone.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
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
    washout_threshold,
)
from gasphys.tissues.sets import TissueSet

__all__ = ["Breath", "Stretches", "advance", "along", "equilibrium", "inert_pressure", "stretches"]

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
    c = model.convention
    own = (c["venous_po2"], c["venous_pco2"], c["gas_phase_overpressure"], c["water_vapor_pressure"])
    t, first, last = duration[..., None, None], first[..., None, :], last[..., None, :]
    low = washout_threshold.raw(start, *own)[..., None, None]
    high = washout_threshold.raw(end, *own)[..., None, None]
    x = float(LN2) * t / model.half_time
    begins, ends = x * (first - low) - (high - low), x * (last - high) - (high - low)
    plain = np.asarray(tissue_pressure.raw(state, first, last, t, model.half_time))
    simple = (state <= low) & (plain <= high) & ~((begins > 0.0) & (ends < 0.0))
    if simple.all():
        return plain
    shape = plain.shape
    todo = ~simple

    def lanes(values: Any) -> Array:
        return np.asarray(np.broadcast_to(values, shape)[todo])

    half_time, t, begins, ends = lanes(model.half_time), lanes(t), lanes(begins), lanes(ends)
    first, last, low, high = lanes(first), lanes(last), lanes(low), lanes(high)
    with np.errstate(divide="ignore", invalid="ignore"):
        turns = begins * ends < 0.0
        share = np.where(turns, begins / (begins - ends), 1.0)
    middle_first = np.where(turns, first + (last - first) * share, last)
    middle_low = np.where(turns, low + (high - low) * share, high)
    p = _one_crossing(
        lanes(state),
        t * share,
        first,
        middle_first,
        low,
        middle_low,
        half_time,
        np.where(turns, begins, begins + ends) > 0.0,
    )
    if turns.any():
        p = _one_crossing(p, t * (1.0 - share), middle_first, last, middle_low, high, half_time, ends > 0.0)
    result = plain.copy()
    result[todo] = p
    return result


def _one_crossing(
    p: Array,
    t: Array,
    first: Array,
    last: Array,
    low: Array,
    high: Array,
    half_time: Array,
    rising: NDArray[np.bool_],
) -> Array:
    """Advance lanes over a part in which p - L can change sign at most once, upward if `rising`."""
    linear = (p > low) | ((p == low) & rising)
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
    return np.asarray(result)


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
    coefficient, offset = model.convention["flow_coefficient"], model.convention["flow_offset"]
    lead = np.broadcast_shapes(state.shape[:-2], duration.shape, start.shape)
    count = state.shape[-2]
    p = np.broadcast_to(state[..., 0], (*lead, count)).reshape(-1, count).copy()
    minutes, low, high = (np.broadcast_to(v, lead).reshape(-1, 1) for v in (duration, start, end))

    def slope(share: Array, p: Array, lane: Any) -> Array:
        ambient = low[lane] + (high[lane] - low[lane]) * share
        chain = np.concatenate([ambient, p], axis=-1)
        flow = slip_flow.raw(chain[:, :-1], chain[:, 1:], coefficient, offset)
        return np.asarray(
            minutes[lane] * (flow - np.concatenate([flow[:, 1:], np.zeros((len(p), 1))], axis=-1))
        )

    done = np.where(minutes > 0.0, 0.0, 1.0)
    # First step: a tenth of the fastest time constant, or the whole stretch.
    fastest = (
        4.0 * coefficient * (offset + 2.0 * np.maximum(np.maximum(low, high), p.max(axis=-1, keepdims=True)))
    )
    step = np.minimum(1.0, 0.1 / np.maximum(fastest * minutes, 1e-300))
    while True:
        lane = np.flatnonzero(done[:, 0] < 1.0)
        if not lane.size:
            return p.reshape(*lead, count)[..., None]
        h = np.minimum(step[lane], 1.0 - done[lane])
        rates: list[Array] = []
        here = p[lane]
        trial = here
        for weights, node in zip(_STAGES, _NODES, strict=True):
            trial = here + h * sum(
                (w * r for w, r in zip(weights, rates, strict=True) if w), np.zeros_like(here)
            )
            rates.append(slope(done[lane] + node * h, trial, lane))
        error = np.abs(h * sum(w * r for w, r in zip(_ERROR, rates, strict=True) if w))
        worst = (error / (_TOLERANCE * np.maximum(np.abs(trial), 1.0))).max(axis=-1, keepdims=True)
        accepted = (worst <= 1.0)[:, 0]
        p[lane[accepted]] = trial[accepted]
        reached = done[lane] + h
        done[lane[accepted]] = np.where(reached >= 1.0 - 1e-15, 1.0, reached)[accepted]
        step[lane] = h * np.clip(0.9 * np.maximum(worst, 1e-10) ** -0.2, 0.2, 5.0)


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


# -- Many stretches -------------------------------------------------------------------------------

#: Stretches in a block of the scan.
_BLOCK = 64


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
