"""Courses: the file, what adds up over sessions, the sessions left, the words and the figure."""

from __future__ import annotations

import datetime
import math
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from gasphys import Exposure
from gasphys.doses import (
    Course,
    Session,
    course_doses,
    course_text,
    ladder_text,
    oxygen,
    read_course,
    sessions_left,
)
from gasphys.errors import ExposureError, InputFileError, UnknownNameError
from gasphys.plots import course_figure
from gasphys.quantities import CAUTION
from gasphys.schedules import treatment

ATM = 101.325
NOON = datetime.datetime(2042, 3, 3, 12)


def course(exposure: Exposure, days: list[float], person: str = "P-01") -> Course:
    return Course(tuple(Session(NOON + datetime.timedelta(days=d), exposure, "one") for d in days), person)


def held(atm: float, minutes: float) -> Exposure:
    return Exposure.start("oxygen", pressure=atm * ATM).stay(minutes)


def weekdays(count: int) -> list[datetime.date]:
    day, found = NOON.date(), []
    while len(found) < count:
        if day.weekday() < 5:
            found.append(day)
        day += datetime.timedelta(days=1)
    return found


@pytest.fixture
def forty(tmp_path: Path) -> Path:
    """The course of the demo scenario: 40 sessions on weekdays, Monday 3 March to Friday 25 April 2042."""
    lines = ["# the unit's course of P-01, invented", "date,time,schedule,person"]
    lines += [f"{d},08:00,clinical_2_4_atm,P-01" for d in weekdays(40)]
    path = tmp_path / "course.csv"
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


# -- The file ----------------------------------------------------------------------------------------


def test_forty_sessions_from_a_file(forty: Path) -> None:
    found = read_course(forty)
    assert len(found.sessions) == 40
    assert found.person == "P-01"
    assert found.sessions[-1].start == datetime.datetime(2042, 4, 25, 8)
    assert found.intervals()[0] == 24 * 60 - 120
    assert found.intervals()[4] == 3 * 24 * 60 - 120
    whole = found.exposure()
    assert set(whole.session) == set(range(40))
    assert whole.duration == pytest.approx(
        (found.sessions[-1].end - found.sessions[0].start).total_seconds() / 60
    )
    assert whole.attrs["start"] == "2042-03-03T08:00:00"
    # One schedule, read once, is one exposure.
    assert len({id(s.exposure) for s in found.sessions}) == 1


def test_one_call_for_a_course_of_forty(forty: Path) -> None:
    found = read_course(forty)
    single = oxygen(found.sessions[0].exposure, "all", count="oxygen")
    ds = course_doses(found, "all", count="oxygen")
    assert ds.sizes == {"measure": len(single.measure), "session": 40}
    np.testing.assert_array_equal(ds.session_dose.isel(session=17).values, single.dose.values)
    assert float(ds.course_dose.sel(measure="uptd")[-1]) == pytest.approx(
        40 * float(single.dose.sel(measure="uptd"))
    )
    whole = oxygen(found.exposure(), ["uptd"], count="oxygen")
    assert float(whole.dose[0]) == pytest.approx(float(ds.course_dose.sel(measure="uptd")[-1]), rel=1e-12)


def test_toml_and_csv_say_the_same(tmp_path: Path) -> None:
    rows = tmp_path / "course.csv"
    rows.write_text(
        "date,time,schedule,person,extensions_shallow,attendant,descent\n"
        "2042-03-04,08:00,usn_6,A-1,1,yes,\n"
        "2042-03-03,14:30,usn_5,A-1,,no,oxygen\n",
        encoding="utf-8",
    )
    tables = tmp_path / "course.toml"
    tables.write_text(
        'person = "A-1"\n\n[[session]]\ndate = 2042-03-03\ntime = 14:30:00\nschedule = "usn_5"\n'
        'descent = "oxygen"\n\n[[session]]\ndate = "2042-03-04"\ntime = "08:00"\nschedule = "usn_6"\n'
        "extensions_shallow = 1\nattendant = true\n",
        encoding="utf-8",
    )
    one, other = read_course(rows), read_course(tables)
    assert [s.start for s in one.sessions] == [s.start for s in other.sessions]
    assert [s.label for s in one.sessions] == ["usn_5", "usn_6"]
    for a, b in zip(one.sessions, other.sessions, strict=True):
        xr.testing.assert_identical(a.exposure.to_dataset(), b.exposure.to_dataset())
    attendant = treatment("usn_6", extensions_shallow=1, attendant=True)
    xr.testing.assert_identical(one.sessions[1].exposure.to_dataset(), attendant.to_dataset())


