"""Properties of the equations of ascent planning."""

from __future__ import annotations

from hypothesis import given
from hypothesis import strategies as st

from gasphys import ascent

from .coverage import covers


@covers("ascent.gradient_at_depth")
@given(d=st.floats(0.0, 100.0), first=st.floats(1.0, 60.0), low=st.floats(0.1, 1.0), high=st.floats(0.1, 1.0))
def test_the_gradient_goes_straight_from_low_to_high(d: float, first: float, low: float, high: float) -> None:
    f = ascent.gradient_at_depth
    found = f(d, first, low, high)
    assert min(low, high) - 1e-12 <= found <= max(low, high) + 1e-12
    assert f(0.0, first, low, high) == high
    assert abs(f(first, first, low, high) - low) < 1e-12
    assert abs(f(first + d, first, low, high) - low) < 1e-12
    # Without a stop the surface has the high value; with equal values the first stop has no influence.
    assert f(0.0, 0.0, low, high) == high
    assert abs(f(d, first, low, low) - low) < 1e-12
