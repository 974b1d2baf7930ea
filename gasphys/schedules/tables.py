"""Treatment tables: data and the exposures built from them."""

from __future__ import annotations

import csv
import functools
import tomllib
from dataclasses import dataclass, replace
from importlib import resources
from typing import Any

from gasphys.constants import ATMOSPHERE, FSW
from gasphys.errors import RangeError, unknown_name
from gasphys.exposure import Exposure
from gasphys.policy import require_provenance, weakest

__all__ = ["names", "treatment"]


@dataclass(frozen=True)
class Segment:
    """One row of a table: pressures at its ends, minutes, gas and part."""

    start: str
    end: str
    unit: str
    minutes: float
    gas: str
    part: str
    note: str
    provenance: str

    def pressure(self, which: str, surface_pressure: float) -> float:
        """Return the absolute pressure at "start" or "end" [kPa]."""
        text = getattr(self, which)
        if text == "surface":
            return surface_pressure
        if self.unit == "fsw":
            return surface_pressure + float(FSW) * float(text)
        return float(ATMOSPHERE) * float(text)

    @property
    def is_travel(self) -> bool:
        """Whether pressure changes."""
        return self.start != self.end


@functools.cache
def tables() -> dict[str, dict[str, Any]]:
    """Return what is said of each table, with its rows under ``segments``.

    Returns
    -------
    dict
        Name to title, edition, sources, clock, rules and rows.

    Examples
    --------
    >>> len(tables()["usn_6"]["segments"])
    13
    """
    folder = resources.files("gasphys.schedules")
    found: dict[str, dict[str, Any]] = tomllib.loads(folder.joinpath("tables.toml").read_text("utf-8"))
    rows = segments()
    for name, entry in found.items():
        entry["segments"] = rows[name]
    return found


@functools.cache
def segments() -> dict[str, tuple[Segment, ...]]:
    """Return the rows of every table and extension.

    Returns
    -------
    dict
        Name to rows in order.

    Examples
    --------
    >>> segments()["usn_6_extension_60"][0].minutes
    20.0
    """
    text = resources.files("gasphys.schedules").joinpath("segments.csv").read_text("utf-8")
    found: dict[str, list[Segment]] = {}
    for row in csv.DictReader(line for line in text.splitlines() if not line.startswith("#")):
        found.setdefault(row["table"], []).append(
            Segment(
                row["start"],
                row["end"],
                row["unit"],
                float(row["minutes"]),
                row["gas"],
                row["part"],
                row["note"],
                row["provenance"],
            )
        )
    return {name: tuple(rows) for name, rows in found.items()}


def names() -> tuple[str, ...]:
    """Return the names of the tables that can be built.

    Returns
    -------
    tuple of str
        Names for :func:`treatment`.

    Examples
    --------
    >>> "usn_6" in names()
    True
    """
    return tuple(tables())


