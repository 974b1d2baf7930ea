"""The integral of the hazard over linear pieces, for many exposures and compartments at once.

Tensions are exact on every piece. On a hold the integral of the exponential form is closed; where ambient
pressure changes, the hazard is integrated by Gauss-Legendre panels between its own zeros, short enough to
be exact to rounding. Parameters may be complex: an imaginary part of 1e-30 carries a derivative through
every step (a complex step), so gradients are exact. Times of events are real: at each of them the tension
has one slope on both sides and the hazard is zero, so a shift of the event changes nothing to first order.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gasphys.maths import find_root
from gasphys.tissues.equations import linear_tissue_pressure, tissue_pressure, washout_threshold

__all__ = ["Parameters", "Profile", "accumulate"]

Array = NDArray[Any]

#: Nodes and weights of one panel, on 0..1.
_NODES, _WEIGHTS = (0.5 * v for v in np.polynomial.legendre.leggauss(12))
_NODES = _NODES + 0.5

#: Longest panel: in time constants, and in the logarithm of ambient pressure.
_TIME_CONSTANTS, _PRESSURE_RATIO = 5.0, 0.5

#: Changes of branch followed in one piece; a straight line crosses the threshold at most thrice.
_LEGS = 4


@dataclass(frozen=True)
class Profile:
    """Exposures as arrays ``(exposure, segment)``; shorter ones end in pieces of no length.

    Parameters
    ----------
    duration : array
        Length of each piece [min].
    start_pressure, end_pressure : array
        Ambient pressure at its ends [kPa absolute].
    start_inert, end_inert : array
        Arterial inert gas pressure at its ends, all inert gases together [kPa].
    initial : array
        Tissue pressure at the start, ``(exposure,)`` [kPa].
    """

    duration: Array
    start_pressure: Array
    end_pressure: Array
    start_inert: Array
    end_inert: Array
    initial: Array


@dataclass(frozen=True)
class Parameters:
    """One number a compartment, real or complex.

    Parameters
    ----------
    half_time : array
        [min].
    gain : array
        [1/min].
    threshold : array
        [kPa].
    crossover : array
        Supersaturation at which washout becomes linear [kPa]; NaN: never.
    fixed_venous : array
        Pressure of the venous gases that do not change [kPa].
    """

    half_time: Array
    gain: Array
    threshold: Array
    crossover: Array
    fixed_venous: Array


@dataclass
class _Leg:
    """A stretch on one branch: tension, its drive and ambient pressure are known functions of time."""

    tension: Array
    pressure: Array
    pressure_rate: Array
    inert: Array
    inert_rate: Array
    half_time: Array
    linear: NDArray[np.bool_]
    venous: Array
    crossover: Array

    def after(self, minutes: Array) -> Array:
        """Return the tension after some minutes."""
        end = self.inert + self.inert_rate * minutes
        exponential = tissue_pressure.raw(self.tension, self.inert, end, minutes, self.half_time)
        if not self.linear.any():
            return np.asarray(exponential)
        low, high = (
            _level(p, self.venous, self.crossover)
            for p in (self.pressure, self.pressure + self.pressure_rate * minutes)
        )
        straight = linear_tissue_pressure.raw(
            self.tension, self.inert, end, low, high, minutes, self.half_time
        )
        return np.asarray(np.where(self.linear, straight, exponential))

    def turning(self, shift: Array) -> Array:
        """Return the time at which tension minus (ambient + shift) stops rising or falling, or NaN."""
        k = np.log(2.0) / self.half_time.real
        p, drive, rate = self.tension.real, self.inert.real, self.inert_rate.real
        with np.errstate(all="ignore"):
            excess = p - drive + rate / k
            exponential = np.log(k * excess / (rate - self.pressure_rate)) / k
            # Straight washout: slope k (drive - threshold) grows by k (rate - pressure rate).
            level = _level(self.pressure, self.venous.real, self.crossover.real)
            slope, bend = k * (drive - level) - self.pressure_rate, k * (rate - self.pressure_rate)
            straight = -slope / bend
        time = np.where(self.linear, straight, exponential)
        return np.where(np.isfinite(time) & (time > 0.0), time, np.nan)


def _level(pressure: Array, venous: Array, crossover: Array) -> Array:
    """Return the tension above which washout is linear: ambient + crossover - venous gases."""
    return np.asarray(washout_threshold.raw(pressure, venous, 0.0, crossover, 0.0))


def accumulate(profile: Profile, values: Parameters) -> tuple[Array, Array]:
    """Return the cumulative hazard and the tension at the boundaries of the pieces.

    Parameters
    ----------
    profile : Profile
        The exposures.
    values : Parameters
        One number a compartment.

    Returns
    -------
    cumulative_hazard, tension : array
        ``(exposure, compartment, boundary)``; complex where a parameter is.
    """
    kind = np.result_type(*vars(values).values(), profile.initial)
    shape = (profile.initial.size, values.half_time.size)
    tension = np.broadcast_to(profile.initial[:, None], shape).astype(kind)
    total = np.zeros(shape, dtype=kind)
    totals, tensions = [total], [tension]
    bends = not np.all(np.isnan(values.crossover.real))
    for s in range(profile.duration.shape[1]):
        minutes = profile.duration[:, s, None]
        safe = np.where(minutes > 0.0, minutes, 1.0)
        first = (profile.start_pressure[:, s, None], profile.start_inert[:, s, None])
        rates = (
            (profile.end_pressure[:, s, None] - first[0]) / safe,
            (profile.end_inert[:, s, None] - first[1]) / safe,
        )
        done = np.zeros(shape)
        linear = np.zeros(shape, dtype=bool)
        for number in range(_LEGS if bends else 1):
            left = np.maximum(minutes - done, 0.0)
            if number and not np.any(left > 0.0):
                break
            leg = _leg(tension, first, rates, done, values, linear)
            if bends:
                if number == 0:
                    leg.linear = linear = _above(leg)
                length = left if number == _LEGS - 1 else _until_change(leg, left)
            else:
                length = np.broadcast_to(left, shape)
            total = total + values.gain * _integral(leg, length, values.threshold)
            tension = leg.after(length)
            changed = length < left
            linear = np.where(changed, ~linear, linear)
            done = np.where(changed, done + length, minutes)
        totals.append(total)
        tensions.append(tension)
    return np.stack(totals, axis=-1), np.stack(tensions, axis=-1)


def _leg(
    tension: Array, first: Any, rates: Any, done: Array, values: Parameters, linear: NDArray[np.bool_]
) -> _Leg:
    (pressure, inert), (pressure_rate, inert_rate) = first, rates
    wide = (np.broadcast_to(v, tension.shape) for v in (values.half_time, values.fixed_venous))
    half_time, venous = wide
    return _Leg(
        tension,
        pressure + pressure_rate * done,
        np.broadcast_to(pressure_rate, tension.shape),
        inert + inert_rate * done,
        np.broadcast_to(inert_rate, tension.shape),
        half_time,
        linear,
        venous,
        np.broadcast_to(values.crossover, tension.shape),
    )


def _above(leg: _Leg) -> NDArray[np.bool_]:
    with np.errstate(invalid="ignore"):
        level = _level(leg.pressure, leg.venous.real, leg.crossover.real)
        return np.asarray(leg.tension.real > level)


def _until_change(leg: _Leg, left: Array) -> Array:
    """Return the time until the tension passes the threshold of linear washout, at most `left`."""
    shift = np.where(np.isnan(leg.crossover.real), np.inf, leg.crossover.real) - leg.venous.real

    def away(minutes: Array) -> Array:
        level = leg.pressure + leg.pressure_rate * minutes + shift
        with np.errstate(invalid="ignore"):
            gap = leg.after(minutes).real - level
        return np.asarray(np.where(leg.linear, -gap, gap))  # rises to zero where the branch ends

    first, second = _halves(leg, left, shift)
    length = left * np.ones(leg.tension.shape)
    for low, high in (second, first):  # an earlier passage takes the place of a later one
        passes = (away(low) <= 0.0) & (away(high) > 0.0) & (high > low)
        if passes.any():
            root = find_root(away, np.where(passes, low, 0.0), np.where(passes, high, 0.0))
            length = np.where(passes & (root > 0.0), np.minimum(root, left), length)
    return length


def _halves(leg: _Leg, length: Array, shift: Array) -> tuple[tuple[Array, Array], tuple[Array, Array]]:
    """Return two spans in each of which tension minus ambient pressure only rises or only falls."""
    turn = leg.turning(shift)
    middle = np.where(np.isnan(turn), length, np.minimum(np.nan_to_num(turn), length))
    zero = np.zeros_like(middle)
    return (zero, middle), (middle, np.broadcast_to(length, middle.shape))


def _integral(leg: _Leg, length: Array, threshold: Array) -> Array:
    """Return the integral of the positive part of (tension - ambient - threshold + venous)/ambient."""
    shift = np.broadcast_to(threshold, leg.tension.shape) - leg.venous

    def excess(minutes: Array) -> Array:
        return np.asarray(leg.after(minutes) - (leg.pressure + leg.pressure_rate * minutes) - shift)

    total = np.zeros(leg.tension.shape, dtype=np.result_type(leg.tension, shift, leg.half_time))
    for low, high in _halves(leg, length, shift.real):
        begin, end = excess(low).real, excess(high).real
        some = ((begin > 0.0) | (end > 0.0)) & (high > low)
        if not some.any():
            continue
        crosses = some & (begin * end < 0.0)
        if crosses.any():
            root = find_root(
                lambda t: excess(t).real, np.where(crosses, low, 0.0), np.where(crosses, high, 0.0)
            )
            low = np.where(crosses & (begin < 0.0), root, low)
            high = np.where(crosses & (end < 0.0), root, high)
        high = np.where(some, high, low)
        total = total + _between(leg, low, high, excess, shift)
    return total


def _between(leg: _Leg, low: Array, high: Array, excess: Callable[[Array], Array], shift: Array) -> Array:
    span = high - low
    moves = (leg.pressure_rate != 0.0) & (span > 0.0)
    flat = (leg.inert - leg.pressure - shift) * span
    k = np.log(2.0) / leg.half_time
    decay = np.exp(-k * low) * -np.expm1(-k * span) / k
    held = (flat + (leg.tension - leg.inert) * decay) / leg.pressure
    if leg.linear.any():  # a straight line: its mean times its length
        straight = 0.5 * (excess(low) + excess(high)) * span / leg.pressure
        held = np.where(leg.linear, straight, held)
    if not moves.any():
        return np.asarray(held)
    ends = [leg.pressure + leg.pressure_rate * t for t in (low, high)]
    constants = np.max(np.where(moves & ~leg.linear, k.real * span, 0.0))
    ratio = np.max(np.where(moves, np.abs(np.log(ends[1] / ends[0])), 0.0))
    panels = max(1, int(np.ceil(max(constants / _TIME_CONSTANTS, ratio / _PRESSURE_RATIO))))
    step = span / panels
    total = np.zeros(held.shape, dtype=held.dtype)
    for n in range(panels):
        for node, weight in zip(_NODES, _WEIGHTS, strict=True):
            at = low + (n + node) * step
            total = total + weight * step * excess(at) / (leg.pressure + leg.pressure_rate * at)
    return np.where(moves, total, held)
