"""Breathing periods laid over a pressure log."""

# ruff: noqa: E501  (tables of cases: one case, one line)

from __future__ import annotations

import io
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from gasphys.errors import InputFileError
from gasphys.gas import Gas
from gasphys.records import Log, read_log

LOG = "time_min,pressure_abs_kPa\n0,101\n10,241\n40,241\n50,101\n"
CLOCK = "time_hms;pressure_abs_kPa\n23:50:00;101\n00:00:00;241\n00:30:00;241\n00:40:00;101\n"
DATED = "time;pressure_abs_kPa\n" + "".join(
    f"2042-03-0{day}T{clock}+01:00;{p}\n"
    for day, clock, p in [(3, "23:50:00", 101), (4, "00:00:00", 241), (4, "00:30:00", 241), (4, "00:40", 101)]
)


def overlay(log: str, periods: str, **options: Any) -> Log:
    return read_log(io.StringIO(log), breathing=io.StringIO(periods), **options)


def steps(log: Log) -> list[tuple[float, float, str]]:
    return [
        (round(t, 9), round(p, 9), g) for t, p, g in zip(log.time, log.ambient_pressure, log.gas, strict=True)
    ]


# Pressure at 5 min: halfway of 101 to 241; at 45 min: halfway of 241 to 101.
EXPECTED = [
    (0.0, 101.0, "air"),
    (5.0, 171.0, "oxygen"),
    (10.0, 241.0, "oxygen"),
    (20.0, 241.0, "air"),
    (25.0, 241.0, "oxygen"),
    (40.0, 241.0, "nitrox 50"),
    (45.0, 171.0, "air"),
    (50.0, 101.0, "air"),
]


@pytest.mark.parametrize(
    ("log", "periods"),
    [
        (LOG, "start_min,end_min,gas\n5,20,oxygen\n25,40,oxygen\n40,45,nitrox 50\n"),
        (LOG, "start_s;end_s;gas\n300;1200;oxygen\n1500;2400;oxygen\n2400;2700;nitrox 50\n"),
        (CLOCK, "gas,start_min,end_min\noxygen,5,20\noxygen,25,40\nnitrox 50,40,45\n"),
        (
            CLOCK,
            "start_hms,end_hms,gas\n23:55:00,00:10:00,oxygen\n00:15:00,00:30:00,oxygen\n"
            "00:30:00,00:35:00,nitrox 50\n",
        ),
        (
            DATED,
            "start,end,gas\n2042-03-03T23:55:00+01:00,2042-03-03T23:10:00Z,oxygen\n"
            "2042-03-03T23:15Z,2042-03-03T23:30Z,oxygen\n2042-03-03T23:30Z,2042-03-03T23:35Z,nitrox 50\n",
        ),
        (
            LOG.replace("\n0,", "\n7,").replace("\n10,", "\n17,").replace("\n40,", "\n47,").replace("\n50,", "\n57,"),
            "start_min,end_min,gas\n12,27,oxygen\n32,47,oxygen\n47,52,nitrox 50\n",
        ),
    ],
    ids=["minutes", "seconds", "minutes on a clock", "clock past midnight", "dates and offsets", "offset count"],
)  # fmt: skip
def test_periods(log: str, periods: str) -> None:
    result = overlay(log, periods)
    assert steps(result) == EXPECTED
    assert any(
        "3 breathing periods" in entry and "air, as the log has no gas column" in entry
        for entry in result.history
    )
    assert any("4 rows inserted" in entry for entry in result.history)
    assert np.isnan(result.setpoint).all()


def test_outside_the_periods_the_log_decides() -> None:
    log = "time_min,depth_msw,gas,o2_uptake_stpd\n0,0,nitrox 40,0.3\n10,20,trimix 20/30,1\n20,20,nitrox 40,0.5\n"
    result = overlay(log, "start_min,end_min,gas\n5,15,oxygen\n")
    assert result.gas == ("nitrox 40", "oxygen", "oxygen", "trimix 20/30", "nitrox 40")
    assert result.o2_uptake_stpd.tolist() == [0.3, 0.3, 1.0, 1.0, 0.5]
    assert any("log's own gas column" in entry for entry in result.history)


