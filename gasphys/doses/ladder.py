"""Sessions left: how many more of a course each limit leaves room for, as ladders."""

from __future__ import annotations

import datetime
import math
import textwrap
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.doses.course import RECOVERS, SUMS, Course, course_doses
from gasphys.doses.model import oxygen
from gasphys.doses.pulmonary import repeated_exposure_dose
from gasphys.errors import unknown_name
from gasphys.exposure import Exposure
from gasphys.limits import load
from gasphys.quantities import CAUTION

__all__ = ["course_text", "ladder_text", "sessions_left"]

Array = NDArray[np.float64]

_ROUNDING = 1e-9


@dataclass(frozen=True)
class _Rung:
    """One ladder: a limit, what is used, what a session adds, how many are left."""

    id: str
    title: str
    measure: str
    unit: str
    limit: float
    used: float
    each: float
    climbed: int
    left: float
    rule: str
    roles: tuple[str, ...]
    authority: str
    provenance: str
    source: str
    reason: str = ""
    passed: float = math.nan


def sessions_left(
    course: Course,
    *,
    next_exposure: Exposure | None = None,
    count: str = "all",
    role: str = "patient",
) -> xr.Dataset:
    """How many more sessions each limit leaves room for.

    Parameters
    ----------
    course : Course
        Sessions done so far.
    next_exposure : Exposure, optional
        What each further session is; by default the last one again.
    count : {"all", "table", "oxygen"}
        What counts of a session.
    role : {"diver", "patient", "attendant"}
        Whose course it is: limits made for others are "not applicable", shown as context.

    Returns
    -------
    Dataset
        On ``ladder``: ``limit_value``, ``used``, ``each`` (what a session adds), ``rungs_done`` (the
        sessions or days that count), ``sessions_left``
        (inf: no end at this rhythm; NaN: not defined), ``passed_with`` (number of the session that
        went beyond), ``status``, ``reason``, ``rule``, ``title``, ``measure``, ``unit``, ``authority``,
        ``for_whom``, ``provenance``; attribute ``any_sign``, the risk of any nervous system sign in one
        session in words, with the seizure rates of clinics.

    Raises
    ------
    UnknownNameError
        If a role or count is unknown.

    Notes
    -----
    Arithmetic, not advice. The ladders count sessions of one a day. Cumulative pulmonary doses have
    no recovery; the tables behind them were made from single exposures and saturation missions.

    Examples
    --------
    >>> from gasphys.doses import Session
    >>> from gasphys.schedules import treatment
    >>> noon = datetime.datetime(2042, 3, 3, 12)
    >>> ds = sessions_left(Course((Session(noon, treatment("usn_9")),)), count="oxygen")
    >>> float(ds.sessions_left.sel(ladder="uptd_10_percent"))
    4.0
    """
    if role not in ("diver", "patient", "attendant"):
        raise unknown_name("role", role, ("diver", "patient", "attendant"))
    names = ("uptd", "arieli_pulmonary_index", "noaa_cns_day")
    asked = (*names, *_SIGNS[role])
    done = course_doses(course, asked, count, role=role)
    if next_exposure is None:
        coming = done.isel(session=-1).rename(session_dose="dose")
    else:
        coming = oxygen(next_exposure, asked, count, role=role)
    each = {n: float(coming["dose"].sel(measure=n)) for n in names}
    rungs = [
        *_cumulative(course, done, each["uptd"]),
        _mission(course, done, each["uptd"]),
        _index_days(course, done, each["arieli_pulmonary_index"]),
        _noaa_day(
            course, done, each["noaa_cns_day"], str(coming["reason"].sel(measure="noaa_cns_day").values)
        ),
    ]
    status, reasons = [], []
    for rung in rungs:
        reason = rung.reason
        if math.isnan(rung.left):
            status.append("not applicable")
        elif role not in rung.roles:
            status.append("not applicable")
            made_for = " and ".join(f"{r}s" for r in rung.roles)
            reason = "; ".join(
                r for r in (f"made for {made_for}: not applicable, shown as context", reason) if r
            )
        else:
            over = rung.used > rung.limit * (1.0 + _ROUNDING)
            status.append("beyond" if over else "within")
        reasons.append(reason)

    def words(key: str, meaning: str) -> tuple[Any, ...]:
        return ("ladder", [getattr(r, key) for r in rungs], {"long_name": meaning})

    def numbers(key: str, meaning: str) -> tuple[Any, ...]:
        return ("ladder", [float(getattr(r, key)) for r in rungs], {"units": "1", "long_name": meaning})

    ds = xr.Dataset(
        {
            "limit_value": numbers("limit", "the limit, in the unit of the variable unit"),
            "used": numbers("used", "what the course has used of it"),
            "each": numbers("each", "what a further session adds"),
            "rungs_done": numbers("climbed", "sessions, or days, that count so far"),
            "sessions_left": numbers("left", "further sessions within the limit; inf: no end"),
            "passed_with": numbers("passed", "number of the session that went beyond, from 1"),
            "status": ("ladder", status, {"long_name": "beyond, within or not applicable"}),
            "reason": ("ladder", reasons, {"long_name": "why it is not applicable"}),
            "rule": words("rule", "how sessions add"),
            "title": words("title", "what is limited"),
            "measure": words("measure", "dose measure"),
            "unit": words("unit", "unit of limit_value, used and each"),
            "authority": words("authority", "whose limit it is"),
            "for_whom": ("ladder", [", ".join(r.roles) for r in rungs], {"long_name": "made for"}),
            "provenance": words("provenance", "how the number is known"),
        },
        coords={"ladder": [r.id for r in rungs]},
        attrs={
            **{k: v for k, v in done.attrs.items() if k != "title"},
            "title": f"sessions left after {len(course.sessions)} sessions",
            "references": "; ".join(dict.fromkeys(r.source for r in rungs)),
            "sessions_done": len(course.sessions),
            "any_sign": _any_sign(done, coming, role),
            "next_session": "as given"
            if next_exposure is not None
            else course.sessions[-1].label or "as the last",
        },
    )
    return ds


