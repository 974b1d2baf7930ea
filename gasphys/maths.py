"""The closed list of functions an equation body may use, in three bindings.

An equation body is written once with these names. The same code object then runs with other
globals: :data:`SCALAR` (the ``math`` module, one number), :data:`ARRAY` (numpy) and
:func:`symbolic_names` (sympy). Two shared helpers give the mean of a power and of a reciprocal
over a linear ramp, regular where the ends are equal. :func:`find_root` is the one vectorized
bracketed root finder.
"""

from __future__ import annotations

import functools
import math
from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

__all__ = [
    "ARRAY",
    "SCALAR",
    "exp",
    "expm1",
    "find_root",
    "log",
    "log1p",
    "log10",
    "maximum",
    "mean_log",
    "mean_power",
    "mean_power_log",
    "mean_power_slope",
    "minimum",
    "normal_cdf",
    "ramp_gain",
    "sin",
    "sqrt",
    "symbolic_names",
    "tanh",
    "where",
]

exp = np.exp
expm1 = np.expm1
log = np.log
log10 = np.log10
log1p = np.log1p
sin = np.sin
sqrt = np.sqrt
tanh = np.tanh
where = np.where
minimum = np.minimum
maximum = np.maximum

#: Relative half-span of a ramp below which the means switch to their series.
_NEAR = 0.01


def normal_cdf(x: Any) -> Any:
    """Return the standard normal distribution function of `x`.

    >>> float(normal_cdf(0.0))
    0.5
    """
    from scipy.special import ndtr

    return ndtr(x)


def _power_series(n: Any) -> tuple[Any, Any, Any]:
    """Coefficients of (h/m)^2, ^4, ^6 in the mean of x^n over m - h .. m + h."""
    c1 = n * (n - 1.0) / 6.0
    c2 = c1 * (n - 2.0) * (n - 3.0) / 20.0
    c3 = c2 * (n - 4.0) * (n - 5.0) / 42.0
    return c1, c2, c3


def mean_power(start: Any, end: Any, exponent: Any) -> Any:
    """Mean of ``max(x, 0)**exponent`` while x goes linearly from `start` to `end`.

    The closed form keeps the unclipped span in its denominator, so a ramp that crosses zero is
    exact; nearly equal ends use the series in the half-span, so the limit is regular.

    >>> float(mean_power(0.0, 2.0, 1.0))
    1.0
    """
    start, end = np.asarray(start, dtype=np.float64), np.asarray(end, dtype=np.float64)
    a, b = np.maximum(start, 0.0), np.maximum(end, 0.0)
    middle, half = 0.5 * (start + end), 0.5 * (end - start)
    near = np.abs(half) <= _NEAR * np.abs(middle)
    ratio = np.where(near, half / np.where(middle == 0.0, 1.0, middle), 0.0) ** 2
    c1, c2, c3 = _power_series(exponent)
    series = np.maximum(middle, 0.0) ** exponent * (1.0 + ratio * (c1 + ratio * (c2 + ratio * c3)))
    span = np.where(near, 1.0, end - start)
    closed = (b ** (exponent + 1.0) - a ** (exponent + 1.0)) / ((exponent + 1.0) * span)
    result = np.where(near, series, closed)
    return result if result.ndim else float(result)


def mean_power_slope(start: Any, end: Any, exponent: Any) -> Any:
    """Derivative of :func:`mean_power` with respect to `end`.

    >>> float(mean_power_slope(0.0, 2.0, 1.0))
    0.5
    """
    start, end = np.asarray(start, dtype=np.float64), np.asarray(end, dtype=np.float64)
    n = exponent
    middle, half = 0.5 * (start + end), 0.5 * (end - start)
    near = (np.abs(half) <= _NEAR * np.abs(middle)) & (middle > 0.0)
    m = np.where(near, middle, 1.0)
    x = np.where(near, half / m, 0.0)
    c1, c2, c3 = _power_series(n)
    series = (
        0.5
        * m ** (n - 1.0)
        * (n + 2.0 * c1 * x + x**2 * (c1 * (n - 2.0) + 4.0 * c2 * x) + x**4 * (c2 * (n - 4.0) + 6.0 * c3 * x))
    )
    flat = start == end
    span = np.where(near | flat, 1.0, end - start)
    closed = (np.maximum(end, 0.0) ** n - mean_power(start, end, n)) / span
    result = np.where(near, series, np.where(flat, 0.0, closed))
    return result if result.ndim else float(result)


