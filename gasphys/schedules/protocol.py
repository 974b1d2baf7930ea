"""A unit's own protocol, written as sentences, as an exposure."""

from __future__ import annotations

import math
import os
import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

from gasphys.constants import ATMOSPHERE
from gasphys.errors import GasphysError, InputFileError, RangeError, UnitError
from gasphys.exposure import Exposure
from gasphys.gas import Gas
from gasphys.toml_files import read_text
from gasphys.units import convert, unit

__all__ = ["constant_ratio_travel", "oxygen_session", "parse_protocol", "read_protocol"]

START = "start on air"
BREATHE = "breathe oxygen"
TRAVEL = "travel to 2.4 atm abs in 10 min"
TRAVEL_RATE = "travel to 60 fsw at 20 fsw/min"
STAY = "stay 30 min on oxygen"
REPEAT = "repeat 3 times, break between: stay 5 min on air"
SURFACE = "travel to surface in 10 min on oxygen"

#: Largest step of the logarithm of pressure in a straight piece of a travel of constant ratio: the chord
#: is then off by less than 0.02^2/8, 0.005 %.
_STEP = 0.02


def constant_ratio_travel(exposure: Exposure, pressure: float, minutes: float) -> Exposure:
    """Travel so that pressure changes by the same factor in every minute.

    Parameters
    ----------
    exposure : Exposure
        One scenario.
    pressure : float
        Ambient pressure to reach [kPa absolute].
    minutes : float
        Time taken [min].

    Returns
    -------
    Exposure
        With straight pieces whose ends lie on the exponential; between them it is off by less than
        0.005 %.

    Examples
    --------
    >>> there = constant_ratio_travel(Exposure.start("air"), 243.18, 10.0)
    >>> len(there.part), round(there.duration, 9), round(there.pressure, 9)
    (44, 10.0, 243.18)
    """
    start = float(exposure.pressure)
    span = math.log(pressure / start)
    pieces = max(1, math.ceil(abs(span) / _STEP))
    for k in range(1, pieces + 1):
        there = pressure if k == pieces else start * math.exp(span * k / pieces)
        exposure = exposure.travel(pressure=there, minutes=minutes / pieces)
    return exposure


def read_protocol(path: str | os.PathLike[str], *, surface_pressure: Any = float(ATMOSPHERE)) -> Exposure:
    """Read a unit's own protocol from a text file.

    Parameters
    ----------
    path : path
        A text file, a sentence a line; see :func:`parse_protocol`.
    surface_pressure : float or str
        Pressure outside the chamber [kPa absolute].

    Returns
    -------
    Exposure
        Surface to surface.

    Raises
    ------
    InputFileError
        With file, line, column and the sentence expected.

    Examples
    --------
    >>> import tempfile
    >>> file = Path(tempfile.mkdtemp()) / "o24.txt"
    >>> _ = file.write_text("start on air\\ntravel to 14 msw in 8 min\\ntravel to surface in 8 min\\n")
    >>> read_protocol(file).duration
    16.0
    """
    return parse_protocol(read_text(path), path=path, surface_pressure=surface_pressure)


def parse_protocol(
    text: str, *, path: str | os.PathLike[str] = "protocol", surface_pressure: Any = float(ATMOSPHERE)
) -> Exposure:
    """Read a unit's own protocol from text.

    Parameters
    ----------
    text : str
        A sentence a line; ``#`` begins a comment.
    path : path
        Name for errors and the title.
    surface_pressure : float or str
        Pressure outside the chamber [kPa absolute].

    Returns
    -------
    Exposure
        Surface to surface.

    Raises
    ------
    InputFileError
        With line, column and the sentence expected.

    Notes
    -----
    The sentences: ``start on air``; ``travel to 2.4 atm abs in 10 min``, or ``at 20 fsw/min``, with ``on
    oxygen`` and ``at constant ratio`` if wanted; ``stay 30 min on oxygen``; ``breathe air``; ``repeat 3
    times, break between: stay 5 min on air``, which makes three of the sentence before it. A pressure is in
    any unit, said to be ``abs`` or ``gauge``; msw and fsw are depths; ``surface`` is the pressure outside.

    Examples
    --------
    >>> session = parse_protocol('''
    ... start on air
    ... travel to 2.4 atm abs in 10 min
    ... stay 30 min on oxygen
    ... repeat 3 times, break between: stay 5 min on air
    ... travel to surface in 10 min on oxygen
    ... ''')
    >>> session.duration, len(session.part)
    (120.0, 7)
    """
    name = Path(os.fspath(path)).name
    reader = _Reader(os.fspath(path))
    for number, line in enumerate(text.splitlines(), start=1):
        sentence = line.partition("#")[0]
        if sentence.strip():
            reader.read(_Words(os.fspath(path), number, sentence), surface_pressure)
    exposure = reader.finished(len(text.splitlines()))
    return replace(
        exposure,
        history=(*exposure.history, *reader.notes),
        attrs={
            "title": f"protocol {name}",
            "schedule": name,
            "references": "",
            "edition": "the unit's own, as written",
            "provenance": "read",
            "table_minutes": float(exposure.duration),
            "table_clock": "the whole session, compression included",
            "note": "the unit's own protocol: check it against the paper it was copied from",
        },
    )


