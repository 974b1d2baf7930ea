"""Read a supply file: cylinders, who breathes how much, what is kept back, and the exposure it is for."""

from __future__ import annotations

import os
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from gasphys.ascent import Rules
from gasphys.ascent.reading import gas_from_text, until_leaving
from gasphys.constants import ATMOSPHERE
from gasphys.errors import GasphysError, InputFileError, unknown_name
from gasphys.exposure import Exposure
from gasphys.quantities import quantity
from gasphys.supply.bank import Cylinder, Demand, check_cylinders
from gasphys.supply.reserve_rules import Reserve
from gasphys.toml_files import TomlFile, read_toml

__all__ = ["SupplyFile", "read_supply"]

_TOP = ("exposure", "surface_pressure", "water_temperature", "cylinder", "demand", "reserve", "ascent")
_PRESSURES = ("pressure_absolute", "pressure_gauge")
_CYLINDER = ("name", "gas", "water_capacity", *_PRESSURES, "temperature", "count", "lowest_pressure")
_DEMAND = (
    "surface_rate",
    "ventilation_btps",
    "o2_uptake_stpd",
    "persons",
    "loop_volume",
    "gas_temperature",
)
_RESERVE = ("share", *_PRESSURES, "persons", "until", "minutes", "demand")
_RULES = (
    "ascent_rate",
    "stop_spacing",
    "last_stop",
    "gradient_low",
    "gradient_high",
    "shortest_stop",
    "switch_minutes",
)
_ASCENT = ("model", "gases", "spare", "leave_at", "moments", *_RULES)


@dataclass(frozen=True)
class SupplyFile:
    """What a supply file holds.

    Parameters
    ----------
    exposure : Exposure
        What is breathed; with an ascent to be planned, up to leaving the bottom.
    cylinders : tuple of Cylinder
        What there is, in order of use.
    demand : Demand
        Who breathes how much.
    reserve : Reserve
        What is kept back.
    surface_pressure : float
        For gauge pressures [kPa absolute].
    water_temperature : float or None
        Of the cylinders in use [degC].
    gases : tuple or None
        What may be breathed on the way, as for :func:`gasphys.ascent.plan`; None: no ascent is planned.
    spare : tuple
        What is carried for a loss only.
    model : str
        Model of the ascent.
    rules : Rules
        Rules of the ascent.
    moments : tuple or None
        Moments of the loss table [min].
    """

    exposure: Exposure
    cylinders: tuple[Cylinder, ...]
    demand: Demand
    reserve: Reserve
    surface_pressure: float
    water_temperature: float | None = None
    gases: tuple[tuple[Any, Any], ...] | None = None
    spare: tuple[tuple[Any, Any], ...] = ()
    model: str = "buhlmann_1995_c"
    rules: Rules = field(default_factory=Rules)
    moments: tuple[float, ...] | None = None


def read_supply(path: str | os.PathLike[str]) -> SupplyFile:
    """Read a supply file.

    Parameters
    ----------
    path : path
        TOML. On top ``exposure``, a log (CSV) beside the file, and optional ``surface_pressure`` and
        ``water_temperature``; a table ``[[cylinder]]`` each, with ``gas``, ``water_capacity``,
        ``pressure_absolute`` or ``pressure_gauge``, optional ``name``, ``count``, ``temperature``,
        ``lowest_pressure``; ``[demand]`` and ``[reserve]`` with the fields of :class:`Demand` and
        :class:`Reserve`; ``[ascent]``, if the way up is to be planned, with ``gases`` such as
        ``"nitrox 48 from 20 msw"``, ``spare`` gases for a loss only, ``model``, ``leave_at``, ``moments`` and
        the rules.

    Returns
    -------
    SupplyFile
        What it holds.

    Raises
    ------
    InputFileError
        With file, line, column and remedy.

    Examples
    --------
    >>> import tempfile
    >>> folder = Path(tempfile.mkdtemp())
    >>> _ = (folder / "dive.csv").write_text("time_min,depth_msw,gas\\n0,0,air\\n1,20,air\\n20,20,air\\n")
    >>> text = 'exposure = "dive.csv"\\n[[cylinder]]\\ngas = "air"\\nwater_capacity = "12 L"\\n'
    >>> _ = (folder / "bank.toml").write_text(text + 'pressure_gauge = "200 bar"\\n')
    >>> round(read_supply(folder / "bank.toml").cylinders[0].pressure)
    20101
    """
    file = read_toml(path, "write TOML: exposure = ..., tables [[cylinder]], [demand], [reserve], [ascent]")
    reader = _Reader(file)
    reader.known(file.data, _TOP, "", 0)
    surface = reader.read("surface_pressure", file.data, "", default=float(ATMOSPHERE))
    water = reader.read("water_temperature", file.data, "", "temperature")
    cylinders = reader.cylinders(surface)
    exposure = reader.exposure(surface)
    ascent = reader.table("ascent", _ASCENT)
    more: dict[str, Any] = {}
    if "ascent" in file.data:
        exposure, more = reader.ascent(exposure, ascent)
    return SupplyFile(
        exposure=exposure,
        cylinders=cylinders,
        demand=reader.demand(reader.table("demand", _DEMAND), "demand"),
        reserve=reader.reserve(reader.table("reserve", _RESERVE), surface),
        surface_pressure=surface,
        water_temperature=water,
        **more,
    )


