"""Good logs against numbers worked by hand, and harmless faults with what the history says of them.

Pressures: 1 atm = 101.325 kPa, 1 bar = 100 kPa, 1 psi = 6.894757 kPa and 33 fsw = 1 atm, 1 msw =
10 kPa, EN 13319 meter = 10 kPa are definitions; the sums beside them were done by hand.
"""

from __future__ import annotations

import dataclasses
import io
import time
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from gasphys.errors import InputFileError
from gasphys.records import Log, read_log


def read(text: str, **options: Any) -> Log:
    return read_log(io.StringIO(text), **options)


def repaired(log: Log) -> list[str]:
    return [entry for entry in log.history if entry.startswith("repaired")]


# header: (cells, barometer, kPa absolute worked by hand, surface pressure, depth unit)
PRESSURES: dict[str, tuple[list[str], float | None, list[float], float, str]] = {
    "depth_msw": (["0", "18", "-1.5"], None, [101.325, 281.325, 86.325], 101.325, "msw"),
    "depth_fsw": (["0", "33", "60.0"], None, [101.325, 202.65, 285.552273], 101.325, "fsw"),
    "depth_m": (["0", "38", "7.25"], 85.0, [85.0, 465.0, 157.5], 85.0, "m"),
    "pressure_abs_kPa": (["101.0", "243.18", "5"], None, [101.0, 243.18, 5.0], 101.0, ""),
    "pressure_abs_bar": (["1.01", "+2.4", ".5"], None, [101.0, 240.0, 50.0], 101.0, ""),
    "pressure_abs_atm": (["2.4", "1", "2e0"], None, [243.18, 101.325, 202.65], 101.325, ""),
    "pressure_gauge_kPa": (["0", "142.18", "-1."], 101.0, [101.0, 243.18, 100.0], 101.0, ""),
    "pressure_gauge_bar": (["0", "1.4", "1E1"], 101.0, [101.0, 241.0, 1101.0], 101.0, ""),
    "pressure_gauge_psi": (["0", "14.69594878", "10"], 101.325, [101.325, 202.65, 170.272573], 101.325, ""),
}


@pytest.mark.parametrize("delimiter", [",", ";", "\t"], ids=["comma", "semicolon", "tab"])
@pytest.mark.parametrize("header", PRESSURES)
def test_pressures(header: str, delimiter: str) -> None:
    cells, barometer, kpa, surface, unit = PRESSURES[header]
    rows = [("gas", header, "time_s"), *(("air", cell, str(60 * i)) for i, cell in enumerate(cells))]
    log = read("\n".join(delimiter.join(row) for row in rows), surface_pressure=barometer)
    np.testing.assert_allclose(log.ambient_pressure, kpa, rtol=0, atol=1e-6)
    np.testing.assert_allclose(log.time, [0.0, 1.0, 2.0], rtol=0, atol=0)
    assert log.surface_pressure == pytest.approx(surface, abs=1e-12)
    assert log.depth_unit == unit
    assert not repaired(log)


# header: (cells, minutes worked by hand, start)
TIMES: dict[str, tuple[list[str], list[float], str]] = {
    "time_min": (["0", "2.5", "1e2"], [0.0, 2.5, 100.0], ""),
    "time_s": (["0", "10", "45"], [0.0, 1 / 6, 0.75], ""),
    "time_hms": (["8:00:00", "08:00:10.5", "10:01:00"], [0.0, 0.175, 121.0], "08:00:00"),
    "time": (
        ["2042-03-03T23:59:30", "2042-03-03 23:59:45.25", "2042-03-04T00:01"],
        [0.0, 0.2541666666666667, 1.5],
        "2042-03-03T23:59:30",
    ),
}


@pytest.mark.parametrize("header", TIMES)
def test_times(header: str) -> None:
    cells, minutes, start = TIMES[header]
    log = read(f"{header},depth_msw,gas\n" + "".join(f"{cell},0,air\n" for cell in cells))
    np.testing.assert_allclose(log.time, minutes, rtol=0, atol=1e-9)
    assert log.time[0] == 0.0
    assert log.start == start
    assert not repaired(log)


