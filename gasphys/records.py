"""Recorder logs: text files of pressure and breathing gas against time, read into plain arrays.

Harmless faults of real recorders are repaired, each with an entry in the history. Whatever cannot
be repaired without guessing is refused with file, line, column and what to do about it.
"""

from __future__ import annotations

import datetime
import difflib
import functools
import os
import re
from collections.abc import Callable, Collection, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import IO

import numpy as np
from numpy.typing import NDArray

from gasphys.constants import ATMOSPHERE, EN13319_PRESSURE_PER_METER, FSW
from gasphys.errors import GasphysError, InputFileError, UnitError
from gasphys.gas import FORMULAS, Gas
from gasphys.quantities import quantity
from gasphys.surroundings import WATERS
from gasphys.units import convert

__all__ = ["Log", "read_log"]

_File = str | os.PathLike[str] | IO[str] | IO[bytes]
_Array = NDArray[np.float64]

#: Header of a time column to the number of its readings in a minute.
_TIME = {"time_min": 1.0, "time_s": 60.0, "time_hms": 60.0, "time": 60.0}
_START = {"start_min": 1.0, "start_s": 60.0, "start_hms": 60.0, "start": 60.0}
_END = ("end_min", "end_s", "end_hms", "end")


def _absolute(unit: str) -> Callable[[_Array, float], _Array]:
    return lambda values, surface: convert(values, unit, "kPa")


def _gauge(unit: str) -> Callable[[_Array, float], _Array]:
    return lambda values, surface: surface + convert(values, unit, "kPa")


#: Header of a pressure column to what makes kPa absolute of its numbers and the surface pressure.
_PRESSURE: dict[str, Callable[[_Array, float], _Array]] = {
    "depth_msw": WATERS["msw"].raw,
    "depth_fsw": WATERS["fsw"].raw,
    "depth_m": WATERS["en13319"].raw,
    "pressure_abs_kPa": _absolute("kPa"),
    "pressure_abs_bar": _absolute("bar"),
    "pressure_abs_atm": _absolute("atm"),
    "pressure_gauge_kPa": _gauge("kPa"),
    "pressure_gauge_bar": _gauge("bar"),
    "pressure_gauge_psi": _gauge("psi"),
}

#: What a depth column takes a unit of depth to be.
_DEPTH_MEANING = {
    "depth_msw": "",  # 10 kPa by definition: nothing is assumed
    "depth_fsw": f"a foot of sea water is {float(FSW):.6g} kPa (33 per atm)",
    "depth_m": f"a meter is {float(EN13319_PRESSURE_PER_METER):g} kPa (EN 13319)",
}

#: Header of a column that may be left empty to its quantity and unit.
_STATE = {
    "setpoint_kPa": ("setpoint", "kPa"),
    "setpoint_bar": ("setpoint", "bar"),
    "o2_uptake_stpd": ("o2_uptake_stpd", "L/min"),
    "ventilation_btps": ("ventilation_btps", "L/min"),
}
_SETPOINT = ("setpoint_kPa", "setpoint_bar")

_NUMBER = re.compile(r"[+-]?(?:\d+(?:\.\d*)?|\.\d+)(?:[eE][+-]?\d+)?", re.ASCII).fullmatch
_CLOCK = re.compile(r"(\d{1,2}):(\d\d):(\d\d(?:[.,]\d+)?)", re.ASCII).fullmatch
_ISO = re.compile(
    r"(\d{4}-\d\d-\d\d)[T ](\d\d):(\d\d)(?::(\d\d(?:[.,]\d+)?))?(Z|[+-]\d\d(?::?\d\d)?)?", re.ASCII
).fullmatch
_BARE_PRESSURE = re.compile(r"pressure(?:_?([a-z]+[a-z0-9]*))?", re.ASCII | re.IGNORECASE).fullmatch
_FOREIGN = re.compile("[\0\ud800-\udfff]")  # NUL, and what surrogateescape makes of bytes that are not UTF-8

_DAY, _HALF_DAY = 86400.0, 43200.0  # seconds
_SAME_TIME = 1e-9  # min: two ways of computing one instant differ by less
_LARGEST = 1e9  # no reading of any column is larger; keeps later arithmetic finite
_LONGEST_CELL, _MOST_COLUMNS = 200, 500
_SHOWN = 10  # places that an entry of the history lists before it only counts


@dataclass(frozen=True, eq=False)
class Log:
    """A recorder log as plain arrays, one element per row.

    Parameters
    ----------
    time : numpy.ndarray
        Time since the first row [min], strictly increasing from 0.
    ambient_pressure : numpy.ndarray
        Ambient pressure [kPa absolute]; a straight line between rows.
    gas : tuple of str
        Name of the gas breathed from this row on, as :class:`gasphys.gas.Gas` writes it.
    setpoint : numpy.ndarray
        Loop set-point from this row on [kPa absolute, dry]; NaN on open circuit.
    o2_uptake_stpd : numpy.ndarray
        O2 uptake from this row on [L/min STPD]; NaN where unknown.
    ventilation_btps : numpy.ndarray
        Ventilation from this row on [L/min BTPS]; NaN where unknown.
    surface_pressure : float
        Pressure at the surface [kPa absolute].
    depth_unit : str
        ``"msw"``, ``"fsw"`` or ``"m"`` of a depth column; "" where the log holds pressures.
    start : str
        Clock reading of the first row in ISO 8601: date and time, or the time of day alone; "" for
        elapsed times.
    history : tuple of str
        Everything assumed, repaired, skipped or noted, one entry each, with lines of the file.
    path : str
        Name of the file.

    Examples
    --------
    >>> import io
    >>> log = read_log(io.StringIO("time_min,depth_msw,gas\\n0,0,air\\n2,18,oxygen\\n"))
    >>> log.ambient_pressure
    array([101.325, 281.325])
    """

    time: _Array
    ambient_pressure: _Array
    gas: tuple[str, ...]
    setpoint: _Array
    o2_uptake_stpd: _Array
    ventilation_btps: _Array
    surface_pressure: float
    depth_unit: str
    start: str
    history: tuple[str, ...]
    path: str

    def __post_init__(self) -> None:
        for array in (
            self.time,
            self.ambient_pressure,
            self.setpoint,
            self.o2_uptake_stpd,
            self.ventilation_btps,
        ):
            array.flags.writeable = False


