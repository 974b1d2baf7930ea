"""Read a course file: sessions by date and time, each a schedule by name or a recorder's log."""

from __future__ import annotations

import csv
import datetime
import functools
import io
import itertools
import os
import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from gasphys.doses.course import Course, Session, overlap
from gasphys.errors import GasphysError, InputFileError, unknown_name
from gasphys.exposure import Exposure
from gasphys.quantities import quantity
from gasphys.schedules import treatment
from gasphys.toml_files import TomlFile, parse_toml, read_text

__all__ = ["read_course"]

_COLUMNS = (
    "date",
    "time",
    "schedule",
    "log",
    "person",
    "extensions_deep",
    "extensions_shallow",
    "attendant",
    "descent",
    "surface_pressure",
)


@dataclass(frozen=True)
class _Place:
    """Where a cell stands, for errors."""

    path: str
    line: int | None
    columns: Mapping[str, int]

    def error(self, message: str, remedy: str, column: str = "") -> InputFileError:
        return InputFileError(
            message, path=self.path, line=self.line, column=self.columns.get(column), remedy=remedy
        )


def read_course(path: str | os.PathLike[str], person: str | None = None) -> Course:
    """Read a course file.

    Parameters
    ----------
    path : path
        CSV with the columns ``date`` (2042-03-03), ``time`` (08:00), ``schedule`` (a name that
        :func:`gasphys.schedules.treatment` knows) or ``log`` (a recorder's CSV, beside the course
        file), and ``person`` (a code); optional ``extensions_deep``, ``extensions_shallow``,
        ``attendant`` (yes or no), ``descent`` (a gas), ``surface_pressure`` (with unit). Or TOML with
        a ``[[session]]`` table for each, of the same fields, and what all share above them.
    person : str, optional
        Whose sessions; needed where the file holds several people.

    Returns
    -------
    Course
        In order of time, however the file is ordered.

    Raises
    ------
    InputFileError
        With file, line, column and remedy.

    Examples
    --------
    >>> import tempfile
    >>> file = Path(tempfile.mkdtemp()) / "course.csv"
    >>> _ = file.write_text("date,time,schedule,person\\n2042-03-03,08:00,usn_9,P-01\\n")
    >>> course = read_course(file)
    >>> course.person, course.sessions[0].label
    ('P-01', 'usn_9')
    """
    text = read_text(path)
    toml = Path(path).suffix.lower() == ".toml"
    rows = _from_toml(text, str(path)) if toml else _from_csv(text, str(path))
    people = list(dict.fromkeys(str(row["person"]) for row, _ in rows))
    if person is None and len(people) > 1:
        raise InputFileError(
            f"sessions of {len(people)} people: {', '.join(p or 'unnamed' for p in people)}",
            path=path,
            remedy="say whose, person=",
        )
    if person is not None and person not in people:
        raise InputFileError(
            str(unknown_name("person", person, people)), path=path, remedy="correct the person's code"
        )
    chosen = people[0] if person is None else person
    read = functools.cache(_exposure)
    found = []
    for row, place in rows:
        if str(row["person"]) == chosen:
            found.append((_session(row, place, read), place))
    found.sort(key=lambda pair: pair[0].start)
    for (before, _), (after, place) in itertools.pairwise(found):
        if after.start < before.end:
            raise place.error(overlap(before, after), "correct its date or time", "time")
    return Course(tuple(session for session, _ in found), chosen)


def _from_csv(text: str, path: str) -> list[tuple[dict[str, Any], _Place | _TomlPlace]]:
    lines = text.splitlines()
    numbers = [n for n, line in enumerate(lines, 1) if line.strip() and not line.lstrip().startswith("#")]
    if not numbers:
        raise InputFileError(
            "the file is empty", path=path, remedy="begin with the header date,time,schedule"
        )
    head = next(csv.reader(io.StringIO(lines[numbers[0] - 1])))
    names = [h.strip() for h in head]
    columns = {name: k for k, name in enumerate(names, 1)}
    place = _Place(path, numbers[0], columns)
    for name in names:
        if name not in _COLUMNS:
            raise place.error(str(unknown_name("column", name, _COLUMNS)), "correct the header", name)
    if len(columns) != len(names):
        raise place.error("a column stands twice", "keep one of them")
    for needed in ("date", "time"):
        if needed not in columns:
            raise place.error(f"there is no column {needed}", f"add {needed} to the header")
    rows: list[tuple[dict[str, Any], _Place | _TomlPlace]] = []
    for number in numbers[1:]:
        here = _Place(path, number, columns)
        cells = [c.strip() for c in next(csv.reader(io.StringIO(lines[number - 1])))]
        if len(cells) != len(names):
            raise here.error(f"{len(cells)} cells, the header has {len(names)}", "fill or remove cells")
        rows.append(({**dict.fromkeys(_COLUMNS, ""), **dict(zip(names, cells, strict=True))}, here))
    if not rows:
        raise place.error("no session follows the header", "add a line a session")
    return rows