def mean_power_log(start: Any, end: Any, exponent: Any) -> Any:
    """Derivative of :func:`mean_power` with respect to `exponent`: mean of x^n log(x), x above zero.

    >>> float(mean_power_log(1.0, 1.0, 2.0))
    0.0
    """
    start, end = np.asarray(start, dtype=np.float64), np.asarray(end, dtype=np.float64)
    n = np.asarray(exponent, dtype=np.float64)

    def power_log(x: Any) -> Any:
        safe = np.where(x > 0.0, x, 1.0)
        return safe**n * np.log(safe)

    def integral(x: Any) -> Any:
        safe = np.where(x > 0.0, x, 1.0)
        value = safe ** (n + 1.0) * (np.log(safe) - 1.0 / (n + 1.0)) / (n + 1.0)
        return np.where(x > 0.0, value, 0.0)

    middle, half = 0.5 * (start + end), 0.5 * (end - start)
    near = np.abs(half) <= _NEAR * np.abs(middle)
    # Five points of Gauss are exact to the last bits over so short a piece.
    points, weights = np.polynomial.legendre.leggauss(5)
    short = sum(0.5 * w * power_log(middle + half * p) for p, w in zip(points, weights, strict=True))
    closed = (integral(end) - integral(start)) / np.where(near, 1.0, end - start)
    result = np.where(near, short, closed)
    return result if result.ndim else float(result)


def mean_log(start: Any, end: Any) -> Any:
    """Mean of ``1/x`` while x goes linearly from `start` to `end`: ln(end/start)/(end - start).

    >>> float(mean_log(2.0, 2.0))
    0.5
    """
    start, end = np.asarray(start, dtype=np.float64), np.asarray(end, dtype=np.float64)
    u = (end - start) / start
    small = np.abs(u) < 1e-5
    safe = np.where(small, 1.0, u)
    result = np.where(small, 1.0 - u / 2.0 + u * u / 3.0, np.log1p(safe) / safe) / start
    return result if result.ndim else float(result)


#: Argument below which :func:`ramp_gain` takes its series.
_SHORT = 0.01


def ramp_gain(x: Any) -> Any:
    """``1 - (1 - exp(-x))/x``, regular at zero: the share of a linear change a first-order lag has followed.

    Notes
    -----
    `x` is the time over the time constant. With E = 1 - exp(-x) the value is E (1/E - 1/x), and 1/E - 1/x is
    1/2 + x/12 - x^3/720 + ...; below 0.01 the next term is less than 1e-14 of it.

    >>> float(ramp_gain(0.0))
    0.0
    """
    # A complex x carries a derivative in its imaginary part (gasphys.risk).
    negative = -np.asarray(x, dtype=None if np.iscomplexobj(x) else np.float64)
    with np.errstate(invalid="ignore", divide="ignore"):
        result = ramp_gain_from(negative, np.expm1(negative))
    return result if result.ndim else float(result)


