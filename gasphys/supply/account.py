"""The account of gas along an exposure: plain arrays, scenarios by row, pieces by column."""

from __future__ import annotations

from dataclasses import dataclass, fields, replace
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gasphys.ascent import Plan
from gasphys.constants import ATMOSPHERE, GAS_CONSTANT, ZERO_CELSIUS
from gasphys.errors import ExposureError
from gasphys.exposure import Exposure
from gasphys.gas import FORMULAS, Gas
from gasphys.real_gas import density
from gasphys.supply.bank import Demand, unknown_rate
from gasphys.supply.equations import loop_diluent, open_circuit_use

__all__ = ["Account", "free_liters_per_mole", "of_exposure", "open_account", "piece_amounts"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]
#: Scenarios and pieces, picked one by one.
Places = tuple[NDArray[np.int64], NDArray[np.int64]]

#: Nodes and weights of a quadrature over a piece: the density along a ramp is smooth.
_NODES, _WEIGHTS = (
    0.5 * (np.polynomial.legendre.leggauss(4)[0] + 1.0),
    0.5 * np.polynomial.legendre.leggauss(4)[1],
)
#: More mixtures than this come from a scenario of mixtures, which no list of cylinders can follow.
_MOST_GASES = 64
#: Moles in a liter STPD.
MOL_STPD = float(ATMOSPHERE) / (float(GAS_CONSTANT) * float(ZERO_CELSIUS))
#: Temperature at which free gas is counted [degC].
FREE_TEMPERATURE = 20.0

_use = open_circuit_use.pick(model="virial").raw  # type: ignore[attr-defined]
_diluent = loop_diluent.raw


def free_liters_per_mole(gas: Gas) -> float:
    """Return the volume of a mole at 101.325 kPa and 20 degC.

    Parameters
    ----------
    gas : Gas
        The gas.

    Returns
    -------
    float
        Volume [L/mol].

    Examples
    --------
    >>> round(free_liters_per_mole(Gas.parse("air")), 2)
    24.05
    """
    return float(gas.molar_mass / density(float(ATMOSPHERE), gas, FREE_TEMPERATURE))


@dataclass(frozen=True)
class _Columns:
    """What the account needs of pieces, ``(scenario, piece)``; mole fractions ``(7, scenario, piece)``."""

    minutes: Array
    start: Array
    end: Array
    volume: Array
    temperature: Array
    vapor: Array
    uptake: Array
    fractions: Array

    def breathed(self, share: Any, fractions: Array | None = None) -> Array:
        """Moles taken from the start of each piece to a share of it, were all of it open circuit."""
        mix = self.fractions if fractions is None else fractions
        total: Any = 0.0
        for node, weight in zip(_NODES, _WEIGHTS, strict=True):
            pressure = self.start + (self.end - self.start) * share * node
            total = total + weight * _use(self.volume, pressure, *mix, self.temperature, self.vapor)
        return np.asarray(total * self.minutes * share)

    def wide(self) -> _Columns:
        """Return the columns with an axis more, for several shares a piece."""
        return _Columns(**{f.name: getattr(self, f.name)[..., None] for f in fields(self)})

    def at(self, where: Places) -> _Columns:
        """Return pieces picked one by one, ``(place,)``."""
        return _Columns(**{f.name: getattr(self, f.name)[..., *where] for f in fields(self)})