def read_log(path: _File, surface_pressure: float | str | None = None, breathing: _File | None = None) -> Log:
    """Read a recorder log, and breathing periods laid over it.

    Parameters
    ----------
    path : str, path or open file
        Comma, semicolon or tab separated text in UTF-8 with a header line.
    surface_pressure : float or str, optional
        Pressure at the surface [kPa absolute], or text such as ``"1.01 bar"``. Gauge columns need
        it. Otherwise, where it is not given, a log of absolute pressures takes its first row if
        that lies between 50 and 110 kPa; all others assume 101.325 kPa.
    breathing : str, path or open file, optional
        Breathing periods in a second file of the same form.

    Returns
    -------
    Log
        Arrays by row and the history of what was done to the file.

    Raises
    ------
    InputFileError
        If the text cannot be read as meant, with file, line, field number and a remedy.
    RangeError, UnitError
        If `surface_pressure` itself is not a possible pressure.

    Notes
    -----
    One time column: ``time_min`` or ``time_s`` (elapsed), ``time_hms`` (clock, 08:00:10) or
    ``time`` (ISO 8601). One pressure column: ``depth_msw``, ``depth_fsw``, ``depth_m`` (EN 13319),
    ``pressure_abs_kPa``, ``pressure_abs_bar``, ``pressure_abs_atm``, ``pressure_gauge_kPa``,
    ``pressure_gauge_bar`` or ``pressure_gauge_psi``. ``gas`` names the gas breathed from the row
    on; an empty cell repeats the one before. Optional ``setpoint_kPa`` or ``setpoint_bar`` (empty:
    open circuit), ``o2_uptake_stpd`` and ``ventilation_btps`` (empty: unknown). Blank lines and
    lines beginning with # are skipped; other columns are ignored.

    Repaired, with an entry in the history: a decimal comma where the comma is not the delimiter or
    the field is quoted; a clock passing midnight; a clock set back in a regular log, whose row is
    placed one median step after the row before; a duplicate time whose pressures agree within
    1 kPa (another gas or set-point there is a switch at that time). A gap of more than three median
    steps stays one straight line of pressure, noted in the history; a clock set forward cannot be
    told from a gap.

    The second file holds ``start_min`` and ``end_min``, ``start_s`` and ``end_s`` (both on the
    log's own count, or from its first row if the log has a clock), ``start_hms`` and ``end_hms``,
    or ``start`` and ``end`` (ISO 8601); ``gas``; optionally ``mask_leak``, the fraction of chamber
    air in what is breathed, and a set-point, without which a period is on open circuit. Delivered
    FiO2 = (1 - leak) x F + leak x 0.21, and likewise for the other gases. Outside the periods the
    log's own gas holds, or air where the log has no gas column.

    Examples
    --------
    >>> import io
    >>> log = read_log(
    ...     io.StringIO("time_min;pressure_abs_bar\\n0;1.01\\n10;2.4\\n20;2.4\\n"),
    ...     breathing=io.StringIO("start_min,end_min,gas\\n10,15,oxygen\\n"),
    ... )
    >>> log.time, log.gas
    (array([ 0., 10., 15., 20.]), ('air', 'oxygen', 'air', 'air'))
    >>> log.history[0]
    'assumed: surface pressure 101 kPa, the first row of the log'
    """
    surface = _checked_surface(surface_pressure)
    table = _Table(path, (*_TIME, *_PRESSURE, "gas", *_STATE))
    time_header = table.only(_TIME, "time column")
    pressure_header = table.only(_PRESSURE, "pressure or depth column")
    if "gas" not in table.column and breathing is None:
        raise table.refuse(
            "no gas column, so what was breathed is unknown",
            line=table.header_line,
            remedy="add a column gas (air, oxygen, nitrox 32, trimix 18/45), or give the breathing "
            "periods in a second file (breathing=, on the command line --breathing)",
        )
    clock, time = _elapsed(table, time_header)
    surface, pressure = _pressures(table, pressure_header, surface)
    rows = _Rows(
        time,
        pressure,
        _gases(table) if "gas" in table.column else ["air"] * len(time),
        _setpoints(table),
        _readings_or_nan(table, "o2_uptake_stpd"),
        _readings_or_nan(table, "ventilation_btps"),
        np.array(table.lines),
    )
    rows = _merge_duplicates(table, rows, time_header)
    _note_gaps(table, rows, time_header)
    if breathing is not None:
        rows = _overlay(table, rows, clock, breathing)
    return Log(
        time=rows.time,
        ambient_pressure=rows.pressure,
        gas=tuple(rows.gas),
        setpoint=rows.setpoint,
        o2_uptake_stpd=rows.o2_uptake,
        ventilation_btps=rows.ventilation,
        surface_pressure=surface,
        depth_unit=pressure_header.removeprefix("depth_") if pressure_header in _DEPTH_MEANING else "",
        start=clock.start,
        history=tuple(table.history),
        path=table.path,
    )


# Text into cells


