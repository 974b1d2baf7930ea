"""A stiff integrator for many small systems at once, each with its own steps, until it vanishes."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from gasphys.errors import NotReachableError

__all__ = ["integrate"]

Array = NDArray[np.float64]

# Rosenbrock method of order 4, one of order 3 inside: Kaps & Rentrop 1979, parameters of Shampine 1982.
_GAMMA = 0.5
_A = ((2.0,), (48.0 / 25.0, 6.0 / 25.0))
_C = ((-8.0,), (372.0 / 25.0, 12.0 / 5.0), (-112.0 / 125.0, -54.0 / 125.0, -2.0 / 5.0))
_B = (19.0 / 9.0, 0.5, 25.0 / 108.0, 125.0 / 108.0)
_E = (17.0 / 54.0, 7.0 / 36.0, 0.0, 125.0 / 108.0)
_TIME = (0.5, -1.5, 121.0 / 50.0, 29.0 / 250.0)
_NODES = (1.0, 0.6)
#: Most steps of one bubble on one stretch.
_MOST = 100_000


def integrate(
    rate: Callable[[Array, Array, NDArray[np.int64]], Array],
    start: Array,
    begin: Array,
    length: float,
    alive: NDArray[np.bool_],
    *,
    gone: Array,
    tolerance: float,
) -> tuple[Array, Array, Array]:
    """Integrate many systems over a stretch of time.

    Parameters
    ----------
    rate : callable
        Right-hand side of times ``(lane,)``, states ``(lane, variable)`` and the lanes they belong to.
    start : array
        States ``(lane, variable)``; the first variable is the one that may vanish.
    begin : array
        Time at which each lane begins.
    length : float
        Time at which all end.
    alive : array of bool
        Lanes to integrate; the others are returned as they are.
    gone : array
        Value of the first variable below which a lane that shrinks vanishes in a straight line.
    tolerance : float
        Relative error allowed in a step.

    Returns
    -------
    tuple
        States at the end (of a lane that vanished: at that moment), when it vanished (NaN: not), and the
        greatest value the first variable had.

    Raises
    ------
    NotReachableError
        If a lane needs too many steps.

    Examples
    --------
    >>> fall = lambda t, y, lanes: np.full_like(y, -2.0)
    >>> one = np.ones((1, 1)), np.zeros(1), 1.0, np.ones(1, bool)
    >>> end, over, top = integrate(fall, *one, gone=np.full(1, 1e-6), tolerance=1e-9)
    >>> round(float(over[0]), 9)
    0.5
    """
    y, lanes = start.copy(), np.flatnonzero(alive)
    over, top = np.full(len(y), np.nan), y[:, 0].copy()
    time = begin.astype(float).copy()
    step = np.full(len(y), np.nan)
    eye = np.eye(y.shape[1])
    for _ in range(_MOST):
        if not lanes.size:
            return y, over, top
        t, here = time[lanes], y[lanes]
        f = rate(t, here, lanes)
        new = np.isnan(step[lanes])
        if new.any():
            scale = (np.abs(f) / np.maximum(np.abs(here), 1e-6)).max(axis=1)
            step[lanes] = np.where(new, 1e-3 / np.maximum(scale, 1e-3 / length), step[lanes])
        h = np.minimum(step[lanes], length - t)
        # No step takes more than half of what is left: so the last moments are resolved.
        shrinking = f[:, 0] < 0.0
        with np.errstate(divide="ignore"):
            h = np.where(shrinking, np.minimum(h, 0.5 * here[:, 0] / np.maximum(-f[:, 0], 1e-300)), h)
        jacobian, drift = _slopes(rate, lanes, t, here, f, h)
        with np.errstate(all="ignore"):
            inverse = np.linalg.inv(eye / (_GAMMA * h)[:, None, None] - jacobian)
            stages: list[Array] = []
            value = f
            for k in range(4):
                if 0 < k < 3:
                    trial = here + sum(a * g for a, g in zip(_A[k - 1], stages, strict=True))
                    value = rate(t + _NODES[k - 1] * h, trial, lanes)
                right = value + (_TIME[k] * h)[:, None] * drift
                if k:
                    right = right + sum(c * g for c, g in zip(_C[k - 1], stages, strict=True)) / h[:, None]
                stages.append(np.einsum("lij,lj->li", inverse, right))
            after = here + sum(b * g for b, g in zip(_B, stages, strict=True))
            error = np.abs(sum(e * g for e, g in zip(_E, stages, strict=True)))
            size = np.maximum(np.maximum(np.abs(here), np.abs(after)), 1e-6)
            worst = (error / (tolerance * size)).max(axis=1)
        good = (worst <= 1.0) & (after[:, 0] > 0.0) & np.isfinite(after).all(axis=1)
        worst = np.where(np.isfinite(worst) & (after[:, 0] > 0.0), worst, 1e9)
        step[lanes] = h * np.clip(0.9 * np.maximum(worst, 1e-12) ** -0.25, 0.1, 4.0)
        done = lanes[good]
        y[done] = after[good]
        time[done] = np.where(t + h >= length * (1.0 - 1e-15), length, t + h)[good]
        top[done] = np.maximum(top[done], y[done, 0])
        small = done[(y[done, 0] < gone[done])]
        if small.size:
            last = rate(time[small], y[small], small)[:, 0]
            falls = last < 0.0
            small, last = small[falls], last[falls]
            when = time[small] + y[small, 0] / -last
            out = when <= length
            over[small[out]] = when[out]
            y[small[out], 0] = 0.0
        lanes = lanes[(time[lanes] < length) & np.isnan(over[lanes])]
    raise NotReachableError(f"a bubble needs more than {_MOST} steps; allow a larger tolerance")


def _slopes(
    rate: Callable[[Array, Array, NDArray[np.int64]], Array],
    lanes: NDArray[np.int64],
    t: Array,
    y: Array,
    f: Array,
    h: Array,
) -> tuple[Array, Array]:
    """Return the Jacobian and the derivative by time, by differences."""
    count = y.shape[1]
    jacobian = np.empty((len(y), count, count))
    for j in range(count):
        moved = y.copy()
        moved[:, j] += 1e-7 * np.maximum(np.abs(y[:, j]), 1e-6)
        jacobian[:, :, j] = (rate(t, moved, lanes) - f) / (moved[:, j] - y[:, j])[:, None]
    change = 1e-4 * h
    return jacobian, (rate(t + change, y, lanes) - f) / change[:, None]