@dataclass(frozen=True)
class Account:
    """Gas used along an exposure.

    Parameters
    ----------
    exposure : Exposure
        The exposure.
    gases : tuple of Gas
        What is taken from a supply, in order of first use; on a loop oxygen and diluent.
    columns : _Columns
        Pieces as plain arrays.
    open_on, diluent_of : array of bool
        ``(gas, scenario, piece)``: breathed on open circuit; fills the loop.
    loop : array of bool
        ``(scenario, piece)``.
    oxygen : int
        Index of the gas that feeds loops; -1 without a loop.
    demand : Demand
        Who breathes how much.
    """

    exposure: Exposure
    gases: tuple[Gas, ...]
    columns: _Columns
    open_on: Mask
    diluent_of: Mask
    loop: Mask
    oxygen: int
    demand: Demand

    @property
    def times(self) -> Array:
        """Boundaries of the pieces, ``(scenario, piece + 1)`` [min]."""
        whole = np.cumsum(self.columns.minutes, axis=-1)
        return np.concatenate([np.zeros((len(whole), 1)), whole], axis=-1)

    def partial(self, gas: int, share: Any = 1.0, where: Places | None = None) -> Array:
        """Return moles of a gas taken from the start of each piece to a share of it.

        Parameters
        ----------
        gas : int
            Index of the gas.
        share : float or array
            Share of the piece [1]; with one axis more than pieces for several.
        where : tuple of two arrays of int, optional
            Scenarios and pieces picked one by one, instead of all.

        Returns
        -------
        array
            Amount [mol].
        """
        columns, on, fills, loop = self.columns, self.open_on[gas], self.diluent_of[gas], self.loop
        if where is not None:
            columns, on, fills, loop = columns.at(where), on[where], fills[where], loop[where]
        elif np.ndim(share) > columns.minutes.ndim:
            columns, on, fills, loop = columns.wide(), on[..., None], fills[..., None], loop[..., None]
        used = np.zeros(np.broadcast_shapes(np.shape(share), columns.minutes.shape))
        if on.any():
            used = used + np.where(on, columns.breathed(share), 0.0)
        if fills.any():
            reached = columns.start + (columns.end - columns.start) * share
            used = used + np.where(fills, _filled(self.demand, columns.start, reached), 0.0)
        if gas == self.oxygen:
            used = used + np.where(loop, columns.uptake * columns.minutes * share * MOL_STPD, 0.0)
        return np.asarray(used * float(self.demand.persons))

    @cached_property
    def used(self) -> Array:
        """Moles used since the start at every boundary, ``(gas, scenario, piece + 1)``."""
        each = np.stack([self.partial(g) for g in range(len(self.gases))])
        return np.concatenate([np.zeros((*each.shape[:-1], 1)), np.cumsum(each, axis=-1)], axis=-1)


def of_exposure(what: Exposure | Plan) -> Exposure:
    """Return the exposure of a plan, or the exposure itself.

    Parameters
    ----------
    what : Exposure or Plan
        Either.

    Returns
    -------
    Exposure
        With at least one piece.

    Raises
    ------
    ExposureError
        If it has none.

    Examples
    --------
    >>> of_exposure(Exposure.start("air").stay(1)).duration
    1.0
    """
    exposure = what.exposure if isinstance(what, Plan) else what
    if not isinstance(exposure, Exposure):
        raise TypeError(f"an Exposure or a Plan is needed, not {type(what).__name__}")
    if not exposure.part:
        raise ExposureError("the exposure has no piece yet")
    return exposure


def open_account(exposure: Exposure, demand: Demand, *, as_if_open: bool = False) -> Account:
    """Lay out who takes what from which supply.

    Parameters
    ----------
    exposure : Exposure
        Pieces.
    demand : Demand
        Who breathes how much.
    as_if_open : bool
        Take every piece as open circuit, and leave what is not known NaN.

    Returns
    -------
    Account
        Ready to be added up.

    Raises
    ------
    ExposureError
        If a piece has no demand, or a scenario has more mixtures than a list of cylinders could follow.

    Examples
    --------
    >>> account = open_account(Exposure.start("air").stay(10), Demand(surface_rate=20.0))
    >>> round(float(account.used[0, 0, -1]), 2)
    8.32
    """
    columns, loop = _columns(exposure, demand, as_if_open)
    mix, real = columns.fractions, columns.minutes > 0.0
    gases, which = _gases(mix, real)
    oxygen = -1
    if (loop & real).any():
        pure = Gas(oxygen=1.0)
        if pure not in gases:
            gases = (*gases, pure)
        oxygen = gases.index(pure)
    mine = np.stack([which == g for g in range(len(gases))])
    return Account(exposure, gases, columns, mine & ~loop, mine & loop, loop & real, oxygen, demand)


