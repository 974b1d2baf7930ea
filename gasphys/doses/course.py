"""A course of treatments or a series of dives, and what adds up over it."""

from __future__ import annotations

import datetime
import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.constants import ARIELI_EXPONENT, ATMOSPHERE
from gasphys.doses.measures import MEASURES, clipped
from gasphys.doses.model import counted, oxygen
from gasphys.doses.pulmonary import (
    POWER_FIT,
    esot_ramp,
    vital_capacity_after_recovery,
    vital_capacity_recovery_rate,
)
from gasphys.errors import ExposureError
from gasphys.exposure import Exposure

__all__ = ["Course", "Session", "course_doses"]

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Session:
    """One treatment or dive of a course.

    Parameters
    ----------
    start : datetime
        When it begins.
    exposure : Exposure
        Surface to surface, one scenario.
    label : str
        Name of the schedule or of the log.
    """

    start: datetime.datetime
    exposure: Exposure
    label: str = ""

    @property
    def end(self) -> datetime.datetime:
        """When it ends."""
        return self.start + datetime.timedelta(minutes=float(self.exposure.duration))

    @property
    def day(self) -> datetime.date:
        """Date on which it begins."""
        return self.start.date()


@dataclass(frozen=True)
class Course:
    """Sessions of one person, in order of time.

    Parameters
    ----------
    sessions : tuple of Session
        In order; they must not overlap.
    person : str
        A code, never a name.

    Raises
    ------
    ExposureError
        If there is no session, or one begins before the last has ended.

    Examples
    --------
    >>> noon = datetime.datetime(2042, 3, 3, 12)
    >>> one = Exposure.start("oxygen").stay(60)
    >>> later = noon + datetime.timedelta(days=1)
    >>> course = Course((Session(noon, one), Session(later, one)), "P-01")
    >>> course.exposure().duration
    1500.0
    """

    sessions: tuple[Session, ...]
    person: str = ""

    def __post_init__(self) -> None:
        if not self.sessions:
            raise ExposureError("a course needs at least one session")
        for before, after in zip(self.sessions, self.sessions[1:], strict=False):
            if after.start < before.end:
                raise ExposureError(overlap(before, after))

    def intervals(self) -> Array:
        """Return the time from the end of each session to the start of the next [min].

        Returns
        -------
        array
            One fewer than sessions.

        Examples
        --------
        >>> noon = datetime.datetime(2042, 3, 3, 12)
        >>> Course((Session(noon, Exposure.start("oxygen").stay(60)),)).intervals()
        array([], dtype=float64)
        """
        pairs = zip(self.sessions, self.sessions[1:], strict=False)
        return np.array([(b.start - a.end).total_seconds() / 60.0 for a, b in pairs], dtype=float)

    def exposure(self) -> Exposure:
        """Return the whole course as one exposure, intervals on air at the surface between.

        Returns
        -------
        Exposure
            Joined; ``session`` numbers the sessions.

        Examples
        --------
        >>> noon = datetime.datetime(2042, 3, 3, 12)
        >>> Course((Session(noon, Exposure.start("oxygen").stay(60)),)).exposure().duration
        60.0
        """
        with_intervals = [
            one.exposure.then(minutes) if minutes > 0.0 else one.exposure
            for one, minutes in zip(self.sessions, [*self.intervals(), 0.0], strict=True)
        ]
        whole = Exposure.join(with_intervals)
        count = f"{len(self.sessions)} session{'s' if len(self.sessions) > 1 else ''}"
        title = f"course of {count}" + (f", {self.person}" if self.person else "")
        return replace(whole, attrs={"title": title, "start": self.sessions[0].start.isoformat()})


def overlap(before: Session, after: Session) -> str:
    """Say that a session begins before the one before it has ended."""
    return (
        f"the session of {after.start:%Y-%m-%d %H:%M} begins before that of {before.start:%Y-%m-%d %H:%M} "
        f"has ended ({before.end:%Y-%m-%d %H:%M})"
    )


# -- Doses of a course -----------------------------------------------------------------------------

SUMS = "sum of all sessions, no recovery"
RECOVERS = "Arieli 2002: recovery between sessions at the rate of the session before"
_ALONE = "each session by itself"

#: Measures whose sum over a course is told, and how.
_RULES = {
    "uptd": SUMS,
    "esot": SUMS,
    "harabin_vital_capacity_loss": SUMS,
    "arieli_pulmonary_index": RECOVERS,
    "vital_capacity_loss": RECOVERS,
    "pulmonary_toxicity_incidence": RECOVERS,
}


