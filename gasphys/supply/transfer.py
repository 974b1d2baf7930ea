"""Filling from a bank of cylinders: by itself, one after the other, and with a booster."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.errors import NotReachableError, RangeError, unknown_name
from gasphys.gas import FORMULAS, gas_fractions
from gasphys.maths import find_root
from gasphys.policy import outside_validity
from gasphys.quantities import attributes, dataset_attributes
from gasphys.real_gas import cylinder_content, cylinder_pressure
from gasphys.supply.bank import (
    Cylinder,
    check_cylinders,
    labelled,
    mole_fractions,
    virial_content,
    virial_cylinder_pressure,
)
from gasphys.supply.partial_pressure import NOT_MODELED, mixture_pressure

__all__ = ["booster_fill", "cascade_fill"]

_Array = NDArray[np.float64]
_Law = Callable[..., _Array]

_ORDERS = ("rising", "as given")
_ROUNDING = 1e-9

_ideal_pressure = cylinder_pressure.pick(model="ideal").raw  # type: ignore[attr-defined]
_ideal_content = cylinder_content.pick(model="ideal").raw  # type: ignore[attr-defined]


def cascade_fill(
    bank: Sequence[Cylinder],
    target_pressure: Any = None,
    volume: Any = 1.0,
    temperature: Any = 20.0,
    *,
    remainder: Any = None,
    remainder_pressure: Any = 0.0,
    order: str = "rising",
    filling_temperature: Any = None,
) -> xr.Dataset:
    """Fill a cylinder from a bank by letting the pressures meet, one bank cylinder after the other.

    Parameters
    ----------
    bank : sequence of Cylinder
        What the gas comes from.
    target_pressure : float, str or DataArray, optional
        Pressure wanted, absolute, settled [kPa]; as far as the bank goes where not given.
    volume : float, str or DataArray, default 1
        Water capacity of the cylinder filled [L].
    temperature : float, str or DataArray, default 20
        Temperature of the settled cylinder and of its remainder [degC].
    remainder : Gas, str or DataArray, optional
        What is in it already; the gas of the bank where not given.
    remainder_pressure : float, str or DataArray, default 0
        Its pressure, absolute [kPa].
    order : {"rising", "as given"}
        Bank cylinders by rising pressure, or in the order given.
    filling_temperature : float, str or DataArray, optional
        Temperature of the gas in the cylinder filled at the end of each step [degC]: it meets the bank's
        pressure while warm, and less goes in.

    Returns
    -------
    xarray.Dataset
        Along ``step``, a bank cylinder each: ``amount`` that went over [mol], ``pressure_after`` [kPa
        absolute, settled], ``pressure_after_hot`` with a filling temperature, ``bank_pressure_after`` and
        ``ideal_pressure_after``. Along ``gas``: ``gas_fraction`` of what is in the cylinder then.

    Raises
    ------
    NotReachableError
        If the bank does not reach the target, with the range it reaches.
    RangeError
        If the remainder's pressure is above the target's.

    Warns
    -----
    ValidityWarning
        For arrays, where the target is not reached (those amounts are NaN).

    Notes
    -----
    Each bank cylinder is opened until both pressures are equal or the target is met; the moles that left the
    one are in the other. Gas only goes from the bank to the cylinder. The bank keeps its own temperature.

    References
    ----------
    .. [1] Ideal gas law and virial series of :mod:`gasphys.real_gas`; conservation of each gas.

    Examples
    --------
    >>> bank = [Cylinder("air", 50.0, p, name=p) for p in ("250 bar", "120 bar", "180 bar")]
    >>> fill = cascade_fill(bank, "200 bar", 12.0, remainder_pressure="40 bar")
    >>> fill.step.values.tolist(), (fill.pressure_after / 100.0).round(0).values.tolist()
    (['120 bar', '180 bar', '250 bar'], [104.0, 165.0, 200.0])
    """
    one = _read(
        bank, target_pressure, volume, temperature, remainder, remainder_pressure, order, filling_temperature
    )
    return _fill(one, 1.0, 0.0, boosted=False)


def booster_fill(
    bank: Sequence[Cylinder],
    target_pressure: Any,
    volume: Any = 1.0,
    temperature: Any = 20.0,
    *,
    highest_ratio: float,
    lowest_inlet_pressure: Any,
    remainder: Any = None,
    remainder_pressure: Any = 0.0,
    order: str = "rising",
    filling_temperature: Any = None,
) -> xr.Dataset:
    """Fill a cylinder from a bank with a booster: what flows by itself first, then what is pumped.

    Parameters
    ----------
    bank : sequence of Cylinder
        What the gas comes from.
    target_pressure : float, str or DataArray
        Pressure wanted, absolute, settled [kPa].
    volume : float, str or DataArray, default 1
        Water capacity of the cylinder filled [L].
    temperature : float, str or DataArray, default 20
        Temperature of the settled cylinder and of its remainder [degC].
    highest_ratio : float
        Highest outlet over inlet pressure of the booster, absolute [1].
    lowest_inlet_pressure : float or str
        Lowest pressure the booster draws from [kPa absolute].
    remainder : Gas, str or DataArray, optional
        What is in it already; the gas of the bank where not given.
    remainder_pressure : float, str or DataArray, default 0
        Its pressure, absolute [kPa].
    order : {"rising", "as given"}
        Bank cylinders by rising pressure, or in the order given.
    filling_temperature : float, str or DataArray, optional
        Temperature of the gas in the cylinder filled at the end of each step [degC].

    Returns
    -------
    xarray.Dataset
        As :func:`cascade_fill`, with ``amount_boosted``, the part of ``amount`` that was pumped [mol].

    Raises
    ------
    NotReachableError
        If the target is not reached, with the range that is.
    RangeError
        If the ratio is below 1, or the remainder's pressure above the target's.

    Warns
    -----
    ValidityWarning
        For arrays, where the target is not reached (those amounts are NaN).

    Notes
    -----
    Moles leave the bank cylinder until the target is met, the ratio of the pressures is the booster's
    highest, or the inlet falls to its lowest. The drive gas, the time and the heat are not modeled; oxygen
    asks for a booster made and cleaned for oxygen, and for the maker's limits.

    References
    ----------
    .. [1] Ideal gas law and virial series of :mod:`gasphys.real_gas`; conservation of each gas.

    Examples
    --------
    >>> bank = [Cylinder("oxygen", 50.0, "90 bar")]
    >>> fill = booster_fill(bank, "200 bar", 7.0, highest_ratio=8.0, lowest_inlet_pressure="30 bar")
    >>> pumped = fill.amount_boosted / fill.amount
    >>> round(float(fill.bank_pressure_after[0]) / 100.0), float(pumped[0].round(2))
    (62, 0.61)
    """
    if not float(highest_ratio) >= 1.0:
        raise RangeError(f"highest_ratio = {highest_ratio} must be at least 1")
    if target_pressure is None:
        raise RangeError("a booster needs a target_pressure")
    one = _read(
        bank, target_pressure, volume, temperature, remainder, remainder_pressure, order, filling_temperature
    )
    lowest = float(labelled(lowest_inlet_pressure, "cylinder_pressure"))
    return _fill(one, float(highest_ratio), lowest, boosted=True)


@dataclass(frozen=True)
class _Filling:
    """What is filled from what: bank cylinders, and the cylinders filled by column."""

    bank: tuple[Cylinder, ...]
    given: tuple[xr.DataArray, ...]
    mix: _Array
    target: _Array
    pressure: _Array
    volume: _Array
    temperature: _Array
    warm: _Array
    is_hot: bool
    aimed: bool


def _read(
    bank: Sequence[Cylinder],
    target_pressure: Any,
    volume: Any,
    temperature: Any,
    remainder: Any,
    remainder_pressure: Any,
    order: str,
    filling_temperature: Any,
) -> _Filling:
    cylinders = check_cylinders(bank)
    if not cylinders:
        raise RangeError("the bank is empty: give one cylinder at least")
    if order not in _ORDERS:
        raise unknown_name("order", order, _ORDERS)
    if order == "rising":
        cylinders = tuple(sorted(cylinders, key=lambda c: float(c.pressure)))
    if remainder is None:
        if len({c.gas for c in cylinders}) > 1 and np.any(
            np.asarray(labelled(remainder_pressure, "cylinder_pressure"))
        ):
            raise RangeError("the bank holds different gases: say which gas the remainder is")
        remainder = cylinders[0].gas
    aimed = target_pressure is not None
    highest = max(float(c.pressure) for c in cylinders)
    target = target_pressure if aimed else highest
    warm = temperature if filling_temperature is None else filling_temperature
    # The public equation checks units, ranges and validity of every input, and says so.
    for pressure, t in ((target, temperature), (remainder_pressure, temperature), (0.0, warm)):
        cylinder_content(pressure, remainder, volume, t)
    shares = gas_fractions(remainder)
    given = xr.broadcast(
        *(labelled(shares[f], f) for f in FORMULAS.values()),
        labelled(target, "cylinder_pressure"),
        labelled(remainder_pressure, "cylinder_pressure"),
        labelled(volume, "water_capacity"),
        labelled(temperature, "temperature"),
        labelled(warm, "temperature"),
    )
    plain = np.stack([one.values.reshape(-1) for one in given])
    if aimed and np.any(plain[8] > plain[7]):
        raise RangeError("remainder_pressure is above target_pressure: drain the cylinder first")
    if not aimed:
        plain[7] = np.inf
    target, pressure, capacity, settled, hot = plain[7:12]
    return _Filling(
        cylinders,
        given,
        plain[:7],
        target,
        pressure,
        capacity,
        settled,
        hot,
        is_hot=filling_temperature is not None,
        aimed=aimed,
    )


def _fill(one: _Filling, ratio: float, lowest: float, *, boosted: bool) -> xr.Dataset:
    real = _run(
        one,
        ratio,
        lowest,
        mixture_pressure,
        _source_pressure,
        virial_content(one.pressure, *one.mix, one.volume, one.temperature),
    )
    ideal = _run(
        one,
        ratio,
        lowest,
        _ideal_mixture,
        _ideal_source,
        _ideal_content(one.pressure, one.volume, one.temperature),
    )
    short = one.aimed & (real["after"][-1] < one.target * (1.0 - _ROUNDING))
    if np.any(short):
        first = int(np.argmax(short))
        low, high, wanted = one.pressure[first], real["after"][-1][first], one.target[first]
        text = (
            f"the bank does not reach {wanted:.6g} kPa ({wanted / 100.0:.1f} bar); from this remainder it "
            f"reaches {low:.6g} to {high:.6g} kPa ({low / 100.0:.1f} to {high / 100.0:.1f} bar) absolute"
        )
        if short.size == 1:
            raise NotReachableError(text)
        outside_validity(f"{int(short.sum())} of {short.size} fills: {text}; those are nan")
        for book in (real, ideal):
            for key, values in book.items():
                book[key] = np.where(short, np.nan, values)
    shape, dims = one.given[0].shape, one.given[0].dims
    names = [c.name for c in one.bank]
    ds = xr.Dataset(coords={**one.given[0].coords, "step": names, "gas": list(FORMULAS)})
    species = real["species"]
    held = species.sum(axis=0)
    shares = np.where(held > 0.0, species / np.where(held > 0.0, held, 1.0), one.mix)
    columns = [
        ("amount", "step", real["amount"], attributes("amount", long_name="amount that went over")),
        ("pressure_after", "step", real["after"], attributes("pressure_after")),
        (
            "bank_pressure_after",
            "step",
            real["source"],
            attributes("cylinder_pressure", long_name="pressure left in the bank cylinder, absolute"),
        ),
        ("ideal_pressure_after", "step", ideal["after"], attributes("ideal_pressure_after")),
        ("gas_fraction", "gas", shares, attributes("gas_fraction")),
    ]
    if one.is_hot:
        columns.append(("pressure_after_hot", "step", real["hot"], attributes("pressure_after_hot")))
    if boosted:
        words = "part of the amount that was pumped"
        columns.append(("amount_boosted", "step", real["pumped"], attributes("amount", long_name=words)))
    for name, first_dim, values, attrs in columns:
        ds[name] = xr.Variable((first_dim, *dims), values.reshape((-1, *shape)), attrs)
    what = "with a booster" if boosted else "by letting pressures meet"
    extra: dict[str, Any] = {"highest_ratio": ratio, "lowest_inlet_pressure": lowest} if boosted else {}
    ds.attrs = dataset_attributes(
        f"filling a cylinder from a bank {what}",
        "supply, virial series",
        references=["virial_reference_equations", "unlike_pairs", "ideal_gas"],
        comment=NOT_MODELED,
        bank="; ".join(str(c) for c in one.bank),
        **extra,
    )
    return ds


def _run(
    one: _Filling, ratio: float, lowest: float, pressure_of: _Law, source_of: _Law, start: Any
) -> dict[str, Any]:
    """Open the bank cylinders in order, by one equation of state."""
    species = one.mix * start
    book: dict[str, list[_Array]] = {k: [] for k in ("amount", "pumped", "after", "hot", "source")}
    for source in one.bank:
        gas = np.array(mole_fractions(source.gas))[:, None]
        there = _held(source, source_of)
        by_itself = _moved(one, species, gas, source, there, 1.0, 0.0, pressure_of, source_of)
        moved = by_itself
        if ratio > 1.0 or lowest > 0.0:
            moved = np.maximum(
                by_itself, _moved(one, species, gas, source, there, ratio, lowest, pressure_of, source_of)
            )
        species = species + gas * moved
        book["amount"].append(moved)
        book["pumped"].append(moved - by_itself)
        book["after"].append(pressure_of(species, one.volume, one.temperature, one.mix))
        book["hot"].append(pressure_of(species, one.volume, one.warm, one.mix))
        book["source"].append(source_of(source, there - moved))
    return {**{k: np.array(v) for k, v in book.items()}, "species": species}


def _held(source: Cylinder, source_of: _Law) -> float:
    if source_of is _source_pressure:
        return source.amount
    return float(_ideal_content(source.pressure, source.capacity, source.temperature))


def _moved(
    one: _Filling,
    species: _Array,
    gas: _Array,
    source: Cylinder,
    there: float,
    ratio: float,
    lowest: float,
    pressure_of: _Law,
    source_of: _Law,
) -> _Array:
    """Moles that go over until the first of the conditions that end a step is met; each only tightens."""
    floor = max(lowest, float(source.lowest_pressure))

    def over(moved: Any) -> Any:
        now = species + gas * moved
        left = source_of(source, there - moved)
        full = pressure_of(now, one.volume, one.temperature, one.mix) - one.target
        meet = pressure_of(now, one.volume, one.warm, one.mix) - ratio * left
        return np.maximum(np.maximum(full, meet), floor - left)

    nothing = np.zeros_like(one.volume)
    found = find_root(over, nothing, nothing + there)
    return np.where(over(nothing) >= 0.0, 0.0, found)


def _source_pressure(source: Cylinder, amount: _Array) -> _Array:
    return np.asarray(
        virial_cylinder_pressure(amount, *mole_fractions(source.gas), source.capacity, source.temperature)
    )


def _ideal_source(source: Cylinder, amount: _Array) -> _Array:
    return np.asarray(_ideal_pressure(amount, source.capacity, source.temperature))


def _ideal_mixture(species: _Array, volume: _Array, temperature: _Array, otherwise: _Array) -> _Array:
    return np.asarray(_ideal_pressure(species.sum(axis=0), volume, temperature))
