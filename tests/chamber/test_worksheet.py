"""The worksheet: what it expects, how readings narrow it, its page, and mistakes in its files."""

from __future__ import annotations

import re
from html.parser import HTMLParser
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

import gasphys as gp
from gasphys import Person, blood, chamber, lungs
from gasphys.__main__ import main
from gasphys.chamber import (
    Chamber,
    Devices,
    Reading,
    Stock,
    read_readings,
    worksheet,
    worksheet_page,
    worksheet_text,
)
from gasphys.errors import ExposureError, InputFileError, RangeError, UnknownNameError
from gasphys.quantities import CAUTION
from gasphys.schedules import oxygen_session, treatment

DATA = Path(__file__).parents[2] / "notebooks" / "data"
P0 = 101.325

#: The ventilated patient of the demo: PaO2 25.9 kPa on FIO2 0.60, PaCO2 6.4 kPa, 101.0 kPa.
with gp.validity("ignore"):
    PERSON = Person.from_sample(
        arterial_po2=25.9, fio2=0.6, arterial_pco2=6.4, barometric_pressure=101.0, code="P-04"
    )
DEVICES = Devices("60 mL", "7 mL", "25 cmH2O", "450 mL", "5 mL")
ROOM = Chamber(
    code="the unit",
    surface_pressure="1 atm",
    air_flow=300.0,
    oxygen=Stock(8, 50.0, 15000.0, 800.0),
    attendant_code="A-1",
)
#: What would be read if leak, mask flow and shunt lay inside their ranges.
READINGS = [
    Reading.parse("arterial_po2", "30 min", "148 kPa"),
    Reading.parse("chamber_o2_fraction", "40 min", "21.2 %"),
    Reading.parse("chamber_pco2", "40 min", "0.150 kPa"),
    Reading.parse("oxygen_pressure", "40 min", "147.6 bar"),
    Reading.parse("tidal_volume", "35 min", "390 mL"),
]


@pytest.fixture(scope="module")
def before() -> xr.Dataset:
    return worksheet("clinical_2_4_atm", PERSON, ROOM, DEVICES)


@pytest.fixture(scope="module")
def after() -> xr.Dataset:
    return worksheet("clinical_2_4_atm", PERSON, ROOM, DEVICES, READINGS)


def line(ds: xr.Dataset, label: str, phase: int | None = None) -> str:
    hits = [
        str(ds.expected.values[n])
        for n in range(ds.sizes["line"])
        if str(ds.label.values[n]).startswith(label) and phase in (None, int(ds.line_phase.values[n]))
    ]
    assert hits, f"no line {label!r}"
    return hits[0]


def test_the_numbers_of_the_reference(before: xr.Dataset) -> None:
    """Sheet 4.1: humid 2.492 and dry 2.4 from 2.4 atm, cuff 0.42, drip chamber 12.0 mL, 12.28 and 8.38 %."""
    assert float(before.trapped_ratio_humid[1]) == pytest.approx(2.492, abs=5e-4)
    assert float(before.trapped_ratio_dry[1]) == pytest.approx(2.4, rel=1e-12)
    assert float(before.cuff_factor[1]) == pytest.approx(0.42, abs=5e-3)
    assert line(before, "trapped gas") == "60 mL here: 150 humid, 144 dry at the surface"
    assert line(before, "drip chamber") == "5 mL air to 12 mL"
    assert line(before, "trapped volume") == "12.3 % linear, 8.4 % at constant ratio"
    # 1.4 atm in 10 min, equal every 15 s: 3.5 kPa; 60 mmHg in 15 s is 32 kPa/min.
    assert float(before.middle_ear_difference[0]) == pytest.approx(1.4 * P0 / 10 / 4, rel=1e-12)
    assert float(before.travel_rate) == pytest.approx(60 * 0.133322387415 * 4, rel=1e-12)
    # 0.60 at 2.8 atm by density^-1/2; here 2.4 atm.
    low, high = before.tidal_volume.isel(phase=1).values
    assert (low, high) == pytest.approx((0.45 / 2.4**0.5, 0.45), rel=1e-12)