class _Table:
    """The cells of one file by header, and what is needed to name a place in it."""

    def __init__(self, file: _File, headers: Sequence[str]) -> None:
        self.history: list[str] = []
        self.path, text = _read(file)
        if text.startswith("\ufeff"):
            text = text[1:]
            self.history.append("repaired: byte order mark at the start of the file removed")
        lines = text.replace("\r\n", "\n").replace("\r", "\n").split("\n")
        if not lines[-1]:
            lines.pop()
        self.header_line, self.delimiter = 0, ""
        self.column: dict[str, int] = {}
        self.cells: dict[str, list[str]] = {}
        self.lines: list[int] = []
        if _FOREIGN.search(text):
            raise self._foreign(lines)
        width, blanks, comments = 0, 0, 0
        margin = " \t"
        rows: list[list[str]] = []
        for number, line in enumerate(lines, 1):
            content = line.strip(margin)
            if not content:
                blanks += 1
            elif content[0] == "#":
                comments += 1
            elif not self.header_line:
                self.header_line, self.delimiter = number, self._find_delimiter(line, number)
                margin = margin.replace(self.delimiter, "")
                self._split = _splitter(self.delimiter)
                width = self._read_header(self._fields(line, number), headers)
            else:
                fields = self._fields(line, number)
                if len(fields) != width:
                    raise self._wrong_width(fields, number, width)
                rows.append(fields)
                self.lines.append(number)
        if not self.header_line:
            raise self.refuse(
                "the file holds no header line",
                line=max(len(lines), 1),
                remedy="begin with a line of column names such as time_min,depth_msw,gas",
            )
        if not rows:
            raise self.refuse(
                "the file holds no row below its header",
                line=self.header_line,
                remedy="export the log with its readings",
            )
        for header, column in self.column.items():
            self.cells[header] = [row[column - 1].strip(margin) for row in rows]
            if len(max(self.cells[header], key=len)) > _LONGEST_CELL:
                row = next(r for r, c in enumerate(self.cells[header]) if len(c) > _LONGEST_CELL)
                raise self.refuse(
                    f"{header} holds {len(self.cells[header][row])} characters in one field",
                    row=row,
                    header=header,
                    remedy="look for missing line ends or delimiters",
                )
        self._refuse_unnamed_values(rows, margin)
        if blanks or comments:
            counts = ((comments, "comment line"), (blanks, "blank line"))
            self.history.append("skipped: " + ", ".join(_count(n, what) for n, what in counts if n))

    def refuse(
        self,
        message: str,
        *,
        remedy: str,
        row: int | None = None,
        header: str = "",
        line: int | None = None,
        column: int | None = None,
    ) -> InputFileError:
        """Return the error for a place, by row and header or by line and field number."""
        return InputFileError(
            message,
            path=self.path,
            line=self.lines[row] if row is not None else self.header_line if header else line,
            column=self.column[header] if header else column,
            remedy=remedy,
        )

    def only(self, headers: Collection[str], what: str) -> str:
        """Return the one header of several that the file has."""
        present = [header for header in self.column if header in headers]
        if not present:
            raise self.refuse(
                f"no {what}",
                line=self.header_line,
                remedy=f"name one column {' | '.join(headers)}",
            )
        if len(present) > 1:
            raise self.refuse(
                f"{present[1]} beside {present[0]}: more than one {what}",
                header=present[1],
                remedy="keep one of them and remove or rename the other",
            )
        return present[0]

    def numbers(self, header: str, *, optional: bool = False) -> _Array:
        """Return the numbers of a column; NaN for empty cells where they are `optional`."""
        values = np.empty(len(self.lines))
        commas = []
        for row, cell in enumerate(self.cells[header]):
            text = cell
            if not _NUMBER(text):
                if optional and not cell:
                    values[row] = np.nan
                    continue
                text = cell.replace(",", ".") if cell.count(",") == 1 and "." not in cell else ""
                if not _NUMBER(text):
                    raise self.refuse(
                        f"{header} is {_show(cell)}, not a number" if cell else f"{header} is empty",
                        row=row,
                        header=header,
                        remedy="write digits with a decimal point, without separators or units",
                    )
                commas.append(row)
            values[row] = value = float(text)
            if not abs(value) <= _LARGEST:
                raise self.refuse(
                    f"{header} is {_show(cell)}, larger than any reading can be",
                    row=row,
                    header=header,
                    remedy="correct the cell",
                )
        self.note_commas(header, commas)
        return values

    def note_commas(self, header: str, rows: Sequence[int]) -> None:
        """Record decimal commas that were read as points."""
        if rows:
            self.history.append(
                f"repaired: decimal comma read as a point in {_count(len(rows), 'cell')} of {header} "
                f"({self.places(rows)})"
            )

    def places(self, rows: Sequence[int]) -> str:
        """Return the lines of some rows as text."""
        more = f" and {len(rows) - _SHOWN} more" if len(rows) > _SHOWN else ""
        shown = ", ".join(str(self.lines[row]) for row in rows[:_SHOWN])
        return f"line{'s' if len(rows) > 1 else ''} {shown}{more}"

    def _foreign(self, lines: Sequence[str]) -> InputFileError:
        """Return the error for a NUL or a byte that is not UTF-8, wherever it stands."""
        header = next((line for line in lines if line.strip(" \t") and line.lstrip(" \t")[0] != "#"), "")
        delimiter = next((d for d in ";\t," if d in header), ",")
        number, line, match = next(
            (number, line, match) for number, line in enumerate(lines, 1) if (match := _FOREIGN.search(line))
        )
        code = ord(match[0])
        what = (
            f"byte 0x{code & 0xFF:02X}"
            if code >= 0xDC80
            else "half a character"
            if code
            else "a NUL character"
        )
        return self.refuse(
            f"{what} does not belong into UTF-8 text",
            line=number,
            column=line[: match.start()].count(delimiter) + 1,
            remedy="save the file as UTF-8 text (it may be UTF-16, a Western code page or not text)",
        )

    def _find_delimiter(self, line: str, number: int) -> str:
        bare = re.sub(r'"[^"]*"', "", line)
        found = [delimiter for delimiter in ",;\t" if delimiter in bare]
        if len(found) != 1:
            raise self.refuse(
                "the header line mixes delimiters" if found else "the header line has no delimiter",
                line=number,
                column=1,
                remedy="separate the column names, such as time_min,depth_msw,gas, by commas, "
                "semicolons or tabs and by one of these only",
            )
        return found[0]

    def _fields(self, line: str, number: int) -> list[str]:
        if '"' not in line:
            return line.split(self.delimiter)
        fields: list[str] = []
        at = 0
        while True:
            match = self._split(line, at)
            if match is None:
                raise self.refuse(
                    f"the quotes of a field do not match near {_show(line[at:])}",
                    line=number,
                    column=len(fields) + 1,
                    remedy="begin and end a quoted field with one quote each on the same line, and "
                    "double a quote inside it",
                )
            quoted, plain, end = match.groups()
            fields.append(plain if quoted is None else quoted.replace('""', '"'))
            if not end:
                return fields
            at = match.end()

    def _wrong_width(self, fields: Sequence[str], number: int, width: int) -> InputFileError:
        few = len(fields) < width
        return self.refuse(
            f"too {'few' if few else 'many'} fields: {len(fields)} where the header has {width}",
            line=number,
            column=min(len(fields), width) + 1,
            remedy="complete the row"
            if few
            else "remove surplus delimiters; a number with a decimal comma must stand in quotes "
            "where the comma is the delimiter",
        )

    def _read_header(self, names: Sequence[str], headers: Sequence[str]) -> int:
        """Find the known columns, note the others, and return the number of fields."""
        line = self.header_line
        if len(names) > _MOST_COLUMNS:
            raise self.refuse(
                f"{len(names)} columns",
                line=line,
                column=_MOST_COLUMNS + 1,
                remedy=f"keep the columns that are needed, at most {_MOST_COLUMNS}",
            )
        lower = {header.lower(): header for header in headers}
        ignored: dict[str, int] = {}
        self._unnamed = []
        for column, name in enumerate((name.strip(" \t") for name in names), 1):
            if not name:
                self._unnamed.append(column)
            elif name in self.column or name in ignored:
                raise self.refuse(
                    f"header {_show(name)} stands twice",
                    line=line,
                    column=column,
                    remedy="remove or rename one of the two columns",
                )
            elif name in headers:
                self.column[name] = column
            else:
                if bare := _BARE_PRESSURE(name):
                    raise self._bare_pressure(name, bare[1] or "kPa", column)
                near = difflib.get_close_matches(name.lower(), lower, 1, 0.75) if len(name) < 40 else []
                if near:
                    raise self.refuse(
                        f"header {_show(name)} is not known",
                        line=line,
                        column=column,
                        remedy=f"write {lower[near[0]]} if that is meant; otherwise remove or rename "
                        "the column",
                    )
                ignored[name] = column
        if ignored:
            self.history.append(f"skipped: columns not known, {', '.join(map(_show, ignored))}")
        if self._unnamed:
            self.history.append(f"skipped: {_count(len(self._unnamed), 'empty column')} without a name")
        return len(names)

    def _bare_pressure(self, name: str, unit: str, column: int) -> InputFileError:
        """Return the error for a pressure that says neither absolute nor gauge."""
        units = {header.rpartition("_")[2].lower(): header.rpartition("_")[2] for header in _PRESSURE}
        unit = units.get(unit.lower(), "kPa")
        spellings = [
            header if (header := f"pressure_{kind}_{unit}") in _PRESSURE else f"pressure_{kind}_kPa"
            for kind in ("abs", "gauge")
        ]
        return self.refuse(
            f"header {_show(name)} does not say whether the pressure is absolute or gauge",
            line=self.header_line,
            column=column,
            remedy=f"write {spellings[0]} if absolute or {spellings[1]} if gauge, with numbers in that unit",
        )

    def _refuse_unnamed_values(self, rows: Sequence[Sequence[str]], margin: str) -> None:
        for column in self._unnamed:
            for row, fields in enumerate(rows):
                if cell := fields[column - 1].strip(margin):
                    raise self.refuse(
                        f"{_show(cell)} stands in a column without a name",
                        line=self.lines[row],
                        column=column,
                        remedy="name the column in the header line or empty it",
                    )