#: Fits of the risk of any nervous system sign that come nearest to a role.
_SIGNS = {
    "diver": ("cns_risk_active", "cns_risk_immersed_rest"),
    "patient": ("cns_risk_dry_rest",),
    "attendant": ("cns_risk_dry_rest",),
}


def _any_sign(done: xr.Dataset, coming: xr.Dataset, role: str) -> str:
    """Say the highest risk of any sign in one session, and the seizure rates that must stand beside it."""
    shown, context = [], ""
    for name in _SIGNS[role]:
        before, next_one = done.sel(measure=name), coming.sel(measure=name)
        risks = [*before["session_dose"].values, float(next_one["dose"].values)]
        contexts = [*before["context"].values, str(next_one["context"].values)]
        highest = max(range(len(risks)), key=lambda k: np.nan_to_num(risks[k], nan=-1.0))
        risk = risks[highest]
        fit = name.removeprefix("cns_risk_").replace("_", " ")
        shown.append(f"{fit} " + ("not applicable" if math.isnan(risk) else f"{100.0 * risk:.3g} %"))
        context = context or ("" if math.isnan(risk) else str(contexts[highest]))
    text = f"Risk of any nervous system sign in one session: {', '.join(shown)}; not a seizure probability."
    return text + (f" Beside it: {context}." if context else "")


def _first_beyond(values: Array, limit: float) -> float:
    over = np.flatnonzero(values > limit * (1.0 + _ROUNDING))
    return float(over[0] + 1) if over.size else math.nan


def _room(limit: float, used: float, each: float) -> float:
    if not each > 0.0:
        return math.inf if used <= limit * (1.0 + _ROUNDING) else 0.0
    return float(max(0.0, math.floor((limit * (1.0 + _ROUNDING) - used) / each)))