def test_a_log_is_read_beside_the_course_file(tmp_path: Path) -> None:
    (tmp_path / "monday.csv").write_text(
        "time_min,pressure_gauge_kPa,gas\n0,0,air\n10,142.2,air\n10.5,142.2,oxygen\n100,142.2,oxygen\n110,0,oxygen\n",
        encoding="utf-8",
    )
    path = tmp_path / "course.csv"
    path.write_text(
        "date,time,log,person,surface_pressure\n2042-03-03,08:00,monday.csv,P-01,101.0 kPa\n",
        encoding="utf-8",
    )
    found = read_course(path)
    assert found.sessions[0].label == "monday.csv"
    assert found.sessions[0].exposure.surface_pressure == 101.0
    (tmp_path / "monday.csv").write_text("time_min,pressure_kPa,gas\n0,1,air\n", encoding="utf-8")
    with pytest.raises(InputFileError, match=r"monday\.csv, line 1") as caught:
        read_course(path)
    assert "gauge" in str(caught.value)


def test_several_people_in_one_file(tmp_path: Path) -> None:
    path = tmp_path / "unit.csv"
    path.write_text(
        "date,time,schedule,person\n2042-03-03,08:00,usn_9,P-01\n2042-03-03,08:30,usn_9,P-02\n",
        encoding="utf-8",
    )
    with pytest.raises(InputFileError, match=r"P-01, P-02.*person="):
        read_course(path)
    assert read_course(path, person="P-02").sessions[0].start.minute == 30
    with pytest.raises(InputFileError, match="unknown person 'P-03'"):
        read_course(path, person="P-03")


HEAD = "date,time,schedule,person\n"
GOOD = "2042-03-03,08:00,usn_9,P-01\n"


@pytest.mark.parametrize(
    ("text", "line", "column", "words"),
    [
        ("", None, None, "empty"),
        ("# only a remark\n", None, None, "empty"),
        ("day,time,schedule\n2042-03-03,08:00,usn_9\n", 1, 1, "unknown column 'day'"),
        ("date,schedule\n2042-03-03,usn_9\n", 1, None, "no column time"),
        ("date,time,time\n", 1, None, "stands twice"),
        (HEAD, 1, None, "no session"),
        (HEAD + "2042-03-03,08:00,usn_9\n", 2, None, "3 cells, the header has 4"),
        (HEAD + GOOD + "\n# pause\n03.03.2042,08:00,usn_9,P-01\n", 5, 1, "not a date"),
        (HEAD + "2042-02-30,08:00,usn_9,P-01\n", 2, 1, "not a date"),
        (HEAD + "2042-03-03,8 am,usn_9,P-01\n", 2, 2, "not a time of day"),
        (HEAD + "2042-03-03,25:00,usn_9,P-01\n", 2, 2, "not a time of day"),
        (HEAD + "2042-03-03,08:00,usn9,P-01\n", 2, 3, "nearest: 'usn_9'"),
        (HEAD + "2042-03-03,08:00,,P-01\n", 2, 3, "a schedule or a log"),
        (HEAD + GOOD + "2042-03-03,08:30,usn_9,P-01\n", 3, 2, "begins before"),
        ("date,time,schedule,extensions_deep\n2042-03-03,08:00,usn_6,1.5\n", 2, 4, "whole number"),
        ("date,time,schedule,extensions_deep\n2042-03-03,08:00,usn_6,3\n", 2, 3, "allows 0 to 2"),
        ("date,time,schedule,attendant\n2042-03-03,08:00,usn_6,maybe\n", 2, 4, "yes or no"),
        ("date,time,schedule,descent\n2042-03-03,08:00,usn_6,argox\n", 2, 3, "unknown gas"),
        ("date,time,schedule,surface_pressure\n2042-03-03,08:00,usn_6,1 furlong\n", 2, 4, "furlong"),
        ("date,time,log,extensions_deep\n2042-03-03,08:00,a.csv,1\n", 2, 3, "belong to a schedule"),
    ],
)
def test_csv_errors_tell_line_and_column(
    tmp_path: Path, text: str, line: int | None, column: int | None, words: str
) -> None:
    path = tmp_path / "course.csv"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(InputFileError) as caught:
        read_course(path)
    assert words in str(caught.value)
    assert "Remedy:" in str(caught.value)
    assert (caught.value.line, caught.value.column) == (line, column)


SESSION = '[[session]]\ndate = 2042-03-03\ntime = 08:00:00\nschedule = "usn_9"\n'


