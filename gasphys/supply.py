"""Filling a cylinder by partial pressures, accounted in moles of the real gas."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys import __version__
from gasphys.errors import NotReachableError, RangeError
from gasphys.gas import FORMULAS, Gas, gas_fractions
from gasphys.maths import find_root
from gasphys.policy import outside_validity
from gasphys.quantities import CAUTION, attributes, quantity
from gasphys.real_gas import cylinder_content, cylinder_pressure, pairs, uncertainty
from gasphys.shell import Argument, number

__all__ = ["partial_pressure_fill"]

#: What is smaller than this share of the final amount is rounding.
_ROUNDING = 1e-10

_NOT_MODELED = "Heat of compression and incomplete mixing are not modeled: analyze the gas, always."

_content = cylinder_content.pick(model="virial").raw  # type: ignore[attr-defined]
_pressure = cylinder_pressure.pick(model="virial").raw  # type: ignore[attr-defined]
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
        ideal recipe would really give (NaN where it has a negative step). ``remainder_amount`` [mol] and
        ``relative_uncertainty`` of the density of the target.

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
    labelled = xr.broadcast(
        *(_plain(wanted[f], f) for f in FORMULAS.values()),
        *(_plain(present[f], f) for f in FORMULAS.values()),
        _plain(target_pressure, "cylinder_pressure"),
        _plain(remainder_pressure, "cylinder_pressure"),
        _plain(volume, "water_capacity"),
        _plain(temperature, "temperature"),
        _plain(warm, "temperature"),
    )
    shape, dims = labelled[0].shape, labelled[0].dims
    plain = np.stack([one.values.reshape(-1) for one in labelled])
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
    ds = xr.Dataset(coords={**labelled[0].coords, "step": names, "gas": list(FORMULAS)})
    for name, (first, values, attrs) in variables.items():
        ds[name] = xr.Variable((first, *dims), values.reshape((-1, *shape)), attrs)
    of_remainder = attributes("amount", long_name="amount of the remainder")
    ds["remainder_amount"] = xr.Variable(dims, rest.reshape(shape), of_remainder)
    ds["relative_uncertainty"] = xr.DataArray(bound).assign_attrs(attributes("relative_uncertainty"))
    doubtful = [str(p) for p in pairs(target) if p.quality != "good"]
    ds.attrs = {
        "Conventions": "CF-1.11",
        "title": "filling a cylinder by partial pressures",
        "source": f"gasphys {__version__}, supply, virial series",
        "history": "as given",
        "references": "virial_reference_equations; unlike_pairs; ideal_gas",
        "comment": f"{CAUTION} {_NOT_MODELED}",
        **({"estimated_pairs": "; ".join(doubtful)} if doubtful else {}),
    }
    return ds


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


def _plain(value: Any, name: str) -> xr.DataArray:
    """Return a checked input in its canonical unit, labelled."""
    one = quantity(name)
    if isinstance(value, xr.DataArray):
        return xr.DataArray(one.from_unit(value.astype(float), str(value.attrs["units"])))
    return xr.DataArray(number(value, Argument(name, one)))


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
            found.append(self._at(species, self.temperature if temperature is None else temperature))
        return np.array(found)

    def _at(self, species: _Array, temperature: _Array) -> _Array:
        total = species.sum(axis=0)
        # An empty cylinder has no composition; any will do for a pressure of zero.
        shares = np.where(total > 0.0, species / np.where(total > 0.0, total, 1.0), self.wanted)
        return np.asarray(_pressure(total, *shares, self.volume, temperature))

    def given_by(self, ideal_amounts: _Array, ideal: _Array, rest: _Array) -> _Array:
        """Fractions that come out when each step really ends at the pressure of the ideal recipe."""
        species = self.present * rest
        for gas, planned, stop in zip(self.added, ideal_amounts, ideal, strict=True):

            def over(amount: Any, gas: Any = gas, species: Any = species, stop: Any = stop) -> Any:
                return self._at(species + gas[:, None] * amount, self.temperature) - stop

            most = 2.0 * _ideal_content(stop, self.volume, self.temperature)
            amount = np.where(planned > 0.0, find_root(over, np.zeros_like(stop), most), 0.0)
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