def _cumulative(course: Course, done: xr.Dataset, each: float) -> list[_Rung]:
    sums = done["course_dose"].sel(measure="uptd").values
    rungs = []
    for limit in load("default"):
        if limit.id in ("uptd_2_percent", "uptd_10_percent"):
            rungs.append(
                _Rung(
                    limit.id,
                    limit.title,
                    "uptd",
                    "UPTD",
                    limit.value,
                    float(sums[-1]),
                    each,
                    len(course.sessions),
                    _room(limit.value, float(sums[-1]), each),
                    f"sum of all sessions, no recovery counted; {limit.conditions}",
                    limit.roles,
                    limit.authority,
                    limit.provenance,
                    limit.source,
                    passed=_first_beyond(sums, limit.value),
                )
            )
    return rungs


def _mission(course: Course, done: xr.Dataset, each: float) -> _Rung:
    """Dose allowed by the number of days with exposure; 300 a day where the total is not printed."""
    sums = done["course_dose"].sel(measure="uptd").values
    days = [len({s.day for s in course.sessions[: n + 1]}) for n in range(len(course.sessions))]
    mission = repeated_exposure_dose.pick(total="mission")  # type: ignore[attr-defined]
    daily = repeated_exposure_dose.pick(total="day")  # type: ignore[attr-defined]
    first = next(x for x in load("default") if x.id == "uptd_day_one")
    printed = int(mission.arguments[0].possible[1])
    last = float(daily.raw(float(daily.arguments[0].possible[1])))

    def allowed(day: int) -> float:
        return float(mission.raw(float(day))) if day <= printed else last * day

    limits = np.array([allowed(d) for d in days])
    over = np.flatnonzero(sums > limits * (1.0 + _ROUNDING))
    used, left = float(sums[-1]), 0
    while left <= printed and used + (left + 1) * each <= allowed(days[-1] + left + 1) * (1.0 + _ROUNDING):
        left += 1
    # Once past the printed days both grow by the same step each day: it holds for good or not at all.
    room: float = left
    if left > printed and each <= last * (1.0 + _ROUNDING):
        room = math.inf
    elif left > printed:
        day = days[-1] + left
        room = left + _room(allowed(day) - used - left * each, 0.0, each - last)
    if used > limits[-1] * (1.0 + _ROUNDING):
        room = 0.0
    return _Rung(
        "uptd_repeated_exposure",
        "Pulmonary oxygen dose by days with exposure",
        "uptd",
        "UPTD",
        float(limits[-1]),
        used,
        each,
        len(course.sessions),
        room,
        f"sum over {days[-1]} day{'s' if days[-1] > 1 else ''} with exposure, then one session a day",
        first.roles,
        "Hamilton, repeated-exposure oxygen",
        mission.provenance,
        first.source,
        passed=float(over[0] + 1) if over.size else math.nan,
    )


def _index_days(course: Course, done: xr.Dataset, each: float) -> _Rung:
    """Days in a row that the day's K allows; a run ends after two days off."""
    by_day: dict[datetime.date, float] = {}
    values = done["day_dose"].sel(measure="arieli_pulmonary_index").values
    for session, value in zip(course.sessions, values, strict=True):
        by_day[session.day] = float(value)
    limits = {x.id: x for x in load("default")}
    two, five, always = (limits[f"pulmonary_index_{w}"] for w in ("2_days", "5_days", "every_day"))
    days = sorted(by_day)
    run = [days[-1]]
    for day in reversed(days[:-1]):
        if (run[-1] - day).days > 2:
            break
        run.append(day)
    highest = max([each, *(by_day[d] for d in run)])
    if math.isnan(highest):
        room, permitted = math.nan, math.nan
    elif highest <= always.value * (1.0 + _ROUNDING):
        room, permitted = math.inf, math.inf
    else:
        permitted = 5.0 if highest <= five.value * (1.0 + _ROUNDING) else 2.0
        permitted = permitted if highest <= two.value * (1.0 + _ROUNDING) else 0.0
        room = max(0.0, permitted - len(run))
    return _Rung(
        "pulmonary_index_days",
        "Days in a row at this pulmonary oxygen index",
        "arieli_pulmonary_index",
        "days",
        permitted,
        float(len(run)),
        1.0,
        len(run),
        room,
        f"K {highest:.4g} a day: {two.value:g} for 2 days, {five.value:g} for 5, then 2 days off; "
        f"{always.value:g} every day",
        two.roles,
        "Risberg & van Ooij 2022",
        two.provenance,
        two.source,
        reason="the index is not defined for these sessions" if math.isnan(highest) else "",
        passed=permitted + 1.0 if len(run) > permitted else math.nan,
    )