@pytest.mark.parametrize(
    ("cells", "minutes"),
    [
        (["2042-03-30T00:59:00Z", "2042-03-30T01:01:00Z"], 2.0),
        (["2042-03-30T01:59:00+01:00", "2042-03-30T03:01:00+02:00"], 2.0),
        (["2042-03-30T01:59:00+01", "2042-03-29T23:31:00-0130"], 2.0),
        (["2044-02-28T24:00:00", "2044-02-29T00:02:00"], 2.0),  # a leap year
        (["2042-12-31T24:00:00", "2043-01-01T00:02:00"], 2.0),
    ],
)
def test_iso_times(cells: list[str], minutes: float) -> None:
    log = read("time;depth_msw;gas\n" + "".join(f"{cell};0;air\n" for cell in cells))
    assert log.time[1] == pytest.approx(minutes, abs=1e-9)
    offsets = {cell[19:] for cell in cells}
    assert any("UTC offset" in entry for entry in log.history) == (len(offsets) > 1)


def test_time_counts_from_the_first_row() -> None:
    log = read("time_min,depth_msw,gas\n-5,0,air\n3,9,air\n")
    assert log.time.tolist() == [0.0, 8.0]
    assert "noted: time counted from the first row, -5 in time_min" in log.history


def test_all_columns_and_their_spaces() -> None:
    log = read(
        ' time_min , depth_msw ,gas,"setpoint_bar",o2_uptake_stpd,ventilation_btps\n'
        ' 0 , 0 , Air ,,0.3,\n 1 ," 9 ", "trimix 17/48" , 1.3 ,, 22.5 \n2,9,O2,1.30,1,\n'
    )
    assert log.gas == ("air", "trimix 17/48", "oxygen")
    np.testing.assert_allclose(log.setpoint, [np.nan, 130.0, 130.0], rtol=1e-15)
    np.testing.assert_allclose(log.o2_uptake_stpd, [0.3, np.nan, 1.0], rtol=0)
    np.testing.assert_allclose(log.ventilation_btps, [np.nan, 22.5, np.nan], rtol=0)
    assert log.ambient_pressure.tolist() == [101.325, 191.325, 191.325]


def test_absent_columns_are_unknown() -> None:
    log = read("time_min,depth_msw,gas\n0,0,air\n1,9,air\n")
    for array in (log.setpoint, log.o2_uptake_stpd, log.ventilation_btps):
        assert np.isnan(array).tolist() == [True, True]


def test_the_value_cannot_be_changed() -> None:
    log = read("time_min,depth_msw,gas\n0,0,air\n1,9,air\n")
    with pytest.raises(ValueError, match="read-only"):
        log.ambient_pressure[0] = 0.0
    with pytest.raises(dataclasses.FrozenInstanceError):
        log.surface_pressure = 0.0  # type: ignore[misc]


@pytest.mark.parametrize("end", ["\n", "\r\n", "\r"], ids=["LF", "CRLF", "CR"])
@pytest.mark.parametrize("last", [True, False])
def test_line_ends(end: str, last: bool, tmp_path: Path) -> None:
    file = tmp_path / "recorder.csv"
    text = end.join(["# log", "time_min,depth_msw,gas", "0,0,air", "", "1,9,air"]) + end * last
    file.write_bytes(text.encode())
    for source in (file, str(file), io.BytesIO(text.encode()), io.StringIO(text, newline="")):
        log = read_log(source)
        assert log.time.tolist() == [0.0, 1.0]
        assert "skipped: 1 comment line, 1 blank line" in log.history
    with open(file, encoding="utf-8") as stream:
        assert read_log(stream).path == str(file)


# Assumptions


@pytest.mark.parametrize(
    ("first", "surface", "why"),
    [
        ("50", 50.0, "first row"),
        ("110", 110.0, "first row"),
        ("49.9", 101.325, "one standard atmosphere"),
        ("110.1", 101.325, "one standard atmosphere"),
    ],
)
def test_surface_pressure_of_an_absolute_log(first: str, surface: float, why: str) -> None:
    text = f"time_min,pressure_abs_kPa,gas\n0,{first},air\n1,280,air\n"
    log = read(text)
    assert log.surface_pressure == surface
    assert [e for e in log.history if why in e and f"{surface:g} kPa" in e]
    given = read(text, surface_pressure=99.0)
    assert given.surface_pressure == 99.0
    assert given.history == ()


