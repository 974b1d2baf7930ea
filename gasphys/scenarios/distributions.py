"""What is believed of an input: a distribution, cut off where its quantity is not possible."""

from __future__ import annotations

import abc
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from gasphys.errors import RangeError, UnitError
from gasphys.quantities import QUANTITIES, Quantity

__all__ = ["Bounded", "Choice", "Distribution", "LogNormal", "Normal", "Triangular", "Uniform", "bounded"]

Array = NDArray[np.float64]


class Distribution(Protocol):
    """What a distribution must offer: its quantiles and its cumulative probability.

    Frozen distributions of ``scipy.stats`` do.
    """

    def ppf(self, probability: Any, /) -> Any:
        """Return the value of a cumulative probability."""

    def cdf(self, value: Any, /) -> Any:
        """Return the cumulative probability of a value."""


@dataclass(frozen=True)
class _Known(abc.ABC):
    """A distribution by its parameters, in `unit`; the canonical unit of the quantity where it is empty."""

    @abc.abstractmethod
    def frozen(self) -> Distribution:
        """Return it as scipy knows it."""

    def ppf(self, probability: Any, /) -> Any:
        """Return the value of a cumulative probability.

        Parameters
        ----------
        probability : float or array
            Between 0 and 1.

        Returns
        -------
        float or array
            In the unit of the distribution.
        """
        return self.frozen().ppf(probability)

    def cdf(self, value: Any, /) -> Any:
        """Return the cumulative probability of a value.

        Parameters
        ----------
        value : float or array
            In the unit of the distribution.

        Returns
        -------
        float or array
            Between 0 and 1.
        """
        return self.frozen().cdf(value)


def _finite(of: Any, *names: str) -> None:
    for name in names:
        if not math.isfinite(float(getattr(of, name))):
            raise RangeError(f"{type(of).__name__}: {name} = {getattr(of, name)} must be a finite number")


@dataclass(frozen=True)
class Normal(_Known):
    """Normal distribution.

    Parameters
    ----------
    mean : float
        Mean.
    standard_deviation : float
        Standard deviation.
    unit : str
        Unit of both; the canonical one where it is empty.

    Raises
    ------
    RangeError
        If the standard deviation is not positive.

    Examples
    --------
    >>> round(float(Normal(5.3, 0.4).ppf(0.975)), 2)
    6.08
    """

    mean: float
    standard_deviation: float
    unit: str = ""

    def __post_init__(self) -> None:
        _finite(self, "mean", "standard_deviation")
        if not self.standard_deviation > 0.0:
            raise RangeError(f"standard_deviation = {self.standard_deviation} must be positive")

    def frozen(self) -> Distribution:
        """Return it as scipy knows it."""
        from scipy.stats import norm

        return norm(self.mean, self.standard_deviation)  # type: ignore[no-any-return]


@dataclass(frozen=True)
class LogNormal(_Known):
    """Normal distribution of the logarithm: positive, with a long upper tail.

    Parameters
    ----------
    median : float
        Median.
    geometric_standard_deviation : float
        Two of three values lie within the median divided and multiplied by it [1].
    unit : str
        Unit of the median; the canonical one where it is empty.

    Raises
    ------
    RangeError
        If the median is not positive or the other not above 1.

    Examples
    --------
    >>> LogNormal(20.0, 1.3).ppf(0.5).round(9)
    np.float64(20.0)
    """

    median: float
    geometric_standard_deviation: float
    unit: str = ""

    def __post_init__(self) -> None:
        _finite(self, "median", "geometric_standard_deviation")
        if not self.median > 0.0:
            raise RangeError(f"median = {self.median} must be positive")
        if not self.geometric_standard_deviation > 1.0:
            raise RangeError(
                f"geometric_standard_deviation = {self.geometric_standard_deviation} must be above 1"
            )

    def frozen(self) -> Distribution:
        """Return it as scipy knows it."""
        from scipy.stats import lognorm

        return lognorm(math.log(self.geometric_standard_deviation), scale=self.median)  # type: ignore[no-any-return]


