"""``python -m gasphys ascent``: the demo dive, its options, files, and short errors."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from gasphys import Exposure, ascent
from gasphys.__main__ import main
from gasphys.quantities import CAUTION

DEMO = str(Path(__file__).resolve().parents[2] / "notebooks" / "data" / "dive_in_the_sound.csv")


def test_the_demo_dive(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["ascent", DEMO, "--models", "buhlmann_1995_c,workman_1965"]) == 0
    out = capsys.readouterr().out
    assert out.startswith("Ascents from 56 msw on trimix 17/48, left at 22 min\n")
    assert re.search(r"buhlmann_1995_c +28\.2 min, 5 stops, first at 15 msw", out)
    assert "wait at 3 msw, leave at 49.9 min elapsed; 77-min half-time in control; oxygen" in out
    assert out.count(CAUTION) == 2


def test_options_reach_the_planner(capsys: pytest.CaptureFixture[str]) -> None:
    words = [
        "--gas",
        "nitrox 48 from 21 msw",
        "--gas",
        "oxygen@6",
        "--without",
        "oxygen",
        "--gradients",
        "0.5,0.9",
    ]
    words += ["--rate", "9, 3 above 6", "--last-stop", "6", "--shortest-stop", "2", "--not-rounded"]
    words += ["--switch-minutes", "1", "--leave-at", "20", "--measured", "nitrox 48=nitrox 47"]
    words += ["--breaks", "5 min on trimix 17/48 every 20 min from 1.3 bar, on top"]
    assert main(["ascent", DEMO, "--models", "buhlmann_1995_c", *words]) == 0
    out = capsys.readouterr().out
    bottom, _ = ascent.reading.until_leaving(Exposure.from_csv(DEMO), 20.0)
    rules = ascent.Rules(
        ascent_rate={6.0: 9.0, 0.0: 3.0},
        last_stop=6.0,
        whole_minutes=False,
        gradient_low=0.5,
        gradient_high=0.9,
        shortest_stop=2.0,
        switch_minutes=1.0,
        breaks=ascent.Breaks(20.0, 5.0, "trimix 17/48", 130.0, counted=False),
    )
    plan = ascent.plan(
        bottom,
        [("nitrox 48", 21.0), ("oxygen", 6.0)],
        rules=rules,
        without="oxygen",
        measured={"nitrox 48": "nitrox 47"},
    )
    assert str(plan) in out


def test_files(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    names = ("a.nc", "a.png", "c.png", "a.csv", "a.html")
    paths = dict(zip(("--save", "--figure", "--control-figure", "--csv", "--sheet"), names, strict=True))
    words = [w for option, name in paths.items() for w in (option, str(tmp_path / name))]
    models = "buhlmann_1995_c,workman_1965"
    assert (
        main(["ascent", DEMO, "--models", models, *words, "--follow", "workman_1965", "--title", "<b>"]) == 0
    )
    out = capsys.readouterr().out
    for name in names:
        assert f"{tmp_path / name}" in out
        assert (tmp_path / name).stat().st_size > 1000
    with xr.open_dataset(tmp_path / "a.nc") as ds:
        assert ds.model.values.tolist() == ["buhlmann_1995_c", "workman_1965"]
        assert np.isfinite(ds.minutes_beyond).all()
    assert "The ascent by workman_1965" in out
    assert "&lt;b&gt;" in (tmp_path / "a.html").read_text(encoding="utf-8")
    assert (tmp_path / "a.png").read_bytes()[:4] == b"\x89PNG"
    back = Exposure.from_csv(tmp_path / "a.csv")
    assert back.duration == pytest.approx(48.2, abs=0.1)


@pytest.mark.parametrize(
    ("words", "message"),
    [
        (["--models", "nobody"], "unknown tissue model 'nobody'"),
        (["--models", ","], "no model is named"),
        (["--models", "boycott_1908"], "no model plans this ascent"),
        (["--gas", "nitrox"], "write a gas and its deepest depth of use"),
        (["--gas", "oxygen from 20 fsw"], "depths of this exposure are in msw"),
        (["--gradients", "0.5"], "--gradients '0.5'"),
        (["--gradients", "0.9,0.5"], "must not exceed"),
        (["--measured", "nitrox 48"], "--measured 'nitrox 48'"),
        (["--measured", "nitrox 36=nitrox 35"], "unknown planned mix"),
        (["--without", "air"], "unknown gas of the plan"),
        (["--leave-at", "1000"], "cannot begin at 1000 min"),
        (["--breaks", "often"], "write breaks as"),
        (["--rate", "0"], "rates must be positive"),
        (["--spacing", "nan"], "must be positive"),
        (["--follow", "nobody"], "unknown ascent"),
        (["--figure", "x.nothing"], "not supported"),
        (["--csv", "/nowhere/at/all.csv"], "No such file"),
    ],
)
def test_bad_input_is_a_short_error(
    words: list[str], message: str, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["ascent", DEMO, *words]) == 2
    err = capsys.readouterr().err
    assert message in err
    assert err.startswith("gasphys: ")
    assert len(err.splitlines()) == 1


def test_a_missing_file_is_a_short_error(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["ascent", "nothing.csv"]) == 2
    assert capsys.readouterr().err.startswith("gasphys: nothing.csv")
