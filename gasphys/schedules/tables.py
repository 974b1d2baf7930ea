"""Treatment tables: data and the exposures built from them."""

from __future__ import annotations

import functools
import math
import tomllib
from collections.abc import Iterable
from dataclasses import dataclass, replace
from importlib import resources
from typing import Any

from gasphys.constants import ATMOSPHERE, FSW
from gasphys.errors import ProvenanceError, RangeError, unknown_name
from gasphys.exposure import Exposure
from gasphys.policy import outside_validity, require_provenance, weakest
from gasphys.schedules.attendants import attendant_oxygen
from gasphys.schedules.data import read_rows

__all__ = ["names", "treatment"]

#: Oxygen and air, minutes, of "oxygen in cycles" and of treatment gas: [read] USN Rev 4 Change A, Table 4.
CYCLE = (25.0, 5.0)

#: Descent of the tables that count it in their first stop, fsw/min [memory_high].
DESCENT_RATE = 20.0

#: Minutes before leaving 30 fsw when oxygen begins at the latest, Table 4 [read].
LATE_OXYGEN = 120.0


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
        entry["segments"] = rows.get(name, ())
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
    found: dict[str, list[Segment]] = {}
    for row in read_rows("segments.csv"):
        one = {k: v for k, v in row.items() if k not in ("table", "minutes")}
        found.setdefault(row["table"], []).append(Segment(minutes=float(row["minutes"]), **one))
    return {name: tuple(rows) for name, rows in found.items()}


def names(unverified: bool = False) -> tuple[str, ...]:
    """Return the names of the tables that can be built.

    Parameters
    ----------
    unverified : bool
        Those too that are off unless asked for, because too much of them is remembered.

    Returns
    -------
    tuple of str
        Names for :func:`treatment`.

    Examples
    --------
    >>> "usn_6" in names(), "usn_8" in names(), "usn_8" in names(unverified=True)
    (True, False, True)
    """
    return tuple(name for name, entry in tables().items() if unverified or "unverified" not in entry)