@dataclass(frozen=True)
class _Reader:
    """Reads the tables of one file; every error has its line."""

    file: TomlFile

    def known(self, row: Mapping[str, Any], names: Sequence[str], table: str, number: int) -> None:
        for key in row:
            if key == "pressure" and "pressure_gauge" in names:
                raise self.file.error(
                    "pressure does not say absolute or gauge",
                    "write pressure_absolute = ... or pressure_gauge = ...",
                    key=key,
                    table=table,
                    number=number,
                )
            if key not in names:
                what = str(unknown_name(f"field of {table or 'a supply file'}", key, names))
                # A table of its own stands below the top of the file.
                place = None if isinstance(row[key], (dict, list)) and not table else table
                raise self.file.error(what, "correct the field", key=key, table=place, number=number)

    def table(self, name: str, names: Sequence[str]) -> dict[str, Any]:
        row = self.file.data.get(name, {})
        if not isinstance(row, dict):
            raise self.file.error(f"{name} is no table", f"write [{name}] on a line of its own", key=name)
        self.known(row, names, name, 0)
        return dict(row)

    def made(self, make: Callable[..., Any], given: Mapping[str, Any], table: str, number: int = 0) -> Any:
        """Make a value of a table; an error is told at the field it names."""
        try:
            return make(**given)
        except InputFileError:
            raise
        except (GasphysError, TypeError, ValueError) as error:
            text = str(error)
            named = next((k for k in given if text.startswith(k) or f"{k} =" in text), "")
            named = named or next((k for k, v in given.items() if repr(v) in text), "")
            raise self.file.error(
                str(error), "correct the value", key=named, table=table, number=number
            ) from None

    def read(
        self,
        key: str,
        row: Mapping[str, Any],
        table: str,
        name: str = "",
        number: int = 0,
        default: Any = None,
    ) -> Any:
        if key not in row:
            return default
        one = quantity(name or key)
        try:
            value = one.from_text(row[key]) if isinstance(row[key], str) else float(row[key])
            if not one.possible[0] <= value <= one.possible[1]:
                raise one.range_error(value)
        except (GasphysError, TypeError, ValueError) as error:
            raise self.file.error(
                str(error),
                f"write {key} such as '{one.usual[1]:g} {one.unit}'",
                key=key,
                table=table,
                number=number,
            ) from None
        return value

    def pressure(self, row: dict[str, Any], surface: float, table: str, number: int = 0) -> Any:
        """Take the pressure out of a table: absolute, or gauge with the surface pressure added."""
        given = [key for key in row if key in _PRESSURES]
        if len(given) == 2:
            raise self.file.error(
                "both pressure_absolute and pressure_gauge",
                "keep one",
                key=given[1],
                table=table,
                number=number,
            )
        if not given:
            return None
        value = self.read(given[0], row, table, "cylinder_pressure", number)
        del row[given[0]]
        return value + (surface if given[0] == "pressure_gauge" else 0.0)

    def cylinders(self, surface: float) -> tuple[Cylinder, ...]:
        rows = self.file.data.get("cylinder")
        if not isinstance(rows, list) or not rows:
            raise self.file.error("no [[cylinder]] table", "begin every cylinder with a line [[cylinder]]")
        found = []
        for number, given in enumerate(rows):
            row = dict(given)
            self.known(row, _CYLINDER, "cylinder", number)
            pressure = self.pressure(row, surface, "cylinder", number)
            for key in ("gas", "water_capacity"):
                if key not in row:
                    raise self.file.error(
                        f"the cylinder has no {key}", f"add {key} = ...", table="cylinder", number=number
                    )
            if pressure is None:
                raise self.file.error(
                    "the cylinder has no pressure",
                    "add pressure_absolute = ... or pressure_gauge = ...",
                    table="cylinder",
                    number=number,
                )
            found.append(self.made(Cylinder, {**row, "pressure": pressure}, "cylinder", number))
        try:
            return check_cylinders(found)
        except GasphysError as error:
            raise self.file.error(str(error), "add name = ... to each", table="cylinder") from None

    def exposure(self, surface: float) -> Exposure:
        name = self.file.data.get("exposure")
        if not isinstance(name, str) or not name:
            raise self.file.error(
                "no exposure", "add exposure = 'a log (CSV) beside this file'", key="exposure", table=""
            )
        return Exposure.from_csv(Path(self.file.path).parent / name, surface_pressure=surface)

    def demand(self, row: dict[str, Any], table: str) -> Demand:
        for key in ("surface_rate", "ventilation_btps", "o2_uptake_stpd"):
            if isinstance(row.get(key), dict):
                row[key] = {"" if k == "others" else k: v for k, v in row[key].items()}
        return self.made(Demand, row, table)  # type: ignore[no-any-return]

    def reserve(self, row: dict[str, Any], surface: float) -> Reserve:
        given = dict(row)
        pressure = self.pressure(given, surface, "reserve")
        if pressure is not None:
            given["pressure"] = pressure
        inner = given.pop("demand", None)
        if inner is not None:
            if not isinstance(inner, dict):
                raise self.file.error(
                    "demand is no table", "write [reserve.demand]", key="demand", table="reserve"
                )
            self.known(inner, _DEMAND, "reserve.demand", 0)
            given["demand"] = self.demand(dict(inner), "reserve.demand")
        return self.made(Reserve, given, "reserve")  # type: ignore[no-any-return]

    def ascent(self, exposure: Exposure, row: dict[str, Any]) -> tuple[Exposure, dict[str, Any]]:
        leave = self.read("leave_at", row, "ascent", "time")
        bottom, own = self.made(
            lambda leave_at: until_leaving(exposure, leave_at), {"leave_at": leave}, "ascent"
        )
        listed = self.gases("gases", row)
        given = {k: row[k] for k in _RULES if k in row}
        moments = row.get("moments")
        if moments is not None and not isinstance(moments, list):
            raise self.file.error(
                "moments is no list", "write moments = [10, 22]", key="moments", table="ascent"
            )
        more: dict[str, Any] = {
            "gases": tuple(own) if listed is None else listed,
            "spare": self.gases("spare", row) or (),
            "rules": self.made(Rules, given, "ascent"),
        }
        if "model" in row:
            more["model"] = str(row["model"])
        if moments is not None:
            more["moments"] = tuple(self.read("moments", {"moments": m}, "ascent", "time") for m in moments)
        return bottom, more

    def gases(self, key: str, row: Mapping[str, Any]) -> tuple[tuple[Any, Any], ...] | None:
        texts = row.get(key)
        if texts is None:
            return None
        if not isinstance(texts, list) or not all(isinstance(t, str) for t in texts):
            raise self.file.error(
                f"{key} is no list of texts",
                f"write {key} = ['nitrox 48 from 20 msw']",
                key=key,
                table="ascent",
            )
        try:
            return tuple(gas_from_text(t) for t in texts)
        except GasphysError as error:
            raise self.file.error(str(error), "correct the text", key=key, table="ascent") from None