def _noaa_day(course: Course, done: xr.Dataset, each: float, reason: str) -> _Rung:
    """Further sessions on the last date, NOAA 24-h total."""
    limit = next(x for x in load("default") if x.id == "noaa_cns_day")
    last = course.sessions[-1].day
    today = [
        float(v)
        for s, v in zip(course.sessions, done["session_dose"].sel(measure="noaa_cns_day").values, strict=True)
        if s.day == last
    ]
    used = float(sum(today))
    defined = not (math.isnan(used) or math.isnan(each))
    return _Rung(
        limit.id,
        limit.title,
        "noaa_cns_day",
        "share",
        limit.value,
        used,
        each,
        len(today),
        _room(limit.value, used, each) if defined else math.nan,
        "further sessions on the last date",
        limit.roles,
        limit.authority,
        limit.provenance,
        limit.source,
        reason="" if defined else reason.split("; the limit (")[0],
    )


# -- In words --------------------------------------------------------------------------------------

_WIDTH = 60


def ladder_text(ds: xr.Dataset) -> str:
    """Return the ladders of a course: a rung for each session done and each one left.

    Parameters
    ----------
    ds : Dataset
        From :func:`sessions_left`.

    Returns
    -------
    str
        A block a limit, then the caution.

    Examples
    --------
    >>> from gasphys.doses import Session
    >>> from gasphys.schedules import treatment
    >>> noon = datetime.datetime(2042, 3, 3, 12)
    >>> ds = sessions_left(Course((Session(noon, treatment("usn_9")),)), count="oxygen")
    >>> print(*ladder_text(ds).splitlines()[5:7], sep="\\n")
    Pulmonary oxygen dose of a 10 % vital capacity loss, UPTD: 4 sessions left
        #----|
    """
    done = int(ds.attrs["sessions_done"])
    lines = [
        f"SESSIONS LEFT after {done}, next: {ds.attrs['next_session']}, as for a {ds.attrs['role']}",
    ]
    for name in ds["ladder"].values:
        row = ds.sel(ladder=name)
        left, passed = float(row["sessions_left"].values), float(row["passed_with"].values)
        status = str(row["status"].values)
        lines.append(f"{row['title'].values}, {row['unit'].values}: {_left(left, status)}")
        if not math.isnan(left):
            lines.append(f"    {_rungs(int(row['rungs_done'].values), left, passed)}")
        if not math.isnan(left):
            limit = float(row["limit_value"].values)
            lines.append(
                f"    used {plain(float(row['used'].values))} of {plain(limit)}, each adds "
                f"{plain(float(row['each'].values))}; {row['rule'].values}"
            )
        lines.append(
            f"    {row['authority'].values}, for {row['for_whom'].values} [{row['provenance'].values}]"
            + (f"; {row['reason'].values}" if str(row["reason"].values) else "")
        )
    lines += textwrap.wrap(ds.attrs["any_sign"], 100, subsequent_indent="  ")
    lines.append("# done, - left, | the limit, > no end at this rhythm. Arithmetic, not advice.")
    return "\n".join([*lines, CAUTION])


def plain(value: float) -> str:
    """Return a number without an exponent; "no limit" where there is none.

    Parameters
    ----------
    value : float
        The number.

    Returns
    -------
    str
        Four digits, or a whole number.

    Examples
    --------
    >>> plain(11781.06), plain(0.24337)
    ('11781', '0.2434')
    """
    if math.isinf(value):
        return "no limit"
    return f"{value:.0f}" if value >= 1000.0 else f"{value:.4g}"