def test_surface_pressure_of_a_depth_log() -> None:
    text = "time_min,depth_msw,gas\n0,0,air\n1,9,air\n"
    assert read(text).history == (
        "assumed: surface pressure 101.325 kPa, one standard atmosphere; no barometer given",
    )
    assert read(text, surface_pressure="1.01 bar").ambient_pressure.tolist() == [101.0, 191.0]
    assert read(text, surface_pressure=np.float64(101)).history == ()


def test_meaning_of_a_depth_is_said() -> None:
    for unit, words in (("m", "10 kPa (EN 13319)"), ("fsw", "3.07045 kPa (33 per atm)")):
        log = read(f"time_min,depth_{unit},gas\n0,0,air\n1,9,air\n", surface_pressure=101.0)
        assert any(entry.startswith("assumed") and words in entry for entry in log.history)


# Repairs: numbers and history


def test_byte_order_mark() -> None:
    log = read("\ufefftime_min,depth_msw,gas\n0,0,air\n1,9,air\n")
    assert repaired(log) == ["repaired: byte order mark at the start of the file removed"]
    assert read_log(io.BytesIO("time_min,depth_msw,gas\n0,0,air\n1,9,air\n".encode("utf-8-sig"))).history == (
        log.history
    )


@pytest.mark.parametrize(
    "text",
    [
        "time_min;depth_msw;gas\n0;0;air\n1;9,5;air\n2;10;air\n3;+0,5e1;air\n",
        "time_min\tdepth_msw\tgas\n0\t0\tair\n1\t9,5\tair\n2\t10\tair\n3\t5,\tair\n",
        'time_min,depth_msw,gas\n0,0,air\n1,"9,5",air\n2,10,air\n3,"5,0",air\n',
    ],
    ids=["semicolon", "tab", "quoted"],
)
def test_decimal_commas(text: str) -> None:
    log = read(text)
    np.testing.assert_allclose(log.ambient_pressure, [101.325, 196.325, 201.325, 151.325], rtol=1e-15)
    assert repaired(log) == ["repaired: decimal comma read as a point in 2 cells of depth_msw (lines 3, 5)"]


def test_decimal_commas_of_clocks() -> None:
    log = read("time_hms;depth_msw;gas\n08:00:00,5;0;air\n08:00:02;9;air\n")
    assert log.time[1] == pytest.approx(0.025, abs=1e-12)
    assert log.start == "08:00:00.5"
    assert repaired(log) == ["repaired: decimal comma read as a point in 1 cell of time_hms (line 2)"]


def test_midnight() -> None:
    log = read(
        "time_hms;depth_msw;gas\n23:59:40;0;air\n23:59:50;9;air\n24:00:00;9;air\n00:00:10;9;air\n"
        "12:00:00;9;air\n00:00:00;0;air\n"
    )
    np.testing.assert_allclose(log.time * 60, [0, 10, 20, 30, 43220, 86420], rtol=1e-15)
    assert repaired(log) == [
        "repaired: clock passed midnight, 24 h added from there on (lines 5, 7)",
    ]


def clock_log(*seconds: float, gas: str = "air") -> str:
    rows = "".join(f"{int(s) // 3600:02}:{int(s) // 60 % 60:02}:{s % 60:05.2f};18;{gas}\n" for s in seconds)
    return "time_hms;depth_msw;gas\n" + rows


def test_clock_set_back() -> None:
    # Ten steps of 10 s; then 30110 would come, but the clock shows an hour less, and 10 s steps again.
    log = read(clock_log(*range(30000, 30101, 10), *range(26510, 26561, 10)))
    np.testing.assert_allclose(log.time * 60, np.arange(0, 161, 10), rtol=1e-14)
    assert repaired(log) == [
        "repaired: clock set back by 60 min at line 13; the row placed one median step (10 s) after "
        "the row before"
    ]