def test_arterial_oxygen_lies_between_ratio_and_shunt(before: xr.Dataset) -> None:
    """PAO2 = PB - 47 mmHg - PaCO2 on oxygen; the ratio carried over, and the shunt."""
    alveolar = 2.4 * P0 - 47 * 0.133322387415 - 6.4
    at_bedside = lungs.alveolar_po2(101.0, 0.6, 6.4)
    ratio = 25.9 / at_bedside * alveolar
    with gp.validity("ignore"):
        shunt = blood.arterial_po2_from_shunt(alveolar, PERSON.shunt_fraction)
    found = before.arterial_po2.isel(phase=1).values
    np.testing.assert_allclose(sorted(found), sorted([ratio, shunt]), rtol=1e-9)


#: C26 and its neighbors: P/F on FIO2 1 at 1 atm, PaCO2 40 mmHg; PaO2 at 2.4 and 2.8 atm, mmHg.
CARRIED = [(100, 258, 303), (200, 516, 607), (300, 774, 910), (450, 1161, 1365)]


@pytest.mark.parametrize(("ratio", "at_24", "at_28"), CARRIED)
def test_a_sample_on_oxygen_carried_over(ratio: float, at_24: float, at_28: float) -> None:
    with gp.validity("ignore"):
        person = Person.from_sample(arterial_po2=f"{ratio} mmHg", fio2=1.0, arterial_pco2="40 mmHg")
    for pressure, expected in (("2.4 atm abs", at_24), ("2.8 atm abs", at_28)):
        ds = worksheet(oxygen_session(pressure), person, ROOM)
        ends = ds.arterial_po2.isel(phase=1).values / 0.133322387415
        # One end of the range is the constant ratio, the other the constant shunt.
        assert np.abs(ends - expected).min() < 0.5


#: Sheet 1.5: oxygen segments at 10 L/min, L referred to 1 atm, 33 fsw/atm.
DEMAND = [("usn_5", 0, 2655), ("usn_6", 0, 5127), ("usn_6", 2, 6255), ("usn_9", 0, 2165)]


@pytest.mark.parametrize(("name", "deep", "liters"), DEMAND)
def test_oxygen_demand_of_the_tables(name: str, deep: int, liters: float) -> None:
    room = Chamber(mask_flow=10.0, attendants=0)
    ds = worksheet(name, PERSON, room, extensions_deep=deep)
    np.testing.assert_allclose(ds.oxygen_used.isel(phase=-1), liters, atol=0.5)


def test_dose_and_oxygen(before: xr.Dataset) -> None:
    whole = gp.doses.oxygen(treatment("clinical_2_4_atm"), ["uptd"])
    assert float(before.uptd[-1]) == pytest.approx(float(whole.dose[0]), rel=1e-12)
    assert bool((before.uptd.diff("phase") >= 0.0).all())
    # Sheet 1.5: 90 min at 2.4 atm with 10 L/min take 2160 L; the ascent adds 10 min at 1.7 atm.
    fixed = worksheet("clinical_2_4_atm", PERSON, ROOM.narrowed(mask_flow=10.0), DEVICES)
    used = fixed.oxygen_used.values[:, -2:]
    np.testing.assert_allclose(used, [[2160.0, 2160.0 + 170.0]] * 2, rtol=1e-10)


NARROWED = {
    "arterial_po2": [1, 3, 5, 6],
    "arterial_o2_content": [1, 3, 5, 6],
    "chamber_o2_fraction": [1, 2, 3, 4, 5, 6],
    "chamber_pco2": [1, 2, 3, 4, 5, 6],
    "oxygen_pressure": [1, 3, 5, 6],
    "tidal_volume": [1, 3, 5],
}


@pytest.mark.parametrize("name", list(NARROWED))
def test_readings_narrow_the_ranges(before: xr.Dataset, after: xr.Dataset, name: str) -> None:
    for phase in NARROWED[name]:
        wide, narrow = (np.sort(ds[name].isel(phase=phase).values) for ds in (before, after))
        assert np.ptp(narrow) < 0.6 * np.ptp(wide)
        # What is left lies inside what was expected.
        slack = 0.02 * np.ptp(wide)
        assert wide[0] - slack <= narrow[0] <= narrow[1] <= wide[1] + slack


def test_a_range_agrees_with_its_reading(after: xr.Dataset) -> None:
    at = {r.name: r for r in READINGS}
    first = after.isel(phase=1)
    for name in ("arterial_po2", "chamber_o2_fraction", "chamber_pco2", "oxygen_pressure", "tidal_volume"):
        low, high = np.sort(first[name].values)
        digit = at[name].high - at[name].low
        assert low >= at[name].low - 0.51 * digit
        assert high <= at[name].high + 0.51 * digit
    assert after.attrs["readings"] == 5
    assert line(after, "arterial PO2", 1).startswith("148 kPa")
    measured = {str(m) for m in after.measured.values}
    assert {"148 kPa", "21.2 %", "147.6 bar", "390 mL"} <= measured