def test_whole_log_and_last_instant() -> None:
    result = overlay(LOG, "start_min,end_min,gas\n0,50,oxygen\n")
    assert result.gas == ("oxygen",) * 4
    assert result.time.tolist() == [0, 10, 40, 50]
    assert not any("inserted" in entry for entry in result.history)


@pytest.mark.parametrize(("minute", "second"), [("16.4", 984), ("11.3", 678)], ids=["below", "above"])
def test_instants_computed_in_two_ways_are_one(minute: str, second: int) -> None:
    # minute - 5.1 and (second - 306)/60 differ in the last bit, one pair below and one above.
    log = f"time_s,pressure_abs_kPa\n306,101\n{second},241\n{second + 60},241\n5400,241\n"
    result = overlay(log, f"start_min,end_min,gas\n{minute},90,oxygen\n")
    assert len(result.time) == 4
    assert result.gas == ("air", "oxygen", "oxygen", "oxygen")


def test_mask_leak() -> None:
    # FiO2 0.9 x 1 + 0.1 x 0.21 = 0.921; trimix 20/30 with a quarter of air: 0.2025 O2, 0.225 He.
    result = overlay(
        LOG,
        "start_min,end_min,gas,mask_leak\n5,20,oxygen,0.1\n20,25,trimix 20/30,.25\n25,30,oxygen,\n30,40,oxygen,1\n",
    )
    assert result.gas[1] == "nitrox 92.1"
    trimix = Gas.parse(result.gas[3])
    assert (trimix.oxygen, trimix.helium) == (0.2025, 0.225)
    assert result.gas[4:6] == ("oxygen", "air")
    leaks = [entry for entry in result.history if "mask leak" in entry]
    assert len(leaks) == 3
    assert "line 2: mask leak 0.1" in leaks[0]
    assert "FiO2 0.921" in leaks[0]


def test_small_mask_leak() -> None:
    result = overlay(LOG, "start_min,end_min,gas,mask_leak\n5,20,oxygen,0.005\n")
    assert Gas.parse(result.gas[1]).oxygen == pytest.approx(0.99605, abs=1e-12)  # 0.995 + 0.005 x 0.21


def test_set_point() -> None:
    log = "time_min,depth_msw,gas,setpoint_kPa\n0,0,air,70\n10,20,air,70\n30,20,air,\n"
    result = overlay(log, "start_min,end_min,gas,setpoint_kPa\n5,10,trimix 17/48,130\n15,20,oxygen,\n")
    np.testing.assert_allclose(result.setpoint, [70, 130, 70, np.nan, 70, np.nan], rtol=0)
    assert result.gas == ("air", "trimix 17/48", "air", "oxygen", "air", "air")


def test_repairs_of_the_second_file_are_in_the_history() -> None:
    result = overlay(LOG, "# mask times\nstart_min;end_min;gas\n5;20,5;oxygen\n")
    assert result.time[3] == 20.5
    assert any(entry.startswith("<text>: repaired: decimal comma") for entry in result.history)
    assert any(entry.startswith("<text>: skipped: 1 comment line") for entry in result.history)


BACK = "time_hms;depth_msw\n" + "".join(f"08:0{m}:{s:02};0\n" for m in (5, 3) for s in range(0, 60, 10))
LONG = "time_hms;depth_msw\n08:00:00;0\n20:00:00;0\n07:00:00;0\n09:00:00;0\n"
IN_ORDER = "in order of time"

