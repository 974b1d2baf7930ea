"""The command line: what is printed, exit status, files written."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest
import xarray as xr

from gasphys import Exposure
from gasphys.__main__ import main
from gasphys.quantities import CAUTION

DATA = Path(__file__).parents[2] / "notebooks" / "data"
DIVE = """time_min,depth_msw,gas
0,0,trimix 17/48
2.8,56,trimix 17/48
22,56,trimix 17/48
26,20,nitrox 48
30,20,nitrox 48
32,0,nitrox 48
"""


@pytest.fixture
def log(tmp_path) -> Path:
    path = tmp_path / "dive.csv"
    path.write_text(DIVE)
    return path


def run(capsys, *words: str) -> tuple[int, str, str]:
    status = main([str(w) for w in words])
    captured = capsys.readouterr()
    return status, captured.out, captured.err


def flat(text: str) -> str:
    return " ".join(text.split())


def test_treatment_prints_what_was_asked_of_it(capsys) -> None:
    status, out, _ = run(capsys, "treatment", "usn_6")
    assert status == 0
    for words in (
        "288 min",
        "table clock 285 min",
        "640.79 UPTD oxygen periods, 644.45 table, 644.54 whole exposure",
        "alveolar PO2 274 kPa",
        "dissolved O2 5.22 to 6.11 mL/dL",
        "arterial PO2 224.6 kPa by constant ratio, 262.6 kPa by constant shunt",
        "NOT APPLICABLE",
        "1.60 atm",
        "a transcription to compare with the manual in force",
        "Rests on numbers from memory",
        CAUTION,
    ):
        assert words in flat(out), words
    assert " safe" not in out.lower()


def test_review_of_a_log(capsys, log) -> None:
    status, out, _ = run(capsys, "review", log)
    assert status == 0
    text = flat(out)
    assert "[144.6]" in out
    assert "nitrox 47 instead of nitrox 48" in text
    assert "0.6 msw less" in text
    assert text.index("BEYOND") < text.index("NEAREST") < text.index("NOT APPLICABLE")


@pytest.mark.parametrize(
    ("units", "words"),
    [
        ("atm,fsw", "6.527 atm absolute (183.7 fsw"),
        ("bar", "6.613 bar absolute (56 msw"),
        ("mmHg", "4960 mmHg absolute"),
    ],
)
def test_units(capsys, log, units: str, words: str) -> None:
    _, out, _ = run(capsys, "review", log, "--units", units)
    # 661.325 kPa: over 101.325, over 100, over 0.1333224; 560 kPa over 3.07045.
    expected = words.replace("183.7", "182.4")
    assert expected in flat(out)


def test_role_person_save_figure(capsys, log, tmp_path) -> None:
    person = tmp_path / "d.toml"
    person.write_text('code = "D-1"\nrole = "diver"\nhemoglobin = 14.2\n')
    saved, figure = tmp_path / "out.nc", tmp_path / "out.png"
    status, out, _ = run(capsys, "review", log, "--person", person, "--save", saved, "--figure", figure)
    assert status == 0
    assert "reviewed as: diver, person D-1" in out
    assert "measured: hemoglobin 14.2 g/dL" in flat(out)
    assert figure.read_bytes().startswith(b"\x89PNG")
    with xr.open_dataset(saved) as ds:
        ds = ds.load()
        assert {"status", "alveolar_po2", "segment_duration"} <= set(ds.variables)
        assert ds.attrs["comment"] == CAUTION
        assert Exposure.from_dataset(ds).duration == 32.0
    again = run(capsys, "review", saved)
    assert again[0] == 0
    assert "[144.6]" in again[1]


def test_gauge_pressures_need_the_surface(capsys, tmp_path) -> None:
    path = tmp_path / "gauge.csv"
    path.write_text("time_min,pressure_gauge_bar,gas\n0,0,air\n5,1.4,oxygen\n")
    status, _, err = run(capsys, "review", path)
    assert status == 2
    assert "surface" in err
    status, out, _ = run(capsys, "review", path, "--surface-pressure", "760 mmHg")
    assert status == 0
    assert "241.3 kPa absolute" in out


@pytest.mark.parametrize(
    ("words", "message"),
    [
        (("review", "none.csv"), "none.csv"),
        (("review", "none.nc"), "none.nc"),
        (("treatment", "usn_66"), "nearest: 'usn_6'"),
        (("treatment", "usn_6", "--extensions-deep", "5"), "allows 0 to 2"),
        (("treatment", "usn_6", "--descent", "aire"), "unknown gas"),
        (("treatment", "usn_6", "--units", "kg"), "not a unit of pressure or depth"),
        (("treatment", "usn_6", "--surface-pressure", "1"), "did you mean '1 bar' or '1 atm'"),
        (("treatment", "usn_6", "--person", "none.toml"), "none.toml"),
        (("treatment", "usn_6", "--limits", "none.toml"), "none.toml"),
        (("treatment", "usn_6", "--figure", "x.nothing"), "x.nothing"),
    ],
)
def test_bad_input_is_two_and_one_line(capsys, words, message: str) -> None:
    status, _, err = run(capsys, *words)
    assert status == 2
    assert message in err
    assert "Traceback" not in err
    assert err.startswith("gasphys: ")


def test_attendant_and_extensions(capsys) -> None:
    _, out, _ = run(capsys, "treatment", "usn_6", "--extensions-shallow", "1", "--attendant")
    assert "US Navy Treatment Table 6, attendant, extensions: 0 deep, 1 shallow" in out
    assert "reviewed as: attendant" in out
    assert "table clock 360 min" in out


def test_equations_as_json(capsys) -> None:
    import json

    status, out, _ = run(capsys, "equations", "--json")
    records = {r["name"]: r for r in json.loads(out)}
    assert status == 0
    assert records["lungs.alveolar_po2"]["unit"] == "kPa"
    assert "F_{I,O_2}" in records["lungs.alveolar_po2"]["latex"]


def test_as_a_process_with_a_closed_pipe() -> None:
    command = f"{sys.executable} -m gasphys treatment usn_5 | head -1"
    done = subprocess.run(command, shell=True, capture_output=True, text=True, check=False)
    assert done.stdout.startswith("US Navy Treatment Table 5")
    assert done.stderr == ""
