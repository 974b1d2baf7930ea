"""Texts made and damaged at random: whatever is accepted agrees with the naive second reader.

Set the environment variable GASPHYS_LONG for 10 000 texts; a failing case is repeated by its number.
"""

from __future__ import annotations

import collections
import contextlib
import io
import os
import re
import time

import numpy as np
import pytest

from gasphys.errors import InputFileError
from gasphys.gas import Gas
from gasphys.records import Log, read_log
from tests.records.oracle import Unsure, understand

CASES = 10_000 if os.environ.get("GASPHYS_LONG") else 500

GASES = [
    "air",
    "oxygen",
    "nitrox 32",
    "EAN 48",
    "trimix 17/48",
    "heliox 16/84",
    "Nitrox 32.5",
    " O2 ",
    "18/45",
]
# header: (lowest, highest, decimals) of the numbers to draw
PRESSURES = {
    "depth_msw": (0, 90, 2),
    "depth_fsw": (-3, 300, 1),
    "depth_m": (0, 60, 2),
    "pressure_abs_kPa": (60, 700, 3),
    "pressure_abs_bar": (0.9, 7, 3),
    "pressure_abs_atm": (0.9, 7, 4),
    "pressure_gauge_kPa": (0, 500, 2),
    "pressure_gauge_bar": (0, 5, 3),
    "pressure_gauge_psi": (0, 80, 2),
}
NASTY = [
    "", " ", "nan", "inf", "-inf", "1_0", "1e5", "1e-3", "1e400", "1,5", "1.234,5", "1 000", "１２",
    "٣", "0x1A", "-0", "+7", "7.", ".7", ".", "-", "--1", "1e", "9" * 400, "24:00:00", "23:59:60",
    "23:59:59.5", "00:00:01", "08:00", "-01:00:00", "2042-03-03T24:00:00", "2042-03-03T08:00:00Z",
    "2042-02-30T08:00:00", "oxygen", "nitrox 130", "mix O2=0.3 Ar=0.01", "mix O2=nan",
    "trimix 50/60", "nitrox 3_2", "#", '"', '""', "\0", "\ufeff", "\xa0", "true", "None", "=1+1",
    "1;2", "1,2", "1\t2", "\u2028",
]  # fmt: skip
CHARACTERS = list('0123456789.,;:\t"#-+eETZ /\r\n_%abx') + [
    "\0",
    "\ufeff",
    "\xa0",
    "２",
    "\ud800",
    "\x0c",
    "\x85",
]


def make(rng: np.random.Generator) -> tuple[list[list[str]], str, float | None]:
    """Draw the cells of a clean log, its delimiter and a barometer."""
    kind = str(rng.choice(["time_min", "time_s", "time_hms", "time"]))
    pressure = str(rng.choice(list(PRESSURES)))
    regular = rng.random() < 0.5
    n = int(rng.integers(2, 30 if regular else 15))
    steps = np.full(n, 10) if regular else rng.integers(1, 400, n)
    seconds = int(rng.integers(0, 70_000)) + np.cumsum(steps)
    if kind == "time_min":
        times = [f"{s / 60:.4f}" for s in seconds]
    elif kind == "time_s":
        times = [f"{s - seconds[0]}" for s in seconds]
    elif kind == "time_hms":
        times = [f"{s // 3600:02}:{s // 60 % 60:02}:{s % 60:02}" for s in seconds]
    else:
        zone = str(rng.choice(["", "Z", "+01:00", "-0330"]))
        times = [f"2042-03-03T{s // 3600:02}:{s // 60 % 60:02}:{s % 60:02}{zone}" for s in seconds]
    low, high, decimals = PRESSURES[pressure]
    columns = {
        kind: times,
        # A recorder's log lies at one pressure for long, a written one moves.
        pressure: [
            f"{v:.{decimals}f}" for v in rng.uniform(low, low + (high - low) * rng.choice([0.001, 1.0]), n)
        ],
        "gas": [str(g) for g in (rng.choice(GASES, n) if not regular else [rng.choice(GASES)] * n)],
    }
    if rng.random() < 0.4:
        columns["setpoint_kPa"] = [f"{v:.1f}" if v < 160 else "" for v in rng.uniform(40, 200, n)]
    elif rng.random() < 0.3:
        columns["setpoint_bar"] = [f"{v:.2f}" if v < 1.6 else "" for v in rng.uniform(0.4, 2, n)]
    if rng.random() < 0.3:
        columns["o2_uptake_stpd"] = [f"{v:.2f}" for v in rng.uniform(0.2, 3, n)]
    if rng.random() < 0.3:
        columns["ventilation_btps"] = [f"{v:.1f}" if v < 60 else "" for v in rng.uniform(5, 80, n)]
    if rng.random() < 0.2:
        columns["room_degC"] = [f"{v:.1f}" for v in rng.uniform(18, 26, n)]
    names = [str(name) for name in rng.permutation(list(columns))]
    table = [names, *([columns[name][i] for name in names] for i in range(n))]
    surface = 101.0 if pressure.startswith("pressure_gauge") or rng.random() < 0.3 else None
    return table, str(rng.choice([",", ";", "\t"])), surface


