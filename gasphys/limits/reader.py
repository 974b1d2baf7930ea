"""Read limits: the shipped ones and a site's own, in the same format."""

from __future__ import annotations

import functools
import os
from collections.abc import Iterable
from dataclasses import dataclass
from importlib import resources
from typing import Any

from gasphys.errors import GasphysError, InputFileError, UnknownNameError, unknown_name
from gasphys.policy import PROVENANCE
from gasphys.quantities import quantity
from gasphys.sources import sources
from gasphys.toml_files import TomlFile, parse_toml, read_toml

__all__ = ["Limit", "load"]

ROLES = ("diver", "patient", "attendant")

_FIELDS: dict[str, type | tuple[type, ...]] = {
    "id": str,
    "title": str,
    "quantity": str,
    "comparison": str,
    "value": (int, float),
    "unit": str,
    "authority": str,
    "edition": str,
    "roles": list,
    "conditions": str,
    "provenance": str,
    "source": str,
}

#: Fields that may be left out, and what is meant then.
_OPTIONAL: dict[str, bool | str] = {"per_day": False, "model": ""}


@dataclass(frozen=True)
class Limit:
    """One published limit.

    Parameters
    ----------
    id : str
        Name, unique.
    title : str
        What it is.
    quantity : str
        Quantity compared.
    comparison : str
        "<=" or ">=".
    value : float
        The limit in the quantity's canonical unit.
    unit : str
        Unit as published.
    published_value : float
        Number as published.
    authority, edition : str
        Whose it is.
    roles : tuple of str
        For whom it was made.
    conditions : str
        When it holds.
    provenance : str
        How the number is known.
    source : str
        Key of ``sources.toml``, or free text in a site's file.
    per_day : bool
        True if it allows so much in a day: an exposure that lasts longer is not judged by it.
    model : str
        Tissue model whose limit it is, for the quantity ``limit_fraction``; "" otherwise.
    site : bool
        True if it comes from the caller's own file.
    """

    id: str
    title: str
    quantity: str
    comparison: str
    value: float
    unit: str
    published_value: float
    authority: str
    edition: str
    roles: tuple[str, ...]
    conditions: str
    provenance: str
    source: str
    per_day: bool = False
    model: str = ""
    site: bool = False


def load(limits: str | os.PathLike[str] | Iterable[Any] = "default") -> tuple[Limit, ...]:
    """Return limits: the shipped ones, a site's file beside them, or a mixture.

    Parameters
    ----------
    limits : str, path or sequence
        ``"default"``: the shipped limits. A path: the file's limits first, then the shipped ones.
        A sequence of such names, paths and :class:`Limit`: just those, in order, paths without the
        shipped ones.

    Returns
    -------
    tuple of Limit
        A site's own first.

    Raises
    ------
    InputFileError
        With file and line, for a file that cannot be read as meant.
    UnknownNameError
        If two limits have one id.

    Examples
    --------
    >>> load("default")[0].authority
    'NOAA Diving Program'
    """
    if isinstance(limits, Limit):
        return (limits,)
    if isinstance(limits, (str, os.PathLike)):
        if str(limits) == "default":
            found = list(_shipped())
        else:
            found = [*_file(limits), *_shipped()]
    else:
        found = []
        for one in limits:
            if isinstance(one, Limit):
                found.append(one)
            elif str(one) == "default":
                found.extend(_shipped())
            else:
                found.extend(_file(one))
        found.sort(key=lambda limit: not limit.site)
    seen: set[str] = set()
    for limit in found:
        if limit.id in seen:
            raise UnknownNameError(
                f"limit id {limit.id!r} is given twice; a site's file can only add, choose another id"
            )
        seen.add(limit.id)
    return tuple(found)


@functools.cache
def _shipped() -> tuple[Limit, ...]:
    text = resources.files("gasphys.limits").joinpath("default.toml").read_text(encoding="utf-8")
    return tuple(_limits(parse_toml(text, "gasphys/limits/default.toml"), site=False))


def _file(path: str | os.PathLike[str]) -> list[Limit]:
    return _limits(read_toml(path, "write TOML tables [[limit]]"), site=True)


def _limits(file: TomlFile, site: bool) -> list[Limit]:
    rows = file.data.get("limit")
    if not isinstance(rows, list):
        raise file.error("no [[limit]] table", "begin every limit with a line [[limit]]")
    for extra in file.data:
        if extra != "limit":
            raise file.error(
                f"only [[limit]] tables are read, found {extra!r}",
                "begin every limit with a line [[limit]]",
                key=extra,
            )
    return [_limit(row, file, number, site) for number, row in enumerate(rows)]


def _limit(row: dict[str, Any], file: TomlFile, number: int, site: bool) -> Limit:
    def refuse(key: str, message: str, remedy: str) -> InputFileError:
        return file.error(message, remedy, key=key, table="limit", number=number)

    for key in row:
        if key not in _FIELDS and key not in _OPTIONAL:
            raise refuse(
                key, str(unknown_name("field of a limit", key, [*_FIELDS, *_OPTIONAL])), "correct the field"
            )
    for key, kind in _FIELDS.items():
        if key not in row:
            raise refuse(key, f"the limit has no {key}", f"add {key} = ...")
        if not isinstance(row[key], kind) or isinstance(row[key], bool):
            raise refuse(key, f"{key} = {row[key]!r} is of the wrong kind", f"correct {key}")
    for key in _OPTIONAL:
        default = _OPTIONAL[key]
        if type(row.get(key, default)) is not type(default):
            remedy = "write true or false" if default is False else "write a name in quotes"
            raise refuse(key, f"{key} = {row[key]!r} is of the wrong kind", remedy)
    if (row["quantity"] == "limit_fraction") != bool(row.get("model")):
        raise refuse(
            "quantity",
            "the limit of a tissue model",
            'write quantity = "limit_fraction" and model = "us_navy_1957"',
        )
    if row["comparison"] not in ("<=", ">="):
        raise refuse("comparison", f"comparison {row['comparison']!r}", "write <= or >=")
    for role in row["roles"]:
        if role not in ROLES:
            raise refuse("roles", str(unknown_name("role", role, ROLES)), "correct the role")
    if row["provenance"] not in PROVENANCE:
        raise refuse(
            "provenance",
            str(unknown_name("provenance", row["provenance"], PROVENANCE)),
            "say how the number is known",
        )
    if not site and row["source"] not in sources():
        raise refuse("source", f"unknown source {row['source']!r}", "add it to sources.toml")
    try:
        one = quantity(row["quantity"])
    except UnknownNameError as error:
        raise refuse("quantity", str(error), "name a quantity of the registry") from None
    try:
        published = float(row["value"])
        value = one.from_unit(published, row["unit"]) if row["unit"] != one.unit else published
    except GasphysError as error:
        raise refuse("unit", str(error), f"give the value in a unit like {one.unit}") from None
    low, high = one.possible
    if not low <= value <= high:
        raise refuse("value", str(one.range_error(value)), "correct the value or its unit")
    kept = {k: row[k] for k in _FIELDS if k not in ("value", "roles")}
    kept |= {k: row.get(k, default) for k, default in _OPTIONAL.items()}
    return Limit(**kept, value=value, published_value=published, roles=tuple(row["roles"]), site=site)