@pytest.mark.parametrize(
    ("text", "line", "words"),
    [
        ("date = 2042-03-03\n", None, "no [[session]] table"),
        ("[[session]\n", 1, "Expected"),
        ("people = 2\n" + SESSION, 1, "unknown field 'people'"),
        (SESSION + "\n" + SESSION.replace("schedule", "schedul"), 9, "nearest: 'schedule'"),
        (SESSION + "\n" + SESSION.replace("usn_9", "usn_99"), 9, "unknown treatment table"),
        (SESSION + "\n" + SESSION.replace("08:00:00", '"8"'), 8, "not a time of day"),
        (SESSION + "\n" + SESSION.replace("2042-03-03", '"tomorrow"'), 7, "not a date"),
        (SESSION + "\n" + SESSION.replace("08", "09"), 8, "begins before"),
        (SESSION + "extensions_deep = 6\n", 4, "allows 0 to 5"),
    ],
)
def test_toml_errors_tell_the_line(tmp_path: Path, text: str, line: int | None, words: str) -> None:
    path = tmp_path / "course.toml"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(InputFileError) as caught:
        read_course(path)
    assert words in str(caught.value)
    assert caught.value.line == line


def test_files_that_cannot_be_read(tmp_path: Path) -> None:
    with pytest.raises(InputFileError, match="check the file's name"):
        read_course(tmp_path / "missing.csv")
    path = tmp_path / "latin.csv"
    path.write_bytes(b"date,time,schedule\n2042-03-03,08:00,us\xe9\n")
    with pytest.raises(InputFileError, match="UTF-8"):
        read_course(path)


def test_sessions_must_not_overlap() -> None:
    with pytest.raises(ExposureError, match="begins before"):
        course(held(2.0, 120), [0.0, 0.05])
    with pytest.raises(ExposureError, match="at least one"):
        Course(())


# -- What adds up ------------------------------------------------------------------------------------


def test_vital_capacity_recovers_between_sessions() -> None:
    """Reference check PUL-2: 2.0 atm x 120 min, loss 0.779 %, 3 h later 0.274 %; then a restart."""
    found = course_doses(
        course(held(2.0, 120), [0.0, 5.0 / 24.0]), ["vital_capacity_loss", "arieli_pulmonary_index"]
    )
    loss = found.course_dose.sel(measure="vital_capacity_loss").values
    assert loss[0] == pytest.approx(0.00779, abs=5e-6)
    left = 0.00274
    residual = left / 0.000082
    begun = math.sqrt(residual) / 2.0**2.285  # h
    expected = 0.000082 * (begun + 2.0) ** 2 * 2.0**4.57
    assert loss[1] == pytest.approx(expected, rel=2e-3)
    index = found.course_dose.sel(measure="arieli_pulmonary_index").values
    np.testing.assert_allclose(loss, 0.000082 * index, rtol=1e-12)
    # A day later little is left of the loss, and of its root twice as much.
    apart = course_doses(course(held(2.0, 120), [0.0, 1.0]), ["vital_capacity_loss"]).course_dose.values[0]
    kept = math.exp(-0.34804 * 22.0)
    assert apart[1] == pytest.approx(apart[0] * (1.0 + math.sqrt(kept)) ** 2, rel=1e-4)


def test_no_recovery_is_known_after_a_low_po2() -> None:
    found = course_doses(course(held(1.05, 240), [0.0, 1.0]), ["vital_capacity_loss", "uptd"])
    loss, uptd = found.course_dose.values
    assert loss[0] == pytest.approx(0.000082 * 16.0 * 1.05**4.57, rel=1e-12)
    assert np.isnan(loss[1])
    assert uptd[1] == pytest.approx(2.0 * uptd[0])


def test_day_doses_begin_again_each_date() -> None:
    found = course_doses(course(held(1.5, 60), [0.0, 0.25, 1.0]), ["uptd", "esot", "arieli_pulmonary_index"])
    uptd, minutes, index = found.day_dose.values
    assert uptd.tolist() == pytest.approx([uptd[0], 2 * uptd[0], uptd[0]])
    assert minutes.tolist() == pytest.approx([minutes[0], 2 * minutes[0], minutes[0]])
    assert index.tolist() == pytest.approx([index[0], 4 * index[0], index[0]])


def test_measures_of_one_session_are_not_summed() -> None:
    found = course_doses(course(held(2.4, 90), [0.0, 1.0]), ["cns_risk_dry_rest", "noaa_cns"])
    assert np.isnan(found.course_dose.values).all()
    assert found.course_rule.values.tolist() == ["each session by itself"] * 2
    assert (found.seizure_rate_high.sel(measure="cns_risk_dry_rest") > 0).all()
    assert "clinics" in str(found.context.values[0, 0])