def write(table: list[list[str]], delimiter: str, rng: np.random.Generator) -> str:
    """Write cells as text, some quoted, with comments and blank lines here and there."""
    quote = rng.random() < 0.3
    end = str(rng.choice(["\n", "\r\n", "\r"], p=[0.8, 0.1, 0.1]))
    lines = []
    for row in table:
        if rng.random() < 0.03:
            lines.append(str(rng.choice(["", "  ", "# a remark, with; signs"])))
        lines.append(delimiter.join(f'"{cell}"' if quote and rng.random() < 0.5 else cell for cell in row))
    return end.join(lines) + end


def damage(text: str, table: list[list[str]], delimiter: str, rng: np.random.Generator) -> str:
    """Spoil a text in one of many ways."""
    way = int(rng.integers(0, 15))
    if way <= 3:  # a cell
        row, column = int(rng.integers(0, len(table))), int(rng.integers(0, len(table[0])))
        spoiled = [list(r) for r in table]
        spoiled[row][column] = str(rng.choice(NASTY))
        return write(spoiled, delimiter, rng)
    if way == 4:  # a value from elsewhere in the same column: duplicates, clocks set back, switches
        spoiled = [list(r) for r in table]
        column = int(rng.integers(0, len(table[0])))
        row, other = (int(i) for i in rng.integers(1, len(table), 2))
        spoiled[row][column] = spoiled[other][column]
        return write(spoiled, delimiter, rng)
    if way == 5:  # decimal commas
        spoiled = [[c.replace(".", ",") if rng.random() < 0.5 else c for c in r] for r in table]
        return write([table[0], *spoiled[1:]], delimiter, rng)
    if way == 6:  # rows lost, repeated or exchanged
        index = list(range(1, len(table)))
        where = int(rng.integers(0, len(index)))
        index[where:where] = [int(i) for i in rng.choice(index, int(rng.integers(1, 3)))]
        return write([table[0], *(table[i] for i in index)], delimiter, rng)
    if way == 7:  # the end
        return text[: int(rng.integers(0, len(text)))]
    if way == 8:  # in front
        return str(rng.choice(["\ufeff", "\n\n", "#\n", " ", "sep=;\n", '"'])) + text
    if way == 9:  # a row twice
        row = int(rng.integers(1, len(table)))
        return write([*table[: row + 1], *table[row:]], delimiter, rng)
    if way == 10:  # gas cells empty
        column = table[0].index("gas")
        spoiled = [
            [c if i != column or rng.random() < 0.5 else "" for i, c in enumerate(r)] for r in table[1:]
        ]
        return write([table[0], table[1], *spoiled[1:]], delimiter, rng)
    if way == 11:  # another hour from a row on
        row, hour = int(rng.integers(1, len(table))), f"{int(rng.integers(0, 24)):02}:"
        spoiled = [[re.sub(r"\d\d:(?=\d\d:)", hour, c) for c in r] for r in table[row:]]
        return write([*table[:row], *spoiled], delimiter, rng)
    for _ in range(int(rng.integers(1, 4))):  # single characters
        at = int(rng.integers(0, len(text) + 1))
        kept = at + int(rng.integers(0, 2))
        text = text[:at] + str(rng.choice([*CHARACTERS, ""])) + text[kept:]
    return text


def check_shape(log: Log) -> None:
    """What holds for every log, whatever was repaired."""
    n = len(log.time)
    assert n >= 2
    assert log.time[0] == 0.0
    assert (np.diff(log.time) > 0.0).all()
    assert ((log.ambient_pressure >= 5.0 - 1e-9) & (log.ambient_pressure <= 20000.0)).all()
    for array in (log.ambient_pressure, log.setpoint, log.o2_uptake_stpd, log.ventilation_btps):
        assert array.dtype == np.float64
        assert len(array) == n
    assert len(log.gas) == n
    assert all(str(Gas.parse(name)) == name for name in log.gas)