def oxygen_session(
    pressure: str,
    oxygen_minutes: float = 90.0,
    period: float = 30.0,
    air_break: float = 5.0,
    travel_minutes: float = 10.0,
    *,
    constant_ratio: bool = False,
    surface_pressure: Any = float(ATMOSPHERE),
) -> Exposure:
    """Build a clinical oxygen session with air breaks of one's own.

    Parameters
    ----------
    pressure : str
        As in a protocol, ``"2.4 atm abs"`` or ``"14 msw"``.
    oxygen_minutes : float
        Oxygen at pressure in all [min].
    period : float
        Longest time on oxygen without a break [min].
    air_break : float
        Air between two periods [min]; 0 for none.
    travel_minutes : float
        Each way [min]; down on air, up on oxygen.
    constant_ratio : bool
        Compress by the same factor in every minute.
    surface_pressure : float or str
        Pressure outside the chamber [kPa absolute].

    Returns
    -------
    Exposure
        As :func:`parse_protocol` makes it.

    Raises
    ------
    InputFileError
        If a value has no meaning in a protocol.

    Examples
    --------
    >>> session = oxygen_session("2.4 atm abs", 90, period=20)
    >>> session.part.count("oxygen"), session.part.count("air break"), session.duration
    (5, 4, 130.0)
    """
    ratio = " at constant ratio" if constant_ratio else ""
    lines = [START, f"travel to {pressure} in {travel_minutes:g} min{ratio}"]
    left = oxygen_minutes
    while left > 0.0:
        now = min(period, left) if air_break > 0.0 else left
        lines.append(f"stay {now:g} min on oxygen")
        left -= now
        if left > 0.0:
            lines.append(f"stay {air_break:g} min on air")
    lines.append(f"travel to surface in {travel_minutes:g} min on oxygen")
    session = parse_protocol("\n".join(lines), path="oxygen session", surface_pressure=surface_pressure)
    part = list(session.part)
    between = range(1, len(part) - 1)
    for k in between:
        if part[k] == "air":
            part[k] = "air break"
    return replace(session, part=tuple(part))