@dataclass(frozen=True)
class Uniform(_Known):
    """Every value between two bounds alike.

    Parameters
    ----------
    low, high : float
        Bounds.
    unit : str
        Unit of both; the canonical one where it is empty.

    Raises
    ------
    RangeError
        If `low` is not below `high`.

    Examples
    --------
    >>> float(Uniform(2.0, 4.0).ppf(0.25))
    2.5
    """

    low: float
    high: float
    unit: str = ""

    def __post_init__(self) -> None:
        _finite(self, "low", "high")
        if not self.low < self.high:
            raise RangeError(f"low = {self.low} must be below high = {self.high}")

    def frozen(self) -> Distribution:
        """Return it as scipy knows it."""
        from scipy.stats import uniform

        return uniform(self.low, self.high - self.low)  # type: ignore[no-any-return]


@dataclass(frozen=True)
class Triangular(_Known):
    """Between two bounds, most often near one value.

    Parameters
    ----------
    low, mode, high : float
        Bounds and the most frequent value.
    unit : str
        Unit of all; the canonical one where it is empty.

    Raises
    ------
    RangeError
        If they are not in order.

    Examples
    --------
    >>> float(Triangular(0.0, 1.0, 2.0).ppf(0.5))
    1.0
    """

    low: float
    mode: float
    high: float
    unit: str = ""

    def __post_init__(self) -> None:
        _finite(self, "low", "mode", "high")
        if not (self.low <= self.mode <= self.high and self.low < self.high):
            raise RangeError(f"low, mode, high = {self.low}, {self.mode}, {self.high} must be in order")

    def frozen(self) -> Distribution:
        """Return it as scipy knows it."""
        from scipy.stats import triang

        width = self.high - self.low
        return triang((self.mode - self.low) / width, self.low, width)  # type: ignore[no-any-return]


@dataclass(frozen=True)
class Choice:
    """One of some numbers.

    Parameters
    ----------
    values : sequence of float
        The numbers.
    weights : sequence of float, optional
        How often each, relative to the others; all alike where not given.
    unit : str
        Unit of the numbers; the canonical one where it is empty.

    Raises
    ------
    RangeError
        If there is no number, or the weights do not fit.

    Examples
    --------
    >>> Choice([1.0, 2.0], weights=[1, 3]).ppf(np.array([0.2, 0.3])).tolist()
    [1.0, 2.0]
    """

    values: Sequence[float]
    weights: Sequence[float] | None = None
    unit: str = ""

    def __post_init__(self) -> None:
        values = tuple(float(v) for v in self.values)
        weights = (1.0,) * len(values) if self.weights is None else tuple(float(w) for w in self.weights)
        if not values or not all(map(math.isfinite, values)):
            raise RangeError("Choice needs at least one finite number")
        if len(weights) != len(values) or not all(w >= 0.0 for w in weights) or not sum(weights) > 0.0:
            raise RangeError("Choice needs a weight for every number, none negative, not all zero")
        object.__setattr__(self, "values", values)
        object.__setattr__(self, "weights", weights)

    def ppf(self, probability: Any, /) -> Any:
        """Return the number of a cumulative probability.

        Parameters
        ----------
        probability : float or array
            Between 0 and 1.

        Returns
        -------
        array
            Numbers, in the order given.
        """
        steps = np.cumsum(np.array(self.weights)) / np.sum(np.array(self.weights))
        index = np.searchsorted(steps, np.asarray(probability), side="right")
        return np.asarray(self.values)[np.minimum(index, len(steps) - 1)]

    def cdf(self, value: Any, /) -> Any:
        """Return the probability of the numbers up to a value.

        Parameters
        ----------
        value : float or array
            In the unit of the numbers.

        Returns
        -------
        array
            Between 0 and 1.
        """
        weights = np.array(self.weights) / np.sum(np.array(self.weights))
        upto = np.asarray(self.values) <= np.asarray(value, dtype=float)[..., None]
        return np.where(upto, weights, 0.0).sum(axis=-1)