def treatment(
    name: str,
    extensions_deep: int = 0,
    extensions_shallow: int = 0,
    attendant: bool = False,
    descent: str = "air",
    *,
    surface_pressure: Any = float(ATMOSPHERE),
) -> Exposure:
    """Build the exposure of a treatment table, surface to surface.

    Parameters
    ----------
    name : str
        A name of :func:`names`, such as ``"usn_6"``.
    extensions_deep, extensions_shallow : int
        Number of extensions at the deeper and the shallower stop.
    attendant : bool
        Build what the inside attendant breathes instead: air, and oxygen where the manual asks.
    descent : str
        Gas breathed on the way down.
    surface_pressure : float
        Pressure outside the chamber [kPa absolute].

    Returns
    -------
    Exposure
        With ``part`` a segment, and ``table_minutes``, ``table_clock``, ``edition`` and
        ``provenance`` among the attributes of its Dataset.

    Raises
    ------
    UnknownNameError
        If there is no such table.
    RangeError
        If the table does not allow so many extensions.

    Notes
    -----
    A transcription for study, not the manual: compare with the edition in force. Which table to
    use, and whether to extend it, is the physician's decision.

    Examples
    --------
    >>> treatment("usn_6").attrs["table_minutes"]
    285.0
    """
    known = tables()
    if name not in known:
        raise unknown_name("treatment table", name, known)
    table = known[name]
    rows = list(table["segments"])
    for word, count in (("deep", extensions_deep), ("shallow", extensions_shallow)):
        most = int(table[f"most_{word}"])
        if isinstance(count, bool) or not isinstance(count, int) or not 0 <= count <= most:
            raise RangeError(f"extensions_{word} = {count!r}: {table['title']} allows 0 to {most}")
        if count:
            rows = _insert(rows, segments()[table[f"extension_{word}"]] * count)
    for row in rows:
        require_provenance(row.provenance, f"{table['title']}, segment {row.part} {row.minutes:g} min")
    if attendant:
        rows = _attendant(rows, table, extensions_deep + extensions_shallow, name)
    exposure = Exposure.start(
        descent if rows[0].part == "descent" and not attendant else rows[0].gas,
        surface_pressure=surface_pressure,
        depth_unit="fsw" if rows[0].unit == "fsw" else "msw",
    )
    surface = float(exposure.surface_pressure)
    for row in rows:
        gas = descent if row.part == "descent" and not attendant else row.gas
        exposure = exposure.switch(gas).name(row.part)
        if row.is_travel:
            exposure = exposure.travel(pressure=row.pressure("end", surface), minutes=row.minutes)
        else:
            exposure = exposure.stay(row.minutes)
    counted = float(sum(r.minutes for r in rows if r.part != "descent"))
    who = "attendant" if attendant else "patient"
    extended = [f"{extensions_deep} deep", f"{extensions_shallow} shallow"]
    added = f", extensions: {', '.join(extended)}" if extensions_deep + extensions_shallow else ""
    return replace(
        exposure,
        attrs={
            "title": f"{table['title']}, {who}{added}",
            "schedule": name,
            "references": "; ".join(table["source"]),
            "edition": table["edition"],
            "provenance": weakest([r.provenance for r in rows]),
            "table_minutes": counted,
            "table_clock": table["clock"],
            "note": "a transcription to compare with the manual in force",
        },
    )


def _insert(rows: list[Segment], added: tuple[Segment, ...]) -> list[Segment]:
    """Put an extension before the travel that leaves its depth."""
    place = max(i for i, r in enumerate(rows) if r.is_travel and r.start == added[0].start)
    return [*rows[:place], *added, *rows[place:]]


def _attendant(rows: list[Segment], table: dict[str, Any], extensions: int, name: str) -> list[Segment]:
    """Air throughout, oxygen for the last minutes at the named depth and on the ascent from it."""
    if "attendant_stop_minutes" not in table:
        raise RangeError(
            f"{name}: no oxygen rule for attendants is known for this schedule; the unit's own applies"
        )
    minutes = float(table["attendant_stop_minutes"][1 if extensions > 1 else 0])
    depth = str(table["attendant_depth"])
    last = max(i for i, r in enumerate(rows) if r.is_travel and r.start == depth)
    breathed: list[Segment] = []
    owed = minutes
    for i in range(last - 1, -1, -1):
        row = rows[i]
        on_oxygen = min(owed, row.minutes) if not row.is_travel and row.start == depth else 0.0
        owed -= on_oxygen
        if on_oxygen:
            breathed.insert(
                0,
                replace(
                    row,
                    minutes=on_oxygen,
                    gas="oxygen",
                    part="oxygen",
                    provenance=table["attendant_provenance"],
                ),
            )
        if row.minutes - on_oxygen > 0.0:
            part = row.part if row.part == "descent" else "travel on air" if row.is_travel else "air"
            breathed.insert(0, replace(row, minutes=row.minutes - on_oxygen, gas="air", part=part))
    for row in rows[last:]:
        part = "travel on oxygen" if row.is_travel else "oxygen"
        breathed.append(replace(row, gas="oxygen", part=part))
    return breathed