def test_without_readings_of_one_kind_its_range_stays(before: xr.Dataset) -> None:
    one = worksheet("clinical_2_4_atm", PERSON, ROOM, DEVICES, READINGS[:1])
    for name in ("chamber_o2_fraction", "chamber_pco2", "oxygen_pressure", "tidal_volume"):
        xr.testing.assert_allclose(one[name], before[name], rtol=1e-12)


@pytest.mark.parametrize(
    ("reading", "words"),
    [
        (("chamber_o2_fraction", 40, "60 %"), "no mask_leak"),
        (("chamber_pco2", 40, "15 kPa"), "no co2_output_stpd"),
        (("oxygen_pressure", 40, "180 bar"), "no mask_flow"),
        (("arterial_po2", 30, "400 kPa"), "not possible"),
        (("arterial_po2", 500, "100 kPa"), "the treatment ends at 120 min"),
    ],
)
def test_a_reading_that_agrees_with_nothing(reading: tuple[str, float, str], words: str) -> None:
    with pytest.raises(RangeError, match=words):
        worksheet("clinical_2_4_atm", PERSON, ROOM, DEVICES, [Reading.parse(*reading)])


def test_a_reading_without_its_device() -> None:
    for reading, devices, room, words in (
        (("tidal_volume", 35, "390 mL"), Devices(), ROOM, "no ventilator"),
        (("tidal_volume", 0, "390 mL"), DEVICES, ROOM, "nothing about density"),
        (("oxygen_pressure", 35, "100 bar"), DEVICES, Chamber(), "no oxygen bank"),
    ):
        with pytest.raises(RangeError, match=words):
            worksheet("clinical_2_4_atm", PERSON, room, devices, [Reading.parse(*reading)])


def test_what_every_sheet_tells(before: xr.Dataset) -> None:
    text = worksheet_text(before)
    for words in (
        "ears, cleared every 15 s",
        "arterial PO2",
        "arterial O2 content",
        "cuff of 7 mL air",
        "exhaled volume",
        "O2 bank",
        "UPTD",
        "air breaks",
        "saturated",
        "Transcutaneous PO2",
        "PaO2/FIO2 is not comparable",
        "ventilation that keeps 23.5 % O2",
        "no oxygen rule for attendants is known",
        "blood glucose",
        "NOT CONSIDERED",
    ):
        assert words in text, words
    assert " ".join(text.split()).endswith(CAUTION)
    for word in ("safe", "runtime", "conservatism", "GF"):
        assert not re.search(rf"\b{word}\b", text)


def test_the_attendant_on_the_sheet() -> None:
    ds = worksheet("usn_6", PERSON, ROOM, extensions_shallow=1)
    text = " ".join(worksheet_text(ds).split())
    # 30 min at 30 fsw before the ascent that begins at 288 + 75 - 30 min.
    assert "A-1: oxygen from 5:03" in text
    assert "oxygen for the last 30 min at 30 fsw and the ascent (Revision 4 Change A p 21-26; read)" in text
    assert "treatment 12 h, no-stop dive 12 h, dive with stops 24 h, flying 24 h" in text
    # Witucki 2013: at most 2.4 atm abs, bottom time 80-119 min, 15 min of oxygen; nothing above that.
    practice = "bottom time 110 min at 2.4 atm abs or less, 15 min of oxygen before the ascent"
    clinic = " ".join(worksheet_text(worksheet("clinical_2_4_atm", PERSON, ROOM)).split())
    assert practice in clinic
    assert "center's practice" not in text
    own = worksheet("clinical_2_4_atm", PERSON, ROOM.narrowed(attendant_minutes=15.0))
    assert "A-1: oxygen from 1:35" in worksheet_text(own)