def _read(file: _File) -> tuple[str, str]:
    """Return the name and the text of a file; bytes that are not UTF-8 become lone surrogates."""
    content: str | bytes
    if isinstance(file, (str, os.PathLike)):
        name = os.fspath(file)
        try:
            content = Path(file).read_bytes()
        except (OSError, ValueError) as error:  # ValueError: a NUL in the name
            reason = getattr(error, "strerror", None) or error
            raise InputFileError(
                f"the file cannot be read: {reason}", path=name, remedy="check name and permission"
            ) from error
    else:
        name = str(getattr(file, "name", "<text>"))
        try:
            content = file.read()
        except UnicodeDecodeError as error:
            raise InputFileError(
                f"the file is not text in its encoding: {error.reason}",
                path=name,
                remedy="save the file as UTF-8 text, and give its name or open it with encoding='utf-8'",
            ) from error
    if isinstance(content, bytes):
        content = content.decode("utf-8", "surrogateescape")
    return name, content


@functools.lru_cache(maxsize=8)
def _splitter(delimiter: str) -> Callable[[str, int], re.Match[str] | None]:
    """Return what matches one field, quoted or not; possessive, so that no text makes it slow."""
    d = re.escape(delimiter)
    return re.compile(rf' *+(?:"((?:[^"]++|"")*+)" *+|([^"{d}]*+))({d}|\Z)').match


