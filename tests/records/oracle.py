"""A second reader of recorder logs, naive on purpose and sharing no code with the first.

It walks character by character, counts in decimals, knows no repair at all, and says `Unsure`
wherever a text needs one or cannot be read.
"""

from __future__ import annotations

import datetime
from dataclasses import dataclass
from decimal import Decimal, InvalidOperation


class Unsure(Exception):
    """The text is not plainly readable."""


@dataclass
class Reading:
    """What the text says, as lists."""

    time: list[float]
    pressure: list[float]
    gas: list[tuple[float, float]]  # O2, He
    setpoint: list[float | None]
    o2_uptake: list[float | None]
    ventilation: list[float | None]


def understand(text: str, surface: float | None) -> Reading:
    """Read a text without repairing anything."""
    if "\0" in text or any("\ud800" <= c <= "\udfff" for c in text):
        raise Unsure("characters")
    if text[:1] == "\ufeff":
        text = text[1:]
    lines = [""]
    previous = ""
    for c in text:
        if c in "\r\n":
            if not (c == "\n" and previous == "\r"):
                lines.append("")
        else:
            lines[-1] += c
        previous = c
    rows = [line for line in lines if line.strip(" \t") and not line.strip(" \t").startswith("#")]
    if len(rows) < 3:
        raise Unsure("rows")
    used = {c for c in outside_quotes(rows[0]) if c in ",;\t"}
    if len(used) != 1:
        raise Unsure("delimiter")
    delimiter = used.pop()
    table = [cells(row, delimiter) for row in rows]
    names = table[0]
    columns = {name: [row[i] for row in table[1:]] for i, name in enumerate(names)}
    if len(columns) != len(names) or any(len(row) != len(names) for row in table):
        raise Unsure("width")

    time_names = [n for n in names if n in ("time_min", "time_s", "time_hms", "time")]
    pressure_names = [n for n in names if n in TO_KPA]
    if len(time_names) != 1 or len(pressure_names) != 1 or "gas" not in names:
        raise Unsure("columns")
    if "setpoint_kPa" in names and "setpoint_bar" in names:
        raise Unsure("columns")

    time_name, pressure_name = time_names[0], pressure_names[0]
    if time_name in ("time_min", "time_s"):
        seconds = [number(c) * (60 if time_name == "time_min" else 1) for c in columns[time_name]]
    elif time_name == "time_hms":
        seconds = [clock(c) for c in columns[time_name]]
    else:
        seconds = dates(columns[time_name])
    for i in range(1, len(seconds)):
        if seconds[i] <= seconds[i - 1]:
            raise Unsure("order of times")
    time = [float((s - seconds[0]) / 60) for s in seconds]
    if time[-1] > 1e7:
        raise Unsure("length")

    values = [number(c) for c in columns[pressure_name]]
    factor = TO_KPA[pressure_name]
    if pressure_name.startswith("pressure_abs"):
        pressure = [float(v * factor) for v in values]
    else:
        if surface is None and pressure_name.startswith("pressure_gauge"):
            raise Unsure("barometer")
        at_surface = Decimal("101.325") if surface is None else Decimal(repr(surface))
        pressure = [float(at_surface + v * factor) for v in values]
        if pressure_name.startswith("depth") and any(v * factor < -100 for v in values):
            raise Unsure("above the surface")
    if not all(5 <= p <= 20000 for p in pressure):
        raise Unsure("pressure")

    optional: dict[str, list[float | None]] = {}
    for name, factor, low, high in OPTIONAL:
        if name in columns:
            numbers = [float(number(c) * factor) if c else None for c in columns[name]]
            if any(n is not None and not low <= n <= high for n in numbers):
                raise Unsure(name)
            optional[name.replace("_bar", "_kPa")] = numbers
    nothing: list[float | None] = [None] * len(time)
    return Reading(
        time,
        pressure,
        [gas(c) for c in columns["gas"]],
        optional.get("setpoint_kPa", nothing),
        optional.get("o2_uptake_stpd", nothing),
        optional.get("ventilation_btps", nothing),
    )


TO_KPA = {
    "depth_msw": Decimal(10),
    "depth_fsw": Decimal("101.325") / 33,
    "depth_m": Decimal(10),
    "pressure_abs_kPa": Decimal(1),
    "pressure_abs_bar": Decimal(100),
    "pressure_abs_atm": Decimal("101.325"),
    "pressure_gauge_kPa": Decimal(1),
    "pressure_gauge_bar": Decimal(100),
    # One pound-force on a square inch: 0.45359237 kg x 9.80665 m/s2 / (0.0254 m)^2.
    "pressure_gauge_psi": Decimal("0.45359237") * Decimal("9.80665") / Decimal("0.0254") ** 2 / 1000,
}