class _Parsed(HTMLParser):
    """Tags, attributes and text of a page."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.tags: list[str] = []
        self.loads: list[str] = []
        self.open: list[str] = []
        self.texts: list[str] = []
        self.feed(text)
        self.close()

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append(tag)
        self.loads += [str(v) for k, v in attrs if k in ("src", "href") or k.startswith("on")]

    def handle_data(self, data: str) -> None:
        self.texts.append(data)


NASTY = '<script>alert("1 & 2")</script>'


@pytest.mark.parametrize("name", ["clinical_2_4_atm", "usn_6", "usn_9", "usn_6a"])
def test_two_pages_with_a_caution_each(name: str) -> None:
    page = worksheet_page(worksheet(name, PERSON, ROOM, DEVICES))
    parts = page.split('<div class="page">')[1:]
    assert len(parts) == 2
    for n, part in enumerate(parts, start=1):
        for words in (CAUTION, "Not considered:", "Sources:", "physician", "chamber supervisor"):
            assert words in part
        assert f"page {n} of 2" in part
    assert "@page { size: A4" in page


def test_what_a_user_writes_is_text() -> None:
    room = ROOM.narrowed(code=NASTY, attendant_code=NASTY)
    ds = worksheet("clinical_2_4_atm", Person(code=NASTY), room, DEVICES)
    ds.attrs["title"] = NASTY
    ds.attrs["flag"] = NASTY
    found = _Parsed(worksheet_page(ds))
    assert "script" not in found.tags
    assert not found.loads
    assert "".join(found.texts).count(NASTY) >= 8
    allowed = "html head meta title style body div h1 p b br table colgroup col thead tr th tbody td svg"
    allowed += " polygon polyline span section h2 ul li"
    assert set(found.tags) <= set(allowed.split())


def test_long_tables_take_more_pages_and_flags_are_shown() -> None:
    with gp.validity("ignore"):
        eight = worksheet("usn_8", PERSON, ROOM, unverified=True)
    assert "not verified" in worksheet_page(eight).split("<table")[0]
    assert "NOT VERIFIED" in worksheet_text(eight)
    four = worksheet_page(worksheet("usn_4", PERSON, ROOM))
    assert four.count('<div class="page">') == 3
    assert eight.sizes["phase"] <= 14


def test_saved_and_read_back(before: xr.Dataset, tmp_path: Path) -> None:
    for engine in ("scipy", "h5netcdf"):
        path = tmp_path / f"{engine}.nc"
        before.to_netcdf(path, engine=engine)
        with xr.open_dataset(path, engine=engine) as back:
            assert worksheet_page(back.load()) == worksheet_page(before)
    with pytest.raises(ExposureError):
        worksheet_page(treatment("usn_5").to_dataset())


# -- Files ------------------------------------------------------------------------------------------

PLAIN = 'code = "room"\nvolume = "18 m3"\n'
BAD_CHAMBERS = [
    ("volume = ", 1, None, "Invalid value"),
    ('volume = "18 m3', 1, None, ""),
    (f"{PLAIN}walls = 3\n", 3, 1, "walls"),
    (f"{PLAIN}tempreature = 20\n", 3, 1, "temperature"),
    ('volume = "18 furlongs"\n', 1, 1, "furlongs"),
    ('volume = "18 kPa"\n', 1, 1, "something else"),
    ("volume = -5\n", 1, 1, "possible range"),
    ("volume = true\n", 1, 1, "must be a number"),
    (f"{PLAIN}air_flow = nan\n", 3, 1, "not a number"),
    (f'{PLAIN}surface_pressure = "18 msw"\n', 3, 1, "is a depth"),
    (f"{PLAIN}surface_pressure = 1.0\n", 3, 1, "did you mean"),
    (f'{PLAIN}mask_leak = ["5 L/min", "1 L/min"]\n', 3, 1, "above the highest"),
    (f"{PLAIN}mask_leak = [1, 2, 3]\n", 3, 1, "lowest and the highest"),
    (f"{PLAIN}patients = 1.5\n", 3, 1, "no number of people"),
    (f"{PLAIN}attendants = 99\n", 3, 1, "0 to 50"),
    (f'{PLAIN}overboard_dump = "yes"\n', 3, 1, "true or false"),
    (f"{PLAIN}o2_limit = 23.5\n", 3, 1, "did you mean '23.5 %'"),
    (f"{PLAIN}oxygen = 8\n", 3, 1, "must be a table"),
    (f"{PLAIN}[oxygen]\nbottles = 8\n", 4, 1, "bottles"),
    (f"{PLAIN}[oxygen]\ncylinders = -1\n", 4, 1, "no number of cylinders"),
    (f"{PLAIN}[air]\n[oxygen]\npressure = 150\n", 5, 1, "not below"),
    (f'{PLAIN}[oxygen]\nreserve_pressure = "300 bar"\n', 4, 1, "not below"),
    (f"{PLAIN}altitude = 99999\n", 3, 1, "altitude"),
    ("\x00", 1, 1, ""),
]


@pytest.mark.parametrize(("text", "at", "column", "words"), BAD_CHAMBERS)
def test_mistakes_in_a_chamber_file(
    text: str, at: int, column: int | None, words: str, tmp_path: Path
) -> None:
    file = tmp_path / "chamber.toml"
    file.write_text(text, encoding="utf-8")
    with pytest.raises(InputFileError) as caught:
        Chamber.from_toml(file)
    assert caught.value.line == at, str(caught.value)
    assert column is None or caught.value.column == column, str(caught.value)
    assert words in str(caught.value)
    assert caught.value.remedy


BAD_PEOPLE = [
    ("hemoglobin = \n", 1, "Invalid value"),
    ("hemoglobin = 12.9\nhemoglobin = 13\n", 2, ""),
    ("haemoglobin = 12.9\n", 1, "nearest: 'hemoglobin'"),
    ('hemoglobin = "129 g/L/s"\n', 1, "something else"),
    ("hemoglobin = 129\n", 1, "possible range"),
    ('arterial_pco2 = "39"\nhemoglobin = 12\n', 1, "possible range"),
    ("shunt_fraction = 20\n", 1, "did you mean '20 %'"),
    ('role = "doctor"\n', 1, "doctor"),
    ("hemoglobin = true\n", 1, "must be a number"),
    ("[sample]\narterial_po2 = 25.3\nfio2 = 0.4\n", 1, "no arterial_pco2"),
    ("[sample]\narterial_po2 = 25.3\nfio2 = 40\narterial_pco2 = 5\n", 3, "did you mean '40 %'"),
    ("[sample]\narterial_po2 = 90\nfio2 = 0.21\narterial_pco2 = 5\n", 2, "not possible"),
    ("[sample]\nspo2 = 0.97\n", 2, "spo2"),
    ("sample = 3\n", 1, "table"),
    ("[devices]\npacemaker = true\n", 2, "pacemaker"),
    ('hemoglobin = 12\n\n[devices]\ntrapped_gas = "60 mmHg"\n', 4, "something else"),
    ("[devices]\ncuff_volume = -7\n", 2, "possible range"),
    ('[devices]\ncuff_volume = "7 mL"\ncuff_pressure = "25 msw"\n', 3, "depth"),
    ("[devices]\ntidal_volume = 450\n", 2, "possible range"),
    ("[devices]\ndrip_chamber = [5]\n", 2, "must be a number"),
    ("devices = 3\n", 1, "must be a table"),
    ("[devices\n", 1, ""),
]


@pytest.mark.parametrize(("text", "at", "words"), BAD_PEOPLE)
def test_mistakes_in_a_persons_file(text: str, at: int, words: str, tmp_path: Path) -> None:
    file = tmp_path / "person.toml"
    file.write_text(text, encoding="utf-8")

    def read() -> None:
        Person.from_toml(file)
        Devices.from_toml(file)

    with gp.validity("ignore"), pytest.raises(InputFileError) as caught:
        read()
    assert caught.value.line == at, str(caught.value)
    assert words in str(caught.value)
    assert caught.value.remedy


GOOD = '[[reading]]\nname = "arterial_po2"\ntime = "30 min"\nvalue = "148 kPa"\n'
BAD_READINGS = [
    ("", None, "no [[reading]]"),
    ('[reading]\nname = "arterial_po2"\n', None, "no [[reading]]"),
    ('[[reading]]\nname = "arterial_po2"\ntime = 30\n', 1, "no value"),
    (f'{GOOD}[[reading]]\nname = "pulse"\ntime = 3\nvalue = "70"\n', 6, "pulse"),
    (f'{GOOD}[[reading]]\nname = "arterial_po2"\ntime = "soon"\nvalue = "70 kPa"\n', 7, "soon"),
    (f'{GOOD}[[reading]]\nname = "arterial_po2"\ntime = 3\nvalue = "148"\n', 8, "needs a unit"),
    (f'{GOOD}[[reading]]\nname = "arterial_po2"\ntime = 3\nvalue = 148\n', 8, "text with a unit"),
    (f'{GOOD}[[reading]]\nname = "arterial_po2"\ntime = 3\nvalue = "148 L"\n', 8, "something else"),
    (f"{GOOD}color = 3\n", 5, "color"),
    (f"note = 3\n{GOOD}", 1, "note"),
]


@pytest.mark.parametrize(("text", "at", "words"), BAD_READINGS)
def test_mistakes_in_a_file_of_readings(text: str, at: int | None, words: str, tmp_path: Path) -> None:
    file = tmp_path / "readings.toml"
    file.write_text(text, encoding="utf-8")
    with pytest.raises(InputFileError) as caught:
        read_readings(file)
    assert caught.value.line == at, str(caught.value)
    assert words in str(caught.value)


def test_half_a_digit() -> None:
    one = Reading.parse("oxygen_pressure", "40 min", "147.6 bar")
    assert (one.low, one.high) == pytest.approx((14755.0, 14765.0), rel=1e-12)
    with pytest.raises(UnknownNameError):
        Reading.parse("pulse", 1, "70")


# -- Command line -----------------------------------------------------------------------------------


@pytest.mark.filterwarnings("default")
def test_the_command(capsys, tmp_path: Path) -> None:
    words = [
        "worksheet",
        str(DATA / "p04.toml"),
        *("--treatment", str(DATA / "o24.txt"), "--chamber", str(DATA / "the_unit.toml")),
    ]
    page, figure, saved = (tmp_path / f"sheet.{x}" for x in ("html", "png", "nc"))
    more = ["--page", str(page), "--figure", str(figure), "--save", str(saved)]
    assert main([*words, *more]) == 0
    first = capsys.readouterr().out
    assert "arterial PO2: 120 to 204 kPa" in first
    assert page.read_text(encoding="utf-8").count('<div class="page">') == 2
    assert figure.read_bytes().startswith(b"\x89PNG")
    with xr.open_dataset(saved) as ds:
        assert ds.sizes["phase"] == 7
    assert main([*words, "--readings", str(DATA / "p04_readings.toml")]) == 0
    second = capsys.readouterr().out
    assert "arterial PO2: 148 kPa" in second
    assert main([*words[:4], "--chamber", str(tmp_path / "none.toml"), "--treatment", "usn_6"]) == 2
    assert "none.toml" in capsys.readouterr().err
    assert main([*words, "--surface-pressure", "80 kPa"]) == 0
    assert "0.79 to 2.40 atm abs" in capsys.readouterr().out
    for option in (["--units", "bar"], ["--role", "diver"], ["--breathing", "x.csv"]):
        assert main([*words, *option]) == 2
        assert f"{option[0]} does not apply" in capsys.readouterr().err
    own = tmp_path / "own.toml"
    own.write_text(
        '[[limit]]\nid = "house_o2"\ntitle = "ours"\nquantity = "chamber_o2_fraction"\ncomparison = "<="\n'
        'value = 21.5\nunit = "%"\nauthority = "the unit"\nedition = "2042"\nroles = ["patient"]\n'
        'conditions = "always"\nprovenance = "read"\nsource = "house rules"\n'
    )
    assert main([*words, "--limits", str(own)]) == 0
    assert "beyond 21.5 % O2, the unit, 2042" in " ".join(capsys.readouterr().out.split())
    table = [*words[:2], "--treatment", "usn_6", "--chamber", str(DATA / "the_unit.toml")]
    course = ["--extensions-shallow", "1", "--course", str(DATA / "p01_course.csv")]
    assert main([*table, *course]) == 2  # the course is another person's
    assert "P-04" in capsys.readouterr().err


@pytest.mark.filterwarnings("default")
def test_a_protocol_as_a_treatment(capsys) -> None:
    assert main(["treatment", str(DATA / "o24.txt")]) == 0
    assert "protocol o24.txt" in capsys.readouterr().out
    assert main(["treatment", "usn_7"]) == 2
    assert "unverified" in capsys.readouterr().err
    assert main(["treatment", "usn_7", "--unverified"]) == 0
    captured = capsys.readouterr()
    assert "not verified" in captured.err


def test_unknown_names() -> None:
    with pytest.raises(UnknownNameError, match="usn_6"):
        worksheet("usn6", PERSON, ROOM)
    assert chamber.Chamber().narrowed(mask_leak=(1, 2)).mask_leak == (1.0, 2.0)