def test_clock_set_back_of_dated_times() -> None:
    times = [f"2042-03-03T00:00:{s}" for s in range(10, 60, 10)] + [
        f"2042-03-02T23:50:{s}" for s in range(10, 60, 10)
    ]
    log = read("time,depth_msw,gas\n" + "".join(f"{t},18,air\n" for t in times))
    np.testing.assert_allclose(log.time * 60, np.arange(0, 91, 10), rtol=1e-14)
    assert len(repaired(log)) == 1


def test_clock_set_back_needs_four_regular_steps_of_five() -> None:
    # Steps 10, 10, 10, 10, -5: four of five as the median; one of them 12 s and then 12.1 s.
    log = read(clock_log(0, 10, 20, 30, 42, 37))
    np.testing.assert_allclose(log.time * 60, [0, 10, 20, 30, 42, 52], rtol=1e-14)
    with pytest.raises(InputFileError, match=r"goes back by 5\.1 s"):
        read(clock_log(0, 10, 20, 30, 42.1, 37))
    with pytest.raises(InputFileError, match="goes back by 5 s"):
        read(clock_log(0, 10, 20, 30, 25))


def test_duplicate_times() -> None:
    log = read(
        "time_s,pressure_abs_kPa,gas\n0,101,air\n10,150,air\n10,151,air\n10,149,air\n20,200,air\n20,200,air\n"
    )
    assert (log.time * 60).tolist() == [0, 10, 20]
    assert log.ambient_pressure.tolist() == [101.0, 150.0, 200.0]
    assert repaired(log) == [
        "repaired: 3 rows with the time of the row before dropped (lines 4, 5, 7; pressures at most 1 kPa "
        "apart)"
    ]


def test_duplicate_time_with_another_gas_is_a_switch() -> None:
    log = read(
        "time_s,pressure_abs_kPa,gas,setpoint_kPa\n0,101,air,\n10,150,air,\n10,150.5,oxygen,\n20,200,,\n"
        "20,200,,130\n30,200,,130\n"
    )
    assert (log.time * 60).tolist() == [0, 10, 20, 30]
    assert log.ambient_pressure.tolist() == [101.0, 150.0, 200.0, 200.0]
    assert log.gas == ("air", "oxygen", "oxygen", "oxygen")
    np.testing.assert_allclose(log.setpoint, [np.nan, np.nan, 130, 130], rtol=0)
    assert len(repaired(log)) == 2
    assert "taken as a switch" in repaired(log)[1]
    assert "lines 4, 6; pressures at most 0.5 kPa apart" in repaired(log)[1]


def test_duplicate_after_a_switch_is_compared_with_it() -> None:
    log = read("time_s,depth_msw,gas\n0,0,air\n10,9,air\n10,9,oxygen\n10,9,oxygen\n10,9,air\n20,9,\n")
    assert log.gas == ("air", "air", "air")
    assert len(log.time) == 3
    assert [entry.partition(" row")[0] for entry in repaired(log)[1:]] == ["repaired: 1", "repaired: 2"]


def test_gaps() -> None:
    log = read(clock_log(0, 10, 20, 30, 100, 110, 120, 150, 160))
    assert [entry for entry in log.history if "gap" in entry] == [
        "noted: no row for 70 s before line 6 (median step 10 s), a gap or a clock set forward; one "
        "straight line there"
    ]
    assert len(log.time) == 9


@pytest.mark.parametrize(
    "text",
    [
        "time_hms,depth_msw,gas\n05:00:00,0,air\n05:01:00,9,air\n19:00:00,9,air\n19:07:00,0,air\n",
        "time,depth_msw,gas\n"
        + "".join(f"2042-03-03T{h:02}:0{m}:00,9,air\n" for h in (5, 19) for m in range(9)),
    ],
    ids=["written by hand", "dated"],
)
def test_long_gaps(text: str) -> None:
    log = read(text)
    assert log.time[-1] > 13 * 60
    assert any("no row for 13." in entry and "h before line" in entry for entry in log.history)
    assert not repaired(log)