def _show(text: str) -> str:
    """Return a piece of a file for a message: printable, one line, not too long."""
    return repr(text if len(text) <= 40 else text[:37] + "...")


def _count(number: int, thing: str) -> str:
    return f"{number} {thing}{'' if number == 1 else 's'}"


# Cells into readings


@dataclass(frozen=True)
class _Clock:
    """How the time column of a log counts, to place breathing periods on it."""

    header: str
    zero: float  # first reading
    aware: bool
    start: str
    set_back: int | None  # line


def _readings(table: _Table, header: str) -> tuple[_Array, bool]:
    """Return a time column in its own count (a clock: seconds) and whether it has UTC offsets."""
    kind = header.partition("_")[2]
    if kind in ("min", "s"):
        return table.numbers(header), False
    values = np.empty(len(table.lines))
    offsets: set[str] = set()
    commas = []
    for row, cell in enumerate(table.cells[header]):
        match = _CLOCK(cell) if kind else _ISO(cell)
        try:
            if match is None:
                raise ValueError("is empty" if not cell else f"is {_show(cell)}")
            date, hour, minute, second, offset = ("", *match.groups(), "") if kind else match.groups("")
            seconds = _second_of_day(int(hour), int(minute), float(second.replace(",", ".") or 0.0))
            if date:
                seconds += _DAY * _day(date) - _utc_offset(offset)
        except ValueError as error:
            raise table.refuse(
                f"{header} {error}",
                row=row,
                header=header,
                remedy="write a clock time such as 08:00:10"
                if kind
                else "write ISO 8601 such as 2042-03-03T08:00:10 or 2042-03-03T08:00:10+01:00",
            ) from None
        if offsets and ("" in offsets) != (not offset):
            raise table.refuse(
                f"{header} {_show(cell)} is {'with' if offset else 'without'} a UTC offset, unlike the "
                "rows before",
                row=row,
                header=header,
                remedy="write all times with an offset or all without",
            )
        offsets.add(offset)
        values[row] = seconds
        if "," in cell:
            commas.append(row)
    table.note_commas(header, commas)
    if len(offsets) > 1:
        table.history.append(f"noted: {header} changes its UTC offset; times were compared in UTC")
    return values, "" not in offsets


def _second_of_day(hour: int, minute: int, second: float) -> float:
    if 60.0 <= second < 61.0 and (hour, minute) == (23, 59):
        raise ValueError("has a leap second, which has no place of its own on this clock")
    if not (hour < 24 or (hour == 24 and minute == 0 and second == 0.0)):
        raise ValueError(f"has hour {hour}, more than a day")
    if not (minute < 60 and second < 60.0):
        raise ValueError("has minutes or seconds of 60 or more")
    return 3600.0 * hour + 60.0 * minute + second


@functools.lru_cache(maxsize=64)
def _day(date: str) -> int:
    """Return the days since 2000-01-01, near enough for seconds to keep their decimals."""
    try:
        return datetime.date.fromisoformat(date).toordinal() - datetime.date(2000, 1, 1).toordinal()
    except ValueError as error:
        raise ValueError(f"has no possible date: {error}") from None


@functools.lru_cache(maxsize=64)
def _utc_offset(offset: str) -> float:
    """Return a UTC offset in seconds."""
    digits = offset[1:].replace(":", "").ljust(4, "0")
    if offset in ("", "Z"):
        return 0.0
    if not (int(digits[:2]) < 24 and int(digits[2:]) < 60):
        raise ValueError(f"has the UTC offset {offset}")
    return float(f"{offset[0]}1") * (3600.0 * int(digits[:2]) + 60.0 * int(digits[2:]))


def _elapsed(table: _Table, header: str) -> tuple[_Clock, _Array]:
    """Return minutes since the first row, with faults of a clock repaired."""
    if len(table.lines) < 2:
        raise table.refuse(
            "only one row", row=0, header=header, remedy="a log needs at least two rows at two times"
        )
    raw, aware = _readings(table, header)
    shift = np.zeros(len(raw))
    set_back = None
    start = table.cells[header][0].replace(",", ".").replace(" ", "T")
    start = start if start[1:2] != ":" else f"0{start}"
    if header in ("time_min", "time_s"):
        start = ""
        for row in np.flatnonzero(np.diff(raw) < 0.0)[:1] + 1:
            raise table.refuse(
                f"{header} falls from {raw[row - 1]:g} to {raw[row]:g}",
                row=int(row),
                header=header,
                remedy="sort the rows by time, or split the file where a second record begins",
            )
        if raw[0] != 0.0:
            table.history.append(
                f"noted: time counted from the first row, {table.cells[header][0]} in {header}"
            )
    else:
        if header == "time_hms":
            midnights = (np.flatnonzero(np.diff(raw) <= -_HALF_DAY) + 1).tolist()
            shift[midnights] = _DAY
            if midnights:
                table.history.append(
                    f"repaired: clock passed midnight, 24 h added from there on ({table.places(midnights)})"
                )
        set_back = _mend_set_back(table, header, np.diff(raw) + shift[1:], shift)
    time = (raw - raw[0] + np.cumsum(shift)) / _TIME[header]
    longest = quantity("time").possible[1]
    for row in np.flatnonzero(time > longest)[:1]:
        raise table.refuse(
            f"{header} is {time[row]:g} min after the first row; possible is {longest:g} min",
            row=int(row),
            header=header,
            remedy="correct the cell",
        )
    return _Clock(header, float(raw[0]), aware, start, set_back), time