def as_array(values: list[float | None]) -> np.ndarray:
    return np.array([np.nan if v is None else v for v in values])


def differs(log: Log, text: str, surface: float | None) -> str:
    """Return how a log differs from the second reading, "" if it does not."""
    try:
        second = understand(text, surface)
    except Unsure as reason:
        return f"unsure of {reason}"
    if len(second.time) != len(log.time):
        return "rows"
    for name, mine, other, tolerance in (
        ("time", log.time, np.array(second.time), 1e-8),
        ("pressure", log.ambient_pressure, np.array(second.pressure), 1e-9),
        ("setpoint", log.setpoint, as_array(second.setpoint), 1e-9),
        ("o2_uptake", log.o2_uptake_stpd, as_array(second.o2_uptake), 1e-9),
        ("ventilation", log.ventilation_btps, as_array(second.ventilation), 1e-9),
    ):
        if not np.allclose(mine, other, rtol=1e-12, atol=tolerance, equal_nan=True):
            return name
    for name, (o2, he) in zip(log.gas, second.gas, strict=True):
        mixed = Gas.parse(name)
        if abs(mixed.oxygen - o2) > 1e-9 or abs(mixed.helium - he) > 1e-9:
            return "gas"
    return ""


def one_case(number: int) -> str:
    """Run one case and return what became of it."""
    rng = np.random.default_rng([2042, number])
    table, delimiter, surface = make(rng)
    clean = write(table, delimiter, rng)
    damaged = rng.random() < 0.8
    text = damage(clean, table, delimiter, rng) if damaged else clean
    file: io.StringIO | io.BytesIO = io.StringIO(text, newline="")
    if rng.random() < 0.3:
        file = io.BytesIO(text.encode("utf-8", "surrogatepass"))
    start = time.process_time()
    refused = None
    try:
        log = read_log(file, surface_pressure=surface)
    except InputFileError as caught:
        refused = caught
    assert time.process_time() - start < 10.0, f"case {number} is slow"
    if refused is not None:
        assert damaged, f"case {number}: a clean text refused: {refused}"
        assert refused.remedy, f"case {number}"
        assert isinstance(refused.line, int), f"case {number}: no line: {refused}"
        assert 1 <= refused.line <= text.count("\n") + text.count("\r") + 1, f"case {number}: {refused}"
        return "refused"
    check_shape(log)
    repaired = any(entry.startswith("repaired") for entry in log.history)
    difference = differs(log, text, surface)
    assert repaired or not difference, f"case {number}: silently another {difference}: {text!r}\n{log}"
    return ("clean" if not damaged else "equal") if not difference else "repaired"


def test_random_texts() -> None:
    outcome = collections.Counter(one_case(number) for number in range(CASES))
    # Each kind must occur often, or the texts say nothing.
    for kind in ("clean", "equal", "repaired", "refused"):
        assert outcome[kind] > 0.05 * CASES, outcome


