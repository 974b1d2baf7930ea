"""What strategies are compared by."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.constants import ZERO_CELSIUS
from gasphys.doses import MEASURES, oxygen
from gasphys.errors import RangeError, unknown_name
from gasphys.exposure import Exposure
from gasphys.gas import FORMULAS
from gasphys.quantities import quantity
from gasphys.reviews import PERSON_TRACES, TRACES, highest
from gasphys.strategies.dives import Planned
from gasphys.supply import Cylinder, Demand, Reserve, stock
from gasphys.supply.account import FREE_TEMPERATURE, MOL_STPD, piece_amounts

__all__ = [
    "Objective",
    "cost",
    "gas_left",
    "gas_volume",
    "lost_gas",
    "lost_gas_left",
    "objective",
    "overstay_chance",
    "overstay_margin",
]

Array = NDArray[np.float64]
Of = Callable[..., Any]


@dataclass(frozen=True)
class Objective:
    """One thing strategies are compared by.

    Parameters
    ----------
    name : str
        Name of the variable.
    of : callable
        What was built of candidates to a number each.
    larger : bool
        Whether more is better.
    unit : str
        Unit of the numbers.
    meaning : str
        In a line.
    needs_limits : bool
        Whether it is also given a function that tells which candidates keep the hard limits.

    Examples
    --------
    >>> Objective("depth", lambda planned: planned.candidates.depth, larger=True).larger
    True
    """

    name: str
    of: Of
    larger: bool = False
    unit: str = "1"
    meaning: str = ""
    needs_limits: bool = False


def _exposure(built: Any) -> Exposure:
    return built if isinstance(built, Exposure) else built.exposure


def _rows(exposure: Exposure, values: Any) -> Array:
    shape = tuple(len(exposure.coords[d]) for d in exposure.dims)
    return np.array(np.broadcast_to(np.asarray(values, dtype=float), shape))


def _ascent_time(built: Any) -> Array:
    return _rows(built.exposure, built.plan.ascent_time)


def _total_time(built: Any) -> Array:
    exposure = _exposure(built)
    return _rows(exposure, exposure.columns["segment_duration"].sum(axis=-1))


def _helium(built: Any) -> Array:
    exposure = _exposure(built)
    return _rows(exposure, np.max(exposure.fractions.get("He", np.zeros(1)), axis=-1))


#: Objectives that need no numbers of the caller's.
PLAIN = {
    "ascent_time": Objective("ascent_time", _ascent_time, unit="min", meaning="from leaving the bottom"),
    "total_time": Objective("total_time", _total_time, unit="min", meaning="from surface to surface"),
    "helium_fraction": Objective("helium_fraction", _helium, meaning="highest helium fraction breathed"),
}


def objective(given: Any) -> Objective:
    """Return an objective by its name.

    Parameters
    ----------
    given : str or Objective
        A name of this module's, of a dose measure, or of a quantity reviews judge: its highest value.

    Returns
    -------
    Objective
        Ready to be asked.

    Raises
    ------
    UnknownNameError
        If there is none of that name.

    Examples
    --------
    >>> objective("gas_density").unit
    'g/L'
    """
    if isinstance(given, Objective):
        return given
    name = str(given)
    if name in PLAIN:
        return PLAIN[name]
    if name in TRACES or name in PERSON_TRACES:
        one = quantity(name)
        return Objective(
            name,
            lambda built: highest(_exposure(built), name),
            unit=one.unit,
            meaning=f"highest {one.long_name}",
        )
    if name in MEASURES:
        one = quantity(MEASURES[name].quantity)

        def dose(built: Any) -> Array:
            exposure = _exposure(built)
            return _rows(exposure, oxygen(exposure, [name]).dose.isel(measure=0).values)

        return Objective(name, dose, unit=one.unit, meaning=one.long_name)
    raise unknown_name("objective", name, [*PLAIN, *TRACES, *MEASURES])


#: Free gas is counted at 101.325 kPa and 20 degC: an ideal mole, within 0.1 % of every breathing gas there.
_LITERS_PER_MOLE = (ZERO_CELSIUS + FREE_TEMPERATURE) / ZERO_CELSIUS / MOL_STPD


def _free_liters(exposure: Exposure, demand: Demand) -> tuple[Array, Array]:
    """Free gas of every piece, and oxygen of loops, ``(..., piece)`` [L]."""
    shape = (*(len(exposure.coords[d]) for d in exposure.dims), len(exposure.part))
    gas, oxygen = (v.reshape(shape) * _LITERS_PER_MOLE for v in piece_amounts(exposure, demand))
    return gas, oxygen


def gas_volume(demand: Demand) -> Objective:
    """Return the objective of all gas breathed, as free gas.

    Parameters
    ----------
    demand : Demand
        How much is breathed.

    Returns
    -------
    Objective
        ``gas_volume`` [L at 101.325 kPa and 20 degC].

    Examples
    --------
    >>> gas_volume(Demand(surface_rate=20.0)).unit
    'L'
    """

    def of(built: Any) -> Array:
        exposure = _exposure(built)
        gas, oxygen = _free_liters(exposure, demand)
        return _rows(exposure, (gas + oxygen).sum(axis=-1))

    return Objective("gas_volume", of, unit="L", meaning="free gas breathed, 101.325 kPa and 20 degC")


def cost(prices: Mapping[str, float], demand: Demand) -> Objective:
    """Return the objective of what the gas breathed costs, by the caller's prices.

    Parameters
    ----------
    prices : mapping
        Price of a free liter of each pure gas: ``{"helium": 0.04, "oxygen": 0.01}``; what is not named costs
        nothing.
    demand : Demand
        How much is breathed.

    Returns
    -------
    Objective
        ``cost`` in the currency of the prices; filling and what is left over are not counted.

    Raises
    ------
    UnknownNameError
        If a price is of no gas.

    Examples
    --------
    >>> cost({"helium": 0.04}, Demand(surface_rate=20.0)).name
    'cost'
    """
    words = {word: formula for formula, word in FORMULAS.items()}
    for name, price in prices.items():
        if name not in words:
            raise unknown_name("gas with a price", name, words)
        if not price >= 0.0:
            raise RangeError(f"price of {name} = {price} must not be negative")

    def of(built: Any) -> Array:
        exposure = _exposure(built)
        gas, oxygen = _free_liters(exposure, demand)
        paid = prices.get("oxygen", 0.0) * oxygen.sum(axis=-1)
        for name, price in prices.items():
            share = exposure.fractions.get(words[name])
            if share is not None:
                paid = paid + price * (gas * share).sum(axis=-1)
        return _rows(exposure, paid)

    return Objective("cost", of, meaning="price of the gas breathed, in the currency of the prices")


def lost_gas() -> Objective:
    """Return the objective of how much longer the ascent gets when the worst one gas is lost.

    Returns
    -------
    Objective
        ``lost_gas_minutes`` [min]; NaN where an ascent without it cannot be planned.

    Examples
    --------
    >>> lost_gas().name
    'lost_gas_minutes'
    """

    def of(built: Planned) -> Array:
        own = _ascent_time(built)
        lost = [_rows(built.exposure, p.ascent_time) - own for p in built.without().values()]
        return np.max(lost, axis=0) if lost else np.zeros_like(own)

    meaning = "minutes longer when one gas of the way up is lost at leaving the bottom, the worst"
    return Objective("lost_gas_minutes", of, unit="min", meaning=meaning)


def gas_left(
    cylinders: Sequence[Cylinder], demand: Demand, reserve: Reserve | None = None
) -> Callable[[Any], Array]:
    """Return a hard limit: what is left of every gas, above its reserve.

    Parameters
    ----------
    cylinders : sequence of Cylinder
        What there is.
    demand : Demand
        How much is breathed.
    reserve : Reserve, optional
        What is kept back.

    Returns
    -------
    callable
        Smallest margin of all gases [L at 101.325 kPa and 20 degC], negative below the reserve.

    Examples
    --------
    >>> callable(gas_left([Cylinder("air", 12.0, "200 bar")], Demand(surface_rate=20.0)))
    True
    """

    def of(built: Any) -> Array:
        exposure = _exposure(built)
        margin = stock(exposure, cylinders, reserve, demand).margin_to_reserve
        least = margin.min("supply_gas", skipna=False)
        return _rows(exposure, least.values)

    return of


def lost_gas_left(cylinders: Sequence[Cylinder], demand: Demand) -> Objective:
    """Return the objective of the least gas left at the surface when the worst one gas is lost.

    Parameters
    ----------
    cylinders : sequence of Cylinder
        What there is.
    demand : Demand
        How much is breathed.

    Returns
    -------
    Objective
        ``lost_gas_left`` [L at 101.325 kPa and 20 degC], larger is better; negative: something runs out.

    Examples
    --------
    >>> lost_gas_left([Cylinder("air", 12.0, "200 bar")], Demand(surface_rate=20.0)).larger
    True
    """
    left = gas_left(cylinders, demand)

    def of(built: Planned) -> Array:
        plans = [built.plan, *built.without().values()]
        found = np.min([left(p) for p in plans], axis=0)
        failed = np.any([np.isnan(_rows(p.exposure, p.ascent_time)) for p in plans], axis=0)
        return np.where(failed, np.nan, found)

    meaning = "least of any gas left when one gas of the way up is lost at leaving the bottom"
    return Objective("lost_gas_left", of, larger=True, unit="L", meaning=meaning)


def overstay_margin(most: float = 30.0, resolution: float = 0.25) -> Objective:
    """Return the objective of how long one may overstay at the bottom before the first hard limit is met.

    Parameters
    ----------
    most : float
        Minutes looked at [min].
    resolution : float
        To within [min].

    Returns
    -------
    Objective
        ``overstay_margin`` [min], larger is better: the ascent is planned anew after each overstay, and a
        limit, or a reserve given as :func:`gas_left`, is used up.

    Raises
    ------
    RangeError
        If a number is not positive.

    Notes
    -----
    Found by halving: of limits that are kept again after a longer stay it finds one end, not the first. The
    result is rounded down to what was tried; `most` means: not within that.

    Examples
    --------
    >>> overstay_margin(20.0).unit
    'min'
    """
    if not (0.0 < most < np.inf and 0.0 < resolution < most):
        raise RangeError(f"most = {most} and resolution = {resolution} must be positive, most the larger")

    def of(built: Planned, kept: Callable[[Any], NDArray[np.bool_]]) -> Array:
        now = kept(built)
        low, high = np.zeros(len(now)), np.full(len(now), float(most))
        far = kept(built.longer(high))
        low = np.where(now & far, high, low)
        while np.any(now & ~far) and float((high - low)[now & ~far].max()) > resolution:
            middle = 0.5 * (low + high)
            good = kept(built.longer(middle))
            open_ = now & ~far
            low, high = np.where(open_ & good, middle, low), np.where(open_ & ~good, middle, high)
        return np.where(now, low, 0.0)

    meaning = f"overstay until the first hard limit or reserve is used up, looked for up to {most:g} min"
    return Objective("overstay_margin", of, larger=True, unit="min", meaning=meaning, needs_limits=True)


def overstay_chance(distribution: Any, most: float = 30.0, resolution: float = 0.25) -> Objective:
    """Return the objective of the chance that an overstay uses up the first hard limit or reserve.

    Parameters
    ----------
    distribution : Distribution
        Of the minutes of overstay, the caller's own: one of :mod:`gasphys.scenarios` or of ``scipy.stats``.
    most, resolution : float
        As for :func:`overstay_margin` [min].

    Returns
    -------
    Objective
        ``overstay_chance`` [1].

    Examples
    --------
    >>> from gasphys.scenarios import Triangular
    >>> overstay_chance(Triangular(0.0, 1.0, 8.0)).name
    'overstay_chance'
    """
    margin = overstay_margin(most, resolution)

    def of(built: Planned, kept: Callable[[Any], NDArray[np.bool_]]) -> Array:
        return np.asarray(1.0 - distribution.cdf(margin.of(built, kept)))

    meaning = "chance that an overstay lasts longer than the first hard limit or reserve"
    return Objective("overstay_chance", of, meaning=meaning, needs_limits=True)


def as_array(values: Any, size: int, name: str) -> Array:
    """Return what an objective or limit gave as one number a candidate.

    Parameters
    ----------
    values : array or DataArray
        What it gave.
    size : int
        Number of candidates.
    name : str
        Its name.

    Returns
    -------
    array
        Numbers.

    Raises
    ------
    RangeError
        If there is not one for every candidate.

    Examples
    --------
    >>> as_array(1.0, 2, "cost").tolist()
    [1.0, 1.0]
    """
    plain = np.asarray(values.values if isinstance(values, xr.DataArray) else values, dtype=float)
    if plain.ndim > 1 or (plain.ndim == 1 and len(plain) != size):
        raise RangeError(f"{name} gave numbers of shape {plain.shape} for {size} candidates")
    return np.array(np.broadcast_to(plain, (size,)))