def _mend_set_back(table: _Table, header: str, steps: _Array, shift: _Array) -> int | None:
    """Add to `shift` what a clock that was set back lacks; return the first such line."""
    median = float(np.median(steps[steps > 0.0])) if (steps > 0.0).any() else np.nan
    as_usual = np.abs(steps - median) <= 0.2 * median * (1.0 + 1e-9)
    regular = bool(as_usual.mean() >= 0.8)
    first = None
    for step in np.flatnonzero((steps < 0.0) | (steps > _HALF_DAY)):
        row = int(step) + 1
        if steps[step] > 0.0:
            # In a regular log of clock times half a day ahead may be a clock set back past midnight.
            if header == "time_hms" and regular:
                raise table.refuse(
                    f"{header} jumps ahead by {_duration(steps[step])}: a gap, or a clock set back past "
                    "midnight",
                    row=row,
                    header=header,
                    remedy="split the file here, or write times with their date (column time)",
                )
            continue
        # One odd step is a clock; two in a row, or odd steps everywhere, are rows out of order.
        alone = row == len(steps) or bool(as_usual[row])
        if not (regular and alone and steps[step] > -_HALF_DAY):
            raise table.refuse(
                f"{header} goes back by {_duration(-steps[step])}",
                row=row,
                header=header,
                remedy="sort the rows by time; a clock set back is mended only by less than 12 h and "
                "where the steps before and after are regular",
            )
        shift[row] += median - steps[step]
        first = first or table.lines[row]
        table.history.append(
            f"repaired: clock set back by {_duration(median - steps[step])} at line {table.lines[row]}; the "
            f"row placed one median step ({median:g} s) after the row before"
        )
    return first


def _duration(seconds: float) -> str:
    """Return a duration as text in the unit it is easiest to grasp in."""
    for unit, size in (("h", 3600.0), ("min", 60.0)):
        if seconds >= 2.0 * size:
            return f"{seconds / size:.4g} {unit}"
    return f"{seconds:.4g} s"


def _checked_surface(value: float | str | None) -> float | None:
    if value is None:
        return None
    one = quantity("surface_pressure")
    if isinstance(value, str):
        value = one.from_text(value)
    if isinstance(value, bool) or not isinstance(value, (int, float, np.integer, np.floating)):
        raise UnitError(f"surface_pressure must be a number in kPa absolute, not {type(value).__name__}")
    if not one.possible[0] <= value <= one.possible[1]:
        raise one.range_error(value)
    return float(value)


def _pressures(table: _Table, header: str, surface: float | None) -> tuple[float, _Array]:
    """Return the surface pressure and the ambient pressures in kPa absolute."""
    values = table.numbers(header)
    if surface is None:
        if header.startswith("pressure_gauge"):
            raise table.refuse(
                f"{header} is above a surface pressure that is not given",
                header=header,
                remedy="give the barometer with surface_pressure= in kPa absolute (on the command line "
                "--surface-pressure)",
            )
        first = float(_PRESSURE[header](values, ATMOSPHERE)[0])
        if header.startswith("pressure_abs") and 50.0 <= first <= 110.0:
            surface, why = first, "the first row of the log"
        else:
            surface, why = float(ATMOSPHERE), "one standard atmosphere; no barometer given"
        table.history.append(f"assumed: surface pressure {surface:g} kPa, {why}")
    pressure = np.asarray(_PRESSURE[header](values, surface), dtype=np.float64)
    low, high = quantity("ambient_pressure").possible
    if header in _DEPTH_MEANING:
        low = max(low, surface - 100.0)  # ten meters above the surface
        if _DEPTH_MEANING[header]:
            table.history.append(f"assumed: {_DEPTH_MEANING[header]} in {header}")
    for row in np.flatnonzero(~((pressure >= low - 1e-9) & (pressure <= high)))[:1]:
        raise table.refuse(
            f"{header} {table.cells[header][row]} is {pressure[row]:g} kPa absolute; possible is "
            f"{low:g} to {high:g} kPa",
            row=int(row),
            header=header,
            remedy="correct the cell, or the unit in the header if all rows are like this",
        )
    return surface, pressure


def _gases(table: _Table, *, carry: bool = True) -> list[str]:
    """Return the gas of every row by its canonical name."""
    names: dict[str, str] = {}
    gases: list[str] = []
    carried = []
    for row, cell in enumerate(table.cells["gas"]):
        if not cell and gases and carry:
            carried.append(row)
            gases.append(gases[-1])
            continue
        if cell not in names:
            try:
                if not cell or not cell.isascii() or "_" in cell:
                    raise UnitError(f"{_show(cell)} is not the name of a gas" if cell else "gas is empty")
                names[cell] = str(Gas.parse(cell))
            except GasphysError as error:
                raise table.refuse(
                    f"gas: {error}",
                    row=row,
                    header="gas",
                    remedy="write air, oxygen, nitrox 32, trimix 18/45 or heliox 16/84",
                ) from None
        gases.append(names[cell])
    if carried:
        table.history.append(
            f"repaired: gas of the row before repeated in {_count(len(carried), 'empty cell')} "
            f"({table.places(carried)})"
        )
    return gases