def test_harmless_faults_give_back_the_clean_numbers() -> None:
    """A regular clock log with every repairable fault at once reads as it did before."""
    for number in range(CASES // 5):
        rng = np.random.default_rng([2046, number])
        n = int(rng.integers(25, 60))
        step = int(rng.choice([1, 2, 10, 30]))
        start = int(rng.integers(0, 86400))
        bar = rng.uniform(1, 6, n).round(3)
        gases = [str(g) for g in rng.choice(["air", "oxygen", "nitrox 48"], n)]

        def row(time_of_day: int, p: float, gas: str, comma: bool) -> str:
            clock = f"{time_of_day // 3600:02}:{time_of_day // 60 % 60:02}:{time_of_day % 60:02}"
            return f"{clock};{str(p).replace('.', ',') if comma else p};{gas}"

        head = "time_hms;pressure_abs_bar;gas"
        times = (start + step * np.arange(n)) % 86400
        clean = [row(int(t), p, g, False) for t, p, g in zip(times, bar, gases, strict=True)]

        # Set back late, by less than the record is long, so that midnight is passed at most once.
        back_at = int(rng.integers(n // 2, n - 2))
        back = int(rng.integers(1, step * (n // 2)))
        seconds = start + step * np.arange(n) - np.where(np.arange(n) >= back_at, back + step, 0)
        commas = rng.random(n) < 0.2
        commas[0] = True
        cells = [g if i == 0 or g != gases[i - 1] else "" for i, g in enumerate(gases)]
        faulty = [
            row(int(t), p, g, c) for t, p, g, c in zip(seconds % 86400, bar, cells, commas, strict=True)
        ]
        midnights = seconds // 86400
        if len(set(midnights[:back_at])) > 1 or midnights[0] != midnights[back_at:].max():
            continue  # a clock set back near midnight has tests of its own
        twice = int(rng.integers(1, back_at))
        faulty.insert(twice, faulty[twice - 1])

        first = read_log(io.StringIO("\n".join([head, *clean])))
        second = read_log(io.StringIO("\ufeff" + "\n".join([head, *faulty])))
        np.testing.assert_allclose(second.time, first.time, rtol=1e-13)
        assert second.ambient_pressure.tolist() == first.ambient_pressure.tolist()
        assert second.gas == first.gas
        words = " | ".join(second.history)
        for fault in ("byte order mark", "clock set back", "decimal comma", "dropped"):
            assert fault in words, f"case {number}: {words}"


@pytest.mark.parametrize("codec", ["utf-16", "utf-32", "latin-1", "cp037"])
def test_random_bytes_of_other_encodings(codec: str) -> None:
    for number in range(CASES // 50):
        rng = np.random.default_rng([2043, number])
        table, delimiter, surface = make(rng)
        table[-1][-1] += "\xe9"
        with pytest.raises(InputFileError) as caught:
            read_log(io.BytesIO(write(table, delimiter, rng).encode(codec)), surface_pressure=surface)
        assert isinstance(caught.value.line, int)


def test_random_noise() -> None:
    for number in range(CASES // 5):
        rng = np.random.default_rng([2044, number])
        noise = rng.bytes(int(rng.integers(0, 400)))
        texts = "".join(rng.choice(CHARACTERS, int(rng.integers(0, 400))))
        for file in (io.BytesIO(noise), io.StringIO(texts, newline="")):
            with pytest.raises(InputFileError):
                read_log(file)


def test_random_breathing_periods() -> None:
    """Periods against a pointwise look-up; damaged ones are refused or repaired, never another error."""
    for number in range(CASES // 5):
        rng = np.random.default_rng([2045, number])
        n = int(rng.integers(2, 12))
        seconds = np.concatenate([[0], np.cumsum(rng.integers(1, 900, n))])
        pressure = rng.uniform(101, 300, n + 1).round(2)
        log_text = "time_s,pressure_abs_kPa\n" + "".join(
            f"{s},{p}\n" for s, p in zip(seconds, pressure, strict=True)
        )
        edges = np.sort(
            rng.choice(np.arange(seconds[-1] + 1), min(6, int(seconds[-1]) // 2 * 2), replace=False)
        )
        edges = edges[: len(edges) // 2 * 2].reshape(-1, 2)
        if not len(edges):
            continue
        gases = [str(g) for g in rng.choice(["oxygen", "nitrox 50", "heliox 20/80"], len(edges))]
        periods = "start_s;end_s;gas\n" + "".join(
            f"{a};{b};{g}\n" for (a, b), g in zip(edges, gases, strict=True)
        )
        log = read_log(io.StringIO(log_text), breathing=io.StringIO(periods))
        check_shape(log)
        for second in range(0, int(seconds[-1]), 7):
            inside = [g for (a, b), g in zip(edges, gases, strict=True) if a <= second + 0.5 < b]
            row = int(np.searchsorted(log.time * 60.0, second + 0.5)) - 1
            assert log.gas[row] == (inside[0] if inside else "air"), f"case {number}"
        np.testing.assert_allclose(
            log.ambient_pressure, np.interp(log.time * 60.0, seconds, pressure), rtol=1e-12
        )
        assert set(np.round(log.time * 60.0, 6)) == set(seconds) | set(edges.ravel()), f"case {number}"

        at = int(rng.integers(0, len(periods)))
        spoiled = periods[:at] + str(rng.choice([*CHARACTERS, ""])) + periods[at + 1 :]
        with contextlib.suppress(InputFileError):
            check_shape(read_log(io.StringIO(log_text), breathing=io.StringIO(spoiled, newline="")))
