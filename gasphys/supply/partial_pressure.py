"""Filling a cylinder by partial pressures, accounted in moles of the real gas."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.errors import NotReachableError, RangeError
from gasphys.gas import FORMULAS, Gas, gas_fractions
from gasphys.maths import find_root
from gasphys.policy import outside_validity
from gasphys.quantities import attributes, dataset_attributes
from gasphys.real_gas import cylinder_content, cylinder_pressure, pairs, uncertainty
from gasphys.supply.bank import labelled, virial_content, virial_cylinder_pressure

__all__ = ["mix_from_pressures", "partial_pressure_fill"]

#: What is smaller than this share of the final amount is rounding.
_ROUNDING = 1e-10

NOT_MODELED = "Heat of compression and incomplete mixing are not modeled: analyze the gas, always."

_content, _pressure = virial_content, virial_cylinder_pressure
_ideal_content = cylinder_content.pick(model="ideal").raw  # type: ignore[attr-defined]
_ideal_pressure = cylinder_pressure.pick(model="ideal").raw  # type: ignore[attr-defined]

_Array = NDArray[np.float64]


def partial_pressure_fill(
    target: Any,
    target_pressure: Any,
    volume: Any = 1.0,
    temperature: Any = 20.0,
    *,
    remainder: Any = None,
    remainder_pressure: Any = 0.0,
    order: Sequence[Any] = ("helium", "oxygen", "air"),
    filling_temperature: Any = None,
) -> xr.Dataset:
    """Recipe for a mix in a cylinder: how much of each gas, and the pressure after each.

    Parameters
    ----------
    target : Gas, str or DataArray
        The gas wanted.
    target_pressure : float, str or DataArray
        Its pressure, absolute, at `temperature` [kPa]. A gauge reads less by the ambient pressure.
    volume : float, str or DataArray, default 1
        Water capacity of the cylinder [L].
    temperature : float, str or DataArray, default 20
        Temperature of the settled cylinder, of the remainder and of every step [degC].
    remainder : Gas, str or DataArray, optional
        What is in the cylinder already.
    remainder_pressure : float, str or DataArray, default 0
        Its pressure, absolute [kPa].
    order : sequence of Gas or str
        The gases added, in this order, each at most once.
    filling_temperature : float, str or DataArray, optional
        Temperature of the gas in the cylinder at the end of each step, while it is still warm [degC]:
        measured, or assumed by the caller.

    Returns
    -------
    xarray.Dataset
        Along ``step``: ``amount`` added [mol], ``pressure_after`` [kPa, absolute, settled],
        ``pressure_after_hot`` with a filling temperature, and ``ideal_pressure_after``, the recipe of the
        ideal gas law. Along ``gas``: ``gas_fraction``, the target, and ``ideal_recipe_fraction``, what the
        ideal recipe would really give (NaN where it has a negative step), ``remainder_fraction``. Besides
        ``remainder_amount`` and ``total_amount`` [mol], what was asked for, and ``relative_uncertainty`` of
        the density of the target.

    Raises
    ------
    NotReachableError
        If the target cannot be mixed from these gases, or not on this remainder: then with the pressure to
        drain to.
    RangeError
        If the remainder's pressure is above the target's, or its gas is not given.

    Warns
    -----
    ValidityWarning
        Outside the validity of the equation of state; for arrays, where the remainder must be drained first
        (those amounts are NaN).

    Notes
    -----
    Constant volume, one temperature: n = V rho(x, p, T)/M at the end and for the remainder; the amounts
    added conserve every gas; the pressure after each step is that of all moles so far, explicit in the
    amount. Air as a filling gas is the trade's, O2 0.21 and N2 0.79; the virial series is used throughout.

    Not modeled: the heat of compression and incomplete mixing. Let a cylinder rest before reading it (6 h
    after the U.S. Navy Diving Manual, secondary) and analyze the gas, always.

    References
    ----------
    .. [1] Ideal gas law and virial series of :mod:`gasphys.real_gas`; conservation of each gas.

    Examples
    --------
    Nitrox 32 to 200 bar: oxygen first, to 26.9 bar, then air; 27.9 bar would be the ideal recipe.

    >>> fill = partial_pressure_fill("nitrox 32", 20000.0, order=("oxygen", "air"))
    >>> fill.pressure_after.round(0).values.tolist()
    [2692.0, 20000.0]
    >>> fill.ideal_pressure_after.round(0).values.tolist()
    [2785.0, 20000.0]
    """
    names, added = _gases_added(order)
    left = Gas.parse("air") if remainder is None else remainder
    # The public equations check units, ranges and validity of every input, and say so.
    bound = uncertainty(target_pressure, target, temperature)
    found = cylinder_content(remainder_pressure, left, volume, temperature)
    if remainder is None and np.any(np.asarray(found) > 0.0):
        raise RangeError(
            f"remainder_pressure = {remainder_pressure} without a remainder: say which gas it is"
        )
    warm = temperature if filling_temperature is None else filling_temperature
    cylinder_pressure(0.0, target, volume, warm)

    wanted, present = gas_fractions(target), gas_fractions(left)
    given = xr.broadcast(
        *(labelled(wanted[f], f) for f in FORMULAS.values()),
        *(labelled(present[f], f) for f in FORMULAS.values()),
        labelled(target_pressure, "cylinder_pressure"),
        labelled(remainder_pressure, "cylinder_pressure"),
        labelled(volume, "water_capacity"),
        labelled(temperature, "temperature"),
        labelled(warm, "temperature"),
    )
    shape, dims = given[0].shape, given[0].dims
    plain = np.stack([one.values.reshape(-1) for one in given])
    fill = _Fill(added, plain[:7], plain[7:14], *plain[14:18])
    if np.any(fill.remainder_pressure > fill.pressure):
        raise RangeError("remainder_pressure is above target_pressure: drain the cylinder first")

    total = _content(fill.pressure, *fill.wanted, fill.volume, fill.temperature)
    rest = _content(fill.remainder_pressure, *fill.present, fill.volume, fill.temperature)
    need, taken = fill.account(total, rest, names)
    _drained(fill, need, taken, total, rest, names)
    amounts = _rounded(need - taken, total)
    ideal_total = _ideal_content(fill.pressure, fill.volume, fill.temperature)
    ideal_rest = _ideal_content(fill.remainder_pressure, fill.volume, fill.temperature)
    ideal_amounts = _rounded(np.subtract(*fill.account(ideal_total, ideal_rest, names)), ideal_total)
    ideal = _ideal_pressure(ideal_rest + np.cumsum(ideal_amounts, axis=0), fill.volume, fill.temperature)

    variables = {
        "amount": ("step", amounts, attributes("amount")),
        "pressure_after": ("step", fill.pressures(amounts, rest), attributes("pressure_after")),
        "ideal_pressure_after": ("step", ideal, attributes("ideal_pressure_after")),
        "gas_fraction": ("gas", fill.wanted, attributes("gas_fraction")),
        "ideal_recipe_fraction": (
            "gas",
            fill.given_by(ideal_amounts, ideal, rest),
            attributes("gas_fraction", long_name="dry mole fraction that the ideal recipe would give"),
        ),
    }
    if filling_temperature is not None:
        hot = fill.pressures(amounts, rest, plain[18])
        variables["pressure_after_hot"] = ("step", hot, attributes("pressure_after_hot"))
    ds = xr.Dataset(coords={**given[0].coords, "step": names, "gas": list(FORMULAS)})
    for name, (first, values, attrs) in variables.items():
        ds[name] = xr.Variable((first, *dims), values.reshape((-1, *shape)), attrs)
    of_remainder = attributes("amount", long_name="amount of the remainder")
    ds["remainder_amount"] = xr.Variable(dims, rest.reshape(shape), of_remainder)
    ds["remainder_fraction"] = xr.Variable(
        ("gas", *dims),
        fill.present.reshape((-1, *shape)),
        attributes("gas_fraction", long_name="dry mole fraction of the remainder"),
    )
    for name, row in (
        ("target_pressure", fill.pressure),
        ("remainder_pressure", fill.remainder_pressure),
        ("water_capacity", fill.volume),
        ("temperature", fill.temperature),
    ):
        ds[name] = xr.Variable(dims, row.reshape(shape), attributes(name))
    if filling_temperature is not None:
        ds["filling_temperature"] = xr.Variable(
            dims, plain[18].reshape(shape), attributes("filling_temperature")
        )
    ds["total_amount"] = xr.Variable(
        dims,
        total.reshape(shape),
        attributes(
            "amount",
            long_name="amount of gas in the finished filling",
            equation="real_gas.cylinder_content[virial]",
            inputs=json.dumps(
                {
                    "cylinder_pressure": "@target_pressure",
                    **{field: f"@gas_fraction:{formula}" for formula, field in FORMULAS.items()},
                    "water_capacity": "@water_capacity",
                    "temperature": "@temperature",
                }
            ),
        ),
    )
    ds["relative_uncertainty"] = xr.DataArray(bound).assign_attrs(attributes("relative_uncertainty"))
    doubtful = [str(p) for p in pairs(target) if p.quality != "good"]
    ds.attrs = dataset_attributes(
        "filling a cylinder by partial pressures",
        "supply, virial series",
        references=["virial_reference_equations", "unlike_pairs", "ideal_gas"],
        comment=NOT_MODELED,
        **({"estimated_pairs": "; ".join(doubtful)} if doubtful else {}),
    )
    return ds


def mix_from_pressures(
    steps: Sequence[tuple[Any, Any]],
    volume: Any = 1.0,
    temperature: Any = 20.0,
    *,
    remainder: Any = None,
    remainder_pressure: Any = 0.0,
    filling_temperature: Any = None,
) -> xr.Dataset:
    """Mix that comes out when gases are added up to given pressures: the recipe read backwards.

    Parameters
    ----------
    steps : sequence of (gas, pressure)
        Gas added, and the pressure at which it was stopped [kPa absolute].
    volume : float, str or DataArray, default 1
        Water capacity of the cylinder [L].
    temperature : float, str or DataArray, default 20
        Temperature of the settled cylinder and of the remainder [degC].
    remainder : Gas, str or DataArray, optional
        What is in the cylinder already.
    remainder_pressure : float, str or DataArray, default 0
        Its pressure, absolute [kPa].
    filling_temperature : float, str or DataArray, optional
        Temperature of the gas when the pressures were read [degC]; that of the settled cylinder where not
        given.

    Returns
    -------
    xarray.Dataset
        Along ``step``: ``amount`` added [mol], ``pressure_after`` [kPa absolute, settled]. Along ``gas``:
        ``gas_fraction`` and ``ideal_gas_fraction``, what the ideal gas law would say. ``remainder_amount``.

    Raises
    ------
    RangeError
        If a pressure lies below the one before it, with the pressure from which that gas can be added.

    Notes
    -----
    The amount added in a step is the one whose pressure, with all that is there already, is the one read. One
    step tops a remainder: the mix follows. Nothing here replaces the analysis.

    References
    ----------
    .. [1] Ideal gas law and virial series of :mod:`gasphys.real_gas`; conservation of each gas.

    Examples
    --------
    Oxygen to 1000 psi, then helium to 2000 psi: more than half is oxygen.

    >>> mix = mix_from_pressures([("oxygen", "1000 psi"), ("helium", "2000 psi")])
    >>> round(float(mix.gas_fraction.sel(gas="O2")), 3), float(mix.ideal_gas_fraction.sel(gas="O2"))
    (0.547, 0.5)

    Nitrox 48 left at 50 bar and topped with air to 200 bar:

    >>> mix = mix_from_pressures([("air", "200 bar")], remainder="nitrox 48", remainder_pressure="50 bar")
    >>> round(float(mix.gas_fraction.sel(gas="O2")), 3)
    0.28
    """
    if not steps:
        raise RangeError("steps is empty: give pairs of a gas and the pressure at which it was stopped")
    names = [str(Gas.parse(gas)) for gas, _ in steps]
    left = Gas.parse("air") if remainder is None else remainder
    found = cylinder_content(remainder_pressure, left, volume, temperature)
    if remainder is None and np.any(np.asarray(found) > 0.0):
        raise RangeError(
            f"remainder_pressure = {remainder_pressure} without a remainder: say which gas it is"
        )
    warm = temperature if filling_temperature is None else filling_temperature
    for gas, pressure in steps:
        cylinder_content(pressure, gas, volume, warm)  # the public equation checks every input, and says so
    present = gas_fractions(left)
    given = xr.broadcast(
        *(labelled(present[f], f) for f in FORMULAS.values()),
        labelled(remainder_pressure, "cylinder_pressure"),
        labelled(volume, "water_capacity"),
        labelled(temperature, "temperature"),
        labelled(warm, "temperature"),
        *(labelled(pressure, "cylinder_pressure") for _, pressure in steps),
    )
    shape, dims = given[0].shape, given[0].dims
    plain = np.stack([one.values.reshape(-1) for one in given])
    mix, (pressure, capacity, settled, hot), stops = plain[:7], plain[7:11], plain[11:]
    added = np.array([[Gas.parse(gas).fraction(f) for f in FORMULAS] for gas, _ in steps])
    species = mix * _content(pressure, *mix, capacity, settled)
    ideal = mix * _ideal_content(pressure, capacity, settled)
    rest = species.sum(axis=0)
    amounts, after = [], []
    for k, (gas, stop) in enumerate(zip(added, stops, strict=True)):
        now = mixture_pressure(species, capacity, hot, mix)
        if np.any(stop < now * (1.0 - 1e-9)):
            worst = int(np.argmax(now - stop))
            raise RangeError(
                f"step {k + 1}: {names[k]} to {stop[worst]:.6g} kPa lies below the {now[worst]:.6g} kPa "
                "that are there; drain the cylinder, or give pressures that rise"
            )
        amounts.append(_added(species, gas, stop, capacity, hot))
        species = species + gas[:, None] * amounts[-1]
        after.append(mixture_pressure(species, capacity, settled, mix))
        ideal = ideal + gas[:, None] * np.maximum(
            _ideal_content(stop, capacity, hot) - ideal.sum(axis=0), 0.0
        )
    ds = xr.Dataset(coords={**given[0].coords, "gas": list(FORMULAS)})
    # Two steps may be of one gas, so steps are counted and named beside.
    ds.coords["step"] = np.arange(1, len(names) + 1)
    ds["gas_added"] = ("step", names, {"long_name": "gas added"})
    of_law = attributes("gas_fraction", long_name="dry mole fraction by the ideal gas law")
    for name, first, values, attrs in (
        ("amount", "step", np.array(amounts), attributes("amount")),
        ("pressure_after", "step", np.array(after), attributes("pressure_after")),
        ("gas_fraction", "gas", species / species.sum(axis=0), attributes("gas_fraction")),
        ("ideal_gas_fraction", "gas", ideal / ideal.sum(axis=0), of_law),
    ):
        ds[name] = xr.Variable((first, *dims), values.reshape((-1, *shape)), attrs)
    of_remainder = attributes("amount", long_name="amount of the remainder")
    ds["remainder_amount"] = xr.Variable(dims, rest.reshape(shape), of_remainder)
    ds.attrs = dataset_attributes(
        "mix from the pressures of its filling",
        "supply, virial series",
        references=["virial_reference_equations", "unlike_pairs", "ideal_gas"],
        comment=NOT_MODELED,
    )
    return ds


def mixture_pressure(species: _Array, volume: _Array, temperature: _Array, otherwise: _Array) -> _Array:
    """Return the pressure of moles by species in a cylinder.

    Parameters
    ----------
    species : array
        Moles, ``(7, fill)``.
    volume, temperature : array
        Water capacity [L] and temperature [degC].
    otherwise : array
        Mole fractions that stand for an empty cylinder; any will do for a pressure of zero.

    Returns
    -------
    array
        Pressure [kPa absolute].

    Examples
    --------
    >>> oxygen = np.eye(7)[:, :1]
    >>> mixture_pressure(0.0 * oxygen, np.ones(1), np.full(1, 20.0), oxygen)
    array([0.])
    """
    total = species.sum(axis=0)
    shares = np.where(total > 0.0, species / np.where(total > 0.0, total, 1.0), otherwise)
    return np.asarray(_pressure(total, *shares, volume, temperature))


def _added(species: _Array, gas: _Array, stop: _Array, volume: _Array, temperature: _Array) -> _Array:
    """Moles of a gas that bring the pressure up to where it is stopped."""

    def over(amount: Any) -> Any:
        return mixture_pressure(species + gas[:, None] * amount, volume, temperature, gas[:, None]) - stop

    most = 2.0 * _ideal_content(stop, volume, temperature)
    found = find_root(over, np.zeros_like(stop), most)
    # No more than rounding away from what is there already.
    return np.where(np.isnan(found) & (over(np.zeros_like(stop)) >= 0.0), 0.0, found)


def _gases_added(order: Sequence[Any]) -> tuple[list[str], _Array]:
    """Return names and fractions of the gases added; none may be a mixture of the others."""
    if isinstance(order, (str, Gas)):
        raise TypeError(f"order is a sequence of gases such as ('oxygen', 'air'), not {str(order)!r}")
    names = [str(gas) for gas in order]
    added = np.array([[Gas.parse(gas).fraction(formula) for formula in FORMULAS] for gas in order])
    if not names or np.linalg.matrix_rank(added) < len(names):
        raise NotReachableError(
            f"no single recipe with {', '.join(names) or 'no gas'}: give gases of which none is a mixture "
            "of the others, each once"
        )
    return names, added


def _rounded(amounts: _Array, total: _Array) -> _Array:
    return np.where(np.abs(amounts) <= _ROUNDING * total, 0.0, amounts)


@dataclass(frozen=True)
class _Fill:
    """One or many fills: gases by row, fills by column, in kPa, L, degC."""

    added: _Array
    wanted: _Array
    present: _Array
    pressure: _Array
    remainder_pressure: _Array
    volume: _Array
    temperature: _Array

    def account(self, total: _Array, rest: _Array, names: list[str]) -> tuple[_Array, _Array]:
        """Moles of each gas added that the target needs, and that the remainder takes off."""
        solve = np.linalg.pinv(self.added.T)
        need, taken = solve @ (self.wanted * total), solve @ (self.present * rest)
        off = (self.wanted * total - self.present * rest - self.added.T @ (need - taken)) / total
        if np.nanmax(np.abs(off), initial=0.0) > 1e-6:
            gas, _ = np.unravel_index(int(np.nanargmax(np.abs(off))), off.shape)
            raise NotReachableError(
                f"the target cannot be mixed from {', '.join(names)}: {list(FORMULAS)[gas]} would be off by "
                f"{np.nanmax(np.abs(off)):.3g} of the whole; name another gas in order"
            )
        return need, taken

    def pressures(self, amounts: _Array, rest: _Array, temperature: _Array | None = None) -> _Array:
        """Pressure after each step [kPa]."""
        found, species = [], self.present * rest
        for gas, amount in zip(self.added, amounts, strict=True):
            species = species + gas[:, None] * amount
            warm = self.temperature if temperature is None else temperature
            found.append(mixture_pressure(species, self.volume, warm, self.wanted))
        return np.array(found)

    def given_by(self, ideal_amounts: _Array, ideal: _Array, rest: _Array) -> _Array:
        """Fractions that come out when each step really ends at the pressure of the ideal recipe."""
        species = self.present * rest
        for gas, planned, stop in zip(self.added, ideal_amounts, ideal, strict=True):
            found = _added(species, gas, stop, self.volume, self.temperature)
            amount = np.where(planned > 0.0, found, 0.0)
            species = species + gas[:, None] * np.where(planned < 0.0, np.nan, amount)
        return np.asarray(species / species.sum(axis=0))


def _drained(fill: _Fill, need: _Array, taken: _Array, total: _Array, rest: _Array, names: list[str]) -> None:
    """Refuse a negative step, with the pressure to drain to; among many fills it becomes nan."""
    slack = _ROUNDING * total
    impossible = np.any(need < -slack, axis=0)
    if impossible.any():
        worst = names[int(np.argmin((need / total).min(axis=1)))]
        raise NotReachableError(
            f"the target cannot be mixed from {', '.join(names)}: even into an empty cylinder less than "
            f"nothing of {worst} would have to go"
        )
    # A share s of the remainder leaves each step need - s taken >= 0.
    shares = np.where(taken > slack, need / np.where(taken > slack, taken, 1.0), np.inf)
    share = shares.min(axis=0)
    short = share < 1.0 - _ROUNDING
    if not short.any():
        return
    keep = _pressure(np.where(short, share, 1.0) * rest, *fill.present, fill.volume, fill.temperature)
    first = int(np.argmax(short))
    gas = names[int(np.argmin(shares[:, first]))]
    text = (
        f"the remainder holds too much: {gas} would have to be taken out; drain the cylinder to "
        f"{keep[first]:.0f} kPa ({keep[first] / 100.0:.1f} bar) absolute or less"
    )
    if short.size == 1:
        raise NotReachableError(text)
    outside_validity(
        f"partial_pressure_fill: {int(short.sum())} of {short.size} fills: {text}; those are nan"
    )
    need[:, short] = np.nan