def _readings_or_nan(table: _Table, header: str) -> _Array:
    """Return an optional column in the unit of its quantity, NaN where empty or absent."""
    if header not in table.column:
        return np.full(len(table.lines), np.nan)
    name, unit = _STATE[header]
    one = quantity(name)
    values = np.asarray(convert(table.numbers(header, optional=True), unit, one.unit))
    low, high = one.possible
    for row in np.flatnonzero((values < low) | (values > high))[:1]:
        raise table.refuse(
            f"{header} {table.cells[header][row]} is outside {low:g} to {high:g} {one.unit}",
            row=int(row),
            header=header,
            remedy="correct the cell; leave it empty "
            + ("on open circuit" if name == "setpoint" else "where it is not known"),
        )
    return values


def _setpoints(table: _Table) -> _Array:
    present = any(header in table.column for header in _SETPOINT)
    header = table.only(_SETPOINT, "set-point column") if present else _SETPOINT[0]
    return _readings_or_nan(table, header)


# Rows


@dataclass(frozen=True)
class _Rows:
    time: _Array
    pressure: _Array
    gas: list[str]
    setpoint: _Array
    o2_uptake: _Array
    ventilation: _Array
    line: NDArray[np.int64]

    def take(self, index: NDArray[np.int64]) -> _Rows:
        """Return some rows, in the order of `index`, which may repeat them."""
        return _Rows(
            self.time[index],
            self.pressure[index],
            [self.gas[i] for i in index],
            self.setpoint[index],
            self.o2_uptake[index],
            self.ventilation[index],
            self.line[index],
        )

    def state(self, row: int) -> tuple[object, ...]:
        """Return all that holds from a row on; text, so that NaN equals NaN."""
        return (
            self.gas[row],
            *(repr(float(a[row])) for a in (self.setpoint, self.o2_uptake, self.ventilation)),
        )


def _merge_duplicates(table: _Table, rows: _Rows, header: str) -> _Rows:
    """Make one row of several at one time, if they agree or differ by a switch only."""
    repeated = np.flatnonzero(np.diff(rows.time) == 0.0) + 1
    if not repeated.size:
        return rows
    keep = np.ones(len(rows.time), dtype=bool)
    state = np.arange(len(rows.time))  # row whose gas, set-point and workload count from here on
    kept = 0
    dropped, switched = [], []
    largest = 0.0
    for row in map(int, repeated):
        kept = row - 1 if keep[row - 1] else kept
        difference = abs(float(rows.pressure[row] - rows.pressure[kept]))
        if not difference <= 1.0 + 1e-9:
            raise table.refuse(
                f"time stands twice (first at line {table.lines[kept]}) with pressures {difference:g} kPa "
                "apart",
                row=row,
                header=header,
                remedy="correct the time or remove one of the two rows",
            )
        keep[row] = False
        largest = max(largest, difference)
        if rows.state(row) == rows.state(int(state[kept])):
            dropped.append(row)
        else:
            switched.append(row)
            state[kept] = row
    if dropped:
        table.history.append(
            f"repaired: {_count(len(dropped), 'row')} with the time of the row before dropped "
            f"({table.places(dropped)}; pressures at most {largest:.3g} kPa apart)"
        )
    if switched:
        table.history.append(
            f"repaired: {_count(len(switched), 'row')} with the time of the row before taken as a switch "
            f"of gas, set-point or workload at that time ({table.places(switched)}; pressures at most "
            f"{largest:.3g} kPa apart, the first counts)"
        )
    if keep.sum() < 2:
        raise table.refuse(
            "all rows have the same time",
            row=len(keep) - 1,
            header=header,
            remedy="a log needs at least two rows at two times",
        )
    first, later = rows.take(np.flatnonzero(keep)), rows.take(state[keep])
    return _Rows(
        first.time,
        first.pressure,
        later.gas,
        later.setpoint,
        later.o2_uptake,
        later.ventilation,
        first.line,
    )


def _note_gaps(table: _Table, rows: _Rows, header: str) -> None:
    steps = np.diff(rows.time)
    median = float(np.median(steps))
    gaps = np.flatnonzero(steps > 3.0 * median * (1.0 + 1e-9))
    cause = "a gap" if header in ("time_min", "time_s") else "a gap or a clock set forward"
    for gap in gaps[:_SHOWN]:
        table.history.append(
            f"noted: no row for {_duration(60.0 * steps[gap])} before line {rows.line[gap + 1]} (median "
            f"step {_duration(60.0 * median)}), {cause}; one straight line there"
        )
    if len(gaps) > _SHOWN:
        table.history.append(
            f"noted: {_count(len(gaps) - _SHOWN, 'further gap')} in the same way, the longest "
            f"{_duration(60.0 * float(steps[gaps[_SHOWN:]].max()))}"
        )


# Breathing periods


def _overlay(log: _Table, rows: _Rows, clock: _Clock, breathing: _File) -> _Rows:
    """Lay breathing periods over a log, with rows inserted where they begin and end."""
    table = _Table(breathing, (*_START, *_END, "gas", "mask_leak", *_SETPOINT))
    headers = _period_headers(table)
    edges = _period_edges(table, headers, rows.time, clock, log)
    names = _gases(table, carry=False)
    setpoint = _setpoints(table)
    leak = _mask_leak(table, setpoint)

    new = np.setdiff1d(edges, rows.time)
    at = np.searchsorted(rows.time, new)
    longer = rows.take(np.insert(np.arange(len(rows.time)), at, at - 1))
    time = np.insert(rows.time, at, new)
    pressure = np.insert(rows.pressure, at, np.interp(new, rows.time, rows.pressure))

    outside = "the log's own gas column" if "gas" in log.column else "air, as the log has no gas column"
    log.history.extend(f"{table.path}: {entry}" for entry in table.history)
    log.history.append(
        f"assumed: {_count(len(edges), 'breathing period')} of {table.path} laid over the log; outside "
        f"them {outside}"
    )
    if new.size:
        log.history.append(
            f"noted: {_count(len(new), 'row')} inserted where a period begins or ends, pressure interpolated"
        )
    for row, (start, end) in enumerate(edges):
        gas = names[row]
        if leak[row] > 0.0:
            delivered = _with_leak(Gas.parse(gas), float(leak[row]))
            log.history.append(
                f"assumed: {table.path}, line {table.lines[row]}: mask leak {leak[row]:g} of chamber air, "
                f"{gas} delivered as {delivered} (FiO2 {delivered.oxygen:.4g})"
            )
            gas = str(delivered)
        first, last = np.searchsorted(time, (start, end))
        if end == time[-1]:  # at the last instant the piece that ends there still counts
            last += 1
        longer.gas[first:last] = [gas] * int(last - first)
        longer.setpoint[first:last] = setpoint[row]
    return _Rows(
        time,
        pressure,
        longer.gas,
        longer.setpoint,
        longer.o2_uptake,
        longer.ventilation,
        longer.line,
    )