@pytest.mark.parametrize("engine", ["scipy", "h5netcdf"])
def test_saved_and_read_back(tmp_path: Path, engine: str) -> None:
    whole = course(treatment("usn_9"), [0.0, 1.0, 2.0])
    for name, ds in (("doses", course_doses(whole, "all")), ("ladders", sessions_left(whole))):
        path = tmp_path / f"{name}.nc"
        ds.to_netcdf(path, engine=engine)
        with xr.open_dataset(path, engine=engine) as back:
            xr.testing.assert_identical(back.load(), ds)


# -- Sessions left -----------------------------------------------------------------------------------


def ladder(whole: Course, name: str, **more: object) -> xr.Dataset:
    return sessions_left(whole, **more).sel(ladder=name)


def test_cumulative_ladders() -> None:
    """Cumulative dose of 615 (2 %) and 1425 (10 %): sessions of 100 UPTD leave room for whole ones."""
    hundred = held(1.0, 100)
    for done, left_2, left_10 in ((1, 5, 13), (6, 0, 8), (7, 0, 7), (14, 0, 0)):
        whole = course(hundred, list(map(float, range(done))))
        two, ten = (ladder(whole, f"uptd_{n}_percent") for n in (2, 10))
        assert (float(two.sessions_left), float(ten.sessions_left)) == (left_2, left_10)
        assert float(two.used) == pytest.approx(100.0 * done)
        assert str(two.status.values) == ("beyond" if done > 6 else "within")
    assert float(two.passed_with) == 7.0
    assert math.isnan(float(ten.passed_with))
    # Exactly at the limit is within.
    edge = course(held(1.0, 205), [0.0])
    assert float(ladder(edge, "uptd_2_percent").sessions_left) == 2.0


#: Hamilton, Kenyon & Peterson 1988: mission totals of day 1 to 14 [memory_high].
MISSION = [850, 1400, 1860, 2100, 2300, 2520, 2660, 2800, 2970, 3100, 3300, 3600, 3900, 4200]


@pytest.mark.parametrize("dose", [280.0, 300.0, 310.0, 350.0, 500.0, 700.0, 900.0])
@pytest.mark.parametrize("done", [1, 2, 5])
def test_repeated_exposure_ladder(dose: float, done: int) -> None:
    def allowed(day: int) -> float:
        return MISSION[day - 1] if day <= 14 else 300.0 * day

    expected: float = 0
    if dose * done <= allowed(done):
        while expected < 400 and dose * (done + expected + 1) <= allowed(int(done + expected + 1)):
            expected += 1
        expected = math.inf if expected >= 400 else expected
    row = ladder(
        course(held(1.0, dose), list(map(float, range(done)))), "uptd_repeated_exposure", role="diver"
    )
    assert float(row.sessions_left) == expected
    assert float(row.limit_value) == allowed(done)


@pytest.mark.parametrize(
    ("index", "days", "left"),
    [
        (39.0, [0.0], math.inf),
        (60.0, [0.0], 4.0),
        (60.0, [0.0, 1.0, 2.0], 2.0),
        (60.0, [0.0, 1.0, 2.0, 3.0, 4.0], 0.0),
        (60.0, [0.0, 1.0, 2.0, 3.0, 6.0], 4.0),  # two days off begin a new run
        (60.0, [0.0, 1.0, 2.0, 4.0], 1.0),  # one day off does not
        (100.0, [0.0], 1.0),
        (100.0, [0.0, 1.0], 0.0),
        (130.0, [0.0], 0.0),
    ],
)
def test_days_in_a_row_at_an_index(index: float, days: list[float], left: float) -> None:
    """Risberg & van Ooij 2022 [read]: 120 a day for 2 days, 70 for 5 days, then 2 off; 40-50 every day."""
    exposure = held(1.5, 60.0 * math.sqrt(index) / 1.5**2.285)
    row = ladder(course(exposure, days), "pulmonary_index_days", role="diver")
    assert float(row.sessions_left) == left
    assert str(row.status.values) == ("beyond" if index > 120 else "within")


def test_noaa_ladder_of_the_last_date() -> None:
    dive = held(1.4, 60)  # 180 min in 24 h
    row = ladder(course(dive, [0.0, 1.0, 1.2]), "noaa_cns_day", role="diver")
    assert float(row.used) == pytest.approx(120.0 / 180.0)
    assert float(row.sessions_left) == 1.0
    assert int(row.rungs_done) == 2
    above = ladder(course(treatment("usn_9"), [0.0]), "noaa_cns_day", role="diver")
    assert math.isnan(float(above.sessions_left))
    assert str(above.status.values) == "not applicable"
    assert "1.60 atm" in str(above.reason.values)


