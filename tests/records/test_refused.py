"""Malformed logs: each refused with the file, the line, the field number and what to do."""

# ruff: noqa: E501  (tables of cases: one case, one line)

from __future__ import annotations

import io
import time
from pathlib import Path
from typing import Any

import pytest

from gasphys.errors import InputFileError, RangeError, UnitError
from gasphys.records import read_log

HEAD = "time_min,depth_msw,gas\n"
TAIL = "0,0,air\n10,18,air\n"
# Nine steps of 10 s, regular enough that one fault of the clock could be mended.
CLOCK = "time_hms;depth_msw;gas\n" + "".join(f"08:00:{s:02};18;air\n" for s in range(0, 60, 10))

# name: (text or bytes, line, field number, words of the message, words of the remedy)
REFUSED: dict[str, tuple[str | bytes, int | None, int | None, str, str]] = {
    # the file as text
    "empty": ("", 1, None, "no header", "time_min,depth_msw,gas"),
    "comments only": ("# one\n\n# two\n", 3, None, "no header", "time_min,depth_msw,gas"),
    "header only": (HEAD, 1, None, "no row", "readings"),
    "one row": (HEAD + "0,0,air\n", 2, 1, "only one row", "two rows"),
    "NUL": (HEAD + "0,0,air\n1,\x0018,air\n", 3, 2, "NUL", "UTF-8"),
    "NUL in bytes": ((HEAD + "0,0,a\0ir\n" + TAIL).encode(), 2, 3, "NUL", "UTF-8"),
    "Western code page": (HEAD.encode() + b"0,0,air\n1,18,caf\xe9\n", 3, 3, "0xE9", "UTF-8"),
    "UTF-16": ((HEAD + TAIL).encode("utf-16"), 1, 1, "UTF-8", "UTF-16"),
    "UTF-16 without mark": ((HEAD + TAIL).encode("utf-16-le"), 1, 1, "NUL", "UTF-16"),
    "lone surrogate": (HEAD + "0,0,air\n1,18,\ud800\n", 3, 3, "UTF-8", "UTF-8"),
    "half a character": (HEAD.encode() + b"0,0,\xe2\x82\n", 2, 3, "0xE2", "UTF-8"),
    # delimiter and quotes
    "no delimiter": ("time_min depth_msw gas\n0 0 air\n", 1, 1, "no delimiter", "commas, semicolons or tabs"),
    "two delimiters": ("time_min;depth_msw,gas\n0;0,air\n", 1, 1, "mixes", "one of these"),
    "quote never closed": (HEAD + TAIL + '12,"18,air\n14,18,air\n', 4, 2, "quotes", "same line"),
    "field over two lines": (HEAD + '0,0,"air\n"\n' + TAIL, 2, 3, "quotes", "same line"),
    "quote inside a field": (HEAD + '0,0,a"i"r\n' + TAIL, 2, 3, "quotes", "double a quote"),
    "text after a quote": (HEAD + '0,"0"1,air\n' + TAIL, 2, 2, "quotes", "same line"),
    "header quote": ('time_min,"depth_msw,gas\n' + TAIL, 1, 2, "quotes", "same line"),
    "too many fields": (HEAD + TAIL + "12,18,air,x\n", 4, 4, "too many", "surplus"),
    "decimal comma in commas": (HEAD + TAIL + "12,18,5,air\n", 4, 4, "too many", "decimal comma"),
    "too few fields": (HEAD + TAIL + "12,18\n", 4, 3, "too few", "complete"),
    "trailing delimiter in a row": (HEAD + TAIL + "12,18,air,\n", 4, 4, "too many", "surplus"),
    "trailing delimiter in the header": ("time_min,depth_msw,gas,\n0,0,air\n", 2, 4, "too few", "complete"),
    "only delimiters": (HEAD + "0,0,air\n,,\n12,18,air\n", 3, 1, "time_min is empty", "digits"),
    "value without a name": ("time_min,depth_msw,gas,\n0,0,air,\n1,9,air,7\n", 3, 4, "without a name", "name"),
    "huge field": (HEAD + "0,0,air\n1," + "1" * 5000 + ",air\n", 3, 2, "5000 characters", "line ends"),
    "many columns": (";".join(f"c{i}" for i in range(501)) + "\n", 1, 501, "501 columns", "at most 500"),
    # headers
    "no header line": ("0,0,air\n10,18,air\n", 1, 2, "twice", "rename"),
    "no time": ("clock,depth_msw,gas\n" + TAIL, 1, None, "no time column", "time_hms"),
    "no pressure": ("time_min,chamber,gas\n" + TAIL, 1, None, "no pressure", "depth_msw"),
    "no gas": ("time_min,depth_msw\n0,0\n1,9\n", 1, None, "no gas column", "--breathing"),
    "two times": ("time_min,time_s,depth_msw,gas\n0,0,0,air\n", 1, 2, "more than one time", "keep one"),
    "two pressures": ("time_min,depth_msw,depth_fsw,gas\n0,0,0,air\n", 1, 3, "more than one", "keep one"),
    "two set-points": (
        "time_min,depth_msw,gas,setpoint_kPa,setpoint_bar\n0,0,air,,\n1,9,air,,\n", 1, 5, "more than one", "keep"
    ),
    "bare kPa": ("time_min,pressure_kPa,gas\n" + TAIL, 1, 2, "absolute or gauge", "pressure_abs_kPa"),
    "bare kPa, gauge named": ("time_min,pressure_kPa,gas\n" + TAIL, 1, 2, "gauge", "pressure_gauge_kPa"),
    "bare bar": ("time_min,pressure_bar,gas\n" + TAIL, 1, 2, "pressure_bar", "pressure_gauge_bar"),
    "bare bar, absolute named": ("time_min,pressure_bar,gas\n" + TAIL, 1, 2, "absolute", "pressure_abs_bar"),
    "bare psi": ("time_min,pressure_psi,gas\n" + TAIL, 1, 2, "pressure_psi", "pressure_gauge_psi"),
    "bare atm": ("time_min;Pressure_ATM;gas\n0;1;air\n", 1, 2, "absolute or gauge", "pressure_abs_atm"),
    "bare pressure": ("gas,pressure,time_s\nair,101,0\n", 1, 2, "absolute or gauge", "pressure_abs_kPa"),
    "gauge without a barometer": ("time_min,gas,pressure_gauge_bar\n0,air,0\n1,air,1\n", 1, 3, "not given",
                                  "surface_pressure="),
    "misspelled": ("time_min,depth_mws,gas\n" + TAIL, 1, 2, "depth_mws", "write depth_msw"),
    "capitals": ("Time_min,depth_msw,gas\n" + TAIL, 1, 1, "Time_min", "write time_min"),
    "bare depth": ("time_min,depth,gas\n" + TAIL, 1, 2, "'depth'", "write depth_"),
    "depth in feet": ("time_min,depth_ft,gas\n" + TAIL, 1, 2, "depth_ft", "write depth_fsw"),
    "misspelled option": (
        "time_min,depth_msw,gas,o2_uptake\n0,0,air,1\n", 1, 4, "o2_uptake", "write o2_uptake_stpd"
    ),
    "header twice": ("time_min,depth_msw,gas,gas\n0,0,air,air\n", 1, 4, "twice", "rename"),
    "unknown header twice": ("time_min,depth_msw,gas,note,note\n", 1, 5, "twice", "rename"),
    # numbers
    "words": (HEAD + TAIL + "12,deep,air\n", 4, 2, "depth_msw is 'deep'", "decimal point"),
    "empty depth": (HEAD + TAIL + "12,,air\n", 4, 2, "depth_msw is empty", "digits"),
    "empty time": (HEAD + TAIL + ",18,air\n", 4, 1, "time_min is empty", "digits"),
    "nan": (HEAD + TAIL + "12,nan,air\n", 4, 2, "not a number", "digits"),
    "infinite": (HEAD + TAIL + "12,inf,air\n", 4, 2, "not a number", "digits"),
    "underscore": (HEAD + TAIL + "12,1_8,air\n", 4, 2, "not a number", "separators"),
    "thousands": (HEAD + '0,0,air\n"1,234.5",18,air\n', 3, 1, "not a number", "separators"),
    "two commas": ("time_s;depth_msw;gas\n0;0;air\n1,2,3;9;air\n", 3, 1, "not a number", "separators"),
    "space inside": (HEAD + TAIL + "1 2,18,air\n", 4, 1, "not a number", "digits"),
    "no-break space": (HEAD + TAIL + "12\xa0,18,air\n", 4, 1, "not a number", "digits"),
    "full-width digits": (HEAD + TAIL + "12,１８,air\n", 4, 2, "not a number", "digits"),
    "hexadecimal": (HEAD + TAIL + "12,0x12,air\n", 4, 2, "not a number", "digits"),
    "unit in the cell": (HEAD + TAIL + "12,18 msw,air\n", 4, 2, "not a number", "units"),
    "mark inside": ("\ufeff" + HEAD + TAIL + "12,\ufeff18,air\n", 4, 2, "not a number", "digits"),
    "exponent without end": (HEAD + TAIL + "12,1e999,air\n", 4, 2, "larger than", "correct"),
    "seconds without end": ("time_s,depth_msw,gas\n0,0,air\n1.005e9,9,air\n", 3, 1, "larger than", "correct"),
    "time without end": (HEAD + TAIL + "1e8,18,air\n", 4, 1, "possible is 1e+07 min", "correct"),
    # pressures
    "too deep": (HEAD + TAIL + "12,2000,air\n", 4, 2, "20101.3 kPa", "unit in the header"),
    "vacuum": ("time_s,gas,pressure_abs_bar\n0,air,1\n9,air,0.04\n", 3, 3, "4 kPa absolute", "unit"),
    "atm named kPa": ("time_s,gas,pressure_abs_kPa\n0,air,2.4\n9,air,2.4\n", 2, 3, "2.4 kPa", "unit"),
    "above the surface": (HEAD + TAIL + "12,-10.5,air\n", 4, 2, "-10.5", "unit"),
    "above the surface, feet": ("time_s,depth_fsw,gas\n0,-33.1,air\n9,0,air\n", 2, 2, "-33.1", "unit"),
    # gas and options
    "first gas empty": (HEAD + "0,0,\n10,18,air\n", 2, 3, "gas is empty", "nitrox 32"),
    "unknown gas": (HEAD + TAIL + "12,18,argox\n", 4, 3, "argox", "nitrox 32"),
    "gas beyond 100 %": (HEAD + TAIL + "12,18,trimix 60/48\n", 4, 3, "more than 1", "trimix 18/45"),
    "heliox not 100 %": (HEAD + TAIL + "12,18,heliox 16/80\n", 4, 3, "sum to 100", "heliox 16/84"),
    "gas in full-width digits": (HEAD + TAIL + "12,18,nitrox ３２\n", 4, 3, "not the name", "nitrox 32"),
    "set-point in bar": ("time_s,depth_msw,gas,setpoint_kPa\n0,0,air,\n9,9,air,1.3\n", 3, 4, "16 to 320", "open"),
    "set-point 0": ("time_s,depth_msw,gas,setpoint_bar\n0,0,air,0\n9,9,air,\n", 2, 4, "16 to 320", "leave it"),
    "uptake": ("time_s,depth_msw,gas,o2_uptake_stpd\n0,0,air,250\n9,9,air,\n", 2, 4, "0 to 10", "not known"),
    "ventilation": ("time_s,depth_msw,gas,ventilation_btps\n0,0,air,\n9,9,air,-1\n", 3, 4, "0 to 400", "not known"),
    # time
    "elapsed time falls": (HEAD + TAIL + "9,18,air\n", 4, 1, "falls from 10 to 9", "sort"),
    "elapsed seconds fall": ("time_s,depth_msw,gas\n0,0,air\n-1,0,air\n", 3, 1, "falls", "split"),
    "one time, two pressures": (HEAD + TAIL + "10,18.2,air\n", 4, 1, "2 kPa apart", "remove one"),
    "one time only": (HEAD + "5,18,air\n5,18,air\n", 3, 1, "same time", "two rows"),
    "clock without seconds": (CLOCK + "08:01;18;air\n", 8, 1, "08:01", "08:00:10"),
    "clock negative": (CLOCK + "-08:01:00;18;air\n", 8, 1, "-08:01:00", "08:00:10"),
    "clock empty": (CLOCK + ";18;air\n", 8, 1, "empty", "08:00:10"),
    "hour 25": (CLOCK + "25:00:00;18;air\n", 8, 1, "hour 25", "08:00:10"),
    "after 24:00:00": (CLOCK + "24:00:01;18;air\n", 8, 1, "hour 24", "08:00:10"),
    "minute 60": (CLOCK + "08:60:00;18;air\n", 8, 1, "60 or more", "08:00:10"),
    "second 60": (CLOCK + "08:00:60;18;air\n", 8, 1, "60 or more", "08:00:10"),
    "leap second": (CLOCK + "23:59:60;18;air\n", 8, 1, "leap second", "08:00:10"),
    "clock in full-width digits": (CLOCK + "０８:01:00;18;air\n", 8, 1, "08:01:00".replace("08", "０８"), "08:00:10"),
    "clock set back, irregular": (
        "time_hms;depth_msw;gas\n08:00:00;0;air\n08:07:00;9;air\n08:09:00;9;air\n07:30:00;0;air\n", 5, 1,
        "goes back by 39 min", "sort",
    ),
    "clock rows out of order": (
        CLOCK + "08:01:20;18;air\n08:01:10;18;air\n" + "".join(f"08:{m:02}:{s:02};18;air\n" for m in (2, 3, 4)
                                                          for s in range(0, 60, 10)),
        9, 1, "goes back by 10 s", "sort",
    ),
    "clock ahead past midnight": (
        CLOCK.replace("08:00", "00:00") + "23:59:50;18;air\n", 8, 1, "set back past midnight", "date"
    ),
    "ISO without time": ("time;depth_msw;gas\n2042-03-03;0;air\n2042-03-04;0;air\n", 2, 1, "2042-03-03", "ISO"),
    "ISO date": ("time;depth_msw;gas\n2042-02-29T08:00;0;air\n2042-03-04T08:00;0;air\n", 2, 1, "date", "ISO"),
    "ISO year 0": ("time;depth_msw;gas\n0000-01-01T08:00;0;air\n2042-03-04T08:00;0;air\n", 2, 1, "date", "ISO"),
    "ISO offset": ("time;depth_msw;gas\n2042-03-04T08:00+25:00;0;air\n2042-03-04T08:00Z;0;air\n", 2, 1, "+25:00", "ISO"),
    "ISO offset of a day": ("time;depth_msw;gas\n2042-03-04T08:00+24:00;0;air\n2042-03-04T08:00Z;0;air\n", 2, 1, "+24:00", "ISO"),
    "ISO offset of 60 min": ("time;depth_msw;gas\n2042-03-04T08:00-0160;0;air\n2042-03-04T08:00Z;0;air\n", 2, 1, "-0160", "ISO"),
    "ISO, offset missing": (
        "time;depth_msw;gas\n2042-03-03T08:00Z;0;air\n2042-03-03T08:01;0;air\n", 3, 1, "without a UTC", "all"
    ),
    "ISO, offset appears": (
        "time;depth_msw;gas\n2042-03-03T08:00;0;air\n2042-03-03T08:01+01:00;0;air\n", 3, 1, "with a UTC", "all"
    ),
    "ISO back a day": (
        "time;depth_msw;gas\n" + "".join(f"2042-03-03T08:00:{s};0;air\n" for s in range(10, 60, 10))
        + "2042-03-02T08:01:00;0;air\n", 7, 1, "goes back", "12 h",
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", REFUSED)
def test_refused(name: str, tmp_path: Path) -> None:
    text, line, column, message, remedy = REFUSED[name]
    file = tmp_path / "recorder.csv"
    if isinstance(text, str):
        text = text.encode("utf-8", "surrogatepass")
        # surrogatepass writes three bytes that are not UTF-8, the first of which is named
    file.write_bytes(text)
    with pytest.raises(InputFileError) as caught:
        read_log(file)
    error = caught.value
    assert (error.line, error.column) == (line, column), error
    assert message in str(error)
    assert remedy in error.remedy
    assert error.path == str(file)
    whole = str(error)
    assert whole.startswith(str(file))
    assert f"line {line}" in whole
    assert column is None or f"column {column}" in whole
    assert f"Remedy: {error.remedy}" in whole
    assert "\n" not in whole
    assert len(whole) < 700


@pytest.mark.parametrize("name", [name for name, case in REFUSED.items() if isinstance(case[0], str)])
def test_the_same_from_an_open_file(name: str) -> None:
    text, line, column, message, _ = REFUSED[name]
    assert isinstance(text, str)
    message = {"lone surrogate": "half a character"}.get(name, message)
    with pytest.raises(InputFileError) as caught:
        read_log(io.StringIO(text))
    assert (caught.value.line, caught.value.column) == (line, column)
    assert message in str(caught.value)
    assert caught.value.path == "<text>"


def test_there_are_enough_cases() -> None:
    assert len(REFUSED) >= 30
    assert len({(case[3], case[1], case[2]) for case in REFUSED.values()}) >= 30


def test_file_missing(tmp_path: Path) -> None:
    for file in (tmp_path / "none.csv", tmp_path, str(tmp_path / "a\0b")):
        with pytest.raises(InputFileError, match="cannot be read") as caught:
            read_log(file)
        assert caught.value.path == str(file)
        assert "check name" in caught.value.remedy
    with pytest.raises(InputFileError, match="No such file"):
        read_log(tmp_path / "none.csv")


def test_text_file_opened_in_another_encoding(tmp_path: Path) -> None:
    file = tmp_path / "recorder.csv"
    file.write_bytes((HEAD + TAIL + "# caf\xe9\n").encode())
    with open(file, encoding="ascii") as stream, pytest.raises(InputFileError, match="UTF-8") as caught:
        read_log(stream)
    assert caught.value.path == str(file)


@pytest.mark.parametrize("value", [15.0, 130.0, float("nan"), "2.4 atm"])
def test_impossible_barometer(value: Any) -> None:
    with pytest.raises(RangeError, match="surface_pressure"):
        read_log(io.StringIO(HEAD + TAIL), surface_pressure=value)


@pytest.mark.parametrize("value", [True, [101.3], "10 msw"])
def test_barometer_of_another_kind(value: Any) -> None:
    with pytest.raises(UnitError, match="surface_pressure"):
        read_log(io.StringIO(HEAD + TAIL), surface_pressure=value)


@pytest.mark.parametrize(
    "text",
    [
        HEAD + TAIL + '12,"' + "x" * 300_000,
        HEAD + TAIL + "12," + " " * 300_000 + '"18,air',
        HEAD + TAIL + '12,"' + '""' * 150_000 + "x,air",
        HEAD + TAIL + "," * 300_000,
        HEAD + TAIL + '"' * 300_001,
        "a" * 300_000 + ",depth_msw,gas\n" + TAIL,
        HEAD + TAIL + "1" * 300_000 + ",18,air\n",
        "," * 300_000 + "\n" + TAIL,
        HEAD + TAIL + "\r" * 300_000 + "x",
    ],
    ids=["open quote", "spaces", "doubled", "delimiters", "quotes", "header", "digits", "columns", "returns"],
)
def test_no_text_is_slow(text: str) -> None:
    start = time.process_time()
    with pytest.raises(InputFileError):
        read_log(io.StringIO(text))
    assert time.process_time() - start < 5.0  # a quadratic reader takes minutes