@dataclass
class _Words:
    """The words of one sentence, and where each stands."""

    path: str
    line: int
    sentence: str
    words: list[tuple[str, int]] = field(default_factory=list)
    at: int = 0

    def __post_init__(self) -> None:
        for match in re.finditer(r"\S+", self.sentence):
            word, column = match[0], match.start() + 1
            body = word.rstrip(",:")
            glued = re.fullmatch(r"(\d+(?:\.\d+)?)([A-Za-z%].*)", body)
            if glued:
                self.words += [(glued[1], column), (glued[2], column + len(glued[1]))]
            elif body:
                self.words.append((body, column))
            for k, mark in enumerate(word[len(body) :]):
                self.words.append((mark, column + len(body) + k))

    @property
    def column(self) -> int:
        """Column of the next word, or just behind the last."""
        return self.words[self.at][1] if self.at < len(self.words) else len(self.sentence.rstrip()) + 1

    def error(self, message: str, expected: str, column: int | None = None) -> InputFileError:
        """Return the error, with the sentence expected."""
        return InputFileError(
            message,
            path=self.path,
            line=self.line,
            column=self.column if column is None else column,
            remedy=f"write a sentence such as {expected!r}",
        )

    def peek(self) -> str:
        """Return the next word, or "" at the end."""
        return self.words[self.at][0] if self.at < len(self.words) else ""

    def take(self, *wanted: str) -> str:
        """Take the next word if it is one of those wanted."""
        if self.peek() in wanted:
            self.at += 1
            return self.words[self.at - 1][0]
        return ""

    def must(self, expected: str, *wanted: str) -> None:
        """Take words in order, or say which is missing."""
        for word in wanted:
            if not self.take(word):
                found = repr(self.peek()) if self.peek() else "the end of the line"
                raise self.error(f"expected {word!r}, found {found}", expected)

    def number(self, what: str, expected: str) -> float:
        """Take a positive number."""
        word = self.peek()
        if not re.fullmatch(r"[+-]?\d+(\.\d+)?", word):
            hint = " (write a decimal point, not a comma)" if re.fullmatch(r"\d+,\d+", word) else ""
            found = repr(word) if word else "the end of the line"
            raise self.error(f"expected a number of {what}, found {found}{hint}", expected)
        if not 0.0 < float(word) < math.inf:
            raise self.error(f"{what} {word} must be more than zero", expected)
        self.at += 1
        return float(word)

    def minutes(self, expected: str) -> float:
        """Take a time such as ``1 h 30 min``."""
        total = 0.0
        while True:
            value = self.number("minutes", expected)
            word = self.peek()
            try:
                total += float(convert(value, word or "1", "min"))
            except UnitError:
                found = repr(word) if word else "the end of the line"
                raise self.error(f"expected min, h or s, found {found}", expected) from None
            self.at += 1
            if not re.fullmatch(r"\d+(\.\d+)?", self.peek()):
                return total

    def gas(self, expected: str) -> str:
        """Take the name of a gas: all words to the end, or to ``at`` or ``in``."""
        column, words = self.column, []
        while self.peek() not in ("", "at", "in", ",", ":"):
            words.append(self.peek())
            self.at += 1
        if not words:
            raise self.error("expected a gas", expected, column)
        try:
            return str(Gas.parse(" ".join(words)))
        except GasphysError as error:
            raise self.error(str(error), expected, column) from None

    def end(self, expected: str) -> None:
        """Refuse what is left over."""
        if self.peek():
            raise self.error(
                f"the sentence goes on with {self.peek()!r}, which has no meaning here", expected
            )