def test_roles_and_the_next_session() -> None:
    whole = course(treatment("usn_9"), [0.0])
    patient = sessions_left(whole, role="patient")
    assert str(patient.status.sel(ladder="pulmonary_index_days").values) == "not applicable"
    assert "shown as context" in str(patient.reason.sel(ladder="pulmonary_index_days").values)
    assert str(patient.status.sel(ladder="uptd_2_percent").values) == "within"
    other = ladder(whole, "uptd_10_percent", next_exposure=held(1.0, 50))
    assert float(other.each) == pytest.approx(50.0)
    nothing = ladder(whole, "uptd_10_percent", next_exposure=Exposure.start("air").stay(60))
    assert math.isinf(float(nothing.sessions_left))
    with pytest.raises(UnknownNameError, match="role"):
        sessions_left(whole, role="pilot")


# -- In words and as a picture -----------------------------------------------------------------------


def test_ladders_in_words(forty: Path) -> None:
    text = ladder_text(sessions_left(read_course(forty), count="oxygen"))
    lines = text.splitlines()
    assert lines[0].startswith("SESSIONS LEFT after 40, next: clinical_2_4_atm, as for a patient")
    assert "    ##|" + "#" * 38 in lines  # 2 x 294.3 is within 615, the third goes beyond
    assert "    ####|" + "#" * 36 in lines  # 4 x 294.3 is within 1425, the fifth goes beyond
    assert CAUTION in text
    assert "safe" not in text
    for row in lines:
        assert "nan" not in row
        assert "inf" not in row.replace("within", "")
    left = ladder_text(sessions_left(course(held(1.0, 100), [0.0]), role="diver"))
    assert "    #-----|" in left.splitlines()
    assert "    #----->" in left.splitlines()
    long = ladder_text(sessions_left(course(held(1.0, 1), [0.0])))
    assert "rungs" in long


def test_a_course_in_words(forty: Path) -> None:
    text = course_text(read_course(forty))
    assert text.startswith("COURSE P-01: 40 sessions, 2042-03-03 to 2042-04-25")
    assert "1-40 clinical_2_4_atm" in text
    assert "of clinics' treatments" in text
    assert "not a seizure probability" in text
    assert "2 air breaks" in text
    assert text.rstrip().endswith(CAUTION)
    low = course_text(course(Exposure.start("air").stay(60), [0.0]))
    assert "dry rest not applicable; not a seizure probability" in " ".join(low.split())


def test_the_highest_risk_of_any_session_is_told_by_the_fits_of_the_role() -> None:
    """2.4 atm, 90 min, dry rest 3.8 %; active 14 %: not the last, mild session (Aviner 2020, Arieli 2003)."""
    mixed = course(held(2.4, 90), [0.0])
    mild = Session(mixed.sessions[-1].end + datetime.timedelta(hours=20), held(2.0, 10), "mild")
    mixed = Course((*mixed.sessions, mild))
    text = str(sessions_left(mixed).attrs["any_sign"])
    assert text.startswith("Risk of any nervous system sign in one session: dry rest 3.79 %; not a seizure")
    assert "25 to 1500 times that" in text
    diver = str(sessions_left(mixed, role="diver").attrs["any_sign"])
    assert "active 14.1 %, immersed rest 64.2 %" in diver
    assert "of clinics' treatments near this PO2" in diver
    next_one = str(sessions_left(Course((mild,)), next_exposure=held(2.4, 90)).attrs["any_sign"])
    assert "dry rest 3.79 %" in next_one
    assert text in " ".join(ladder_text(sessions_left(mixed)).split())


def test_the_ladder_as_a_figure(forty: Path, tmp_path: Path) -> None:
    ds = sessions_left(read_course(forty), count="oxygen")
    figure = course_figure(ds)
    words = " ".join(t.get_text() for t in figure.findobj(lambda a: hasattr(a, "get_text")))
    for name in ds.title.values:
        assert str(name) in words
    assert "Sessions left after 40, P-01" in words
    assert "not applicable, context only (no end at this rhythm)" in words
    assert "Model estimates" in words
    shown = " ".join(words.split())
    assert "Risk of any nervous system sign in one session: dry rest 4.1" in shown
    assert "not a seizure probability" in shown
    assert "of clinics' treatments near this PO2" in shown
    figure.savefig(tmp_path / "course.png")
    assert (tmp_path / "course.png").stat().st_size > 10_000
    with pytest.raises(ExposureError, match="sessions_left"):
        course_figure(oxygen(held(2.0, 60)))