# name: (log, periods, line, field number, words of the message, words of the remedy)
REFUSED = {
    "reversed": (LOG, "start_min,end_min,gas\n5,20,oxygen\n30,25,oxygen\n", 3, 2, "not after it begins", IN_ORDER),
    "no length": (LOG, "start_min,end_min,gas\n5,5,oxygen\n", 2, 2, "not after it begins", IN_ORDER),
    "overlapping": (LOG, "start_min,end_min,gas\n5,20,oxygen\n19,25,air\n", 3, 1, "before the period above", IN_ORDER),
    "out of order": (LOG, "start_min,end_min,gas\n20,25,oxygen\n5,10,air\n", 3, 1, "before the period above", IN_ORDER),
    "before the log": (LOG, "gas;start_min;end_min\noxygen;-1;20\n", 2, 2, "covers 0 to 50 min", "inside the log"),
    "after the log": (LOG, "start_min,end_min,gas\n20,50.1,oxygen\n", 2, 2, "covers 0 to 50 min", "inside the log"),
    "from its end": (LOG, "start_min,end_min,gas\n50,51,oxygen\n", 2, 1, "covers 0 to 50 min", "inside the log"),
    "clock before the log": (
        CLOCK, "start_hms,end_hms,gas\n23:49:00,23:55:00,oxygen\n", 2, 1, "begins -1 min", "inside the log",
    ),
    "no periods": (LOG, "start_min,end_min,gas\n", 1, None, "no row", "readings"),
    "no start": (LOG, "end_min,gas\n5,oxygen\n", 1, None, "no column for the start", "start_min"),
    "no end": (LOG, "start_min,gas\n5,oxygen\n", 1, None, "no column for the end", "end_min"),
    "two kinds": (LOG, "start_min,end_s,gas\n5,500,oxygen\n", 1, 2, "end_s beside start_min", "end_min"),
    "no gas": (LOG, "start_min,end_min\n5,6\n", 1, None, "no gas column", "oxygen"),
    "gas empty": (LOG, "start_min,end_min,gas\n5,6,oxygen\n7,8,\n", 3, 3, "gas is empty", "oxygen"),
    "gas unknown": (LOG, "start_min,end_min,gas\n5,6,oxigen\n", 2, 3, "oxigen", "oxygen"),
    "leak in percent": (LOG, "start_min,end_min,gas,mask_leak\n5,6,oxygen,10\n", 2, 4, "not a fraction", "0.1 for 10 %"),
    "leak on a loop": (
        LOG, "start_min,end_min,gas,mask_leak,setpoint_kPa\n5,6,air,0.1,130\n", 2, 4, "beside a set-point", "no mask",
    ),
    "set-point": (LOG, "start_min,end_min,gas,setpoint_kPa\n5,6,air,1.3\n", 2, 4, "16 to 320", "open circuit"),
    "misspelled": (LOG, "start_min,end_min,gas,maskleak\n5,6,air,0.1\n", 1, 4, "maskleak", "write mask_leak"),
    "clock on an elapsed log": (LOG, "start_hms,end_hms,gas\n08:00:00,08:10:00,air\n", 1, 1, "time_min", "start_min"),
    "date on a clock": (CLOCK, "start,end,gas\n2042-03-03T23:55,2042-03-03T23:56,air\n", 1, 1, "time_hms", "start_min"),
    "clock on a dated log": (DATED, "start_hms,end_hms,gas\n23:55:00,23:56:00,air\n", 1, 1, "log with time", "start_min"),
    "offset missing": (DATED, "start,end,gas\n2042-03-03T23:55,2042-03-03T23:56,air\n", 1, 1, "UTC offset", "start_min"),
    "clock set back": (BACK, "start_hms,end_hms,gas\n08:05:20,08:05:40,air\n", 1, 1, "set back at line 8", "start_min"),
    "longer than a day": (LONG, "start_hms,end_hms,gas\n08:30:00,08:40:00,air\n", 1, 1, "longer than a day", "start_min"),
    "time not a number": (LOG, "start_min,end_min,gas\n5,later,air\n", 2, 2, "not a number", "digits"),
}  # fmt: skip


@pytest.mark.parametrize("name", REFUSED)
def test_refused(name: str, tmp_path: Path) -> None:
    log, periods, line, column, message, remedy = REFUSED[name]
    first, second = tmp_path / "chamber.csv", tmp_path / "breathing.csv"
    first.write_text(log, encoding="utf-8")
    second.write_text(periods, encoding="utf-8")
    with pytest.raises(InputFileError) as caught:
        read_log(first, breathing=second)
    assert caught.value.path == str(second)
    assert (caught.value.line, caught.value.column) == (line, column), caught.value
    assert message in str(caught.value)
    assert remedy in caught.value.remedy


def test_second_file_missing(tmp_path: Path) -> None:
    with pytest.raises(InputFileError, match="cannot be read"):
        read_log(io.StringIO(LOG), breathing=tmp_path / "none.csv")