def _from_toml(text: str, path: str) -> list[tuple[dict[str, Any], _Place | _TomlPlace]]:
    file = parse_toml(text, path, "write TOML tables [[session]]")
    shared = {key: value for key, value in file.data.items() if key != "session"}
    given = file.data.get("session")
    if not isinstance(given, list) or not given:
        raise file.error("no [[session]] table", "begin every session with a line [[session]]")
    for key in shared:
        if key not in _COLUMNS:
            raise file.error(
                str(unknown_name("field", key, _COLUMNS)), "correct the field", key=key, table=""
            )
    rows: list[tuple[dict[str, Any], _Place | _TomlPlace]] = []
    for number, row in enumerate(given):
        here = _TomlPlace(file, number)
        for key in row:
            if key not in _COLUMNS:
                raise here.error(str(unknown_name("field", key, _COLUMNS)), "correct the field", key)
        rows.append(({**dict.fromkeys(_COLUMNS, ""), **shared, **row}, here))
    return rows


@dataclass(frozen=True)
class _TomlPlace:
    """As a place, for one ``[[session]]``."""

    file: TomlFile
    number: int

    @property
    def path(self) -> str:
        return self.file.path

    def error(self, message: str, remedy: str, column: str = "") -> InputFileError:
        return self.file.error(message, remedy, key=column, table="session", number=self.number)


def _session(row: dict[str, Any], place: _Place | _TomlPlace, read: Callable[..., Exposure]) -> Session:
    start = datetime.datetime.combine(_date(row["date"], place), _time(row["time"], place))
    schedule, log = str(row["schedule"]), str(row["log"])
    if bool(schedule) == bool(log):
        raise place.error(
            "a session is a schedule or a log, one of them",
            "name one",
            "log" if log else "schedule",
        )
    counts = tuple(_whole(row[k], place, k) for k in ("extensions_deep", "extensions_shallow"))
    attendant = _yes(row["attendant"], place)
    column = "log" if log else "schedule"
    surface = str(row["surface_pressure"])
    if surface:
        try:
            quantity("surface_pressure").from_text(surface)
        except GasphysError as error:
            raise place.error(str(error), "write a pressure such as 101.0 kPa", "surface_pressure") from None
    if log and (any(counts) or attendant or row["descent"]):
        raise place.error("extensions, attendant and descent belong to a schedule", "leave them empty", "log")
    name = str(Path(place.path).parent / log) if log else schedule
    try:
        exposure = read(name, bool(log), counts, attendant, str(row["descent"]) or "air", surface)
    except InputFileError:
        raise  # it tells the log's own line
    except GasphysError as error:
        raise place.error(str(error), f"correct the {column}", column) from None
    return Session(start, exposure, Path(log).name if log else schedule)


def _exposure(
    name: str, is_log: bool, counts: tuple[int, int], attendant: bool, descent: str, surface: str
) -> Exposure:
    if is_log:
        return Exposure.from_csv(name, surface_pressure=surface or None)
    more: dict[str, Any] = {"surface_pressure": surface} if surface else {}
    return treatment(name, counts[0], counts[1], attendant=attendant, descent=descent, **more)


def _date(value: Any, place: _Place | _TomlPlace) -> datetime.date:
    if isinstance(value, datetime.datetime) or not isinstance(value, datetime.date):
        try:
            return datetime.date.fromisoformat(str(value))
        except ValueError:
            raise place.error(f"date {value!r} is not a date", "write it as 2042-03-03", "date") from None
    return value


def _time(value: Any, place: _Place | _TomlPlace) -> datetime.time:
    if isinstance(value, datetime.time):
        return value
    if re.fullmatch(r"\d{2}:\d{2}(:\d{2})?", str(value)):
        try:
            return datetime.time.fromisoformat(str(value))
        except ValueError:
            pass
    raise place.error(f"time {value!r} is not a time of day", "write it as 08:00", "time")


def _whole(value: Any, place: _Place | _TomlPlace, column: str) -> int:
    if value == "":
        return 0
    if isinstance(value, int) and not isinstance(value, bool):
        return value
    if re.fullmatch(r"\d+", str(value)):
        return int(value)
    raise place.error(f"{column} {value!r} is not a whole number", "write a whole number", column)


def _yes(value: Any, place: _Place | _TomlPlace) -> bool:
    words = {"": False, "no": False, "yes": True, "False": False, "True": True}
    if str(value) not in words:
        raise place.error(f"attendant {value!r}", "write yes or no", "attendant")
    return words[str(value)]