def course_doses(
    course: Course,
    measures: Sequence[str] | str = ("uptd", "esot", "vital_capacity_loss", "noaa_cns", "cns_risk_dry_rest"),
    count: str = "all",
    *,
    role: str = "patient",
) -> xr.Dataset:
    """Doses of a course, session by session.

    Parameters
    ----------
    course : Course
        Sessions of one person.
    measures : sequence of str
        Names of :data:`gasphys.doses.MEASURES`, or "all".
    count : {"all", "table", "oxygen"}
        What counts of a session, as for :func:`gasphys.doses.oxygen`.
    role : {"diver", "patient", "attendant"}
        Whose course it is.

    Returns
    -------
    Dataset
        On ``measure`` and ``session``: ``session_dose``, ``day_dose`` (all sessions of its date so
        far) and ``course_dose`` (after it, by the measure's ``course_rule``; NaN where a measure is
        told for each session only), which follows from ``session_total``, ``recovery_po2`` and
        ``interval_before``; ``course_reason`` (why it is not defined, or a flag); ``session_start``,
        ``session_label``; and of one session ``status``, ``reason``, ``context`` and the seizure rates,
        as :func:`oxygen` gives.

    Raises
    ------
    UnknownNameError
        If a measure, count or role is unknown.

    Notes
    -----
    The dry interval between sessions counts nothing. K and vital capacity recover between sessions
    at the rate of the PO2 that would have given the same K in the same time; that rate is known from
    1.1 to 2.5 atm only. No other measure recovers: a sum over weeks was never tested.

    Examples
    --------
    >>> noon = datetime.datetime(2042, 3, 3, 12)
    >>> from gasphys.schedules import treatment
    >>> sessions = [Session(noon + datetime.timedelta(days=d), treatment("usn_9")) for d in range(3)]
    >>> ds = course_doses(Course(tuple(sessions)), ["uptd"], count="oxygen")
    >>> ds.course_dose.values[0].round(1).tolist()
    [274.0, 547.9, 821.9]
    """
    names = list(MEASURES) if isinstance(measures, str) and measures == "all" else measures
    names = [names] if isinstance(names, str) else list(names)
    known: dict[int, xr.Dataset] = {}
    single = []
    for one in course.sessions:
        if one.exposure.dims:
            raise ExposureError("a session of several scenarios; pick one first")
        if id(one.exposure) not in known:
            known[id(one.exposure)] = oxygen(one.exposure, names, count, role=role)
        single.append(known[id(one.exposure)])
    dose = np.stack([ds["dose"].values for ds in single], axis=-1)
    total = np.stack([ds["total"].values for ds in single], axis=-1)
    intervals = course.intervals()
    before = [_equivalent_po2(one.exposure, count) for one in course.sessions]
    days = [one.day for one in course.sessions]
    whole, day = np.full_like(dose, np.nan), np.full_like(dose, np.nan)
    for k, name in enumerate(names):
        measure = MEASURES[name]
        if measure.whole is None:
            summed = _by_day(total[k], days)
            with np.errstate(all="ignore"):
                day[k] = measure.dose(summed)
        else:
            day[k] = dose[k]
        rule = _RULES.get(name, _ALONE)
        if rule == SUMS:
            whole[k] = measure.dose(np.cumsum(total[k]))
        elif rule == RECOVERS:
            whole[k] = measure.dose(recovering(total[k], intervals, before))
    first = single[0]
    dims = ("measure", "session")
    po2_meaning = "PO2 of the same index K in the same time at and above 1 atm; sets the recovery"

    def number(values: Array, meaning: str) -> tuple[Any, ...]:
        return (dims, values, {"units": "1", "long_name": f"{meaning}, in the unit of the variable unit"})

    ds = xr.Dataset(
        {
            "session_dose": number(dose, "dose of the session"),
            "day_dose": number(day, "dose of its date so far"),
            "course_dose": number(whole, "dose of the course after it, by the course rule"),
            "session_total": (
                dims,
                total,
                {"units": "1", "long_name": "sum over the pieces that the dose of the session follows from"},
            ),
            "recovery_po2": ("session", np.array(before), {"units": "kPa", "long_name": po2_meaning}),
            "course_rule": ("measure", [_RULES.get(n, _ALONE) for n in names], {"long_name": "course rule"}),
            "course_reason": (
                "measure",
                [_outside_recovery(before[:-1]) if _RULES.get(n) == RECOVERS else "" for n in names],
                {"long_name": "why course_dose is not defined, or a flag"},
            ),
            "status": (
                dims,
                np.stack([d["status"].values for d in single], axis=-1),
                {"long_name": "of the session: beyond, within, not applicable or not judged"},
            ),
            "reason": (
                dims,
                np.stack([d["reason"].values for d in single], axis=-1).astype(str),
                {"long_name": "why it is not applicable, or a flag"},
            ),
            "context": (
                dims,
                np.stack([d["context"].values for d in single], axis=-1).astype(str),
                {"long_name": "what must be read beside the number"},
            ),
            "interval_before": (
                "session",
                np.array([np.nan, *intervals]),
                {"units": "min", "long_name": "time since the session before"},
            ),
            "session_start": (
                "session",
                [one.start.isoformat(timespec="minutes") for one in course.sessions],
                {"long_name": "start, ISO 8601"},
            ),
            "session_label": (
                "session",
                [one.label for one in course.sessions],
                {"long_name": "schedule or log"},
            ),
            **{
                word: ("measure", first[word].values, dict(first[word].attrs))
                for word in (
                    "limit_value",
                    "limit",
                    "authority",
                    "endpoint",
                    "population",
                    "provenance",
                    "unit",
                )
            },
        },
        coords={"measure": names, "session": np.arange(len(course.sessions))},
    )
    for word in ("seizure_rate_low", "seizure_rate_high"):
        if word in first:
            values = np.stack([d[word].values for d in single], axis=-1)
            ds[word] = (dims, values, dict(first[word].attrs))
    ds.attrs = {
        **{k: first.attrs[k] for k in ("Conventions", "source", "references", "comment", "count", "role")},
        "title": f"oxygen doses of a course of {len(course.sessions)} sessions",
        "person": course.person,
        "history": "as given",
    }
    return ds


