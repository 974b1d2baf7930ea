"""Gas used and gas left along an exposure."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.ascent import Plan
from gasphys.errors import ExposureError
from gasphys.exposure import Exposure
from gasphys.maths import find_root
from gasphys.quantities import attributes, dataset_attributes
from gasphys.supply.account import (
    FREE_TEMPERATURE,
    Account,
    Places,
    free_liters_per_mole,
    of_exposure,
    open_account,
)
from gasphys.supply.bank import Cylinder, Demand, check_cylinders, read
from gasphys.supply.reserve_rules import Reserve, WayOut, way_out

__all__ = ["consumption", "stock"]

Array = NDArray[np.float64]

#: Places in a piece that are looked at for a crossing, before its root is found.
_STEPS = 8
_ROUNDING = 1e-9
_NOT_COUNTED = (
    "Not counted: leaks, clearing, buoyancy, flushing a loop, a regulator that gives out earlier, and "
    "breathing harder than stated. Dense gas and cold change what a person breathes."
)
_SOURCES = ("virial_reference_equations", "unlike_pairs", "ideal_gas", "gas_volume_states")


def consumption(exposure: Exposure | Plan, demand: Demand | None = None, *, at: Any = None) -> xr.Dataset:
    """Gas used of each supply along an exposure or an ascent.

    Parameters
    ----------
    exposure : Exposure or Plan
        Pressure and breathing gas against time; what it says of ventilation and O2 uptake goes first.
    demand : Demand, optional
        How much is breathed where the exposure does not say it.
    at : array_like, optional
        Times to add to the boundaries [min].

    Returns
    -------
    Dataset
        Along ``supply_gas`` and ``time``: ``amount_used`` [mol] and ``free_gas_used`` [L at 101.325 kPa and
        20 degC]. A loop uses oxygen for its O2 uptake and diluent on the way down.

    Raises
    ------
    ExposureError
        If a piece has no demand.

    Notes
    -----
    Open circuit: volume breathed per minute times the molar density at ambient pressure, real gas, integrated
    along each ramp. See :func:`gasphys.supply.open_circuit_use` for the two ways to count the volume.

    Examples
    --------
    >>> dive = Exposure.start("air").travel(depth=20, minutes=1).stay(9)
    >>> used = consumption(dive, Demand(surface_rate=20.0))
    >>> used.free_gas_used.sel(supply_gas="air").round(0).values.tolist()
    [0.0, 40.0, 575.0]
    """
    whole = _cut_at(of_exposure(exposure), at)
    account = open_account(whole, demand or Demand())
    ds, pick = _frame(account)
    used = account.used
    liters = np.array([free_liters_per_mole(g) for g in account.gases])[:, None, None]
    _put(ds, account, pick, "amount_used", used, attributes("amount", long_name="amount of gas used"))
    free = attributes("free_gas_volume", long_name=free_gas_words("gas used"))
    _put(ds, account, pick, "free_gas_used", used * liters, free)
    ds.attrs = dataset_attributes(
        "gas used along an exposure",
        "supply, virial series",
        history=whole.history,
        references=_SOURCES,
        comment=_NOT_COUNTED,
        demand=demand_words(account.demand, bool(account.loop.any())),
    )
    return ds


def stock(
    exposure: Exposure | Plan,
    cylinders: Sequence[Cylinder],
    reserve: Reserve | None = None,
    demand: Demand | None = None,
    *,
    water_temperature: Any = None,
    at: Any = None,
) -> xr.Dataset:
    """Content and pressure left in each cylinder along an exposure, and what of it is kept back.

    Parameters
    ----------
    exposure : Exposure or Plan
        Pressure and breathing gas against time.
    cylinders : sequence of Cylinder
        What there is; of one gas they are used in this order, one after the other.
    reserve : Reserve, optional
        What is kept back.
    demand : Demand, optional
        How much is breathed where the exposure does not say it.
    water_temperature : float or str, optional
        Temperature of the cylinders in use [degC]; each one's own where not given.
    at : array_like, optional
        Times to add to the boundaries [min].

    Returns
    -------
    Dataset
        Along ``cylinder`` and ``time``: ``amount_left`` [mol], ``pressure_left`` [kPa absolute]. Along
        ``supply_gas`` and ``time``: ``free_gas_left``, ``free_gas_reserve`` and ``free_gas_missing`` [L at
        101.325 kPa and 20 degC]. Along ``supply_gas``: ``first_below_reserve`` and ``time_empty`` [min, NaN
        never], ``time_below_reserve`` [min], and the smallest ``margin_to_reserve`` [L], negative below, with
        its ``time_of_margin``. :func:`gasphys.supply.stock_review` tells the same as a review does.

    Raises
    ------
    ExposureError
        If a gas that is breathed is in no cylinder, or a piece has no demand.

    Notes
    -----
    Moles left by the virial series; a cylinder gives nothing below the highest ambient pressure at which its
    gas is breathed, nor below its own lowest pressure. What is asked of it beyond that is missing. Crossings
    are roots.

    Examples
    --------
    >>> dive = Exposure.start("air").travel(depth=20, minutes=1).stay(30).travel(depth=0, minutes=3)
    >>> left = stock(dive, [Cylinder("air", 12.0, "200 bar")], Reserve(pressure="50 bar"), Demand(20.0))
    >>> (left.pressure_left.sel(cylinder="air") / 100.0).round(0).values.tolist()
    [200.0, 196.0, 40.0, 30.0]
    >>> round(float(left.first_below_reserve.sel(supply_gas="air")), 1)
    29.0
    """
    bank = check_cylinders(cylinders)
    whole = _cut_at(of_exposure(exposure), at)
    account = open_account(whole, demand or Demand())
    rule = reserve or Reserve()
    warm = None if water_temperature is None else read(water_temperature, "temperature")
    mine = [tuple(one for one in bank if one.gas == gas) for gas in account.gases]
    for gas, holders in zip(account.gases, mine, strict=True):
        if not holders:
            held = ", ".join(dict.fromkeys(str(one.gas) for one in bank)) or "none"
            raise ExposureError(f"{gas} is used and no cylinder holds it; the cylinders hold {held}")
    ds, pick = _frame(account)
    used = account.used
    books = [Book.of(account, k, holders, warm) for k, holders in enumerate(mine)]
    left = {}
    for k, book in enumerate(books):
        for one, amount in zip(book.cylinders, book.left(used[k]), strict=True):
            left[one.name] = amount
    for one in bank:
        left.setdefault(one.name, np.full(used.shape[1:], one.amount))
    ds.coords["cylinder"] = [one.name for one in bank]
    amounts = np.stack([left[one.name] for one in bank])
    pressures = np.stack([one.pressure_of(left[one.name], warm) for one in bank])
    meaning = "pressure left in the cylinder, absolute" + ("" if warm is None else f", at {warm:g} degC")
    _put(ds, account, pick, "amount_left", amounts, attributes("amount", long_name="amount left"), "cylinder")
    attrs = attributes("cylinder_pressure", long_name=meaning)
    _put(ds, account, pick, "pressure_left", pressures, attrs, "cylinder")
    _reserves(ds, account, pick, books, used, rule)
    liters = [free_liters_per_mole(one.gas) for one in bank]
    ds["free_liters_per_mole"] = (
        "cylinder",
        liters,
        {"units": "L/mol", "long_name": free_gas_words("volume")},
    )
    ds["gas_of_cylinder"] = ("cylinder", [str(c.gas) for c in bank], {"long_name": "gas in the cylinder"})
    ds.attrs = dataset_attributes(
        "gas left along an exposure",
        "supply, virial series",
        history=whole.history,
        references=_SOURCES,
        comment=_NOT_COUNTED,
        demand=demand_words(account.demand, bool(account.loop.any())),
        reserve=str(rule),
        cylinders="; ".join(str(one) for one in bank),
    )
    return ds


class Book:
    """The cylinders of one gas: what they hold and what cannot be taken out of them.

    Parameters
    ----------
    cylinders : tuple of Cylinder
        In order of use.
    floors : list of float
        What cannot be taken out of each [mol].
    """

    def __init__(self, cylinders: tuple[Cylinder, ...], floors: list[float]) -> None:
        self.cylinders, self.floors = cylinders, floors
        self.amounts = [one.amount for one in cylinders]
        self.usable = [max(a - f, 0.0) for a, f in zip(self.amounts, floors, strict=True)]

    @classmethod
    def of(cls, account: Account, gas: int, cylinders: tuple[Cylinder, ...], warm: float | None) -> Book:
        """Return the book of one gas: nothing comes out below the pressure at which it is breathed."""
        c = account.columns
        taken = account.open_on[gas] | account.diluent_of[gas]
        if gas == account.oxygen:
            taken = taken | account.loop
        taken = taken & (c.minutes > 0.0)
        ambient = float(np.where(taken, np.maximum(c.start, c.end), 0.0).max(initial=0.0))
        floors = [one.content(max(one.lowest_pressure, ambient), warm) for one in cylinders]
        return cls(cylinders, [float(f) for f in floors])

    def left(self, used: Array) -> list[Array]:
        """Moles left in each cylinder, used in order."""
        found, before = [], 0.0
        for amount, usable in zip(self.amounts, self.usable, strict=True):
            found.append(amount - np.clip(used - before, 0.0, usable))
            before += usable
        return found


def _reserves(
    ds: xr.Dataset, account: Account, pick: Any, books: list[Book], used: Array, rule: Reserve
) -> None:
    liters = [free_liters_per_mole(g) for g in account.gases]
    columns: dict[str, list[Array]] = defaultdict(list)
    for k, book in enumerate(books):
        held, floor = sum(book.amounts), sum(book.amounts) - sum(book.usable)
        kept = rule.kept(book.cylinders, floor)
        way = way_out(rule, account, k)
        columns["left"].append(liters[k] * np.maximum(held - used[k], floor))
        columns["missing"].append(liters[k] * np.maximum(used[k] - (held - floor), 0.0))
        columns["reserve"].append(liters[k] * _edges(kept, floor, way, used[k].shape))
        found = crossing(account, k, held, kept, floor, way)
        columns["below"].append(found.first)
        columns["minutes"].append(found.minutes)
        columns["margin"].append(liters[k] * found.margin)
        columns["closest"].append(found.time_of_margin)
        columns["left_then"].append(liters[k] * found.left)
        columns["empty"].append(crossing(account, k, held, floor, floor, None).first)
    for name, key, words in (
        ("free_gas_left", "left", "gas left in the cylinders"),
        ("free_gas_reserve", "reserve", "gas kept back or not to be taken out"),
        ("free_gas_missing", "missing", "gas asked for that is not there"),
    ):
        attrs = attributes("free_gas_volume", long_name=free_gas_words(words))
        _put(ds, account, pick, name, np.stack(columns[key]), attrs)
    for name, key, attrs in (
        ("first_below_reserve", "below", _time("time the stock first is below the reserve; nan: never")),
        ("time_below_reserve", "minutes", attributes("duration", long_name="time the stock is below it")),
        ("time_of_margin", "closest", _time("time of the smallest surplus over the reserve")),
        ("time_empty", "empty", _time("time nothing can be taken any more; nan: never")),
        (
            "margin_to_reserve",
            "margin",
            {"units": "L", "long_name": free_gas_words("smallest surplus over the reserve")},
        ),
        (
            "left_at_margin",
            "left_then",
            {"units": "L", "long_name": free_gas_words("stock where its surplus is smallest")},
        ),
    ):
        shape = tuple(len(account.exposure.coords[d]) for d in account.exposure.dims)
        values = np.stack(columns[key]).reshape(len(books), *shape)
        ds[name] = (("supply_gas", *account.exposure.dims), values, attrs)


def _edges(kept: float, floor: float, way: WayOut | None, shape: tuple[int, ...]) -> Array:
    """What must be there at every boundary: as it is when the next piece begins, at the end when it ends."""
    if way is None:
        return np.full(shape, kept)
    need = np.concatenate([way.need(0.0), way.need(1.0)[:, -1:]], axis=-1)
    return np.maximum(kept, floor + need)


@dataclass(frozen=True)
class Crossing:
    """When a stock is below what is kept of it.

    Parameters
    ----------
    first : array
        First time [min]; NaN never.
    minutes : array
        For how long in all [min].
    margin : array
        Smallest surplus [mol], negative below.
    time_of_margin : array
        When [min].
    left : array
        What is left then [mol].
    """

    first: Array
    minutes: Array
    margin: Array
    time_of_margin: Array
    left: Array


def crossing(
    account: Account, gas: int, held: float, kept: float, floor: float, way: WayOut | None
) -> Crossing:
    """Find when the stock of a gas is below what is kept of it.

    Parameters
    ----------
    account : Account
        Gas used.
    gas : int
        Index of the gas.
    held, kept, floor : float
        What the cylinders hold at the start, what is kept whatever happens, what cannot be taken out [mol].
    way : WayOut or None
        What the way out needs above the floor.

    Returns
    -------
    Crossing
        A value a scenario.
    """
    before = account.used[gas][:, :-1]
    minutes, times = account.columns.minutes, account.times

    def surplus(share: Any, where: Places | None = None) -> Array:
        start = before[..., None] if where is None else before[where]
        now = held - start - account.partial(gas, share, where)
        need = kept if way is None else np.maximum(kept, floor + way.need(share, where))
        return np.asarray(now - need)

    shares = np.linspace(0.0, 1.0, _STEPS + 1)
    grid = surplus(np.broadcast_to(shares, (*minutes.shape, _STEPS + 1)))
    grid = np.where((minutes > 0.0)[..., None], grid, np.inf)
    bad = grid < -_ROUNDING * held
    # Between two places of a piece at most one crossing: its root, in either direction.
    part = np.where(bad[..., :-1] & bad[..., 1:], 1.0, 0.0)
    begins = np.where(bad[..., :-1], shares[:-1], np.inf)
    changes = np.nonzero(bad[..., :-1] != bad[..., 1:])
    if len(changes[0]):
        where, low, high = (changes[0], changes[1]), shares[changes[2]], shares[changes[2] + 1]
        root = find_root(lambda s: surplus(s, where), low, high)
        # Below by no more than rounding at one end only: no root, the end is it.
        root = np.where(np.isnan(root), np.where(bad[changes], low, high), root)
        inside = (root - low) * _STEPS
        part[changes] = np.where(bad[changes], inside, 1.0 - inside)
        begins[changes] = np.where(bad[changes], low, root)
    with np.errstate(invalid="ignore"):  # never, in a piece of no duration
        when = times[:, :-1, None] + begins * minutes[..., None]
    last = times[:, -1:]
    # At a boundary the stock may be below only when the next piece begins, or only when one ends.
    ends = np.where(bad[..., -1], times[:, 1:], np.inf)
    first = np.minimum(np.where(np.isfinite(when), when, np.inf).min(axis=(-2, -1)), ends.min(axis=-1))
    flat = grid.reshape(len(grid), -1)
    index = np.argmin(flat, axis=-1)
    piece, step = index // (_STEPS + 1), index % (_STEPS + 1)
    rows = np.arange(len(flat))
    closest = times[rows, piece] + shares[step] * minutes[rows, piece]
    return Crossing(
        np.where(np.isfinite(first), np.minimum(first, last[:, 0]), np.nan),
        (part * minutes[..., None]).sum(axis=(-2, -1)) / _STEPS,
        flat[rows, index],
        closest,
        held - before[rows, piece] - account.partial(gas, shares[step], (rows, piece)),
    )


# -- datasets --------------------------------------------------------------------------------------


def _cut_at(exposure: Exposure, at: Any) -> Exposure:
    """Cut pieces at further times; they must lie within the exposure."""
    if at is None:
        return exposure
    exposure.sample(at)  # refuses times outside, and scenarios of different duration
    return exposure._split(np.unique(np.atleast_1d(np.asarray(at, dtype=float))))


def _frame(account: Account) -> tuple[xr.Dataset, tuple[Any, tuple[str, ...]]]:
    """Return a Dataset with the axes of the account, and which boundaries it shows."""
    exposure = account.exposure
    ds = xr.Dataset(
        coords={
            "supply_gas": ("supply_gas", [str(g) for g in account.gases], {"long_name": "gas of a supply"}),
            **{d: np.asarray(v) for d, v in exposure.coords.items()},
        }
    )
    times = account.times
    if np.all(times == times[:1]):
        # Of a switch, which takes no time, one boundary is enough.
        unique, index = np.unique(times[0], return_index=True)
        ds.coords["time"] = ("time", unique, attributes("time"))
        return ds, (index, ("time",))
    index = np.arange(times.shape[-1])
    shape = tuple(len(exposure.coords[d]) for d in exposure.dims)
    ds["time"] = ((*exposure.dims, "point"), times.reshape(*shape, -1), attributes("time"))
    return ds, (index, ("point",))


def _put(
    ds: xr.Dataset,
    account: Account,
    pick: tuple[Any, tuple[str, ...]],
    name: str,
    values: Array,
    attrs: dict[str, Any],
    along: str = "supply_gas",
) -> None:
    index, last = pick
    exposure = account.exposure
    shape = tuple(len(exposure.coords[d]) for d in exposure.dims)
    shown = values[..., index].reshape(len(values), *shape, len(index))
    ds[name] = ((along, *exposure.dims, *last), shown, attrs)


def _time(words: str) -> dict[str, Any]:
    return attributes("time", long_name=words)


def free_gas_words(what: str) -> str:
    return f"{what}, free gas at 101.325 kPa and {FREE_TEMPERATURE:g} degC"


def demand_words(demand: Demand, loop: bool) -> str:
    """Return a demand in words.

    Parameters
    ----------
    demand : Demand
        Who breathes how much.
    loop : bool
        Whether a loop is breathed.

    Returns
    -------
    str
        For attributes and texts.

    Examples
    --------
    >>> demand_words(Demand(surface_rate={"": 20.0, "ascent": 16.0}), False)
    '1 person, 20 L/min (ascent 16), gas at 20 degC'
    """
    said = []
    for name, unit in (
        ("surface_rate", "L/min"),
        ("ventilation_btps", "L/min BTPS"),
        ("o2_uptake_stpd", "L/min O2 STPD"),
    ):
        given = getattr(demand, name)
        if isinstance(given, dict):
            parts = ", ".join(f"{k} {v:g}" for k, v in given.items() if k)
            said.append(f"{given['']:g} {unit} ({parts})" if "" in given else f"{parts} {unit}")
        elif given is not None:
            said.append(f"{given:g} {unit}")
    who = "1 person" if demand.persons == 1.0 else f"{demand.persons:g} persons, each"
    volume = [f"loop {demand.loop_volume:g} L"] if loop else []
    return ", ".join([who, *said, *volume, f"gas at {demand.gas_temperature:g} degC"])