def treatment(
    name: str,
    extensions_deep: int = 0,
    extensions_shallow: int = 0,
    attendant: bool = False,
    descent: str = "air",
    *,
    surface_pressure: Any = float(ATMOSPHERE),
    variant: str = "",
    bottom_minutes: float | None = None,
    start_depth: float | None = None,
    treatment_gas: str = "",
    exposed_before: bool = False,
    altitude: Any = 0.0,
    attendant_minutes: float | None = None,
    unverified: bool = False,
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
        Gas breathed on the way down, where the descent is outside the table's clock.
    surface_pressure : float
        Pressure outside the chamber [kPa absolute].
    variant : str
        A variant that the table itself allows; an unknown one lists them.
    bottom_minutes : float, optional
        Time at the first stop where the table leaves it open [min]; default the shortest.
    start_depth : float, optional
        Depth a table of steps begins at [fsw]; default the deepest.
    treatment_gas : str, optional
        High-oxygen mix breathed at 165 fsw, 25 min and 5 min of air in turn; default air.
    exposed_before : bool
        For an attendant: under pressure in the previous 12 h.
    altitude : float or str
        For an attendant: altitude of the chamber [m].
    attendant_minutes : float, optional
        The unit's own rule instead: oxygen for so many minutes before the last ascent and on it.
    unverified : bool
        Build a table that is off otherwise.

    Returns
    -------
    Exposure
        With ``part`` a segment, and ``table_minutes``, ``table_clock``, ``edition`` and
        ``provenance`` among the attributes of its Dataset; for an attendant also
        ``attendant_oxygen_owed`` and ``_given`` [min] before the ascent.

    Raises
    ------
    UnknownNameError
        If there is no such table or variant.
    RangeError
        If the table does not allow so many extensions or minutes.
    ProvenanceError
        If the table is off unless asked for.

    Warns
    -----
    ValidityWarning
        If the table is off unless asked for, or an attendant's debt does not fit into the table.

    Notes
    -----
    A transcription for study, not the manual: compare with the edition in force. Which table to
    use, and whether to extend it, is the physician's decision.

    Examples
    --------
    >>> treatment("usn_6").attrs["table_minutes"]
    285.0
    >>> treatment("usn_4", bottom_minutes=120).attrs["table_minutes"]
    2436.0
    """
    known = tables()
    if name not in known:
        raise unknown_name("treatment table", name, known)
    table = known[name]
    variants = table.get("variants", {})
    if variant and variant not in variants:
        raise unknown_name(f"variant of {table['title']}", variant, variants)
    if "unverified" in table:
        flag = f"{table['title']} is not verified: {table['unverified']}; compare with the manual in force"
        if not unverified:
            raise ProvenanceError(f"{flag}. Ask for it with unverified=True")
        outside_validity(flag)
    rows = _chosen(table, name, variant, bottom_minutes, start_depth)
    for word, count in (("deep", extensions_deep), ("shallow", extensions_shallow)):
        most = int(table[f"most_{word}"])
        if isinstance(count, bool) or not isinstance(count, int) or not 0 <= count <= most:
            raise RangeError(f"extensions_{word} = {count!r}: {table['title']} allows 0 to {most}")
        if count:
            added = segments()[table[f"extension_{word}"]] * count
            rows = _insert(rows, _moved(added, "30") if variant == "30_fsw" else added)
    if treatment_gas:
        rows = _on_treatment_gas(rows, table, treatment_gas)
    for row in rows:
        require_provenance(row.provenance, f"{table['title']}, segment {row.part} {row.minutes:g} min")
    more: dict[str, Any] = {}
    if attendant:
        extensions = extensions_deep + extensions_shallow
        if attendant_minutes is None and not any(r.gas.startswith("oxygen") for r in rows):
            more["attendant_rule"] = _rule_on_air(name)
        else:
            rows, more = _attendant(rows, name, extensions, exposed_before, altitude, attendant_minutes)
    rows = _cycled(rows, variant)
    exposure = _built(rows, descent if not attendant else "", surface_pressure)
    counted = float(sum(r.minutes for r in rows if r.part != "descent"))
    who = "attendant" if attendant else "patient"
    words = [f"{extensions_deep} deep", f"{extensions_shallow} shallow"]
    added_words = f", extensions: {', '.join(words)}" if extensions_deep + extensions_shallow else ""
    if variant:
        added_words += f", {variants[variant]}"
    return replace(
        exposure,
        attrs={
            "title": f"{table['title']}, {who}{added_words}",
            "schedule": name,
            "references": "; ".join(table["source"]),
            "edition": table["edition"],
            "provenance": weakest([r.provenance for r in rows]),
            "table_minutes": counted,
            "table_clock": table["clock"],
            "note": "a transcription to compare with the manual in force",
            **({"flag": f"not verified: {table['unverified']}"} if "unverified" in table else {}),
            **more,
        },
    )


def _built(rows: Iterable[Segment], descent: str, surface_pressure: Any) -> Exposure:
    rows = list(rows)
    exposure = Exposure.start(
        (descent or rows[0].gas) if rows[0].part == "descent" else rows[0].gas,
        surface_pressure=surface_pressure,
        depth_unit="fsw" if rows[0].unit == "fsw" else "msw",
    )
    surface = float(exposure.surface_pressure)
    for row in rows:
        exposure = exposure.switch((descent or row.gas) if row.part == "descent" else row.gas).name(row.part)
        if row.is_travel:
            exposure = exposure.travel(pressure=row.pressure("end", surface), minutes=row.minutes)
        else:
            exposure = exposure.stay(row.minutes)
    return exposure


def _chosen(
    table: dict[str, Any], name: str, variant: str, bottom: float | None, start: float | None
) -> list[Segment]:
    """Return the rows with what the caller may choose: variant, time and depth of the first stop."""
    if start is not None and "start_depth" not in table:
        raise RangeError(f"start_depth = {start:g} fsw: {table['title']} begins at one depth")
    if bottom is not None and "bottom_minutes" not in table:
        raise RangeError(f"bottom_minutes = {bottom:g} min: {table['title']} leaves no time open")
    if "bottom_minutes" in table:
        least, most = table["bottom_minutes"]
        bottom = float(least) if bottom is None else float(bottom)
        if not least <= bottom <= most or math.isinf(bottom):
            raise RangeError(
                f"bottom_minutes = {bottom:g} min: {table['title']} allows {least:g} to {most:g}"
            )
    if table.get("steps"):
        return _steps(table, name, float(bottom or 0.0), start, variant)
    rows = list(table["segments"])
    if bottom is not None:
        rows[0] = replace(rows[0], minutes=bottom)
    if variant == "30_fsw":
        rows = list(_moved(rows, "30"))
    if variant == "slow_ascent":
        rows[-1] = replace(rows[-1], minutes=float(rows[-1].start), note="1 fsw/min")
    if table.get("descent_inside"):
        down = float(rows[0].start) / DESCENT_RATE
        travel = replace(
            rows[0],
            start="0",
            minutes=down,
            part=f"travel on {rows[0].gas}",
            note="20 fsw/min, inside the first stop",
            provenance="memory_high",
        )
        rows = [travel, replace(rows[0], minutes=rows[0].minutes - down), *rows[1:]]
    return rows


def _moved(rows: Iterable[Segment], depth: str) -> tuple[Segment, ...]:
    """Return the rows of a table of one depth at another, travel at the rate it had."""
    found = []
    for row in rows:
        top = max(float(row.start), float(row.end))
        ends = {k: depth for k in ("start", "end") if float(getattr(row, k)) > 0.0}
        minutes = row.minutes * float(depth) / top if row.is_travel else row.minutes
        found.append(replace(row, minutes=minutes, **ends))
    return tuple(found)


def _steps(
    table: dict[str, Any], name: str, bottom: float, start: float | None, variant: str
) -> list[Segment]:
    """Return the rows of a table that comes up in steps of 2 fsw, the travel inside each stop."""
    low, high = table["start_depth"]
    depth = float(high) if start is None else float(start)
    if not low <= depth <= high or depth != round(depth):
        raise RangeError(f"start_depth = {depth:g} fsw: {table['title']} allows whole feet, {low} to {high}")
    for row in sorted(read_rows("longest_stays.csv"), key=lambda r: float(r["depth"])):
        if row["table"] == name and depth <= float(row["depth"]):
            if bottom > float(row["minutes"]):
                raise RangeError(
                    f"bottom_minutes = {bottom:g} min at {depth:g} fsw: {table['title']} allows at most "
                    f"{float(row['minutes']):g} min"
                )
            break
    bands = [r for r in read_rows("stops.csv") if r["table"] == name]
    weak = weakest([r["provenance"] for r in bands])

    def segment(start: float, end: float, minutes: float, part: str, provenance: str = weak) -> Segment:
        return Segment(f"{start:g}", f"{end:g}", "fsw", minutes, "air", part, "", provenance)

    rows = [segment(0.0, depth, depth / DESCENT_RATE, "descent", "memory_high")]
    if bottom:
        rows.append(segment(depth, depth, bottom, "air"))
    now = depth
    while now > 2.0:
        stop = now - 2.0 if now % 2.0 == 0.0 else now - 3.0
        row = next(r for r in bands if float(r["shallowest"]) <= stop <= float(r["deepest"]))
        minutes, last = float(row["minutes"]), stop == float(bands[-1]["shallowest"])
        if variant == "last_stops_together" and stop == 4.0:
            minutes, last = 240.0, True
        rows.append(segment(now, stop, (now - stop) / 4.0, "travel on air", row["provenance"]))
        rows.append(segment(stop, stop, minutes - (now - stop) / 4.0, "air", row["provenance"]))
        now = stop
        if last:
            break
    return [*rows, segment(now, 0.0, now, "travel on air")]


def _insert(rows: list[Segment], added: tuple[Segment, ...]) -> list[Segment]:
    """Put an extension before the travel that leaves its depth."""
    place = max(i for i, r in enumerate(rows) if r.is_travel and r.start == added[0].start)
    return [*rows[:place], *added, *rows[place:]]


def _on_treatment_gas(rows: list[Segment], table: dict[str, Any], gas: str) -> list[Segment]:
    """Breathe a mix at the deepest stop, 25 min and 5 min of air in turn."""
    if "treatment_gas_depth" not in table:
        raise RangeError(f"treatment_gas = {gas!r}: {table['title']} has no stop for a treatment gas")
    depth = str(table["treatment_gas_depth"])
    found: list[Segment] = []
    for row in rows:
        if row.start == row.end == depth:
            found += _periods(row, 0.0, gas)
        else:
            found.append(row)
    return found


def _periods(row: Segment, clock: float, gas: str = "oxygen") -> list[Segment]:
    """Cut a row at the ends of periods of gas and air; `clock` minutes of the cycles have passed."""
    found, done = [], 0.0
    first, second = float(_number(row.start)), float(_number(row.end))
    while done < row.minutes - 1e-9:
        place = (clock + done) % sum(CYCLE)
        on = place < CYCLE[0] - 1e-9
        step = min((CYCLE[0] if on else sum(CYCLE)) - place, row.minutes - done)
        ends = [f"{first + (second - first) * d / row.minutes:.12g}" for d in (done, done + step)]
        breathed = gas if on else "air"
        part = f"travel on {breathed}" if row.is_travel else breathed if on else "air break"
        part = "treatment gas" if on and gas != "oxygen" else part
        found.append(replace(row, start=ends[0], end=ends[1], minutes=step, gas=breathed, part=part))
        done += step
    return found


def _number(text: str) -> str:
    return "0" if text == "surface" else text


def _cycled(rows: list[Segment], variant: str) -> list[Segment]:
    """Turn "oxygen in cycles" into periods, and into air before they begin."""
    clock, found = 0.0, []
    waiting = variant == "late_oxygen"
    for row in rows:
        if row.gas != "oxygen in cycles":
            found.append(row)
            continue
        if waiting and row.start == row.end == "30":
            before = replace(row, minutes=row.minutes - LATE_OXYGEN)
            found.append(_on_air(before))
            row, waiting = replace(row, minutes=LATE_OXYGEN), False
        if waiting:
            found.append(_on_air(row))
        else:
            found += _periods(row, clock)
            clock += row.minutes
    return found


def _on_air(row: Segment) -> Segment:
    return replace(
        row,
        gas="air",
        part=row.part if row.part == "descent" else "travel on air" if row.is_travel else "air",
    )


def _rule_on_air(name: str) -> str:
    """What is said of attendants of a table that is breathed on air throughout."""
    try:
        return attendant_oxygen(name).text
    except RangeError:
        return "no oxygen: an air table, no rule is stated"


def _attendant(
    rows: list[Segment],
    name: str,
    extensions: int,
    exposed_before: bool,
    altitude: Any,
    own: float | None,
) -> tuple[list[Segment], dict[str, Any]]:
    """Air throughout, oxygen for the last minutes at the named depth and on the ascent from it."""
    last = max(i for i, r in enumerate(rows) if r.is_travel)
    if own is not None:
        minutes, provenance, with_patient = float(own), "read", False
        depth = rows[last].start
        more: dict[str, Any] = {"attendant_rule": f"the unit's own: oxygen {minutes:g} min before the ascent"}
    else:
        rule = attendant_oxygen(name, extensions=extensions, exposed_before=exposed_before, altitude=altitude)
        require_provenance(rule.provenance, f"oxygen of the attendant, {name}")
        minutes, provenance, with_patient = rule.minutes, rule.provenance, rule.with_patient
        depth = f"{rule.depth:g}"
        more = {"attendant_rule": rule.text, "attendant_provenance": rule.provenance}
        if not any(r.start == depth for r in rows):  # the whole table at another depth
            depth = rows[last].start
    if with_patient:
        return _cycled(rows, "late_oxygen"), more
    if own is None and rule.ascent == "no" and not minutes:
        return [_on_air(r) for r in rows], more
    last = max(i for i, r in enumerate(rows) if r.is_travel and r.start == depth)
    breathed: list[Segment] = []
    owed = minutes
    for i in range(last - 1, -1, -1):
        row = rows[i]
        on_oxygen = min(owed, row.minutes) if not row.is_travel and row.start == depth else 0.0
        owed -= on_oxygen
        if on_oxygen:
            breathed.insert(
                0, replace(row, minutes=on_oxygen, gas="oxygen", part="oxygen", provenance=provenance)
            )
        if row.minutes - on_oxygen > 0.0:
            breathed.insert(0, _on_air(replace(row, minutes=row.minutes - on_oxygen)))
    for row in rows[last:]:
        part = "travel on oxygen" if row.is_travel else "oxygen"
        breathed.append(replace(row, gas="oxygen", part=part))
    more |= {"attendant_oxygen_owed": minutes, "attendant_oxygen_given": minutes - owed}
    if owed > 0.0:
        outside_validity(
            f"the attendant owes {minutes:g} min of oxygen at {depth} and {minutes - owed:g} fit: lengthen "
            "the stay if the patient allows, else give what fits and watch for 1 h (from memory)"
        )
    return breathed, more
