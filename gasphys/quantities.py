"""What a number is called, its unit, its range: the registry behind every name.

The data stand in ``quantities.toml``, written once.
"""

from __future__ import annotations

import tomllib
from collections.abc import Iterable
from dataclasses import dataclass
from importlib import resources
from typing import Any

from gasphys.errors import RangeError, UnitError, unknown_name
from gasphys.units import convert, parse_quantity, unit

__all__ = ["CAUTION", "QUANTITIES", "Quantity", "attributes", "dataset_attributes", "quantity"]

#: The caution that every dataset, page and command output carries.
CAUTION = (
    "Model estimates for trained people. Local codes, the manual in force, the physician and the "
    "supervisor in charge come first. Never the sole basis for a dive or a treatment."
)


@dataclass(frozen=True)
class Quantity:
    """One quantity of the registry.

    Parameters
    ----------
    name : str
        Name in arguments and datasets.
    symbol : str
        LaTeX symbol.
    unit : str
        Canonical unit.
    long_name : str
        Name with absolute or gauge, dry or humid, condition.
    possible : tuple of float
        Outside this range a value cannot be meant.
    usual : tuple of float
        Range of everyday use.
    meaning : str
        One line.
    dose_unit : str
        Free text, for doses whose unit attribute is "1".
    refuses : tuple of str
        Quantities of the same unit that must not stand in its place.
    """

    name: str
    symbol: str
    unit: str
    long_name: str
    possible: tuple[float, float]
    usual: tuple[float, float]
    meaning: str
    dose_unit: str = ""
    refuses: tuple[str, ...] = ()

    @property
    def is_pressure(self) -> bool:
        """Whether the unit is a pressure."""
        return unit(self.unit).is_like(unit("kPa"))

    @property
    def is_depth(self) -> bool:
        """Whether values are depths (gauge), not absolute pressures."""
        return unit(self.unit).gauge

    def range_error(self, value: float, low: float | None = None, high: float | None = None) -> RangeError:
        """Return the error for an impossible value, with the likely meaning where there is one."""
        low = self.possible[0] if low is None else low
        high = self.possible[1] if high is None else high
        if value != value:
            return RangeError(f"{self.name} is not a number (nan); allowed {low:g} to {high:g} {self.unit}")
        hint = ""
        if self.is_pressure and not self.is_depth:
            meant = [
                f"'{value:g} {other}'"
                for other in ("bar", "atm")
                if self.usual[0] <= convert(float(value), other, self.unit) <= min(self.usual[1], high)
            ]
            if meant:
                hint = f"; did you mean {' or '.join(meant)}?"
        elif self.unit == "1" and 1.0 < value <= 100.0 and high <= 1.0:
            hint = f"; did you mean '{value:g} %'?"
        elif self.unit == "degC" and 200.0 < value < 400.0:
            hint = f"; did you mean '{value:g} K'?"
        return RangeError(
            f"{self.name} = {value:g} {self.unit} ({self.long_name}) is outside the possible range "
            f"{low:g} to {high:g} {self.unit}{hint}"
        )

    def from_text(self, text: str) -> float:
        """Read ``"2.4 atm"`` into the canonical unit."""
        number, unit_name = parse_quantity(text)
        if not unit_name:
            return number
        return float(self.from_unit(number, unit_name))

    def from_unit(self, value: Any, unit_name: str) -> Any:
        """Convert a value from another unit into the canonical one."""
        given, own = unit(unit_name), unit(self.unit)
        if given.gauge and self.is_pressure and not self.is_depth:
            shown = f"{value:g}" if isinstance(value, float) else "..."
            water = "fsw" if unit_name.startswith("fsw") else "fresh" if unit_name == "mfw" else "msw"
            raise UnitError(
                f"{self.name} is an absolute pressure and {shown} {unit_name} is a depth; write "
                f"surroundings.pressure_at_depth({shown}, water={water!r}) or an absolute pressure "
                "such as '280 kPa'"
            )
        if own.gauge and not given.gauge:
            raise UnitError(
                f"{self.name} is a depth in {self.unit} (gauge); {unit_name!r} is not a depth unit. "
                "Write a number or a value in msw or fsw"
            )
        if not given.is_like(own):
            raise UnitError(
                f"{self.name} needs a unit like {self.unit!r}; {unit_name!r} measures something else"
            )
        if own.name in ("degC", "degF") and given.name.startswith("delta_"):
            raise UnitError(f"{self.name} is a temperature scale; {unit_name!r} is a difference")
        return convert(value, unit_name, self.unit)