def _by_day(total: Array, days: Sequence[datetime.date]) -> Array:
    """Running sum, begun again at each date."""
    found, sum_today = np.zeros(len(days)), 0.0
    for n, day in enumerate(days):
        sum_today = total[n] + (sum_today if n and days[n - 1] == day else 0.0)
        found[n] = sum_today
    return found


def _equivalent_po2(exposure: Exposure, count: str) -> float:
    """PO2 [kPa] of the same K in the same time at and above 1 atm: what the recovery rate needs."""
    pieces = exposure.pieces()
    mask = counted(exposure, count)
    start, end, minutes = clipped(pieces.start_po2, pieces.end_po2, pieces.duration, POWER_FIT[0], np.inf)
    minutes = np.where(mask, minutes, 0.0)
    if not minutes.sum() > 0.0:
        return math.nan
    dose = float(np.where(minutes > 0.0, esot_ramp.raw(start, end, minutes), 0.0).sum())
    power: float = (dose / float(minutes.sum())) ** (2.0 / float(ARIELI_EXPONENT))
    return float(ATMOSPHERE) * power


def _outside_recovery(po2: Sequence[float]) -> str:
    """Say of which sessions the recovery rate is not known; nothing where it is of all."""
    one = vital_capacity_recovery_rate.arguments[0]
    low = [n for n, p in enumerate(po2, 1) if not p >= one.possible[0]]
    outside = [n for n, p in enumerate(po2, 1) if p >= one.possible[0] and not one.low <= p <= one.high]
    said = []
    if low:
        said.append(f"no recovery rate is known after session {low[0]}, whose PO2 is too low: not defined")
    if outside:
        low_atm, high_atm = (x / ATMOSPHERE for x in (one.low, one.high))
        sessions = "session" if len(outside) == 1 else f"{len(outside)} sessions, first"
        said.append(
            f"after {sessions} {outside[0]} the recovery rate is extrapolated: its data span "
            f"{low_atm:.2g} to {high_atm:.2g} atm"
        )
    return "; ".join(said)


def recovering(total: Array, intervals: Array, po2: Sequence[float] | Array) -> Array:
    """Follow the sum over sessions of ESOT, the loss of vital capacity recovering in between.

    Parameters
    ----------
    total : array
        Sum of each session.
    intervals : array
        Time between sessions [min].
    po2 : sequence of float
        PO2 of each session that sets the rate [kPa].

    Returns
    -------
    array
        Sum after each session.

    Examples
    --------
    >>> recovering(np.array([100.0]), np.array([]), [200.0]).tolist()
    [100.0]
    """
    found = np.zeros(len(total))
    left = 0.0
    for n, added in enumerate(total):
        found[n] = left + added
        if n < len(intervals):
            lowest = vital_capacity_recovery_rate.arguments[0].possible[0]
            if not po2[n] >= lowest:
                left = math.nan
                continue
            # Loss and K are proportional: what is left of one is left of the other.
            kept = float(vital_capacity_after_recovery.raw(1.0, po2[n], intervals[n]))
            left = found[n] * kept**0.5
    return found