@dataclass
class _Reader:
    """The exposure read so far."""

    path: str
    exposure: Exposure | None = None
    last: Callable[[Exposure], Exposure] | None = None
    notes: list[str] = field(default_factory=list)
    gas: str = ""
    line: int = 1

    def read(self, words: _Words, surface_pressure: Any) -> None:
        """Read one sentence."""
        self.line = words.line
        verbs = {"travel": self._travel, "stay": self._stay, "repeat": self._repeat, "breathe": self._breathe}
        verb = words.peek()
        if self.exposure is None:
            words.must(START, "start", "on")
            self.gas = words.gas(START)
            words.end(START)
            try:
                self.exposure = Exposure.start(self.gas, surface_pressure=surface_pressure)
            except GasphysError as error:
                raise words.error(str(error), START) from None
            return
        if verb == "start":
            raise words.error("a protocol starts once", STAY)
        if verb not in verbs:
            raise words.error(
                f"{verb!r} is no verb of a protocol; it has start, travel, stay, breathe, repeat", STAY
            )
        words.at += 1
        column = words.words[0][1]
        try:
            self.exposure = verbs[verb](words, self.exposure)
        except InputFileError:
            raise
        except GasphysError as error:
            raise words.error(str(error), {"travel": TRAVEL}.get(verb, STAY), column) from None

    def finished(self, lines: int) -> Exposure:
        """Return the exposure, if it came back to the surface."""
        if self.exposure is None:
            raise InputFileError(
                "no sentence", path=self.path, line=max(lines, 1), column=1, remedy=f"begin with {START!r}"
            )
        ends = float(self.exposure.pressure)
        if not self.exposure.part or abs(ends - float(self.exposure.surface_pressure)) > 1e-9:
            raise InputFileError(
                f"the protocol ends at {ends:.1f} kPa absolute, not at the surface"
                if self.exposure.part
                else "nothing follows the start",
                path=self.path,
                line=self.line,
                column=1,
                remedy=f"end with a sentence such as {SURFACE!r}",
            )
        return self.exposure

    def _breathe(self, words: _Words, exposure: Exposure) -> Exposure:
        self.gas = words.gas(BREATHE)
        words.end(BREATHE)
        self.last = None
        return exposure.switch(self.gas)

    def _stay(self, words: _Words, exposure: Exposure, part: str = "") -> Exposure:
        minutes = words.minutes(STAY)
        gas = self.gas
        if words.take("on"):
            gas = words.gas(STAY)
        words.end(STAY)
        self.gas = gas

        def stay(before: Exposure) -> Exposure:
            return before.switch(gas).name(part or gas).stay(minutes)

        self.last = stay
        return stay(exposure)

    def _travel(self, words: _Words, exposure: Exposure) -> Exposure:
        words.must(TRAVEL, "to")
        column = words.column
        pressure = self._pressure(words, float(exposure.surface_pressure))
        now = float(exposure.pressure)
        if abs(pressure - now) <= 1e-9:
            raise words.error(f"the pressure is {now:.4g} kPa absolute already", STAY, column)
        minutes = math.nan
        profile, gas, seen = "linear", self.gas, set()
        while word := words.take("in", "at", "on"):
            kind = "rate" if word == "in" else word
            if word == "in":
                minutes = words.minutes(TRAVEL)
            elif word == "on":
                gas = words.gas(TRAVEL)
            elif words.take("constant"):
                words.must(TRAVEL, "ratio")
                profile, kind = "constant_ratio", "ratio"
            else:
                minutes = abs(pressure - now) / self._rate(words)
                kind = "rate"
            if kind in seen:
                raise words.error(f"{word!r} stands twice", TRAVEL)
            seen.add(kind)
        if not minutes > 0.0:
            found = repr(words.peek()) if words.peek() else "the end of the line"
            raise words.error(f"expected 'in' and minutes, or 'at' and a rate, found {found}", TRAVEL)
        words.end(TRAVEL)
        self.gas, self.last = gas, None
        exposure = exposure.switch(gas).name(f"travel on {gas}")
        if profile == "linear":
            return exposure.travel(pressure=pressure, minutes=minutes)
        self.notes.append(
            f"line {words.line}: travel of constant ratio in straight pieces, at most 0.005 % off in pressure"
        )
        return constant_ratio_travel(exposure, pressure, minutes)

    def _pressure(self, words: _Words, surface: float) -> float:
        if words.take("surface"):
            return surface
        column = words.column
        value = words.number("a pressure", TRAVEL)
        name = words.peek()
        try:
            one = unit(name or "nothing")
            absolute = float(convert(value, name, "kPa"))
        except UnitError as error:
            message = str(error).partition("; units:")[0]
            raise words.error(message if name else "expected a unit of pressure", TRAVEL) from None
        words.at += 1
        said = words.take("abs", "absolute", "gauge")
        if one.gauge:
            if said in ("abs", "absolute"):
                raise words.error(f"{name} is a depth, never an absolute pressure", TRAVEL, column)
            return surface + absolute
        if not said and one.name != "ata":
            raise words.error(
                f"{value:g} {name}, absolute or gauge? Write {name} abs or {name} gauge", TRAVEL
            )
        pressure = absolute + (surface if said == "gauge" else 0.0)
        if not pressure >= surface - 1e-9:
            raise RangeError(f"{value:g} {name} is below the surface pressure of {surface:.4g} kPa")
        return pressure

    def _rate(self, words: _Words) -> float:
        value = words.number("a rate", TRAVEL_RATE)
        name = words.peek()
        try:
            rate = float(convert(value, name or "nothing", "kPa/min"))
        except UnitError:
            found = repr(name) if name else "the end of the line"
            raise words.error(
                f"expected a rate such as fsw/min or kPa/min, found {found}", TRAVEL_RATE
            ) from None
        words.at += 1
        return rate

    def _repeat(self, words: _Words, exposure: Exposure) -> Exposure:
        if self.last is None:
            raise words.error(
                "only a stay can be repeated, and none stands before this line", REPEAT, words.words[0][1]
            )
        column = words.column
        times = words.number("times", REPEAT)
        if times != int(times) or not 1 < times <= 1000:
            raise words.error(f"{times:g} is no number of times, 2 or more", REPEAT, column)
        words.must(REPEAT, "times")
        again, gas = self.last, self.gas
        between: Callable[[Exposure], Exposure] | None = None
        if words.peek():
            words.take(",")
            words.must(REPEAT, "break", "between")
            words.take(":")
            words.must(REPEAT, "stay")
            before = exposure
            self._stay(words, before, part="air break" if gas == "oxygen" else "")
            between = self.last
        words.end(REPEAT)
        for _ in range(int(times) - 1):
            exposure = again(exposure if between is None else between(exposure))
        self.last, self.gas = None, gas
        return exposure


def sentences() -> Sequence[str]:
    """Return an example of every sentence of a protocol.

    Returns
    -------
    sequence of str
        In the order a protocol uses them.

    Examples
    --------
    >>> sentences()[0]
    'start on air'
    """
    return (START, TRAVEL, STAY, REPEAT, BREATHE, TRAVEL_RATE, SURFACE)
