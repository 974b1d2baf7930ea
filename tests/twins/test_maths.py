"""The shared helpers of bodies and kernels against high-precision quadrature and root finding."""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable

import mpmath as mp
import numpy as np
import pytest

from gasphys.maths import (
    find_root,
    mean_log,
    mean_power,
    mean_power_log,
    mean_power_slope,
    normal_cdf,
)

mp.mp.dps = 40

#: Ramps that are wide, flat, nearly flat on both sides of the switch to the series, that touch or
#: cross zero or stay below it.
RAMPS = [
    (0.2, 3.0),
    (3.0, 0.2),
    (1.0, 1.0),
    (1.0, 1.0 + 1e-15),
    (1.0, 1.0 + 1e-12),
    (1.0, 1.0 + 1e-8),
    (1.0, 1.0 - 1e-8),
    (1.0, 1.0001),
    (1.0, 1.0 + 2.0 * 0.0099 / (1.0 - 0.0099)),
    (1.0, 1.0 + 2.0 * 0.0101 / (1.0 - 0.0101)),
    (1e-9, 2e-9),
    (1e6, 1.0000001e6),
    (0.0, 2.0),
    (2.0, 0.0),
    (-1.0, 2.0),
    (2.0, -1.0),
    (-1e-9, 1.0),
    (-3.0, -0.5),
    (-1.0, -1.0),
    (0.0, 0.0),
]
EXPONENTS = [5.0 / 6.0, 0.83, 1.0, 2.285, 3.38, 4.57, 0.5]

ramps = pytest.mark.parametrize(("start", "end"), RAMPS)
exponents = pytest.mark.parametrize("exponent", EXPONENTS)


def _mean(f: Callable[[mp.mpf], mp.mpf], start: float, end: float) -> mp.mpf:
    """Mean of f(x), x above zero, over the ramp by quadrature, split where the ramp crosses zero."""
    a, b = mp.mpf(start), mp.mpf(end)
    if a == b:
        return f(a) if a > 0 else mp.mpf(0)
    points = [a, mp.mpf(0), b] if a * b < 0 else [a, b]
    # Quadrature aims at an absolute error: bring the function to the size of one.
    size = abs(f(max(a, b))) if max(a, b) > 0 else mp.mpf(1)
    size = size or mp.mpf(1)
    parts = [
        (q - p) * mp.quad(lambda s, p=p, q=q: f(p + s * (q - p)) / size, [0, 1])
        for p, q in itertools.pairwise(points)
        if p + q > 0
    ]
    return size * mp.fsum(parts) / (b - a)


@ramps
@exponents
def test_mean_power(start: float, end: float, exponent: float) -> None:
    exact = _mean(lambda x: x ** mp.mpf(exponent), start, end)
    assert mean_power(start, end, exponent) == pytest.approx(float(exact), rel=1e-12, abs=1e-300)
    batch = mean_power(np.array([start, 1.0]), np.array([end, 2.0]), exponent)
    assert batch[0] == pytest.approx(float(exact), rel=1e-12, abs=1e-300)


@ramps
@exponents
def test_mean_power_slope(start: float, end: float, exponent: float) -> None:
    n, a, b = mp.mpf(exponent), mp.mpf(start), mp.mpf(end)
    if a == b:
        exact = n * a ** (n - 1) / 2 if a > 0 else mp.mpf(0)
        if a == 0:
            return  # a corner: no slope
    else:
        top = b**n if b > 0 else mp.mpf(0)
        exact = (top - _mean(lambda x: x**n, start, end)) / (b - a)
    assert mean_power_slope(start, end, exponent) == pytest.approx(float(exact), rel=1e-10, abs=1e-12)


@ramps
@exponents
def test_mean_power_log(start: float, end: float, exponent: float) -> None:
    exact = _mean(lambda x: x ** mp.mpf(exponent) * mp.log(x) if x > 0 else mp.mpf(0), start, end)
    # Twelve digits of the terms that cancel where the logarithm changes its sign.
    room = 1e-13 * max(1.0, abs(start), abs(end)) ** exponent * (1.0 + abs(math.log(max(start, end, 1e-300))))
    assert mean_power_log(start, end, exponent) == pytest.approx(float(exact), rel=1e-11, abs=room)


@pytest.mark.parametrize(
    ("start", "end"),
    [(a, b) for a, b in RAMPS if a > 0.0 and b > 0.0] + [(45.0, 120.0), (300.0, 1e-3), (1.0, 1.0 + 1e-5)],
)
def test_mean_log(start: float, end: float) -> None:
    a, b = mp.mpf(start), mp.mpf(end)
    exact = 1 / a if a == b else mp.log(b / a) / (b - a)
    assert mean_log(start, end) == pytest.approx(float(exact), rel=1e-12)
    assert mean_log(end, start) == pytest.approx(float(exact), rel=1e-12)


@pytest.mark.parametrize("x", [-37.0, -10.0, -5.0, -1.0, -1e-9, 0.0, 0.3, 2.0, 8.0, 40.0])
def test_normal_cdf(x: float) -> None:
    assert float(normal_cdf(x)) == pytest.approx(float(mp.ncdf(mp.mpf(x))), rel=1e-12, abs=0.0)


@pytest.mark.parametrize(
    ("f", "low", "high"),
    [
        (lambda x: x * x * x - 2.0, 0.0, 2.0),
        (lambda x: x * x * x + 150.0 * x - 23400.0, 0.0, 1e4),
        (lambda x: 1.0 - 2.0 / x if np.isscalar(x) else 1.0 - 2.0 / np.where(x == 0.0, 1e-300, x), 0.0, 1e12),
        (lambda x: np.exp(-x) - 1e-9, 0.0, 700.0),
        (lambda x: np.arctan(1e6 * (x - 0.123)), -1.0, 1.0),
        (lambda x: (x - 0.5) ** 9, 0.0, 1.2),
        (lambda x: x - 3.0, 3.0, 10.0),
        (lambda x: x - 10.0, 3.0, 10.0),
    ],
)
def test_find_root(f: object, low: float, high: float) -> None:
    assert callable(f)
    (root,) = find_root(f, np.array([low]), np.array([high]))
    step = 4.0 * np.spacing(abs(root)) + 1e-300
    left, right = f(np.array([root - step]))[0], f(np.array([root + step]))[0]
    flat = abs(f(np.array([root]))[0]) <= 1e-15 * max(abs(f(np.array([low]))[0]), abs(f(np.array([high]))[0]))
    assert left * right <= 0.0 or flat


def test_find_root_solves_each_element_alone() -> None:
    wanted = np.linspace(0.001, 0.999, 997)
    roots = find_root(lambda x: x**3 - wanted, 0.0, np.ones_like(wanted))
    np.testing.assert_allclose(roots, np.cbrt(wanted), rtol=1e-14)
    lost = find_root(lambda x: x - np.array([0.5, 2.0, np.nan]), np.zeros(3), np.ones(3))
    assert lost[0] == 0.5
    assert np.isnan(lost[1:]).all()
    assert find_root(lambda x: x, np.empty(0), np.empty(0)).shape == (0,)