def _load() -> dict[str, Quantity]:
    text = resources.files("gasphys").joinpath("quantities.toml").read_text(encoding="utf-8")
    registry = {}
    for name, row in tomllib.loads(text).items():
        registry[name] = Quantity(
            name=name,
            symbol=row["symbol"],
            unit=row["unit"],
            long_name=row["long_name"],
            possible=(float(row["possible"][0]), float(row["possible"][1])),
            usual=(float(row["usual"][0]), float(row["usual"][1])),
            meaning=row["meaning"],
            dose_unit=row.get("dose_unit", ""),
            refuses=tuple(row.get("refuses", ())),
        )
    return registry


#: Every quantity by name.
QUANTITIES: dict[str, Quantity] = _load()


def quantity(name: str) -> Quantity:
    """Return the quantity of this name.

    Parameters
    ----------
    name : str
        A name of ``quantities.toml``.

    Returns
    -------
    Quantity
        Its entry.

    Raises
    ------
    UnknownNameError
        If there is none; the nearest name is given.

    Examples
    --------
    >>> quantity("alveolar_po2").unit
    'kPa'
    """
    try:
        return QUANTITIES[name]
    except KeyError:
        raise unknown_name("quantity", name, QUANTITIES) from None


def attributes(name: str, **more: str | float | int) -> dict[str, Any]:
    """Return the attributes a dataset variable of this quantity carries.

    Parameters
    ----------
    name : str
        A quantity.
    **more : str, float or int
        Further attributes.

    Returns
    -------
    dict
        ``units``, ``long_name``, ``quantity`` and what was added.

    Examples
    --------
    >>> attributes("duration")["units"]
    'min'
    """
    one = quantity(name)
    attrs: dict[str, Any] = {"units": one.unit, "long_name": one.long_name, "quantity": name}
    if one.unit in ("msw", "fsw"):  # neither parses as a unit elsewhere
        attrs["units"] = "10 kPa" if one.unit == "msw" else f"{convert(1.0, 'fsw', 'kPa')!r} kPa"
    if one.dose_unit:
        attrs["dose_unit"] = one.dose_unit
    attrs.update(more)
    return attrs


def dataset_attributes(
    title: str,
    source: str,
    *,
    history: Iterable[str] = (),
    references: Iterable[str] = (),
    comment: str = "",
    **more: Any,
) -> dict[str, Any]:
    """Return the attributes every result carries: what it is, what made it, from what, the caution.

    Parameters
    ----------
    title : str
        What the dataset holds.
    source : str
        What of gasphys made it; the version stands before it.
    history : iterable of str
        What was done to the exposure, an entry a step.
    references : iterable of str
        Keys of ``sources.toml``; repeats are dropped.
    comment : str
        Said after the caution.
    **more : Any
        Further attributes.

    Returns
    -------
    dict
        Attributes of a dataset.

    Examples
    --------
    >>> dataset_attributes("pressure", "exposure")["history"]
    'as given'
    """
    from gasphys import __version__

    return {
        "Conventions": "CF-1.11",
        "title": title,
        "source": f"gasphys {__version__}, {source}",
        "history": "\n".join(history) or "as given",
        "references": "; ".join(dict.fromkeys(references)),
        "comment": f"{CAUTION} {comment}".rstrip(),
        **more,
    }
