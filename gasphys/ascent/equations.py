"""Equations of ascent planning."""

from __future__ import annotations

from gasphys.equation import Value, formula
from gasphys.maths import maximum, minimum

__all__ = ["gradient_at_depth"]


@formula(
    result="gradient",
    quantities={"depth": "depth"},
    source="baker_1998",
    provenance="memory_high",
)
def gradient_at_depth(
    depth: Value, first_stop_depth: Value, gradient_low: Value, gradient_high: Value
) -> Value:
    """Share of the tolerated supersaturation that may be used at a depth of the ascent.

    Notes
    -----
    From the low value at the first stop, and deeper, in a straight line to the high value at the surface. The
    first stop is the one found with the low value, rounded to the grid and then kept; without a stop, 0, the
    surface still has the high value. No trial supports the line, or any pair of values.

    Examples
    --------
    >>> round(gradient_at_depth(9.0, 18.0, 0.4, 0.8), 2)
    0.6
    """
    share = minimum(depth / maximum(first_stop_depth, 1e-9), 1.0)
    return gradient_high - (gradient_high - gradient_low) * share