def _left(left: float, status: str) -> str:
    if math.isnan(left):
        return "not applicable"
    words = (
        "no end at this rhythm" if math.isinf(left) else f"{left:.0f} session{'s' if left != 1 else ''} left"
    )
    return f"not applicable ({words})" if status == "not applicable" else words


def _rungs(climbed: int, left: float, passed: float) -> str:
    """Draw the rungs; the limit stands where it was passed, or after the last one left."""
    more = 5 if math.isinf(left) else int(left)
    if math.isnan(passed):
        text = "#" * climbed + "-" * more + (">" if math.isinf(left) else "|")
    else:
        text = "#" * (int(passed) - 1) + "|" + "#" * (climbed - int(passed) + 1)
    return text if len(text) <= _WIDTH else f"{text[: _WIDTH - 12]}... {len(text) - 1} rungs"


def course_text(course: Course, *, role: str = "patient", count: str = "all") -> str:
    """Return a course in words: its sessions, what they add up to, and the ladders.

    Parameters
    ----------
    course : Course
        Sessions of one person.
    role : {"diver", "patient", "attendant"}
        Whose course it is.
    count : {"all", "table", "oxygen"}
        What counts of a session.

    Returns
    -------
    str
        What the command line prints.

    Examples
    --------
    >>> from gasphys.doses import Session
    >>> from gasphys.schedules import treatment
    >>> noon = datetime.datetime(2042, 3, 3, 12)
    >>> print(course_text(Course((Session(noon, treatment("usn_9"), "usn_9"),), "P-01")).splitlines()[0])
    COURSE P-01: 1 session, 2042-03-03
    """
    measures = ("uptd", "esot", "arieli_pulmonary_index", "vital_capacity_loss")
    ds = course_doses(course, measures, count, role=role)
    n, first, last = len(course.sessions), course.sessions[0].day, course.sessions[-1].day
    span = f"{first}" if first == last else f"{first} to {last}"
    lines = [f"COURSE {course.person or 'of one person'}: {n} session{'s' if n > 1 else ''}, {span}", ""]
    lines.append(f"{'session':<30}{'UPTD':>8}{'ESOT':>8}{'K':>8}{'VC loss, %':>12}")
    groups: list[list[int]] = []
    rows = ds["session_dose"].values
    for k in range(n):
        same = (
            groups
            and course.sessions[groups[-1][0]].label == course.sessions[k].label
            and np.array_equal(rows[:, groups[-1][0]], rows[:, k], equal_nan=True)
        )
        if same:
            groups[-1].append(k)
        else:
            groups.append([k])
    for group in groups:
        numbers = f"{group[0] + 1}" if len(group) == 1 else f"{group[0] + 1}-{group[-1] + 1}"
        label = f"{numbers} {course.sessions[group[0]].label}"
        lines.append(f"{label:<30}{_cells(rows[:, group[0]])}")
    lines.append(f"{'after the course':<30}{_cells(ds['course_dose'].values[:, -1])}")
    for name, rule in ((SUMS, "UPTD, ESOT"), (RECOVERS, "K, VC loss")):
        lines.append(f"  {rule}: {name}")
    lines.append("")
    lines.append(ladder_text(sessions_left(course, count=count, role=role)))
    return "\n".join(lines)


def _cells(values: Array) -> str:
    uptd, minutes, index, loss = (float(v) for v in values[:4])
    parts = [
        "-" if math.isnan(v) else text
        for v, text in (
            (uptd, f"{uptd:.1f}"),
            (minutes, f"{minutes:.1f}"),
            (index, f"{index:.1f}"),
            (loss, f"{100.0 * loss:.2f}"),
        )
    ]
    return "".join(f"{p:>{w}}" for p, w in zip(parts, (8, 8, 8, 12), strict=True))