def _period_headers(table: _Table) -> tuple[str, str]:
    start = table.only(_START, "column for the start of a period")
    end = table.only(_END, "column for the end of a period")
    if start.partition("_")[2] != end.partition("_")[2]:
        raise table.refuse(
            f"{end} beside {start}",
            header=end,
            remedy=f"write start and end in one kind of time, {start} and {start.replace('start', 'end')}",
        )
    if "gas" not in table.column:
        raise table.refuse(
            "no gas column",
            line=table.header_line,
            remedy="add a column gas (air, oxygen, nitrox 32, trimix 18/45)",
        )
    return start, end


def _period_edges(
    table: _Table, headers: tuple[str, str], time: _Array, clock: _Clock, log: _Table
) -> _Array:
    """Return start and end of every period in minutes since the log's first row."""
    (starts, aware), (ends, end_aware) = (_readings(table, header) for header in headers)
    edges = np.stack([starts, ends], axis=1)
    per_minute = _START[headers[0]]
    kind = headers[0].partition("_")[2]
    if kind in ("min", "s"):
        elapsed = clock.header in ("time_min", "time_s")
        edges = edges / per_minute - (clock.zero / _TIME[clock.header] if elapsed else 0.0)
    else:
        fault = (
            f"{headers[0]} cannot be placed on a log with {clock.header}"
            if clock.header.partition("_")[2] != kind
            else "times with and without a UTC offset"
            if {aware, end_aware} != {clock.aware}
            else f"the log's clock was set back at line {clock.set_back}: a clock time has two meanings"
            if clock.set_back is not None
            else "the log is longer than a day: a clock time has two meanings"
            if kind == "hms" and time[-1] >= 1440.0
            else ""
        )
        if fault:
            raise table.refuse(
                fault,
                header=headers[0],
                remedy=f"write start_min and end_min, minutes from the first row of {log.path}",
            )
        if kind == "hms":  # midnight as in the log
            readings = np.concatenate([[clock.zero], edges.ravel()])
            passed = np.cumsum(np.diff(readings) <= -_HALF_DAY)
            edges = edges + _DAY * passed.reshape(edges.shape)
        edges = (edges - clock.zero) / per_minute
    # The same instant may have been computed in two ways.
    near = np.clip(np.searchsorted(time, edges), 1, len(time) - 1)
    near = near - (edges - time[near - 1] < time[near] - edges)
    edges = np.where(np.abs(time[near] - edges) <= _SAME_TIME, time[near], edges)
    for row, (start, end) in enumerate(edges):
        faults = {
            0: f"begins {_minutes(start)}; the log covers 0 to {time[-1]:.7g} min"
            if not 0.0 <= start < time[-1]
            else f"begins {_minutes(start)}, before the period above ends"
            if row and start < edges[row - 1, 1]
            else "",
            1: f"ends {_minutes(end)}; the log covers 0 to {time[-1]:.7g} min"
            if not end <= time[-1]
            else f"ends {_minutes(end)}, not after it begins"
            if not end > start
            else "",
        }
        for which, fault in faults.items():
            if fault:
                raise table.refuse(
                    f"{headers[which]}: the period {fault}",
                    row=row,
                    header=headers[which],
                    remedy="write periods in order of time, without overlap and inside the log",
                )
    return np.asarray(edges, dtype=np.float64)


def _minutes(time: float) -> str:
    return f"{time:.7g} min after the log's first row"


def _mask_leak(table: _Table, setpoint: _Array) -> _Array:
    """Return the mask leak of every period, 0 where empty or absent."""
    if "mask_leak" not in table.column:
        return np.zeros(len(table.lines))
    leak = np.nan_to_num(table.numbers("mask_leak", optional=True))
    for row in np.flatnonzero((leak < 0.0) | (leak > 1.0) | (leak > 0.0) & ~np.isnan(setpoint))[:1]:
        raise table.refuse(
            f"mask_leak {table.cells['mask_leak'][row]} "
            + ("beside a set-point" if 0.0 <= leak[row] <= 1.0 else "is not a fraction between 0 and 1"),
            row=int(row),
            header="mask_leak",
            remedy="write 0.1 for 10 %; a loop that holds its set-point has no mask leak",
        )
    return leak


def _with_leak(gas: Gas, leak: float) -> Gas:
    """Return what is breathed when chamber air leaks into a mask."""
    air = Gas.parse("air")
    # Rounded far below any analyzer, so that the name is nitrox 92.1 and not a row of nines.
    return Gas(
        **{
            field: round((1.0 - leak) * getattr(gas, field) + leak * getattr(air, field), 12)
            for field in FORMULAS.values()
            if field != "nitrogen"
        }
    )
