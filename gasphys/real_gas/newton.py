"""Newton's method for densities: all states at once, in pieces that stay in the cache."""

from __future__ import annotations

import functools
import math
from collections.abc import Callable
from typing import Any

import numpy as np

__all__ = ["by_blocks", "newton"]

#: Elements a kernel works on at a time, so that its intermediate arrays stay in the cache.
_BLOCK = 8192


def by_blocks(kernel: Callable[..., Any]) -> Callable[..., Any]:
    """Run a kernel on one number as on floats, on large arrays piece by piece.

    Parameters
    ----------
    kernel : callable
        Takes numbers or arrays that broadcast, works element by element.

    Returns
    -------
    callable
        The same function of the same arguments.

    Examples
    --------
    >>> float(by_blocks(lambda x, y: x + y)(np.ones(20000), 1.0).sum())
    40000.0
    """

    def run(*values: Any) -> Any:
        shape = np.broadcast_shapes(*(np.shape(v) for v in values))
        if not shape:
            return kernel(*(float(v) for v in values))
        size = math.prod(shape)
        if size <= _BLOCK:
            return kernel(*values)

        def part(value: Any, piece: Any) -> Any:
            if np.ndim(value) < len(shape):
                return value
            if len(value) == 1:
                return value[0] if isinstance(piece, int) else value
            return value[piece]

        out = np.empty(shape)
        rows = _BLOCK * shape[0] // size
        if rows:
            pieces: list[Any] = [slice(k, k + rows) for k in range(0, shape[0], rows)]
        else:
            pieces = list(range(shape[0]))
        for piece in pieces:
            out[piece] = run(*(part(v, piece) for v in values))
        return out

    return functools.wraps(kernel)(run)


def newton(start: Any, wanted: Any, level: Callable[[Any], Any], slope: Callable[[Any], Any]) -> Any:
    """Solve level(x) = wanted for all elements at once.

    Parameters
    ----------
    start, wanted : float or array
        First guess, from which Newton's method converges, and the value to be reached.
    level, slope : callable
        The function and its derivative.

    Returns
    -------
    float or array
        The root; NaN where it does not converge.

    Examples
    --------
    >>> newton(1.0, 2.0, lambda x: x * x, lambda x: 2.0 * x)
    1.4142135623730951
    """
    x = start
    for _ in range(40):
        step = (level(x) - wanted) / slope(x)
        x = x - step
        # Quadratic: after a step of 1e-9 the next would be below the last digit.
        if not np.any(abs(step) > 1e-9 * abs(x)):
            return x
    return np.where(abs(step) > 1e-9 * abs(x), np.nan, x)