OPTIONAL = [
    ("setpoint_kPa", Decimal(1), 16, 320),
    ("setpoint_bar", Decimal(100), 16, 320),
    ("o2_uptake_stpd", Decimal(1), 0, 10),
    ("ventilation_btps", Decimal(1), 0, 400),
]


def outside_quotes(line: str) -> str:
    """Return what of a line stands outside quotes."""
    result, inside = "", False
    for c in line:
        if c == '"':
            inside = not inside
        elif not inside:
            result += c
    return result


def cells(line: str, delimiter: str) -> list[str]:
    """Split one line; a field is quoted wholly or not at all."""
    result, cell, state = [], "", "start"  # start, plain, quoted, closed
    for c in line + delimiter:
        if state == "quoted":
            if c == '"':
                state = "closed"
            else:
                cell += c
        elif c == delimiter:
            result.append(cell)
            cell, state = "", "start"
        elif c == '"':
            if state == "plain":
                raise Unsure("quote")
            if state == "closed":
                if cell.endswith("\1"):  # a space came between
                    raise Unsure("quote")
                cell += '"'
            state = "quoted"
        elif state == "closed":
            if c != " ":
                raise Unsure("quote")
            cell = cell.removesuffix("\1") + "\1"
        elif not (state == "start" and c == " "):
            cell += c
            state = "plain"
    if state != "start":
        raise Unsure("quote")
    return [cell.replace("\1", "").strip(" \t") for cell in result]


def number(text: str) -> Decimal:
    """Read one decimal number."""
    if not text or set(text) - set("0123456789+-.eE"):
        raise Unsure("number")
    try:
        value = Decimal(text)
    except InvalidOperation:
        raise Unsure("number") from None
    if abs(value) > 10**9:
        raise Unsure("number")
    # As a double, since that is what a reader in doubles can know of it.
    return Decimal(repr(float(value)))


def clock(text: str) -> Decimal:
    """Read hours, minutes and seconds of a day."""
    parts = text.split(":")
    if len(parts) != 3 or not all(part[:1].isdigit() and part.isascii() for part in parts):
        raise Unsure("clock")
    if not (len(parts[0]) <= 2 and len(parts[1]) == 2 and parts[0].isdigit() and parts[1].isdigit()):
        raise Unsure("clock")
    if parts[2][:2] != parts[2].partition(".")[0] or len(parts[2].partition(".")[0]) != 2:
        raise Unsure("clock")
    hour, minute, second = (number(part) for part in parts)
    total = hour * 3600 + minute * 60 + second
    if minute >= 60 or second >= 60 or total > 86400:
        raise Unsure("clock")
    return total


def dates(texts: list[str]) -> list[Decimal]:
    """Read dates with times, all with UTC offsets or all without."""
    result, kinds = [], set()
    for text in texts:
        days = 0
        if "24:00" in text[10:16]:
            text, days = text[:11] + "00:00" + text[16:], 1
            if text[16:19] not in ("", ":00"):
                raise Unsure("date")
        if not text.isascii() or len(text) < 16 or text[10] not in "T ":
            raise Unsure("date")
        fraction = text.partition(".")[2]
        digits = len(fraction) - len(fraction.lstrip("0123456789"))
        if digits > 6 or "," in text:
            raise Unsure("date")
        try:
            one = datetime.datetime.fromisoformat(text)
        except ValueError:
            raise Unsure("date") from None
        kinds.add(one.tzinfo is None)
        if one.tzinfo is None:
            one = one.replace(tzinfo=datetime.UTC)
        span = one - datetime.datetime(2000, 1, 1, tzinfo=datetime.UTC)
        result.append(
            (span.days + days) * Decimal(86400) + span.seconds + Decimal(span.microseconds) / 1000000
        )
    if len(kinds) > 1:
        raise Unsure("date")
    return result


def gas(text: str) -> tuple[float, float]:
    """Read a gas as fractions of O2 and He."""
    name = "".join(text.lower().split())
    if not name.isascii():
        raise Unsure("gas")
    fixed = {
        "air": (0.21, 0.0),
        "oxygen": (1.0, 0.0),
        "o2": (1.0, 0.0),
        "nitrogen": (0.0, 0.0),
        "helium": (0.0, 1.0),
    }
    if name in fixed:
        return fixed[name]
    if name.startswith("mix"):
        parts = dict(part.split("=", 1) for part in text.lower().split()[1:] if "=" in part)
        return float(number(parts.get("o2", "0"))), float(number(parts.get("he", "0")))
    kind = "".join(c for c in name if c.isalpha())
    rest = name.removeprefix(kind)
    if kind in ("nitrox", "ean"):
        o2, he = number(rest.removesuffix("%")) / 100, Decimal(0)
    elif kind in ("trimix", "heliox", "") and rest.count("/") == 1:
        o2, he = (number(part) / 100 for part in rest.split("/"))
    else:
        raise Unsure("gas")
    if min(o2, he) < 0 or o2 + he > 1:
        raise Unsure("gas")
    return float(o2), float(he)