def test_many_gaps_are_counted() -> None:
    seconds = np.cumsum([0] + [10, 10, 40] * 15)
    log = read("time_s,depth_msw,gas\n" + "".join(f"{s},9,air\n" for s in seconds))
    assert sum("no row for" in entry for entry in log.history) == 10
    assert any("5 further gaps" in entry and "longest 40 s" in entry for entry in log.history)


def test_empty_gas_cells() -> None:
    log = read("time_s,depth_msw,gas\n0,0,air\n10,9,\n20,9,nitrox 48\n30,9, \n")
    assert log.gas == ("air", "air", "nitrox 48", "nitrox 48")
    assert repaired(log) == ["repaired: gas of the row before repeated in 2 empty cells (lines 3, 5)"]


def test_long_lists_of_lines_are_counted() -> None:
    log = read("time_s,depth_msw,gas\n0,0,air\n" + "".join(f"{s},9,\n" for s in range(1, 31)))
    assert repaired(log)[0].endswith("30 empty cells (lines 3, 4, 5, 6, 7, 8, 9, 10, 11, 12 and 20 more)")


def test_ten_gaps_are_listed_without_a_count() -> None:
    seconds = np.cumsum([0] + [10, 10, 40] * 10)
    log = read("time_s,depth_msw,gas\n" + "".join(f"{s},9,air\n" for s in seconds))
    assert sum("no row for" in entry for entry in log.history) == 10
    assert not any("further" in entry for entry in log.history)


def test_two_rows_are_enough() -> None:
    log = read("time_s,depth_msw,gas\n0,0,air\n0,0,air\n10,0,air\n10,0,air\n")
    assert log.time.tolist() == [0.0, 1 / 6]
    assert "(lines 3, 5; pressures at most 0 kPa apart)" in repaired(log)[0]


def test_longest_cell_and_most_columns() -> None:
    longest = "9." + "0" * 198
    header = "time_s,depth_msw,gas," + ",".join(f"c{i}" for i in range(497))
    log = read(f"{header}\n0,0,air{',' * 497}\n10,{longest},air,{'x' * 300}{',' * 496}\n")
    assert log.ambient_pressure[1] == 191.325
    with pytest.raises(InputFileError, match="201 characters"):
        read(f"time_s,depth_msw,gas\n0,0,air\n10,{longest}0,air\n")


def test_ten_lines_are_listed_without_a_count() -> None:
    log = read("time_s,depth_msw,gas\n0,0,air\n" + "".join(f"{s},9,\n" for s in range(1, 11)))
    assert repaired(log)[0].endswith("10 empty cells (lines 3, 4, 5, 6, 7, 8, 9, 10, 11, 12)")


@pytest.mark.parametrize("barometer", [20.0, 120.0])
def test_ends_of_the_possible_barometers(barometer: float) -> None:
    log = read("time_s,depth_msw,gas\n0,0,air\n10,9,air\n", surface_pressure=barometer)
    assert log.ambient_pressure.tolist() == [barometer, barometer + 90.0]


def test_unknown_columns() -> None:
    log = read("time_s,depth_msw,gas,room_degC,\n0,0,air,21,\n10,9,air,x y,\n")
    assert "skipped: columns not known, 'room_degC'" in log.history
    assert "skipped: 1 empty column without a name" in log.history
    assert not repaired(log)


def test_steps_lost_in_rounding_are_duplicates() -> None:
    log = read("time_s,depth_msw,gas\n-500000000,0,air\n1e-9,9,air\n2e-9,9,oxygen\n60,9,\n")
    assert len(log.time) == 3
    assert log.gas[1] == "oxygen"
    assert "switch" in repaired(log)[1]


def test_a_hundred_thousand_rows() -> None:
    text = "time_s;depth_msw;gas\n" + "".join(f"{10 * i};{18 + i % 7 / 10:.1f};air\n" for i in range(100_000))
    start = time.process_time()
    log = read(text)
    assert time.process_time() - start < 5.0  # 0.2 s where this was written
    assert len(log.time) == 100_000
    assert log.ambient_pressure.sum() == pytest.approx(
        sum(101.325 + 10 * (18 + i % 7 / 10) for i in range(100_000)), rel=1e-11
    )