def ramp_gain_from(negative: NDArray[np.float64], change: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return :func:`ramp_gain` of ``-negative`` where ``expm1(negative)`` is known already.

    For kernels; quiet about 0/0 only inside ``np.errstate``.

    >>> x = np.array([0.5])
    >>> bool(ramp_gain_from(-x, np.expm1(-x))[0] == ramp_gain(0.5))
    True
    """
    series = negative * negative
    series *= -1.0 / 720.0
    series += 1.0 / 12.0
    series *= negative
    series -= 0.5
    series *= change
    return np.where(negative.real > -_SHORT, series, 1.0 - change / negative)


#: Names bound to numpy: the binding of ``f.raw``.
ARRAY: dict[str, Any] = {
    "exp": np.exp,
    "expm1": np.expm1,
    "log": np.log,
    "log10": np.log10,
    "log1p": np.log1p,
    "sin": np.sin,
    "sqrt": np.sqrt,
    "tanh": np.tanh,
    "where": np.where,
    "minimum": np.minimum,
    "maximum": np.maximum,
    "normal_cdf": normal_cdf,
    "mean_power": mean_power,
    "mean_log": mean_log,
    "ramp_gain": ramp_gain,
}


def _where(condition: bool, yes: float, no: float) -> float:
    return yes if condition else no


def _minimum(a: float, b: float) -> float:
    return b if b < a else a


def _maximum(a: float, b: float) -> float:
    return b if b > a else a


def _normal_cdf(x: float) -> float:
    return 0.5 * math.erfc(-x / math.sqrt(2.0))


#: Names bound to the math module, for one number.
SCALAR: dict[str, Any] = {
    "exp": math.exp,
    "expm1": math.expm1,
    "log": math.log,
    "log10": math.log10,
    "log1p": math.log1p,
    "sin": math.sin,
    "sqrt": math.sqrt,
    "tanh": math.tanh,
    "where": _where,
    "minimum": _minimum,
    "maximum": _maximum,
    "normal_cdf": _normal_cdf,
    "mean_power": mean_power,
    "mean_log": mean_log,
    "ramp_gain": ramp_gain,
}


def _raised(text: str, exp: str) -> str:
    """Return printed LaTeX, raised to a power where the printer asks for one."""
    return rf"\left({text}\right)^{{{exp}}}" if exp else str(text)


@functools.cache
def symbolic_names() -> dict[str, Any]:
    """Return the closed list bound to sympy.

    >>> symbolic_names()["sqrt"](4)
    2
    """
    import sympy as sp

    class MeanPower(sp.Function):  # type: ignore[misc]
        """Mean of max(x, 0)^n over a linear ramp."""

        nargs = 3

        def doit(self, **hints: Any) -> Any:
            a, b, n = self.args
            closed = (sp.Max(b, 0) ** (n + 1) - sp.Max(a, 0) ** (n + 1)) / ((n + 1) * (b - a))
            return sp.Piecewise((closed, sp.Ne(a, b)), (sp.Max(a, 0) ** n, True))

        def fdiff(self, argindex: int = 1) -> Any:
            a, b, n = self.args
            if argindex == 1:
                return MeanPowerSlope(b, a, n)
            if argindex == 2:
                return MeanPowerSlope(a, b, n)
            return MeanPowerLog(a, b, n)

        def _latex(self, printer: Any, exp: str = "") -> str:
            return _raised(printer._print(self.doit()), exp)

        def _sympystr(self, printer: Any) -> str:
            a, b, n = (printer._print(x) for x in self.args)
            return f"mean over the ramp of max(x, 0)**({n}), x from {a} to {b}"

    class MeanPowerSlope(sp.Function):  # type: ignore[misc]
        """Derivative of MeanPower with respect to its second argument."""

        nargs = 3

        def _latex(self, printer: Any, exp: str = "") -> str:
            a, b, n = self.args
            slope = (sp.Max(b, 0) ** n - MeanPower(a, b, n).doit()) / (b - a)
            return _raised(printer._print(slope), exp)

    class MeanPowerLog(sp.Function):  # type: ignore[misc]
        """Derivative of MeanPower with respect to the exponent."""

        nargs = 3

        def _latex(self, printer: Any, exp: str = "") -> str:
            slope = sp.Derivative(MeanPower(*self.args).doit(), self.args[2])
            return _raised(printer._print(slope), exp)

    class MeanLog(sp.Function):  # type: ignore[misc]
        """Mean of 1/x over a linear ramp."""

        nargs = 2

        def doit(self, **hints: Any) -> Any:
            a, b = self.args
            return sp.Piecewise((sp.log(b / a) / (b - a), sp.Ne(a, b)), (1 / a, True))

        def fdiff(self, argindex: int = 1) -> Any:
            a, b = self.args
            one, other = (a, b) if argindex == 1 else (b, a)
            near = -1 / (2 * one**2)
            return sp.Piecewise(((1 / one - MeanLog(a, b)) / (one - other), sp.Ne(a, b)), (near, True))

        def _latex(self, printer: Any, exp: str = "") -> str:
            return _raised(printer._print(self.doit()), exp)

        def _sympystr(self, printer: Any) -> str:
            a, b = (printer._print(x) for x in self.args)
            return f"mean over the ramp of 1/x, x from {a} to {b}"

    class RampGain(sp.Function):  # type: ignore[misc]
        """1 - (1 - exp(-x))/x."""

        nargs = 1

        def doit(self, **hints: Any) -> Any:
            (x,) = self.args
            return sp.Piecewise((1 - (1 - sp.exp(-x)) / x, sp.Ne(x, 0)), (0, True))

        def fdiff(self, argindex: int = 1) -> Any:
            (x,) = self.args
            slope = (1 - (1 + x) * sp.exp(-x)) / x**2
            return sp.Piecewise((slope, sp.Ne(x, 0)), (sp.Rational(1, 2), True))

        def _latex(self, printer: Any, exp: str = "") -> str:
            (x,) = self.args
            text = printer._print(sp.Add(1, -(1 - sp.exp(-x)) / x, evaluate=False))
            return _raised(rf"\left({text}\right)", exp)  # a sum: it may stand in a product

        def _sympystr(self, printer: Any) -> str:
            x = printer._print(self.args[0])
            return f"(1 - (1 - exp(-({x})))/({x}))"

    class NormalCdf(sp.Function):  # type: ignore[misc]
        """Standard normal distribution function; its own symbol, so that small tails keep their digits."""

        nargs = 1

        def doit(self, **hints: Any) -> Any:
            return sp.erfc(-self.args[0] / sp.sqrt(2)) / 2

        def fdiff(self, argindex: int = 1) -> Any:
            return sp.exp(-(self.args[0] ** 2) / 2) / sp.sqrt(2 * sp.pi)

        def _latex(self, printer: Any, exp: str = "") -> str:
            return _raised(rf"\Phi\left({printer._print(self.args[0])}\right)", exp)

        def _sympystr(self, printer: Any) -> str:
            return f"normal_cdf({printer._print(self.args[0])})"

    def sp_where(condition: Any, yes: Any, no: Any) -> Any:
        return sp.Piecewise((yes, condition), (no, True))

    return {
        "exp": sp.exp,
        "expm1": lambda x: sp.exp(x) - 1,
        "log1p": lambda x: sp.log(1 + x),
        "log": sp.log,
        "log10": lambda x: sp.log(x) / sp.log(10),
        "sin": sp.sin,
        "sqrt": sp.sqrt,
        "tanh": sp.tanh,
        "where": sp_where,
        "minimum": sp.Min,
        "maximum": sp.Max,
        "normal_cdf": NormalCdf,
        "mean_power": MeanPower,
        "mean_log": MeanLog,
        "ramp_gain": RampGain,
    }


def lambdify_names() -> list[Any]:
    """Return the modules that turn a traced expression back into numpy code.

    >>> sorted(lambdify_names()[0])
    ['MeanLog', 'MeanPower', 'MeanPowerLog', 'MeanPowerSlope', 'NormalCdf', 'RampGain']
    """
    own = {
        "MeanPower": mean_power,
        "MeanPowerSlope": mean_power_slope,
        "MeanPowerLog": mean_power_log,
        "MeanLog": mean_log,
        "RampGain": ramp_gain,
        "NormalCdf": normal_cdf,
    }
    return [own, "numpy"]


def find_root(
    function: Callable[[NDArray[np.float64]], NDArray[np.float64]],
    low: NDArray[np.float64] | float,
    high: NDArray[np.float64] | float,
    *,
    steps: int = 120,
) -> NDArray[np.float64]:
    """Find, element by element, the root of a function bracketed by `low` and `high`.

    Parameters
    ----------
    function : callable
        Vectorized, continuous; called with an array of the broadcast shape of the bounds.
    low, high : float or array
        Bounds between which each element changes sign.
    steps : int
        Upper bound on the evaluations.

    Returns
    -------
    array
        Roots to the last bits of double precision; NaN where the bounds do not bracket one.

    Notes
    -----
    Chandrupatla's method (1997): inverse quadratic interpolation where it is certain to
    converge, bisection elsewhere.

    Examples
    --------
    >>> import numpy as np
    >>> root = find_root(lambda x: x * x - 2.0, np.array([0.0]), np.array([2.0]))
    >>> round(float(root[0]), 12)
    1.414213562373
    """
    b, a = np.broadcast_arrays(np.asarray(low, dtype=float), np.asarray(high, dtype=float))
    a, b = np.array(a), np.array(b)
    if a.size == 0:
        return a
    fa, fb = np.asarray(function(a)), np.asarray(function(b))
    fa, fb = np.broadcast_to(fa, a.shape).copy(), np.broadcast_to(fb, a.shape).copy()
    bracketed = np.sign(fa) * np.sign(fb) <= 0.0
    c, fc = a.copy(), fa.copy()
    t = np.full(a.shape, 0.5)
    with np.errstate(all="ignore"):
        for _ in range(steps):
            x = a + t * (b - a)
            fx = np.broadcast_to(np.asarray(function(x)), a.shape)
            same = np.sign(fx) == np.sign(fa)
            c = np.where(same, a, b)
            fc = np.where(same, fa, fb)
            b = np.where(same, b, a)
            fb = np.where(same, fb, fa)
            a, fa = x, fx.copy()
            better = np.abs(fa) < np.abs(fb)
            best, fbest = np.where(better, a, b), np.where(better, fa, fb)
            tolerance = 2.0 * np.finfo(float).eps * np.abs(best) + 1e-300
            room = tolerance / np.abs(b - a)
            done = (room > 0.5) | (fbest == 0.0) | ~bracketed | (a == b)
            if done.all():
                break
            xi = (a - b) / (c - b)
            phi = (fa - fb) / (fc - fb)
            quadratic = (phi**2 < xi) & ((1.0 - phi) ** 2 < 1.0 - xi)
            step = fa / (fb - fa) * fc / (fb - fc) + (c - a) / (b - a) * fa / (fc - fa) * fb / (fc - fb)
            t = np.where(quadratic & np.isfinite(step), step, 0.5)
            t = np.minimum(1.0 - room, np.maximum(room, t))
            t = np.where(done | ~np.isfinite(t), 0.0, t)
    better = np.abs(fa) < np.abs(fb)
    return np.where(bracketed, np.where(better, a, b), np.nan)
