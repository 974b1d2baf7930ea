"""Recorded against prescribed: known deviations must be found where they were put."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from gasphys import Exposure, compare
from gasphys.__main__ import main
from gasphys.comparison import comparison_text
from gasphys.errors import ExposureError
from gasphys.schedules import names, treatment

DATA = Path(__file__).parents[2] / "notebooks" / "data"


@pytest.mark.parametrize("name", names())
def test_a_table_against_itself_has_no_difference(name: str) -> None:
    found = compare(treatment(name), treatment(name))
    # The record is divided on a grid of a sixth of a minute.
    assert np.abs(found.difference.sel(measure="minutes")).max() <= 0.35
    assert found.attrs["deviations"] == ""
    assert float(found.uptd_total[0]) == float(found.uptd_total[1])


def noisy(exposure: Exposure, seed: int) -> Exposure:
    """What a recorder of ten seconds makes of an exposure."""
    rng = np.random.default_rng(seed)
    times = np.arange(0.0, exposure.duration, 1.0 / 6.0)
    pieces = exposure.pieces()
    at, index, _ = exposure.sample(times)
    pressure = exposure.to_dataset(at=times).ambient_pressure.values
    gas = [exposure.gas_name(int(i)) for i in index]
    text = ["time_min,pressure_abs_kPa,gas"]
    for t, p, g in zip(at, pressure + rng.normal(0.0, 0.1, len(at)), gas, strict=True):
        text.append(f"{t:.6f},{p:.3f},{g}")
    assert len(pieces.duration)
    import io

    return Exposure.from_csv(io.StringIO("\n".join(text)))


def test_a_delay_is_found_in_its_segment() -> None:
    table = treatment("usn_5")
    found = compare(noisy(table.delay(6, at=40), 1), table)
    minutes = found.difference.sel(measure="minutes").values
    # 40 min is in the second oxygen period at 60 fsw (28 to 48 min).
    assert int(np.argmax(minutes)) == 3
    assert minutes[3] == pytest.approx(6.0, abs=0.5)
    assert np.abs(np.delete(minutes, 3)).max() < 0.6
    assert "segment 3" in found.attrs["deviations"]


def test_a_missed_air_break_is_found() -> None:
    table = treatment("clinical_2_4_atm")
    done = (
        Exposure.start("air")
        .travel(pressure="2.4 atm", minutes=10)
        .switch("oxygen")
        .stay(65)
        .switch("air")
        .stay(5)
        .switch("oxygen")
        .stay(30)
        .travel(pressure=101.325, minutes=10)
    )
    found = compare(done, table)
    assert "not found in the record" in found.attrs["deviations"]
    assert float(found.o2_minutes_total[1] - found.o2_minutes_total[0]) == pytest.approx(5.0, abs=0.01)


def test_a_shallower_run_is_found() -> None:
    table = treatment("clinical_2_4_atm")
    done = Exposure.start("air").travel(pressure="2.2 atm", minutes=10)
    for minutes, gas in ((30, "oxygen"), (5, "air"), (30, "oxygen"), (5, "air"), (30, "oxygen")):
        done = done.switch(gas).stay(minutes)
    found = compare(done.travel(pressure=101.325, minutes=10), table)
    difference = found.difference.sel(measure="mean_pressure").values
    np.testing.assert_allclose(difference[1:6], -0.2 * 101.325, atol=0.5)


def test_the_story_of_p01() -> None:
    recorded = Exposure.from_csv(DATA / "p01_chamber_log.csv")
    found = compare(recorded, treatment("clinical_2_4_atm", surface_pressure=101.0))
    assert np.abs(found.difference.sel(measure="minutes")).max() <= 0.5
    assert float(found.uptd_total.sel(run="delivered")) == pytest.approx(294.5, abs=1.0)


def test_text_files_and_refusals(tmp_path, capsys) -> None:
    found = compare(treatment("usn_5"), treatment("usn_5"))
    assert "none of note" in comparison_text(found)
    for engine in ("scipy", "h5netcdf"):
        found.to_netcdf(tmp_path / f"{engine}.nc", engine=engine)
        with xr.open_dataset(tmp_path / f"{engine}.nc", engine=engine) as back:
            assert back.load().identical(found)
    assert (
        main(
            [
                "compare",
                str(DATA / "p01_chamber_log.csv"),
                "clinical_2_4_atm",
                "--save",
                str(tmp_path / "c.nc"),
            ]
        )
        == 0
    )
    assert "DEVIATIONS" in capsys.readouterr().out
    assert main(["compare", str(DATA / "p01_chamber_log.csv"), "clinical"]) == 2
    with pytest.raises(ExposureError, match="no piece"):
        compare(Exposure.start("air"), treatment("usn_5"))
    many = Exposure.start("air").stay(xr.DataArray([1.0, 2.0], dims="a"))
    with pytest.raises(ExposureError, match="one scenario"):
        compare(many, treatment("usn_5"))