def _columns(exposure: Exposure, demand: Demand, as_if_open: bool) -> tuple[_Columns, Mask]:
    """Return what the account needs of pieces, and which of them are on a loop."""
    n = len(exposure.part)
    rows = int(np.prod([len(exposure.coords[d]) for d in exposure.dims], dtype=int))
    shape = (*(len(exposure.coords[d]) for d in exposure.dims), n)

    def flat(values: Any) -> Array:
        return np.broadcast_to(np.asarray(values, dtype=float), shape).reshape(rows, n)

    c = exposure.columns
    minutes = flat(c["segment_duration"])
    setpoint = np.full_like(minutes, np.nan) if as_if_open else flat(c["setpoint"])
    volume, temperature, vapor = (flat(v) for v in demand.rates(exposure))
    uptake = flat(demand.uptake(exposure))
    mix = np.stack(
        [flat(exposure.fractions[f]) if f in exposure.fractions else np.zeros((rows, n)) for f in FORMULAS]
    )
    real, loop = minutes > 0.0, ~np.isnan(setpoint)
    for missing, what in (
        (real & ~loop & np.isnan(volume), "surface_rate= or ventilation_btps="),
        (real & loop & np.isnan(uptake), "o2_uptake_stpd="),
    ):
        if missing.any() and not as_if_open:
            raise unknown_rate(exposure, missing, what)
    columns = _Columns(
        minutes, flat(c["start_pressure"]), flat(c["end_pressure"]), volume, temperature, vapor, uptake, mix
    )
    return columns, loop


def piece_amounts(exposure: Exposure, demand: Demand) -> tuple[Array, Array]:
    """Return moles of gas used in every piece, of however many mixtures.

    Parameters
    ----------
    exposure : Exposure
        Pieces.
    demand : Demand
        Who breathes how much.

    Returns
    -------
    tuple of array
        ``(scenario, piece)`` [mol]: gas of the piece, on a loop its diluent; oxygen of loops.

    Raises
    ------
    ExposureError
        If a piece has no demand.

    Examples
    --------
    >>> piece_amounts(Exposure.start("air").stay(10), Demand(surface_rate=20.0))[0].round(2)
    array([[8.32]])
    """
    columns, loop = _columns(exposure, demand, False)
    real = columns.minutes > 0.0
    used = np.where(real, np.where(loop, 0.0, columns.breathed(1.0)), 0.0)
    oxygen = np.zeros_like(used)
    if loop.any():
        used = np.where(real & loop, _filled(demand, columns.start, columns.end), used)
        oxygen = np.where(real & loop, columns.uptake * columns.minutes * MOL_STPD, 0.0)
    return used * float(demand.persons), oxygen * float(demand.persons)


def _filled(demand: Demand, start: Array, end: Array) -> Array:
    """Moles of diluent that fill a loop from one pressure to another; none on the way up."""
    kelvin = demand.gas_temperature + float(ZERO_CELSIUS)
    free = _diluent(demand.loop_volume, start, end)
    return np.asarray(free * float(ATMOSPHERE) / (float(GAS_CONSTANT) * kelvin))


def _gases(mix: Array, real: Mask) -> tuple[tuple[Gas, ...], NDArray[np.int64]]:
    """Name the mixtures in order of first use, and which is whose; -1 for a piece of no duration."""
    table = np.round(np.moveaxis(mix, 0, -1), 9)[real]
    if not len(table):
        return (), np.full(real.shape, -1)
    # By piece first, so that the order of use is that of time.
    order = np.argsort(np.nonzero(real)[1], kind="stable")
    found, first, back = np.unique(table[order], axis=0, return_index=True, return_inverse=True)
    if len(found) > _MOST_GASES:
        raise ExposureError(
            f"{len(found)} different mixtures are breathed, more than {_MOST_GASES}: a supply is a list of "
            "gases; account for scenarios of mixtures one by one"
        )
    rank = np.empty(len(found), dtype=np.int64)
    rank[np.argsort(first)] = np.arange(len(found))
    names = list(FORMULAS.values())
    gases: list[Any] = [None] * len(found)
    for k, row in enumerate(found):
        parts = {n: float(v) for n, v in zip(names, row, strict=True) if n != "nitrogen"}
        gases[rank[k]] = Gas(**parts)
    ordered = np.empty(len(table), dtype=np.int64)
    ordered[order] = rank[back.ravel()]
    which = np.full(real.shape, -1)
    which[real] = ordered
    return tuple(gases), which


def without_own_rates(exposure: Exposure) -> Exposure:
    """Return the exposure without the ventilation it carries: another demand takes its place.

    Parameters
    ----------
    exposure : Exposure
        The exposure.

    Returns
    -------
    Exposure
        Otherwise the same.

    Examples
    --------
    >>> one = without_own_rates(Exposure.start("air", ventilation_btps=20.0).stay(1))
    >>> bool(np.isnan(one.columns["ventilation_btps"]).all())
    True
    """
    blank = np.full_like(exposure.columns["ventilation_btps"], np.nan)
    return replace(exposure, columns={**exposure.columns, "ventilation_btps": blank})
