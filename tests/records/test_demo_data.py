"""The demo inputs under notebooks/data: made by their script, with the faults they are meant to have."""

from __future__ import annotations

import runpy
from pathlib import Path

import numpy as np
import pytest

from gasphys.records import read_log

FOLDER = Path(__file__).parents[2] / "notebooks" / "data"
NOTICE = (
    "# Invented scenario. Places, people, measurements and events do not exist; they were made to show the "
    "software.\n"
)


@pytest.fixture(scope="module")
def texts() -> dict[str, str]:
    files = runpy.run_path(str(FOLDER / "make_data.py"))["FILES"]
    return {name: make() for name, make in files.items()}


@pytest.mark.parametrize(
    "name",
    [
        "p01_chamber_log.csv",
        "dive_in_the_sound.csv",
        "dive_in_the_sound_loop.csv",
        "dive_in_the_sound_supply.toml",
        "p01.toml",
    ],
)
def test_files_are_those_of_the_script(name: str, texts: dict[str, str]) -> None:
    assert (FOLDER / name).read_bytes() == texts[name].encode()
    assert texts[name].startswith(NOTICE)


def test_chamber_log() -> None:
    log = read_log(FOLDER / "p01_chamber_log.csv", surface_pressure=101.0)
    assert log.start == "2042-03-03T08:00:00"
    assert log.time[-1] == 120.0
    words = "\n".join(log.history)
    for fault in (
        "clock set back by 3 min",
        "decimal comma read as a point in 1 cell",
        "1 row with the time of the row before dropped",
        "no row for 70 s",
    ):
        assert fault in words
    assert len(log.history) == 5  # and the comment lines
    # The faults leave the protocol as it was: 721 readings less the 6 that the gap lacks.
    assert len(log.time) == 715
    steps = np.diff(log.time) * 60.0
    assert sorted(set(np.round(steps, 6))) == [10.0, 70.0]
    oxygen = sum(step for step, gas in zip(steps, log.gas, strict=False) if gas == "oxygen") / 60.0
    assert oxygen == pytest.approx(100.0, abs=1e-9)  # 3 x 30 min, and 10 min on the way up
    at_pressure = (log.time >= 10.0) & (log.time <= 110.0)
    # Noise of 0.15 kPa: the mean of 595 readings is within 4 x 0.15/sqrt(595) of 2.4 atm.
    assert log.ambient_pressure[at_pressure].mean() == pytest.approx(243.18, abs=0.025)
    assert np.abs(log.ambient_pressure[[0, -1]] - 101.0).max() < 0.6


def test_dive_and_loop() -> None:
    dive = read_log(FOLDER / "dive_in_the_sound.csv")
    loop = read_log(FOLDER / "dive_in_the_sound_loop.csv")
    depth = (dive.ambient_pressure - 101.325) / 10.0
    assert depth.max() == pytest.approx(56.0)
    assert depth[[0, -1]].tolist() == [0.0, 0.0]
    assert dive.time[np.flatnonzero(depth == 56.0)[[0, -1]]].tolist() == [2.8, 22.0]
    for gas, deepest in (("nitrox 48", 20.0), ("oxygen", 6.0)):
        assert depth[dive.gas.index(gas)] == pytest.approx(deepest)
    # 0.48 x (101.325 + 200) kPa, the 144.6 kPa between the authorities
    assert 0.48 * dive.ambient_pressure[dive.gas.index("nitrox 48")] == pytest.approx(144.636, abs=1e-9)
    assert (dive.time == loop.time).all()
    assert (dive.ambient_pressure == loop.ambient_pressure).all()
    assert set(loop.gas) == {"trimix 17/48"}
    assert set(loop.setpoint) == {130.0}
    assert np.isnan(dive.setpoint).all()
    rate = np.diff(depth) / np.diff(dive.time)
    assert rate.max() == pytest.approx(20.0)
    assert rate.min() > -9.6
