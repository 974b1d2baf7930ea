"""What inside attendants owe: oxygen before the ascent, and time at the surface after it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from gasphys.errors import RangeError
from gasphys.policy import weakest
from gasphys.quantities import quantity
from gasphys.schedules.data import read_rows
from gasphys.units import convert

__all__ = ["Obligation", "attendant_oxygen", "surface_intervals"]


@dataclass(frozen=True)
class Obligation:
    """Oxygen an attendant owes.

    Parameters
    ----------
    table : str
        Name of the schedule.
    minutes : float
        Minutes of oxygen before the ascent.
    with_patient : bool
        Instead: in the patient's periods, from 2 h before leaving 30 fsw.
    depth : float
        Where [fsw].
    ascent : str
        Whether the ascent is on oxygen too: "yes", "no" or "not stated".
    edition, provenance, source : str
        Who says so, and how it is known.
    note : str
        What else is said.
    """

    table: str
    minutes: float
    with_patient: bool
    depth: float
    ascent: str
    edition: str
    provenance: str
    source: str
    note: str = ""

    @property
    def text(self) -> str:
        """The rule as a sentence."""
        ends = {"yes": " and the ascent", "no": "", "not stated": ", ascent not stated"}[self.ascent]
        if self.with_patient:
            what = f"oxygen in the patient's periods from 2 h before leaving {self.depth:g} fsw{ends}"
        elif self.minutes:
            what = f"oxygen for the last {self.minutes:g} min at {self.depth:g} fsw{ends}"
        elif self.ascent == "yes":
            what = f"oxygen during the ascent from {self.depth:g} fsw"
        else:
            what = "no oxygen"
        more = f"; {self.note}" if "not stated" in self.note else ""
        return f"{what} ({self.edition}; {self.provenance}{more})"


def attendant_oxygen(
    table: str, extensions: int = 0, exposed_before: bool = False, altitude: Any = 0.0
) -> Obligation:
    """Return the oxygen an inside attendant owes.

    Parameters
    ----------
    table : str
        Name of the treatment table.
    extensions : int
        Extensions of the patient's table.
    exposed_before : bool
        Under pressure in the previous 12 h.
    altitude : float or str
        Altitude of the chamber [m].

    Returns
    -------
    Obligation
        The rule, with edition and provenance.

    Raises
    ------
    RangeError
        If no rule is known for the table, or for that altitude.

    Notes
    -----
    The values for altitudes above 2500 ft are remembered, with some doubt. At altitude the manual's
    addition for an earlier exposure is printed for sea level; it is added here all the same, and the
    provenance is then the weaker one.

    Examples
    --------
    >>> attendant_oxygen("usn_6", extensions=2, exposed_before=True).minutes
    120.0
    >>> print(attendant_oxygen("usn_9").text)
    oxygen for the last 15 min at 45 fsw and the ascent (Revision 4 Change A p 21-26; read)
    """
    one = quantity("altitude")
    meters = one.from_text(altitude) if isinstance(altitude, str) else float(altitude)
    if not one.possible[0] <= meters <= one.possible[1]:
        raise one.range_error(meters)
    feet = round(float(convert(max(meters, 0.0), "m", "ft")))
    mine = [r for r in read_rows("attendants.csv") if r["table"] == table and r["depth"]]
    if not mine:
        raise RangeError(
            f"{table}: no oxygen rule for attendants is known for this schedule; the unit's own applies"
        )
    fits = [
        r
        for r in mine
        if int(r["extensions_from"]) <= extensions <= int(r["extensions_to"])
        and int(r["altitude_from"]) <= feet <= int(r["altitude_to"])
    ]
    base = [r for r in fits if r["exposed"] == "no"]
    if not base:
        raise RangeError(
            f"{table}, {extensions} extensions, altitude {meters:g} m ({feet} ft): no oxygen rule for "
            "attendants is known; the unit's own applies"
        )
    row = base[0]
    used = [row]
    minutes = 0.0 if row["minutes"] == "patient" else float(row["minutes"])
    unstated = ""
    if exposed_before:
        added = [r for r in fits if r["exposed"] == "more"]
        used += added
        minutes += sum(float(r["minutes"]) for r in added)
        unstated = "" if added else "what more is owed after an exposure in the previous 12 h is not stated"
    return Obligation(
        table=table,
        minutes=minutes,
        with_patient=row["minutes"] == "patient",
        depth=float(row["depth"]),
        ascent=row["ascent"],
        edition="; ".join(dict.fromkeys(r["edition"] for r in used)),
        provenance=weakest([r["provenance"] for r in used]),
        source=row["source"],
        note="; ".join(n for n in (*(r["note"] for r in used), unstated) if n),
    )


def surface_intervals(table: str) -> tuple[dict[str, str], ...]:
    """Return how long an attendant stays at the surface before what comes next.

    Parameters
    ----------
    table : str
        Name of the treatment table tended.

    Returns
    -------
    tuple of dict
        ``next`` ("treatment", "no-stop dive", "dive with stops", "flying", "near the chamber"),
        ``hours``, ``edition``, ``provenance``, ``source``, ``note``; empty where no rule is known.

    Examples
    --------
    >>> {r["next"]: r["hours"] for r in surface_intervals("usn_6")}["flying"]
    '24'
    >>> surface_intervals("clinical_2_4_atm")
    ()
    """
    return tuple(r for r in read_rows("intervals.csv") if table in r["after"].split())
