"""What is kept back: a share, a pressure, or the way out for so many persons."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gasphys.errors import RangeError, UnitError
from gasphys.quantities import quantity
from gasphys.supply.account import Account, Places, open_account, without_own_rates
from gasphys.supply.bank import Cylinder, Demand, mole_fractions, read, unknown_rate
from gasphys.supply.equations import open_circuit_use

__all__ = ["Reserve"]

Array = NDArray[np.float64]

_use = open_circuit_use.pick(model="virial").raw  # type: ignore[attr-defined]

_UNTIL = ("switch", "surface")


@dataclass(frozen=True)
class Reserve:
    """A rule for the gas kept back; of several parts the one that asks for most holds.

    Parameters
    ----------
    share : float
        Share of what the cylinders of a gas hold at the start [1].
    pressure : float or str
        Pressure kept in every cylinder [kPa absolute].
    persons : float
        How many must be able to breathe the gas on the way out; 0 asks for no way out.
    until : {"switch", "surface"} or float or str
        Where their way ends: at the next switch to another gas, at the end of the exposure, or at an ambient
        pressure [kPa absolute].
    minutes : float or str
        Time they first stay where they are [min].
    demand : Demand, optional
        What each of them breathes then; what the exposure says where not given.

    Raises
    ------
    GasphysError
        If a value is not possible.

    Notes
    -----
    The way out is the one of the exposure itself, from the moment its highest pressure is left for the last
    time, or from the first breath of the gas after that. Before that moment the whole way counts, which is
    more than what a way from a shallower place would need. A gas that is only breathed on the way down, and
    one that is only carried, has no way out here: for those see :func:`gasphys.supply.loss_table`.

    None of these rules is a limit of anybody; the numbers are the caller's.

    Examples
    --------
    >>> print(Reserve(share=0.25, pressure="40 bar"))
    keep 25 % of each gas, or 40 bar absolute in each cylinder, whichever is more
    >>> print(Reserve(persons=2, minutes=2, demand=Demand(surface_rate=30.0)))
    keep enough for 2 persons at 30 L/min each, 2 min where they are and the way to the next switch
    """

    share: float = 0.0
    pressure: Any = 0.0
    persons: float = 0.0
    until: Any = "switch"
    minutes: Any = 0.0
    demand: Demand | None = None

    def __post_init__(self) -> None:
        if not 0.0 <= float(self.share) < 1.0:
            raise RangeError(f"share = {self.share} of a reserve must be at least 0 and below 1")
        if not 0.0 <= float(self.persons) < math.inf:
            raise RangeError(f"persons = {self.persons} of a reserve must not be negative")
        object.__setattr__(self, "pressure", read(self.pressure, "cylinder_pressure"))
        object.__setattr__(self, "minutes", read(self.minutes, "duration"))
        if self.until not in _UNTIL:
            try:
                object.__setattr__(self, "until", read(self.until, "ambient_pressure"))
            except UnitError as error:
                raise UnitError(
                    f"until = {self.until!r}: write 'switch', 'surface' or an ambient pressure ({error})"
                ) from None
        if (
            self.minutes > 0.0 or self.demand is not None or self.until != "switch"
        ) and not self.persons > 0.0:
            raise RangeError("a way out needs persons=: how many breathe the gas on it")

    def __str__(self) -> str:
        parts = []
        if self.share > 0.0:
            parts.append(f"{self.share * 100.0:.4g} % of each gas")
        if self.pressure > 0.0:
            parts.append(f"{self.pressure / 100.0:.4g} bar absolute in each cylinder")
        if self.persons > 0.0:
            parts.append(self._way())
        if not parts:
            return "keep nothing back"
        more = ", whichever is more" if len(parts) > 1 else ""
        return f"keep {', or '.join(parts)}{more}"

    def _way(self) -> str:
        who = f"{self.persons:g} person{'s' if self.persons != 1.0 else ''}"
        rate = ""
        if self.demand is not None:
            for name in ("surface_rate", "ventilation_btps"):
                given = getattr(self.demand, name)
                if isinstance(given, float):
                    rate = f" at {given:g} {quantity(name).unit}{' BTPS' if name[0] == 'v' else ''} each"
        to = {"switch": "the next switch", "surface": "the end"}.get(
            str(self.until), f"{self.until if isinstance(self.until, str) else f'{self.until:.4g} kPa'}"
        )
        wait = f"{self.minutes:g} min where they are and " if self.minutes > 0.0 else ""
        return f"enough for {who}{rate}, {wait}the way to {to}"

    def kept(self, cylinders: tuple[Cylinder, ...], floor: float) -> float:
        """Return what share and pressure ask for of the cylinders of one gas.

        Parameters
        ----------
        cylinders : tuple of Cylinder
            All of one gas.
        floor : float
            What cannot be taken out of them [mol].

        Returns
        -------
        float
            Amount [mol], the floor at least.

        Examples
        --------
        >>> tank = Cylinder("air", 10.0, "200 bar")
        >>> round(Reserve(share=0.5).kept((tank,), 0.0) / tank.amount, 3)
        0.5
        """
        by_share = self.share * sum(one.amount for one in cylinders)
        by_pressure = sum(min(one.content(self.pressure), one.amount) for one in cylinders)
        return float(max(by_share, by_pressure, floor))


@dataclass(frozen=True)
class WayOut:
    """What one gas must still hold for the way out, along an exposure.

    Parameters
    ----------
    account : Account
        As if every piece were breathed on this gas by the persons of the rule.
    fractions : array
        Mole fractions of the gas.
    reached : array
        Moles used at every boundary as if, ``(scenario, piece + 1)``.
    begin, end : array
        The same at the beginning and the end of the way, ``(scenario,)``.
    waiting : array
        Moles for the minutes before leaving from the beginning of the way, ``(scenario,)``.
    minutes : float
        Those minutes.
    """

    account: Account
    fractions: Array
    reached: Array
    begin: Array
    end: Array
    waiting: Array
    minutes: float

    def need(self, share: Any, where: Places | None = None) -> Array:
        """Return what the way out needs at a share of each piece.

        Parameters
        ----------
        share : float or array
            Share of the piece; with one axis more than pieces for several.
        where : tuple of two arrays of int, optional
            Scenarios and pieces picked one by one, instead of all.

        Returns
        -------
        array
            Amount [mol].
        """
        c = self.account.columns
        before, begin, end, waiting = (
            self.reached[:, :-1],
            self.begin[:, None],
            self.end[:, None],
            self.waiting[:, None],
        )
        mix = self.fractions[:, None, None]
        if where is not None:
            c, before, mix = c.at(where), before[where], self.fractions[:, None]
            begin, end, waiting = (v[where[0]] for v in (self.begin, self.end, self.waiting))
        elif np.ndim(share) > c.minutes.ndim:
            c, before = c.wide(), before[..., None]
            begin, end, waiting, mix = begin[..., None], end[..., None], waiting[..., None], mix[..., None]
        persons = float(self.account.demand.persons)
        now = before + persons * c.breathed(share, mix)
        way = end - np.maximum(now, begin)
        # Who is on the way already waits where he is: the first minutes at the pressure of the moment.
        here = c.start + (c.end - c.start) * share
        wait = self.minutes * persons * _per_minute(c, here, mix)
        wait = np.where(now <= begin, waiting, wait)
        return np.asarray(np.where(way > 0.0, way + wait, 0.0))


def _per_minute(columns: Any, pressure: Array, mix: Array) -> Array:
    return np.asarray(_use(columns.volume, pressure, *mix, columns.temperature, columns.vapor))


def way_out(rule: Reserve, account: Account, gas: int) -> WayOut | None:
    """Find the way out on one gas.

    Parameters
    ----------
    rule : Reserve
        The rule.
    account : Account
        Gas used along the exposure.
    gas : int
        Index of the gas.

    Returns
    -------
    WayOut or None
        None where the gas is on no way out in any scenario.

    Raises
    ------
    ExposureError
        If nothing says what the persons breathe then.

    Examples
    --------
    >>> from gasphys.exposure import Exposure
    >>> dive = Exposure.start("air").travel(depth=20, minutes=1).stay(9).travel(depth=0, minutes=2)
    >>> rule = Reserve(persons=2, demand=Demand(surface_rate=30.0))
    >>> found = way_out(rule, open_account(dive, Demand(surface_rate=20.0)), 0)
    >>> round(float(found.need(0.0)[0, 0]), 2)  # 2 x 30 L/min x 2 min at 2 atm on the mean
    9.92
    """
    if not rule.persons > 0.0:
        return None
    exposure = account.exposure
    demand = account.demand
    if rule.demand is not None:
        exposure, demand = without_own_rates(exposure), rule.demand
    as_if = open_account(exposure, replace(demand, persons=rule.persons), as_if_open=True)
    c = as_if.columns
    n = c.minutes.shape[-1]
    real = c.minutes > 0.0
    # Pressure at the boundaries; the last time the highest one is left.
    edges = np.concatenate(
        [c.start[:, :1], np.maximum(c.end[:, :-1], c.start[:, 1:]), c.end[:, -1:]], axis=-1
    )
    highest = edges.max(axis=-1, keepdims=True)
    left = n - np.argmax((edges >= highest * (1.0 - 1e-12))[:, ::-1], axis=-1)
    place = np.arange(n)
    on = account.open_on[gas] & real & (place >= left[:, None])
    there = on.any(axis=-1)
    if not there.any():
        return None
    first = np.where(there, np.argmax(on, axis=-1), n)
    other = real & ~account.open_on[gas] & (place > first[:, None])
    last = np.where(other.any(axis=-1), np.argmax(other, axis=-1), n)
    rows = np.arange(len(first))
    mix = np.array(mole_fractions(account.gases[gas]))
    each = float(as_if.demand.persons) * c.breathed(1.0, mix[:, None, None])
    needed = np.isnan(each) & real & (place >= first[:, None])
    if needed.any():
        raise unknown_rate(exposure, needed, "surface_rate= or ventilation_btps= of the reserve")
    reached = np.concatenate([np.zeros((len(each), 1)), np.cumsum(np.nan_to_num(each), axis=-1)], axis=-1)
    end = reached[rows, last if rule.until == "switch" else np.full_like(last, n)]
    if isinstance(rule.until, float):
        end = _where_pressure_is_met(c, reached, each, first, rule.until)
    begin = reached[rows, np.minimum(first, n)]
    end = np.where(there, np.maximum(end, begin), begin)
    at_first = c.at((rows, np.minimum(first, n - 1)))
    waiting = rule.minutes * float(as_if.demand.persons) * _per_minute(at_first, at_first.start, mix[:, None])
    return WayOut(as_if, mix, reached, begin, end, np.where(there, waiting, 0.0), rule.minutes)


def _where_pressure_is_met(
    c: Any, reached: Array, each: Array, first: NDArray[np.int64], pressure: float
) -> Array:
    """Moles reached, as if, where the ambient pressure first falls to a value after a boundary."""
    n = c.minutes.shape[-1]
    after = np.arange(n) >= first[:, None]
    met = after & (c.minutes > 0.0) & (np.minimum(c.start, c.end) <= pressure)
    piece = np.where(met.any(axis=-1), np.argmax(met, axis=-1), n - 1)
    rows = np.arange(len(piece))
    at = c.at((rows, piece))
    span = np.where(at.end < at.start, at.start - at.end, 1.0)
    share = np.clip(np.where(at.start > pressure, (at.start - pressure) / span, 0.0), 0.0, 1.0)
    whole = each[rows, piece]
    # Exact to the quadrature: the part of the piece up to the share.
    part = at.breathed(share)
    full = at.breathed(1.0)
    scaled = np.where(full > 0.0, whole * part / np.where(full > 0.0, full, 1.0), 0.0)
    return np.asarray(reached[rows, piece] + scaled)