@dataclass(frozen=True)
class Bounded:
    """A distribution within the possible range of its quantity, in the canonical unit.

    Parameters
    ----------
    name : str
        Name of the input.
    distribution : Distribution
        What is believed.
    quantity : Quantity or None
        Quantity of that name; None where there is none.
    unit : str
        Unit of the values.
    first, last : float
        Cumulative probability of the possible range's ends.
    """

    name: str
    distribution: Distribution
    quantity: Quantity | None
    unit: str
    first: float = 0.0
    last: float = 1.0

    def values(self, probability: Array) -> Array:
        """Return values of cumulative probabilities.

        Parameters
        ----------
        probability : array
            Between 0 and 1.

        Returns
        -------
        array
            In the canonical unit.
        """
        share = self.first + (self.last - self.first) * np.asarray(probability, dtype=float)
        # The very ends of an unbounded distribution are infinite.
        inside = np.clip(share, np.nextafter(0.0, 1.0), np.nextafter(1.0, 0.0))
        found = np.asarray(self.distribution.ppf(inside), dtype=float)
        given = str(getattr(self.distribution, "unit", ""))
        if self.quantity is not None:
            if given and given != self.unit:
                found = np.asarray(self.quantity.from_unit(found, given))
            low, high = self.quantity.possible
            wrong = ~((found >= low) & (found <= high))
            # Rounding at the ends of the range is no fault of the caller.
            found = np.where(np.abs(found - low) <= 1e-12 * abs(low), low, found)
            found = np.where(np.abs(found - high) <= 1e-12 * abs(high), high, found)
            wrong = ~((found >= low) & (found <= high))
            if wrong.any():
                raise self.quantity.range_error(float(found[wrong].flat[0]))
        return found

    @property
    def left_out(self) -> float:
        """Probability of values that are not possible: left out, the rest taken in their place."""
        return 1.0 - (self.last - self.first)


def bounded(name: str, distribution: Any) -> Bounded:
    """Return a distribution within the possible range of the quantity of this name.

    Parameters
    ----------
    name : str
        Name of the input; where it is a quantity, its unit and possible range hold.
    distribution : Distribution
        One of this module or a frozen one of ``scipy.stats``.

    Returns
    -------
    Bounded
        Ready to be drawn from.

    Raises
    ------
    TypeError
        If it is no distribution.
    RangeError
        If no more than half of it is possible.

    Examples
    --------
    >>> round(bounded("fio2", Normal(0.98, 0.02)).left_out, 3)
    0.159
    """
    if not hasattr(distribution, "ppf"):
        raise TypeError(
            f"{name}: give a distribution, such as scenarios.Normal(5.3, 0.4), or one of scipy.stats;"
            f" got {type(distribution).__name__}"
        )
    one = QUANTITIES.get(name)
    given = str(getattr(distribution, "unit", ""))
    if one is None:
        return Bounded(name, distribution, None, given or "1")
    if isinstance(distribution, Choice):
        return Bounded(name, distribution, one, one.unit)
    try:
        low, high = (_in_unit(one, v, given) for v in one.possible)
    except UnitError as error:
        raise UnitError(f"{name}: {error}") from None
    first, last = float(distribution.cdf(np.nextafter(low, -np.inf))), float(distribution.cdf(high))
    if not last - first > 0.5:
        raise RangeError(
            f"{name}: only {last - first:.2g} of the distribution lies within the possible range "
            f"{one.possible[0]:g} to {one.possible[1]:g} {one.unit}"
        )
    return Bounded(name, distribution, one, one.unit, first, last)


def _in_unit(one: Quantity, value: float, unit: str) -> float:
    """Return a value of the canonical unit in another."""
    if not unit or unit == one.unit:
        return value
    # Units of a quantity are related by a straight line.
    zero, step = (float(one.from_unit(v, unit)) for v in (0.0, 1.0))
    return (value - zero) / (step - zero)


def all_bounded(distributions: Mapping[str, Any]) -> list[Bounded]:
    """Return the distributions of several inputs.

    Parameters
    ----------
    distributions : mapping
        Name of the input to its distribution.

    Returns
    -------
    list of Bounded
        In order.

    Raises
    ------
    RangeError
        If there is none.

    Examples
    --------
    >>> [b.unit for b in all_bounded({"fio2": Uniform(0.3, 0.4)})]
    ['1']
    """
    if not distributions:
        raise RangeError("name at least one input with its distribution")
    return [bounded(str(name), one) for name, one in distributions.items()]
